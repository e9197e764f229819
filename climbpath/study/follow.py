"""A model's times for hand sequences that somebody climbed: which splits given capacities predict.

Of all stances those are kept whose hands are as they are at some time of the run; the feet are the
model's own choice. What depends on lengths alone is found once, so that other capacities of the
same athlete cost only the forces, the graph of one sequence and one search in it.
"""

from __future__ import annotations

from collections.abc import Mapping
from collections.abc import Sequence as Several
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.contacts import FREE, LIMB_NAMES
from climbpath.route.demands import with_demands
from climbpath.route.shortest import Sources, shortest_route
from climbpath.stance.stances import StanceSet, chosen_stances
from climbpath.study.climb import (
    LATTICE_STEP,
    Climb,
    Conditions,
    Ground,
    climb_on,
    ground_of,
    motion_of,
)
from climbpath.study.sequence import Placement, Sequence
from climbpath.study.splits import HANDS, splits_of
from climbpath.wall import Wall

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class HandSequence:
    """Placements of hands alone, step by step; step 0 is the start."""

    steps: tuple[tuple[tuple[str, str], ...], ...]

    @classmethod
    def of(cls, run: Sequence) -> HandSequence:
        """Those of a run; steps without any are left out."""
        rows = [tuple(sorted((p.limb, p.hold) for p in step if p.limb in HANDS))
                for step in run.steps]
        return cls((rows[0] if rows else (), *(row for row in rows[1:] if _contacts(row))))

    def opening(self) -> Sequence:
        """The same as a sequence that a plan can be made to begin with."""
        return Sequence("", tuple(tuple(Placement(limb, hold) for limb, hold in step)
                                  for step in self.steps))

    def pairs(self) -> list[tuple[str, str]]:
        """Holds of the left and the right hand after every step, "free" for none."""
        held = dict.fromkeys(HANDS, "free")
        pairs = []
        for step in self.steps:
            held.update(step)
            pairs.append((held["LH"], held["RH"]))
        return pairs


def _contacts(row: tuple[tuple[str, str], ...]) -> tuple[tuple[str, str], ...]:
    return tuple(placed for placed in row if placed[1] != "free")


class Follower:
    """Predicted splits of ``runs`` for capacities of one athlete.

    Runs with the same hand sequence share their prediction.
    """

    def __init__(self, wall: Wall, athlete: Athlete, runs: Several[Sequence],
                 step: float = LATTICE_STEP) -> None:
        self.wall, self.athlete, self.runs = wall, athlete, tuple(runs)
        self.sequences = tuple(HandSequence.of(run) for run in self.runs)
        ground = ground_of(wall, athlete, Conditions(), step)
        self.grounds = {sequence: replace(ground, stances=_along(ground, sequence))
                        for sequence in dict.fromkeys(self.sequences)}

    def times(self, capacity: Mapping[str, float]) -> list[Array]:
        """Times [s] of ``splits_of`` every run; NaN for what the model cannot follow."""
        athlete = replace(self.athlete, capacity=capacity)
        clocks = {sequence: self._clock(ground, sequence, athlete)
                  for sequence, ground in self.grounds.items()}
        return [self._predicted(run, clocks[sequence])
                for run, sequence in zip(self.runs, self.sequences, strict=True)]

    def _clock(self, ground: Ground, sequence: HandSequence, athlete: Athlete
               ) -> list[tuple[str, str, float]]:
        """Landings of hands in order: limb, hold, time [s]; none where there is no way."""
        if not ground.stances.samples:
            return []
        conditions = Conditions(opening=sequence.opening())
        climb = climb_on(ground, athlete, conditions, motion_of(athlete))
        ends = _ends(climb, sequence)
        if not len(climb.sources) or not len(ends):
            return []
        demanded = with_demands(climb.search.graph, climb.demands,
                                Sources.at(climb.sources, climb.source_time), ends,
                                climb.start_events)
        if not len(demanded.sources.nodes) or not len(demanded.targets):
            return []
        route = shortest_route(demanded.graph, demanded.graph.time_us, demanded.sources,
                               demanded.targets)
        if route is None:
            return []
        landings = []
        clock = int(climb.source_time[0])
        for arc in demanded.base_route(route).arcs:
            clock += int(climb.search.graph.time_us[arc])
            event = int(climb.search.graph.event[arc])
            if event >= 0:
                limb, contact = climb.search.code.landing(event)
                if LIMB_NAMES[limb] in HANDS:
                    landings.append((LIMB_NAMES[limb], climb.options.name(contact), clock / 1e6))
        return landings

    def _predicted(self, run: Sequence, clock: list[tuple[str, str, float]]) -> Array:
        """The predicted time of every split of a run."""
        seen: dict[tuple[str, str], list[float]] = {}
        for limb, hold, time in clock:
            seen.setdefault((limb, hold), []).append(time)
        start = {(p.limb, p.hold) for step in run.steps[:1] for p in step}
        finished = bool(clock) and clock[-1][1] in self.wall.finish
        times = []
        for split in splits_of(run, self.wall.finish):
            if split.limb not in HANDS:
                times.append(clock[-1][2] if finished else np.nan)
                continue
            touch = split.touch - ((split.limb, split.hold) in start)
            found = seen.get((split.limb, split.hold), [])
            times.append(found[touch] if 0 <= touch < len(found) else np.nan)
        return np.array(times)


def _along(ground: Ground, sequence: HandSequence) -> StanceSet:
    """The stances whose hands are where they are, or between, at some time of a sequence."""
    options, stances = ground.options, ground.stances
    codes = {"free": FREE, **{name: k for k, name in enumerate(options.ids)}}
    pairs = {(codes[left], codes[right]) for left, right in sequence.pairs()}
    pairs |= {pair for left, right in pairs
              for pair in ((left, FREE), (FREE, right), (FREE, FREE))}
    base = options.holds + 1
    wanted = np.array([(left + 1) * base + right + 1 for left, right in pairs])
    own = (stances.contacts[:, 0] + 1) * base + stances.contacts[:, 1] + 1
    return chosen_stances(stances, np.asarray(np.isin(own, wanted)))


def _ends(climb: Climb, sequence: HandSequence) -> Ints:
    """Nodes of the end: the finish, or the last placements where they are not on it."""
    if len(climb.targets):
        return climb.targets
    stances = climb.search.stances
    good = np.ones(stances.stances, dtype=bool)
    for limb, hold in _contacts(sequence.steps[-1]):
        good &= stances.contacts[:, LIMB_NAMES.index(limb)] == climb.options.index(hold)
    return climb.search.code.all_landed(np.flatnonzero(good[stances.sample_stance]))
