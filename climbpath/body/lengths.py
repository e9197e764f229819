"""From sex, stature, mass and measured lengths to a whole body.

Order of trust: what was measured; the least-squares lines of the 2012 survey on stature S, span P
and sitting height T; the survey's mean shares of stature. Where P or T was not measured it is
first estimated from stature and all measured lengths (``survey.Conditional``), so that the lines
always see a consistent body. Then, with the arm chain A, hip height H, acromial height C and
overhead reach R from their lines, and the acromion–radiale part B of A:

    shoulder joint height J = C - 0.104 B          arm a = A - 0.104 B
    shoulder_half_width = P / 2 - a                shoulder_rise = R - J - a
    trunk = J - H                                  neck_head = S - J

so that hip height + trunk + shoulder_rise + arm is the standing reach, twice the half width plus
the arm the span, and hip height + trunk + neck_head the stature, always.

Where measured lengths over-determine the body:

- stature, span and each measured part of a limb stand as measured;
- measured span: arm parts that were not measured take up, within 10 %, what the measured ones
  leave of the survey's arm; the half width closes the span;
- measured standing reach: the shoulder's rise takes the difference (its spread of 40 mm is
  three times the arm's), and beyond its bounds the arm parts not measured do, within 10 %;
- measured hip height: thigh or shank not measured take up the rest; where both were measured they
  win, and hip height must agree within 25 mm;
- sitting height, shoulder and hip breadth only inform what was not measured.

A body that would need a length outside the bounds of ``tables/constants.toml`` is refused.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from math import hypot, pi, sqrt

from climbpath.body.checks import MEASURED_NAMES, check_inputs, length_problems
from climbpath.body.model import LENGTH_NAMES, Athlete, Length
from climbpath.body.survey import (
    Conditional,
    arm_shares,
    joint_drop,
    knee_share,
    line,
    mean,
    residual_sd,
)
from climbpath.body.tables import range_defaults, settings, share_bounds, survey_statistics
from climbpath.errors import DataError, Problem

ARM_PARTS = ("upper_arm", "forearm", "hand")
GIVE = 0.10
"""How far a part that was not measured follows the measured ones, share of its estimate."""
RISE_ESTIMATE = (0.015, 0.105)
"""An estimated shoulder rise is kept within these shares of stature (about two SD)."""
HIP_HEIGHT_TOLERANCE = 0.025
"""Largest difference between measured hip height and measured leg parts, m (from memory)."""


@dataclass(frozen=True)
class _Given:
    """Inputs with span and sitting height filled in; m, kg."""

    sex: str
    stature: float
    mass: float
    measured: Mapping[str, float]
    span: float
    sitting_height: float
    conditional: Conditional

    def line(self, quantity: str) -> float:
        return line(self.sex, quantity, self.stature, self.span, self.sitting_height)


def _fill(given: _Given, parts: dict[str, float], names: Iterable[str], change: float) -> float:
    """Change unmeasured ``names`` of ``parts`` in proportion, together by ``change`` m at most
    ``GIVE`` of their sum; returns what could not be taken up."""
    free = [name for name in names if name not in given.measured]
    total = sum(parts[name] for name in free)
    if not free:
        return change
    taken = min(max(change, -GIVE * total), GIVE * total)
    for name in free:
        parts[name] *= 1.0 + taken / total
    return change - taken


def _arm(given: _Given) -> dict[str, float]:
    """Upper arm, forearm, hand and shoulder half width."""
    chain = given.line("arm_chain")
    bone, forearm, hand = (share * chain for share in arm_shares(given.sex))
    parts = {"upper_arm": (1.0 - joint_drop()) * bone, "forearm": forearm, "hand": hand}
    estimate = sum(parts.values())
    parts.update({name: given.measured[name] for name in ARM_PARTS if name in given.measured})
    if "span" in given.measured:
        _fill(given, parts, ARM_PARTS, estimate - sum(parts.values()))
        parts["shoulder_half_width"] = given.span / 2.0 - sum(parts.values())
    else:
        parts["shoulder_half_width"] = given.span / 2.0 - estimate
    return parts


def _ankle(given: _Given) -> float:
    """Ankle joint above the ground."""
    share = mean(given.sex, "lateralmalleolusheight") / mean(given.sex, "stature")
    return given.measured.get("ankle_height", given.stature * share)


def _leg(given: _Given) -> dict[str, float]:
    """Thigh, shank and ankle height; their sum is the hip height."""
    measured, sex = given.measured, given.sex
    hip = measured.get("hip_height", given.line("hip_height"))
    ankle = _ankle(given)
    thigh = (1.0 - knee_share(sex)) * hip
    parts = {"thigh": thigh, "shank": hip - thigh - ankle, "ankle_height": ankle}
    for name, other in (("thigh", "shank"), ("shank", "thigh")):
        if name in measured:
            parts[name] = measured[name]
            if "hip_height" in measured:
                parts[other] = measured.get(other, hip - ankle - measured[name])
    return parts


def _reach(given: _Given, parts: dict[str, float], shoulder: float) -> None:
    """Shoulder rise, with the arm parts where a measured reach is beyond its bounds."""
    estimate = given.line("overhead_reach")
    rise = given.measured.get("standing_reach", estimate) - shoulder
    rise -= sum(parts[name] for name in ARM_PARTS)
    if "standing_reach" not in given.measured:
        low, high = (share * given.stature for share in RISE_ESTIMATE)
        parts["shoulder_rise"] = min(max(rise, low), high)
        return
    low, high = (share * given.stature for share in share_bounds()["shoulder_rise"])
    within = min(max(rise, low), high)
    left = _fill(given, parts, ARM_PARTS, rise - within)
    parts["shoulder_rise"] = within + left
    if "span" in given.measured:
        arm = sum(parts[name] for name in ARM_PARTS)
        parts["shoulder_half_width"] = given.span / 2.0 - arm


def _plain(given: _Given) -> dict[str, float]:
    """Lengths that come from a share of stature, a build or one measurement."""
    sex, stature, measured = given.sex, given.stature, given.measured
    constants = settings("constants.toml")
    marks = constants["landmarks"]
    # Depths follow the girth of a cylinder of the same build: sqrt(mass / stature).
    average = survey_statistics(sex)["weightkg"][0] / mean(sex, "stature")
    build = sqrt(given.mass / stature / average)
    hip = constants["hip_half_width"][sex] * stature
    if "hip_breadth" in measured:
        hip *= measured["hip_breadth"] / stature * mean(sex, "stature") / mean(sex, "hipbreadth")
    foot = measured.get("foot", given.conditional.estimate("foot"))
    ball = foot * mean(sex, "balloffootlength") / mean(sex, "footlength")
    contact = ball + marks["toe_contact"] * (foot - ball)
    parts = {
        "hand_breadth": stature * mean(sex, "handbreadth") / mean(sex, "stature"),
        "hip_half_width": hip,
        "foot": foot,
        "chest_depth": mean(sex, "chestdepth") * build,
        "pelvis_depth": mean(sex, "buttockdepth") * build,
    }
    parts.update({name: measured[name] for name in parts if name in measured})
    parts["ankle_to_toe"] = hypot(contact - marks["ankle_from_heel"] * foot, _ankle(given))
    return parts


_MEASURED_WHEN = {
    "shoulder_half_width": {"span", *ARM_PARTS},
    "shoulder_rise": {"standing_reach", "shoulder_height", *ARM_PARTS},
    "trunk": {"shoulder_height", "upper_arm", "thigh", "shank", "ankle_height"},
    "neck_head": {"shoulder_height", "upper_arm"},
    "ankle_to_toe": {"foot", "ankle_height"},
}
"""Derived lengths that follow from these measured ones (and stature) alone."""

_BY_STATURE = ("hand_breadth", "hip_half_width", "ankle_height")


def _error(given: _Given, name: str) -> float:
    """Residual SD of an estimated length, m."""
    sex, conditional = given.sex, given.conditional
    ankle = 0.0 if "ankle_height" in given.measured else residual_sd(sex, "lateralmalleolusheight")
    if name == "hip_half_width":
        return float(settings("constants.toml")["hip_half_width"]["sd"]) * given.stature
    if name == "ankle_height":
        return ankle
    if name == "shank":
        return hypot(conditional.sd("shank"), ankle)
    if name == "ankle_to_toe":
        # The foot's own error and half of the ball length's, since the contact lies half way.
        ball = 0.5 * residual_sd(sex, "balloffootlength")
        return hypot(0.5 * conditional.sd("foot"), ball)
    single = {
        "hand_breadth": "handbreadth",
        "chest_depth": "chestdepth",
        "pelvis_depth": "buttockdepth",
    }
    if name in single:
        return residual_sd(sex, single[name])
    return conditional.sd(name)


def _source(given: _Given, name: str) -> str:
    measured = set(given.measured)
    if name in measured or _MEASURED_WHEN.get(name, {""}) <= measured:
        return "measured"
    return "stature" if name in _BY_STATURE else "survey"


def _reaches(given: _Given, parts: Mapping[str, float]) -> dict[str, Length]:
    """What follows from the lengths. The SD of the whole is not that of its parts: those share
    their errors."""
    arm = sum(parts[name] for name in ARM_PARTS)
    hip = parts["thigh"] + parts["shank"] + parts["ankle_height"]
    shoulder = hip + parts["trunk"]
    values = {
        "standing_reach": shoulder + parts["shoulder_rise"] + arm,
        "span": 2.0 * (parts["shoulder_half_width"] + arm),
        "shoulder_height": shoulder,
        "hip_height": hip,
    }
    measured_when = {
        "shoulder_height": _MEASURED_WHEN["neck_head"],
        "hip_height": {"thigh", "shank", "ankle_height"},
    }
    result = {}
    for name, value in values.items():
        exact = measured_when.get(name, {""}) <= set(given.measured)
        if exact or (name in given.measured and name != "shoulder_height"):
            result[name] = Length(value, 0.0, "measured")
        else:
            # With the stature known the shoulder joint is as uncertain as the head above it.
            quantity = "neck_head" if name == "shoulder_height" else name
            result[name] = Length(value, given.conditional.sd(quantity), "survey")
    return result


def _hip_problem(given: _Given, parts: Mapping[str, float]) -> list[Problem]:
    total = parts["thigh"] + parts["shank"] + parts["ankle_height"]
    hip = given.measured.get("hip_height", total)
    if abs(total - hip) <= HIP_HEIGHT_TOLERANCE:
        return []
    expected = f"thigh + shank + ankle height ({total * 1e3:.0f} mm) within 25 mm"
    return [Problem("", "measured.hip_height_mm", f"{hip * 1e3:.0f}", expected)]


def _cautions(given: _Given) -> tuple[str, ...]:
    notes = []
    average, spread, _ = survey_statistics(given.sex)["stature"]
    if abs(given.stature * 1e3 - average) > 3.0 * spread:
        notes.append("stature lies outside the survey's people; lengths are extrapolated")
    missing = [
        label
        for name, label in (
            ("span", "span"),
            ("sitting_height", "sitting height"),
            ("standing_reach", "standing reach"),
        )
        if name not in given.measured
    ]
    if missing:
        notes.append(
            f"not measured: {', '.join(missing)}; lengths estimated from a survey of soldiers, "
            "not climbers"
        )
    return tuple(notes)


def _put_together(given: _Given) -> dict[str, float]:
    """Every length, m; DataError if they do not fit one body."""
    parts = _arm(given) | _leg(given) | _plain(given)
    # The acromion-radiale length from its joint part, to find the joint below the acromion.
    drop = joint_drop() / (1.0 - joint_drop()) * parts["upper_arm"]
    shoulder = given.measured.get("shoulder_height", given.line("acromial_height")) - drop
    _reach(given, parts, shoulder)
    parts["trunk"] = shoulder - parts["thigh"] - parts["shank"] - parts["ankle_height"]
    parts["neck_head"] = given.stature - shoulder
    problems = [
        *length_problems(parts, given.stature, given.measured),
        *_hip_problem(given, parts),
    ]
    if problems:
        raise DataError(problems)
    return parts


def make_athlete(
    *,
    sex: str,
    stature: float,
    mass: float,
    measured: Mapping[str, float] | None = None,
    ranges: Mapping[str, float] | None = None,
    capacity: Mapping[str, float] | None = None,
    name: str = "athlete",
    birth_year: int | None = None,
    mass_table: str = "de_leva",
) -> Athlete:
    """A body from what is known of it; see the module's text for how.

    ``stature`` and ``measured`` (keys of ``MEASURED_NAMES``) in m, ``mass`` in kg, ``ranges`` in
    rad (missing ones are the norms of ``tables/joint_ranges.toml``). DataError with every problem
    found; its keys are those of the athlete file.
    """
    measured = dict(measured or {})
    limits = {key: value * pi / 180.0 for key, value in range_defaults().items()}
    limits.update(ranges or {})
    problems = check_inputs(sex, stature, mass, measured, limits, birth_year, mass_table)
    if problems:
        raise DataError(problems)
    conditional = Conditional(sex, {"stature": stature, **measured})
    given = _Given(
        sex,
        stature,
        mass,
        measured,
        measured.get("span", conditional.estimate("span")),
        measured.get("sitting_height", conditional.estimate("sitting_height")),
        conditional,
    )
    parts = _put_together(given)
    lengths = {}
    for key in LENGTH_NAMES:
        source = _source(given, key)
        error = 0.0 if source == "measured" else _error(given, key)
        lengths[key] = Length(parts[key], error, source)
    return Athlete(
        name=name,
        sex=sex,
        stature=stature,
        mass=mass,
        birth_year=birth_year,
        lengths=lengths,
        reaches=_reaches(given, parts),
        ranges=limits,
        capacity=dict(capacity or {}),
        mass_table=mass_table,
        measured={key: measured[key] for key in MEASURED_NAMES if key in measured},
        cautions=_cautions(given),
    )
