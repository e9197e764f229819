"""The main job: the best sequences of one athlete on one wall."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete, growth_caution
from climbpath.contacts import Limb
from climbpath.errors import UsageError
from climbpath.motion.model import Motion
from climbpath.route.alternatives import alternatives
from climbpath.route.bottleneck import bottleneck_route
from climbpath.route.demands import with_demands
from climbpath.route.graph import RouteGraph
from climbpath.route.misses import Misses, misses_of
from climbpath.route.recost import Recoster
from climbpath.route.shortest import Route, Sources, shortest_route
from climbpath.route.weights import line_weight_steps, supported_trade_offs, weighted
from climbpath.study.cautions import FALSE_START_CAUTION, cautions_for
from climbpath.study.climb import (
    LATTICE_STEP,
    Climb,
    Conditions,
    Progress,
    motion_of,
    prepare,
)
from climbpath.study.decode import plan_of
from climbpath.study.polish import polish
from climbpath.study.results import Plan, PlanResult
from climbpath.study.why_not import why_not
from climbpath.wall import Wall

Ints = NDArray[np.int64]

AIMS = ("time", "straight", "both", "narrow")
"""Least time; least lateral area; a weighting of the two; least greatest distance from the line."""

LINE_WEIGHT = 1.0
"""Default for both: seconds that a metre-second of lateral area counts as."""

DIFFERENCE = 0.2
"""Share of the hand holds in which an alternative differs from each better one."""

MAX_SOLVES = 60

LEAST_GAIN = 1.0
"""Least lateral area, mm s, that a slower trade-off must save to be listed."""


LOAD_CAUTION = (
    "Loads are those of holding each position still: above 1, or where none is given, a position "
    "cannot be held but only passed through with the speed brought along."
)

FALSE_START = 0.100


@dataclass(frozen=True)
class PlanRequest:
    """What a plan is asked for, apart from wall and athlete."""

    aim: str = "time"
    line_weight: float = LINE_WEIGHT
    alternatives: int = 1
    difference: float = DIFFERENCE
    conditions: Conditions = field(default_factory=Conditions)
    refine: bool = False
    trade_off: bool = False
    polish: bool = False
    step: float = LATTICE_STEP


@dataclass(frozen=True)
class Best:
    """A route in the numbers of the whole graph with its cost in the aim's unit."""

    route: Route
    cost: int


def hand_move_costs(climb: Climb, graph: RouteGraph) -> Ints:
    """1 for every arc on which a hand lands, (m,)."""
    landing = graph.event // (climb.options.holds + 2)
    return ((graph.event >= 0) & (landing <= Limb.RH)).astype(np.int64)


def factors_of(request: PlanRequest) -> tuple[int, int]:
    """Whole-number weights of time and area for an aim; straight breaks ties by time elsewhere."""
    if request.aim == "straight":
        return 0, 1
    if request.aim == "both":
        return 1000, line_weight_steps(request.line_weight)
    return 1, 0


def best_route(climb: Climb, request: PlanRequest, forbidden: Sequence[int] = ()) -> Best | None:
    """The best route under all conditions, no hand on a ``forbidden`` hold, or None."""
    graph = climb.search.graph
    sources, targets = climb.sources, climb.targets
    if not len(sources) or not len(targets):
        return None
    kept: Ints | None = None
    if forbidden:
        stances = climb.search.stances
        banned = np.asarray(np.isin(stances.contacts[:, :2], list(forbidden)).any(axis=1))
        mask = np.ones(graph.nodes, dtype=bool)
        per_sample = climb.search.code.plain // max(stances.samples, 1)
        mask[:climb.search.code.plain] = np.repeat(~banned[stances.sample_stance], per_sample)
        kept = graph.kept_arcs(node_mask=mask)
        graph = graph.with_arcs(kept)
        sources, targets = sources[mask[sources]], targets[mask[targets]]
        if not len(sources) or not len(targets):
            return None
    best = _solve(climb, request, graph, sources, targets)
    if best is None or kept is None:
        return best
    return Best(Route(best.route.nodes, kept[best.route.arcs], best.route.cost), best.cost)


def _start_costs(climb: Climb, sources: Ints) -> tuple[Ints, Ints, list[tuple[int, ...]]]:
    """Reaction time and area, and what is touched, of some of the climb's sources."""
    place = np.searchsorted(climb.sources, sources)
    return (climb.source_time[place], climb.source_area[place],
            [climb.start_events[p] for p in place])


def _solve(
    climb: Climb, request: PlanRequest, graph: RouteGraph, sources: Ints, targets: Ints
) -> Best | None:
    time_factor, area_factor = factors_of(request)
    time, area, held = _start_costs(climb, sources)
    first = Sources.at(sources, time_factor * time + area_factor * area,
                       ties=(area, time, np.zeros_like(time)))
    demanded = with_demands(graph, climb.demands, first, targets, held)
    inner = demanded.graph
    if not len(demanded.sources.nodes) or not len(demanded.targets):
        return None
    ties = (inner.area, inner.time_us, hand_move_costs(climb, inner))
    weight = weighted(inner, time_factor, area_factor)
    if request.aim == "narrow":
        # Whole millimetres: less is not worth a second.
        found = bottleneck_route(inner, np.rint(inner.excursion), inner.time_us, demanded.sources,
                                 demanded.targets, ties)
        route = None if found is None else found.route
    else:
        route = shortest_route(inner, weight, demanded.sources, demanded.targets, ties)
    if route is None:
        return None
    return Best(demanded.base_route(route), route.cost)


