"""The stances of a body on a wall with their samples, and the links between them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FREE, SMEAR, Limb
from climbpath.posture.linkage import Linkage
from climbpath.posture.newton import Postures
from climbpath.posture.samples import Lattice, com_samples
from climbpath.stance.balance import balance_x, balanced_samples, with_balance
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
    Samples of stance s are ``first_sample[s]:first_sample[s + 1]``, ascending in level, one or two
    a level (nearest the line, then where the contacts best carry the body):
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


def chosen_stances(stances: StanceSet, keep: NDArray[np.bool_]) -> StanceSet:
    """The stances of a set for which ``keep`` (N,) is true, with their samples and links."""
    number = np.where(keep, np.cumsum(keep) - 1, -1)
    samples = keep[stances.sample_stance]
    support = stances.support[keep]
    support = np.where(support >= 0, number[support], -1)
    owner = number[stances.sample_stance[samples]]
    return StanceSet(
        contacts=stances.contacts[keep],
        points=stances.points[keep],
        margin=stances.margin[keep],
        support=support,
        first_sample=np.searchsorted(owner, np.arange(int(keep.sum()) + 1)),
        sample_stance=owner,
        level=stances.level[samples],
        com=stances.com[samples],
        turn=stances.turn[..., samples],
        shift=stances.shift[:, samples],
        spare=stances.spare[samples],
        lattice=stances.lattice,
    )


def stance_keys(contacts: Ints, holds: int) -> Ints:
    """One number a stance, ascending in canonical order. Shape (N, 4) -> (N,)."""
    digits = np.where(contacts >= 0, contacts, holds - 1 - contacts)
    key = np.zeros(len(contacts), dtype=np.int64)
    for limb in Limb:
        key = key * (holds + 3) + digits[:, limb]
    return key


def stance_set(
    options: ContactOptions, linkage: Linkage, allowed: Allowed, line_x: float, lattice: Lattice,
    missing: float = 0.0, memory_bytes: float = np.inf, balanced: bool = False,
) -> StanceSet:
    """Find every stance, sample it, and link it to the stances that support moves into it.

    ``balanced`` adds samples where the contacts would best carry the body.
    """
    found = all_stances(options, linkage, allowed, missing, memory_bytes)
    keys = stance_keys(found.contacts, options.holds)
    order = np.argsort(keys, kind="stable")
    found, keys = found.take(order), keys[order]
    batch = batch_of(options, linkage, found.contacts)
    postures = Postures(found.margin, found.turn, found.shift)
    samples = com_samples(linkage, batch, postures, line_x, lattice)
    points = contact_points(options, linkage, found.contacts)
    if balanced:
        x = balance_x(found.contacts, points)
        some = np.flatnonzero(np.isfinite(x))
        others = balanced_samples(linkage, batch.take(some), postures.take(some), x[some], lattice)
        samples = with_balance(samples, replace(others, stance=some[others.stance]))
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
