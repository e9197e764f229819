"""Arc weights from time and lateral area, and the trade-off points that weighted sums find.

Units: 1 mm·ms = 1e-6 m·s, so a line weight of W s per m·s makes 1 mm·ms of area worth W µs.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from climbpath.errors import TooLargeError, UsageError
from climbpath.route.graph import Floats, Ints, RouteGraph
from climbpath.route.shortest import (
    EXACT_LIMIT,
    Route,
    Sources,
    SourcesLike,
    as_sources,
    cost_to_go,
    distances,
    recost,
    shortest_route,
)

LINE_WEIGHT_STEPS = 1000
"""A line weight is rounded to a whole number of these parts of 1 s per m·s."""


def weight_time(graph: RouteGraph) -> Ints:
    """Time of each arc, (m,) [µs]."""
    return graph.time_us


def weight_area(graph: RouteGraph) -> Ints:
    """Lateral area of each arc, (m,) [mm·ms]."""
    return graph.area


def weight_both(graph: RouteGraph, line_weight: float) -> Ints:
    """Time plus ``line_weight`` [s per m·s] times lateral area, (m,) [ns].

    The line weight is rounded to thousandths, W = w / 1000, and 1000 time_us + w area is exact:
    nothing is rounded arc by arc. UsageError unless it is finite and 0 or more.
    """
    return weighted(graph, LINE_WEIGHT_STEPS, line_weight_steps(line_weight))


def line_weight_steps(line_weight: float) -> int:
    """The line weight in thousandths of 1 s per m·s, rounded to even at halves."""
    if not math.isfinite(line_weight) or line_weight < 0.0:
        raise UsageError(f"a line weight must be 0 or more, found {line_weight}")
    return round(line_weight * LINE_WEIGHT_STEPS)


def weighted(graph: RouteGraph, time_factor: int, area_factor: int) -> Ints:
    """``time_factor`` time_us + ``area_factor`` area, (m,), exact.

    Factors are whole numbers, 0 or more. TooLargeError where an arc could reach 2**53.
    """
    return _combined(graph.time_us, graph.area, time_factor, area_factor)


class TradeOffPoint(NamedTuple):
    """One trade-off: time [µs] and lateral area [mm·ms], start included, and its route.

    ``route.cost`` is in the weighting that found the point, so read the two costs from here.
    """

    time_us: int
    area: int
    route: Route


@dataclass(frozen=True, eq=False)
class _Problem:
    """What stays the same from one weighting to the next."""

    graph: RouteGraph
    nodes: Ints
    start_time: Ints
    start_area: Ints
    targets: Sequence[int] | NDArray[np.integer]
    tie_costs: tuple[Ints, ...]

    def solve(
        self, time_factor: int, area_factor: int, arcs: Ints | None = None
    ) -> TradeOffPoint | None:
        """Best point for one weighting; among equals the one of least time, then of least area.

        Looks only at the given arcs (ascending), None for all.
        """
        part = self.graph if arcs is None else self.graph.with_arcs(arcs)
        more = self.tie_costs if arcs is None else tuple(tie[arcs] for tie in self.tie_costs)
        zero = np.zeros(self.nodes.size, np.int64)
        sources = Sources(
            self.nodes,
            _combined(self.start_time, self.start_area, time_factor, area_factor),
            (self.start_time, self.start_area, *(zero for _ in more)),
        )
        weight = weighted(part, time_factor, area_factor)
        ties = (part.time_us, part.area, *more)
        route = shortest_route(part, weight, sources, self.targets, ties)
        if route is None:
            return None
        time, area = recost(part, route, part.time_us), recost(part, route, part.area)
        begun = [
            (int(self.start_time[i]), int(self.start_area[i]))
            for i in np.flatnonzero(self.nodes == route.nodes[0])
        ]
        # A node may be several sources; the one that was taken is the best in the same order.
        start = min(begun, key=lambda b: (time_factor * b[0] + area_factor * b[1], b))
        whole = route if arcs is None else Route(route.nodes, arcs[route.arcs], route.cost)
        return TradeOffPoint(time + start[0], area + start[1], whole)

    def between(
        self, left: TradeOffPoint, right: TradeOffPoint, arcs: Ints
    ) -> tuple[TradeOffPoint | None, Ints]:
        """A corner strictly below the line through two corners, or None, and the arcs still of use.

        All corners between the two lie on or below their line, because the hull is convex: arcs
        through which every route is above it are left out of the searches to come. On a graph of
        3M arcs with 116 corners this makes the whole four times faster.
        """
        time_factor, area_factor = left.area - right.area, right.time_us - left.time_us
        common = math.gcd(time_factor, area_factor)
        time_factor, area_factor = time_factor // common, area_factor // common
        found = self.solve(time_factor, area_factor, arcs)
        line = time_factor * left.time_us + area_factor * left.area
        if found is None or time_factor * found.time_us + area_factor * found.area >= line:
            return None, arcs
        part = self.graph.with_arcs(arcs)
        weight = weighted(part, time_factor, area_factor)
        begun = _combined(self.start_time, self.start_area, time_factor, area_factor)
        through = least_through(part, weight, Sources(self.nodes, begun), self.targets)
        return found, arcs[through <= line]


def supported_trade_offs(
    graph: RouteGraph,
    sources: Sequence[int] | NDArray[np.integer],
    targets: Sequence[int] | NDArray[np.integer],
    start_time_us: Ints | None = None,
    start_area: Ints | None = None,
    tie_costs: Sequence[Ints] = (),
) -> tuple[TradeOffPoint, ...]:
    """Trade-offs of time and area that some weighting of the two finds, by rising time.

    ``sources`` (s,), with the time [µs] and area [mm·ms] already spent at each (default 0).
    These are the corners of the lower left convex hull of all (time, area); a point between two
    corners, on their line or above it, is not found. Between two neighbours the weighting under
    which both cost the same is solved, exact in integers, until nothing lies below their line
    (Aneja & Nair 1979, Management Science 25(1):73, from memory). () if there is no route.
    """
    starts = as_sources(graph, sources)
    zero = np.zeros(starts.nodes.size, np.int64)
    time = zero if start_time_us is None else start_time_us
    area = zero if start_area is None else start_area
    as_sources(graph, Sources(starts.nodes, time, (area,)))  # checks both
    problem = _Problem(graph, starts.nodes, time, area, targets, tuple(tie_costs))
    fastest, straightest = problem.solve(1, 0), problem.solve(0, 1)
    if fastest is None or straightest is None:
        return ()
    if straightest.area == fastest.area:
        return (fastest,)
    points = [fastest]
    # To the right of the last point: corners still to be joined to it, and the arcs for that.
    pending = [(straightest, np.arange(graph.arcs))]
    while pending:
        right, arcs = pending[-1]
        found, arcs = problem.between(points[-1], right, arcs)
        if found is None:
            points.append(pending.pop()[0])
        else:
            pending[-1] = (right, arcs)
            pending.append((found, arcs))
    return tuple(points)


def least_through(
    graph: RouteGraph,
    weight: Ints,
    sources: SourcesLike,
    targets: Sequence[int] | NDArray[np.integer],
) -> Floats:
    """Least cost over all routes from a source to a target through each arc, (m,); inf for none.

    Exact below 2**53.
    """
    total = np.repeat(distances(graph, weight, sources), np.diff(graph.indptr))
    total += weight
    total += cost_to_go(graph, weight, targets)[graph.head]
    return total


def _combined(time: Ints, area: Ints, time_factor: int, area_factor: int) -> Ints:
    if time_factor < 0 or area_factor < 0:
        raise UsageError(f"weights must be 0 or more, found {time_factor} and {area_factor}")
    most = time_factor * int(time.max(initial=0)) + area_factor * int(area.max(initial=0))
    if most >= EXACT_LIMIT or max(time_factor, area_factor) >= EXACT_LIMIT:
        raise TooLargeError(f"a weighted step costs up to {most}: exact below 2**53 only")
    return (time_factor * time + area_factor * area).astype(np.int64, copy=False)
