"""A made-up lane and a hand-made plan on it, with a stick body that closes by plane geometry.

Nothing here comes from the solver: tests of tables, documents and figures need a believable
result, not a right one.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from itertools import pairwise

from climbpath.contacts import LIMB_NAMES
from climbpath.study.cautions import cautions_for
from climbpath.study.results import PathPoint, Plan, PlanResult, PlanStep, Point2, WhyNot
from climbpath.wall.model import Hold, Section, Start, Wall

WIDTH, HEIGHT, LINE_X, FLOOR_Y = 3.0, 15.0, 1.5, -0.2
HAND_HOLDS = 18
SWING = (-0.38, 0.3, -0.22, 0.42, -0.3, 0.12)
"""Sideways places of the holds about the line, one after the other, m."""
STANDING = {"LF": "floor", "RF": "f1", "LH": "1", "RH": "1"}

# Segment lengths of the stick body, m (round numbers of no one in particular).
UPPER_ARM, FOREARM, THIGH, SHANK, TRUNK = 0.31, 0.33, 0.44, 0.43, 0.5
HALF_SHOULDERS, HALF_HIPS, TOE = 0.18, 0.09, 0.13


def sample_wall(name: str = "Quarry lane") -> Wall:
    """Eighteen hand holds in a swinging row, ten foot holds and a finish pad on a 15 m lane."""
    holds = [
        Hold(
            str(i + 1),
            round(LINE_X + SWING[i % 6], 3),
            round(1.5 + 0.72 * i, 3),
            outline=((-0.11, -0.03), (0.02, -0.08), (0.12, 0.0), (0.04, 0.07), (-0.08, 0.06)),
        )
        for i in range(HAND_HOLDS)
    ]
    holds += [
        Hold(f"f{i + 1}", LINE_X + (0.5 if i % 2 == 0 else -0.55), 0.45 + 1.3 * i, use="foot")
        for i in range(10)
    ]
    pad = ((-0.15, -0.2), (0.15, -0.2), (0.15, 0.2), (-0.15, 0.2))
    holds.append(Hold("pad", LINE_X, 14.7, use="strike", outline=pad))
    start = Start((("1",), ("1",), ("floor",), ("f1",)))
    return Wall(
        name=name,
        width=WIDTH,
        line_x=LINE_X,
        floor_y=FLOOR_Y,
        sections=(Section(9.0, math.radians(5.0)), Section(6.0, math.radians(-3.0))),
        holds=tuple(holds),
        starts=(start,),
        finish=("pad",),
    )


def sample_steps(wall: Wall) -> tuple[PlanStep, ...]:
    """Twenty steps: hands in turn up the row, feet after them, one flight, the pad at the end."""
    contacts = dict(STANDING)
    steps = [_step(wall, 0, "start", LIMB_NAMES, contacts, None)]
    place = 1
    for index in range(1, 20):
        if index == 19:
            kind, moved = "finish", ("RH", "LF")
            contacts |= {"RH": "pad", "LF": "free"}
        elif index == 11:
            kind, moved = "flight", LIMB_NAMES
            contacts = dict.fromkeys(LIMB_NAMES, "free")
        else:
            kind, place = "move", place + 1
            hands = ("LH", "RH") if index == 12 else ("LH",) if place % 2 else ("RH",)
            contacts |= dict.fromkeys(hands, str(place))
            moved = (*hands, *_move_feet(wall, contacts, index))
        steps.append(_step(wall, index, kind, moved, contacts, steps[-1]))
    return tuple(steps)


def sample_plan(wall: Wall | None = None, rank: int = 1) -> Plan:
    """The sample steps with figures that fit them roughly."""
    steps = sample_steps(wall or sample_wall())
    holds = [step.contacts[limb] for step in steps for limb in ("LH", "RH")]
    return Plan(
        rank=rank,
        time_s=steps[-1].time_s,
        lattice_time_s=steps[-1].time_s,
        expected_time_s=None,
        chance_clean=None,
        time_interval_s=None,
        lattice_error_s=None,
        pad_off_s=0.3125,
        lateral_area_mm_s=612.34567,
        lateral_mean_mm=94.26,
        lateral_max_mm=231.0,
        sideways_mm=2210.0,
        path_ratio=1.08125,
        hand_moves=19,
        hand_holds=tuple(dict.fromkeys(hold for hold in holds if hold != "free")),
        margin_min_mm=12.5,
        load_max=0.93,
        steps=steps,
        com_path_mm=sample_path(steps),
    )


def sample_path(steps: tuple[PlanStep, ...]) -> tuple[PathPoint, ...]:
    """The steps with a point between each two, a little to the right of the middle."""
    points: list[PathPoint] = [(steps[0].time_s, *steps[0].com_mm)]
    for before, after in pairwise(steps):
        x, y, z = ((a + b) / 2 for a, b in zip(before.com_mm, after.com_mm, strict=True))
        points.append(((before.time_s + after.time_s) / 2, x + 5.0, y, z))
        points.append((after.time_s, *after.com_mm))
    return tuple(points)


def sample_result(wall: Wall | None = None, athlete_name: str = "A. Sample") -> PlanResult:
    """One plan on the sample lane, with the standing cautions."""
    wall = wall or sample_wall()
    return PlanResult(
        wall_name=wall.name,
        athlete_name=athlete_name,
        line_x_mm=1000 * wall.line_x,
        aim="time",
        cautions=cautions_for("Arm and leg lengths were estimated from stature."),
        plans=(sample_plan(wall),),
        trade_off=(),
        why_not=None,
    )


def no_way_result() -> PlanResult:
    """A result without a plan, and why."""
    why_not = WhyNot(4, "RH", "7", 38.25, None, "move hold 7 down by 38 mm")
    return replace(sample_result(), plans=(), why_not=why_not)


def _move_feet(wall: Wall, contacts: dict[str, str], index: int) -> tuple[str, ...]:
    """Put one foot higher, on a foot hold if one is near, else a smear; let the other go."""
    foot, other, side = ("LF", "RF", -1) if index % 2 else ("RF", "LF", 1)
    low = min(_xy(wall, contacts[hand])[1] for hand in ("LH", "RH"))
    near = [h for h in wall.holds if h.use in ("foot", "both") and 0.9 < low - h.y < 1.35]
    near = [h for h in near if side * (h.x - LINE_X) > -0.2 and h.id not in contacts.values()]
    contacts[foot] = near[-1].id if near else "smear"
    stays = contacts[other] not in ("free", "floor", "smear")
    if stays and low - _xy(wall, contacts[other])[1] < 1.45:
        return (foot,)
    left = contacts[other] != "free"
    contacts[other] = "free"
    return (foot, other) if left else (foot,)


def _xy(wall: Wall, hold_id: str) -> tuple[float, float]:
    hold = wall.hold(hold_id)
    return hold.x, hold.y


def _step(
    wall: Wall,
    index: int,
    kind: str,
    moved: tuple[str, ...],
    contacts: Mapping[str, str],
    before: PlanStep | None,
) -> PlanStep:
    ends: dict[str, tuple[float, float]] = {}
    for limb, name in contacts.items():
        if name not in ("free", "floor", "smear"):
            ends[limb] = _xy(wall, name)
    hands = [ends[limb] for limb in ("LH", "RH") if limb in ends]
    if hands:
        x = 0.55 * sum(p[0] for p in hands) / len(hands) + 0.45 * LINE_X
        y = sum(p[1] for p in hands) / len(hands) - 0.62
        y = min(y, FLOOR_Y + 1.1) if "floor" in contacts.values() else y
    else:  # in flight: on from where the body was
        x, y = (before.com_mm[0] / 1000, before.com_mm[1] / 1000 + 0.35) if before else (1.5, 1.0)
    for limb, side in (("LF", -1), ("RF", 1)):
        if contacts[limb] == "floor":
            ends[limb] = (x + 0.1 * side, FLOOR_Y)
        elif contacts[limb] == "smear":
            ends[limb] = (x + 0.28 * side, y - 0.72)
    com = (1000 * x, 1000 * y, 210.0)
    return PlanStep(
        step=index,
        time_s=0.0 if index == 0 else 0.42 + 0.31 * index + 0.02 * math.sin(index),
        kind=kind,
        moved=moved,
        contacts={limb: contacts[limb] for limb in LIMB_NAMES},
        points_mm={limb: (1000 * ends[limb][0], 1000 * ends[limb][1]) for limb in sorted(ends)},
        com_mm=com,
        joints_mm={name: (1000 * p[0], 1000 * p[1], 150.0) for name, p in _body(x, y, ends)},
        speed_m_s=1.5 if index else 0.0,
        margin_mm=None if kind == "flight" else 40.0 + 3.0 * index,
        load=None if kind == "flight" else 0.5 + 0.02 * index,
        load_by_limb=dict.fromkeys(sorted(ends), 0.25),
    )


def _body(
    x: float, y: float, ends: Mapping[str, tuple[float, float]]
) -> list[tuple[str, tuple[float, float]]]:
    """Joints of a stick body with the pelvis just below (x, y), m."""
    pelvis, neck = (x, y - 0.08), (x, y - 0.08 + TRUNK)
    joints = [("pelvis", pelvis), ("neck", neck), ("head", (x, neck[1] + 0.3))]
    for side, letter in ((-1, "L"), (1, "R")):
        shoulder = (x + side * HALF_SHOULDERS, neck[1])
        hand = ends.get(f"{letter}H", (shoulder[0] + 0.12 * side, shoulder[1] + 0.5))
        elbow, wrist = _two_links(shoulder, hand, UPPER_ARM, FOREARM, -side)
        hip = (x + side * HALF_HIPS, pelvis[1])
        foot = ends.get(f"{letter}F", (hip[0] + 0.1 * side, hip[1] - 0.7))
        ankle_goal = (foot[0] - 0.04 * side, foot[1] + TOE)
        knee, ankle = _two_links(hip, ankle_goal, THIGH, SHANK, side)
        joints += [(f"shoulder_{letter}", shoulder), (f"elbow_{letter}", elbow)]
        joints += [(f"wrist_{letter}", wrist), (f"{letter}H", hand), (f"hip_{letter}", hip)]
        joints += [(f"knee_{letter}", knee), (f"ankle_{letter}", ankle), (f"{letter}F", foot)]
    return joints


def _two_links(
    root: Point2, goal: Point2, first: float, second: float, bend: int
) -> tuple[Point2, Point2]:
    """Middle and end joint of two links that point from ``root`` to ``goal`` as far as they go."""
    dx, dy = goal[0] - root[0], goal[1] - root[1]
    distance = max(math.hypot(dx, dy), 1e-6)
    reach = min(distance, first + second - 1e-6)
    reach = max(reach, abs(first - second) + 1e-6)
    cosine = (first**2 + reach**2 - second**2) / (2 * first * reach)
    turn = bend * math.acos(max(-1.0, min(1.0, cosine)))
    along = math.atan2(dy, dx)
    middle = (root[0] + first * math.cos(along + turn), root[1] + first * math.sin(along + turn))
    scale = reach / distance
    return middle, (root[0] + scale * dx, root[1] + scale * dy)
