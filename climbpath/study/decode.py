"""From a route through the graph to a plan: steps with time, contacts, body and figures."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, LIMB_NAMES, Limb
from climbpath.motion.capacity import capacities_of
from climbpath.motion.cones import hold_cones
from climbpath.motion.rest import rest_loads
from climbpath.posture.assembly import JOINTS, assemble
from climbpath.route.measures import off_line
from climbpath.route.nodes import LANDED
from climbpath.route.shortest import Route
from climbpath.stance.enumerate import batch_of
from climbpath.stance.stances import StanceSet
from climbpath.study.climb import Climb
from climbpath.study.results import Plan, PlanStep, Point2, Point3
from climbpath.study.track import Track, lattice_track, standing_on

Ints = NDArray[np.int64]
Array = NDArray[np.float64]


@dataclass(frozen=True)
class Leg:
    """A stretch of a route between two stances at rest.

    ``begin`` and ``end`` are samples, times in us; ``landed`` the limbs that landed on the way;
    ``place`` where on the route it ends.
    """

    begin: int
    end: int
    begin_us: int
    end_us: int
    flight: bool
    landed: frozenset[int]
    place: int


def legs_of(climb: Climb, route: Route, start_us: int) -> list[Leg]:
    """Cut a route into its moves: each from a rest to the last landing before the next rest."""
    code, graph = climb.search.code, climb.search.graph
    nodes = [int(n) for n in route.nodes]
    clock = start_us
    legs: list[Leg] = []
    begin, begin_us, flight = nodes[0], clock, False
    stances = climb.search.stances
    owner = stances.sample_stance[code.sample(np.array(begin))]
    landed: set[int] = set()
    for place, (tail, head, arc) in enumerate(zip(nodes[:-1], nodes[1:], route.arcs, strict=True)):
        if landed and _goes_on(climb, tail, head):
            here = int(code.sample(np.array(tail)))
            legs.append(Leg(int(code.sample(np.array(begin))), here, begin_us, clock, flight,
                            frozenset(landed), place))
            begin, begin_us, flight, owner = tail, clock, False, stances.sample_stance[here]
            landed.clear()
        clock += int(graph.time_us[arc])
        flight |= head >= code.plain
        event = int(graph.event[arc])
        if event >= 0:
            landed.add(code.landing(event)[0])
        plain = head < code.plain
        settles = tail < code.plain and plain
        settles &= tail % code.phases >= LANDED and head % code.phases < LANDED
        # A rise that nothing landed with is the first part of the move that follows.
        moved = bool(landed) or stances.sample_stance[code.sample(np.array(head))] != owner
        if (settles and moved) or (head == nodes[-1] and plain):
            end = tail if settles else head
            legs.append(Leg(int(code.sample(np.array(begin))), int(code.sample(np.array(end))),
                            begin_us, clock, flight, frozenset(landed),
                            place if settles else place + 1))
            begin, begin_us, flight = head, clock, False
            owner = stances.sample_stance[code.sample(np.array(head))]
            landed.clear()
    return legs


def _goes_on(climb: Climb, tail: int, head: int) -> bool:
    """Whether what follows a landing at once is no landing with it: a flight, or a rise on which
    limbs under way go on."""
    code, level = climb.search.code, climb.search.stances.level
    if tail >= code.plain or tail % code.phases < LANDED:
        return False
    if head >= code.plain:
        return True
    first, second = (int(code.sample(np.array(node))) for node in (tail, head))
    return head % code.phases >= LANDED and bool(level[first] != level[second])


def plan_of(climb: Climb, route: Route, rank: int, track: Track | None = None) -> Plan:
    """The plan of a route, all figures taken from the route's own nodes and arcs.

    Or, with a polished ``track`` of it, from that; its lattice time stays.
    """
    search, own = climb.search, lattice_track(climb, route)
    track = track or own
    legs = _timed(legs_of(climb, route, int(own.clock[0])), track)
    samples = np.array([int(search.code.sample(route.nodes[0])), *(leg.end for leg in legs)])
    places = np.array([0, *(leg.place for leg in legs)])
    steps = _steps(climb, legs, standing_on(track, search.stances, samples, places))
    area, path = track.area_mm_ms, track.path[:, 1:]
    moves = np.diff(path, axis=0)
    along = climb.options.surface.to_surface(path[[0, -1]])[:, 1]
    gained = float(along[1] - along[0])
    events = [step for step in steps[1:] for limb in step.moved
              if limb in ("LH", "RH") and step.contacts[limb] != "free"]
    margins = [step.margin_mm for step in steps if step.margin_mm is not None]
    off = np.abs(off_line(path[:, 0], climb.wall.line_x))
    seconds = float(track.clock[-1]) / 1e6
    com_path = np.column_stack([track.path[:, 0], climb.options.surface.to_surface(path) * 1e3])
    return Plan(
        rank=rank,
        time_s=seconds,
        lattice_time_s=float(own.clock[-1]) / 1e6,
        expected_time_s=None,
        chance_clean=None,
        time_interval_s=None,
        lattice_error_s=None,
        pad_off_s=_pad_off(climb, legs),
        lateral_area_mm_s=area / 1e3,
        lateral_mean_mm=area / 1e3 / seconds,
        lateral_max_mm=float(off.max()) * 1e3,
        sideways_mm=float(np.abs(moves[:, 0]).sum()) * 1e3,
        path_ratio=float(np.linalg.norm(moves, axis=1).sum()) / gained if gained > 1e-3 else None,
        hand_moves=len(events),
        hand_holds=_hand_holds(steps),
        margin_min_mm=min(margins) if margins else None,
        load_max=_finite(max(np.inf if s.load is None else s.load for s in steps)),
        steps=steps,
        com_path_mm=tuple((float(t), float(x), float(y), float(z)) for t, x, y, z in com_path),
    )


def _timed(legs: list[Leg], track: Track) -> list[Leg]:
    """The legs with the times of a track."""
    ends = [int(track.clock[leg.place]) for leg in legs]
    begins = [int(track.clock[0]), *ends[:-1]]
    return [replace(leg, begin_us=begin, end_us=end)
            for leg, begin, end in zip(legs, begins, ends, strict=True)]


def _hand_holds(steps: tuple[PlanStep, ...]) -> tuple[str, ...]:
    """Ids in order of first touch by a hand; hands that start together count from the left."""
    seen: dict[str, None] = {}
    for step in steps:
        for limb in ("LH", "RH"):
            if step.contacts[limb] != "free":
                seen.setdefault(step.contacts[limb])
    return tuple(seen)


def _pad_off(climb: Climb, legs: list[Leg]) -> float | None:
    """When the last foot leaves the ground: the beginning of the move in which it does."""
    stances = climb.search.stances
    owner = stances.sample_stance
    for leg in legs:
        before = (stances.contacts[owner[leg.begin], 2:] == FLOOR).any()
        after = (stances.contacts[owner[leg.end], 2:] == FLOOR).any()
        if before and not after:
            return leg.begin_us / 1e6
    return None


def _steps(climb: Climb, legs: list[Leg], stands: StanceSet) -> tuple[PlanStep, ...]:
    """All steps, bodies assembled together; ``stands``: how the body stands at each."""
    clock = [0, *(leg.end_us for leg in legs)]
    batch = batch_of(climb.options, climb.linkage, stands.contacts)
    joints = assemble(climb.linkage, batch, stands.turn, stands.shift)
    world = np.moveaxis(batch.to_world(np.moveaxis(joints, 0, 1)), (0, 1, 2), (2, 1, 0))
    surface = climb.options.surface
    placed = surface.to_surface(world) * 1e3
    com = surface.to_surface(stands.com) * 1e3
    loads = rest_loads(
        climb.options, hold_cones(climb.wall, climb.options), climb.linkage,
        capacities_of(climb.athlete), stands.contacts, stands.points, world, stands.com,
    )
    points = surface.to_surface(stands.points) * 1e3
    steps = []
    for k, contacts in enumerate(stands.contacts):
        before = stands.contacts[k - 1] if k else contacts
        landed = legs[k - 1].landed if k else frozenset()
        moved = tuple(LIMB_NAMES[limb] for limb in Limb
                      if contacts[limb] != before[limb] or limb in landed)
        kind = "start" if k == 0 else "flight" if legs[k - 1].flight else "move"
        if k == len(legs) and k:
            kind = "finish"
        where: dict[str, Point2] = {}
        for limb in Limb:
            if contacts[limb] == FLOOR:
                toe = placed[k, JOINTS.index(LIMB_NAMES[limb])]
                where[LIMB_NAMES[limb]] = (float(toe[0]), float(toe[1]))
            elif contacts[limb] != FREE:
                where[LIMB_NAMES[limb]] = (float(points[k, limb, 0]), float(points[k, limb, 1]))
        speed = None
        if k:
            change = stands.com[k] - stands.com[k - 1]
            lasted = (clock[k] - max(clock[k - 1], legs[0].begin_us)) / 1e6
            speed = float(np.linalg.norm(change)) / lasted if lasted > 0 else None
        steps.append(PlanStep(
            step=k,
            time_s=clock[k] / 1e6,
            kind=kind,
            moved=moved,
            contacts={LIMB_NAMES[limb]: climb.options.name(int(contacts[limb])) for limb in Limb},
            points_mm=where,
            com_mm=_point(com[k]),
            joints_mm={name: _point(placed[k, j]) for j, name in enumerate(JOINTS)},
            speed_m_s=speed,
            margin_mm=None if kind == "flight" else float(stands.margin[k]) * 1e3,
            load=_finite(loads.load[k]),
            load_by_limb={
                LIMB_NAMES[limb]: float(loads.by_limb[k, limb]) for limb in Limb
                if contacts[limb] != FREE and np.isfinite(loads.by_limb[k, limb])
            },
        ))
    return tuple(steps)


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _point(values: Array) -> Point3:
    return (float(values[0]), float(values[1]), float(values[2]))
