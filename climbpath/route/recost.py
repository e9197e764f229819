"""Working out a route's times and areas again from what its nodes mean, arc by arc.

Nothing of the graph's arrays is read: each arc's kind follows from the stances and phases of its
ends, and its cost from the samples, the strengths and the motion model. A plan is shown only when
both agree.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FREE, Limb
from climbpath.errors import ClimbpathError
from climbpath.motion.model import Drive, Motion
from climbpath.posture.linkage import Linkage
from climbpath.route.arcs import SAME_HEIGHT, SAME_SPEED, SAME_TIME
from climbpath.route.build import SearchGraph
from climbpath.route.flights import FLIGHT_BIN
from climbpath.route.measures import across_reach, landing_classes, off_line
from climbpath.route.nodes import LANDED
from climbpath.route.shortest import Route
from climbpath.stance.options import ContactOptions

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


class Recoster:
    """Costs single arcs of one body's search graph from their definition."""

    def __init__(self, options: ContactOptions, linkage: Linkage, search: SearchGraph,
                 motion: Motion, line_x: float) -> None:
        self.options, self.search, self.motion, self.line_x = options, search, motion, line_x
        self.across = across_reach(linkage, search.stances)
        self.classes = landing_classes(motion)

    def check(self, route: Route) -> None:
        """ClimbpathError unless every arc of ``route`` costs what the graph says."""
        nodes = [int(n) for n in route.nodes]
        for place, arc in enumerate(route.arcs):
            time, area = self.arc(nodes, place)
            stored = int(self.search.graph.time_us[arc]), int(self.search.graph.area[arc])
            if stored != (time, area):
                raise ClimbpathError(
                    f"internal: arc {place} of the plan costs {time} us and {area} mm ms by its "
                    f"definition, but {stored[0]} and {stored[1]} in the graph"
                )

    def arc(self, nodes: Sequence[int], place: int) -> tuple[int, int]:
        """Time [us] and lateral area [mm ms] of the arc from ``nodes[place]`` to the next."""
        tail, head = nodes[place], nodes[place + 1]
        code = self.search.code
        if head >= code.plain:
            return _cost(self.motion.take_off(), abs(self._off(tail)))
        if tail >= code.plain:
            return self._landing_flight(nodes[place - 1], head)
        before, after = tail % code.phases >= LANDED, head % code.phases >= LANDED
        if self._sample(tail) == self._sample(head):
            return 0, 0
        if self._stance(tail) == self._stance(head):
            time, _ = self.motion.travel(*self._step(tail, head, self._stance(tail)),
                                         self._speed(tail))
            return _cost(float(time[0]), _mean(self._off(tail), self._off(head)))
        if not before and after:
            return self._move(tail, head)
        if before and after:
            level = self.search.stances.level
            if level[self._sample(tail)] == level[self._sample(head)]:
                return self._joined(tail, head)
            return self._move(tail, head)
        return self._release(tail, head)

    def _sample(self, node: int) -> int:
        return int(self.search.code.sample(np.array(node)))

    def _stance(self, node: int) -> int:
        return int(self.search.stances.sample_stance[self._sample(node)])

    def _speed(self, node: int) -> float:
        return self.motion.speeds[int(self.search.code.speed(np.array(node)))]

    def _off(self, node: int) -> float:
        x = self.search.stances.com[[self._sample(node)], 0]
        return float(off_line(x, self.line_x)[0])

    def _contacts(self, node: int) -> Ints:
        return np.asarray(self.search.stances.contacts[self._stance(node)])

    def _step(self, tail: int, head: int, hub: int, level: bool = False) -> tuple[Array, Drive]:
        """Change of the centre of mass (1, 3), and what carries it: the contacts of stance ``hub``
        at the start, and at the end's level."""
        stances, strength = self.search.stances, self.search.strength
        first, second = self._sample(tail), self._sample(head)
        change = stances.com[[second]] - stances.com[[first]]
        if level:
            change[:, 1] = np.where(np.abs(change[:, 1]) <= SAME_HEIGHT, 0.0, change[:, 1])
            at_end = strength[second]
        else:
            own = np.arange(stances.first_sample[hub], stances.first_sample[hub + 1])
            there = own[stances.level[own] == stances.level[second]]
            apart = np.abs(stances.com[there, 0] - stances.com[second, 0])
            at_end = strength[there[int(np.argmin(apart))]] if len(there) else strength[first]
            if not len(there) and len(own) and stances.level[own[-1]] < stances.level[second]:
                at_end = strength[own[-1]]
        engaged = stances.contacts[hub] != FREE
        drive = Drive(np.array([engaged[:2].sum()]), np.array([engaged[2:].sum()]),
                      strength[[first]], np.array([at_end]))
        return change, drive

    def _release(self, tail: int, head: int) -> tuple[int, int]:
        limb = self._limb(tail, head)
        shift = float(self.motion.shift(*self._step(tail, head, self._stance(head), True))[0])
        first, second = self._off(tail), self._off(head)
        area = shift * _mean(first, second)
        if limb <= Limb.RH and int(self.search.code.last(np.array(tail))) == limb:
            wait = self.motion.repeat_wait
            return _cost(shift + wait, (area + wait * abs(first)) / max(shift + wait, 1e-12))
        return _cost(shift, _mean(first, second))

    def _reach(self, tail: int, head: int) -> float:
        """Reach time of the limb that lands."""
        return self._reach_of(head, self._limb(tail, head))

    def _limb(self, tail: int, head: int) -> Limb:
        """The limb whose contact differs."""
        return Limb(int(np.flatnonzero(self._contacts(tail) != self._contacts(head))[0]))

    def _reach_of(self, head: int, limb: Limb) -> float:
        contact, hand = int(self._contacts(head)[limb]), limb <= Limb.RH
        given = self.options.hand_quality if hand else self.options.foot_quality
        quality = float(given[contact]) if contact >= 0 else 1.0
        struck = contact >= 0 and bool(self.options.strike[contact])
        distance = self.search.reach_distance[self._sample(head), limb]
        time = self.motion.reach(np.array([distance]), np.array([hand]), np.array([quality]),
                                 np.array([struck]))
        if hand:
            time = time + self.motion.across(self.across[[self._sample(head)], limb])
            left, right = self._contacts(head)[:2]
            time = time + (self.motion.pair if left == right else 0.0)
        return float(time[0])

    def _move(self, tail: int, head: int) -> tuple[int, int]:
        """The quickest step from the speed at its start, or one of a class of duration."""
        code, motion = self.search.code, self.motion
        change, drive = self._step(tail, head, self._stance(tail))
        phase, hand = int(code.phase(np.array(tail))), self._limb(tail, head) <= Limb.RH
        least = max(self._reach(tail, head), motion.least_step)
        if hand:
            least = max(least, motion.hand_apart or 0.0)
        if phase >= LANDED:
            times = [max(least - self.classes[phase - LANDED][0], motion.least_carried)]
        else:
            times = [max(least, duration) for duration in motion.durations]
        wanted = int(code.speed(np.array(head))), int(code.phase(np.array(head)))
        speed = self._speed(tail)
        own, after = motion.travel(change, drive, speed)
        ways = [(float(own[0]), float(after[0]))] if own[0] > times[0] + SAME_TIME else []
        for time in times:
            need, after = motion.unhurried(change, drive, np.array([time]))
            if need[0] - SAME_SPEED <= speed:
                ways.append((time, float(after[0])))
        found = [time for time, after_speed in ways
                 if (self._level_of(after_speed), self._phase_of(time, hand)) == wanted]
        return _cost(min(found, default=np.inf), _mean(self._off(tail), self._off(head)))

    def _level_of(self, speed: float) -> int:
        return sum(level <= speed + SAME_SPEED for level in self.motion.speeds) - 1

    def _phase_of(self, time: float, hand: bool) -> int:
        if hand and self.motion.hand_apart is not None:
            return self.search.code.phases - 1
        return LANDED + max(sum(d <= time + SAME_TIME for d in self.motion.durations) - 1, 0)

    def _joined(self, tail: int, head: int) -> tuple[int, int]:
        kind = int(self.search.code.phase(np.array(tail))) - LANDED
        reach = self._reach(tail, head)
        if self._limb(tail, head) <= Limb.RH:
            reach = max(reach, self.motion.hand_apart or 0.0)
        extra = max(reach - self.classes[kind][0], 0.0)
        shift = self.motion.shift(*self._step(tail, head, self._stance(tail), True))
        return _cost(max(extra, float(shift[0])), _mean(self._off(tail), self._off(head)))

    def _landing_flight(self, left: int, head: int) -> tuple[int, int]:
        stances = self.search.stances
        rise = int(stances.level[self._sample(head)] - stances.level[self._sample(left)])
        flown, _ = self.motion.flight(rise * stances.lattice.step, self._speed(left))
        hand = Limb.LH if self._contacts(head)[Limb.LH] != FREE else Limb.RH
        phase = int(self.search.code.phase(np.array(left)))
        carried = self.classes[phase - LANDED][0] if phase >= LANDED else np.inf
        reach = max(max(self._reach_of(head, hand), self.motion.hand_apart or 0.0) - carried, 0.0)
        time = float(self.motion.flown(flown, np.array([reach]))[0])
        start = float(np.rint(self._off(left) / FLIGHT_BIN)) * FLIGHT_BIN
        return _cost(time, _mean(start, self._off(head)))


def _mean(first: float, second: float) -> float:
    """Mean of |x| while x runs evenly from first to second."""
    total = abs(first) + abs(second)
    if first * second >= 0.0:
        return total / 2.0
    return (first * first + second * second) / (2.0 * total)


def _cost(time: float, off: float) -> tuple[int, int]:
    if not np.isfinite(time):
        return -1, -1
    return round(time * 1e6), round(time * off * 1e6)
