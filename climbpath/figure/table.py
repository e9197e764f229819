"""A plan as a plain-text table for the terminal, at most 100 columns wide."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Iterable, Sequence

from climbpath.contacts import CONTACT_NAMES, LIMB_NAMES
from climbpath.figure.names import padded, printable, text_width
from climbpath.study.results import Plan, PlanResult, PlanStep, WhyNot

WIDTH = 100
"""Columns of the table at most."""
NONE = "–"
MOVE_WIDTH = 46
HOLD_WIDTH = 24
HOLDS_AT = 40
TRADE_OFF_ROWS = 12

LEGEND = (
    "CoM dx: centre of mass from the line, + to the right; height: CoM along the surface; margin: "
    "reach to spare; load: share of strength in use. "
    f"{NONE} not computed, or there is none (a flight has no margin)."
)


def plan_table(result: PlanResult) -> str:
    """Everything a ``plan`` run found as text: headline, best plan step by step, the others.

    No line is wider than 100 columns, hidden characters in names are shown by their code, and a
    value that is missing or not finite is shown as a dash. Without a plan the text says why.
    """
    blocks = [_headline(result)]
    if result.plans:
        best = result.plans[0]
        blocks += [_plan_lines(best, len(result.plans)), _step_lines(best, result.line_x_mm)]
        if len(result.plans) > 1:
            blocks.append(_summary_lines(result.plans))
    elif result.why_not is not None:
        blocks.append(why_not_lines(result.why_not))
    if result.trade_off:
        blocks.append(_trade_off_lines(result.trade_off))
    if result.cautions:
        blocks.append(
            ["Cautions", *(line for text in result.cautions for line in bullet(text))]
        )
    return "\n\n".join("\n".join(line.rstrip() for line in lines) for lines in blocks) + "\n"


def placement_text(limb: str, contact: str) -> str:
    """What a limb does at a contact, such as ``RH → 12``, ``LF smears`` or ``RF free``."""
    if contact == "smear":
        return f"{limb} smears"
    if contact == "free":
        return f"{limb} free"
    return f"{limb} → {printable(contact, HOLD_WIDTH)}"


def number(value: float | None, decimals: int, sign: bool = False) -> str:
    """``value`` with fixed decimals, a dash where it is missing or not finite."""
    if value is None or not math.isfinite(value):
        return NONE
    # Adding zero turns the negative zero that rounding can leave into a plain one.
    return f"{round(value, decimals) + 0.0:{'+' if sign else ''}.{decimals}f}"


def _headline(result: PlanResult) -> list[str]:
    return [
        f"{printable(result.wall_name, 55)} · {printable(result.athlete_name, 40)}",
        f"aim: {printable(result.aim, 40)}, line at x = {number(result.line_x_mm, 0)} mm",
    ]


def _plan_lines(plan: Plan, count: int) -> list[str]:
    of = f" of {count}" if count > 1 else ""
    facts = [
        f"lateral mean {number(plan.lateral_mean_mm, 0)} mm",
        f"max {number(plan.lateral_max_mm, 0)} mm",
        f"{plan.hand_moves} hand moves",
        f"{len(plan.steps)} steps",
    ]
    more = [
        f"sideways {number(plan.sideways_mm, 0)} mm",
        f"path / height {number(plan.path_ratio, 3)}",
        f"least margin {number(plan.margin_min_mm, 0)} mm",
        f"greatest load {number(plan.load_max, 2)}",
        f"pad off {number(plan.pad_off_s, 3)} s",
    ]
    unsure = []
    if plan.expected_time_s is not None:
        unsure.append(f"expected time {number(plan.expected_time_s, 3)} s")
    if plan.chance_clean is not None:
        unsure.append(f"chance of a clean run {number(plan.chance_clean, 2)}")
    if plan.time_s != plan.lattice_time_s:
        unsure.append(f"before the polish {number(plan.lattice_time_s, 3)} s")
    if plan.time_interval_s is not None:
        low, high = plan.time_interval_s
        unsure.append(f"80 % interval {number(low, 3)} to {number(high, 3)} s")
    if plan.lattice_error_s is not None:
        unsure.append(f"step error {number(plan.lattice_error_s, 3)} s")
    lines = [
        f"Plan {plan.rank}{of}: {number(plan.time_s, 3)} s, {', '.join(facts)}",
        f"  {', '.join(more)}",
    ]
    if unsure:
        lines.append(f"  {', '.join(unsure)}")
    return [part for line in lines for part in _folded(line, "  ")]


def _step_lines(plan: Plan, line_x_mm: float) -> list[str]:
    lines = [
        _row("step", "time", "kind", "placements", ["CoM dx", "height", "margin", "load"]),
        _row("", "s", "", "", ["mm", "mm", "mm", ""]),
    ]
    for step in plan.steps:
        x, y, _ = step.com_mm
        values = [
            number(x - line_x_mm, 0, sign=True),
            number(y, 0),
            number(step.margin_mm, 0),
            number(step.load, 2),
        ]
        first, *more = _wrapped_placements(step)
        time = number(step.time_s, 3)
        lines.append(_row(str(step.step), time, printable(step.kind, 6), first, values))
        lines += [_row("", "", "", text, []) for text in more]
    return [*lines, *_folded(LEGEND, "")]


def _wrapped_placements(step: PlanStep) -> list[str]:
    """The placements of a step, broken between limbs into lines that fit their column."""
    limbs: Iterable[str] = step.moved
    if step.kind == "start":
        limbs = [limb for limb in LIMB_NAMES if limb in step.contacts]
    texts = [placement_text(limb, step.contacts.get(limb, "free")) for limb in limbs]
    lines = [""]
    for text in texts:
        joined = f"{lines[-1]}, {text}" if lines[-1] else text
        if text_width(joined) <= MOVE_WIDTH or not lines[-1]:
            lines[-1] = joined
        else:
            lines[-1] += ","
            lines.append(text)
    return lines


def _row(step: str, time: str, kind: str, move: str, values: Sequence[str]) -> str:
    left = f"{step:>4}  {time:>7}  {kind:<6}  {padded(move, MOVE_WIDTH + 1)}"
    widths = (6, 6, 6, 5)
    return left + "".join(f" {value:>{w}}" for value, w in zip(values, widths, strict=False))


def _summary_lines(plans: Sequence[Plan]) -> list[str]:
    lines = ["All plans", "rank   time s  mean mm   max mm  moves  hand holds"]
    for plan in plans:
        first, *more = _folded_holds(plan.hand_holds, WIDTH - HOLDS_AT)
        lines.append(
            f"{plan.rank:>4}  {number(plan.time_s, 3):>7}  {number(plan.lateral_mean_mm, 0):>7}  "
            f"{number(plan.lateral_max_mm, 0):>7}  {plan.hand_moves:>5}  {first}"
        )
        lines += [" " * HOLDS_AT + text for text in more]
    return lines


def _folded_holds(holds: Sequence[str], width: int) -> list[str]:
    lines = [""]
    for hold in holds:
        name = printable(hold, HOLD_WIDTH)
        if lines[-1] and text_width(lines[-1]) + 1 + text_width(name) > width:
            lines.append("")
        lines[-1] = f"{lines[-1]} {name}".strip()
    return lines


def _trade_off_lines(points: Sequence[tuple[float, float, float]]) -> list[str]:
    """The trade-off points, at most a dozen of them from end to end."""
    count = len(points)
    if count <= TRADE_OFF_ROWS:
        chosen = list(range(count))
    else:
        chosen = [i * (count - 1) // (TRADE_OFF_ROWS - 1) for i in range(TRADE_OFF_ROWS)]
    shown = "" if len(chosen) == count else f", {len(chosen)} shown"
    lines = [
        f"Trade-off between time and straightness ({count} points{shown})",
        " time s  area mm s   max mm",
    ]
    for index in chosen:
        time, area, excursion = points[index]
        lines.append(f"{number(time, 3):>7}  {number(area, 0):>9}  {number(excursion, 0):>7}")
    return lines


def why_not_lines(why_not: WhyNot) -> list[str]:
    """Why nothing gets through, in sentences."""
    if why_not.limb is None:
        what = f"No way up: it stops at step {why_not.step}."
    else:
        hold = why_not.hold
        if hold is None:
            where = "with no hold in reach"
        elif hold in CONTACT_NAMES.values():
            where = f"on {hold}"
        else:
            where = f"on hold {printable(hold, HOLD_WIDTH)}"
        what = f"No way up: it stops at step {why_not.step}, {why_not.limb} {where}."
    missing = []
    if why_not.missing_mm is not None:
        missing.append(f"{number(why_not.missing_mm, 0)} mm of reach")
    if why_not.missing_bw is not None:
        missing.append(f"{number(why_not.missing_bw, 2)} body weights of force")
    lines = [what]
    if missing:
        lines.append(f"Missing there: {' and '.join(missing)}.")
    if why_not.change:
        lines.append(f"Least change that frees it: {printable(why_not.change, 400)}")
    return [part for line in lines for part in _folded(line, "  ")]


def bullet(text: str) -> list[str]:
    return _folded(f"- {printable(text, 400)}", "  ")


def _folded(line: str, indent: str) -> list[str]:
    """``line`` broken at blanks to the width of the table; its own first indent stays."""
    lead = line[: len(line) - len(line.lstrip())]
    # Wide letters take two columns, which textwrap does not know: give it half the room then.
    width = WIDTH if text_width(line) <= len(line) else WIDTH // 2
    return textwrap.wrap(
        line.strip(), width, initial_indent=lead, subsequent_indent=indent, break_on_hyphens=False
    ) or [""]
