"""The stances of a body on a wall with their samples, and the links between them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FREE, SMEAR, Limb
from climbpath.posture.linkage import Linkage
from climbpath.posture.newton import Postures
from climbpath.posture.samples import Lattice, com_samples
from climbpath.stance.enumerate import Allowed, Found, all_stances, batch_of
from climbpath.stance.options import ContactOptions, contact_points

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

SAME_POINT = 1e-3
"""A smearing foot counts as staying put while its point moves less than this, m."""


@dataclass(frozen=True)
class StanceSet:
    """N stances in canonical order, their P centre-of-mass samples, and their supports.

    ``contacts`` (N, 4); ``points`` (N, 4, 3) world [m]; ``margin`` (N,) [m];
    ``support`` (N, 4): the stance that is left when that limb lets go, -1 where there is none.
    Samples of stance s are ``first_sample[s]:first_sample[s + 1]``, ascending in level:
    ``sample_stance``, ``level`` (P,), ``com`` (P, 3) world [m], ``turn`` (3, 3, P) and ``shift``
    (3, P) in the stance's base axes, ``spare`` (P,) [m].
    """

    contacts: Ints
    points: Array
    margin: Array
    support: Ints
    first_sample: Ints
    sample_stance: Ints
    level: Ints
    com: Array
    turn: Array
    shift: Array
    spare: Array
    lattice: Lattice

    @property
    def stances(self) -> int:
        """Number of stances N."""
        return len(self.margin)

    @property
    def samples(self) -> int:
        """Number of samples P."""
        return len(self.level)

    def find(self, contacts: Ints, holds: int) -> Ints:
        """Indices of stances (M, 4) in this set, -1 where absent. ``holds``: of the wall."""
        return _find(stance_keys(self.contacts, holds), stance_keys(contacts, holds))


def stance_keys(contacts: Ints, holds: int) -> Ints:
    """One number a stance, ascending in canonical order. Shape (N, 4) -> (N,)."""
    digits = np.where(contacts >= 0, contacts, holds - 1 - contacts)
    key = np.zeros(len(contacts), dtype=np.int64)
    for limb in Limb:
        key = key * (holds + 3) + digits[:, limb]
    return key


def stance_set(
    options: ContactOptions, linkage: Linkage, allowed: Allowed, line_x: float, lattice: Lattice,
    missing: float = 0.0, memory_bytes: float = np.inf,
) -> StanceSet:
    """Find every stance, sample it, and link it to the stances that support moves into it."""
    found = all_stances(options, linkage, allowed, missing, memory_bytes)
    keys = stance_keys(found.contacts, options.holds)
    order = np.argsort(keys, kind="stable")
    found, keys = found.take(order), keys[order]
    batch = batch_of(options, linkage, found.contacts)
    samples = com_samples(
        linkage, batch, Postures(found.margin, found.turn, found.shift), line_x, lattice
    )
    points = contact_points(options, linkage, found.contacts)
    # Row by row, since a batch of all samples would be many times the size of what is needed.
    world = np.stack([
        batch.origin[i, samples.stance]
        + sum(batch.axes[j, i, samples.stance] * samples.com[j] for j in range(3))
        for i in range(3)
    ], axis=1)
    first = np.searchsorted(samples.stance, np.arange(len(keys) + 1))
    return StanceSet(
        contacts=found.contacts,
        points=points,
        margin=found.margin,
        support=_supports(found, keys, points, options.holds),
        first_sample=first,
        sample_stance=samples.stance,
        level=samples.level,
        com=world,
        turn=samples.turn,
        shift=samples.shift,
        spare=samples.spare,
        lattice=lattice,
    )


def _find(keys: Ints, wanted: Ints) -> Ints:
    if not len(keys):
        return np.full(len(wanted), -1)
    place = np.minimum(np.searchsorted(keys, wanted), len(keys) - 1)
    return np.where(keys[place] == wanted, place, -1)


def _supports(found: Found, keys: Ints, points: Array, holds: int) -> Ints:
    """For each stance and engaged limb the stance without it, where smears stay put. (N, 4)"""
    support = np.full((len(keys), 4), -1, dtype=np.int64)
    for limb in Limb:
        rows = np.flatnonzero(found.contacts[:, limb] != FREE)
        less = found.contacts[rows].copy()
        less[:, limb] = FREE
        place = _find(keys, stance_keys(less, holds))
        smears = less == SMEAR
        moved = np.abs(points[rows] - points[np.maximum(place, 0)]).max(axis=2)
        slid = (smears & (moved > SAME_POINT)).any(axis=1)
        support[rows, limb] = np.where(slid, -1, place)
    return support
