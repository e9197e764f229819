"""What the search asks of a motion model, and the simplest one.

A model gives times and end speeds for arrays of changes; the search knows nothing of how. The
model of forces is in ``climbpath.motion.force``; any other takes its place by offering the same
methods.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.linkage import Linkage
from climbpath.stance.options import ContactOptions
from climbpath.stance.stances import StanceSet
from climbpath.wall import Wall
from climbpath.wall.frames import GRAVITY

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]


@dataclass(frozen=True)
class Drive:
    """What carries the body during M changes.

    ``hands``, ``feet`` (M,): how many of them stay; ``start``, ``end`` (M,): what the model's own
    ``strengths`` says of the contacts that stay, at both ends of the change.
    """

    hands: Ints
    feet: Ints
    start: Array
    end: Array


class Motion(Protocol):
    """Times in s and speeds in m/s for M changes at once; every array has shape (M,) or (M, 3)."""

    @property
    def reaction(self) -> float:
        """From the start signal to the first force."""
        ...

    @property
    def least_step(self) -> float:
        """No move is shorter than this."""
        ...

    @property
    def least_carried(self) -> float:
        """Nor than this, where the limb that lands has been under way since the move before."""
        ...

    @property
    def repeat_wait(self) -> float:
        """What a hand waits before it lets go again when the other hand has not moved since."""
        ...

    @property
    def speeds(self) -> tuple[float, ...]:
        """Levels of vertical speed, ascending from 0. A faster one is never worse than a slower."""
        ...

    @property
    def durations(self) -> tuple[float, ...]:
        """Classes of how long a move lasted, ascending: limbs that land with it had at least that
        long to travel. A move may take longer than it must to be of a class.
        """
        ...

    @property
    def hand_apart(self) -> float | None:
        """Least time from the landing of a hand to that of the next, or None if hands may land
        together. Moves of hands are then a class of their own, which lasted so long.
        """
        ...

    @property
    def pair(self) -> float:
        """What a hand needs longer that lands on the hold of the other hand."""
        ...

    @property
    def in_place(self) -> bool:
        """Whether the centre of mass may rise while no limb lands, and limbs go on travelling from
        one move to the next."""
        ...

    @property
    def balanced(self) -> bool:
        """Whether samples are wanted where the contacts best carry the body."""
        ...

    @property
    def hand_holds(self) -> bool:
        """Whether a hand must have a hold whenever a limb lands, for want of forces to tell."""
        ...

    def finer(self) -> Motion:
        """The same with speed levels half as far apart, all of its own among them."""
        ...

    def strengths(
        self, wall: Wall, options: ContactOptions, linkage: Linkage, stances: StanceSet
    ) -> Array:
        """What the contacts of every sample's stance can do, (P,); more is never worse."""
        ...

    def travel(self, change: Array, drive: Drive, speed: float) -> tuple[Array, Array]:
        """Least time for ``change`` (M, 3) [m] (right, up, out of the wall) from an upward
        ``speed``, inf where it cannot be done, and the upward speed at its end.
        """
        ...

    def unhurried(self, change: Array, drive: Drive, time: Array) -> tuple[Array, Array]:
        """For a change that takes ``time``: the least upward speed at its start that lets it be so
        quick, inf where none does or the contacts cannot hold out so long, and the greatest upward
        speed that can be had at its end.
        """
        ...

    def shift(self, change: Array, drive: Drive) -> Array:
        """Time to shift the centre of mass by ``change`` (M, 3) at one height."""
        ...

    def reach(self, distance: Array, hand: Flags, quality: Array, struck: Flags) -> Array:
        """Time a limb needs for ``distance`` [m] and until it bears; a strike counts at touch."""
        ...

    def across(self, over: Array) -> Array:
        """More time for a hand that lands on the other side of the centre of mass, by ``over``
        shoulder breadths."""
        ...

    def take_off(self) -> float:
        """Time of the push before a flight, beyond what brought the body to its speed."""
        ...

    def flight(self, rise: float, speed: float) -> tuple[float, float]:
        """Time in the air to a landing ``rise`` [m] higher after leaving at ``speed``, inf where it
        cannot be reached, and the upward speed left.
        """
        ...

    def flown(self, time: float, reach: Array) -> Array:
        """Time of a flight of ``time`` after which a hand lands that has ``reach`` left to go."""
        ...


