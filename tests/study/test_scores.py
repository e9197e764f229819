"""Scores by hand, and what the rivals come out as on the observed runs."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climbpath.errors import UsageError
from climbpath.study.conclusions import CONTESTED_PLACES
from climbpath.study.observed import pooled
from climbpath.study.published_lane import HAND_HOLDS, published_lane
from climbpath.study.scores import (
    all_but_least_used,
    brier,
    correlation,
    errors,
    every_hold,
    excess,
    nearness_to_middle,
    on_right_side,
    scores,
)


def test_scores_by_hand() -> None:
    predicted, observed = [1.0, 0.5, 0.0, 0.75], [1.0, 0.75, 0.25, 0.5]
    # Errors 0, -1/4, -1/4, 1/4; their squares mean 3/64; q (1 - q): 0, 3/16, 3/16, 1/4, mean 5/32.
    assert errors(predicted, observed).tolist() == [0.0, -0.25, -0.25, 0.25]
    assert excess(predicted, observed) == pytest.approx(3 / 64)
    assert brier(predicted, observed) == pytest.approx(3 / 64 + 5 / 32)
    # One half is on neither side: the second prediction and the fourth observation.
    assert on_right_side(predicted, observed).tolist() == [True, False, True, False]
    # Deviations 7/16, -1/16, -9/16, 3/16 and 3/8, 1/8, -3/8, -1/8:
    # products 24/64 - 1/128 ... = (21 - 1 + 27 - 3) / 128; squares 140/256 and 20/64.
    assert correlation(predicted, observed) == pytest.approx(
        (44 / 128) / np.sqrt(140 / 256 * 20 / 64)
    )
    both = scores("x", predicted, observed, (1, 3))
    assert (both.right_side, both.holds) == (2, 4)
    assert both.excess_contested == pytest.approx(1 / 16)
    assert both.brier_contested == pytest.approx(1 / 16 + (3 / 16 + 1 / 4) / 2)


@settings(derandomize=True, max_examples=50, deadline=None)
@given(st.lists(st.tuples(st.floats(0, 1), st.integers(0, 9)), min_size=1, max_size=8))
def test_brier_is_the_mean_over_single_runs(pairs: list[tuple[float, int]]) -> None:
    runs = 9
    direct = [
        (p - outcome) ** 2
        for p, used in pairs for outcome in [1.0] * used + [0.0] * (runs - used)
    ]
    predicted = [p for p, _ in pairs]
    observed = [used / runs for _, used in pairs]
    assert brier(predicted, observed) == pytest.approx(np.mean(direct), abs=1e-12)


def test_what_does_not_vary_has_no_correlation() -> None:
    assert correlation([1.0, 1.0], [0.0, 1.0]) is None
    assert correlation([0.0, 1.0], [0.5, 0.5]) is None
    assert correlation([0.0, 1.0, 2.0], [1.0, 0.5, 0.0]) == pytest.approx(-1.0)


def test_lists_of_other_lengths_are_refused() -> None:
    with pytest.raises(UsageError):
        brier([0.5], [0.5, 0.5])
    with pytest.raises(UsageError):
        excess([], [])


@pytest.mark.parametrize("sex", ["male", "female"])
def test_rivals_on_the_observed_runs(sex: str) -> None:
    seen = pooled(sex).use_share
    # Holds 9, 15 and 17 are used by fewer than half of the runs of either sex.
    assert scores("", every_hold(20), seen, CONTESTED_PLACES).right_side == 17
    skipped = all_but_least_used(seen)
    assert [hold for hold, use in zip(HAND_HOLDS, skipped, strict=True) if use == 0.0] == [
        "9", "15", "17"
    ]  # fmt: skip
    assert scores("", skipped, seen, CONTESTED_PLACES).right_side == 20


def test_nearness_to_the_middle() -> None:
    assert nearness_to_middle([1.5, 0.5, 3.5], 1.5).tolist() == [1.0, 0.5, 0.0]
    assert nearness_to_middle([1.5, 1.5], 1.5).tolist() == [1.0, 1.0]
    lane = published_lane()
    near = nearness_to_middle([lane.hold(hold).x for hold in HAND_HOLDS], lane.line_x)
    # Hold 17 at x = 375 mm is the outermost, 1125 mm from the middle; hold 4 is 625 mm off.
    assert near[16] == 0.0
    assert near[3] == pytest.approx(1.0 - 625 / 1125)
