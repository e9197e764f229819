"""What of a route can be paced anew: runs of rises whose contacts stay as the search chose them.

A route is read as rises of the centre of mass, each carried by one stance, with landings and
releases at single instants between them. A **piece** is a run of rises that nothing stops: a
flight, a step along or down, a wait at rest part pieces and keep what the search says of them.
Where limbs land and let go at one height the body has one place, the **crest**: what is possible
with all limbs on is possible with any of them off.
"""

from __future__ import annotations

from collections.abc import Callable, Container
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from climbpath.contacts import Limb
from climbpath.motion.model import Drive
from climbpath.route.measures import landing_classes
from climbpath.route.nodes import LANDED
from climbpath.route.shortest import Route
from climbpath.study.climb import Climb

STILL, RISE, MOVE, LEVEL, JOINED, RELEASE, LEAVE, LAND = range(8)
"""Kinds of arcs: nothing but a change of phase; a rise in place; one that ends with a landing; a
move that gains no height; a landing with the move before; a release; take-off; end of a flight."""

LATE = 1e-6
"""A limb that is late by less than this, s, is in time."""

Need = Callable[[int], float]
"""Time [s] that the limb landing with an arc must have had for its way, by the arc's place."""


@dataclass(frozen=True)
class Piece:
    """A run of K rises. ``rises`` (K,): places of their arcs on the route; ``crests`` (K + 1,):
    places of the nodes where the body stands between them. It takes the place of the arcs from
    ``begin`` up to ``end``. ``start_speed``, ``end_speed``: upward [m/s], None if free.
    ``pinned``: the body at the first or last crest stays as the search has it.
    """

    rises: tuple[int, ...]
    crests: tuple[int, ...]
    begin: int
    end: int
    start_speed: float
    end_speed: float | None
    pinned: tuple[bool, bool]


