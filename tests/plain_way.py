"""The best time found the plain way: no arrays over stances, no compact graph.

Every set of contacts is formed, each is asked with one call of a general optimiser whether a
trunk fits it, arcs are made one at a time in Python loops with the re-coster's formulas, and
networkx finds the shortest path. Only the centre-of-mass samples and the geometry of contact
points are the program's own.
"""

from __future__ import annotations

from itertools import combinations, product
from typing import Any

import networkx as nx
import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from climbpath.body import Athlete
from climbpath.contacts import CONTACT_CODES, FLOOR, FREE, SMEAR
from climbpath.posture.batch import StanceBatch
from climbpath.posture.limits import joint_limits, limb_geometry, point_limits, turned, upright
from climbpath.posture.linkage import Linkage
from climbpath.route.arcs import MAX_DROP, MAX_RISE
from climbpath.route.flights import FLIGHT_BIN, FLIGHT_SIDE
from climbpath.stance.enumerate import batch_of
from climbpath.wall import Wall
from climbpath.wall.frames import GRAVITY
from tests.recost import Contacts, Recoster, Stand

Array = NDArray[np.float64]
Node = tuple[Contacts, int, int, str]

STEP = 1e-6
"""Step of the difference quotients, m and rad."""

ROUNDING = 2e-4
"""By how much the optimiser may miss the margin, m: nearer to 0 the question is left open."""


TURNED = 1.3
"""Bound on each component of the trunk's turn, rad: keeps the optimiser from spinning it."""

CLEAR = 0.03
"""A margin beyond this needs no other start, m; below it all are tried, for want of convexity."""


def trunk_limits(linkage: Linkage, stance: StanceBatch, trunk: Array) -> tuple[Array, Array]:
    """What is spared of each reach, and each hard limit, for trunks (6, n): turn and place.

    ``stance`` holds the same stance n times.
    """
    many = trunk.shape[1]
    turn = turned(upright(many), trunk[:3])
    geometry = limb_geometry(linkage, stance, turn, trunk[3:])
    joints = joint_limits(linkage, geometry)
    on = stance.engaged[:, 0]
    reach = [(stance.reach - geometry.distance)[on]]
    hard = [(geometry.distance - linkage.fold[:, None])[on], joints.height[on], joints.across[on],
            joints.lift[on[2:]], joints.out[on[2:]]]
    for limit in point_limits(linkage, stance, turn, trunk[3:], np.zeros(many)):
        if limit.active is None or limit.active[0]:
            (reach if limit.spare else hard).append(limit.value[None])
    return np.concatenate(reach), np.concatenate(hard)


def first_trunks(linkage: Linkage, batch: StanceBatch) -> list[Array]:
    """Trunks to begin from (6,): under the hands and over the feet; upright, turned, far."""
    hang, stand = linkage.trunk + 0.6 * linkage.reach[0], 0.75 * linkage.reach[2]
    places = [batch.target[:, limb, 0] - [0.0, hang if limb < 2 else -stand, 0.0]
              for limb in range(4) if batch.engaged[limb, 0]]
    middle = np.mean(places, axis=0)
    if batch.floor[:, 0].any():
        middle[1] = batch.floor_level[0] + 0.9 * linkage.floor_reach
    return [np.concatenate([turn, [middle[0], middle[1], out]])
            for turn, out in (((0.0, 0.0, 0.0), 0.25), ((0.0, 0.7, 0.0), 0.30),
                              ((0.0, -0.7, 0.0), 0.30), ((0.3, 0.0, 0.0), 0.45),
                              ((0.0, 0.0, 0.4), 0.25), ((0.0, 0.0, -0.4), 0.25))]


def too_far_apart(linkage: Linkage, batch: StanceBatch) -> bool:
    """Whether two contacts are farther from each other than limbs and trunk are long together."""
    rise = np.array([linkage.shoulder_rise, linkage.shoulder_rise, 0.0, 0.0])
    length = batch.reach[:, 0] + rise
    for a, b in combinations(np.flatnonzero(batch.engaged[:, 0]), 2):
        apart = np.linalg.norm(batch.target[:, a, 0] - batch.target[:, b, 0])
        if apart > length[a] + length[b] + np.linalg.norm(linkage.roots[a] - linkage.roots[b]):
            return True
    return False


