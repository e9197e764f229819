"""From stances and a motion model to the search graph.

A move is: limbs let go (each release an arc of no time to the stance that is left, its support),
one limb lands (an arc from a sample of the support to a sample of the landing stance, as long as
the larger of travel and reach), and others may land with it (arcs that add only what their reach
takes beyond the least step). Whenever a limb lands, a hand has a hold: nothing here looks at
forces, and none but a hand keeps a body from tipping off the wall. A strike ends the climb:
nothing follows it. So any limbs may move together while arcs run only between a stance and its
supports: their number grows with those links, never with pairs of stances.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array

from climbpath.contacts import FLOOR, FREE, Limb
from climbpath.errors import TooLargeError
from climbpath.motion.model import Drive, Motion
from climbpath.posture.assembly import rest_points
from climbpath.posture.linkage import Linkage
from climbpath.posture.newton import ON_LINE
from climbpath.route.graph import RouteGraph
from climbpath.route.nodes import LANDED, LASTS, READY, NodeCode
from climbpath.stance.enumerate import batch_of
from climbpath.stance.options import ContactOptions
from climbpath.stance.stances import StanceSet

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

MAX_RISE = 0.80
MAX_DROP = 0.25
"""How far the centre of mass may rise or sink in one move, m."""

SAME_HEIGHT = 0.01
"""Samples of one level whose heights differ by no more than this, m, count as equally high: twice
what a sample may stand off its level, and a little."""

FLIGHT_BIN = 0.10
FLIGHT_SIDE = 0.35
"""Flights are sorted by take-off x in bins of this width, and drift sideways by at most that, m."""

PART = 100_000
"""Samples looked at together where only their reach is needed."""

BYTES_PER_ARC = 75
"""Peak memory of building and searching, per arc, measured."""

@dataclass(frozen=True)
class SearchGraph:
    """The graph of one body on one wall and what its nodes mean."""

    graph: RouteGraph
    code: NodeCode
    stances: StanceSet
    reach_distance: Array


class _Arcs:
    """Arcs as arrays (M,), small since there may be very many: tail, head, time [us], area
    [mm ms] and event, all int32."""

    def __init__(self, tail: Ints, head: Ints, time: Array, mean_off: Array, event: Ints) -> None:
        """From time [s] and mean distance from the line [m]."""
        self.tail, self.head = tail.astype(np.int32), head.astype(np.int32)
        self.time = np.rint(time * 1e6).astype(np.int32)
        self.area = np.rint(time * mean_off * 1e6).astype(np.int32)
        self.event = event.astype(np.int32)


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


def build_graph(
    options: ContactOptions, linkage: Linkage, stances: StanceSet, motion: Motion, line_x: float,
    flights: bool = True, memory_bytes: float = np.inf,
) -> SearchGraph:
    """All arcs of all moves. TooLargeError when they would not fit into ``memory_bytes``."""
    builder = _Builder(options, linkage, stances, motion, line_x)
    builder.guard(memory_bytes)
    parts = [builder.settling()]
    for limb in Limb:
        parts.append(builder.releases(limb))
        parts.append(builder.moves(limb))
        parts.append(builder.joint_landings(limb))
    nodes = builder.code.plain
    if flights:
        arcs, nodes = builder.flights()
        parts += arcs
    graph = _compressed(nodes, parts, builder.off)
    return SearchGraph(graph, builder.code, stances, builder.distance)


def _compressed(nodes: int, parts: list[_Arcs], off: Array) -> RouteGraph:
    """Sort the arcs into rows; no pair of nodes has two arcs, by how they are made."""
    tail = np.concatenate([p.tail for p in parts])
    head = np.concatenate([p.head for p in parts])
    number = np.arange(len(tail), dtype=np.int32)
    rows = coo_array((number, (tail, head)), shape=(nodes, nodes)).tocsr()
    del tail, head, number
    for part in parts:
        del part.tail, part.head
    rows.sort_indices()
    order = rows.data

    def sorted_(name: str) -> NDArray[np.int32]:
        joined = np.concatenate([getattr(p, name) for p in parts])
        for p in parts:
            delattr(p, name)
        return np.asarray(joined[order])

    excursion = np.zeros(nodes)
    plain = len(off) * LASTS * 2
    excursion[:plain] = np.repeat(np.abs(off) * 1e3, LASTS * 2)
    return RouteGraph(
        indptr=rows.indptr.astype(np.int64),
        head=rows.indices.astype(np.int32, copy=False),
        time_us=sorted_("time").astype(np.int64),
        area=sorted_("area").astype(np.int64),
        event=sorted_("event"),
        rank=np.arange(nodes),
        excursion=excursion,
    )


def _ragged(first: Ints, number: Ints) -> tuple[Ints, Ints]:
    """For rows with ``number`` items from ``first`` on: row index and item of every entry."""
    row = np.repeat(np.arange(len(number)), number)
    offset = np.arange(len(row)) - np.repeat(np.cumsum(number) - number, number)
    return row, first[row] + offset


class _Builder:
    """Holds the arrays that all kinds of arcs share."""

    def __init__(self, options: ContactOptions, linkage: Linkage, stances: StanceSet,
                 motion: Motion, line_x: float) -> None:
        self.options, self.stances, self.motion = options, stances, motion
        self.code = NodeCode(stances.samples, options.holds)
        self.off = off_line(stances.com[:, 0], line_x)
        struck = (stances.contacts >= 0) & options.strike[np.maximum(stances.contacts, 0)]
        self.over = np.asarray(struck.any(axis=1))
        self.number = np.diff(stances.first_sample)
        engaged = stances.contacts != FREE
        self.hands = engaged[:, :2].sum(axis=1)
        self.feet = engaged[:, 2:].sum(axis=1)
        self.distance = reach_distances(options, linkage, stances)

    def guard(self, memory_bytes: float) -> None:
        """Count the arcs before any is made."""
        arcs = 0
        for limb in Limb:
            landing = np.flatnonzero(self.stances.support[:, limb] >= 0)
            support = self.stances.support[landing, limb]
            arcs += int((self.number[landing] * (self.number[support] + 2)).sum()) * LASTS
        needed = arcs * BYTES_PER_ARC
        if needed > memory_bytes:
            raise TooLargeError(
                f"the search graph would have about {arcs / 1e6:.0f} million arcs, "
                f"{needed / 1e9:.1f} GB, with {memory_bytes / 1e9:.1f} GB to use. Fewer holds "
                "(--avoid, or one lane of the wall), --no-smears or --no-matching would reduce it."
            )

    def settling(self) -> _Arcs:
        """From just landed to ready, without time."""
        sample = np.repeat(np.arange(self.stances.samples), LASTS)
        last = np.tile(np.arange(LASTS), self.stances.samples)
        nothing = np.zeros(len(sample))
        return _Arcs(self.code.node(sample, last, LANDED), self.code.node(sample, last, READY),
                     nothing, nothing, np.full(len(sample), -1))

    def _same_level(self, limb: int) -> tuple[Ints, Ints]:
        """Samples of stances and the samples at the same level of what is left without limb."""
        stances = self.stances
        sample = np.flatnonzero(stances.support[stances.sample_stance, limb] >= 0)
        support = stances.support[stances.sample_stance[sample], limb]
        span = int(stances.level.max() - stances.level.min()) + 1 if stances.samples else 1
        key = stances.sample_stance * span + (stances.level - stances.level.min())
        wanted = support * span + (stances.level[sample] - stances.level.min())
        place = np.minimum(np.searchsorted(key, wanted), len(key) - 1)
        found = key[place] == wanted
        return sample[found], place[found]

    def _lasts(self, first: Ints, second: Ints) -> tuple[Ints, Ints, Ints]:
        """Repeat pairs of samples for every value of ``last``."""
        last = np.tile(np.arange(LASTS), len(first))
        return np.repeat(first, LASTS), np.repeat(second, LASTS), last

    def _shift(self, first: Ints, second: Ints, drive: Ints) -> Array:
        """Time to shift between two samples of one level; heights differ only off the lattice."""
        change = self.stances.com[second] - self.stances.com[first]
        change[:, 1] = np.where(np.abs(change[:, 1]) <= SAME_HEIGHT, 0.0, change[:, 1])
        return self.motion.travel(change, Drive(self.hands[drive], self.feet[drive]))

    def releases(self, limb: int) -> _Arcs:
        """A limb lets go: no time but that of the shift the support takes, and a hand's wait."""
        sample, left = self._same_level(limb)
        going = ~self.over[self.stances.sample_stance[sample]]
        sample, left = sample[going], left[going]
        time = self._shift(sample, left, self.stances.sample_stance[left])
        off = mean_distance(self.off[sample], self.off[left])
        sample, left, last = self._lasts(sample, left)
        time, off = np.repeat(time, LASTS), np.repeat(off, LASTS)
        if limb <= Limb.RH:
            waits = last == limb + 1
            off = np.where(waits, (off * time + np.abs(self.off[sample]) * self.motion.repeat_wait)
                           / np.maximum(time + self.motion.repeat_wait, 1e-12), off)
            time = np.where(waits, time + self.motion.repeat_wait, time)
        return _Arcs(self.code.node(sample, last, READY), self.code.node(left, last, READY),
                     time, off, np.full(len(sample), -1))

    def _after(self, limb: int, last: Ints) -> Ints:
        """Which hand moved last once ``limb`` has landed: foot moves leave it as it was."""
        return np.full(len(last), limb + 1) if limb <= Limb.RH else last

    def _reach(self, limb: int, sample: Ints) -> Array:
        """Reach time of a landing limb into samples."""
        contact = self.stances.contacts[self.stances.sample_stance[sample], limb]
        hold = np.maximum(contact, 0)
        options = self.options
        on_hold = contact >= 0
        hand = np.full(len(sample), limb <= Limb.RH)
        given = options.hand_quality if limb <= Limb.RH else options.foot_quality
        quality = np.where(on_hold, given[hold], 1.0)
        struck = on_hold & options.strike[hold]
        return self.motion.reach(self.distance[sample, limb], hand, quality, struck)

    def moves(self, limb: int) -> _Arcs:
        """A limb lands: from samples of the support to samples of the landing stance."""
        stances = self.stances
        landing = np.flatnonzero((stances.support[:, limb] >= 0) & (self.hands > 0))
        support = stances.support[landing, limb]
        landing, support = landing[~self.over[support]], support[~self.over[support]]
        row, start = _ragged(stances.first_sample[support], self.number[support])
        pair, end = _ragged(stances.first_sample[landing][row], self.number[landing][row])
        start, drive = start[pair], support[row[pair]]
        rise = stances.com[end, 1] - stances.com[start, 1]
        near = (rise <= MAX_RISE) & (rise >= -MAX_DROP)
        start, end, drive = start[near], end[near], drive[near]
        change = stances.com[end] - stances.com[start]
        time = self.motion.travel(change, Drive(self.hands[drive], self.feet[drive]))
        time = np.maximum(np.maximum(time, self._reach(limb, end)), self.motion.least_step)
        off = mean_distance(self.off[start], self.off[end])
        event = self.code.event(limb, stances.contacts[stances.sample_stance[end], limb])
        start, end, last = self._lasts(start, end)
        return _Arcs(self.code.node(start, last, READY),
                     self.code.node(end, self._after(limb, last), LANDED),
                     np.repeat(time, LASTS), np.repeat(off, LASTS), np.repeat(event, LASTS))

    def joint_landings(self, limb: int) -> _Arcs:
        """A free limb lands with the move that has just ended: only what its reach adds."""
        end, start = self._same_level(limb)
        held = self.hands[self.stances.sample_stance[end]] > 0
        held &= ~self.over[self.stances.sample_stance[start]]
        end, start = end[held], start[held]
        extra = np.maximum(self._reach(limb, end) - self.motion.least_step, 0.0)
        time = np.maximum(extra, self._shift(start, end, self.stances.sample_stance[start]))
        off = mean_distance(self.off[start], self.off[end])
        event = self.code.event(limb, self.stances.contacts[self.stances.sample_stance[end], limb])
        start, end, last = self._lasts(start, end)
        return _Arcs(self.code.node(start, last, LANDED),
                     self.code.node(end, self._after(limb, last), LANDED),
                     np.repeat(time, LASTS), np.repeat(off, LASTS), np.repeat(event, LASTS))

    def flights(self) -> tuple[list[_Arcs], int]:
        """Leave the wall from a foothold, land with one hand: through nodes by height and x."""
        stances, code = self.stances, self.code
        owner = stances.sample_stance
        contacts = stances.contacts
        pushes = ((contacts[:, 2:] >= 0) | (contacts[:, 2:] == FLOOR)).any(axis=1)
        leaving = np.flatnonzero((pushes & ~self.over)[owner])
        single = (self.hands == 1) & (self.feet == 0)
        landing = np.flatnonzero(single[owner])
        if not len(leaving) or not len(landing):
            return [], code.plain
        bins = np.rint(self.off / FLIGHT_BIN).astype(np.int64)
        lowest, left = stances.level.min(), bins.min()
        wide = int(bins.max() - left) + 1
        place = (stances.level - lowest) * wide + (bins - left)
        sample, _, last = self._lasts(leaving, leaving)
        push = self.motion.take_off()
        parts = [_Arcs(code.node(sample, last, READY), code.plain + place[sample],
                       np.full(len(sample), push), np.abs(self.off[sample]),
                       np.full(len(sample), -1))]
        used = np.unique(place[leaving])
        step = stances.lattice.step
        limbs = np.where(contacts[owner[landing], 0] != FREE, Limb.LH, Limb.RH)
        up = int(MAX_RISE / step) + 1
        for levels in range(up):
            time = float(self.motion.flight(np.array([levels * step]))[0])
            if not np.isfinite(time):
                continue
            for drift in range(-int(FLIGHT_SIDE / FLIGHT_BIN), int(FLIGHT_SIDE / FLIGHT_BIN) + 1):
                across = bins[landing] - left - drift
                below = stances.level[landing] - lowest - levels
                origin = below * wide + across
                good = (across >= 0) & (across < wide) & (below >= 0)
                good &= np.isin(origin, used)
                end = landing[good]
                middle = (bins[end] - drift) * FLIGHT_BIN
                last = limbs[good] + 1
                event = np.where(limbs[good] == Limb.LH,
                                 code.event(Limb.LH, contacts[owner[end], 0]),
                                 code.event(Limb.RH, contacts[owner[end], 1]))
                parts.append(_Arcs(code.plain + origin[good], code.node(end, last, LANDED),
                                   np.full(len(end), time), mean_distance(middle, self.off[end]),
                                   event))
        nodes = code.plain + (int(stances.level.max() - lowest) + 1) * wide
        return parts, nodes


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
