"""Working out a route's times and areas again from what its nodes mean, arc by arc.

Nothing of the graph's arrays is read: each arc's kind follows from the phases of its ends, and
its cost from the stances, the samples and the motion model. A plan is shown only when both agree.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FREE, Limb
from climbpath.errors import ClimbpathError
from climbpath.motion.model import Drive, Motion
from climbpath.route.build import FLIGHT_BIN, SAME_HEIGHT, SearchGraph, off_line
from climbpath.route.nodes import LANDED, PHASES
from climbpath.route.shortest import Route
from climbpath.stance.options import ContactOptions

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


class Recoster:
    """Costs single arcs of one body's search graph from their definition."""

    def __init__(self, options: ContactOptions, search: SearchGraph, motion: Motion, line_x: float
                 ) -> None:
        self.options, self.search, self.motion, self.line_x = options, search, motion, line_x

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
        plain = self.search.code.plain
        if head >= plain:
            return _cost(self.motion.take_off(), abs(self._off(tail)))
        if tail >= plain:
            return self._landing_flight(nodes[place - 1], head)
        before, after = tail % PHASES == LANDED, head % PHASES == LANDED
        if before and not after:
            return 0, 0
        if not before and not after:
            return self._release(tail, head)
        return self._landing(tail, head, joined=before)

    def _sample(self, node: int) -> int:
        return int(self.search.code.sample(np.array(node)))

    def _off(self, node: int) -> float:
        x = self.search.stances.com[[self._sample(node)], 0]
        return float(off_line(x, self.line_x)[0])

    def _contacts(self, node: int) -> Ints:
        stances = self.search.stances
        return np.asarray(stances.contacts[stances.sample_stance[self._sample(node)]])

    def _travel(self, tail: int, head: int, support: Ints, level: bool) -> float:
        com = self.search.stances.com
        change = com[self._sample(head)] - com[self._sample(tail)]
        if level and abs(change[1]) <= SAME_HEIGHT:
            change[1] = 0.0
        engaged = support != FREE
        drive = Drive(np.array([engaged[:2].sum()]), np.array([engaged[2:].sum()]))
        return float(self.motion.travel(change[None, :], drive)[0])

    def _release(self, tail: int, head: int) -> tuple[int, int]:
        before, after = self._contacts(tail), self._contacts(head)
        limb = Limb(int(np.flatnonzero(before != after)[0]))
        shift = self._travel(tail, head, after, level=True)
        first, second = self._off(tail), self._off(head)
        area = shift * _mean(first, second)
        if limb <= Limb.RH and int(self.search.code.last(np.array(tail))) == limb + 1:
            wait = self.motion.repeat_wait
            return _cost(shift + wait, (area + wait * abs(first)) / max(shift + wait, 1e-12))
        return _cost(shift, _mean(first, second))

    def _landing(self, tail: int, head: int, joined: bool) -> tuple[int, int]:
        before, after = self._contacts(tail), self._contacts(head)
        limb = Limb(int(np.flatnonzero(before != after)[0]))
        contact, hand = int(after[limb]), limb <= Limb.RH
        given = self.options.hand_quality if hand else self.options.foot_quality
        quality = float(given[contact]) if contact >= 0 else 1.0
        struck = contact >= 0 and bool(self.options.strike[contact])
        distance = self.search.reach_distance[self._sample(head), limb]
        reach = float(self.motion.reach(np.array([distance]), np.array([hand]),
                                        np.array([quality]), np.array([struck]))[0])
        travel = self._travel(tail, head, before, level=joined)
        least = self.motion.least_step
        time = max(max(reach - least, 0.0), travel) if joined else max(travel, reach, least)
        return _cost(time, _mean(self._off(tail), self._off(head)))

    def _landing_flight(self, left: int, head: int) -> tuple[int, int]:
        stances = self.search.stances
        rise = int(stances.level[self._sample(head)] - stances.level[self._sample(left)])
        time = float(self.motion.flight(np.array([rise * stances.lattice.step]))[0])
        start = float(np.rint(self._off(left) / FLIGHT_BIN)) * FLIGHT_BIN
        return _cost(time, _mean(start, self._off(head)))


def _mean(first: float, second: float) -> float:
    """Mean of |x| while x runs evenly from first to second."""
    total = abs(first) + abs(second)
    if first * second >= 0.0:
        return total / 2.0
    return (first * first + second * second) / (2.0 * total)


def _cost(time: float, off: float) -> tuple[int, int]:
    return round(time * 1e6), round(time * off * 1e6)