def largest_margin(linkage: Linkage, batch: StanceBatch) -> float:
    """The margin of one stance by sequential quadratic programming, m; -1 where none is found."""
    if too_far_apart(linkage, batch):
        return -1.0

    seven = batch.take(np.zeros(7, dtype=np.int64))

    def values(unknown: Array) -> Array:
        reach, hard = trunk_limits(linkage, batch, unknown[:6, None])
        return np.concatenate([reach[:, 0] - unknown[6], hard[:, 0]])

    def slopes(unknown: Array) -> Array:
        around = np.concatenate([np.zeros((6, 1)), STEP * np.eye(6)], axis=1)
        reach, hard = trunk_limits(linkage, seven, unknown[:6, None] + around)
        moved = np.concatenate([reach, hard])
        spare = np.concatenate([-np.ones(len(reach)), np.zeros(len(hard))])
        return np.column_stack([(moved[:, 1:] - moved[:, :1]) / STEP, spare])

    bounds = [(-TURNED, TURNED)] * 3 + [(None, None)] * 4
    best = -1.0
    for trunk in first_trunks(linkage, batch):
        begin = np.append(trunk, float(trunk_limits(linkage, batch, trunk[:, None])[0].min()))
        solver: Any = minimize
        found = solver(
            lambda u: -u[6], begin, jac=lambda u: np.append(np.zeros(6), -1.0), method="SLSQP",
            bounds=bounds,
            constraints={"type": "ineq", "fun": values, "jac": slopes},
            options={"maxiter": 60, "ftol": 1e-7},
        )
        if values(found.x).min() >= -1e-5:
            best = max(best, float(found.x[6]))
        if best > CLEAR:  # clearly possible: how large the margin is does not matter
            break
    return best