class RouteReader:
    """A route of one climb, arc by arc."""

    def __init__(self, climb: Climb, route: Route) -> None:
        self.climb, self.search, self.motion = climb, climb.search, climb.motion
        self.nodes = [int(node) for node in route.nodes]
        code, stances = climb.search.code, climb.search.stances
        self.sample = code.sample(route.nodes).tolist()
        self.stance = [int(stances.sample_stance[s]) if s >= 0 else -1 for s in self.sample]
        self.phase = [node % code.phases if node < code.plain else -1 for node in self.nodes]
        self.time = [int(climb.search.graph.time_us[arc]) for arc in route.arcs]
        self.event = [int(climb.search.graph.event[arc]) for arc in route.arcs]
        self.classes = landing_classes(climb.motion)
        self.kinds = [self._kind(place) for place in range(len(route.arcs))]

    def speed(self, place: int) -> float:
        """Upward speed at a node [m/s]."""
        return self.motion.speeds[int(self.search.code.speed(np.array(self.nodes[place])))]

    def limb(self, place: int) -> Limb:
        """The limb that lands with an arc."""
        return self.search.code.landing(self.event[place])[0]

    def hub(self, place: int) -> int:
        """The stance that carries the body along an arc."""
        return self.stance[place]

    def _kind(self, place: int) -> int:
        tail, head = self.sample[place], self.sample[place + 1]
        if head < 0:
            return LEAVE
        if tail < 0:
            return LAND
        if tail == head:
            return STILL
        level = self.search.stances.level
        up = level[head] > level[tail]
        if self.stance[place] == self.stance[place + 1]:
            return RISE if up else LEVEL
        before, after = self.phase[place] >= LANDED, self.phase[place + 1] >= LANDED
        if after and up:
            return MOVE
        if before and after:
            return JOINED
        return LEVEL if after else RELEASE

    def _waits(self, place: int) -> bool:
        """Whether a release waits for the other hand's move."""
        return self.kinds[place] == RELEASE and self._extra(place) > 0

    def _stops(self, place: int, kept: Container[int]) -> bool:
        return self.kinds[place] in (LEVEL, LEAVE, LAND) or place in kept or self._waits(place)

    def _crest(self, first: int, last: int) -> int:
        """Of the nodes from ``first`` to ``last`` the last one before a limb lets go."""
        return next((p for p in range(first, last) if self.kinds[p] == RELEASE), last)

    def pieces(self, kept: Container[int] = ()) -> list[Piece]:
        """All pieces, from the bottom. ``kept``: places of rises that stay as they are."""
        runs: list[list[int]] = []
        for p, kind in enumerate(self.kinds):
            if kind not in (RISE, MOVE) or p in kept:
                continue
            if runs and not any(self._stops(q, kept) for q in range(runs[-1][-1] + 1, p)):
                runs[-1].append(p)
            else:
                runs.append([p])
        return [self._piece(run, kept) for run in runs]

    def _piece(self, rises: list[int], kept: Container[int]) -> Piece:
        first, last = rises[0], rises[-1]
        stop = next((q for q in range(first - 1, -1, -1) if self._stops(q, kept)), -1)
        begin, pinned = stop + 1, True
        crest = self._crest(begin, first)
        before = self.kinds[stop] if stop >= 0 else STILL
        if before == LAND:
            # A limb that is late after a flight is waited for where the flight ended.
            pinned = any(self.kinds[q] == JOINED and self._extra(q) > 0
                         for q in range(begin, first))
        if before in (LEVEL, RISE, MOVE) or (before == LAND and pinned):
            begin = crest
        crests = [crest]
        crests += [self._crest(a + 1, b) for a, b in pairwise(rises)]
        after = next((q for q in range(last + 1, len(self.kinds)) if self._stops(q, kept)), None)
        if after is None:
            end, end_speed, held = len(self.kinds), None, False
        else:
            end, held = self._crest(last + 1, after), self.kinds[after] != LEAVE
            goes_on = self.kinds[after] in (LEAVE, RISE, MOVE)
            end_speed = self.speed(after) if goes_on else 0.0
        return Piece(tuple(rises), (*crests, end), begin, end, self.speed(begin), end_speed,
                     (pinned, held))

    def _extra(self, place: int) -> int:
        """What a landing or release takes beyond the shift between its samples [us]; 0 for none."""
        stances = self.search.stances
        first, second = self.sample[place], self.sample[place + 1]
        change = stances.com[[second]] - stances.com[[first]]
        strength, none = self.search.strength, np.zeros(1, dtype=np.int64)
        drive = Drive(none, none, strength[[first]], strength[[second]])
        shift = float(self.motion.shift(change, drive)[0])
        return max(self.time[place] - round(shift * 1e6) - 1, 0)

    def least(self, piece: Piece, need: Need) -> list[float] | None:
        """What each rise of a piece takes at least [s], as the search's moves do.

        A limb that has been under way since the rise before counts the class of that rise as time
        it has had, and that rise keeps as long. None where a limb is late at the first crest.
        """
        floors: list[float] = []
        for place in range(piece.begin, piece.end):
            kind = self.kinds[place]
            if kind == RISE:
                floors.append(0.0)
            elif kind == MOVE:
                self._moved(place, need(place), floors)
            elif kind == JOINED:
                late = max(need(place) - self.classes[self.phase[place] - LANDED][0], 0.0)
                if not floors and late > LATE:
                    return None
                if floors:
                    self._credited(self.phase[place], floors)
                    floors[-1] += late
        if piece.end < len(self.kinds):
            self._credited(self.phase[piece.end], floors)
        return floors

    def _moved(self, place: int, need: float, floors: list[float]) -> None:
        phase = self.phase[place]
        least = max(need, self.motion.least_step)
        if phase >= LANDED:
            least = max(least - self.classes[phase - LANDED][0], self.motion.least_carried)
            self._credited(phase, floors)
        floors.append(least)

    def _credited(self, phase: int, floors: list[float]) -> None:
        """A rise that later landings count on lasts as long as its class says.

        One that is shorter ended with a limb that had begun a rise earlier, as had those that count
        on it: then it lasts as long as that limb needs.
        """
        if phase < LANDED or not floors:
            return
        had, of_hand = self.classes[phase - LANDED]
        if not of_hand and (had > self.classes[0][0] or floors[-1] <= 0.0):
            floors[-1] = max(floors[-1], had)
