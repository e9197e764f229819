"""Calibration against invented times: what is fitted, what is left out, what is said."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import jsonschema
import numpy as np
import pytest

import climbpath.study.calibrate as calibrate_module
from climbpath.body import Athlete, format_athlete, make_athlete, parse_athlete
from climbpath.errors import DataError, UsageError
from climbpath.figure.calibration_table import calibration_table
from climbpath.motion.capacity import capacities_of
from climbpath.study.calibrate import (
    MODEL_CAUTION,
    PARAMETERS,
    CalibrateRequest,
    Calibration,
    calibrate,
    capacity_table,
    defaults_of,
)
from climbpath.study.calibration_document import calibration_document
from climbpath.study.cautions import CAUTIONS
from climbpath.study.document import dump_json
from climbpath.study.sequence import Placement, Sequence, parse_sequences
from climbpath.study.splits import TOTAL, splits_of
from tests.schemas import CALIBRATE_SCHEMA
from tests.study.invented_times import (
    HOLDS,
    TOO_HARD,
    InventedTimes,
    format_runs,
    ladder,
    timed,
    untimed_run,
)

WALL = ladder()
KEYS = [p.key for p in PARAMETERS]
FIGURES = {
    "hand_pull_bw": 0.525, "hand_press_bw": 0.2625, "foot_push_bw": 1.62, "hand_speed_m_s": 6.5,
    "foot_speed_m_s": 6.5, "reach_speed_m_s": 5.0, "settle_s": 0.06, "reaction_s": 0.20,
}  # fmt: skip
"""Round defaults of a woman in place of the shipped ones, which a new fit may change."""


@pytest.fixture(autouse=True, scope="module")
def _figures() -> Iterator[None]:
    shipped = calibrate_module.capacity_defaults
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(calibrate_module, "capacity_defaults",
                      lambda sex: {**shipped(sex), **FIGURES})
        yield


TRUTH = {"hand_pull_bw": 0.62, "foot_push_bw": 1.9, "hand_speed_m_s": 5.5, "reach_speed_m_s": 6.5,
         "settle_s": 0.09, "reaction_s": 0.26}
QUICK = CalibrateRequest(draws=60)
ERROR = 0.02
PULL_OR_PUSH = "The runs cannot tell the pull of the hands from the push of the feet."


@pytest.fixture(autouse=True)
def _follow(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("climbpath.study.calibrate.follower", InventedTimes)


def athlete(**capacity: float) -> Athlete:
    return make_athlete(sex="female", stature=1.66, mass=56.0, name="Sample", capacity=capacity)


def runs(count: int = 8, error: float = ERROR) -> list[Sequence]:
    """Runs that leave out different holds."""
    return [timed(WALL, untimed_run(f"run {k}", skip=3 + k % 4), TRUTH, error, seed=k)
            for k in range(count)]


@pytest.fixture(scope="module")
def result() -> Calibration:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("climbpath.study.calibrate.follower", InventedTimes)
        return calibrate(WALL, athlete(), runs(), QUICK)


def fitted(result: Calibration) -> dict[str, float]:
    return {one.key: one.value for one in result.parameters}


def problems_of(sequences: list[Sequence]) -> list[str]:
    with pytest.raises(DataError) as caught:
        calibrate(WALL, athlete(), sequences, replace(QUICK, file="runs.csv"))
    return [str(problem) for problem in caught.value.problems]


def test_what_the_runs_tell_is_found(result: Calibration) -> None:
    assert [one.key for one in result.parameters] == KEYS
    values = fitted(result)
    assert values["reaction_s"] == pytest.approx(TRUTH["reaction_s"], abs=0.03)
    # Pull and push only act together in the stand-in: half of each one's excess.
    strength = 0.5 * (values["hand_pull_bw"] / 0.525 + values["foot_push_bw"] / 1.62)
    assert strength == pytest.approx(0.5 * (0.62 / 0.525 + 1.9 / 1.62), rel=0.2)
    assert PULL_OR_PUSH in result.open_questions
    # Moves are off by 20 ms and add up over a dozen: the mean of k squares, k = 1 … 12.
    assert result.errors.in_sample < ERROR * np.sqrt(6.5)
    assert result.errors.left_out is not None
    assert result.errors.in_sample < result.errors.left_out < result.errors.default
    assert result.converged
    assert result.resampled
    assert [run.run for run in result.runs] == [f"run {k}" for k in range(8)]
    assert result.left_out == ()
    for one in result.parameters:
        low, high = one.interval
        assert low < one.value < high


def test_pull_and_push_cannot_be_told_apart_where_moves_are_exact() -> None:
    found = calibrate(WALL, athlete(), runs(10, error=1e-4), QUICK)
    assert PULL_OR_PUSH in found.open_questions
    assert fitted(found)["reaction_s"] == pytest.approx(TRUTH["reaction_s"], abs=0.01)


def test_the_capacity_table_is_whole_and_readable(result: Calibration) -> None:
    table = result.athlete.capacity
    values = fitted(result)
    # Defaults of women: a press of half the pull; one speed for hands and feet.
    assert table["hand_press_bw"] == pytest.approx(values["hand_pull_bw"] / 2.0, abs=1e-4)
    assert table["foot_speed_m_s"] == table["hand_speed_m_s"] == values["hand_speed_m_s"]
    again = parse_athlete(format_athlete(result.athlete))
    assert again.capacity == table
    capacities = capacities_of(again)
    assert capacities.hand_pull == pytest.approx([values["hand_pull_bw"]] * 2)
    assert set(KEYS) < set(table)


def test_sides_keep_their_proportion_and_other_keys_stay() -> None:
    one = athlete(hand_pull_left_bw=0.6, hand_pull_right_bw=0.4, foot_push_left_bw=1.0,
                  fade_share=0.2, hand_pull_bw=9.0)
    table = capacity_table(one, defaults_of("female"))
    # About their mean, .5: 1.2 and .8 times the default of .525.
    assert table["hand_pull_left_bw"] == pytest.approx(0.63)
    assert table["hand_pull_right_bw"] == pytest.approx(0.42)
    # A missing side has the athlete's value for both, here the default: 1 and 1.62 about 1.31.
    assert table["foot_push_left_bw"] == pytest.approx(1.62 / 1.31, abs=1e-4)
    assert table["foot_push_right_bw"] == pytest.approx(1.62**2 / 1.31, abs=1e-4)
    assert table["fade_share"] == 0.2
    assert "hand_press_left_bw" not in table


def test_fitting_again_does_not_count_the_runs_twice(result: Calibration) -> None:
    again = calibrate(WALL, result.athlete, runs(), QUICK)
    assert again.parameters == result.parameters
    assert any("were not used" in text for text in again.cautions)


def test_totals_alone_will_do_and_tell_less(result: Calibration) -> None:
    totals = [timed(WALL, untimed_run(f"run {k}", skip=3 + k % 4), TRUTH, ERROR, seed=k,
                    total_only=True) for k in range(8)]
    found = calibrate(WALL, athlete(), totals, QUICK)
    assert sum(run.splits for run in found.runs) == 8
    shares = [[one.prior_share for one in each.parameters] for each in (found, result)]
    assert (np.array(shares[0]) > np.array(shares[1])).all()
    for run, total in zip(found.runs, totals, strict=True):
        assert run.last_s == total.total_s
        assert run.last_predicted_s == pytest.approx(run.last_s, rel=0.05)


def test_which_times_count() -> None:
    (run,) = parse_sequences(
        "step,limb,hold,contact_s\n0,LH,0,0\n0,RH,1,0\n1,RH,2,1.2\n1,LH,3,1.1\n2,LF,1,1.3\n"
        "2,LH,free,1.35\n3,LH,2,1.5\n4,RH,2,\n5,LH,2,2.0\n5,total,,9.0\n"
    )
    # Not the start, no feet, nothing that lets go; those of one step by time; touches are counted.
    assert [(s.step, s.limb, s.hold, s.touch, s.time) for s in splits_of(run, ("pad",))] == [
        (1, "LH", "3", 0, 1.1), (1, "RH", "2", 0, 1.2), (3, "LH", "2", 0, 1.5),
        (5, "LH", "2", 1, 2.0), (5, TOTAL, "", 0, 9.0),
    ]
    # The pad was timed: the total is the same time once more.
    assert [s.limb for s in splits_of(run, ("2",))][-1] == "LH"


def test_slips_and_runs_without_times_are_left_out() -> None:
    more = [
        replace(runs(1)[0], run="a", note="Slipped at 7"),
        replace(runs(1)[0], run="b", note="fell"),
        untimed_run("c"),
        timed(WALL, untimed_run(TOO_HARD), TRUTH),
    ]
    found = calibrate(WALL, athlete(), [*more, *runs(5)], QUICK)
    assert [name for name, _ in found.left_out] == ["a", "b", "c", TOO_HARD]
    assert [run.run for run in found.runs] == [f"run {k}" for k in range(5)]
    # They change nothing.
    assert found.parameters == calibrate(WALL, athlete(), runs(5), QUICK).parameters


def test_everything_wrong_with_the_runs_is_said_at_once() -> None:
    (run,) = runs(1)
    step = (Placement("LH", "99", 0.2),)
    wrong = replace(run, run="x", steps=(*run.steps, step))
    assert problems_of([wrong, replace(wrong, run="y")]) == [
        text for name in ("x", "y") for text in (
            f"runs.csv: run '{name}' hold: expected a hold of the wall or of its lane, found '99'",
            f"runs.csv: run '{name}' step {len(run.steps)} LH: expected a time not before the "
            f"{run.steps[-1][0].contact_s:g} s of step {len(run.steps) - 1}, found 0.2 s",
        )
    ]
    only = replace(untimed_run("x"), total_s=6.0)
    assert problems_of([only]) == [
        "runs.csv: contact_s: expected at least 2 times of hands or totals in runs that can be "
        "used, found 1"
    ]
    with pytest.raises(UsageError, match="draws"):
        calibrate(WALL, athlete(), runs(), CalibrateRequest(draws=0))
    with pytest.raises(DataError, match="hand_pul_bw"):
        calibrate(WALL, athlete(hand_pul_bw=1.0), runs(), QUICK)


def test_cautions_say_what_must_be_known() -> None:
    few = calibrate(WALL, replace(athlete(), birth_year=2012), runs(2), QUICK, this_year=2025)
    assert few.cautions[-len(CAUTIONS):] == CAUTIONS
    assert MODEL_CAUTION in few.cautions
    assert "born in 2012" in few.cautions[0]
    assert any("fewer than 5 runs (2 here)" in text for text in few.cautions)
    assert not few.resampled
    # The same run again and again, with all the noise there: nothing beats the mean of the others.
    slow = {**TRUTH, "reaction_s": 0.9}
    same = [timed(WALL, untimed_run(f"run {k}"), slow, 1e-4, seed=k) for k in range(12)]
    beaten = calibrate(WALL, athlete(), same, QUICK)
    assert any("mean of the other runs predicts" in text for text in beaten.cautions)
    assert any("reaction_s at a bound" in text for text in beaten.cautions)


def test_the_document_fits_its_schema_and_comes_out_the_same_again(result: Calibration) -> None:
    jsonschema.Draft202012Validator.check_schema(CALIBRATE_SCHEMA)
    for one in (result, calibrate(WALL, athlete(), runs(1), QUICK)):
        document: dict[str, Any] = json.loads(dump_json(calibration_document(one)))
        jsonschema.validate(document, CALIBRATE_SCHEMA)
        assert [p["parameter"] for p in document["parameters"]] == KEYS
        assert len(document["correlations"]) == 15  # pairs of six
    assert document["errors"]["left_out_rms_s"] is None
    again = calibrate(WALL, athlete(), runs(), QUICK)
    assert calibration_document(again) == calibration_document(result)


def test_the_table_says_it_within_its_width(result: Calibration) -> None:
    named = replace(result, wall_name="墙" * 80, athlete_name="a\x1b[31m" * 40,
                    left_out=(("r\n" * 50, "it has no times"),))
    for one in (result, named):
        lines = calibration_table(one).splitlines()
        assert max(map(len, lines)) <= 100
        assert not any(sign in line for line in lines for sign in "\x1b\r")
    text = calibration_table(result)
    for key in KEYS:
        assert f"\n{key} " in text
    assert f"8 runs, {8 * (HOLDS - 2)} splits" in text
    assert "mean of the other runs" in text
    assert MODEL_CAUTION[:40] in text


def test_runs_can_be_written_and_read_as_a_table() -> None:
    made = runs(2)
    read = parse_sequences(format_runs(made))
    for one, other in zip(made, read, strict=True):
        times = [split.time for split in splits_of(one, WALL.finish)]
        assert [split.time for split in splits_of(other, WALL.finish)] == pytest.approx(
            times, abs=5e-4)