class PlainWay(Recoster):
    """One small wall and one body, solved the plain way. ``open``: stances it cannot decide."""

    def __init__(self, wall: Wall, athlete: Athlete, smears: bool = True, flights: bool = True
                 ) -> None:
        super().__init__(wall, athlete)
        self.wall = wall
        self.smears, self.flights = smears, flights
        self.graph = nx.DiGraph()
        self.sets = self.contact_sets()
        self.margins: dict[Contacts, float] = {}

    def contact_sets(self) -> list[Contacts]:
        """Every set of contacts with a hold in it that the rules of contact allow."""
        options = self.options
        hands = [FREE, *np.flatnonzero(options.hand)]
        feet = [FREE, FLOOR, *([SMEAR] if self.smears else []), *np.flatnonzero(options.foot)]
        sets = []
        for choice in product(hands, hands, feet, feet):
            left, right, left_foot, right_foot = (int(c) for c in choice)
            struck = [c for c in (left, right) if c >= 0 and options.strike[c]]
            full = any(
                a == b and a >= 0 and (options.hands[a] < 2 or options.strike[a])
                for a, b in ((left, right), (left_foot, right_foot))
            )
            smears = SMEAR in (left_foot, right_foot)
            gripped = any(c >= 0 and not options.strike[c] for c in (left, right))
            if max(choice) < 0 or full or len(struck) > 1 or (smears and not gripped):
                continue
            sets.append((left, right, left_foot, right_foot))
        return sets

    def stands(self, contacts: Contacts) -> dict[int, Stand]:
        """As before, but whether the stance is possible is asked of the plain optimiser."""
        if contacts not in self.margins:
            known = max(contacts) >= 0
            batch = batch_of(self.options, self.linkage, np.array([contacts]))
            self.margins[contacts] = largest_margin(self.linkage, batch) if known else -1.0
        return super().stands(contacts) if self.margins[contacts] >= -ROUNDING else {}

    def best_time_us(self) -> int | None:
        """Least time from an allowed start to the finish, None where there is no way."""
        self.learn(self.sets)
        for contacts in self.sets:
            self.arcs_of(contacts)
        starts = self.starts()
        for node in starts:
            self.graph.add_edge("start", node, weight=round(self.motion.reaction * 1e6))
        finish = {self.options.index(name) for name in self.wall.finish}
        for node in [n for n in self.graph if n[0] != "s" and n[0] != "flight"]:
            if node[3] == "landed" and finish & set(node[0][:2]):
                self.graph.add_edge(node, "end", weight=0)
        if "end" not in self.graph or "start" not in self.graph:
            return None
        try:
            return int(nx.dijkstra_path_length(self.graph, "start", "end"))
        except nx.NetworkXNoPath:
            return None

    def starts(self) -> list[Node]:
        """Ready nodes of all samples of the allowed starts."""
        nodes = []
        for start in self.wall.starts:
            for names in product(*start.allowed):
                a, b, c, d = (CONTACT_CODES[n] if n in CONTACT_CODES else self.options.index(n)
                              for n in names)
                nodes += [((a, b, c, d), level, 0, "ready") for level in self.stands((a, b, c, d))]
        return nodes

    def arcs_of(self, contacts: Contacts) -> None:
        """All arcs that end in a stance, begin a flight from it, or let one limb of it go."""
        stands = self.stands(contacts)
        for level, stand in stands.items():
            for last in range(3):
                landed, ready = (contacts, level, last, "landed"), (contacts, level, last, "ready")
                self.graph.add_edge(landed, ready, weight=0)
                for limb in range(4):
                    if contacts[limb] != FREE:
                        self.lets_go(contacts, level, limb, last)
                        self.lands(contacts, level, limb, last, stand)
            if self.flights:
                self.flies(contacts, level, stand)

    def without(self, contacts: Contacts, limb: int) -> Contacts:
        less = list(contacts)
        less[limb] = FREE
        a, b, c, d = less
        return a, b, c, d

    def lets_go(self, contacts: Contacts, level: int, limb: int, last: int) -> None:
        less = self.without(contacts, limb)
        for time, _area in self.releases(contacts, level, frozenset([limb]), last).values():
            self.graph.add_edge((contacts, level, last, "ready"), (less, level, last, "ready"),
                                weight=time)

    def lands(self, contacts: Contacts, level: int, limb: int, last: int, stand: Stand) -> None:
        """Moves in which ``limb`` lands first, and its landing with a move that just ended."""
        less = self.without(contacts, limb)
        if not self.stays(contacts, less, level):
            return
        now = limb + 1 if limb < 2 else last
        goal = (contacts, level, now, "landed")
        for low, left in self.stands(less).items():
            if -MAX_DROP <= stand.com[1] - left.com[1] <= MAX_RISE:
                time = max(self.travel(left.com, stand.com, less),
                           self.reach(contacts, limb, stand), self.motion.least_step)
                self.graph.add_edge((less, low, last, "ready"), goal, weight=round(time * 1e6))
        joined = self.joint(less, contacts, level, (limb,), last, (0, 0))
        if joined is not None:
            self.graph.add_edge((less, level, last, "landed"), goal, weight=joined[0][0])

    def flies(self, contacts: Contacts, level: int, stand: Stand) -> None:
        """Leaving from a foothold, and landing with one hand alone."""
        motion = self.motion
        column = round((stand.com[0] - self.line_x) / FLIGHT_BIN)
        if any(c >= 0 or c == FLOOR for c in contacts[2:]):
            for last in range(3):
                self.graph.add_edge((contacts, level, last, "ready"), ("flight", level, column, ""),
                                    weight=round(motion.take_off_push * 1e6))
        engaged = [limb for limb in range(4) if contacts[limb] != FREE]
        if len(engaged) != 1 or engaged[0] > 1:
            return
        top = motion.take_off_speed**2 / (2.0 * GRAVITY)
        drift = int(FLIGHT_SIDE / FLIGHT_BIN)
        time = round((motion.take_off_speed / GRAVITY + motion.settle) * 1e6)
        for levels in range(int(top / self.step) + 1):
            for aside in range(-drift, drift + 1):
                self.graph.add_edge(("flight", level - levels, column - aside, ""),
                                    (contacts, level, engaged[0] + 1, "landed"), weight=time)

