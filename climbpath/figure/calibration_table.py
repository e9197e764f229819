"""A calibration as a plain-text table for the terminal, at most 100 columns wide."""

from __future__ import annotations

from collections.abc import Sequence

from climbpath.figure.names import padded, printable
from climbpath.figure.table import bullet, number
from climbpath.study.calibrate import Calibration
from climbpath.study.prediction_errors import Errors

RUN_WIDTH = 24
LABEL_WIDTH = 36


def calibration_table(result: Calibration) -> str:
    """What was fitted, how well it predicts, each run, and what the runs leave open."""
    splits = sum(run.splits for run in result.runs)
    blocks = [
        [
            f"{printable(result.wall_name, 55)} · {printable(result.athlete_name, 40)}",
            f"{_counted(len(result.runs), 'run')}, {_counted(splits, 'split')}",
        ],
        _parameter_lines(result),
        _error_lines(result.errors, splits),
        _run_lines(result),
    ]
    reasons = [f"{run or 'the run'}: {reason}" for run, reason in result.left_out]
    for heading, texts in (
        ("Left out", reasons),
        ("What the runs leave open", result.open_questions),
        ("Cautions", result.cautions),
    ):
        if texts:
            blocks.append([heading, *(line for text in texts for line in bullet(text))])
    return "\n\n".join("\n".join(line.rstrip() for line in lines) for lines in blocks) + "\n"


def _counted(count: int, noun: str) -> str:
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def _parameter_lines(result: Calibration) -> list[str]:
    lines = [_row("capacity", 18, "default", "fitted", "80 % interval", "", "runs say")]
    for one in result.parameters:
        low, high = one.interval
        told = f"{one.told}, at a bound" if one.at_bound else one.told
        lines.append(_row(one.key, 18, number(one.default, 3), number(one.value, 3),
                          f"{number(low, 3)} to {number(high, 3)}", "", told))
    return lines


def _row(name: str, width: int, *values: str) -> str:
    widths = (9, 9, 17, 1)
    cells = [f"{value:>{w}}" for value, w in zip(values[:-1], widths, strict=False)]
    return f"{padded(name, width)}{' '.join(cells)} {values[-1]}"


def _error_lines(errors: Errors, splits: int) -> list[str]:
    lines = [
        _labelled("Error of a split (root mean square)", "s"),
        _labelled("fit, on the runs it was made from", number(errors.in_sample, 3)),
        _labelled("fit to the other runs", number(errors.left_out, 3)),
        _labelled("default capacities", number(errors.default, 3)),
    ]
    line = _labelled("mean of the other runs", number(errors.others, 3))
    if errors.others is not None and errors.others_count < splits:
        there = f"the fit to the others there {number(errors.left_out_there, 3)}"
        line += f"  on {_counted(errors.others_count, 'split')}; {there}"
    return [*lines, line]


def _labelled(label: str, value: str) -> str:
    return f"{padded(label, LABEL_WIDTH)}{value:>7}"


def _run_lines(result: Calibration) -> list[str]:
    def row(name: str, values: Sequence[str]) -> str:
        cells = (f"{value:>12}" for value in values)
        return f"{padded(name, RUN_WIDTH)}{''.join(cells)}"

    lines = [row("run", ("splits", "error s", "left out s", "last s", "fitted s"))]
    for run in result.runs:
        lines.append(row(printable(run.run, RUN_WIDTH - 2) or "(one run)", (
            str(run.splits), number(run.rms_s, 3), number(run.left_out_rms_s, 3),
            number(run.last_s, 3), number(run.last_predicted_s, 3),
        )))
    return lines
