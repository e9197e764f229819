"""Least largest node value, against going through every route."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from route_cases import node_lists, simple_routes, small_graphs

from climbpath.errors import DataError
from climbpath.route.bottleneck import bottleneck_route, least_bottleneck, shortest_under_cap
from climbpath.route.graph import RouteGraph

SETTINGS = settings(derandomize=True, deadline=None, max_examples=200)


@SETTINGS
@given(small_graphs(most_nodes=7), st.data())
def test_it_is_the_best_of_every_route(graph: RouteGraph, data: st.DataObject) -> None:
    sources, targets = data.draw(node_lists(graph)), data.draw(node_lists(graph))
    finer = np.array(
        data.draw(st.lists(st.integers(0, 9), min_size=graph.nodes, max_size=graph.nodes)), float
    )
    for value in (graph.excursion, finer):
        every = list(simple_routes(graph, sources, targets))
        found = least_bottleneck(graph, value, sources, targets)
        if not every:
            assert found is None
            assert bottleneck_route(graph, value, graph.time_us, sources, targets) is None
            continue
        least = min(value[nodes].max() for nodes, _ in every)
        assert found == least
        best = bottleneck_route(graph, value, graph.time_us, sources, targets, [graph.area])
        assert best is not None
        assert best.value == least
        under = [
            (graph.time_us[arcs].sum(), graph.area[arcs].sum(), graph.rank[nodes].tolist(), arcs)
            for nodes, arcs in every
            if value[nodes].max() <= least
        ]
        assert best.route.arcs.tolist() == min(under)[3]


def test_a_detour_that_is_longer_but_nearer_the_line_is_taken() -> None:
    # 0 → 1 → 4 passes 0.5; 0 → 2 → 3 → 4 stays within 0.2 and takes longer.
    graph = RouteGraph.from_arcs(
        5, [0, 1, 0, 2, 3], [1, 4, 2, 3, 4], [1, 1, 5, 5, 5], [0] * 5,
        excursion=[0.1, 0.5, 0.2, 0.15, 0.0],
    )  # fmt: skip
    best = bottleneck_route(graph, graph.excursion, graph.time_us, [0], [4])
    assert best is not None
    assert (best.value, best.route.nodes.tolist(), best.route.cost) == (0.2, [0, 2, 3, 4], 15)
    loose = shortest_under_cap(graph, graph.excursion, 0.5, graph.time_us, [0], [4])
    assert loose is not None
    assert loose.cost == 2
    assert shortest_under_cap(graph, graph.excursion, 0.19, graph.time_us, [0], [4]) is None
    assert shortest_under_cap(graph, graph.excursion, 0.05, graph.time_us, [0], [4]) is None


def test_the_ends_count() -> None:
    graph = RouteGraph.from_arcs(2, [0], [1], [1], [0], excursion=[0.3, 0.1])
    assert least_bottleneck(graph, graph.excursion, [0], [1]) == 0.3
    assert least_bottleneck(graph, graph.excursion, [1], [1]) == 0.1
    assert least_bottleneck(graph, graph.excursion, [1], [0]) is None
    assert least_bottleneck(graph, graph.excursion, [], [0]) is None


def test_values_that_are_no_numbers_are_refused() -> None:
    graph = RouteGraph.from_arcs(2, [0], [1], [1], [0])
    for value in (np.array([0.0, np.nan]), np.zeros(3)):
        with pytest.raises(DataError, match="value"):
            least_bottleneck(graph, value, [0], [1])
