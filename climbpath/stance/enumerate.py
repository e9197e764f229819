"""All stances of a body on a wall, found level by level.

A stance can only be possible if every stance with one contact fewer is. So pairs of contacts are
tried first (those near enough by a tree search), triples only where all three pairs are possible,
and full stances only where all four triples are: nothing is solved that a smaller stance already
rules out, and nothing that two far-apart stances would need is ever formed.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from climbpath.contacts import FLOOR, FREE, SMEAR, Limb
from climbpath.errors import TooLargeError
from climbpath.posture.batch import StanceBatch, stance_batch
from climbpath.posture.linkage import Linkage
from climbpath.posture.solver import solve_postures
from climbpath.stance.options import HALF_FOOT_BREADTH, ContactOptions, contact_points

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]
Limbs = tuple[Limb, ...]
Relation = tuple[Flags, Ints, Ints]
"""Which pairs of contacts go together: a table, and its rows as starts and partners."""

BLOCK = 1_000_000
"""Candidates formed at a time."""

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
        return Found(
            self.contacts[index], self.margin[index], self.turn[..., index], self.shift[:, index]
        )


@dataclass(frozen=True)
class Allowed:
    """Which stances may be used at all: conditions that leave stances out."""

    avoid: frozenset[int] = frozenset()
    matching: bool = True
    smears: bool = True


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
    search = _Search(options, linkage, allowed, missing, memory_bytes)
    parts = search.on_holds()
    base = Found.join(parts)
    base = base.take(np.asarray((base.contacts >= 0).any(axis=1)))
    if allowed.smears:
        smeared = search.extended(base, _smeared(options, base.contacts))
        base = Found.join([base, smeared])
    struck = search.extended(base, _struck(options, linkage, base.contacts, allowed))
    return Found.join([base, struck])


class _Search:
    """The level-wise search; keeps which partial stances can be extended."""

    def __init__(self, options: ContactOptions, linkage: Linkage, allowed: Allowed,
                 missing: float, memory_bytes: float) -> None:
        self.options, self.linkage, self.allowed = options, linkage, allowed
        self.keep_above = -missing
        # Matching moves a hand or foot by half its breadth, so a triple may be possible where a
        # pair on the unshared points just is not.
        self.extend_above = -missing - max(linkage.hand_breadth / 2, HALF_FOOT_BREADTH)
        self.memory_bytes = memory_bytes
        self.base = options.holds + 1  # one number more for the floor
        self.kept = 0

    def on_holds(self) -> list[Found]:
        """Stances on holds and the floor, from single contacts to all four limbs."""
        choices = self._choices()
        both: list[Limbs] = list(combinations(Limb, 2))
        single: list[tuple[Limbs, Ints]] = [((limb,), choices[limb][:, None]) for limb in Limb]
        double = [(pair, self._near(choices, pair)) for pair in both]
        self._foresee(double)
        found, possible = self._solved([*single, *double])
        parts = [found]
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
        found, possible = self._solved(grown)
        parts.append(found)
        triples: dict[Limbs, Ints] = {}
        for limbs in three:
            rows = np.concatenate(
                [np.zeros((0, 3), np.int64),
                 *(r for (own, _), r in zip(grown, possible, strict=True) if own == limbs)]
            )
            triples[limbs] = rows[np.argsort(self._key(rows))]
        self._guard(self._expected(triples[Limb.LH, Limb.RH, Limb.LF], pairs[Limb.LF, Limb.RF],
                                   lambda rows: self._whole(rows, pairs, triples)))
        parts += [self._solved([(tuple(Limb), rows)])[0] for rows in self._quads(pairs, triples)]
        return parts

    def extended(self, base: Found, contacts: Ints) -> Found:
        """Solve stances made from possible ones by one more contact; keep the possible."""
        self._guard(len(contacts))
        found = solve(self.options, self.linkage, contacts)
        return found.take(found.margin >= self.keep_above)

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
        first, second = (choices[limb][choices[limb] < options.holds] for limb in both)
        rows = []
        if len(first) and len(second):
            near = cKDTree(options.point[first]).sparse_distance_matrix(
                cKDTree(options.point[second]), limit + 1e-6, output_type="ndarray"
            )
            rows.append(np.stack([first[near["i"]], second[near["j"]]], axis=1))
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

    def _solved(self, groups: list[tuple[Limbs, Ints]]) -> tuple[Found, list[Ints]]:
        """Solve partial stances of several sets of limbs in one go.

        Returns the possible stances, and for each group the rows worth extending.
        """
        total = sum(len(rows) for _, rows in groups)
        self._guard(total)
        contacts = np.full((total, 4), FREE, dtype=np.int64)
        begin = 0
        for limbs, rows in groups:
            numbers = np.where(rows == self.options.holds, FLOOR, rows)
            contacts[begin:begin + len(rows), list(limbs)] = numbers
            begin += len(rows)
        found = solve(self.options, self.linkage, contacts)
        kept = found.take(found.margin >= self.keep_above)
        self.kept += len(kept.margin)
        possible = np.split(found.margin >= self.extend_above,
                            np.cumsum([len(rows) for _, rows in groups])[:-1])
        return kept, [rows[good] for (_, rows), good in zip(groups, possible, strict=True)]

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
            rows = rows[_member(known, self._key(rows[:, three]))]
        return rows


def _member(known: Ints, wanted: Ints) -> Flags:
    """Which of ``wanted`` are in the sorted ``known``."""
    if not len(known):
        return np.zeros(len(wanted), dtype=bool)
    place = np.minimum(np.searchsorted(known, wanted), len(known) - 1)
    return np.asarray(known[place] == wanted)


def _smeared(options: ContactOptions, contacts: Ints) -> Ints:
    """Stances with one or both free feet smearing, where a hand has a hold."""
    hand = np.asarray((contacts[:, :2] >= 0).any(axis=1))
    free = (contacts[:, 2:] == FREE) & hand[:, None]
    grown = []
    for feet in ((Limb.LF,), (Limb.RF,), (Limb.LF, Limb.RF)):
        both = np.asarray(free[:, [foot - 2 for foot in feet]].all(axis=1))
        rows = contacts[both].copy()
        rows[:, list(feet)] = SMEAR
        grown.append(rows)
    return np.concatenate(grown)


def _struck(
    options: ContactOptions, linkage: Linkage, contacts: Ints, allowed: Allowed
) -> Ints:
    """Stances with a free hand on a finish pad, and each hand there alone."""
    grown = []
    arm = float(linkage.reach[0]) + linkage.strike_extra + linkage.shoulder_rise
    body = linkage.trunk + float(linkage.reach[2]) + arm + 0.4
    for pad in np.flatnonzero(options.strike):
        if int(pad) in allowed.avoid:
            continue
        outline = options.outlines.get(int(pad))
        size = _radius(outline, options, int(pad)) if outline is not None else 0.0
        gap = np.linalg.norm(options.point - options.point[pad], axis=1)
        index = np.maximum(contacts, 0)
        far = np.asarray(((contacts >= 0) & (gap[index] > body + size)).any(axis=1))
        for hand in (Limb.LH, Limb.RH):
            rows = contacts[(contacts[:, hand] == FREE) & ~far].copy()
            rows[:, hand] = pad
            alone = np.full((1, 4), FREE, dtype=np.int64)
            alone[0, hand] = pad
            grown += [rows, alone]
    return np.concatenate(grown) if grown else np.zeros((0, 4), dtype=np.int64)


def _radius(outline: object, options: ContactOptions, pad: int) -> float:
    """Largest distance of an outline's corners from the pad's point of grip, m."""
    corners = np.asarray(outline.exterior.coords)  # type: ignore[attr-defined]
    return float(np.hypot(*(corners - options.place[pad, :2]).T).max())
