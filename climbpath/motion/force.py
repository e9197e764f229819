"""The model of forces: what a body's contacts can do sets how quickly its centre of mass moves.

Of a stance with its centre of mass at one place the load L is known (``climbpath.motion.load``):
the least common share of all capacities that holds it at rest. Its inverse c = 1 / L is the
strength, the largest upward force the contacts can give, in body weights. Loads grow in proportion
to the force, and capacities fall linearly with the speed of shortening, so

    a(v) = g (c (1 − v / V0) − 1)

is the greatest upward acceleration at the upward speed v; contacts that go limp let the body fall
with −g. A step that rises by D is made at full strength, with the mean c of its two ends as if it
were the same all along: v' = A − B v, with A = g (c − 1) and B = g c / V0, so

    v = A / B + (v1 − A / B) exp(−B T),    D = v1 w / B + (A / B) (T − w / B),   w = 1 − exp(−B T)

gives the time T (by Newton's method) and the speed at its end. With c < 1 a step is made
on speed that was brought along, as far as it carries. A step may take longer: its speed is
then shed at the start, or, from rest, spent waiting, as far as the contacts can hold the body. So
more strength, more speed or more time to spare never make anything worse.

Sideways and out of the wall the centre of mass goes from rest to rest, T = 2 √(d / a), with the
share ``SIDE_SHARE`` of the strength, which leaves √(1 − share²) of it for the rise.

That is a choice, not a bound: against the contact forces themselves (the tests, 400 samples of
four small walls) a force of that size takes 1.4 times what the contacts have in the median and 2.8
times at the 90th percentile, out of the wall or into it 1.3 and 3.8; toward the easier side 1.0
and 1.7. So steps far aside are taken to be quicker than they are. References: Pham & Pham 2018,
arXiv 1707.07239 (pacing under bounds on forces).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.motion.capacity import Capacities
from climbpath.motion.model import Drive
from climbpath.motion.strength import sample_strengths
from climbpath.posture.linkage import Linkage
from climbpath.stance.options import ContactOptions
from climbpath.stance.stances import StanceSet
from climbpath.wall import Wall
from climbpath.wall.frames import GRAVITY

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

SPEED_STEP = 0.1
SPEED_LEVELS = 8
"""Levels of upward speed: those of bodies that could still rise by 0, 1, 2, … steps of this height,
m. So a body that flies loses as many levels as it rises steps, and nothing by rounding."""



def speed_levels(number: int, step: float) -> tuple[float, ...]:
    """Speeds [m/s] that rises of 0, 1, 2, … times ``step`` [m] use up, √(2 g k step)."""
    return tuple(math.sqrt(2.0 * GRAVITY * step * k) for k in range(number))


SPEEDS = speed_levels(SPEED_LEVELS, SPEED_STEP)
"""Up to 3.7 m/s: a little more than the mean of the fastest runs, 3.2 m/s."""

SIDE_SHARE = 0.3
"""Share of the strength that a sideways shift may use (a choice of the model)."""

SIDE_FREE = 0.005
"""A shift across the line of less than this, m, takes no force."""

LEVEL = 1e-9

LONGEST = 1e3
"""No step takes longer than this, s."""

LEAST_SLOPE = 1e-5
"""Contacts that give next to nothing are taken to lose it this slowly with speed, 1/s: too little
to matter, and enough to divide by."""

ROUNDS = 4
"""Rounds of Newton's method for the time of a step. It is then known to 10 µs, but for steps that
end near a standstill, whose end speed may be off by some mm/s."""


def _risen(limit: Array, slope: Array, speed: float, time: Array) -> Array:
    """Height after ``time`` of v' = B (limit − v) from ``speed``."""
    share = -np.expm1(-slope * time) / slope
    return np.asarray(speed * share + limit * (time - share))


