"""Shortest routes against networkx and against going through every route."""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from route_cases import YEN, named_graph, node_lists, renumbered, simple_routes, small_graphs

import climbpath.route.shortest as shortest
from climbpath.errors import ClimbpathError, DataError, TooLargeError
from climbpath.route.graph import RouteGraph
from climbpath.route.shortest import (
    Route,
    Sources,
    cost_to_go,
    distances,
    recost,
    shortest_route,
)

SETTINGS = settings(derandomize=True, deadline=None, max_examples=150)


def chain_of_zeros() -> RouteGraph:
    """0 → 1 ⇄ 2 ⇄ 3 → 4 with nothing but zero weights."""
    pairs = [(0, 1), (1, 2), (2, 1), (2, 3), (3, 2), (3, 4)]
    tail, head = zip(*pairs, strict=True)
    return RouteGraph.from_arcs(5, tail, head, [0] * 6, [0] * 6)


def test_zero_weight_arcs_are_arcs() -> None:
    graph = chain_of_zeros()
    assert distances(graph, graph.time_us, [0]).tolist() == [0.0] * 5
    assert distances(graph, graph.time_us, [3]).tolist() == [np.inf, 0.0, 0.0, 0.0, 0.0]
    assert cost_to_go(graph, graph.time_us, [4]).tolist() == [0.0] * 5
    route = shortest_route(graph, graph.time_us, [0], [4], [graph.area])
    assert route is not None
    assert (route.nodes.tolist(), route.cost) == ([0, 1, 2, 3, 4], 0)
    spread = distances(graph, graph.time_us, Sources.at([0, 3], [5, 2]))
    assert spread.tolist() == [5.0, 2.0, 2.0, 2.0, 2.0]


def test_a_step_into_a_cycle_of_zeros_that_shuts_the_way_out_is_refused() -> None:
    # 0 → 2 → 1 → 2 … : rank favours 1 at every step, but only 2 leads on to 3.
    pairs = [(0, 1), (0, 2), (1, 2), (2, 1), (2, 3)]
    tail, head = zip(*pairs, strict=True)
    graph = RouteGraph.from_arcs(4, tail, head, [0] * 5, [0] * 5, rank=[0, 1, 2, 3])
    route = shortest_route(graph, graph.time_us, [0], [3])
    assert route is not None
    assert route.nodes.tolist() == [0, 1, 2, 3]
    graph = RouteGraph.from_arcs(4, tail, head, [0] * 5, [0] * 5, rank=[0, 2, 1, 3])
    route = shortest_route(graph, graph.time_us, [0], [3])
    assert route is not None
    assert route.nodes.tolist() == [0, 2, 3]


@SETTINGS
@given(small_graphs(most_nodes=8, most_cost=4), st.data())
def test_distances_are_those_of_networkx(graph: RouteGraph, data: st.DataObject) -> None:
    nodes = data.draw(node_lists(graph))
    spent = data.draw(st.lists(st.integers(0, 4), min_size=len(nodes), max_size=len(nodes)))
    reference = nx.DiGraph()
    reference.add_nodes_from(range(graph.nodes))
    triples = zip(graph.tails().tolist(), graph.head.tolist(), graph.time_us.tolist(), strict=True)
    reference.add_weighted_edges_from(triples)
    for node, cost in zip(nodes, spent, strict=True):
        least = min(cost, reference.get_edge_data("from", node, {"weight": cost})["weight"])
        reference.add_edge("from", node, weight=least)
    ways = nx.single_source_dijkstra_path_length(reference, "from")
    expected = [ways.get(v, np.inf) for v in range(graph.nodes)]
    assert distances(graph, graph.time_us, Sources.at(nodes, spent)).tolist() == expected
    back = nx.multi_source_dijkstra_path_length(
        reference.subgraph(range(graph.nodes)).reverse(), set(nodes)
    )
    expected = [back.get(v, np.inf) for v in range(graph.nodes)]
    assert cost_to_go(graph, graph.time_us, nodes).tolist() == expected


@SETTINGS
@given(small_graphs(most_cost=1), st.data())
def test_ties_are_broken_as_if_every_route_were_compared(
    graph: RouteGraph, data: st.DataObject
) -> None:
    sources = data.draw(node_lists(graph).map(lambda nodes: sorted(set(nodes))))
    targets = data.draw(node_lists(graph))
    third = np.array(
        data.draw(st.lists(st.integers(0, 1), min_size=graph.arcs, max_size=graph.arcs)), np.int64
    )
    begun = np.array(
        [data.draw(st.lists(st.integers(0, 1), min_size=3, max_size=3)) for _ in sources]
    )
    starts = Sources(np.array(sources), begun[:, 0], (begun[:, 1], begun[:, 2]))
    costs = (graph.time_us, graph.area, third)

    def key(nodes: list[int], arcs: list[int]) -> tuple[list[int], list[int]]:
        spent = begun[sources.index(nodes[0])]
        sums = [int(spent[i] + cost[arcs].sum()) for i, cost in enumerate(costs)]
        return sums, graph.rank[nodes].tolist()

    every = [(key(*route), route) for route in simple_routes(graph, sources, targets)]
    found = shortest_route(graph, graph.time_us, starts, targets, costs[1:])
    if not every:
        assert found is None
        return
    assert found is not None
    best = min(every)
    assert found.cost == best[0][0][0]
    assert (found.nodes.tolist(), found.arcs.tolist()) == best[1]
    assert recost(graph, found, graph.time_us, starts) == found.cost


