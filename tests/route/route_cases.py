"""Small graphs for the tests of the search, and answers by going through every route."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np
from hypothesis import strategies as st

from climbpath.route.graph import RouteGraph


def named_graph(
    arcs: Mapping[str, tuple[int, int]], nodes: str
) -> tuple[RouteGraph, dict[str, int]]:
    """Graph of arcs written as two letters, with (time, area); nodes numbered as in ``nodes``."""
    number = {name: i for i, name in enumerate(nodes)}
    tail = [number[pair[0]] for pair in arcs]
    head = [number[pair[1]] for pair in arcs]
    time, area = zip(*arcs.values(), strict=True)
    return RouteGraph.from_arcs(len(nodes), tail, head, time, area), number


@st.composite
def small_graphs(
    draw: st.DrawFn, most_nodes: int = 6, most_cost: int = 2, events: int = 0, forward: bool = False
) -> RouteGraph:
    """Graphs with few nodes and many ties: costs are small and often 0."""
    n = draw(st.integers(2, most_nodes))
    pairs = [(u, v) for u in range(n) for v in range(n) if u < v or (u > v and not forward)]
    chosen = draw(st.lists(st.sampled_from(pairs), unique=True, max_size=3 * n))
    m = len(chosen)

    def numbers(low: int, high: int) -> list[int]:
        return draw(st.lists(st.integers(low, high), min_size=m, max_size=m))

    return RouteGraph.from_arcs(
        n,
        np.array([u for u, _ in chosen], np.int64),
        np.array([v for _, v in chosen], np.int64),
        numbers(0, most_cost),
        numbers(0, most_cost),
        event=numbers(-1, events - 1) if events else None,
        rank=draw(st.permutations(range(n))),
        excursion=draw(st.lists(st.sampled_from([0.0, 0.1, 0.2, 0.3]), min_size=n, max_size=n)),
    )


def node_lists(graph: RouteGraph, least: int = 1) -> st.SearchStrategy[list[int]]:
    return st.lists(st.integers(0, graph.nodes - 1), min_size=least, max_size=3)


def simple_routes(
    graph: RouteGraph, sources: Sequence[int], targets: Sequence[int]
) -> Iterator[tuple[list[int], list[int]]]:
    """(nodes, arcs) of every route that visits no node twice."""

    def extend(nodes: list[int], arcs: list[int]) -> Iterator[tuple[list[int], list[int]]]:
        if nodes[-1] in targets:
            yield list(nodes), list(arcs)
        for arc in range(graph.indptr[nodes[-1]], graph.indptr[nodes[-1] + 1]):
            following = int(graph.head[arc])
            if following not in nodes:
                yield from extend([*nodes, following], [*arcs, arc])

    for source in sorted(set(sources)):
        yield from extend([source], [])


def walks(
    graph: RouteGraph, source: int, targets: Sequence[int], most: int
) -> Iterator[tuple[list[int], list[int]]]:
    """(nodes, arcs) of every walk of at most ``most`` arcs; nodes may come again."""
    waiting = [([source], list[int]())]
    while waiting:
        nodes, arcs = waiting.pop()
        if nodes[-1] in targets:
            yield nodes, arcs
        if len(arcs) < most:
            for arc in range(graph.indptr[nodes[-1]], graph.indptr[nodes[-1] + 1]):
                waiting.append(([*nodes, int(graph.head[arc])], [*arcs, arc]))


def renumbered(graph: RouteGraph, new: Any) -> RouteGraph:
    """The same graph with node ``v`` called ``new[v]``; its ranks go along."""
    new = np.asarray(new)
    old = np.argsort(new)
    return RouteGraph.from_arcs(
        graph.nodes,
        new[graph.tails()],
        new[graph.head],
        graph.time_us,
        graph.area,
        graph.event,
        graph.rank[old],
        graph.excursion[old],
    )


# Worked graphs, from the lists of arcs in the literature on k shortest and two-cost paths.
YEN = {
    pair: (cost, 0)
    for pair, cost in {
        "CD": 3,
        "CE": 2,
        "DF": 4,
        "ED": 1,
        "EF": 2,
        "EG": 3,
        "FG": 2,
        "FH": 1,
        "GH": 2,
    }.items()
}
"""The example graph of Yen's method; from C to H its routes cost 5, 7, 8, 8, 8, 11, 11."""

UNSUPPORTED = {
    "sa": (1, 5),
    "sb": (4, 1),
    "sc": (2, 3),
    "at": (1, 5),
    "ac": (1, 1),
    "bt": (5, 1),
    "bc": (1, 1),
    "ct": (4, 2),
    "cd": (1, 2),
    "dt": (2, 2),
}
"""From s to t the best set is (2, 10), (5, 7), (6, 5), (9, 2); no weighting finds (5, 7)."""
