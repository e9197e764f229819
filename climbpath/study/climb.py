"""One body on one wall, ready to be searched: conditions, start and finish, and the graph."""

from __future__ import annotations

import os
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import product

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.contacts import CONTACT_CODES, LIMB_NAMES, Limb
from climbpath.errors import UsageError
from climbpath.motion.capacity import capacities_of
from climbpath.motion.force import ForceMotion
from climbpath.motion.model import Motion
from climbpath.posture.linkage import Linkage, linkage_of
from climbpath.posture.samples import Lattice
from climbpath.route.build import SearchGraph, build_graph
from climbpath.route.demands import Demand, Opening, Touch
from climbpath.route.measures import off_line
from climbpath.route.nodes import LASTS, READY
from climbpath.stance.enumerate import Allowed
from climbpath.stance.options import ContactOptions, contact_options
from climbpath.stance.stances import StanceSet, stance_set
from climbpath.study.sequence import Sequence, unknown_holds
from climbpath.wall import Wall

Ints = NDArray[np.int64]
Progress = Callable[[str, float], None]

LATTICE_STEP = 0.20
"""Step of the lattice of centre-of-mass heights, m."""

MEMORY_SHARE = 0.7
"""How much of the memory that is free a search may plan to use."""


@dataclass(frozen=True)
class Conditions:
    """What a sequence must and must not do. Hold ids as in the wall file.

    ``include``: holds that must be touched, by a hand where hands may use them, else by a foot.
    ``hands``: (limb name, hold id) pairs that must occur. ``opening``: the first placements.
    """

    include: tuple[str, ...] = ()
    avoid: tuple[str, ...] = ()
    hands: tuple[tuple[str, str], ...] = ()
    opening: Sequence | None = None
    flights: bool = True
    matching: bool = True
    smears: bool = True


@dataclass(frozen=True)
class Climb:
    """A search that is ready to run.

    ``sources`` (S,): ready nodes of the allowed starts, with the time [us] and lateral area
    [mm ms] that the reaction takes; ``targets``: nodes in which a hand has reached the finish.
    """

    wall: Wall
    athlete: Athlete
    conditions: Conditions
    options: ContactOptions
    linkage: Linkage
    motion: Motion
    search: SearchGraph
    sources: Ints
    source_time: Ints
    source_area: Ints
    targets: Ints
    demands: tuple[Demand, ...]
    start_events: tuple[tuple[int, ...], ...] = field(default=())


def check_conditions(wall: Wall, conditions: Conditions) -> None:
    """UsageError that names every hold the wall has not, and demands that exclude each other."""
    ids = frozenset(hold.id for hold in wall.holds)
    wrong = [
        f"{option} {name}: the wall has no such hold"
        for option, names in (
            ("--include", conditions.include),
            ("--avoid", conditions.avoid),
            ("--hand", tuple(name for _, name in conditions.hands)),
        )
        for name in names
        if name not in ids
    ]
    wrong += [f"--hand {limb}: expected LH or RH" for limb, _ in conditions.hands
              if limb not in ("LH", "RH")]
    if conditions.opening is not None:
        wrong += [f"--opening: the wall has no hold {name}"
                  for name in unknown_holds(conditions.opening, ids)]
    wanted = {*conditions.include, *(name for _, name in conditions.hands)}
    wrong += [f"--avoid {name}: it is asked for as well" for name in conditions.avoid
              if name in wanted]
    avoided = set(conditions.avoid)
    if avoided.issuperset(wall.finish):
        wrong.append("--avoid leaves no finish hold")
    if wall.starts and not any(
        all(not avoided.issuperset(start.allowed[limb]) for limb in Limb) for start in wall.starts
    ):
        wrong.append("--avoid leaves no allowed start")
    if not wrong:
        by_id = {hold.id: hold for hold in wall.holds}
        wrong += [f"--hand {limb}={name}: that hold is for feet" for limb, name in conditions.hands
                  if by_id[name].use == "foot"]
    if wrong:
        raise UsageError("\n".join(wrong))