@SETTINGS
@given(small_graphs(most_cost=1), st.data())
def test_the_numbering_of_the_nodes_decides_nothing(graph: RouteGraph, data: st.DataObject) -> None:
    sources, targets = data.draw(node_lists(graph)), data.draw(node_lists(graph))
    new = np.array(data.draw(st.permutations(range(graph.nodes))))
    other = renumbered(graph, new)
    here = shortest_route(graph, graph.time_us, sources, targets, [graph.area])
    there = shortest_route(other, other.time_us, new[sources], new[targets], [other.area])
    assert (here is None) == (there is None)
    if here is not None and there is not None:
        assert new[here.nodes].tolist() == there.nodes.tolist()
        assert here.cost == there.cost


def test_a_graph_and_its_mirror_image_choose_the_same_side() -> None:
    # Two equal ways, over 1 or over 2: the rank says which, whatever the two are called.
    for left, right in ((1, 2), (2, 1)):
        graph = RouteGraph.from_arcs(
            4,
            [0, 0, left, right],
            [left, right, 3, 3],
            [1] * 4,
            [1] * 4,
            rank=[0, 5, 7, 9] if left == 1 else [0, 7, 5, 9],
        )
        route = shortest_route(graph, graph.time_us, [0], [3], [graph.area])
        assert route is not None
        assert route.nodes.tolist() == [0, left, 3]


def test_yen_graph_best_route() -> None:
    graph, number = named_graph(YEN, "CDEFGH")
    route = shortest_route(graph, graph.time_us, [number["C"]], [number["H"]])
    assert route is not None
    assert "".join("CDEFGH"[v] for v in route.nodes) == "CEFH"  # cost 5: Yen's worked example
    assert route.cost == 5


def test_a_source_that_is_a_target_is_a_route_of_no_arcs() -> None:
    graph = chain_of_zeros()
    route = shortest_route(graph, graph.time_us, Sources.at([2, 4], [3, 7]), [2, 4])
    assert route is not None
    assert (route.nodes.tolist(), route.arcs.size, route.cost) == ([2], 0, 3)


def test_no_way_no_sources_no_targets() -> None:
    graph = chain_of_zeros()
    assert shortest_route(graph, graph.time_us, [4], [0]) is None
    assert shortest_route(graph, graph.time_us, [], [0]) is None
    assert shortest_route(graph, graph.time_us, [0], []) is None
    empty = RouteGraph.from_arcs(2, [], [], [], [])
    assert shortest_route(empty, empty.time_us, [0], [1]) is None
    assert distances(empty, empty.time_us, [0]).tolist() == [0.0, np.inf]


def test_large_costs_stay_exact_up_to_the_limit() -> None:
    # Sums that differ by 1 just below 2**53, and then one that reaches it.
    half = 2**52
    tail, head = [0, 0, 1, 2], [1, 2, 3, 3]
    graph = RouteGraph.from_arcs(4, tail, head, [half - 2, half - 1, half, half], [0] * 4)
    route = shortest_route(graph, graph.time_us, [0], [3])
    assert route is not None
    assert (route.nodes.tolist(), route.cost) == ([0, 1, 3], 2**53 - 2)
    with pytest.raises(TooLargeError, match="2\\*\\*53"):
        shortest_route(graph, graph.time_us, Sources.at([0], [2]), [3])
    with pytest.raises(TooLargeError, match="weight"):
        distances(graph, graph.time_us + half, [0])


def test_malformed_arguments_are_refused() -> None:
    graph = chain_of_zeros()
    with pytest.raises(DataError, match="weight"):
        shortest_route(graph, graph.time_us[:-1], [0], [4])
    with pytest.raises(DataError, match="weight"):
        shortest_route(graph, graph.time_us.astype(float), [0], [4])
    with pytest.raises(DataError, match="0 or more"):
        shortest_route(graph, graph.time_us - 1, [0], [4])
    with pytest.raises(DataError, match=r"tie_costs\[0\]"):
        shortest_route(graph, graph.time_us, [0], [4], [graph.area[1:]])
    with pytest.raises(DataError, match="targets"):
        shortest_route(graph, graph.time_us, [0], [5])
    with pytest.raises(DataError, match="sources"):
        shortest_route(graph, graph.time_us, [-1], [4])
    with pytest.raises(DataError, match=r"sources\.ties"):
        shortest_route(graph, graph.time_us, Sources.at([0], 0, [0, 0]), [4], [graph.area])


def test_recost_refuses_what_does_not_join() -> None:
    graph, _ = named_graph(YEN, "CDEFGH")
    route = shortest_route(graph, graph.time_us, [0], [5])
    assert route is not None
    assert recost(graph, route, graph.time_us) == 5
    with pytest.raises(ClimbpathError, match="join"):
        recost(graph, Route(route.nodes[::-1], route.arcs, 5), graph.time_us)
    with pytest.raises(ClimbpathError, match="nodes"):
        recost(graph, Route(route.nodes[1:], route.arcs, 5), graph.time_us)
    with pytest.raises(ClimbpathError, match="no source"):
        recost(graph, route, graph.time_us, [1])


@SETTINGS
@given(small_graphs(), st.data())
def test_going_through_the_rows_in_pieces_changes_nothing(
    graph: RouteGraph, data: st.DataObject
) -> None:
    sources, targets = data.draw(node_lists(graph)), data.draw(node_lists(graph))
    whole = shortest_route(graph, graph.time_us, sources, targets, [graph.area])
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(shortest, "_CHUNK", data.draw(st.integers(1, 4)))
        pieces = shortest_route(graph, graph.time_us, sources, targets, [graph.area])
    assert (whole is None) == (pieces is None)
    if whole is not None and pieces is not None:
        assert whole.arcs.tolist() == pieces.arcs.tolist()
