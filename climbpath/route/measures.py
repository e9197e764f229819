"""What the costs of arcs are made of: distances of the centre of mass and of limbs, and classes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import Limb
from climbpath.motion.model import Motion
from climbpath.posture.assembly import rest_points
from climbpath.posture.limits import limb_geometry
from climbpath.posture.linkage import Linkage
from climbpath.posture.newton import ON_LINE
from climbpath.stance.enumerate import batch_of
from climbpath.stance.options import ContactOptions
from climbpath.stance.stances import StanceSet

Array = NDArray[np.float64]

PART = 100_000
"""Samples looked at together where only their reach is needed."""


def off_line(x: Array, line_x: float) -> Array:
    """Signed distance from the line, (N,) [m]; within ``ON_LINE`` a centre of mass is on it."""
    off = x - line_x
    return np.where(np.abs(off) <= ON_LINE, 0.0, off)


def mean_distance(first: Array, second: Array) -> Array:
    """Mean of |x| while x runs evenly from ``first`` to ``second``: (N,) [m].

    The integral of |a + (b - a) s| over s in [0, 1]: (|a| + |b|) / 2 where the signs agree, else
    (a^2 + b^2) / (2 (|a| + |b|)).
    """
    total = np.abs(first) + np.abs(second)
    crossing = (first**2 + second**2) / np.maximum(2.0 * total, 1e-300)
    return np.where(first * second >= 0.0, total / 2.0, crossing)


def landing_classes(motion: Motion) -> list[tuple[float, bool]]:
    """Classes of landings in the order of their phases: how long the move lasted at least, and
    whether they are those of hands alone.
    """
    classes = [(float(duration), False) for duration in motion.durations]
    if motion.hand_apart is not None:
        # After a flight feet have been under way no longer than it lasted: nothing is credited.
        classes += [(0.0, True), (float(motion.hand_apart), True)]
    return classes


def across_reach(linkage: Linkage, stances: StanceSet) -> Array:
    """How far across the body each hand reaches, (P, 2), in shoulder breadths: how far its hold is
    to the other side of the centre of mass, or of the other hand. 0 on its own side, or free.
    """
    owner = stances.sample_stance
    x, on = stances.points[owner, :2, 0], stances.contacts[owner, :2] >= 0
    aside = (x - stances.com[:, :1]) * np.array([1.0, -1.0])
    crossed = np.where(on.all(axis=1), x[:, Limb.LH] - x[:, Limb.RH] - linkage.hand_breadth, 0.0)
    breadth = float(linkage.roots[Limb.RH, 0] - linkage.roots[Limb.LH, 0])
    return np.where(on, np.maximum(np.maximum(aside, crossed[:, None]), 0.0) / breadth, 0.0)


def reach_distances(options: ContactOptions, linkage: Linkage, stances: StanceSet) -> Array:
    """How far each limb's contact is from where the limb would rest, (P, 4) [m]; free limbs 0."""
    owner = stances.sample_stance
    result = np.zeros((stances.samples, 4))
    # In parts: a batch of all samples would be many times the size of the result.
    for begin in range(0, stances.samples, PART):
        part = slice(begin, begin + PART)
        batch = batch_of(options, linkage, stances.contacts[owner[part]])
        turn, shift = stances.turn[..., part], stances.shift[:, part]
        for limb in Limb:
            rest = shift + np.einsum("ijn,j->in", turn, rest_points(linkage, limb))
            gap = np.sqrt(((batch.target[:, limb] - rest) ** 2).sum(axis=0))
            result[part, limb] = np.where(batch.engaged[limb], gap, 0.0)
    return result


def hand_spare(options: ContactOptions, linkage: Linkage, stances: StanceSet) -> Array:
    """Reach that each hand has to spare where it holds, (P, 2) [m]; infinite for one that is free,
    and for a strike, which needs no hold.
    """
    owner = stances.sample_stance
    result = np.full((stances.samples, 2), np.inf)
    for begin in range(0, stances.samples, PART):
        part = slice(begin, begin + PART)
        contacts = stances.contacts[owner[part]]
        batch = batch_of(options, linkage, contacts)
        turn, shift = stances.turn[..., part], stances.shift[:, part]
        spare = (batch.reach - limb_geometry(linkage, batch, turn, shift).distance)[:2].T
        held = (contacts[:, :2] >= 0) & ~options.strike[np.maximum(contacts[:, :2], 0)]
        result[part] = np.where(held, np.maximum(spare, 0.0), np.inf)
    return result
