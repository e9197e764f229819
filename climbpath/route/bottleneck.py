"""Routes whose largest node value is least: the least maximum excursion from the line.

A maximum is not a sum, so this is no shortest path. The least cap under which a target can still be
reached is found by halving the sorted distinct values, each half decided by one sweep over what is
left of the graph; a route is then the shortest among the nodes under the cap.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from climbpath.errors import DataError, Problem
from climbpath.route.graph import Flags, Floats, Ints, Ints32, RouteGraph, reachable
from climbpath.route.shortest import (
    Route,
    Sources,
    SourcesLike,
    as_sources,
    checked_nodes,
    shortest_route,
)


class BottleneckRoute(NamedTuple):
    """A route under the least cap, and that cap."""

    value: float
    route: Route


def least_bottleneck(
    graph: RouteGraph,
    value: Floats,
    sources: SourcesLike,
    targets: Sequence[int] | NDArray[np.integer],
) -> float | None:
    """Least over all routes of the largest ``value`` (n,) at their nodes, both ends included.

    Exact: it is one of the values. None if no route leads from a source to a target. What was
    spent at the sources does not count. DataError if a value is nan or the shape is wrong.
    """
    starts = np.unique(as_sources(graph, sources).nodes)
    ends = checked_nodes(graph, targets, "targets")
    if value.shape != (graph.nodes,) or np.isnan(value).any():
        found = f"{value.dtype} {value.shape}"
        raise DataError([Problem("", "value", found, f"numbers ({graph.nodes},), none nan")])
    if starts.size == 0 or ends.size == 0:
        return None
    # No route is better than its two ends.
    floor = max(value[starts].min(), value[ends].min())
    caps = np.unique(np.maximum(value, floor))
    level = np.searchsorted(caps, np.maximum(value, floor))
    indptr, head = graph.indptr, graph.head
    low, high = 0, caps.size  # the answer is caps[low ... high - 1], or there is none
    while low < high:
        # The lowest cap first: often nothing is forced beyond the two ends. Then every cap, to
        # know whether there is a route at all. Then halves.
        untried = high == caps.size
        middle = 0 if low == 0 and untried else high - 1 if untried else (low + high) // 2
        allowed = level <= middle
        inner_indptr, inner_head = _under(indptr, head, allowed)
        reached = reachable(inner_indptr, inner_head, starts[allowed[starts]])
        if reached[ends].any():
            if middle == low:
                return float(caps[middle])
            high = middle
            indptr, head = inner_indptr, inner_head
        else:
            low = middle + 1
            # What was reached stays reached under every later cap: no arc need lead there again.
            starts = np.union1d(starts, np.flatnonzero(reached))
            indptr, head = _fewer(indptr, head, ~reached[head])
    return float(caps[high]) if high < caps.size else None


def bottleneck_route(
    graph: RouteGraph,
    value: Floats,
    weight: Ints,
    sources: SourcesLike,
    targets: Sequence[int] | NDArray[np.integer],
    tie_costs: Sequence[Ints] = (),
) -> BottleneckRoute | None:
    """The shortest route, by ``weight`` and ``tie_costs``, among those of least largest value.

    None if no route leads from a source to a target; errors as in ``shortest_route``.
    """
    cap = least_bottleneck(graph, value, sources, targets)
    if cap is None:
        return None
    route = shortest_under_cap(graph, value, cap, weight, sources, targets, tie_costs)
    return None if route is None else BottleneckRoute(cap, route)


def shortest_under_cap(
    graph: RouteGraph,
    value: Floats,
    cap: float,
    weight: Ints,
    sources: SourcesLike,
    targets: Sequence[int] | NDArray[np.integer],
    tie_costs: Sequence[Ints] = (),
) -> Route | None:
    """The shortest route over nodes whose ``value`` (n,) is at most ``cap``, both ends included.

    Its arc numbers are those of ``graph``. None if there is none.
    """
    allowed = value <= cap
    arcs = graph.kept_arcs(node_mask=allowed)
    starts = as_sources(graph, sources)
    open_start = allowed[starts.nodes]
    starts = Sources(
        starts.nodes[open_start],
        starts.cost[open_start],
        tuple(tie[open_start] for tie in starts.ties),
    )
    ends = checked_nodes(graph, targets, "targets")
    route = shortest_route(
        graph.with_arcs(arcs),
        weight[arcs],
        starts,
        ends[allowed[ends]],
        [tie[arcs] for tie in tie_costs],
    )
    return None if route is None else Route(route.nodes, arcs[route.arcs], route.cost)


def _under(indptr: Ints, head: Ints32, allowed: Flags) -> tuple[Ints, Ints32]:
    """Rows and heads of the arcs with both ends allowed."""
    kept = allowed[head]
    kept &= np.repeat(allowed, np.diff(indptr))
    return _fewer(indptr, head, kept)


def _fewer(indptr: Ints, head: Ints32, kept: Flags) -> tuple[Ints, Ints32]:
    arcs = np.flatnonzero(kept)
    return np.searchsorted(arcs, indptr).astype(np.int64), head[arcs]
