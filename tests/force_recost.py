"""The cost of a route of the model of forces, worked out once more from the meaning of its nodes.

Nothing of the graph's arrays, of the code of ``motion/force.py`` or of ``route/recost.py`` is used:
nodes are taken apart as the docstring of ``route/nodes.py`` says, loads come from a linear program
(HiGHS), and every arc is costed from scalars in plain Python by its definition:

- strength: 1 over the load at rest of a sample's contacts, in body weights; a step is carried by
  the mean of the strengths of what stays, at its start and at the level where it ends;
- a rise by D from v1 goes by v' = g (c (1 − v / V0) − 1), whose height after a time is known in
  closed form; its time is found by halving; a shift across or out by d, from rest to rest with
  three tenths of c, takes 2 √(d / (.3 g c)) and leaves √(1 − .3²) of c for the rise;
- a step that takes T longer than it must starts at the speed that makes it take T, or is waited for
  at rest where the contacts hold the body at both ends;
- a step down is fallen and stopped, from rest to rest; a release, and a landing with a move, are a
  shift at one level at a fixed speed;
- a limb that lands needs its start, its way from where it would rest, and settling; a hand more to
  reach across and to join the other hand; whatever class the move before was of is taken off;
- hands land no sooner than ``hand_apart`` after one another; a flight is ballistic.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from math import asin, exp, hypot, inf, log, pi, sqrt

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FREE, SMEAR
from climbpath.motion.capacity import Capacities, capacities_of
from climbpath.motion.cones import hold_cones
from climbpath.motion.strength import held_samples
from climbpath.posture.assembly import REST_FOOT, REST_HAND
from climbpath.route.flights import FLIGHT_BIN
from climbpath.stance.enumerate import batch_of
from climbpath.study.climb import Climb
from tests.motion.contact_cases import least_load_by_highs

G = 9.81
Point = tuple[float, float, float]
Way = tuple[float, float]
"""Time and end speed."""

SIDE_SHARE = 0.3
STILL = 0.005
ON_LINE = 0.002
SAME_HEIGHT = 0.01
ONE_LEVEL = 1e-9
SAME_TIME = 1e-7
LASTS = 2
"""Which hand moved last: the left or the right."""


@dataclass(frozen=True)
class Figures:
    """The model's fixed figures; s, m/s."""

    least_step: float
    least_carried: float
    repeat_wait: float
    hand_start: float
    foot_start: float
    settle_poor: float
    side_speed: float
    durations: tuple[float, ...]
    hand_apart: float
    pair: float
    speeds: tuple[float, ...]

    @classmethod
    def of(cls, motion: object) -> Figures:
        """Those that a motion model carries."""
        return cls(**{field.name: getattr(motion, field.name) for field in fields(cls)})


@dataclass(frozen=True)
class Node:
    """What a node stands for; a flight node has no sample."""

    sample: int
    stance: int
    contacts: tuple[int, ...]
    level: int
    com: Point
    speed: float
    last: int
    phase: int


@dataclass(frozen=True)
class Arc:
    """One arc of a route: its kind, time [us], lateral area [mm ms], the limb that lands or lets
    go, and what the limb needs to land [s]."""

    kind: str
    time_us: int
    area: int
    limb: int | None = None
    reach: float = 0.0
    carried: float = 0.0
    """What of the reach lies in the time before the arc."""