@dataclass(frozen=True)
class ForceMotion:
    """Motion from contact forces, of one athlete's capacities; times in s.

    ``stronger`` multiplies every strength, to ask what more of it would do.
    """

    capacities: Capacities
    least_step: float = 0.14
    least_carried: float = 0.06
    repeat_wait: float = 0.20
    hand_start: float = 0.10
    foot_start: float = 0.06
    settle_poor: float = 0.10
    side_speed: float = 8.0
    longer: tuple[float, ...] = (0.14, 0.25, 0.40)
    speeds: tuple[float, ...] = SPEEDS
    stronger: float = 1.0
    hand_apart: float | None = 0.16
    pair: float = 0.10
    in_place: bool = True
    balanced: bool = True
    hand_holds: bool = False

    @property
    def reaction(self) -> float:
        """The athlete's own."""
        return self.capacities.reaction

    @property
    def durations(self) -> tuple[float, ...]:
        """Those that credit nothing, and longer ones."""
        return (0.0, *self.longer)

    def strengths(
        self, wall: Wall, options: ContactOptions, linkage: Linkage, stances: StanceSet
    ) -> Array:
        """Greatest upward force of every sample's contacts, (P,) [body weights]."""
        return self.stronger * sample_strengths(wall, options, linkage, self.capacities, stances)

    def finer(self) -> ForceMotion:
        """With a speed level between each two."""
        return replace(self, speeds=speed_levels(2 * len(self.speeds) - 1,
                                                 self.speeds[1]**2 / (4.0 * GRAVITY)))

    def _upward(self, change: Array, drive: Drive) -> tuple[Array, Array, Array, Flags]:
        """Rise, mean strength left for it, least time of the shift sideways and out, and whether
        the contacts hold the body at both ends."""
        aside = np.hypot(change[:, 0], change[:, 2])
        shifts = aside > SIDE_FREE
        strength = 0.5 * (drive.start + drive.end)
        push = SIDE_SHARE * GRAVITY * strength
        time = np.where(shifts, 2.0 * np.sqrt(aside / np.maximum(push, 1e-12)), 0.0)
        left = np.where(shifts, np.sqrt(1.0 - SIDE_SHARE**2), 1.0)
        held = left * np.minimum(drive.start, drive.end) >= 1.0
        return change[:, 1], left * strength, time, held

    def _law(self, strength: Array) -> tuple[Array, Array]:
        """A and B of v' = A − B v at full strength."""
        slope = np.maximum(GRAVITY * strength / self.capacities.speed, LEAST_SLOPE)
        return GRAVITY * (strength - 1.0), slope

    def _quickest(self, rise: Array, strength: Array, speed: float) -> tuple[Array, Array]:
        """Time and end speed at full strength from ``speed``; inf where it does not carry."""
        pull, slope = self._law(strength)
        limit = pull / slope
        # A body that slows down comes to a halt after this time, and so high.
        slows = (pull < 0.0) & (speed > 0.0)
        halt = np.where(slows, np.log1p(-speed / np.where(slows, limit, -1.0)) / slope, np.inf)
        top = _risen(limit, slope, speed, np.where(slows, halt, 0.0))
        carried = (rise > LEVEL) & np.where(pull < 0.0, slows & (top >= rise), True)
        carried &= (pull > 0.0) | (speed > 0.0)
        # Newton's method on the height, from constant acceleration at the start's.
        start = np.where(carried, pull - slope * speed, 1.0)
        under = np.maximum(speed**2 + 2.0 * start * np.maximum(rise, 0.0), 0.0)
        time = 2.0 * np.maximum(rise, 0.0) / np.maximum(speed + np.sqrt(under), 1e-9)
        time = np.minimum(time, halt)
        for _ in range(ROUNDS):
            now = np.maximum(limit + (speed - limit) * np.exp(-slope * time), 1e-3)
            time += (rise - _risen(limit, slope, speed, time)) / now
            time = np.clip(time, 0.0, np.minimum(halt, LONGEST))
        after = np.maximum(limit + (speed - limit) * np.exp(-slope * time), 0.0)
        return np.where(carried, time, np.inf), np.where(carried, after, 0.0)

    def travel(self, change: Array, drive: Drive, speed: float) -> tuple[Array, Array]:
        """At full strength; a step down is made from rest to rest, one on a level by shifting."""
        rise, strength, aside, held = self._upward(change, drive)
        time, after = self._quickest(rise, strength, speed)
        if speed <= 0.0:
            down = np.where((rise <= LEVEL) & held, self._down(rise, strength), np.inf)
            time = np.minimum(time, down)
        # A shift sideways that takes longer than the rise needs the speed to be shed.
        late = aside > time
        if late.any():
            need, slower = self._unhurried(rise, strength, aside, held)
            possible = need <= speed + LEVEL
            after = np.where(late, np.where(possible, slower, 0.0), after)
            time = np.where(late, np.where(possible, aside, np.inf), time)
        return np.where(time > LONGEST, np.inf, time), after

    def _down(self, rise: Array, strength: Array) -> Array:
        """Least time from rest to rest, falling with g and stopping with the strength that is
        left: T = √(2 D (a + g) / (a g)) with a = g (c − 1). 0 on a level, if it can be held."""
        depth = np.maximum(-rise, 0.0)
        stop = GRAVITY * (strength - 1.0)
        share = np.maximum(stop, 1e-12)
        time = np.sqrt(2.0 * depth * (share + GRAVITY) / (share * GRAVITY))
        time = np.where(depth <= LEVEL, 0.0, time)
        return np.where(stop >= 0.0, time, np.inf)

    def _unhurried(self, rise: Array, strength: Array, time: Array, held: Flags
                   ) -> tuple[Array, Array]:
        """Start speed that a rise in ``time`` needs, and its end speed, at full strength.

        With w = 1 − exp(−B T) the law gives v1 = A / B + (D − A T / B) B / w, v2 = A / B + (v1 −
        A / B) (1 − w).
        """
        pull, slope = self._law(strength)
        limit, time = pull / slope, np.minimum(np.maximum(time, 1e-9), LONGEST)
        share = -np.expm1(-slope * time)
        need = limit + (rise - limit * time) * slope / share
        after = limit + (need - limit) * (1.0 - share)
        # Slower than from rest: wait first, as long as the contacts hold the body.
        _, from_rest = self._quickest(rise, strength, 0.0)
        waits = (need < 0.0) | (rise <= LEVEL)
        after = np.where(waits, from_rest, after)
        need = np.where(waits, np.where(held, 0.0, np.inf), need)
        return np.where(after < 0.0, np.inf, need), np.maximum(after, 0.0)

    def unhurried(self, change: Array, drive: Drive, time: Array) -> tuple[Array, Array]:
        """The same, where the shift sideways is no slower; steps down end at rest."""
        rise, strength, aside, held = self._upward(change, drive)
        need, after = self._unhurried(rise, strength, time, held)
        down = rise <= LEVEL
        quick = np.where(down, np.maximum(aside, self._down(rise, strength)), aside) > time
        return np.where(quick, np.inf, need), np.where(down, 0.0, after)

    def shift(self, change: Array, drive: Drive) -> Array:
        """Across and out at a fixed speed: the samples of a stance and of its support at one level
        differ, and the body goes from one to the other on its way.
        """
        return np.asarray(np.hypot(change[:, 0], change[:, 2]) / self.side_speed)

    def reach(self, distance: Array, hand: Flags, quality: Array, struck: Flags) -> Array:
        """Start, way at constant speed, and settling, longer on a poor hold.

        Settling is longer on small holds, reaching is not (Bourdin et al. 1999, abstract).
        """
        start = np.where(hand, self.hand_start, self.foot_start)
        settle = np.where(struck, 0.0, self.capacities.settle + self.settle_poor * (1.0 - quality))
        return np.asarray(start + distance / self.capacities.reach_speed + settle)

    def across(self, over: Array) -> Array:
        """A hand reaches across by turning the shoulders, by asin(over), and they turn back after.

        One of the two goes on while the hand reaches; the other is charged: from rest to rest,
        T = 2 √(angle / α), with the angular acceleration that turning can have.
        """
        angle = np.arcsin(np.minimum(over, 1.0))
        return np.asarray(2.0 * np.sqrt(angle / max(self.capacities.turn, 1e-3)))

    def take_off(self) -> float:
        """Nothing more: the push is the rise that brought the body to its speed."""
        return 0.0

    def flight(self, rise: float, speed: float) -> tuple[float, float]:
        """Ballistic: v2² = v² − 2 g rise, T = (v − v2) / g. Landing is on the way up."""
        under = speed**2 - 2.0 * GRAVITY * rise
        if speed <= 0.0 or rise <= LEVEL or under < 0.0:
            return np.inf, 0.0
        after = float(np.sqrt(under))
        return (speed - after) / GRAVITY, after

    def flown(self, time: float, reach: Array) -> Array:
        """The hand lands only if it is there in time."""
        return np.where(reach <= time, time, np.inf)
