"""Random stances around a body, and what tests need to put a solved one into the world."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete, make_athlete
from climbpath.contacts import FLOOR, FREE
from climbpath.posture.assembly import assemble
from climbpath.posture.batch import StanceBatch, stance_batch
from climbpath.posture.linkage import Linkage, linkage_of
from climbpath.posture.newton import Postures
from climbpath.posture.solver import solve_postures
from climbpath.wall import Section, Surface, Wall, surface_of

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

ATHLETES = (
    make_athlete(sex="male", stature=1.79, mass=70.0),
    make_athlete(sex="female", stature=1.66, mass=58.0),
)
LINKAGES = tuple(linkage_of(athlete) for athlete in ATHLETES)

# Contacts of LH, RH, LF, RF lie in these boxes about a point near the hips, (x, y), m.
LOW = np.array([[-0.8, 0.2], [-0.35, 0.2], [-0.75, -1.15], [-0.25, -1.15]])
HIGH = np.array([[0.35, 1.35], [0.8, 1.35], [0.25, -0.05], [0.75, -0.05]])
OTHER_SIDE = [1, 0, 3, 2]


def flat(overhang_deg: float = 5.0, *more: float, height: float = 15.0) -> Surface:
    """The surface of a wall whose sections, each ``height`` m, have these overhangs."""
    angles = (overhang_deg, *more)
    sections = tuple(Section(height, float(np.deg2rad(angle))) for angle in angles)
    return surface_of(Wall("drawn", 3.0, 1.5, -0.2, sections, (), (), ()))


@dataclass(frozen=True)
class Drawn:
    """N stances of one athlete: ``contacts``, ``strike`` (N, 4), ``points`` (N, 4, 3) [m]."""

    which: int
    surface: Surface
    contacts: Ints
    points: Array
    strike: NDArray[np.bool_]

    @property
    def athlete(self) -> Athlete:
        """The body."""
        return ATHLETES[self.which]

    @property
    def linkage(self) -> Linkage:
        """Its linkage."""
        return LINKAGES[self.which]

    def take(self, index: Ints | NDArray[np.bool_]) -> Drawn:
        """The chosen stances."""
        return Drawn(self.which, self.surface, self.contacts[index], self.points[index],
                     self.strike[index])

    def without(self, limb: int) -> Drawn:
        """The same stances with one limb free."""
        contacts = self.contacts.copy()
        contacts[:, limb] = FREE
        return Drawn(self.which, self.surface, contacts, self.points, self.strike)

    def mirrored(self) -> Drawn:
        """The mirror images about x = 0."""
        points = self.points[:, OTHER_SIDE] * [-1.0, 1.0, 1.0]
        return Drawn(self.which, self.surface, self.contacts[:, OTHER_SIDE], points,
                     self.strike[:, OTHER_SIDE])

    def batch(self) -> StanceBatch:
        """What the solver takes."""
        return stance_batch(self.linkage, self.surface, self.contacts, self.points, self.strike,
                            self.surface.floor_height)

    def solved(self) -> Postures:
        """The solver's answer."""
        return solve_postures(self.linkage, self.batch())


def drawn(which: int, count: int, seed: int, surface: Surface | None = None) -> Drawn:
    """Random stances: one to four limbs engaged, some feet on the floor, some hands striking."""
    surface = surface or flat()
    rng = np.random.default_rng(seed)
    contacts = np.tile(np.arange(4), (count, 1))
    points = np.zeros((count, 4, 3))
    low = rng.random(count) < 0.25
    along = np.where(low, rng.uniform(0.7, 1.6, count), rng.uniform(2.5, 12.0, count))
    across = rng.uniform(0.8, 2.2, count)
    for limb in range(4):
        x, y = (rng.uniform(LOW[limb, k], HIGH[limb, k], count) for k in range(2))
        points[:, limb] = surface.to_world(across + x, along + y, rng.uniform(0.0, 0.08, count))
    free = rng.random((count, 4)) < 0.2
    floor = (rng.random((count, 4)) < 0.5) & low[:, None]
    floor[:, :2] = False
    contacts[free] = FREE
    contacts[floor] = FLOOR
    contacts[(contacts == FREE).all(axis=1), 0] = 0
    strike = np.zeros((count, 4), dtype=bool)
    hands = rng.integers(0, 2, count)
    rows = np.flatnonzero(rng.random(count) < 0.1)
    strike[rows, hands[rows]] = contacts[rows, hands[rows]] >= 0
    return Drawn(which, surface, contacts, points, strike)


def joints_in_world(stances: Drawn, postures: Postures, index: Ints) -> Array:
    """Assembled joints (n, 19, 3) in the world of the chosen stances, m."""
    batch = stances.batch().take(index)
    joints = assemble(
        stances.linkage, batch, postures.turn[..., index], postures.shift[:, index]
    )
    return batch.to_world(joints.transpose(1, 0, 2)).transpose(2, 1, 0)


def sections_of(stances: Drawn, batch: StanceBatch) -> Ints:
    """The section whose axes each stance is solved in, (N,)."""
    along = np.einsum("jn,kj->nk", batch.axes[1], stances.surface.up)
    return np.asarray(along.argmax(axis=1))
