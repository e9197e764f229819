"""Placing a trunk of given turn so that the centre of mass is at a height and near the line.

Closed forms on arrays: with the turn and the distance off the wall given, each engaged limb leaves
the trunk's x an interval (the chord of its reach at that height, less what crossing and standing
out forbid); the line clipped to their intersection is the nearest point.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import Limb
from climbpath.posture.assembly import FIRST_JOINT, rest_points
from climbpath.posture.batch import StanceBatch
from climbpath.posture.linkage import LIMB_SIDE, Linkage

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

MOVES_WITH_END = (0.0, 0.5, 0.8, 1.0)
"""How much of an end's movement the four joints of a limb make, roughly: used for first guesses."""


@dataclass(frozen=True)
class ComGuess:
    """com = share * trunk + turn @ lever + fixed, roughly: (N,), (3, N), (3, N)."""

    share: Array
    lever: Array
    fixed: Array

    def take(self, index: Ints) -> ComGuess:
        """The chosen stances."""
        return ComGuess(self.share[index], self.lever.take(index, axis=-1),
                        self.fixed.take(index, axis=-1))


def com_guess(linkage: Linkage, batch: StanceBatch, weights: Array) -> ComGuess:
    count = batch.size
    share = np.ones(count)
    trunk = weights[1] * linkage.trunk + weights[2] * (linkage.trunk + 0.75 * linkage.head)
    lever = np.zeros((3, count))
    lever[1] = trunk
    fixed = np.zeros((3, count))
    for limb in Limb:
        own = weights[FIRST_JOINT[limb]: FIRST_JOINT[limb] + 4]
        with_end = float(own @ MOVES_WITH_END)
        engaged = batch.engaged[limb]
        root, rest = linkage.roots[limb], rest_points(linkage, limb)
        lever += (root * (own.sum() - with_end))[:, None]
        lever += np.where(engaged, 0.0, (rest * with_end)[:, None])
        share = share - np.where(engaged, with_end, 0.0)
        fixed += np.where(engaged, with_end * batch.target[:, limb], 0.0)
    return ComGuess(share, lever, fixed)


def placed(
    linkage: Linkage, batch: StanceBatch, guess: ComGuess, turn: Array, out: Array,
    extra: Array | float, line_x: float, goal: Array, error: Array | None,
) -> tuple[Array, Array]:
    """Trunk place (3, P) whose centre of mass is at height ``goal``, nearest the line.

    ``error`` (3, P): what the guess of the centre of mass is known to be off by. Returns the
    place and how far from the line it leaves the centre of mass (inf where no place is left).
    """
    lever = np.einsum("ijn,jn->in", turn, guess.lever)
    fixed = lever + guess.fixed
    if error is not None:
        fixed = fixed + error
    share = guess.share
    z = np.where(np.isnan(out), linkage.pelvis_space, out)
    for _ in range(2):
        y = goal - (batch.vertical * fixed).sum(axis=0) - share * batch.vertical[2] * z
        y = y / (share * batch.vertical[1])
        z = np.where(np.isnan(out), _nearest_out(linkage, batch, turn, y) + extra, out)
    low, high = np.full(len(y), -np.inf), np.full(len(y), np.inf)
    low, high = _sides(linkage, batch, turn, y, z, low, high)
    centres, holes = [], []
    for limb in Limb:
        root = np.einsum("ijn,j->in", turn, linkage.roots[limb])
        centre = batch.target[:, limb] - root
        dy, dz = centre[1] - y, centre[2] - z
        if limb <= Limb.RH:
            rise = np.clip(dy / np.maximum(turn[1, 1], 0.3), 0.0, linkage.shoulder_rise)
            centre = centre - rise * turn[:, 1]
            dy, dz = centre[1] - y, centre[2] - z
        off = dy**2 + dz**2
        chord = batch.reach[limb] ** 2 - off
        half = np.sqrt(np.maximum(chord, 0.0))
        engaged = batch.engaged[limb]
        low = np.where(engaged, np.maximum(low, centre[0] - half), low)
        high = np.where(engaged, np.minimum(high, centre[0] + half), high)
        high = np.where(engaged & (chord < 0.0), -np.inf, high)
        centres.append(centre[0])
        hole = np.sqrt(np.maximum(batch.fold[limb] ** 2 - off, 0.0))
        holes.append(np.where(engaged, hole, 0.0))
    wanted = (line_x - fixed[0]) / share
    x = np.minimum(np.maximum(wanted, low), high)
    for centre_x, hole in zip(centres, holes, strict=True):
        # A limb cannot fold to less than its shortest length: step out of that gap, to the
        # nearer side that reach allows.
        inside = np.abs(x - centre_x) < hole
        left, right = centre_x - hole, centre_x + hole
        to_left = (left >= low) & ((x - left <= right - x) | (right > high))
        x = np.where(inside, np.where(to_left, left, np.where(right <= high, right, x)), x)
    miss = np.where(low <= high, np.abs(share * (x - wanted)), np.inf)
    return np.stack([np.where(np.isfinite(x), x, 0.0), y, z]), miss


def _sides(
    linkage: Linkage, batch: StanceBatch, turn: Array, y: Array, z: Array, low: Array, high: Array
) -> tuple[Array, Array]:
    """Narrow the interval of the trunk's x by the limits on crossing and standing out.

    A contact's place to the side, seen from its root, falls by turn[0, 0] with each metre of x.
    """
    per_metre = turn[0, 0]
    for limb in Limb:
        engaged, side = batch.engaged[limb], LIMB_SIDE[limb]
        target = batch.target[:, limb]
        at_zero = turn[0, 0] * target[0] + turn[1, 0] * (target[1] - y)
        at_zero = at_zero + turn[2, 0] * (target[2] - z) - linkage.roots[limb, 0]
        bounds = [(-side * linkage.across[limb], side)]
        if limb >= Limb.LF:
            bounds.append((side * linkage.out_limit, -side))
        for place, way in bounds:
            # way +1: the contact must lie at ``place`` or to the right of it.
            edge = (at_zero - place) / per_metre
            if way > 0:
                high = np.where(engaged, np.minimum(high, edge), high)
            else:
                low = np.where(engaged, np.maximum(low, edge), low)
    return low, high


def _nearest_out(linkage: Linkage, batch: StanceBatch, turn: Array, y: Array) -> Array:
    """Least distance off the wall, along the base normal, that trunk clearance allows. [m]"""
    z = np.full(len(y), -np.inf)
    for which, (height, space) in enumerate(
        ((0.0, linkage.pelvis_space), (linkage.chest_height, linkage.chest_space))
    ):
        for slot in range(2):
            n, offset = batch.plane[which, slot, :3], batch.plane[which, slot, 3]
            point = turn[:, 1] * height
            value = offset + (n * point).sum(axis=0) + n[1] * y
            z = np.maximum(z, (space - value) / np.maximum(n[2], 0.2))
    return z + 1e-6
