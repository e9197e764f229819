"""The graph arrays: sorting, merging, checking, masking, reversing."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from route_cases import small_graphs

from climbpath.errors import ClimbpathError, DataError, TooLargeError
from climbpath.route.graph import RouteGraph, check_graph, reachable

SETTINGS = settings(derandomize=True, deadline=None, max_examples=60)


def square() -> RouteGraph:
    return RouteGraph.from_arcs(4, [2, 0, 0, 1], [3, 2, 1, 3], [4, 2, 1, 3], [40, 20, 10, 30])


def test_arcs_are_sorted_by_tail_and_head() -> None:
    graph = square()
    assert graph.tails().tolist() == [0, 0, 1, 2]
    assert graph.head.tolist() == [1, 2, 3, 3]
    assert graph.time_us.tolist() == [1, 2, 3, 4]
    assert graph.area.tolist() == [10, 20, 30, 40]
    assert graph.event.tolist() == [-1] * 4
    assert (graph.nodes, graph.arcs) == (4, 4)


def test_of_doubles_the_least_in_time_then_area_then_event_stays() -> None:
    tail, head = [0, 0, 0, 0, 0, 1], [1, 1, 1, 1, 2, 2]
    time, area, event = [5, 4, 4, 4, 9, 9], [0, 7, 6, 6, 1, 2], [1, 1, 3, 2, 8, 9]
    for order in ([0, 1, 2, 3, 4, 5], [5, 3, 0, 2, 4, 1]):
        graph = RouteGraph.from_arcs(
            3, *(np.array(values)[order] for values in (tail, head, time, area, event))
        )
        assert graph.head.tolist() == [1, 2, 2]
        assert graph.time_us.tolist() == [4, 9, 9]
        assert graph.area.tolist() == [6, 1, 2]
        assert graph.event.tolist() == [2, 8, 9]


def test_no_arcs_and_no_nodes_are_graphs() -> None:
    for n in (0, 3):
        graph = RouteGraph.from_arcs(n, [], [], [], [])
        assert (graph.nodes, graph.arcs, graph.tails().size) == (n, 0, 0)
        assert graph.keep().arcs == 0
        assert graph.reversed_order().arc.size == 0


def test_every_problem_of_given_arcs_is_named() -> None:
    with pytest.raises(DataError) as caught:
        RouteGraph.from_arcs(2, [0, 5], [1, 1], [1, -1], [1], event=[-2, 0])
    keys = {problem.key for problem in caught.value.problems}
    expected = {"graph.tail", "graph.time_us[1]", "graph.area", "graph.event[0]"}
    assert keys == expected
    with pytest.raises(DataError, match="integers"):
        RouteGraph.from_arcs(2, [0], [1], [1.5], [0])


@pytest.mark.parametrize(
    ("key", "values", "message"),
    [
        ("head", [1, 2, 3, 4], "nodes from 0 to 3"),
        ("head", [2, 1, 3, 3], "ascend strictly"),
        ("head", [1, 1, 3, 3], "ascend strictly"),
        ("indptr", [0, 3, 2, 4, 4], "rising"),
        ("indptr", [0, 2, 3, 4, 5], "rising"),
        ("indptr", [0, 2, 3, 4], "shape|\\(3,\\)"),
        ("time_us", [1, -2, 3, 4], "0 or more"),
        ("area", [1, 2, 3, -4], "0 or more"),
        ("event", [-1, -2, 0, 0], "-1 or more"),
        ("rank", [3, 1, 3, 0], "distinct"),
        ("excursion", [0.0, np.nan, 0.0, 0.0], "numbers"),
    ],
)
def test_malformed_arrays_are_refused(key: str, values: list[float], message: str) -> None:
    graph = square()
    check_graph(graph)
    broken = replace(graph, **{key: np.array(values, getattr(graph, key).dtype)})
    with pytest.raises(ClimbpathError, match=message):
        check_graph(broken)


def test_wrong_types_are_refused_together() -> None:
    graph = square()
    broken = replace(graph, head=graph.head.astype(np.int64), area=graph.area.astype(float))
    with pytest.raises(DataError) as caught:
        check_graph(broken)
    assert [problem.key for problem in caught.value.problems] == ["graph.head", "graph.area"]


def test_numbers_of_64_bits_are_not_wrapped() -> None:
    with pytest.raises(DataError):
        RouteGraph.from_arcs(2, [0], [1], np.array([2**63], np.uint64), [0])
    with pytest.raises((DataError, TooLargeError)):
        RouteGraph.from_arcs(2**31, [0], [1], [0], [0])


@SETTINGS
@given(small_graphs(), st.data())
def test_masks_keep_the_arcs_they_allow(graph: RouteGraph, data: st.DataObject) -> None:
    arc_mask = np.array(
        data.draw(st.lists(st.booleans(), min_size=graph.arcs, max_size=graph.arcs)), bool
    )
    node_mask = np.array(
        data.draw(st.lists(st.booleans(), min_size=graph.nodes, max_size=graph.nodes)), bool
    )
    kept = graph.keep(arc_mask, node_mask)
    check_graph(kept)
    tail = graph.tails()
    expected = [
        (int(tail[a]), int(graph.head[a]), int(graph.time_us[a]))
        for a in range(graph.arcs)
        if arc_mask[a] and node_mask[tail[a]] and node_mask[graph.head[a]]
    ]
    found = zip(kept.tails().tolist(), kept.head.tolist(), kept.time_us.tolist(), strict=True)
    assert list(found) == expected
    assert kept.nodes == graph.nodes
    arcs = graph.kept_arcs(arc_mask, node_mask)
    assert graph.head[arcs].tolist() == kept.head.tolist()
    assert graph.arc_tails(arcs).tolist() == kept.tails().tolist()


def test_masks_of_wrong_shape_are_refused() -> None:
    with pytest.raises(DataError, match="node_mask"):
        square().keep(node_mask=np.ones(3, bool))
    with pytest.raises(DataError, match="arc_mask"):
        square().keep(arc_mask=np.ones(4, np.int64))


@SETTINGS
@given(small_graphs())
def test_the_reversed_order_lists_each_arc_under_its_end(graph: RouteGraph) -> None:
    turned = graph.reversed_order()
    assert sorted(turned.arc.tolist()) == list(range(graph.arcs))
    for node in range(graph.nodes):
        row = slice(turned.indptr[node], turned.indptr[node + 1])
        assert (graph.head[turned.arc[row]] == node).all()
        assert turned.tail[row].tolist() == graph.tails()[turned.arc[row]].tolist()
        assert (np.diff(turned.tail[row]) > 0).all()


def test_reachable_counts_the_starts() -> None:
    graph = square()
    for starts, expected in (([0], [1, 1, 1, 1]), ([1, 2], [0, 1, 1, 1]), ([], [0, 0, 0, 0])):
        found = reachable(graph.indptr, graph.head, np.array(starts, np.int64))
        assert found.tolist() == [bool(e) for e in expected]
