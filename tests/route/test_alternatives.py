"""Alternatives that differ, on worked graphs and against going through every subset."""

from __future__ import annotations

from itertools import combinations

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from route_cases import YEN, named_graph

from climbpath.errors import UsageError
from climbpath.route.alternatives import (
    Alternatives,
    Solve,
    alternatives,
    share_difference,
)
from climbpath.route.shortest import shortest_route

SETTINGS = settings(derandomize=True, deadline=None, max_examples=100)
NODES = "CDEFGH"


def yen_solver() -> tuple[Solve[str], list[int]]:
    """Best route from C to H without some arcs: the arcs stand for the holds."""
    graph, number = named_graph(YEN, NODES)

    def solve(forbidden: frozenset[int]) -> tuple[int, frozenset[int], str] | None:
        allowed = np.array([arc not in forbidden for arc in range(graph.arcs)], np.bool_)
        kept = graph.kept_arcs(arc_mask=allowed)
        part = graph.with_arcs(kept)
        route = shortest_route(part, part.time_us, [number["C"]], [number["H"]])
        if route is None:
            return None
        arcs = frozenset(kept[route.arcs].tolist())
        return route.cost, arcs, "".join(NODES[v] for v in route.nodes)

    return solve, graph.time_us.tolist()


def test_any_difference_gives_the_ranking_of_yen() -> None:
    solve, _ = yen_solver()
    result = alternatives(solve, 10, 0.0, 500)
    ranking = [(a.cost, a.payload) for a in result.found]
    # Yen's worked example: CEFH 5; CEGH 7; CDFH, CEDFH, CEFGH 8; CDFGH, CEDFGH 11.
    assert ranking[:2] == [(5, "CEFH"), (7, "CEGH")]
    assert {name for cost, name in ranking if cost == 8} == {"CDFH", "CEDFH", "CEFGH"}
    assert {name for cost, name in ranking if cost == 11} == {"CDFGH", "CEDFGH"}
    assert len(ranking) == 7
    assert result.stopped == "exhausted"
    reference = nx.DiGraph()
    reference.add_weighted_edges_from((p[0], p[1], cost) for p, (cost, _) in YEN.items())
    names = {"".join(p) for p in nx.shortest_simple_paths(reference, "C", "H", "weight")}
    assert names == {name for _, name in ranking}


@pytest.mark.parametrize(
    ("theta", "expected"),
    # Routes whose shared length with each earlier one, over that one's length, is at most theta.
    [
        (0.3, {"CEFH", "CDFH"}),
        (0.5, {"CEFH", "CEGH", "CDFH"}),
        (0.7, {"CEFH", "CEGH", "CDFH", "CEDFH"}),
    ],
)
def test_overlap_of_length_on_the_graph_of_yen(theta: float, expected: set[str]) -> None:
    solve, length = yen_solver()

    def difference(better: frozenset[int], other: frozenset[int]) -> float:
        total = sum(length[arc] for arc in better)
        return (total - sum(length[arc] for arc in better & other)) / total

    result = alternatives(solve, 10, 1.0 - theta, 500, difference)
    assert {a.payload for a in result.found} == expected
    assert [a.cost for a in result.found] == sorted(a.cost for a in result.found)
    assert result.found[0].payload == "CEFH"


def test_the_share_compares_as_it_is_written() -> None:
    a = frozenset(range(10))
    assert share_difference(a, a - {0, 1}) == 0.2  # 1 - 0.8 would be less in float64
    assert share_difference(a, a) == 0.0
    assert share_difference(a, frozenset({11})) == 1.0
    assert share_difference(frozenset(), frozenset()) == 0.0


@SETTINGS
@given(
    st.lists(
        st.tuples(st.integers(0, 5), st.frozensets(st.integers(0, 6), min_size=1, max_size=4)),
        min_size=1,
        max_size=12,
    ),
    st.integers(1, 5),
    st.sampled_from([0.0, 0.25, 0.5, 1.0]),
)
def test_found_ones_differ_and_the_first_is_best(
    pool: list[tuple[int, frozenset[int]]], k: int, min_share: float
) -> None:
    def solve(forbidden: frozenset[int]) -> tuple[int, frozenset[int], int] | None:
        left = [(cost, sorted(holds)) for cost, holds in pool if not holds & forbidden]
        if not left:
            return None
        cost, holds = min(left)
        return cost, frozenset(holds), cost

    result = alternatives(solve, k, min_share, 100_000)
    assert result == alternatives(solve, k, min_share, 100_000)
    costs = [a.cost for a in result.found]
    assert costs == sorted(costs)
    assert costs[0] == min(cost for cost, _ in pool)
    for a, b in combinations(result.found, 2):
        assert a.holds != b.holds
        assert share_difference(a.holds, b.holds) >= min_share
    assert all(not a.holds & a.forbidden for a in result.found)
    assert (len(result.found) == k) == (result.stopped == "enough")
    assert result.stopped != "limit"
    if min_share == 1.0 and k == 2:
        # Entirely different from the first: forbidding reaches the best of those.
        apart = [cost for cost, holds in pool if not holds & result.found[0].holds]
        assert costs[1:] == ([min(apart)] if apart else [])


@SETTINGS
@given(
    st.dictionaries(
        st.frozensets(st.integers(0, 6), min_size=1, max_size=4),
        st.integers(0, 5),
        min_size=1,
        max_size=12,
    )
)
def test_any_difference_ranks_all_where_none_contains_another(
    pool: dict[frozenset[int], int],
) -> None:
    pool = {holds: cost for holds, cost in pool.items() if not any(o < holds for o in pool)}
    ordered = sorted((cost, sorted(holds)) for holds, cost in pool.items())

    def solve(forbidden: frozenset[int]) -> tuple[int, frozenset[int], None] | None:
        left = [(cost, holds) for cost, holds in ordered if forbidden.isdisjoint(holds)]
        return (left[0][0], frozenset(left[0][1]), None) if left else None

    result = alternatives(solve, 100, 0.0, 100_000)
    assert [(a.cost, sorted(a.holds)) for a in result.found] == ordered
    assert result.stopped == "exhausted"


def test_more_is_not_forbidden_where_less_was_too_much() -> None:
    calls: list[list[int]] = []

    def solve(forbidden: frozenset[int]) -> tuple[int, frozenset[int], None] | None:
        calls.append(sorted(forbidden))
        if 0 in forbidden:  # every way needs hold 0
            return None
        return len(forbidden), frozenset({0, 1, 2, 3}) - forbidden, None

    alternatives(solve, 3, 1.0, 100)
    assert calls[:2] == [[], [0]]
    assert not [c for c in calls[2:] if 0 in c]
    assert len(calls) == len({tuple(c) for c in calls})


def test_the_limit_is_said() -> None:
    solve, _ = yen_solver()
    result = alternatives(solve, 7, 0.0, 4)
    assert (result.stopped, result.solves) == ("limit", 4)
    assert [a.payload for a in result.found][:2] == ["CEFH", "CEGH"]
    assert alternatives(solve, 1, 0.5, 1).stopped == "enough"


def test_no_result_at_all_is_exhausted() -> None:
    result: Alternatives[None] = alternatives(lambda forbidden: None, 3, 0.5, 10)
    assert (result.found, result.stopped, result.solves) == ((), "exhausted", 1)


@pytest.mark.parametrize(("k", "share", "solves"), [(0, 0.5, 5), (1, 1.5, 5), (1, 0.5, 0)])
def test_senseless_numbers_are_refused(k: int, share: float, solves: int) -> None:
    with pytest.raises(UsageError):
        alternatives(lambda forbidden: None, k, share, solves)