def available_memory() -> float:
    """Bytes of memory that are free now, as far as the system tells; infinite where it does not."""
    try:
        with open("/proc/meminfo", encoding="ascii") as stream:
            for line in stream:
                if line.startswith("MemAvailable:"):
                    return float(line.split()[1]) * 1024.0
    except (OSError, ValueError, IndexError):
        pass
    try:
        return float(os.sysconf("SC_AVPHYS_PAGES") * os.sysconf("SC_PAGE_SIZE"))
    except (AttributeError, OSError, ValueError):
        return np.inf


def lattice_of(options: ContactOptions, wall: Wall, step: float) -> Lattice:
    """The wall's lattice, anchored at the lowest hand hold of its starts."""
    ids = {name for start in wall.starts for limb in (Limb.LH, Limb.RH)
           for name in start.allowed[limb] if name not in CONTACT_CODES}
    heights = [float(options.point[options.index(name), 1]) for name in ids]
    return Lattice(min(heights, default=0.0), step)


@dataclass(frozen=True)
class Ground:
    """What a wall and the lengths of a body give, before any capacity is looked at."""

    wall: Wall
    options: ContactOptions
    linkage: Linkage
    stances: StanceSet
    memory_bytes: float


def ground_of(
    wall: Wall, athlete: Athlete, conditions: Conditions, step: float = LATTICE_STEP,
    balanced: bool = True, missing: float = 0.0, memory_bytes: float | None = None,
) -> Ground:
    """All stances with their samples. ``missing`` [m] lets reaches fall short by so much.

    UsageError for conditions the wall cannot have; TooLargeError where memory would not do.
    """
    check_conditions(wall, conditions)
    options = contact_options(wall)
    linkage = linkage_of(athlete)
    allowed = Allowed(
        frozenset(options.index(name) for name in conditions.avoid),
        conditions.matching, conditions.smears,
    )
    memory = MEMORY_SHARE * available_memory() if memory_bytes is None else memory_bytes
    lattice = lattice_of(options, wall, step)
    stances = stance_set(options, linkage, allowed, wall.line_x, lattice, missing, memory,
                         balanced)
    return Ground(wall, options, linkage, stances, memory)


def climb_on(
    ground: Ground, athlete: Athlete, conditions: Conditions, motion: Motion,
    progress: Progress | None = None,
) -> Climb:
    """The search over ``ground`` for an athlete of the same lengths."""
    report = progress or (lambda _what, _share: None)
    wall, options, linkage, stances = ground.wall, ground.options, ground.linkage, ground.stances
    report("forces", 0.4)
    strength = motion.strengths(wall, options, linkage, stances)
    report("moves", 0.5)
    search = build_graph(options, linkage, stances, motion, wall.line_x, strength,
                         conditions.flights, ground.memory_bytes)
    report("routes", 0.8)
    sources, held = start_nodes(wall, options, search, conditions)
    off = np.abs(off_line(stances.com[search.code.sample(sources), 0], wall.line_x))
    reaction = np.full(len(sources), round(motion.reaction * 1e6))
    return Climb(
        wall, athlete, conditions, options, linkage, motion, search, sources, reaction,
        np.rint(off * motion.reaction * 1e6).astype(np.int64), _targets(wall, options, search),
        demands_of(options, conditions, search), held,
    )


def motion_of(athlete: Athlete) -> Motion:
    """The model of forces with the athlete's capacities."""
    return ForceMotion(capacities_of(athlete))


def prepare(
    wall: Wall, athlete: Athlete, conditions: Conditions, motion: Motion | None = None,
    step: float = LATTICE_STEP, missing: float = 0.0, progress: Progress | None = None,
    memory_bytes: float | None = None,
) -> Climb:
    """Find stances and build the graph. ``missing`` [m] lets reaches fall short by so much.

    UsageError for conditions the wall cannot have; TooLargeError where memory would not do.
    """
    rule = motion or motion_of(athlete)
    if progress is not None:
        progress("stances", 0.0)
    ground = ground_of(wall, athlete, conditions, step, rule.balanced, missing, memory_bytes)
    return climb_on(ground, athlete, conditions, rule, progress)


