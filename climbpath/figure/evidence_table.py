"""The evidence as plain text for the terminal, at most 100 columns wide."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

from climbpath.figure.names import padded
from climbpath.figure.table import NONE, WIDTH, number
from climbpath.study.evidence_results import Evidence, OpeningEvidence, SexEvidence, WallEvidence
from climbpath.study.outcomes import OPENING_END, OPENING_HOLD, SPLIT_HOLDS
from climbpath.study.scores import Scores

PEOPLE = {"male": "Men", "female": "Women"}

LEGEND = (
    "predicted, observed: share of bodies, of runs, that touch the hold by hand; * contested; ! on "
    "the wrong side of 50 %; layouts: least, middle and greatest share over the random foot "
    "layouts; used by most: whether that stands many of them."
)
SCORE_LEGEND = (
    "r: Pearson's correlation over the 20 holds; side: holds on the right side of 50 %; Brier: "
    "mean squared error over holds and single observed runs; excess: what of it a better "
    "prediction could take away; the last two columns are the same over the contested holds alone. "
    f"{NONE} not computed."
)
RULE = (
    "holds, does not hold: at least 90 % of the walls say so, the lane without foot holds being "
    "one of them; otherwise not identifiable from what is known of the lane."
)


def evidence_table(result: Evidence) -> str:
    """Everything of an evidence as text, what disagrees first."""
    request = result.request
    blocks = [[
        "Published 15 m lane: predicted against observed hand holds and times",
        f"{request.bodies} bodies of each sex without foot holds, {request.layouts} random foot "
        f"layouts with {request.layout_bodies} bodies each, seed {request.seed}",
    ]]
    for one in result.sexes:
        blocks += [_head(one), _disagreements(one), _holds(one), _scores(one), _climb(one),
                   _conclusions(one)]
    blocks.append([part for text in (LEGEND, SCORE_LEGEND, RULE) for part in _folded(text, "")])
    blocks.append(["Cautions", *(part for text in result.cautions
                                 for part in _folded(f"- {text}", "  "))])
    return "\n\n".join("\n".join(line.rstrip() for line in lines) for lines in blocks) + "\n"


def _head(one: SexEvidence) -> list[str]:
    who, seen = one.population, one.observed
    name = PEOPLE[who.sex]
    text = (
        f"stature {who.stature[0]:.2f} ± {who.stature[1]:.2f} m, body-mass index "
        f"{who.body_mass_index[0]:g} ± {who.body_mass_index[1]:g}; observed: {seen.runs} runs of "
        f"{', '.join(str(year) for year in seen.years)}"
    )
    return [name, "=" * len(name), *_folded(text, "")]


def _disagreements(one: SexEvidence) -> list[str]:
    if not one.disagreements:
        return ["What disagrees with the observed runs: nothing that is looked at here."]
    return ["What disagrees with the observed runs",
            *(part for text in one.disagreements for part in _folded(f"- {text}", "  "))]


def _holds(one: SexEvidence) -> list[str]:
    lines = ["hold  predicted  observed   error   layouts            used by most"]
    for hold in one.holds:
        layouts = NONE
        if hold.layouts is not None:
            layouts = " ".join(number(share, 2) for share in hold.layouts)
        mark = ("*" if hold.contested else "") + ("!" if hold.right_side is False else "")
        lines.append(
            f"{hold.hold:>4}{padded(mark, 2)}{number(hold.predicted, 3):>9}  "
            f"{number(hold.observed, 3):>8}  {number(hold.error, 3, sign=True):>6}   "
            f"{padded(layouts, 17)}  {hold.status}"
        )
    return lines


def _scores(one: SexEvidence) -> list[str]:
    lines = [f"{padded('', 38)}       r   side   Brier  excess   contested holds"]
    lines += [_score_line(line) for line in (*one.scores, *one.rivals)]
    return lines


def _score_line(line: Scores) -> str:
    values = (line.brier, line.excess, line.brier_contested, line.excess_contested)
    side = f"{line.right_side:>2}/{line.holds}"
    return (f"{padded(line.name, 38)}  {number(line.correlation, 2):>6}  {side}  "
            + "  ".join(f"{number(value, 3):>6}" for value in values))


def _climb(one: SexEvidence) -> list[str]:
    first, last = SPLIT_HOLDS
    names = [f"to hold {first}", f"hold {first} to {last}", f"hold {last} to the top"]
    walls = [("no foot holds", one.lane)]
    walls += [(f"foot layout {wall.layout}", wall) for wall in one.layouts]
    lines = [
        f"Time and speed: observed {number(one.observed.mean_of_medians_s, 2)} s; 5th percentile, "
        "median, 95th; medians of speeds, m/s",
        f"{padded('', 18)}no way up    times, s           " + "  ".join(names),
    ]
    lines += [_climb_line(name, wall, names) for name, wall in walls]
    return [*lines, *_opening(one.lane.opening)]


def _climb_line(name: str, wall: WallEvidence, names: Sequence[str]) -> str:
    times = NONE
    if wall.time_s is not None:
        times = "  ".join(number(time, 2) for time in wall.time_s)
    speeds = "  ".join(f"{number(speed, 2):>{len(title)}}"
                       for speed, title in zip(wall.speeds_m_s, names, strict=True))
    return (f"{padded(name, 18)}{wall.without_way_up:>4} of {wall.bodies:<4}  {padded(times, 18)} "
            f"{speeds}")


def _opening(opening: OpeningEvidence) -> list[str]:
    first = (
        f"Opening, no foot holds: {opening.with_hold} bodies get up with a hand on hold "
        f"{OPENING_HOLD}, {opening.without_hold} without one, {opening.both} both ways."
    )
    if opening.time_s is None or opening.opening_mean_mm is None or opening.lateral_max_mm is None:
        return _folded(first, "  ")

    def compared(pair: tuple[float, float], decimals: int, unit: str) -> str:
        return f"{number(pair[1], decimals)} against {number(pair[0], decimals)} {unit}"

    second = (
        f"Of these, without the hold against with it (medians; bodies better, worse): time "
        f"{compared(opening.time_s, 2, 's')} ({opening.faster[0]}, {opening.faster[1]}); mean "
        f"distance from the line to hold {OPENING_END} "
        f"{compared(opening.opening_mean_mm, 0, 'mm')} ({opening.straighter[0]}, "
        f"{opening.straighter[1]}); greatest distance in the climb "
        f"{compared(opening.lateral_max_mm, 0, 'mm')} ({opening.narrower[0]}, "
        f"{opening.narrower[1]})."
    )
    return [*_folded(first, "  "), *_folded(second, "  ")]


def _conclusions(one: SexEvidence) -> list[str]:
    says = {True: "yes", False: "no", None: "cannot tell"}
    lines = ["Conclusions (no foot holds; layouts that say yes, no, cannot tell)"]
    for line in one.conclusions:
        true, false, undecided = line.layouts
        seen = "" if line.expected is None else f" (published: {says[line.expected]})"
        lines += _folded(
            f"- {line.claim}{seen}: {says[line.lane]}; {true}, {false}, {undecided}: {line.status}",
            "  ",
        )
    return lines


def _folded(line: str, indent: str) -> list[str]:
    return textwrap.wrap(line, WIDTH, subsequent_indent=indent, break_on_hyphens=False) or [""]
