"""Where the centre of mass goes in a polished plan: a smooth path, reachable at every crest.

Between crests each coordinate across the line is a cubic spline of the height. At crests it is
free within ``ROOM`` of the search's sample, and bends as little as it can, less where the body is
quick. Each crest that was moved is looked at again: the trunk is shifted, turned as it was, until
the centre of mass is there, for the crest's stance and for those that carry the body to and from
it. What does not keep every limit comes back toward the sample.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import lsq_linear

from climbpath.contacts import Limb
from climbpath.posture.assembly import assemble
from climbpath.posture.batch import StanceBatch
from climbpath.posture.com import com_of, joint_weights
from climbpath.posture.limits import slack
from climbpath.posture.samples import REACH_TOLERANCE
from climbpath.route.measures import across_reach, reach_distances
from climbpath.stance.enumerate import batch_of
from climbpath.stance.stances import StanceSet
from climbpath.study.climb import Climb
from climbpath.study.polish_pieces import Piece, RouteReader
from climbpath.study.track import standing

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

ROOM = np.array([0.30, 0.20])
"""How far a crest may be moved across and out of the wall, m."""

SHARES = np.array([1.0, 0.75, 0.5, 0.25])
"""Shares of a move that are tried where the whole of it is not possible."""

TRIES = 3
CORRECTIONS = 8
SHARE = 0.8
"""How far the centre of mass follows the trunk, about: steps toward a place are longer by this."""

EXACT = 1e-4
"""A centre of mass as near as this, m, is there."""

KEEP = 0.05
"""Weight of a metre from the sample, beside that of bending."""


@dataclass(frozen=True)
class Crests:
    """K places of bodies, and how they stand there.

    ``place`` (K,) on the route; ``begin`` (K,): where the piece of each begins; ``com`` (K, 3)
    world [m]; ``postures``: 3 K rows, of each crest its own stance, that which carries the body to
    it, and from it; ``strength`` (K, 3) [body weights]; ``distance`` (K, 4) [m], ``across`` (K, 2):
    what the limbs' reach times depend on.
    """

    place: tuple[int, ...]
    begin: tuple[int, ...]
    com: Array
    postures: StanceSet
    strength: Array
    distance: Array
    across: Array


def crests_of(reader: RouteReader, pieces: Sequence[Piece]) -> Crests:
    """The crests of all pieces, moved to a smooth path as far as they can be."""
    climb, place = reader.climb, tuple(p for piece in pieces for p in piece.crests)
    samples = np.array([reader.sample[p] for p in place])
    bodies = _Bodies(climb, samples, _carriers(reader, pieces))
    com = climb.search.stances.com[samples]
    pinned = np.array([
        piece.pinned[0] if k == 0 else piece.pinned[1] if k == len(piece.rises) else False
        for piece in pieces for k in range(len(piece.crests))
    ])
    low, high = com[:, ::2] - ROOM, com[:, ::2] + ROOM
    low[pinned] = high[pinned] = com[pinned][:, ::2]
    speed = np.array([reader.speed(p) for p in place])
    parts = _parts(reader, pieces)
    goal = com
    for turn in range(TRIES):
        wanted = _smooth(parts, com, speed, low, high)
        share = bodies.possible(com, wanted)
        short = share < 1.0
        goal = com + np.where(short, share, 1.0)[:, None] * (wanted - com)
        if not short.any():
            break
        # Next time a crest that was too far goes no farther than what was possible.
        edge = goal[short][:, ::2]
        fixed = turn == TRIES - 2
        home = com[short][:, ::2]
        low[short] = edge if fixed else np.minimum(edge, home)
        high[short] = edge if fixed else np.maximum(edge, home)
    stood = bodies.at(goal)
    strength = climb.motion.strengths(climb.wall, climb.options, climb.linkage, stood)
    own = np.arange(0, 3 * len(place), 3)
    begin = tuple(piece.begin for piece in pieces for _ in piece.crests)
    return Crests(place, begin, goal, stood, strength.reshape(-1, 3),
                  reach_distances(climb.options, climb.linkage, stood)[own],
                  across_reach(climb.linkage, stood)[own])


def _carriers(reader: RouteReader, pieces: Sequence[Piece]) -> Ints:
    """Stances (K, 3) of each crest: its own, that which carries the body to it, and from it."""
    rows = []
    for piece in pieces:
        hubs = [reader.hub(p) for p in piece.rises]
        for k, crest in enumerate(piece.crests):
            rows.append((reader.stance[crest], hubs[max(k - 1, 0)], hubs[min(k, len(hubs) - 1)]))
    return np.array(rows, dtype=np.int64).reshape(-1, 3)


def _parts(reader: RouteReader, pieces: Sequence[Piece]) -> list[list[int]]:
    """Numbers of crests that one smooth path leads through: flights go on as the path does."""
    parts: list[list[int]] = []
    number = 0
    for k, piece in enumerate(pieces):
        own = list(range(number, number + len(piece.crests)))
        number += len(piece.crests)
        if parts and not piece.pinned[0] and piece.begin == pieces[k - 1].end + 2:
            parts[-1] += own
        else:
            parts.append(own)
    return parts


def _smooth(parts: list[list[int]], com: Array, speed: Array, low: Array, high: Array) -> Array:
    """Places (K, 3) that bend least, weighted by the square of the force that bending takes."""
    result = com.copy()
    for part in parts:
        if len(part) < 3:
            continue
        rows = np.array(part)
        height = com[rows, 1]
        step = np.diff(height)
        bend = np.zeros((len(rows) - 2, len(rows)))
        for k in range(len(rows) - 2):
            first, second = 1.0 / step[k], 1.0 / step[k + 1]
            # A bend is felt over the way from half the step before to half the step after.
            size = (0.1 + speed[rows[k + 1]] ** 2 / 10.0) / np.sqrt(0.5 * (step[k] + step[k + 1]))
            bend[k, k:k + 3] = np.array([first, -first - second, second]) * size
        matrix = np.vstack([bend, KEEP * np.eye(len(rows))])
        for axis, column in ((0, 0), (2, 1)):
            start = com[rows, axis]
            # Offsets from the sample, so that a mirrored wall gives mirrored numbers.
            right = np.concatenate([-bend @ start, np.zeros(len(rows))])
            most = np.maximum(high[rows, column] - start, 0.0)
            least = np.minimum(low[rows, column] - start, most)
            free = np.flatnonzero(most > least)
            fixed = np.where(most > least, 0.0, most)
            if len(free):
                found = lsq_linear(matrix[:, free], right - matrix @ fixed,
                                   (least[free], most[free]), method="bvls")
                fixed[free] = found.x
            result[rows, axis] = start + fixed
    return result


class _Bodies:
    """Bodies at crests, three stances each, with their trunks turned as the samples' are."""

    def __init__(self, climb: Climb, samples: Ints, carriers: Ints) -> None:
        stances = climb.search.stances
        self.climb, self.rows = climb, carriers.ravel()
        self.batch = batch_of(climb.options, climb.linkage, stances.contacts[self.rows])
        own = batch_of(climb.options, climb.linkage, stances.contacts[carriers[:, 0]])
        trunk = np.einsum("jin,jkn->ikn", own.axes, stances.turn[..., samples])
        place = own.to_world(stances.shift[:, samples])
        many = np.repeat(np.arange(len(samples)), 3)
        self.turn = np.einsum("ijn,jkn->ikn", self.batch.axes, trunk[..., many])
        self.shift = self.batch.to_base(place[:, many])
        self.weights = joint_weights(climb.linkage)
        self.samples = np.repeat(samples, 3)

    def possible(self, home: Array, wanted: Array) -> Array:
        """Share of the way (K, 3) from home to what is wanted that all three stances can go."""
        count = len(SHARES)
        batch = self.batch.take(np.tile(np.arange(len(self.rows)), count))
        turn, shift = np.tile(self.turn, count), np.tile(self.shift, count)
        goal = np.concatenate([np.repeat(home + share * (wanted - home), 3, axis=0)
                               for share in SHARES])
        linkage = self.climb.linkage
        shift, com = self._moved(batch, turn, shift, goal)
        spare, hard = slack(linkage, batch, turn, shift)
        good = (spare >= -REACH_TOLERANCE) & (hard >= -REACH_TOLERANCE)
        good &= np.abs(com - goal.T).max(axis=0) <= EXACT
        every = good.reshape(count, -1, 3).all(axis=2)
        still = np.abs(wanted - home).max(axis=1) <= EXACT
        best = np.where(every.any(axis=0), SHARES[np.argmax(every, axis=0)], 0.0)
        return np.where(still, 1.0, best)

    def at(self, goal: Array) -> StanceSet:
        """The bodies with their centres of mass at ``goal`` (K, 3)."""
        shift, com = self._moved(self.batch, self.turn, self.shift, np.repeat(goal, 3, axis=0))
        spare, _ = slack(self.climb.linkage, self.batch, self.turn, shift)
        stances = self.climb.search.stances
        rows = standing(stances, self.samples)
        return replace(rows, contacts=stances.contacts[self.rows], points=stances.points[self.rows],
                       margin=stances.margin[self.rows], com=np.ascontiguousarray(com.T),
                       turn=self.turn, shift=shift, spare=np.maximum(spare, 0.0))

    def _moved(self, batch: StanceBatch, turn: Array, shift: Array, goal: Array
               ) -> tuple[Array, Array]:
        """Trunks (3, N) with their centres of mass at ``goal`` (N, 3), and where they are."""
        linkage, shift = self.climb.linkage, shift.copy()
        for _ in range(CORRECTIONS):
            com = batch.to_world(com_of(self.weights, assemble(linkage, batch, turn, shift)))
            away = goal.T - com
            if np.abs(away).max(initial=0.0) <= 0.1 * EXACT:
                break
            shift += np.einsum("ijn,jn->in", batch.axes, away) / SHARE
        else:
            com = batch.to_world(com_of(self.weights, assemble(linkage, batch, turn, shift)))
        return shift, com


def needed(reader: RouteReader, crests: Crests, place: int, row: int) -> float:
    """Time [s] the limb that lands with an arc needs for its way to crest number ``row``."""
    climb, limb = reader.climb, reader.limb(place)
    contacts = climb.search.stances.contacts[reader.stance[place + 1]]
    contact, hand = int(contacts[limb]), limb <= Limb.RH
    quality = climb.options.hand_quality if hand else climb.options.foot_quality
    time = climb.motion.reach(
        crests.distance[[row], limb], np.array([hand]),
        np.array([float(quality[contact]) if contact >= 0 else 1.0]),
        np.array([contact >= 0 and bool(climb.options.strike[contact])]),
    )
    if not hand:
        return float(time[0])
    time = time + climb.motion.across(crests.across[[row], limb])
    paired = climb.motion.pair if contacts[Limb.LH] == contacts[Limb.RH] else 0.0
    return max(float(time[0]) + paired, climb.motion.hand_apart or 0.0)