def _codes(options: ContactOptions, names: tuple[str, ...]) -> list[int]:
    return [CONTACT_CODES[name] if name in CONTACT_CODES else options.index(name) for name in names]


def start_nodes(
    wall: Wall, options: ContactOptions, search: SearchGraph, conditions: Conditions
) -> tuple[Ints, tuple[tuple[int, ...], ...]]:
    """Ready nodes of all samples of the allowed start stances, and what each already touches."""
    given: dict[int, int] = {}
    if conditions.opening is not None and conditions.opening.steps:
        for placed in conditions.opening.steps[0]:
            given[LIMB_NAMES.index(placed.limb)] = _codes(options, (placed.hold,))[0]
    combos = sorted({
        combo
        for start in wall.starts
        for combo in product(*(_codes(options, start.allowed[limb]) for limb in Limb))
        if all(combo[limb] == code for limb, code in given.items())
    })
    stances = search.stances
    if not combos:
        return np.zeros(0, np.int64), ()
    found = stances.find(np.array(combos, dtype=np.int64), options.holds)
    found = np.unique(found[found >= 0])
    samples = np.concatenate([
        np.zeros(0, np.int64),
        *(np.arange(stances.first_sample[s], stances.first_sample[s + 1]) for s in found),
    ])
    # Whichever hand moves first has nothing to wait for.
    nodes = np.concatenate([search.code.node(samples, 0, last, READY) for last in range(LASTS)])
    nodes = np.sort(nodes)
    held = tuple(
        tuple(int(search.code.event(limb, contact[limb:limb + 1])[0]) for limb in Limb)
        for contact in stances.contacts[stances.sample_stance[search.code.sample(nodes)]]
    )
    return nodes, held


def _targets(wall: Wall, options: ContactOptions, search: SearchGraph) -> Ints:
    """Nodes in which a hand has just reached a finish hold."""
    stances = search.stances
    finish = [options.index(name) for name in wall.finish]
    done = np.asarray(np.isin(stances.contacts[:, :2], finish).any(axis=1))
    samples = np.flatnonzero(done[stances.sample_stance])
    return search.code.all_landed(samples)


def demands_of(
    options: ContactOptions, conditions: Conditions, search: SearchGraph
) -> tuple[Demand, ...]:
    """The conditions that need memory along the way, as demands on landing events."""
    code = search.code
    demands: list[Demand] = []
    for name in conditions.include:
        hold = options.index(name)
        limbs = (Limb.LH, Limb.RH) if options.hand[hold] else (Limb.LF, Limb.RF)
        demands.append(Touch(frozenset(int(code.event(limb, np.array(hold))) for limb in limbs)))
    for limb_name, name in conditions.hands:
        limb = LIMB_NAMES.index(limb_name)
        event = int(code.event(limb, np.array(options.index(name))))
        demands.append(Touch(frozenset([event])))
    if conditions.opening is not None:
        steps = []
        feet_too = False
        for placements in conditions.opening.steps[1:]:
            events = set()
            for placed in placements:
                if placed.hold == "free":
                    continue
                limb = LIMB_NAMES.index(placed.limb)
                feet_too |= limb >= Limb.LF
                contact = _codes(options, (placed.hold,))[0]
                events.add(int(code.event(limb, np.array(contact))))
            if events:
                steps.append(frozenset(events))
        watched = frozenset(
            int(code.event(limb, np.array(contact)))
            for limb in (Limb if feet_too else (Limb.LH, Limb.RH))
            for contact in range(-3 if limb >= Limb.LF else 0, options.holds)
            if contact != CONTACT_CODES["free"]
        )
        if steps:
            demands.append(Opening(tuple(steps), watched))
    return tuple(demands)
