"""What the search asks of a motion model, and the first, simple one.

A model gives times for arrays of changes; the search knows nothing of how. A fuller model takes
the place of ``PacedMotion`` by offering the same methods.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

GRAVITY = 9.81


@dataclass(frozen=True)
class Drive:
    """What carries the body while a limb moves: numbers (M,) of hands and of feet that stay."""

    hands: Ints
    feet: Ints


class Motion(Protocol):
    """Times in s for M changes at once; every array has shape (M,) or (M, 3)."""

    @property
    def reaction(self) -> float:
        """From the start signal to the first force."""
        ...

    @property
    def least_step(self) -> float:
        """No move is shorter than this; a limb that lands with another had this long to travel."""
        ...

    @property
    def repeat_wait(self) -> float:
        """What a hand waits before it lets go again when the other hand has not moved since."""
        ...

    def travel(self, change: Array, drive: Drive) -> Array:
        """Time the centre of mass needs for ``change`` (M, 3) [m]: right, up, out of the wall."""
        ...

    def reach(self, distance: Array, hand: NDArray[np.bool_], quality: Array,
              struck: NDArray[np.bool_]) -> Array:
        """Time a limb needs for ``distance`` [m] and until it bears; a strike counts at touch."""
        ...

    def take_off(self) -> float:
        """Time of the push before a flight."""
        ...

    def flight(self, rise: Array) -> Array:
        """Time in the air to a landing ``rise`` [m] higher; inf where it cannot be reached."""
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

    def travel(self, change: Array, drive: Drive) -> Array:
        """Right, up and out are paced each at its own speed, and add like sides of a box."""
        up = np.empty(len(change))
        for (hands, feet), speed in self.up_speed.items():
            chosen = ((drive.hands > 0) == hands) & ((drive.feet > 0) == feet)
            up[chosen] = speed
        vertical = change[:, 1] / up
        across = change[:, 0] / self.side_speed
        out = change[:, 2] / self.side_speed
        return np.asarray(np.sqrt(vertical**2 + across**2 + out**2))

    def reach(self, distance: Array, hand: NDArray[np.bool_], quality: Array,
              struck: NDArray[np.bool_]) -> Array:
        """Start, way at constant speed, and settling, longer on a poor hold."""
        start = np.where(hand, self.hand_start, self.foot_start)
        speed = np.where(hand, self.hand_speed, self.foot_speed)
        settle = np.where(struck, 0.0, self.settle + self.settle_poor * (1.0 - quality))
        return np.asarray(start + distance / speed + settle)

    def take_off(self) -> float:
        """A fixed push."""
        return self.take_off_push

    def flight(self, rise: Array) -> Array:
        """v / g up to a landing anywhere between the take-off and the arc's top."""
        top = self.take_off_speed**2 / (2.0 * GRAVITY)
        possible = (rise >= -1e-9) & (rise <= top)
        return np.where(possible, self.take_off_speed / GRAVITY + self.settle, np.inf)
