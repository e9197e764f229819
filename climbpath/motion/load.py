"""How hard a stance is to hold: shares of the limbs' capacities that its contact forces take.

The contact forces f_i at points p_i, with the centre of mass at c, give the body the acceleration
a (body weights as the unit of force, g = 9.81 m/s² downward):

    Σ f_i = (a − g) / g,    Σ (p_i − c) × f_i + m = 0,    f_i = Σ_k c_ik r_ik with c_ik ≥ 0

where r_ik are the rays of contact i's cone and |m_j| ≤ s α k_j² / g is what turning of the body
absorbs about axis j, k_j the radius of gyration. A limb's share is Σ_k c_ik over its capacity.
``least_load`` finds the smallest share s that is enough for all limbs and for turning alike,
``limb_loads`` the shares with the least sum of squares, turning's own counted as one more.

Everything is solved for arrays of stances at once (``climbpath.motion.interior``). 0 is a stance
that needs nothing, 1 takes all that some limb has, and a stance that needs more than ``LIMIT``
times what the limbs have, or that no forces hold at all, has the load inf.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.motion.interior import Solution, solve
from climbpath.motion.newton import Cases

Array = NDArray[np.float64]

UP = np.array([0.0, 1.0, 0.0])
"""What a body at rest needs: its own weight, upward."""

LIMIT = 100.0
"""Loads above this are given as inf. Far beyond strength the question is only whether forces
exist; that a load is larger is proved by a bound from below, not guessed."""

HELD = 1e-6
"""Equilibrium that is missed by more than this at the end (body weights, and times m) counts as
not held: only stances that need next to nothing more than there is come so close."""

CHUNK = 2048
"""Stances solved together, so that their arrays stay in the processor's cache."""


@dataclass(frozen=True)
class Held:
    """What holds the body in N stances with L contacts of K rays.

    ``rays`` (N, L, K, 3): unit vectors of each contact's cone, the force on the climber, in world
    axes; 0 for a limb that bears nothing. ``point`` (N, L, 3) and ``com`` (N, 3) [m].
    ``capacity`` (N, L) [body weights]: bound on the sum of a contact's ray coefficients.
    ``turn`` (N, 3) [body weights times m]: moment α k² / g that turning of the body absorbs about
    each axis at a share of 1; 0 is the strict static balance.
    """

    rays: Array
    point: Array
    com: Array
    capacity: Array
    turn: Array

    @property
    def size(self) -> int:
        """Number of stances N."""
        return len(self.com)

    def take(self, index: NDArray[np.int64] | slice) -> Held:
        """The chosen stances."""
        return Held(self.rays[index], self.point[index], self.com[index], self.capacity[index],
                    self.turn[index])

    def bearing(self) -> NDArray[np.bool_]:
        """Which limbs can bear anything, (N, L)."""
        return (self.capacity > 0.0) & (np.abs(self.rays) > 0.0).any(axis=(2, 3))


@dataclass(frozen=True)
class LeastLoad:
    """Least common share of N stances.

    ``load`` (N,): a bound from below, inf where it is over ``LIMIT`` or no forces hold the stance.
    ``gap`` (N,): how far above it the forces that were found lie (the duality gap), inf likewise.
    """

    load: Array
    gap: Array


@dataclass(frozen=True)
class LimbLoads:
    """Shares of N stances whose squares have the least sum.

    ``share`` (N, L) of each limb's capacity, 0 for a limb that bears nothing; ``turning`` (N,) of
    what turning absorbs; ``force`` (N, L, 3) [body weights] on the climber. Where no forces hold
    the stance the shares of the limbs that could bear are inf, and the forces NaN.
    """

    share: Array
    turning: Array
    force: Array


def _cases(held: Held, need: Array) -> Iterator[tuple[slice, Cases]]:
    """The stances in chunks, components first, rays scaled by the capacity."""
    for begin in range(0, held.size, CHUNK):
        part = slice(begin, min(begin + CHUNK, held.size))
        one = held.take(part)
        capacity = np.maximum(one.capacity, 0.0)
        rays = one.rays * capacity[:, :, None, None]
        point = one.point - one.com[:, None, :]
        wanted = np.zeros((6, len(capacity)))
        wanted[:3] = need[part].T
        yield part, Cases(
            np.ascontiguousarray(np.moveaxis(rays, (0, 1, 2, 3), (3, 2, 1, 0))),
            np.ascontiguousarray(np.moveaxis(point, (0, 1, 2), (2, 1, 0))),
            np.ascontiguousarray(one.turn.T),
            wanted,
        )


def _lost(found: Solution) -> NDArray[np.bool_]:
    return ~found.bounded | ~(found.missed <= HELD)


def _needed(held: Held, need: Array | None) -> Array:
    return np.broadcast_to(UP if need is None else need, (held.size, 3))


def least_load(held: Held, need: Array | None = None) -> LeastLoad:
    """The smallest common share that carries each stance.

    ``need`` (N, 3) or (3,): (a − g) / g, the sum of forces in body weights; rest if left out.
    """
    wanted = _needed(held, need)
    load, gap = np.empty(held.size), np.empty(held.size)
    for part, cases in _cases(held, wanted):
        found = solve(cases, True, LIMIT)
        lost = _lost(found)
        load[part] = np.where(lost, np.inf, np.maximum(found.value, 0.0))
        gap[part] = np.where(lost, np.inf, found.gap)
    return LeastLoad(load, gap)


def limb_loads(held: Held, need: Array | None = None) -> LimbLoads:
    """The shares that minimise the sum of their squares; arguments as of ``least_load``."""
    wanted = _needed(held, need)
    limbs = held.capacity.shape[1]
    share, turning = np.empty((held.size, limbs)), np.empty(held.size)
    force = np.empty((held.size, limbs, 3))
    # One share over LIMIT in every limb and in turning would sum to this: a larger value proves
    # that the least common share is over LIMIT too.
    limit = 0.5 * (limbs + 1) * LIMIT**2
    for part, cases in _cases(held, wanted):
        found = solve(cases, False, limit)
        lost = _lost(found)
        share[part] = np.where(lost, np.inf, np.maximum(found.limb_share, 0.0)).T
        turning[part] = np.where(lost, np.inf, found.turn_share)
        force[part] = np.where(lost, np.nan, cases.forces(found.ray_share)).T
    return LimbLoads(np.where(held.bearing(), share, 0.0), turning, force)