@dataclass(frozen=True)
class PacedMotion:
    """The simple rule: the larger of a paced travel and a paced reach.

    The centre of mass travels at a speed that depends on what stays on the wall, the reach takes
    a fixed time and a time by distance, and a limb needs a moment to settle. A flight leaves at
    one speed and lands at the top of its arc. The figures are round numbers that put the
    published lane's best times between the medians of observed men's and women's runs; nothing
    is fitted, and no force is looked at: a sequence may need more strength than anyone has.
    """

    reaction: float = 0.20
    least_step: float = 0.14
    least_carried: float = 0.14
    repeat_wait: float = 0.15
    hand_start: float = 0.10
    foot_start: float = 0.06
    hand_speed: float = 5.0
    foot_speed: float = 6.0
    settle: float = 0.06
    settle_poor: float = 0.10
    up_speed: dict[tuple[bool, bool], float] = field(
        default_factory=lambda: {
            (True, True): 5.0,
            (True, False): 1.4,
            (False, True): 1.5,
            (False, False): 0.5,
        }
    )
    side_speed: float = 3.0
    take_off_push: float = 0.20
    take_off_speed: float = 2.0
    speeds: tuple[float, ...] = (0.0,)
    hand_apart: float | None = None
    pair: float = 0.0
    in_place: bool = False
    balanced: bool = False
    hand_holds: bool = True

    @property
    def durations(self) -> tuple[float, ...]:
        """One class: every move lasts the least step or longer."""
        return (self.least_step,)

    def finer(self) -> PacedMotion:
        """It has one speed level only."""
        return self

    def strengths(
        self, wall: Wall, options: ContactOptions, linkage: Linkage, stances: StanceSet
    ) -> Array:
        """Not looked at."""
        return np.ones(stances.samples)

    def travel(self, change: Array, drive: Drive, speed: float) -> tuple[Array, Array]:
        """Right, up and out are paced each at its own speed, and add like sides of a box."""
        return self.shift(change, drive), np.zeros(len(change))

    def unhurried(self, change: Array, drive: Drive, time: Array) -> tuple[Array, Array]:
        """Any time that is not too short."""
        possible = time >= self.shift(change, drive)
        return np.where(possible, 0.0, np.inf), np.zeros(len(change))

    def shift(self, change: Array, drive: Drive) -> Array:
        """The same as travel."""
        up = np.empty(len(change))
        for (hands, feet), speed in self.up_speed.items():
            chosen = ((drive.hands > 0) == hands) & ((drive.feet > 0) == feet)
            up[chosen] = speed
        vertical = change[:, 1] / up
        across = change[:, 0] / self.side_speed
        out = change[:, 2] / self.side_speed
        return np.asarray(np.sqrt(vertical**2 + across**2 + out**2))

    def reach(self, distance: Array, hand: Flags, quality: Array, struck: Flags) -> Array:
        """Start, way at constant speed, and settling, longer on a poor hold."""
        start = np.where(hand, self.hand_start, self.foot_start)
        speed = np.where(hand, self.hand_speed, self.foot_speed)
        settle = np.where(struck, 0.0, self.settle + self.settle_poor * (1.0 - quality))
        return np.asarray(start + distance / speed + settle)

    def across(self, over: Array) -> Array:
        """Not looked at."""
        return np.zeros(len(over))

    def take_off(self) -> float:
        """A fixed push."""
        return self.take_off_push

    def flight(self, rise: float, speed: float) -> tuple[float, float]:
        """v / g up to a landing anywhere between the take-off and the arc's top."""
        top = self.take_off_speed**2 / (2.0 * GRAVITY)
        possible = -1e-9 <= rise <= top
        return (self.take_off_speed / GRAVITY + self.settle) if possible else np.inf, 0.0

    def flown(self, time: float, reach: Array) -> Array:
        """The reach is not looked at."""
        return np.full(len(reach), time)
