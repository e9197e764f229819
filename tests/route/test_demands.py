"""Conditions by automaton, against a plain reading of each condition over every walk."""

from __future__ import annotations

from collections.abc import Collection, Sequence

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from route_cases import small_graphs, walks

from climbpath.errors import DataError, UsageError
from climbpath.route.demands import (
    Demand,
    Opening,
    Touch,
    compile_demands,
    with_demands,
)
from climbpath.route.graph import RouteGraph, check_graph
from climbpath.route.shortest import Sources, recost, shortest_route

SETTINGS = settings(derandomize=True, deadline=None, max_examples=150)
EVENTS = 4
LENGTH = 6


def opening_holds(events: Sequence[int], opening: Opening) -> bool:
    watched = opening.watched.union(*opening.steps)
    order = [event for event in events if event in watched]
    for step in opening.steps:
        if set(order[: len(step)]) != step or len(order) < len(step):
            return False
        order = order[len(step) :]
    return True


def holds(events: Sequence[int], demands: Sequence[Demand], held: Collection[int]) -> bool:
    return all(
        not demand.events.isdisjoint([*events, *held])
        if isinstance(demand, Touch)
        else opening_holds(events, demand)
        for demand in demands
    )


event_sets = st.frozensets(st.integers(0, EVENTS - 1), min_size=1, max_size=2)
demand_lists = st.lists(
    st.builds(Touch, event_sets)
    | st.builds(Opening, st.lists(event_sets, max_size=2).map(tuple), event_sets),
    min_size=1,
    max_size=2,
)


@SETTINGS
@given(small_graphs(most_nodes=4, events=EVENTS), demand_lists, st.data())
def test_the_product_has_the_routes_that_meet_the_demands(
    graph: RouteGraph, demands: list[Demand], data: st.DataObject
) -> None:
    source, target = 0, graph.nodes - 1
    held = data.draw(st.frozensets(st.integers(0, EVENTS - 1), max_size=1))
    product = with_demands(graph, demands, Sources.at([source], 1), [target], [held])
    check_graph(product.graph)
    found = shortest_route(product.graph, product.graph.time_us, product.sources, product.targets)
    brute = [
        1 + int(graph.time_us[arcs].sum())
        for _, arcs in walks(graph, source, [target], LENGTH)
        if holds(graph.event[arcs].tolist(), demands, held)
    ]
    if found is None:
        assert not brute
        assert product.graph.nodes == 0
        return
    back = product.base_route(found)
    assert recost(graph, back, graph.time_us) + 1 == found.cost
    assert holds(graph.event[back.arcs].tolist(), demands, held)
    assert (back.nodes[0], back.nodes[-1]) == (source, target)
    if brute:
        assert found.cost <= min(brute)
    if back.arcs.size <= LENGTH:
        assert found.cost == min(brute)


@SETTINGS
@given(small_graphs(most_nodes=5, events=EVENTS, forward=True), demand_lists)
def test_the_product_holds_nothing_that_no_route_uses(
    graph: RouteGraph, demands: list[Demand]
) -> None:
    product = with_demands(graph, demands, [0], [graph.nodes - 1])
    used_arcs: set[int] = set()
    for source in product.sources.nodes.tolist():
        for _, arcs in walks(product.graph, source, product.targets.tolist(), graph.nodes * 4):
            used_arcs.update(arcs)
            events = product.graph.event[arcs].tolist()
            assert holds(events, demands, ())
    assert used_arcs == set(range(product.graph.arcs))
    for name in ("time_us", "area", "event"):
        base = getattr(graph, name)[product.base_arc]
        assert getattr(product.graph, name).tolist() == base.tolist()
    assert product.graph.excursion.tolist() == graph.excursion[product.base_node].tolist()
    # Ranks follow the original's; within a node, its states, which are numbered in order.
    by_rank = np.argsort(product.graph.rank)
    keys = list(zip(graph.rank[product.base_node[by_rank]], by_rank, strict=True))
    assert keys == sorted(keys)
    assert graph.tails()[product.base_arc].tolist() == (
        product.base_node[product.graph.tails()].tolist()
    )


