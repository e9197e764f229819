"""The plan document: a ``PlanResult`` as plain values with fixed decimals, and its JSON text."""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any, TypeVar

from climbpath.contacts import LIMB_NAMES
from climbpath.study.results import Plan, PlanResult, PlanStep, WhyNot

_T = TypeVar("_T")

PLAN_SCHEMA_NAME = "climbpath/plan/1"

TIME_DECIMALS = 6
"""Times are whole microseconds inside."""
LENGTH_DECIMALS = 1
AREA_DECIMALS = 3
"""Lateral areas are whole mm ms inside."""
SHARE_DECIMALS = 4
LINE_LENGTH = 80
"""Lists of plain values up to this many characters are written on one line."""

JOINT_ORDER = (
    "head", "neck", "pelvis",
    "shoulder_L", "elbow_L", "wrist_L", "LH",
    "shoulder_R", "elbow_R", "wrist_R", "RH",
    "hip_L", "knee_L", "ankle_L", "LF",
    "hip_R", "knee_R", "ankle_R", "RF",
)  # fmt: skip


def plan_document(result: PlanResult) -> dict[str, Any]:
    """The plan document of ``result``: dicts, lists, strings, ints, floats and None only.

    Keys stand in the order of the contract, ``line_x_mm`` and ``aim`` beside them. Times have 6
    decimals, lengths 1, areas 3, shares and ratios 4; a number that is not finite becomes None.
    ``why_not`` is there exactly where no plan is.
    """
    document: dict[str, Any] = {
        "schema": PLAN_SCHEMA_NAME,
        "wall": str(result.wall_name),
        "athlete": str(result.athlete_name),
        "line_x_mm": _length(result.line_x_mm),
        "aim": str(result.aim),
        "cautions": [str(text) for text in result.cautions],
        "plans": [_plan(plan) for plan in result.plans],
        "trade_off": [
            [rounded_time(time), _area(area), _length(excursion)]
            for time, area, excursion in result.trade_off
        ],
    }
    if result.why_not is not None:
        document["why_not"] = _why_not(result.why_not)
    return document


def dump_json(document: Mapping[str, Any]) -> str:
    """JSON text of ``document``, ending in a newline; equal documents give equal bytes.

    Keys keep their order, and a short list of plain values stands on one line. Only printable ASCII
    letters and newlines are written, so that a name can do no harm in a terminal. A number that
    is not finite is written as null.
    """
    return _dumped(document, "") + "\n"


def _plan(plan: Plan) -> dict[str, Any]:
    interval = plan.time_interval_s
    return {
        "rank": int(plan.rank),
        "time_s": rounded_time(plan.time_s),
        "lattice_time_s": rounded_time(plan.lattice_time_s),
        "expected_time_s": rounded_time(plan.expected_time_s),
        "chance_clean": rounded_share(plan.chance_clean),
        "time_interval_s": (
            None if interval is None else [rounded_time(value) for value in interval]
        ),
        "lattice_error_s": rounded_time(plan.lattice_error_s),
        "pad_off_s": rounded_time(plan.pad_off_s),
        "lateral_area_mm_s": _area(plan.lateral_area_mm_s),
        "lateral_mean_mm": _length(plan.lateral_mean_mm),
        "lateral_max_mm": _length(plan.lateral_max_mm),
        "sideways_mm": _length(plan.sideways_mm),
        "path_ratio": rounded_share(plan.path_ratio),
        "hand_moves": int(plan.hand_moves),
        "hand_holds": [str(hold) for hold in plan.hand_holds],
        "margin_min_mm": _length(plan.margin_min_mm),
        "load_max": rounded_share(plan.load_max),
        "steps": [_step(step) for step in plan.steps],
        "com_path_mm": [[rounded_time(time), *_point(place)] for time, *place in plan.com_path_mm],
    }


def _step(step: PlanStep) -> dict[str, Any]:
    return {
        "step": int(step.step),
        "time_s": rounded_time(step.time_s),
        "kind": str(step.kind),
        "moved": [str(limb) for limb in step.moved],
        "contacts": {limb: str(name) for limb, name in _in_order(step.contacts, LIMB_NAMES)},
        "points_mm": {limb: _point(xy) for limb, xy in _in_order(step.points_mm, LIMB_NAMES)},
        "com_mm": _point(step.com_mm),
        "joints_mm": {name: _point(xyz) for name, xyz in _in_order(step.joints_mm, JOINT_ORDER)},
        "speed_m_s": rounded_share(step.speed_m_s),
        "margin_mm": _length(step.margin_mm),
        "load": rounded_share(step.load),
        "load_by_limb": {
            limb: rounded_share(load) for limb, load in _in_order(step.load_by_limb, LIMB_NAMES)
        },
    }


def _why_not(why_not: WhyNot) -> dict[str, Any]:
    return {
        "step": int(why_not.step),
        "limb": None if why_not.limb is None else str(why_not.limb),
        "hold": None if why_not.hold is None else str(why_not.hold),
        "missing_mm": _length(why_not.missing_mm),
        "missing_bw": rounded_share(why_not.missing_bw),
        "change": str(why_not.change),
    }


def _in_order(values: Mapping[str, _T], order: Sequence[str]) -> list[tuple[str, _T]]:
    """The items of ``values``, those named in ``order`` first and the rest by name."""
    rest = sorted(set(values).difference(order))
    return [(name, values[name]) for name in (*order, *rest) if name in values]


def rounded(value: float | None, decimals: int) -> float | None:
    if value is None or not math.isfinite(value):
        return None
    # Adding zero turns the negative zero that rounding can leave into a plain one.
    return round(float(value), decimals) + 0.0


def rounded_time(value: float | None) -> float | None:
    return rounded(value, TIME_DECIMALS)


def _length(value: float | None) -> float | None:
    return rounded(value, LENGTH_DECIMALS)


def _area(value: float | None) -> float | None:
    return rounded(value, AREA_DECIMALS)


def rounded_share(value: float | None) -> float | None:
    return rounded(value, SHARE_DECIMALS)


def _point(point: Iterable[float]) -> list[float | None]:
    return [_length(value) for value in point]


def _dumped(value: Any, indent: str) -> str:
    """JSON text of one value; its lines after the first start with ``indent``."""
    deeper = indent + "  "
    if isinstance(value, Mapping):
        rows = [f"{_scalar(str(key))}: {_dumped(item, deeper)}" for key, item in value.items()]
        brackets = "{}"
    elif isinstance(value, list | tuple):
        rows = [_dumped(item, deeper) for item in value]
        brackets = "[]"
        line = f"[{', '.join(rows)}]"
        nested = any(isinstance(item, Mapping | list | tuple) for item in value)
        if len(line) <= LINE_LENGTH and not nested:
            return line
    else:
        return _scalar(value)
    if not rows:
        return brackets
    separator = ",\n" + deeper
    return f"{brackets[0]}\n{deeper}{separator.join(rows)}\n{indent}{brackets[1]}"


def _scalar(value: str | float | bool | None) -> str:
    if isinstance(value, float) and not math.isfinite(value):
        return "null"
    # The encoder leaves the delete character as it is; it can only stand inside a string.
    return json.dumps(value, ensure_ascii=True, allow_nan=False).replace("\x7f", "\\u007f")