class ForceRecoster:
    """Costs of arcs of one body's search."""

    def __init__(self, climb: Climb, figures: Figures | None = None,
                 capacities: Capacities | None = None) -> None:
        self.climb, self.figures = climb, figures or Figures.of(climb.motion)
        self.own = capacities or capacities_of(climb.athlete)
        self.stances = climb.search.stances
        self.speeds = self.figures.speeds
        self.durations = self.figures.durations
        # The last two are of hands: after a flight, which credits nothing, and after a move.
        self.classes = (*self.durations, 0.0, self.figures.hand_apart)
        self.phases = 1 + len(self.classes)
        self.per_sample = len(self.speeds) * LASTS * self.phases
        self.plain = self.stances.samples * self.per_sample
        self.cones = hold_cones(climb.wall, climb.options)
        self.strengths: dict[int, float] = {}
        self.v0 = min(self.own.hand_speed, self.own.foot_speed)

    # What nodes mean

    def node(self, number: int) -> Node | None:
        """None for a node of a flight."""
        if number >= self.plain:
            return None
        rest, phase = divmod(number, self.phases)
        rest, last = divmod(rest, LASTS)
        sample, speed = divmod(rest, len(self.speeds))
        stance = int(self.stances.sample_stance[sample])
        x, y, z = (float(value) for value in self.stances.com[sample])
        return Node(sample, stance, tuple(int(c) for c in self.stances.contacts[stance]),
                    int(self.stances.level[sample]), (x, y, z), self.speeds[speed], last, phase)

    def strength(self, sample: int) -> float:
        """1 over the load by HiGHS, body weights; 0 on a strike and where nothing holds."""
        if sample not in self.strengths:
            contacts = self.stances.contacts[self.stances.sample_stance[sample]]
            struck = [c >= 0 and bool(self.climb.options.strike[c]) for c in contacts]
            load = inf
            if not any(struck):
                held = held_samples(self.climb.options, self.cones, self.climb.linkage, self.own,
                                    self.stances, np.array([sample]))
                load = least_load_by_highs(held, np.array([[0.0, 1.0, 0.0]]), 0)
            self.strengths[sample] = 0.0 if load > 100.0 else 1.0 / max(load, 0.01)
        return self.strengths[sample]

    def off(self, node: Node) -> float:
        aside = node.com[0] - self.climb.wall.line_x
        return 0.0 if abs(aside) <= ON_LINE else aside

    # Steps

    def carried_by(self, tail: Node, head: Node) -> Way:
        """Strength of the tail's contacts at the start, and at the level where the step ends."""
        there = [
            sample for sample in range(int(self.stances.first_sample[tail.stance]),
                                       int(self.stances.first_sample[tail.stance + 1]))
            if int(self.stances.level[sample]) == head.level
        ]
        highest = int(self.stances.first_sample[tail.stance + 1]) - 1
        below = int(self.stances.level[highest]) < head.level
        near = min(there, key=lambda s: abs(float(self.stances.com[s, 0]) - head.com[0]),
                   default=highest if below else tail.sample)
        return self.strength(tail.sample), self.strength(near)

    def upward(self, tail: Node, head: Node, level: bool = False) -> tuple[float, float, float,
                                                                          bool]:
        """Rise, strength for it, time of the shift aside, and whether the body is held."""
        rise = head.com[1] - tail.com[1]
        first, second = self.carried_by(tail, head)
        if level:
            second = self.strength(head.sample)
            rise = 0.0 if abs(rise) <= SAME_HEIGHT else rise
        aside = hypot(head.com[0] - tail.com[0], head.com[2] - tail.com[2])
        mean, left, time = (first + second) / 2.0, 1.0, 0.0
        if aside > STILL:
            left = sqrt(1.0 - SIDE_SHARE**2)
            push = SIDE_SHARE * G * mean
            time = 2.0 * sqrt(aside / push) if push > 0.0 else inf
        return rise, left * mean, time, left * min(first, second) >= 1.0

    def after(self, c: float, v1: float, time: float) -> tuple[float, float]:
        """Height risen and speed after ``time`` of v' = g (c (1 − v / V0) − 1)."""
        fall = max(G * c / self.v0, 1e-5)
        limit, left = G * (c - 1.0) / fall, exp(-fall * time)
        return limit * time + (v1 - limit) * (1.0 - left) / fall, limit + (v1 - limit) * left

    def quickest(self, rise: float, c: float, v1: float) -> Way:
        """By halving the time, in which the body does not yet fall back."""
        if rise <= ONE_LEVEL or (c <= 1.0 and v1 <= 0.0):
            return inf, 0.0
        low, high = 0.0, 1e3
        if c < 1.0:
            fall = max(G * c / self.v0, 1e-5)
            limit = G * (c - 1.0) / fall
            high = log(1.0 - v1 / limit) / fall
        if self.after(c, v1, high)[0] < rise:
            return inf, 0.0
        for _ in range(100):
            middle = (low + high) / 2.0
            low, high = (low, middle) if self.after(c, v1, middle)[0] > rise else (middle, high)
        return high, max(self.after(c, v1, high)[1], 0.0)

    def down(self, depth: float, c: float) -> float:
        """From rest to rest: falling, then stopping."""
        if c < 1.0:
            return inf
        if depth <= ONE_LEVEL:
            return 0.0
        stop = G * (c - 1.0)
        # Fallen so far that stopping takes the rest: v² = 2 g x = 2 a (D − x).
        peak = sqrt(2.0 * G * stop * depth / (G + stop))
        return peak / G + peak / stop if stop > 0.0 else inf

    def in_time(self, rise: float, c: float, time: float, held: bool) -> Way:
        """Start and end speed of a rise that takes ``time``; start inf where it cannot."""
        if rise <= ONE_LEVEL:
            return (0.0 if held else inf), 0.0
        # The height after a time is linear in the speed at its start.
        still, moving = self.after(c, 0.0, time)[0], self.after(c, 1.0, time)[0]
        first = (rise - still) / (moving - still)
        second = self.after(c, first, time)[1]
        if second < 0.0:
            return inf, 0.0
        if first < 0.0:
            return (0.0 if held else inf), self.quickest(rise, c, 0.0)[1]
        return first, second

    def travel(self, tail: Node, head: Node) -> Way:
        """The quickest step from the tail's speed, and its end speed."""
        rise, c, aside, held = self.upward(tail, head)
        if rise <= ONE_LEVEL:
            if tail.speed > 0.0 or not held:
                return inf, 0.0
            return max(self.down(-rise, c), aside), 0.0
        time, after = self.quickest(rise, c, tail.speed)
        if aside <= time:
            return time, after
        need, after = self.in_time(rise, c, aside, held)
        return (aside, after) if need <= tail.speed + 1e-9 else (inf, 0.0)

    def unhurried(self, tail: Node, head: Node, time: float) -> Way:
        """Start speed that a step in ``time`` needs, and its end speed."""
        rise, c, aside, held = self.upward(tail, head)
        if aside > time or (rise <= ONE_LEVEL and self.down(-rise, c) > time):
            return inf, 0.0
        return self.in_time(rise, c, time, held)

    # Limbs

    def rest(self, sample: int, limb: int) -> Point:
        """Where the end of a limb at rest is in a sample's posture."""
        linkage = self.climb.linkage
        batch = batch_of(self.climb.options, linkage, self.stances.contacts[
            [self.stances.sample_stance[sample]]])
        side = np.array([-1.0 if limb % 2 == 0 else 1.0, 1.0, 1.0])
        way = REST_HAND / 0.6 if limb < 2 else REST_FOOT
        local = linkage.roots[limb] + side * way * linkage.reach[limb]
        base = self.stances.shift[:, sample] + self.stances.turn[..., sample] @ local
        x, y, z = batch.origin[:, 0] + batch.axes[..., 0].T @ base
        return float(x), float(y), float(z)

    def reach(self, node: Node, limb: int) -> float:
        """What a limb needs from where it rests until it bears."""
        figures, contact, options = self.figures, node.contacts[limb], self.climb.options
        hand = limb < 2
        distance = 0.0
        if contact >= 0 or contact == SMEAR:
            point = self.stances.points[node.stance, limb]
            distance = sqrt(sum((float(a) - b) ** 2
                                for a, b in zip(point, self.rest(node.sample, limb), strict=True)))
        time = (figures.hand_start if hand else figures.foot_start)
        time += distance / self.own.reach_speed
        quality = 1.0
        if contact >= 0:
            quality = float((options.hand_quality if hand else options.foot_quality)[contact])
        if not (contact >= 0 and options.strike[contact]):
            time += self.own.settle + figures.settle_poor * (1.0 - quality)
        if hand:
            over = self.across(node, limb)
            turn = asin(over) if over < 1.0 else pi / 2.0
            time += 2.0 * sqrt(turn / max(self.own.turn, 1e-3))
            time += figures.pair if node.contacts[0] == node.contacts[1] else 0.0
        return time

    def across(self, node: Node, limb: int) -> float:
        """How far a hand is beyond the centre of mass or the other hand, in shoulder breadths."""
        linkage = self.climb.linkage
        x = float(self.stances.points[node.stance, limb, 0])
        over = max(x - node.com[0] if limb == 0 else node.com[0] - x, 0.0)
        if node.contacts[0] >= 0 and node.contacts[1] >= 0:
            left, right = (float(self.stances.points[node.stance, k, 0]) for k in (0, 1))
            over = max(over, left - right - linkage.hand_breadth)
        return over / float(linkage.roots[1, 0] - linkage.roots[0, 0])

    # Arcs

    def route(self, numbers: Sequence[int] | NDArray[np.int64]) -> list[Arc]:
        """Every arc of a route given by its node numbers."""
        nodes = [self.node(int(number)) for number in numbers]
        return [self.arc(nodes, place) for place in range(len(nodes) - 1)]

    def arc(self, nodes: Sequence[Node | None], place: int) -> Arc:
        tail, head = nodes[place], nodes[place + 1]
        if tail is None:
            left = nodes[place - 1]
            if left is None or head is None:
                raise AssertionError("two flights on end")
            return self.landing(left, head)
        if head is None:
            return Arc("leave", 0, 0)
        if tail.sample == head.sample:
            if head.speed > tail.speed or tail.last != head.last:
                raise AssertionError(f"nothing happens, but {tail} becomes {head}")
            return Arc("shed" if tail.phase == head.phase else "settle", 0, 0)
        if tail.stance == head.stance:
            return self.rise(tail, head)
        limb = next(k for k in range(4) if tail.contacts[k] != head.contacts[k])
        if sum(a != b for a, b in zip(tail.contacts, head.contacts, strict=True)) != 1:
            raise AssertionError(f"two limbs at once: {tail} to {head}")
        if head.contacts[limb] == FREE:
            return self.release(tail, head, limb)
        if tail.contacts[limb] != FREE:
            raise AssertionError(f"limb {limb} lands before it lets go")
        if tail.phase and head.level == tail.level:
            return self.joint(tail, head, limb)
        return self.move(tail, head, limb)

    def cost(self, kind: str, seconds: float, off: float, limb: int | None = None,
             reach: float = 0.0, carried: float = 0.0) -> Arc:
        if not np.isfinite(seconds):
            raise AssertionError(f"no such {kind}")
        return Arc(kind, round(seconds * 1e6), round(seconds * off * 1e6), limb, reach, carried)

    def between(self, tail: Node, head: Node) -> float:
        return mean_distance(self.off(tail), self.off(head))

    def rise(self, tail: Node, head: Node) -> Arc:
        """The quickest rise, or one as long as a class of landings."""
        time, after = self.travel(tail, head)
        long = time + SAME_TIME >= self.figures.least_step
        ways = [(time, after, self.phase(time, False) if long else 0)]
        for duration in (d for d in self.durations if d > time):
            need, after = self.unhurried(tail, head, duration)
            if need <= tail.speed + 1e-9:
                ways.append((duration, after, self.phase(duration, False)))
        fits = [lasts for lasts, after, phase in ways
                if phase == head.phase and self.floor(after) == head.speed]
        self.expect(tail.phase == 0 and bool(fits) and head.last == tail.last
                    and head.level > tail.level, tail, head)
        return self.cost("rise", min(fits), self.between(tail, head))

    def release(self, tail: Node, head: Node, limb: int) -> Arc:
        shift = self.shift(tail, head)
        waits = tail.last == limb
        self.expect(tail.phase == head.phase == 0 and tail.level == head.level
                    and head.speed == (0.0 if waits else tail.speed) and head.last == tail.last,
                    tail, head)
        wait = self.figures.repeat_wait if waits else 0.0
        area = shift * self.between(tail, head) + wait * abs(self.off(tail))
        return Arc("release", round((shift + wait) * 1e6), round(area * 1e6), limb)

    def shift(self, tail: Node, head: Node) -> float:
        aside = hypot(head.com[0] - tail.com[0], head.com[2] - tail.com[2])
        return aside / self.figures.side_speed

    def least(self, limb: int) -> float:
        return max(self.figures.least_step, self.figures.hand_apart if limb < 2 else 0.0)

    def move(self, tail: Node, head: Node, limb: int) -> Arc:
        """The limb lands at another level, or begins with the step."""
        reach, carried = self.reach(head, limb), 0.0
        least = max(reach, self.least(limb))
        if tail.phase:
            self.expect(not (self.of_hands(tail) and limb < 2) and head.level > tail.level, tail,
                        head)
            carried = self.classes[tail.phase - 1]
            times = [max(least - carried, self.figures.least_carried)]
        else:
            times = [max(least, duration) for duration in self.durations]
        ways = [self.travel(tail, head)]
        ways = [way for way in ways if way[0] > times[0] + SAME_TIME]
        for time in times:
            need, after = self.unhurried(tail, head, time)
            if need <= tail.speed + 1e-9:
                ways.append((time, after))
        # A foot may leave the node one of a move of hands.
        kept = {tail.phase} if self.of_hands(tail) and limb >= 2 else set()
        fits = [time for time, after in ways if self.floor(after) == head.speed
                and head.phase in {self.phase(time, limb < 2), *kept}]
        self.expect(bool(fits) and head.last == (limb if limb < 2 else tail.last), tail, head)
        return self.cost("move", min(fits), self.between(tail, head), limb, reach, carried)

    def joint(self, tail: Node, head: Node, limb: int) -> Arc:
        """The limb lands with the move that has just ended."""
        self.expect(not (self.of_hands(tail) and limb < 2), tail, head)
        carried, reach = self.classes[tail.phase - 1], self.reach(head, limb)
        needed = max(reach, self.figures.hand_apart) if limb < 2 else reach
        extra, shift = max(needed - carried, 0.0), self.shift(tail, head)
        time = max(extra, shift)
        # What is left of the reach is waited for, at rest.
        self.expect(head.speed == (0.0 if extra > 0.0 else tail.speed)
                    and head.last == (limb if limb < 2 else tail.last), tail, head)
        if extra > 0.0:
            rise, _, aside, held = self.upward(tail, head, level=True)
            self.expect(aside <= time and (held or rise > ONE_LEVEL), tail, head)
        return self.cost("joint", time, self.between(tail, head), limb, reach, carried)

    def landing(self, left: Node, head: Node) -> Arc:
        """In the air from ``left``'s speed to a hold for one hand."""
        hand = 0 if head.contacts[0] != FREE else 1
        self.expect([k for k in range(4) if head.contacts[k] != FREE] == [hand]
                    and left.contacts[hand] == FREE and left.phase > 0
                    and not self.of_hands(left) and head.last == hand
                    and any(c != FREE for c in left.contacts[2:]), left, head)
        rise = (head.level - left.level) * self.stances.lattice.step
        after = sqrt(left.speed**2 - 2.0 * G * rise)
        time = (left.speed - after) / G
        reach, carried = self.reach(head, hand), self.classes[left.phase - 1]
        needed = max(reach, self.figures.hand_apart)
        self.expect(needed - carried <= time + 1e-9 and self.floor(after) == head.speed
                    and rise > 0.0 and head.phase == self.phases - 2, left, head)
        begun = round(self.off(left) / FLIGHT_BIN) * FLIGHT_BIN
        return self.cost("flight", time, mean_distance(begun, self.off(head)), hand, reach,
                         carried)

    def floor(self, speed: float) -> float:
        """The highest level not above a speed."""
        return max(level for level in self.speeds if level <= speed + 1e-9)

    def of_hands(self, node: Node) -> bool:
        """Whether a hand has just landed."""
        return node.phase >= self.phases - 2

    def phase(self, time: float, hand: bool) -> int:
        if hand:
            return self.phases - 1
        return max(sum(duration <= time + SAME_TIME for duration in self.durations), 1)

    def expect(self, good: bool, tail: Node, head: Node) -> None:
        if not good:
            raise AssertionError(f"by its definition there is no step from {tail} to {head}")