def plan_routes(climb: Climb, request: PlanRequest) -> list[Best]:
    """The best route and as many alternatives as asked for, best first."""
    if request.alternatives <= 1:
        best = best_route(climb, request)
        return [] if best is None else [best]

    def solve(forbidden: frozenset[int]) -> tuple[int, frozenset[int], Best] | None:
        found = best_route(climb, request, sorted(forbidden))
        if found is None:
            return None
        return found.cost, hand_holds_of(climb, found.route), found

    result = alternatives(solve, request.alternatives, request.difference, MAX_SOLVES)
    return [item.payload for item in result.found]


def hand_holds_of(climb: Climb, route: Route) -> frozenset[int]:
    """Indices of the holds that a hand has at some time on a route."""
    stances = climb.search.stances
    samples = climb.search.code.sample(route.nodes)
    contacts = stances.contacts[stances.sample_stance[samples[samples >= 0]], :2]
    return frozenset(int(h) for h in np.unique(contacts) if h >= 0)


def plan(
    wall: Wall, athlete: Athlete, request: PlanRequest | None = None, motion: Motion | None = None,
    progress: Progress | None = None, this_year: int | None = None,
) -> PlanResult:
    """Best sequences of an athlete on a wall, or why there is none.

    ``this_year`` lets the growth caution be given. UsageError for impossible requests,
    TooLargeError where the wall is too dense for the machine's memory.
    """
    asked = request or PlanRequest()
    if asked.aim not in AIMS:
        raise UsageError(f"an aim is one of {', '.join(AIMS)}, found {asked.aim!r}")
    if not 1 <= asked.alternatives <= 20:
        raise UsageError(f"alternatives: 1 to 20, found {asked.alternatives}")
    climb = prepare(wall, athlete, asked.conditions, motion, asked.step, progress=progress)
    routes = plan_routes(climb, asked)
    recoster = Recoster(climb.options, climb.linkage, climb.search, climb.motion, wall.line_x)
    for best in routes:
        recoster.check(best.route)
    misses = misses_of(climb.options, climb.linkage, climb.search, climb.motion)
    tracks = [polish(climb, best.route).track if asked.polish else None for best in routes]
    plans = tuple(
        with_misses(plan_of(climb, best.route, rank, track), best.route, misses)
        for rank, (best, track) in enumerate(zip(routes, tracks, strict=True), start=1)
    )
    trade_off: tuple[tuple[float, float, float], ...] = ()
    if plans and asked.trade_off:
        trade_off = trade_off_points(climb, asked)
    if plans and asked.refine:
        plans = _with_lattice_error(wall, athlete, asked, motion, plans)
    why = None
    if not plans:
        why = why_not(wall, athlete, asked.conditions, motion, asked.step)
    notes = [growth_caution(athlete, this_year) or "" if this_year is not None else "",
             *athlete.cautions]
    if any(p.pad_off_s is not None and p.pad_off_s < FALSE_START for p in plans):
        notes.append(FALSE_START_CAUTION)
    notes.append(LOAD_CAUTION)
    return PlanResult(
        wall_name=wall.name, athlete_name=athlete.name, line_x_mm=wall.line_x * 1e3, aim=asked.aim,
        cautions=cautions_for(*notes), plans=plans, trade_off=trade_off, why_not=why,
    )


def with_misses(plan: Plan, route: Route, misses: Misses) -> Plan:
    """The plan with what missing a hold costs on average, and the chance that none is missed."""
    lost = float(misses.cost_us[route.arcs].sum()) / 1e6
    clean = float(np.prod(1.0 - misses.chance[route.arcs]))
    return replace(plan, expected_time_s=plan.time_s + lost, chance_clean=clean)


def trade_off_points(
    climb: Climb, request: PlanRequest
) -> tuple[tuple[float, float, float], ...]:
    """Trade-offs that some weighting of time and lateral area finds: s, mm s, mm.

    A slower one is only kept where it saves ``LEAST_GAIN`` of lateral area.
    """
    time, area, held = _start_costs(climb, climb.sources)
    first = Sources.at(climb.sources, time, ties=(area,))
    demanded = with_demands(climb.search.graph, climb.demands, first, climb.targets, held)
    if not len(demanded.sources.nodes):
        return ()
    points = supported_trade_offs(
        demanded.graph, demanded.sources.nodes, demanded.targets, demanded.sources.cost,
        demanded.sources.ties[0], (hand_move_costs(climb, demanded.graph),),
    )
    kept: list[tuple[float, float, float]] = []
    for p in points:
        if not kept or p.area / 1e3 <= kept[-1][1] - LEAST_GAIN:
            widest = float(demanded.graph.excursion[p.route.nodes].max())
            kept.append((p.time_us / 1e6, p.area / 1e3, widest))
    return tuple(kept)


def _with_lattice_error(
    wall: Wall, athlete: Athlete, request: PlanRequest, motion: Motion | None,
    plans: tuple[Plan, ...],
) -> tuple[Plan, ...]:
    """State the step error: how much the aim's best time changes with half the step and with speed
    levels half as far apart.
    """
    finer = replace(request, step=request.step / 2.0, alternatives=1)
    rule = (motion or motion_of(athlete)).finer()
    climb = prepare(wall, athlete, finer.conditions, rule, finer.step)
    best = best_route(climb, finer)
    if best is None:
        return plans
    error = abs(plans[0].lattice_time_s - plan_of(climb, best.route, 1).time_s)
    return tuple(replace(p, lattice_error_s=error) for p in plans)
