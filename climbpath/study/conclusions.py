"""From outcomes of bodies to shares, claims and what disagrees with the observed runs. Pure."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from statistics import median

import numpy as np

from climbpath.study.evidence_results import (
    DOES_NOT_HOLD,
    HOLDS,
    NOT_IDENTIFIABLE,
    NOT_TRIED,
    Conclusion,
    HoldUse,
    OpeningEvidence,
    WallEvidence,
)
from climbpath.study.observed import CONTESTED, Pooled
from climbpath.study.outcomes import OPENING_HOLD, SPLIT_HOLDS, BodyOutcome, OpeningWay
from climbpath.study.published_lane import HAND_HOLDS
from climbpath.study.scores import HALF, Scores, errors, on_right_side

AGREEMENT = 0.9
"""A claim holds, or does not, where at least this share of the walls says so; otherwise it is not
identifiable. The lane without foot holds is one of the walls; one that cannot tell agrees with
neither. A choice."""

WORST = 3
"""How many of the largest errors are named."""

SMALL_ERROR = 0.05
"""Errors of a share up to this are not worth naming: about two of the observed runs of a sex."""

SAME_TIME = 0.05
"""A predicted time this share off the observed one is called off. A choice."""

CONTESTED_PLACES = tuple(HAND_HOLDS.index(hold) for hold in CONTESTED)


def opening_evidence(outcomes: Sequence[BodyOutcome]) -> OpeningEvidence:
    """Both ways through the opening, body by body."""
    both = [(body.with_hold, body.without_hold) for body in outcomes
            if body.with_hold is not None and body.without_hold is not None]

    def counts(value: Callable[[OpeningWay], float]) -> tuple[int, int]:
        gains = [value(with_it) - value(without) for with_it, without in both]
        return sum(gain > 0.0 for gain in gains), sum(gain < 0.0 for gain in gains)

    def medians(value: Callable[[OpeningWay], float]) -> tuple[float, float] | None:
        if not both:
            return None
        return (median(value(with_it) for with_it, _ in both),
                median(value(without) for _, without in both))

    return OpeningEvidence(
        with_hold=sum(body.with_hold is not None for body in outcomes),
        without_hold=sum(body.without_hold is not None for body in outcomes),
        both=len(both),
        faster=counts(lambda way: way.time_s),
        straighter=counts(lambda way: way.opening_mean_mm),
        narrower=counts(lambda way: way.lateral_max_mm),
        time_s=medians(lambda way: way.time_s),
        opening_mean_mm=medians(lambda way: way.opening_mean_mm),
        lateral_max_mm=medians(lambda way: way.lateral_max_mm),
    )


def wall_evidence(layout: int, outcomes: Sequence[BodyOutcome]) -> WallEvidence:
    """One population on one wall."""
    up = [body for body in outcomes if body.time_s is not None]
    times = [body.time_s for body in up if body.time_s is not None]
    shares = percentiles = None
    if up:
        shares = tuple(sum(hold in body.hand_holds for body in up) / len(up)
                       for hold in HAND_HOLDS)
        low, middle, high = (float(t) for t in np.percentile(times, [5.0, 50.0, 95.0]))
        percentiles = (low, middle, high)

    def speed(stretch: int) -> float | None:
        known = [body.speeds_m_s[stretch] for body in up]
        return median(v for v in known if v is not None) if set(known) - {None} else None

    return WallEvidence(
        layout=layout,
        bodies=len(outcomes),
        without_way_up=len(outcomes) - len(up),
        use_share=shares,
        time_s=percentiles,
        speeds_m_s=(speed(0), speed(1), speed(2)),
        opening=opening_evidence(outcomes),
    )


def more_of(counts: tuple[int, int]) -> bool | None:
    """Whether the first count is the larger; None where they are equal."""
    return None if counts[0] == counts[1] else counts[0] > counts[1]


def larger(a: float | None, b: float | None) -> bool | None:
    """Whether a > b; None where either is unknown or they are equal."""
    return None if a is None or b is None or a == b else a > b


def _use_claim(place: int) -> Callable[[WallEvidence], bool | None]:
    return lambda wall: larger(None if wall.use_share is None else wall.use_share[place], HALF)


def conclude(
    claim: str,
    told: Callable[[WallEvidence], bool | None],
    lane: WallEvidence,
    layouts: Sequence[WallEvidence],
    expected: bool | None,
) -> Conclusion:
    """One claim asked of every wall, with the rule of ``AGREEMENT``."""
    on_lane = told(lane)
    answers = [told(wall) for wall in layouts]
    counts = (answers.count(True), answers.count(False), answers.count(None))
    walls = len(answers) + 1
    if not answers:
        status = NOT_TRIED
    elif counts[0] + (on_lane is True) >= AGREEMENT * walls:
        status = HOLDS
    elif counts[1] + (on_lane is False) >= AGREEMENT * walls:
        status = DOES_NOT_HOLD
    else:
        status = NOT_IDENTIFIABLE
    return Conclusion(claim, on_lane, counts, status, expected)


def conclusions(
    lane: WallEvidence, layouts: Sequence[WallEvidence], observed: Pooled
) -> tuple[Conclusion, ...]:
    """Every claim but those on single holds."""
    first, last = SPLIT_HOLDS
    without = f"without a hand on hold {OPENING_HOLD}"
    claims: list[tuple[str, Callable[[WallEvidence], bool | None], bool | None]] = [
        (f"most who can do both are faster {without}",
         lambda wall: more_of(wall.opening.faster), None),
        (f"most of them are nearer the line in the opening {without}",
         lambda wall: more_of(wall.opening.straighter), None),
        (f"most of them have a smaller greatest distance from the line {without}",
         lambda wall: more_of(wall.opening.narrower), None),
        (f"faster from hold {first} to hold {last} than before",
         lambda wall: larger(wall.speeds_m_s[1], wall.speeds_m_s[0]), True),
        (f"slower from hold {last} to the top than from hold {first} to hold {last}",
         lambda wall: larger(wall.speeds_m_s[1], wall.speeds_m_s[2]), True),
        ("median time above the observed one",
         lambda wall: larger(None if wall.time_s is None else wall.time_s[1],
                             observed.mean_of_medians_s), None),
    ]
    return tuple(conclude(claim, told, lane, layouts, expected)
                 for claim, told, expected in claims)


def hold_uses(
    lane: WallEvidence, layouts: Sequence[WallEvidence], observed: Pooled
) -> tuple[HoldUse, ...]:
    """Every hand hold, with the claim that most use it over all walls."""
    right = off = None
    if lane.use_share is not None:
        right = on_right_side(lane.use_share, observed.use_share)
        off = errors(lane.use_share, observed.use_share)
    uses = []
    for place, hold in enumerate(HAND_HOLDS):
        shares = [wall.use_share[place] for wall in layouts if wall.use_share is not None]
        most = conclude("", _use_claim(place), lane, layouts, None)
        uses.append(HoldUse(
            hold=hold,
            predicted=None if lane.use_share is None else lane.use_share[place],
            observed=observed.use_share[place],
            error=None if off is None else float(off[place]),
            layouts=(min(shares), median(shares), max(shares)) if shares else None,
            contested=hold in CONTESTED,
            right_side=None if right is None else bool(right[place]),
            status=most.status,
        ))
    return tuple(uses)


def mean_use(layouts: Sequence[WallEvidence]) -> tuple[float, ...] | None:
    """Use of each hold averaged over the layouts on which anybody gets up."""
    shares = [wall.use_share for wall in layouts if wall.use_share is not None]
    if not shares:
        return None
    return tuple(float(share) for share in np.mean(shares, axis=0))


def disagreements(
    lane: WallEvidence,
    observed: Pooled,
    model: Sequence[Scores],
    rivals: Sequence[Scores],
    all_conclusions: Sequence[Conclusion],
) -> tuple[str, ...]:
    """What of the lane without foot holds disagrees with the observed runs, in sentences.

    ``model``: the model's scores, on the lane without foot holds first.
    """
    said = []
    if lane.without_way_up:
        said.append(f"{lane.without_way_up} of {lane.bodies} bodies have no way up; finals "
                    "athletes all have.")
    if lane.use_share is None or lane.time_s is None:
        return tuple(said)
    said += _holds_that_disagree(lane.use_share, observed)
    predicted, seen = lane.time_s[1], observed.mean_of_medians_s
    if abs(predicted / seen - 1.0) > SAME_TIME:
        said.append(f"Median time {predicted:.2f} s, observed {seen:.2f} s: "
                    f"{100.0 * (predicted / seen - 1.0):+.0f} %.")
    better = [one.name for one in rivals if one.brier_contested <= model[0].brier_contested]
    if better:
        said.append("On the contested holds no better than: " + "; ".join(better) + ".")
    said += [f"Published: {one.claim}. Predicted here: "
             f"{'cannot be told' if one.lane is None else 'no'} (over all walls: {one.status})."
             for one in all_conclusions if one.expected is True and one.lane is not True]
    return tuple(said)


def _holds_that_disagree(use_share: Sequence[float], observed: Pooled) -> list[str]:
    off = errors(use_share, observed.use_share)
    right = on_right_side(use_share, observed.use_share)

    def shown(place: int) -> str:
        return (f"{HAND_HOLDS[place]} (predicted {100.0 * use_share[place]:.0f} %, observed "
                f"{100.0 * observed.use_share[place]:.0f} %)")

    said = []
    wrong = [shown(place) for place in range(len(HAND_HOLDS)) if not right[place]]
    if wrong:
        said.append(f"On the wrong side of 50 %: hold {', '.join(wrong)}.")
    order = np.argsort(-np.abs(off), kind="stable")[:WORST]
    worst = [shown(int(place)) for place in order if abs(off[place]) > SMALL_ERROR]
    if worst:
        said.append(f"Largest errors: hold {', '.join(worst)}.")
    return said
