"""The arcs of all moves of one body, as arrays."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FREE, Limb
from climbpath.errors import TooLargeError
from climbpath.motion.model import Drive, Motion
from climbpath.posture.linkage import Linkage
from climbpath.route.measures import (
    across_reach,
    landing_classes,
    mean_distance,
    off_line,
    reach_distances,
)
from climbpath.route.nodes import LANDED, LASTS, READY, NodeCode
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

BYTES_PER_ARC = 75
"""Peak memory of building and searching, per arc, measured."""

SAME_TIME = 1e-7
"""A step that is quicker than what else must be done by no more than this, s, is not quicker."""

SAME_SPEED = 1e-9


class Arcs:
    """Arcs as arrays (M,), small since there may be very many: tail, head, time [us], area
    [mm ms] and event, all int32."""

    def __init__(self, tail: Ints, head: Ints, time: Array, mean_off: Array, event: Ints) -> None:
        """From time [s] and mean distance from the line [m]."""
        self.tail, self.head = tail.astype(np.int32), head.astype(np.int32)
        self.time = np.rint(time * 1e6).astype(np.int32)
        self.area = np.rint(time * mean_off * 1e6).astype(np.int32)
        self.event = event.astype(np.int32)


def _ragged(first: Ints, number: Ints) -> tuple[Ints, Ints]:
    """For rows with ``number`` items from ``first`` on: row index and item of every entry."""
    row = np.repeat(np.arange(len(number)), number)
    offset = np.arange(len(row)) - np.repeat(np.cumsum(number) - number, number)
    return row, first[row] + offset


@dataclass(frozen=True)
class _Step:
    """Steps (M,) of one landing limb: samples of the support and of the landing stance, change,
    drive, reach time, mean distance from the line, event, and ``last`` if a hand lands.
    """

    start: Ints
    end: Ints
    change: Array
    drive: Drive
    reach: Array
    off: Array
    event: Ints
    last: int | None


class Builder:
    """Holds the arrays that all kinds of arcs share."""

    def __init__(self, options: ContactOptions, linkage: Linkage, stances: StanceSet,
                 motion: Motion, line_x: float, strength: Array) -> None:
        self.options, self.stances, self.motion = options, stances, motion
        self.strength = strength
        self.speeds = np.array(motion.speeds)
        self.durations = np.array(motion.durations)
        self.classes = landing_classes(motion)
        self.code = NodeCode(stances.samples, options.holds, len(self.speeds), len(self.classes))
        self.off = off_line(stances.com[:, 0], line_x)
        struck = (stances.contacts >= 0) & options.strike[np.maximum(stances.contacts, 0)]
        self.over = np.asarray(struck.any(axis=1))
        self.number = np.diff(stances.first_sample)
        engaged = stances.contacts != FREE
        self.hands = engaged[:, :2].sum(axis=1)
        self.feet = engaged[:, 2:].sum(axis=1)
        # Whether limbs may land in a stance at all.
        self.lands = (self.hands > 0) | (not motion.hand_holds)
        self.distance = reach_distances(options, linkage, stances)
        self.across = across_reach(linkage, stances)
        left, right = stances.contacts[:, Limb.LH], stances.contacts[:, Limb.RH]
        self.paired = (left >= 0) & (left == right)
        self.span = int(stances.level.max() - stances.level.min()) + 1 if stances.samples else 1
        self.lowest = int(stances.level.min()) if stances.samples else 0
        self.key = stances.sample_stance * self.span + (stances.level - self.lowest)

    def guard(self, memory_bytes: float) -> None:
        """Count the arcs before any is made."""
        arcs = 0
        for limb in Limb:
            landing = np.flatnonzero(self.stances.support[:, limb] >= 0)
            support = self.stances.support[landing, limb]
            arcs += int((self.number[landing] * (self.number[support] + 2)).sum())
        needed = arcs * LASTS * (len(self.speeds) + len(self.classes) - 1) * BYTES_PER_ARC
        if needed > memory_bytes:
            raise TooLargeError(
                f"the search graph would have about {arcs * LASTS / 1e6:.0f} million steps, "
                f"{needed / 1e9:.1f} GB, with {memory_bytes / 1e9:.1f} GB to use. Fewer holds "
                "(--avoid, or one lane of the wall), --no-smears or --no-matching would reduce it."
            )

    def _spread(self, tail: Ints, head: Ints, time: Array, off: Array, event: Ints,
                last: int | None = None) -> Arcs:
        """Arcs for every hand that can have moved last: from nodes of last 0 to nodes of last 0,
        or, if the hand that lands is given by ``last``, of that.
        """
        step = np.arange(LASTS) * self.code.phases
        after = step if last is None else np.full(LASTS, last * self.code.phases)
        return Arcs((tail[:, None] + step).ravel(), (head[:, None] + after).ravel(),
                    np.repeat(time, LASTS), np.repeat(off, LASTS), np.repeat(event, LASTS))

    def _everywhere(self, samples: Ints) -> tuple[Ints, Ints]:
        """Samples with every speed level: repeated samples, and the levels."""
        levels = len(self.speeds)
        return np.repeat(samples, levels), np.tile(np.arange(levels), len(samples))

    def level_of(self, speed: Array) -> Ints:
        """The highest speed level that is not above ``speed``."""
        return np.searchsorted(self.speeds, speed + SAME_SPEED, side="right") - 1

    def phase_of(self, time: Array, hand: bool) -> Ints:
        """The landed phase of a move that lasted ``time``, of a hand or not."""
        if hand and self.motion.hand_apart is not None:
            return np.full(len(time), self.code.phases - 1)
        kind = np.searchsorted(self.durations, time + SAME_TIME, side="right") - 1
        return LANDED + np.maximum(kind, 0)

    def flown_phase(self, number: int) -> Ints:
        """The landed phase of hands after flights."""
        of_hands = self.motion.hand_apart is not None
        return np.full(number, self.code.phases - 2 if of_hands else LANDED)

    def risen_phase(self, time: Array) -> Ints:
        """The phase after a rise of ``time``: as after a move, if it lasted as long as one."""
        long = time + SAME_TIME >= self.motion.least_step
        return np.where(long, self.phase_of(time, False), READY)

    def settling(self) -> Arcs:
        """From just landed to ready, without time."""
        sample, speed = self._everywhere(np.arange(self.stances.samples))
        parts = [(self.code.node(sample, speed, 0, LANDED + k), self.code.node(sample, speed, 0,
                  READY)) for k in range(len(self.classes))]
        tail = np.concatenate([t for t, _ in parts])
        head = np.concatenate([h for _, h in parts])
        nothing = np.zeros(len(tail))
        return self._spread(tail, head, nothing, nothing, np.full(len(tail), -1))

    def shedding(self) -> Arcs:
        """From a speed level to the next slower one."""
        sample, speed = self._everywhere(np.arange(self.stances.samples))
        sample, speed = sample[speed > 0], speed[speed > 0]
        nothing = np.zeros(len(sample))
        return self._spread(self.code.node(sample, speed, 0, READY),
                            self.code.node(sample, speed - 1, 0, READY),
                            nothing, nothing, np.full(len(sample), -1))

    def _at_level(self, stance: Ints, level: Ints) -> tuple[Ints, Ints]:
        """The first sample of a stance at a level, -1 where it has none, and how many it has."""
        if not len(self.key):
            return np.full(len(stance), -1), np.zeros(len(stance), np.int64)
        wanted = stance * self.span + (level - self.lowest)
        place = np.searchsorted(self.key, wanted)
        number = np.searchsorted(self.key, wanted, side="right") - place
        return np.where(number > 0, place, -1), number

    def _nearest(self, stance: Ints, like: Ints) -> Ints:
        """Of a stance's samples at the level of sample ``like`` the one nearest to it in x; its
        highest where it does not come so high, else -1."""
        first, number = self._at_level(stance, self.stances.level[like])
        x = self.stances.com[:, 0]
        second = np.minimum(first + 1, len(x) - 1)
        other = np.abs(x[second] - x[like]) < np.abs(x[np.maximum(first, 0)] - x[like])
        found = np.where((number > 1) & other, second, first)
        # A stance that does not come so high is taken at its own highest sample.
        highest = self.stances.first_sample[stance + 1] - 1
        below = (number == 0) & (self.stances.level[highest] < self.stances.level[like])
        return np.where(below, highest, found)

    def _same_level(self, limb: int) -> tuple[Ints, Ints]:
        """Samples of stances and the samples at the same level of what is left without limb."""
        stances = self.stances
        sample = np.flatnonzero(stances.support[stances.sample_stance, limb] >= 0)
        support = stances.support[stances.sample_stance[sample], limb]
        first, number = self._at_level(support, stances.level[sample])
        row, left = _ragged(first, number)
        return sample[row], left

    def _drive(self, stance: Ints, first: Ints, second: Ints) -> Drive:
        """The contacts of a stance, as strong as those of two samples."""
        return Drive(self.hands[stance], self.feet[stance], self.strength[first],
                     self.strength[second])

    def _shift(self, first: Ints, second: Ints, drive: Ints) -> tuple[Array, Array]:
        """Change and time between two samples of one level; heights differ only off the lattice."""
        change = self.stances.com[second] - self.stances.com[first]
        change[:, 1] = np.where(np.abs(change[:, 1]) <= SAME_HEIGHT, 0.0, change[:, 1])
        return change, self.motion.shift(change, self._drive(drive, first, second))

    def releases(self, limb: int) -> Arcs:
        """A limb lets go: no time but that of the shift the support takes, and a hand's wait."""
        sample, left = self._same_level(limb)
        going = ~self.over[self.stances.sample_stance[sample]]
        sample, left = sample[going], left[going]
        _, time = self._shift(sample, left, self.stances.sample_stance[left])
        off = mean_distance(self.off[sample], self.off[left])
        many = len(self.speeds) * LASTS
        last = np.tile(np.arange(LASTS), len(sample) * len(self.speeds))
        time, off = np.repeat(time, many), np.repeat(off, many)
        here, speed = self._everywhere(sample)
        there, _ = self._everywhere(left)
        here, there, speed = (np.repeat(a, LASTS) for a in (here, there, speed))
        if limb <= Limb.RH:
            waits = last == limb
            wait = self.motion.repeat_wait
            off = np.where(waits, (off * time + np.abs(self.off[here]) * wait)
                           / np.maximum(time + wait, 1e-12), off)
            # Nobody keeps an upward speed while waiting.
            after = np.where(waits, 0, speed)
            time = np.where(waits, time + wait, time)
        else:
            after = speed
        return Arcs(self.code.node(here, speed, last, READY),
                    self.code.node(there, after, last, READY),
                    time, off, np.full(len(here), -1))

    def reach(self, limb: int, sample: Ints) -> Array:
        """Reach time of a landing limb into samples."""
        contact = self.stances.contacts[self.stances.sample_stance[sample], limb]
        hold = np.maximum(contact, 0)
        options = self.options
        on_hold = contact >= 0
        hand = np.full(len(sample), limb <= Limb.RH)
        given = options.hand_quality if limb <= Limb.RH else options.foot_quality
        quality = np.where(on_hold, given[hold], 1.0)
        struck = on_hold & options.strike[hold]
        time = self.motion.reach(self.distance[sample, limb], hand, quality, struck)
        if limb <= Limb.RH:
            time += self.motion.across(self.across[sample, limb])
            time += np.where(self.paired[self.stances.sample_stance[sample]], self.motion.pair, 0.0)
        return time

    def event(self, limb: int, sample: Ints) -> Ints:
        contact = self.stances.contacts[self.stances.sample_stance[sample], limb]
        return self.code.event(limb, contact)

    def rising(self) -> list[Arcs]:
        """The centre of mass rises while all limbs stay; free limbs travel meanwhile."""
        stances = self.stances
        stance = np.flatnonzero(~self.over)
        row, start = _ragged(stances.first_sample[stance], self.number[stance])
        pair, end = _ragged(start + 1, stances.first_sample[stance[row] + 1] - start - 1)
        start, hub = start[pair], stance[row[pair]]
        change = stances.com[end] - stances.com[start]
        near = (change[:, 1] <= MAX_RISE) & (stances.level[end] > stances.level[start])
        start, end, hub, change = start[near], end[near], hub[near], change[near]
        drive = self._drive(hub, start, end)
        off = mean_distance(self.off[start], self.off[end])
        parts = []
        for level, speed in enumerate(self.speeds):
            time, after = self.motion.travel(change, drive, float(speed))
            good = np.flatnonzero(np.isfinite(time))
            parts.append(self._spread(
                self.code.node(start[good], level, 0, READY),
                self.code.node(end[good], self.level_of(after[good]), 0,
                               self.risen_phase(time[good])),
                time[good], off[good], np.full(len(good), -1),
            ))
        return parts

    def moves(self, limb: int) -> list[Arcs]:
        """A limb lands: from samples of the support to samples of the landing stance."""
        stances = self.stances
        landing = np.flatnonzero((stances.support[:, limb] >= 0) & self.lands)
        support = stances.support[landing, limb]
        landing, support = landing[~self.over[support]], support[~self.over[support]]
        row, start = _ragged(stances.first_sample[support], self.number[support])
        pair, end = _ragged(stances.first_sample[landing][row], self.number[landing][row])
        start, hub = start[pair], support[row[pair]]
        rise = stances.com[end, 1] - stances.com[start, 1]
        near = (rise <= MAX_RISE) & (rise >= -MAX_DROP)
        start, end, hub = start[near], end[near], hub[near]
        change = stances.com[end] - stances.com[start]
        # At its end a step is carried by what the support can do there, if it is known.
        there = self._nearest(hub, end)
        drive = self._drive(hub, start, np.where(there >= 0, there, start))
        step = _Step(start, end, change, drive, self.reach(limb, end),
                     mean_distance(self.off[start], self.off[end]), self.event(limb, end),
                     int(limb) if limb <= Limb.RH else None)
        quickest = [self.motion.travel(change, drive, float(speed)) for speed in self.speeds]
        parts = self._fresh(step, quickest)
        if self.motion.in_place:
            for kind, (duration, of_hand) in enumerate(self.classes):
                if not of_hand or step.last is None:
                    parts += self._carried(step, quickest, kind, duration)
        return parts

    def _landing(self, step: _Step, good: Ints, level: Ints | int, phase: int, time: Array,
                 after: Array) -> Arcs:
        """Arcs of chosen steps, from a speed level and phase, as long as ``time``."""
        return self._spread(
            self.code.node(step.start[good], level, 0, phase),
            self.code.node(step.end[good], self.level_of(after), 0,
                           self.phase_of(time, step.last is not None)),
            time, step.off[good], step.event[good], step.last,
        )

    def _fresh(self, step: _Step, quickest: list[tuple[Array, Array]]) -> list[Arcs]:
        """The limb begins to travel with the step."""
        least = np.maximum(step.reach, self.least_of(step))
        parts = []
        for number, (time, after) in enumerate(quickest):
            good = np.flatnonzero(np.isfinite(time) & (time > least + SAME_TIME))
            parts.append(self._landing(step, good, number, READY, time[good], after[good]))
        times = np.array([time for time, _ in quickest])
        # Hands have one class: there is nothing to gain from lasting longer.
        single = step.last is not None and self.motion.hand_apart is not None
        for kind, duration in enumerate(self.durations[:1] if single else self.durations):
            longer = np.maximum(least, duration)
            need, after = self.motion.unhurried(step.change, step.drive, longer)
            level = np.searchsorted(self.speeds, need - SAME_SPEED, side="left")
            enough = level < len(self.speeds)
            if kind:
                own = times[np.minimum(level, len(self.speeds) - 1), np.arange(len(least))]
                enough &= (duration > least + SAME_TIME) & (own < longer - SAME_TIME)
            chosen = np.flatnonzero(enough)
            parts.append(self._landing(step, chosen, level[chosen], READY, longer[chosen],
                                       after[chosen]))
        return parts

    def least_of(self, step: _Step) -> float:
        """No step is shorter that the limb begins with."""
        apart = self.motion.hand_apart if step.last is not None else None
        return max(self.motion.least_step, apart or 0.0)

    def _carried(self, step: _Step, quickest: list[tuple[Array, Array]], kind: int,
                 duration: float) -> list[Arcs]:
        """The limb has travelled during the preceding move, of a class of duration, already."""
        fresh = np.maximum(step.reach, self.least_of(step))
        # Without a rise the limb lands with the move before (``joint_landings``).
        rises = self.stances.level[step.end] > self.stances.level[step.start]
        fresh = np.where(rises, fresh, -np.inf)
        least = np.maximum(np.maximum(step.reach, self.least_of(step)) - duration,
                           self.motion.least_carried)
        parts = []
        for number, (time, after) in enumerate(quickest):
            good = np.flatnonzero((time > least + SAME_TIME) & (time < fresh - SAME_TIME))
            parts.append(self._landing(step, good, number, LANDED + kind, time[good], after[good]))
        need, after = self.motion.unhurried(step.change, step.drive, least)
        level = np.searchsorted(self.speeds, need - SAME_SPEED, side="left")
        chosen = np.flatnonzero((level < len(self.speeds)) & (least < fresh - SAME_TIME))
        parts.append(self._landing(step, chosen, level[chosen], LANDED + kind, least[chosen],
                                   after[chosen]))
        return parts

    def joint_landings(self, limb: int) -> list[Arcs]:
        """A free limb lands with the move that has just ended: only what its reach adds."""
        end, start = self._same_level(limb)
        good = self.lands[self.stances.sample_stance[end]]
        good &= ~self.over[self.stances.sample_stance[start]]
        end, start = end[good], start[good]
        hub = self.stances.sample_stance[start]
        change, shift = self._shift(start, end, hub)
        drive = self._drive(hub, start, end)
        off = mean_distance(self.off[start], self.off[end])
        event, reach = self.event(limb, end), self.reach(limb, end)
        last = int(limb) if limb <= Limb.RH else None
        parts = []
        for kind, (duration, of_hand) in enumerate(self.classes):
            if of_hand and last is not None:
                continue
            least = (self.motion.hand_apart or 0.0) if last is not None else 0.0
            extra = np.maximum(np.maximum(reach, least) - duration, 0.0)
            time = np.maximum(extra, shift)
            need, _ = self.motion.unhurried(change, drive, time)
            # What is left to reach after the step is waited for at rest.
            waits = extra > 0.0
            chosen = np.flatnonzero(~waits | (need <= 0.0))
            for level in range(len(self.speeds)):
                after = np.where(waits[chosen], 0, level)
                phase = self.phase_of(np.full(len(chosen), duration), last is not None)
                parts.append(self._spread(
                    self.code.node(start[chosen], level, 0, LANDED + kind),
                    self.code.node(end[chosen], after, 0, phase),
                    time[chosen], off[chosen], event[chosen], last,
                ))
        return parts
