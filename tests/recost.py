"""The cost of a plan, added up once more from its steps alone.

Nothing of the search graph is used. For each step the contacts and the centre of mass before and
after it are taken from the plan; which limbs let go and which land follows from them; every order
of releases and landings that the definitions allow is tried, in plain Python, and the cheapest
total over all steps counts (which hand moved last is carried along, since it costs a wait later).

Definitions (docstrings of ``motion/model.py``, ``route/build.py`` and ``route/nodes.py``):

- a limb lets go: the shift sideways at one level to where the support holds the centre of mass,
  and the wait where a hand moves again and the other hand has not moved since;
- the first limb lands: the largest of travel, reach, and the least step; a hand then has a hold;
- each further limb lands with it: what its reach takes beyond the least step, or the shift at one
  level, whichever is larger;
- a flight: the push, then the time in the air to a hold for one hand;
- area: time times the mean distance from the line of the way between the two points;
- every one of these is rounded to 1 us and 1 mm ms.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import permutations
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.contacts import CONTACT_CODES, FLOOR, FREE, LIMB_NAMES, SMEAR
from climbpath.motion.model import PacedMotion
from climbpath.posture.assembly import REST_FOOT, REST_HAND
from climbpath.posture.linkage import linkage_of
from climbpath.posture.newton import Postures
from climbpath.posture.samples import Lattice, com_samples
from climbpath.route.arcs import MAX_DROP, MAX_RISE
from climbpath.route.flights import FLIGHT_BIN, FLIGHT_SIDE
from climbpath.stance.enumerate import batch_of, solve
from climbpath.stance.options import contact_options, contact_points
from climbpath.stance.stances import SAME_POINT
from climbpath.study.climb import LATTICE_STEP
from climbpath.study.results import Plan
from climbpath.wall import Wall
from climbpath.wall.frames import GRAVITY

Contacts = tuple[int, int, int, int]
Point = tuple[float, float, float]
Cost = tuple[int, int]


@dataclass(frozen=True)
class Stand:
    """One stance at one level: where the centre of mass is, contact points, and limbs at rest."""

    com: Point
    points: tuple[Point, ...]
    rests: tuple[Point, ...]


@dataclass(frozen=True)
class Recosted:
    """What the steps cost: total and clock at each step [us], lateral area [mm ms]."""

    time_us: int
    area: int
    clock_us: tuple[int, ...]


class Recoster:
    """Costs of one body on one wall, stance by stance."""

    def __init__(self, wall: Wall, athlete: Athlete, step: float = LATTICE_STEP,
                 motion: PacedMotion | None = None) -> None:
        self.line_x, self.step = wall.line_x, step
        self.motion = motion or PacedMotion()
        self.options = contact_options(wall)
        self.linkage = linkage_of(athlete)
        starts = {name for start in wall.starts for limb in (0, 1) for name in start.allowed[limb]
                  if name not in CONTACT_CODES}
        anchor = min(float(self.options.point[self.options.index(name), 1]) for name in starts)
        self.lattice = Lattice(anchor, step)
        self.known: dict[Contacts, dict[int, Stand]] = {}
        self.area_first = False

    def stands(self, contacts: Contacts) -> dict[int, Stand]:
        """Samples of one stance by level; none where it is not possible.

        A foot smears only while a hand has a hold.
        """
        if SMEAR in contacts and all(contact == FREE for contact in contacts[:2]):
            return {}
        if contacts not in self.known:
            self.learn([contacts])
        return self.known[contacts]

    def learn(self, many: list[Contacts]) -> None:
        """Work out the samples of some stances in one go."""
        self.known.update((contacts, {}) for contacts in many)
        rows = np.array([contacts for contacts in many if max(contacts) >= 0]).reshape(-1, 4)
        found = solve(self.options, self.linkage, rows)
        found = found.take(found.margin >= 0.0)
        if not len(found.margin):
            return
        batch = batch_of(self.options, self.linkage, found.contacts)
        samples = com_samples(self.linkage, batch, Postures(found.margin, found.turn, found.shift),
                              self.line_x, self.lattice)
        points = contact_points(self.options, self.linkage, found.contacts)
        for k, (row, level) in enumerate(zip(samples.stance, samples.level, strict=True)):
            axes, origin = batch.axes[..., row], batch.origin[:, row]
            rests = []
            for limb in range(4):
                side = np.array([-1.0 if limb % 2 == 0 else 1.0, 1.0, 1.0])
                way = REST_HAND / 0.6 if limb < 2 else REST_FOOT
                local = self.linkage.roots[limb] + side * way * self.linkage.reach[limb]
                base = samples.shift[:, k] + samples.turn[..., k] @ local
                rests.append(_point(origin + axes.T @ base))
            com = _point(origin + axes.T @ samples.com[:, k])
            a, b, c, d = (int(contact) for contact in found.contacts[row])
            self.known[a, b, c, d][int(level)] = Stand(
                com, tuple(_point(p) for p in points[row]), tuple(rests))

    def level_of(self, contacts: Contacts, com_mm: Point) -> int:
        """The level of the stance whose centre of mass is the given one (surface, mm)."""
        there = {level: self.options.surface.to_surface(np.array(stand.com)) * 1e3
                 for level, stand in self.stands(contacts).items()}
        level = min(there, key=lambda k: float(np.abs(there[k] - com_mm).max()))
        gap = float(np.abs(there[level] - com_mm).max())
        if gap > 1e-3:
            raise AssertionError(f"no sample of {contacts} at {com_mm}: {gap} mm off")
        return level

    def aside(self, x: float) -> float:
        """Signed distance from the line; up to 2 mm count as none."""
        off = x - self.line_x
        return 0.0 if abs(off) <= 0.002 else off

    def travel(self, first: Point, second: Point, support: Contacts, level: bool = False) -> float:
        """Paced travel, each axis at its own speed; ``level`` leaves up to 10 mm of height out."""
        motion = self.motion
        speed = motion.up_speed[any(c != FREE for c in support[:2]), _feet_on(support)]
        rise = second[1] - first[1]
        up = 0.0 if level and abs(rise) <= 0.01 else rise / speed
        across = (second[0] - first[0]) / motion.side_speed
        out = (second[2] - first[2]) / motion.side_speed
        return sqrt(up**2 + across**2 + out**2)

    def reach(self, contacts: Contacts, limb: int, stand: Stand) -> float:
        """Start, way from where the limb rests at constant speed, settling unless struck."""
        motion, contact, hand = self.motion, contacts[limb], limb < 2
        on_hold = contact >= 0
        distance = 0.0
        if on_hold or contact == SMEAR:
            distance = sqrt(sum((a - b) ** 2 for a, b in
                                zip(stand.points[limb], stand.rests[limb], strict=True)))
        given = self.options.hand_quality if hand else self.options.foot_quality
        quality = float(given[contact]) if on_hold else 1.0
        settle = motion.settle + motion.settle_poor * (1.0 - quality)
        if on_hold and self.options.strike[contact]:
            settle = 0.0
        start, speed = ((motion.hand_start, motion.hand_speed) if hand
                        else (motion.foot_start, motion.foot_speed))
        return start + distance / speed + settle

    def cost(self, seconds: float, first: float, second: float, more: Cost = (0, 0)) -> Cost:
        """Time and area of an even way between two x, rounded, added to ``more``."""
        off = _mean_distance(self.aside(first), self.aside(second))
        return more[0] + round(seconds * 1e6), more[1] + round(seconds * off * 1e6)

    def stays(self, contacts: Contacts, less: Contacts, level: int) -> bool:
        """Whether ``less`` is a support of ``contacts``: possible, and smears stay in place."""
        stand, left = self.stands(contacts).get(level), self.stands(less)
        if stand is None or not left:
            return False
        points = next(iter(left.values())).points
        return all(
            max(abs(a - b) for a, b in zip(stand.points[limb], points[limb], strict=True))
            <= SAME_POINT
            for limb in range(4) if less[limb] == SMEAR
        )

    def releases(self, contacts: Contacts, level: int, limbs: frozenset[int], last: int
                 ) -> dict[Contacts, Cost]:
        """What is left when all ``limbs`` have let go, at the least cost of any order."""
        best: Cost | None = None
        support = contacts
        for order in permutations(sorted(limbs)):
            here, cost = contacts, (0, 0)
            for limb in order:
                less = _with(here, limb, FREE)
                if not self.stays(here, less, level) or level not in self.stands(less):
                    break
                first, second = self.stands(here)[level].com, self.stands(less)[level].com
                shift = self.travel(first, second, less, level=True)
                seconds = shift
                off = _mean_distance(self.aside(first[0]), self.aside(second[0])) * shift
                if limb < 2 and last == limb + 1:
                    seconds += self.motion.repeat_wait
                    off += abs(self.aside(first[0])) * self.motion.repeat_wait
                cost = cost[0] + round(seconds * 1e6), cost[1] + round(off * 1e6)
                here = less
            else:
                support = here
                if best is None or self.key(cost) < self.key(best):
                    best = cost
        return {} if best is None else {support: best}

    def joint(self, here: Contacts, goal: Contacts, level: int, limbs: tuple[int, ...], last: int,
              cost: Cost) -> tuple[Cost, int] | None:
        """Further landings in the given order, all at one level."""
        for limb in limbs:
            following = _with(here, limb, goal[limb])
            stands = self.stands(following)
            if level not in stands or level not in self.stands(here):
                return None
            if not self.stays(following, here, level):
                return None
            first, second = self.stands(here)[level].com, stands[level].com
            extra = self.reach(following, limb, stands[level]) - self.motion.least_step
            seconds = max(extra, 0.0, self.travel(first, second, here, level=True))
            cost = self.cost(seconds, first[0], second[0], cost)
            here = following
            last = limb + 1 if limb < 2 else last
        return cost, last

    def move(self, before: Contacts, low: int, after: Contacts, high: int, moved: frozenset[int],
             last: int) -> dict[int, Cost]:
        """Least cost of one move, for each hand that can have moved last."""
        found: dict[int, Cost] = {}
        letting_go = frozenset(limb for limb in moved if before[limb] != FREE)
        landing = [limb for limb in sorted(moved) if after[limb] != FREE]
        for support, begun in self.releases(before, low, letting_go, last).items():
            for order in permutations(landing):
                first = order[0]
                here = _with(support, first, after[first])
                if all(contact == FREE for contact in here[:2]):
                    continue
                stand, left = self.stands(here).get(high), self.stands(support)[low]
                if stand is None or not self.stays(here, support, high):
                    continue
                if not -MAX_DROP <= stand.com[1] - left.com[1] <= MAX_RISE:
                    continue
                seconds = max(self.travel(left.com, stand.com, support),
                              self.reach(here, first, stand), self.motion.least_step)
                cost = self.cost(seconds, left.com[0], stand.com[0], begun)
                now = first + 1 if first < 2 else last
                self.keep(found, self.joint(here, after, high, order[1:], now, cost))
        return found

    def flight(self, before: Contacts, low: int, after: Contacts, high: int) -> dict[int, Cost]:
        """Least cost of one flight, for each hand that can have moved last."""
        found: dict[int, Cost] = {}
        motion = self.motion
        top = motion.take_off_speed**2 / (2.0 * GRAVITY)
        rise = (high - low) * self.step
        pushes = any(c >= 0 or c == FLOOR for c in before[2:])
        if not pushes or not -1e-9 <= rise <= top:
            return found
        off = self.aside(self.stands(before)[low].com[0])
        begun = round(motion.take_off_push * 1e6), round(motion.take_off_push * abs(off) * 1e6)
        landing = [limb for limb in range(4) if after[limb] != FREE]
        for order in permutations(landing):
            if order[0] > 1:
                continue
            here = _with((FREE, FREE, FREE, FREE), order[0], after[order[0]])
            stand = self.stands(here).get(high)
            if stand is None:
                continue
            there = self.aside(stand.com[0])
            drift = round(there / FLIGHT_BIN) - round(off / FLIGHT_BIN)
            if abs(drift) > int(FLIGHT_SIDE / FLIGHT_BIN):
                continue
            middle = round(off / FLIGHT_BIN) * FLIGHT_BIN
            seconds = motion.take_off_speed / GRAVITY + motion.settle
            cost = self.cost(seconds, middle + self.line_x, stand.com[0], begun)
            self.keep(found, self.joint(here, after, high, order[1:], order[0] + 1, cost))
        return found

    def plan(self, plan: Plan, area_first: bool = False) -> Recosted:
        """Least cost of the plan's steps: time then area, or area then time."""
        self.area_first = area_first
        first, *others = plan.steps
        before = self.codes(first.contacts)
        low = self.level_of(before, first.com_mm)
        off = abs(self.aside(self.stands(before)[low].com[0]))
        start = round(self.motion.reaction * 1e6), round(self.motion.reaction * off * 1e6)
        states: dict[int, tuple[Cost, tuple[int, ...]]] = {0: (start, (0,))}
        for step in others:
            after = self.codes(step.contacts)
            high = self.level_of(after, step.com_mm)
            moved = frozenset(LIMB_NAMES.index(name) for name in step.moved)
            following: dict[int, tuple[Cost, tuple[int, ...]]] = {}
            for last, (cost, clock) in states.items():
                ways = {} if step.kind == "flight" else self.move(
                    before, low, after, high, moved, last)
                if step.kind in ("flight", "finish"):
                    for now, more in self.flight(before, low, after, high).items():
                        self.keep(ways, (more, now))
                for now, more in ways.items():
                    total = cost[0] + more[0], cost[1] + more[1]
                    new = total, (*clock, total[0])
                    if now not in following or self.key(total) < self.key(following[now][0]):
                        following[now] = new
            if not following:
                raise AssertionError(f"step {step.step} is no move: {before} to {after}")
            states, before, low = following, after, high
        cost, clock = min(states.values(), key=lambda state: self.key(state[0]))
        return Recosted(cost[0], cost[1], clock)

    def key(self, cost: Cost) -> Cost:
        """What ways are compared by."""
        return (cost[1], cost[0]) if self.area_first else cost

    def keep(self, found: dict[int, Cost], new: tuple[Cost, int] | None) -> None:
        """Keep the cheapest way for each hand that moved last."""
        if new is not None and (new[1] not in found or self.key(new[0]) < self.key(found[new[1]])):
            found[new[1]] = new[0]

    def codes(self, names: Mapping[str, str]) -> Contacts:
        """Contact codes of a step's contacts by name."""
        a, b, c, d = (CONTACT_CODES[names[limb]] if names[limb] in CONTACT_CODES
                      else self.options.index(names[limb]) for limb in LIMB_NAMES)
        return a, b, c, d


def _feet_on(contacts: Contacts) -> bool:
    return any(c != FREE for c in contacts[2:])


def _with(contacts: Contacts, limb: int, contact: int) -> Contacts:
    changed = list(contacts)
    changed[limb] = contact
    a, b, c, d = changed
    return a, b, c, d


def _point(values: NDArray[np.float64]) -> Point:
    return float(values[0]), float(values[1]), float(values[2])


def _mean_distance(first: float, second: float) -> float:
    """Mean of |x| along an even way between two x: trapezium, or two triangles across the line."""
    if first * second >= 0.0:
        return (abs(first) + abs(second)) / 2.0
    whole = abs(first) + abs(second)
    return hypot(first, second) ** 2 / (2.0 * whole)
