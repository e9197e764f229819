"""All stances of a body on a wall, found level by level.

A stance can only be possible if every stance with one contact fewer is. So pairs of contacts are
tried first (those near enough by a tree search), triples only where all three pairs are possible,
and full stances only where all four triples are: nothing is solved that a smaller stance already
rules out, and nothing that two far-apart stances would need is ever formed. Stances with smears and
strikes are made from possible ones, and solved along with the next level, since solving many at a
time is what is quick.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from climbpath.contacts import FLOOR, FREE, SMEAR, Limb
from climbpath.errors import TooLargeError
from climbpath.posture.batch import StanceBatch, stance_batch
from climbpath.posture.limits import TILT_LIMIT
from climbpath.posture.linkage import Linkage
from climbpath.posture.solver import solve_postures
from climbpath.stance.extended import Allowed as Allowed
from climbpath.stance.extended import smeared, struck, struck_alone
from climbpath.stance.options import HALF_FOOT_BREADTH, ContactOptions, contact_points

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]
Limbs = tuple[Limb, ...]
Relation = tuple[Flags, Ints, Ints]
"""Which pairs of contacts go together: a table, and its rows as starts and partners."""

BLOCK = 1_000_000
"""Candidates formed at a time."""

CLOSE = 1e-3
"""A pair this near what would rule it out, m, is solved."""

FEW_PAIRS = 30_000
"""With fewer pairs of contacts than this, no wall is too dense for any machine."""

BYTES_PER_STANCE = 1500
"""What a stance with its posture, samples and links takes, measured."""


@dataclass(frozen=True)
class Found:
    """Stances with their postures in base axes: contacts (N, 4), margin (N,), turn, shift."""

    contacts: Ints
    margin: Array
    turn: Array
    shift: Array

    @classmethod
    def join(cls, parts: list[Found]) -> Found:
        """All stances of several sets."""
        return cls(
            np.concatenate([p.contacts for p in parts]),
            np.concatenate([p.margin for p in parts]),
            np.concatenate([p.turn for p in parts], axis=-1),
            np.concatenate([p.shift for p in parts], axis=-1),
        )

    def take(self, index: Ints | Flags) -> Found:
        """The chosen stances."""
        chosen = np.flatnonzero(index) if index.dtype == bool else index
        return Found(self.contacts[chosen], self.margin[chosen],
                     self.turn.take(chosen, axis=-1), self.shift.take(chosen, axis=-1))


def batch_of(options: ContactOptions, linkage: Linkage, contacts: Ints) -> StanceBatch:
    """The solver's arrays for stances (N, 4)."""
    points = contact_points(options, linkage, contacts)
    strike = (contacts >= 0) & options.strike[np.maximum(contacts, 0)]
    return stance_batch(linkage, options.surface, contacts, points, strike, options.floor_level)


def solve(options: ContactOptions, linkage: Linkage, contacts: Ints) -> Found:
    """Postures of stances (N, 4)."""
    if not len(contacts):
        return Found(contacts.reshape(0, 4), np.zeros(0), np.zeros((3, 3, 0)), np.zeros((3, 0)))
    postures = solve_postures(linkage, batch_of(options, linkage, contacts))
    return Found(contacts, postures.margin, postures.turn, postures.shift)


def all_stances(
    options: ContactOptions, linkage: Linkage, allowed: Allowed, missing: float = 0.0,
    memory_bytes: float = np.inf,
) -> Found:
    """Every possible stance with a hold in it, in no particular order.

    ``missing`` [m]: also stances whose reach falls short by up to this (for why-not questions).
    TooLargeError when more than ``memory_bytes`` would be needed.
    """
    return _Search(options, linkage, allowed, missing, memory_bytes).everything()