def mean_distance(first: float, second: float) -> float:
    """Mean of |x| along an even way between two x: trapezium, or two triangles across the line."""
    whole = abs(first) + abs(second)
    if first * second >= 0.0:
        return whole / 2.0
    return (first**2 + second**2) / (2.0 * whole)


# What a route must obey, whatever it costs


@dataclass(frozen=True)
class Landing:
    """A limb lands: when, how long since it let go (inf if free from the start), what it needs."""

    limb: int
    at: float
    free_for: float
    reach: float


def landings(numbers: Sequence[int] | NDArray[np.int64], again: ForceRecoster) -> list[Landing]:
    """All landings of a route with their clock [s] from its start."""
    nodes, arcs = [again.node(int(n)) for n in numbers], again.route(numbers)
    clock = 0.0
    found: list[Landing] = []
    let_go = dict.fromkeys(range(4), -inf)
    for place, arc in enumerate(arcs):
        tail, head = nodes[place], nodes[place + 1]
        begun, clock = clock, clock + arc.time_us / 1e6
        if arc.kind == "release" and arc.limb is not None:
            let_go[arc.limb] = begun
        if arc.kind == "leave" and tail is not None:
            let_go.update((k, begun) for k in range(4) if tail.contacts[k] != FREE)
        if arc.limb is not None and head is not None and head.contacts[arc.limb] != FREE:
            found.append(Landing(arc.limb, clock, clock - let_go[arc.limb], arc.reach))
    return found
