"""Weighted sums of time and area, and the trade-off points they find."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from route_cases import UNSUPPORTED, named_graph, node_lists, simple_routes, small_graphs

from climbpath.errors import DataError, TooLargeError, UsageError
from climbpath.route.graph import RouteGraph
from climbpath.route.shortest import cost_to_go, distances, recost
from climbpath.route.weights import (
    least_through,
    supported_trade_offs,
    weight_area,
    weight_both,
    weight_time,
    weighted,
)

SETTINGS = settings(derandomize=True, deadline=None, max_examples=150)


def hull_corners(points: set[tuple[int, int]]) -> list[tuple[int, int]]:
    """Corners of the lower left hull: best for some weighting, on no line between two others."""
    best = [p for p in points if not any(q != p and q[0] <= p[0] and q[1] <= p[1] for q in points)]
    corners: list[tuple[int, int]] = []
    for x, y in sorted(best):
        while len(corners) > 1:
            (x0, y0), (x1, y1) = corners[-2:]
            if (x1 - x0) * (y - y0) - (y1 - y0) * (x - x0) > 0:
                break
            corners.pop()
        corners.append((x, y))
    return corners


def test_the_point_that_no_weighting_finds_is_not_among_them() -> None:
    graph, number = named_graph(UNSUPPORTED, "sabcdt")
    found = supported_trade_offs(graph, [number["s"]], [number["t"]])
    # The best set is (2, 10), (5, 7), (6, 5), (9, 2); every weighted sum misses (5, 7).
    assert [(p.time_us, p.area) for p in found] == [(2, 10), (6, 5), (9, 2)]
    routes = ["".join("sabcdt"[v] for v in p.route.nodes) for p in found]
    assert routes == ["sat", "sct", "sbt"]
    every = {
        (int(graph.time_us[arcs].sum()), int(graph.area[arcs].sum()))
        for _, arcs in simple_routes(graph, [number["s"]], [number["t"]])
    }
    assert (5, 7) in every
    for time_factor in range(0, 40):
        weight = [time_factor * t + (40 - time_factor) * a for t, a in every]
        assert (5, 7) not in [p for p, w in zip(every, weight, strict=True) if w == min(weight)]


@pytest.mark.parametrize("k", [1, 2, 3, 4])
def test_stages_with_2_to_the_k_points_have_two_corners(k: int) -> None:
    # Each stage costs (2**i, 0) or (0, 2**i): 2**k best points, all on one line.
    tail, head, time, area = [], [], [], []
    for i in range(k):
        first, second, last = 3 * i, 3 * i + 1, 3 * i + 3
        tail += [first, second, first, second + 1]
        head += [second, last, second + 1, last]
        time += [2**i, 0, 0, 0]
        area += [0, 0, 2**i, 0]
    graph = RouteGraph.from_arcs(3 * k + 1, tail, head, time, area)
    every = {
        (int(graph.time_us[arcs].sum()), int(graph.area[arcs].sum()))
        for _, arcs in simple_routes(graph, [0], [3 * k])
    }
    assert len(every) == 2**k
    found = supported_trade_offs(graph, [0], [3 * k])
    corners = [(0, 2**k - 1), (2**k - 1, 0)]
    assert [(p.time_us, p.area) for p in found] == corners == hull_corners(every)


@SETTINGS
@given(small_graphs(most_nodes=6, most_cost=9), st.data())
def test_the_corners_of_all_routes_are_found(graph: RouteGraph, data: st.DataObject) -> None:
    sources, targets = data.draw(node_lists(graph)), data.draw(node_lists(graph))
    spent = data.draw(
        st.lists(
            st.tuples(st.integers(0, 9), st.integers(0, 9)),
            min_size=len(sources),
            max_size=len(sources),
        )
    )
    points = {
        (int(graph.time_us[arcs].sum()) + time, int(graph.area[arcs].sum()) + area)
        for source, (time, area) in zip(sources, spent, strict=True)
        for _, arcs in simple_routes(graph, [source], targets)
    }
    begun = np.array(spent, np.int64)
    found = supported_trade_offs(graph, sources, targets, begun[:, 0], begun[:, 1])
    assert [(p.time_us, p.area) for p in found] == hull_corners(points)
    for point in found:
        starts = begun[np.array(sources) == point.route.nodes[0]]
        rest = [
            point.time_us - recost(graph, point.route, graph.time_us),
            point.area - recost(graph, point.route, graph.area),
        ]
        assert rest in starts.tolist()


@pytest.mark.parametrize("seed", range(6))
def test_many_corners_are_found_on_a_larger_graph(seed: int) -> None:
    # 10 layers of 6 nodes; all best pairs by carrying every undominated one forward.
    random = np.random.default_rng(seed)
    layers, width = 10, 6
    first = np.arange((layers - 1) * width)
    tail = np.repeat(first, width)
    head = (tail // width + 1) * width + np.tile(np.arange(width), first.size)
    costs = random.integers(0, 100, (2, tail.size))
    graph = RouteGraph.from_arcs(layers * width, tail, head, costs[0], costs[1])
    labels: list[set[tuple[int, int]]] = [set() for _ in range(layers * width)]
    for node in range(width):
        labels[node] = {(0, 0)}
    for node in range(width, layers * width):
        into = np.flatnonzero(head == node)
        every = {
            (x + int(costs[0, arc]), y + int(costs[1, arc]))
            for arc in into
            for x, y in labels[tail[arc]]
        }
        for x, y in sorted(every):
            if not labels[node] or y < min(q for _, q in labels[node]):
                labels[node].add((x, y))
    last = range((layers - 1) * width, layers * width)
    expected = hull_corners(set().union(*(labels[node] for node in last)))
    found = supported_trade_offs(graph, range(width), last)
    assert len(expected) > 4
    assert [(p.time_us, p.area) for p in found] == expected
    assert [recost(graph, p.route, graph.area) for p in found] == [p.area for p in found]


@SETTINGS
@given(small_graphs(most_nodes=6, most_cost=9), st.data())
def test_least_cost_through_each_arc(graph: RouteGraph, data: st.DataObject) -> None:
    sources, targets = data.draw(node_lists(graph)), data.draw(node_lists(graph))
    through = least_through(graph, graph.time_us, sources, targets)
    best = np.full(graph.arcs, np.inf)
    for _, arcs in simple_routes(graph, sources, targets):
        best[arcs] = np.minimum(best[arcs], graph.time_us[arcs].sum())
    # A walk may come by a node twice, so it may reach arcs that no simple route has.
    assert (through <= best).all()
    start, end = distances(graph, graph.time_us, sources), cost_to_go(graph, graph.time_us, targets)
    expected = start[graph.tails()] + graph.time_us + end[graph.head]
    assert through.tolist() == expected.tolist()


def test_weights_are_exact_in_their_units() -> None:
    graph = RouteGraph.from_arcs(3, [0, 1], [1, 2], [250_000, 7], [3_000, 11])
    assert weight_time(graph).tolist() == [250_000, 7]
    assert weight_area(graph).tolist() == [3_000, 11]
    # 3000 mm·ms = 0.003 m·s; at 20 s per m·s that is 0.06 s: 0.25 s + 0.06 s = 310,000,000 ns.
    assert weight_both(graph, 20.0).tolist() == [310_000_000, 7_000 + 20_000 * 11]
    assert weight_both(graph, 0.0).tolist() == [250_000_000, 7_000]
    assert weight_both(graph, 0.0124).tolist() == [250_036_000, 7_132]  # rounds to 0.012
    assert weighted(graph, 2, 3).tolist() == [509_000, 47]


def test_weights_that_make_no_sense_are_refused() -> None:
    graph = RouteGraph.from_arcs(2, [0], [1], [2**40], [1])
    for line_weight in (-1.0, np.nan, np.inf):
        with pytest.raises(UsageError):
            weight_both(graph, line_weight)
    with pytest.raises(UsageError):
        weighted(graph, -1, 1)
    with pytest.raises(TooLargeError):
        weighted(graph, 2**13, 1)
    for begun in (np.array([0.5]), np.array([1, 2]), np.array([-1])):
        with pytest.raises(DataError, match="sources"):
            supported_trade_offs(graph, [0], [1], start_area=begun)
    assert weighted(graph, 2**12, 1).tolist() == [2**52 + 1]