def ladder() -> RouteGraph:
    """0 → 1 → 2 → 3 with events 0, 1, 2, and 0 → 2 without an event; 1 ⇄ 4 by event 3."""
    return RouteGraph.from_arcs(
        5, [0, 1, 2, 0, 1, 4], [1, 2, 3, 2, 4, 1], [2, 2, 2, 1, 1, 1], [0] * 6,
        event=[0, 1, 2, -1, 3, -1],
    )  # fmt: skip


@pytest.mark.parametrize(
    ("demands", "expected"),
    [
        ([Touch(frozenset({2}))], [0, 2, 3]),
        ([Touch(frozenset({1}))], [0, 1, 2, 3]),
        ([Touch(frozenset({3}))], [0, 1, 4, 1, 2, 3]),  # there and back over one node
        ([Touch(frozenset({1})), Touch(frozenset({3, 2}))], [0, 1, 2, 3]),
        ([Touch(frozenset({9}))], None),  # an event that no arc has
        ([Touch(frozenset())], None),
        ([Opening((frozenset({0}), frozenset({1})), frozenset({0, 1, 2, 3}))], [0, 1, 2, 3]),
        ([Opening((frozenset({0}), frozenset({3})), frozenset({1}))], [0, 1, 4, 1, 2, 3]),
        ([Opening((frozenset({0, 3}), frozenset({1})), frozenset())], [0, 1, 4, 1, 2, 3]),
        ([Opening((frozenset({1}),), frozenset({0}))], None),  # 1 comes only after 0
        ([Opening((), frozenset({0}))], [0, 2, 3]),
        ([Opening((frozenset({2}),), frozenset({0, 1, 2}))], [0, 2, 3]),
    ],
)
def test_worked_conditions(demands: list[Demand], expected: list[int] | None) -> None:
    graph = ladder()
    product = with_demands(graph, demands, [0], [3])
    found = shortest_route(product.graph, product.graph.time_us, product.sources, product.targets)
    nodes = None if found is None else product.base_route(found).nodes.tolist()
    assert nodes == expected


def test_without_demands_the_graph_itself_comes_back() -> None:
    graph = ladder()
    product = with_demands(graph, [], [0], [3])
    assert product.graph is graph
    assert product.base_arc.tolist() == list(range(6))
    assert product.base_node.tolist() == list(range(5))


def test_what_is_held_at_the_start_counts_as_touched() -> None:
    graph = ladder()
    demands = [Touch(frozenset({3}))]
    product = with_demands(graph, demands, [0, 0], [3], [{1}, {3}])
    found = shortest_route(product.graph, product.graph.time_us, product.sources, product.targets)
    assert found is not None
    assert product.base_route(found).nodes.tolist() == [0, 2, 3]
    with pytest.raises(DataError, match="start_events"):
        with_demands(graph, demands, [0], [3], [])


def test_the_table_forbids_and_returns() -> None:
    table = compile_demands([Opening((frozenset({0, 1}),), frozenset({2}))], 4).next_state
    # Rows: nothing done, 0 done, 1 done, all done; the last column is an arc without event.
    assert table.tolist() == [
        [1, 2, -1, 0, 0],
        [-1, 3, -1, 1, 1],
        [3, -1, -1, 2, 2],
        [3, 3, 3, 3, 3],
    ]


def test_states_never_fall_and_too_many_are_refused() -> None:
    touches = [Touch(frozenset({i})) for i in range(6)]
    table = compile_demands(touches, 6)
    assert table.states == 64
    assert (table.next_state >= np.arange(64)[:, None]).all()
    with pytest.raises(UsageError, match=r"128 states.*fewer placements to include.*the 7 "):
        compile_demands([*touches, Touch(frozenset({0}))], 6)
    opening = Opening((frozenset(range(6)), frozenset({1})), frozenset())
    assert compile_demands([Opening(opening.steps[:1], frozenset())], 6).states == 64
    with pytest.raises(UsageError, match=r"65 states.*shorter opening"):
        compile_demands([opening], 6)
    with pytest.raises(UsageError, match=r"fewer placements.*the 1 .*it takes 64"):
        compile_demands([touches[0], Opening(opening.steps[:1], frozenset())], 6)
