"""Where the contacts of a stance would best carry the body, and samples there.

The load of a stance depends much on the x of its centre of mass. Were each limb to bear in
proportion to what it can, the pressure would lie at the mean of the contacts' x, weighted so; the
least common share of all capacities is near that. On the published lane (man of 1.79 m) a centre of
mass there leaves a median of 99 % of the strength of the best x, nearest the line 87 % (the tests).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FEET, FLOOR, FREE, SMEAR
from climbpath.posture.batch import StanceBatch
from climbpath.posture.linkage import Linkage
from climbpath.posture.newton import Postures
from climbpath.posture.samples import Lattice, Samples, com_samples

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

HAND, FOOT, SMEARING = 0.75, 0.9, 0.2
"""What limbs count for: a hand's pull, half of a foot's push (a wall lets it push up by about that
before its share outward has to be held by the hands), half of a smear, in body weights."""

APART = 0.04
"""A sample there is kept where it is farther than this, m, from the one nearest the line."""


def balance_x(contacts: Ints, points: Array) -> Array:
    """x of best support of stances (N, 4) with contact points (N, 4, 3) [m]: (N,) [m].

    Feet on the floor stand anywhere and do not count. NaN where nothing else is touched.
    """
    weight = np.where(contacts >= 0, HAND, 0.0)
    for foot in FEET:
        on = contacts[:, foot]
        weight[:, foot] = np.where(on >= 0, FOOT, np.where(on == SMEAR, SMEARING, 0.0))
    weight[(contacts == FREE) | (contacts == FLOOR)] = 0.0
    total = weight.sum(axis=1)
    mean = (weight * points[:, :, 0]).sum(axis=1) / np.where(total > 0.0, total, 1.0)
    return np.where(total > 0.0, mean, np.nan)


def balanced_samples(
    linkage: Linkage, batch: StanceBatch, postures: Postures, x: Array, lattice: Lattice
) -> Samples:
    """Samples of N stances whose centre of mass is as near as possible to ``x`` (N,) [m].

    A wall is the same all along x: each stance is moved so that its x comes to lie at 0, sampled
    about the line x = 0, and moved back.
    """
    target, shift = batch.target.copy(), postures.shift.copy()
    target[0] -= x
    shift[0] -= x
    samples = com_samples(linkage, replace(batch, target=target), replace(postures, shift=shift),
                          0.0, lattice)
    com, moved = samples.com.copy(), samples.shift.copy()
    com[0] += x[samples.stance]
    moved[0] += x[samples.stance]
    return replace(samples, com=com, shift=moved)


def with_balance(nearest: Samples, balanced: Samples, levels: int = 1 << 20) -> Samples:
    """Both kinds of samples, sorted by stance, level and kind; a balanced one is left out where
    the one nearest the line stands close to it.
    """
    key = nearest.stance * levels + nearest.level + levels // 2
    wanted = balanced.stance * levels + balanced.level + levels // 2
    place = np.minimum(np.searchsorted(key, wanted), max(len(key) - 1, 0))
    # A level that only one of the two searches found stays with the one that has it.
    same = key[place] == wanted
    close = np.abs(balanced.com[0] - nearest.com[0, place]) <= APART
    kept = np.flatnonzero(~same | ~close)
    stance = np.concatenate([nearest.stance, balanced.stance[kept]])
    level = np.concatenate([nearest.level, balanced.level[kept]])
    kind = np.repeat([0, 1], [len(key), len(kept)])
    order = np.lexsort((kind, level, stance))

    def joined(first: Array, second: Array) -> Array:
        return np.asarray(np.concatenate([first, second[..., kept]], axis=-1)[..., order])

    return Samples(stance[order], level[order], joined(nearest.turn, balanced.turn),
                   joined(nearest.shift, balanced.shift), joined(nearest.com, balanced.com),
                   joined(nearest.spare, balanced.spare))
