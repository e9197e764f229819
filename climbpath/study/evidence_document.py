"""The evidence document: an ``Evidence`` as plain values with fixed decimals."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from climbpath.study.document import LENGTH_DECIMALS, SHARE_DECIMALS, TIME_DECIMALS
from climbpath.study.evidence_results import (
    Conclusion,
    Evidence,
    HoldUse,
    OpeningEvidence,
    SexEvidence,
    WallEvidence,
)
from climbpath.study.outcomes import OPENING_END, OPENING_HOLD, SPLIT_HOLDS
from climbpath.study.scores import Scores

EVIDENCE_SCHEMA_NAME = "climbpath/evidence/1"


def evidence_document(result: Evidence) -> dict[str, Any]:
    """The document: dicts, lists, strings, ints, floats, booleans and None only.

    Shares, scores and speeds have 4 decimals, times 6, lengths 1.
    """
    request = result.request
    return {
        "schema": EVIDENCE_SCHEMA_NAME,
        "bodies": request.bodies,
        "layouts": request.layouts,
        "layout_bodies": request.layout_bodies,
        "seed": request.seed,
        "split_holds": list(SPLIT_HOLDS),
        "opening_hold": OPENING_HOLD,
        "opening_end": OPENING_END,
        "foot_layouts": [
            {"layout": number, "feet_mm": [_lengths(foot) for foot in feet]}
            for number, feet in enumerate(result.feet_mm, start=1)
        ],
        "populations": [_sex(one) for one in result.sexes],
        "cautions": list(result.cautions),
    }


def _sex(one: SexEvidence) -> dict[str, Any]:
    who, seen = one.population, one.observed
    return {
        "sex": who.sex,
        "stature_mm": {"mean": _length(1e3 * who.stature[0]), "sd": _length(1e3 * who.stature[1])},
        "body_mass_index_kg_m2": {
            "mean": _share(who.body_mass_index[0]), "sd": _share(who.body_mass_index[1]),
        },
        "observed": {
            "years": list(seen.years),
            "runs": seen.runs,
            "mean_of_medians_s": _time(seen.mean_of_medians_s),
        },
        "lane": _wall(one.lane),
        "foot_layouts": [_wall(wall) for wall in one.layouts],
        "holds": [_hold(hold) for hold in one.holds],
        "scores": [_scores(line) for line in one.scores],
        "rivals": [_scores(line) for line in one.rivals],
        "conclusions": [_conclusion(line) for line in one.conclusions],
        "disagreements": list(one.disagreements),
    }


def _wall(wall: WallEvidence) -> dict[str, Any]:
    time = None
    if wall.time_s is not None:
        low, middle, high = wall.time_s
        time = {"p5": _time(low), "p50": _time(middle), "p95": _time(high)}
    return {
        "layout": wall.layout,
        "bodies": wall.bodies,
        "without_way_up": wall.without_way_up,
        "share_with_way_up": _share(1.0 - wall.without_way_up / wall.bodies),
        "time_s": time,
        "stretch_speeds_m_s": [_share(speed) for speed in wall.speeds_m_s],
        "use_shares": None if wall.use_share is None else [_share(v) for v in wall.use_share],
        "opening": _opening(wall.opening),
    }


def _opening(opening: OpeningEvidence) -> dict[str, Any]:
    def counted(pair: tuple[int, int]) -> dict[str, int]:
        return {"better": pair[0], "worse": pair[1]}

    def compared(pair: tuple[float, float] | None, decimals: int) -> dict[str, Any] | None:
        if pair is None:
            return None
        return {"with": _rounded(pair[0], decimals), "without": _rounded(pair[1], decimals)}

    return {
        "up_with": opening.with_hold,
        "up_without": opening.without_hold,
        "up_both_ways": opening.both,
        "time_without": counted(opening.faster),
        "opening_mean_without": counted(opening.straighter),
        "lateral_max_without": counted(opening.narrower),
        "time_s": compared(opening.time_s, TIME_DECIMALS),
        "opening_mean_mm": compared(opening.opening_mean_mm, LENGTH_DECIMALS),
        "lateral_max_mm": compared(opening.lateral_max_mm, LENGTH_DECIMALS),
    }


def _hold(hold: HoldUse) -> dict[str, Any]:
    layouts = None
    if hold.layouts is not None:
        low, middle, high = hold.layouts
        layouts = {"least": _share(low), "p50": _share(middle), "greatest": _share(high)}
    return {
        "hold": hold.hold,
        "predicted_share": _share(hold.predicted),
        "observed_share": _share(hold.observed),
        "error": _share(hold.error),
        "contested": hold.contested,
        "right_side": hold.right_side,
        "layout_shares": layouts,
        "used_by_most": hold.status,
    }


def _scores(line: Scores) -> dict[str, Any]:
    return {
        "name": line.name,
        "correlation": _share(line.correlation),
        "right_side": line.right_side,
        "holds": line.holds,
        "brier": _share(line.brier),
        "excess": _share(line.excess),
        "brier_contested": _share(line.brier_contested),
        "excess_contested": _share(line.excess_contested),
    }


def _conclusion(line: Conclusion) -> dict[str, Any]:
    true, false, undecided = line.layouts
    return {
        "claim": line.claim,
        "expected": line.expected,
        "lane": line.lane,
        "layouts": {"true": true, "false": false, "undecided": undecided},
        "status": line.status,
    }


def _rounded(value: float | None, decimals: int) -> float | None:
    # Adding zero turns the negative zero that rounding can leave into a plain one.
    return None if value is None else round(float(value), decimals) + 0.0


def _time(value: float | None) -> float | None:
    return _rounded(value, TIME_DECIMALS)


def _length(value: float | None) -> float | None:
    return _rounded(value, LENGTH_DECIMALS)


def _share(value: float | None) -> float | None:
    return _rounded(value, SHARE_DECIMALS)


def _lengths(values: Iterable[float]) -> list[float | None]:
    return [_length(value) for value in values]