class _Search:
    """The level-wise search; keeps which partial stances can be extended."""

    def __init__(self, options: ContactOptions, linkage: Linkage, allowed: Allowed,
                 missing: float, memory_bytes: float) -> None:
        self.options, self.linkage, self.allowed = options, linkage, allowed
        self.keep_above = -missing
        # Matching moves a hand or foot by half its breadth, so a triple may be possible where a
        # pair on the unshared points just is not.
        self.extend_above = -missing - max(linkage.hand_breadth / 2, HALF_FOOT_BREADTH)
        # What a stance worth extending may miss a limit by, m, and a little for rounding.
        self.missed = CLOSE - self.extend_above
        self.memory_bytes = memory_bytes
        self.base = options.holds + 1  # one number more for the floor
        self.kept = 0

    def everything(self) -> Found:
        """All possible stances, from single contacts to all four limbs."""
        choices = self._choices()
        both: list[Limbs] = list(combinations(Limb, 2))
        single: list[tuple[Limbs, Ints]] = [((limb,), choices[limb][:, None]) for limb in Limb]
        double = [(pair, self._near(choices, pair)) for pair in both]
        self._foresee(double)
        first, possible, _ = self._solved([*single, *double])
        tables = [self._table(rows) for rows in possible[len(single):]]
        pairs: dict[Limbs, Relation] = dict(zip(both, tables, strict=True))
        three: list[Limbs] = list(combinations(Limb, 3))
        grown: list[tuple[Limbs, Ints]] = []
        formed = 0
        for limbs in three:
            for rows in self._triples(limbs, pairs):
                grown.append((limbs, rows))
                formed += len(rows)
                self._guard(formed)
        more = np.concatenate([smeared(first.contacts, self.allowed)[0],
                               struck_alone(self.options, self.allowed),
                               self._struck(first.contacts)[0]])
        second, possible, extended = self._solved(grown, more)
        parts = [first, second, extended]
        triples: dict[Limbs, Ints] = {}
        for limbs in three:
            rows = np.concatenate(
                [np.zeros((0, 3), np.int64),
                 *(r for (own, _), r in zip(grown, possible, strict=True) if own == limbs)]
            )
            triples[limbs] = rows[np.argsort(self._key(rows))]
        self._guard(self._expected(triples[Limb.LH, Limb.RH, Limb.LF], pairs[Limb.LF, Limb.RF],
                                   lambda rows: self._whole(rows, pairs, triples)))
        more, base = self._last(second, extended)
        for rows in self._quads(pairs, triples):
            whole, _, extended = self._solved([(tuple(Limb), rows)], more)
            # A strike from a smear that was only tried along with it needs that smear.
            parts += [whole, self._standing(extended, base)]
            more = np.zeros((0, 4), np.int64)
        if len(more):
            parts.append(self._standing(self._solved([], more)[2], base))
        return Found.join(parts)

    def _last(self, triples: Found, extended: Found) -> tuple[Ints, Ints]:
        """Smears and strikes from triples and smears, and keys of strikes that need a smear."""
        feet, _ = smeared(triples.contacts, self.allowed)
        smears = extended.contacts[(extended.contacts == SMEAR).any(axis=1)]
        tried, source = self._struck(feet)
        more = np.concatenate([feet, self._struck(triples.contacts)[0], self._struck(smears)[0],
                               tried])
        return more, np.stack([self._whole_key(tried), self._whole_key(feet[source])])

    def _struck(self, contacts: Ints) -> tuple[Ints, Ints]:
        return struck(self.options, self.linkage, contacts, self.allowed)

    def _standing(self, found: Found, base: Ints) -> Found:
        """Without the strikes whose smear, their key in ``base``, is not possible itself."""
        keys = self._whole_key(found.contacts)
        lost = base[0][~np.isin(base[1], keys)]
        return found.take(~np.isin(keys, lost))

    def _choices(self) -> list[Ints]:
        """Hold numbers (and the floor's) each limb can touch."""
        options = self.options
        usable = np.ones(options.holds, dtype=bool)
        usable[list(self.allowed.avoid)] = False
        hands = np.flatnonzero(options.hand & usable & ~options.strike)
        feet = np.append(np.flatnonzero(options.foot & usable), options.holds)
        return [hands, hands, feet, feet]

    def _near(self, choices: list[Ints], both: Limbs) -> Ints:
        """Pairs of contacts that are within the body's length of each other. Shape (M, 2)."""
        options, linkage = self.options, self.linkage
        arm = linkage.reach[0] + linkage.shoulder_rise
        across = abs(float(linkage.roots[both[0], 0])) + abs(float(linkage.roots[both[1], 0]))
        trunk = linkage.trunk if (both[0] <= Limb.RH) != (both[1] <= Limb.RH) else 0.0
        limit = across + trunk
        for limb in both:
            limit += arm if limb <= Limb.RH else float(linkage.reach[limb])
        limit = min(limit, self._longest(both))
        first, second = (choices[limb][choices[limb] < options.holds] for limb in both)
        rows = []
        if len(first) and len(second):
            near = cKDTree(options.point[first]).sparse_distance_matrix(
                cKDTree(options.point[second]), limit + 1e-6, output_type="ndarray"
            )
            rows.append(np.stack([first[near["i"]], second[near["j"]]], axis=1))
            if trunk:
                rows[0] = rows[0][~self._upside_down(rows[0])]
        floor = options.holds
        upper = linkage.trunk + arm if both[0] <= Limb.RH else float(linkage.reach[2])
        tall = linkage.tiptoe_reach + upper
        height = options.point[:, 1] - options.floor_level
        for place in (0, 1):
            if floor not in choices[both[place]]:
                continue
            other = choices[both[1 - place]]
            other = other[other < floor]
            other = other[height[other] <= tall + linkage.reach[2]]
            pair = np.full((len(other), 2), floor)
            pair[:, 1 - place] = other
            rows.append(pair)
        if both[0] >= Limb.LF:
            rows.append(np.array([[floor, floor]]))
        result = np.concatenate(rows) if rows else np.zeros((0, 2), np.int64)
        shared = result[:, 0] == result[:, 1]
        same_kind = (both[0] <= Limb.RH) == (both[1] <= Limb.RH)
        if same_kind:
            hold = np.minimum(result[:, 0], options.holds - 1)
            full = shared & (result[:, 0] < floor) & (options.hands[hold] < 2)
            if not self.allowed.matching and both[1] <= Limb.RH:
                full |= shared
            result = result[~full]
        return result.astype(np.int64)

    def _longest(self, both: Limbs) -> float:
        """What two contacts may be apart at most, m, with reach missing as far as counts here."""
        linkage = self.linkage
        across = abs(float(linkage.roots[both[0], 0] - linkage.roots[both[1], 0]))
        hands = sum(limb <= Limb.RH for limb in both)
        rise = linkage.shoulder_rise
        # Hand and foot: the shoulder rises along the trunk, away from the hip. Two hands: each may.
        between = math.hypot(across, linkage.trunk + rise) if hands == 1 else across + hands * rise
        reach = float(linkage.reach[both[0]] + linkage.reach[both[1]])
        return reach + between + 2.0 * self.missed

    def _upside_down(self, rows: Ints) -> Flags:
        """Pairs of a hand's and a foot's hold that no trunk within its tilt can be between.

        Along the trunk a hand stays above the hips and a foot below, and the trunk leans from the
        upward direction of whichever section it belongs to by no more than its tilt.
        """
        options = self.options
        apart = options.point[rows[:, 1]] - options.point[rows[:, 0]]
        length = np.maximum(np.linalg.norm(apart, axis=1), 1e-9)
        angle = np.arccos(np.clip(apart @ options.surface.up.T / length[:, None], -1.0, 1.0))
        tilt = math.acos(max(TILT_LIMIT - self.missed / self.linkage.trunk, -1.0))
        above = length[:, None] * np.cos(np.minimum(angle + tilt, math.pi))
        return np.asarray((above > 2.0 * self.missed).all(axis=1))

    def _solved(
        self, groups: list[tuple[Limbs, Ints]], more: Ints | None = None
    ) -> tuple[Found, list[Ints], Found]:
        """Solve partial stances of several sets of limbs, and ``more`` stances, in one go.

        Returns the possible stances with a hold, for each group the rows worth extending, and the
        possible ones of ``more``.
        """
        total = sum(len(rows) for _, rows in groups)
        whole = np.zeros((0, 4), np.int64) if more is None else more
        self._guard(total + len(whole))
        contacts = np.full((total, 4), FREE, dtype=np.int64)
        begin = 0
        for limbs, rows in groups:
            numbers = np.where(rows == self.options.holds, FLOOR, rows)
            contacts[begin:begin + len(rows), list(limbs)] = numbers
            begin += len(rows)
        contacts = np.concatenate([contacts, whole])
        found = solve(self.options, self.linkage, contacts)
        kept = found.margin >= self.keep_above
        self.kept += int(np.count_nonzero(kept))
        kept &= (contacts >= 0).any(axis=1)
        possible = np.split(found.margin[:total] >= self.extend_above,
                            np.cumsum([len(rows) for _, rows in groups])[:-1]) if groups else []
        index = np.flatnonzero(kept)
        return (found.take(index[index < total]),
                [rows[good] for (_, rows), good in zip(groups, possible, strict=True)],
                found.take(index[index >= total]))

    def _whole_key(self, contacts: Ints) -> Ints:
        """One number for each stance (N, 4)."""
        key = np.zeros(len(contacts), dtype=np.int64)
        for limb in Limb:
            key = key * (self.base + 3) + contacts[:, limb] + 3
        return key

    def _guard(self, more: int) -> None:
        needed = (self.kept + more) * BYTES_PER_STANCE
        if needed > self.memory_bytes:
            raise TooLargeError(
                f"this wall has over {self.kept + more} stances for this body: about "
                f"{needed / 1e9:.1f} GB, with {self.memory_bytes / 1e9:.1f} GB to use. Fewer holds "
                "(--avoid, or one lane of the wall), --no-smears or --no-matching would reduce it."
            )

    def _foresee(self, double: list[tuple[Limbs, Ints]]) -> None:
        """Guess from some of the pairs how many triples there will be, before all are solved."""
        if sum(len(rows) for _, rows in double) < FEW_PAIRS:
            return
        tables, shares = {}, []
        for pair, rows in double:
            tables[pair] = self._table(rows)
            some = rows[:: max(1, len(rows) // 200)]
            contacts = np.full((len(some), 4), FREE, dtype=np.int64)
            contacts[:, list(pair)] = np.where(some == self.options.holds, FLOOR, some)
            margin = solve(self.options, self.linkage, contacts).margin
            shares.append(float((margin >= self.keep_above).mean()) if len(margin) else 0.0)
        hands, feet = (Limb.LH, Limb.RH), (Limb.RH, Limb.LF)
        outer = tables[Limb.LH, Limb.LF][0]
        near = self._expected(np.argwhere(tables[hands][0]), tables[feet],
                              lambda rows: rows[outer[rows[:, 0], rows[:, 2]]])
        self._guard(int(4 * near * float(np.mean(shares)) ** 3))

    def _expected(
        self, rows: Ints, partners: Relation, kept: Callable[[Ints], Ints]
    ) -> int:
        """About how many rows ``kept`` leaves of all ``rows`` grown by their partners."""
        _, starts, ends = partners
        number = starts[rows[:, -1] + 1] - starts[rows[:, -1]]
        tried, left = 0, 0
        for part in self._grown(rows[:: max(1, len(rows) // 2000)], starts, ends):
            tried += len(part)
            left += len(kept(part))
        return int(number.sum() * left / max(tried, 1))

    def _table(self, rows: Ints) -> Relation:
        """A pair relation: membership matrix, and its rows as starts and ends."""
        table = np.zeros((self.base, self.base), dtype=bool)
        table[rows[:, 0], rows[:, 1]] = True
        first, second = np.nonzero(table)
        starts = np.searchsorted(first, np.arange(self.base + 1))
        return table, starts, second

    def _key(self, rows: Ints) -> Ints:
        key = np.zeros(len(rows), dtype=np.int64)
        for column in range(rows.shape[1]):
            key = key * self.base + rows[:, column]
        return key

    def _grown(self, rows: Ints, starts: Ints, ends: Ints) -> Iterator[Ints]:
        """Every row with each partner of its last contact, in blocks."""
        number = starts[rows[:, -1] + 1] - starts[rows[:, -1]]
        total = np.cumsum(number)
        begin = 0
        while begin < len(rows):
            done = total[begin - 1] if begin else 0
            end = max(int(np.searchsorted(total, done + BLOCK, side="right")), begin + 1)
            part, count = rows[begin:end], number[begin:end]
            repeated = np.repeat(part, count, axis=0)
            offset = np.arange(len(repeated)) - np.repeat(np.cumsum(count) - count, count)
            partner = ends[np.repeat(starts[part[:, -1]], count) + offset]
            yield np.column_stack([repeated, partner])
            begin = end

    def _triples(self, three: Limbs, pairs: dict[Limbs, Relation]) -> Iterator[Ints]:
        a, b, c = three
        table, _, _ = pairs[a, b]
        rows = np.argwhere(table)
        _, starts, ends = pairs[b, c]
        outer = pairs[a, c][0]
        for grown in self._grown(rows, starts, ends):
            yield grown[outer[grown[:, 0], grown[:, 2]]]

    def _quads(self, pairs: dict[Limbs, Relation], triples: dict[Limbs, Ints]) -> Iterator[Ints]:
        rows = triples[Limb.LH, Limb.RH, Limb.LF]
        _, starts, ends = pairs[Limb.LF, Limb.RF]
        for grown in self._grown(rows, starts, ends):
            yield self._whole(grown, pairs, triples)

    def _whole(
        self, rows: Ints, pairs: dict[Limbs, Relation], triples: dict[Limbs, Ints]
    ) -> Ints:
        """Those of full stances (M, 4) whose pairs and triples are all possible."""
        for limb in (Limb.LH, Limb.RH):
            rows = rows[pairs[limb, Limb.RF][0][rows[:, limb], rows[:, 3]]]
        for three in ((0, 1, 3), (0, 2, 3), (1, 2, 3)):
            known = self._key(triples[Limb(three[0]), Limb(three[1]), Limb(three[2])])
            rows = rows[_place(known, self._key(rows[:, three]))[1]]
        return rows

def _place(known: Ints, wanted: Ints) -> tuple[Ints, Flags]:
    """Where each of ``wanted`` stands in the sorted ``known``, and whether it does."""
    if not len(known):
        return np.zeros(len(wanted), dtype=np.int64), np.zeros(len(wanted), dtype=bool)
    place = np.minimum(np.searchsorted(known, wanted), len(known) - 1)
    return place, np.asarray(known[place] == wanted)
