"""The margin of all stances at once: starts, rounds of retries, and the best of each stance.

For each stance it finds the trunk's place and turn with the largest spare reach t, subject to
|root_i - contact_i| <= reach_i - t for every engaged limb and to the hard limits of
``posture.limits``.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.batch import StanceBatch, keep_memory
from climbpath.posture.limits import upright
from climbpath.posture.linkage import Linkage
from climbpath.posture.newton import Postures, descend

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

CHUNK = 8192
"""Stances solved together: fewer would make too many calls, more would only take memory."""

TIE = 1e-6
"""A later start replaces an earlier one only where it gains more than this, m: which of equally
good postures is kept must not hang on rounding."""


@dataclass(frozen=True)
class _Round:
    """Starts made together, and for whom: doubtful stances whose margin (m) is between two bounds.

    ``out`` [m]: distance off the wall; ``lean``: from the feet to the hands; ``twists`` [rad]:
    one start each, against the way the first posture turned out to be twisted (negative: the same
    way).
    """

    steps: int
    above: float
    below: float
    out: float
    lean: bool
    twists: tuple[float, ...]


ROUNDS = (
    _Round(20, -np.inf, np.inf, 0.30, False, (0.0,)),
    _Round(26, -np.inf, np.inf, 0.30, False, (0.7, -0.7)),
    _Round(30, -0.08, np.inf, 0.05, True, (0.7, -0.7)),
)
"""The optimum often lies at the turn limit, and a valley leads there from either side only."""


def solve_postures(linkage: Linkage, batch: StanceBatch) -> Postures:
    """Largest spare reach of N stances. Every stance has at least one engaged or floor limb."""
    keep_memory()
    count = batch.size
    best = Postures(np.full(count, -np.inf), upright(count), np.zeros((3, count)))
    certain = np.zeros(count, dtype=bool)
    side = np.ones(count)
    for number, starts in enumerate(ROUNDS):
        chosen = ~certain & (best.margin >= starts.above) & (best.margin < starts.below)
        index = np.flatnonzero(chosen | (number == 0))
        # The few that are tried again are gathered first, so that arrays stay long.
        tried = np.tile(index, len(starts.twists))
        which = np.repeat(np.arange(len(starts.twists)), len(index))
        twist = np.asarray(starts.twists)[which]
        for begin in range(0, len(tried), CHUNK):
            part = slice(begin, begin + CHUNK)
            own = batch.take(tried[part])
            turn, shift = _start(linkage, own, starts, twist[part] * side[tried[part]])
            found, done = descend(linkage, own, turn, shift, starts.steps)
            # A stance may stand in the arrays once for each twist: take them one after another.
            for own_twist in range(len(starts.twists)):
                mine = np.flatnonzero(which[part] == own_twist)
                _improve(best, found.take(mine), tried[part][mine])
            certain[tried[part][done]] = True
        if number == 0:
            side = np.where(best.turn[0, 2] >= 0.0, -1.0, 1.0)
    return best


def _improve(best: Postures, found: Postures, where: Ints) -> None:
    """Take over what is clearly better; each stance stands in ``where`` once."""
    better = found.margin > best.margin[where] + TIE
    place = where[better]
    best.margin[place] = found.margin[better]
    best.turn[..., place] = found.turn[..., better]
    best.shift[:, place] = found.shift[:, better]


def _start(
    linkage: Linkage, batch: StanceBatch, start: _Round, twist: Array
) -> tuple[Array, Array]:
    """A trunk between the contacts, upright or leaning from feet to hands, and twisted."""
    count = batch.size
    engaged = batch.engaged.astype(float)
    hang = linkage.trunk + 0.6 * linkage.reach[0]
    stand = 0.75 * linkage.reach[2]
    offset = np.array([-hang, -hang, stand, stand])[:, None]
    total = np.maximum(engaged.sum(axis=0), 1.0)
    shift = np.empty((3, count))
    shift[0] = (batch.target[0] * engaged).sum(axis=0) / total
    shift[1] = ((batch.target[1] + offset) * engaged).sum(axis=0) / total
    out = (batch.target[2] * engaged).sum(axis=0) / total
    shift[2] = np.maximum(out, 0.0) + linkage.pelvis_space + start.out
    on_floor = batch.floor.any(axis=0)
    level = batch.floor_level + 0.9 * linkage.floor_reach
    stood = (level - batch.vertical[2] * shift[2]) / batch.vertical[1]
    shift[1] = np.where(on_floor, stood, shift[1])
    lean = np.zeros(count)
    if start.lean:
        # Lean the shoulders toward the middle of the hands, hips toward that of the feet.
        hands = _mean_x(batch, slice(0, 2), shift[0])
        feet = _mean_x(batch, slice(2, 4), shift[0])
        lean = np.clip(np.arctan2(hands - feet, 1.6 * linkage.trunk), -0.7, 0.7)
        shift[1] -= 0.15
    cl, sl = np.cos(lean), np.sin(lean)
    ct, st = np.cos(twist), np.sin(twist)
    zero = np.zeros(count)
    turn = np.array([[cl * ct, sl, cl * st], [-sl * ct, cl, -sl * st], [-st, zero, ct]])
    return turn, shift


def _mean_x(batch: StanceBatch, limbs: slice, otherwise: Array) -> Array:
    engaged = batch.engaged[limbs].astype(float)
    total = engaged.sum(axis=0)
    mean = (batch.target[0, limbs] * engaged).sum(axis=0) / np.maximum(total, 1.0)
    return np.where(total > 0, mean, otherwise)
