"""The package's tables of the published lane and of observed runs."""

from __future__ import annotations

from pathlib import Path

import pytest

from climbpath.errors import UsageError
from climbpath.study.observed import CONTESTED, observed_runs, pooled
from climbpath.study.published_lane import HAND_HOLDS, published_lane
from climbpath.wall import read_wall

WALL_FILE = Path(__file__).parents[2] / "walls" / "published_lane.toml"


def test_the_lane_of_the_package_is_the_wall_that_ships() -> None:
    assert published_lane() == read_wall(WALL_FILE)


def test_the_hand_holds_stand_in_holes_of_the_grid_from_the_bottom_up() -> None:
    lane = published_lane()
    assert lane.grid is not None
    assert all(lane.grid.hole_at(hold.x, hold.y) for hold in lane.holds)
    assert [hold.id for hold in sorted(lane.holds, key=lambda h: h.y)] == [*HAND_HOLDS, "pad"]


def test_every_row_is_of_its_runs() -> None:
    rows = observed_runs()
    assert [(row.year, row.sex, row.runs) for row in rows] == [
        (2012, "male", 14), (2012, "female", 13), (2014, "male", 16), (2014, "female", 15),
        (2016, "male", 13), (2016, "female", 13),
    ]  # fmt: skip
    assert all(0 <= count <= row.runs for row in rows for count in row.touched)
    assert all(len(row.touched) == 20 for row in rows)


def test_pooled_shares_and_times_are_weighted_by_runs() -> None:
    men, women = pooled("male"), pooled("female")
    assert (men.runs, women.runs) == (43, 41)
    share = dict(zip(HAND_HOLDS, men.use_share, strict=True))
    # Counts of the three years added by hand.
    assert share["2"] == pytest.approx((10 + 14 + 12) / 43)
    assert share["5"] == pytest.approx((11 + 12 + 10) / 43)
    assert share["14"] == pytest.approx((13 + 13 + 11) / 43)
    assert share["15"] == pytest.approx((5 + 4 + 3) / 43)
    assert share["16"] == pytest.approx((13 + 14 + 12) / 43)
    assert share["4"] == 1.0
    assert share["17"] == 0.0
    other = dict(zip(HAND_HOLDS, women.use_share, strict=True))
    assert other["2"] == pytest.approx((11 + 10 + 6) / 41)
    assert other["9"] == pytest.approx(3 / 41)
    assert men.mean_of_medians_s == pytest.approx((14 * 7.195 + 16 * 6.625 + 13 * 6.340) / 43)
    assert women.mean_of_medians_s == pytest.approx((13 * 9.76 + 15 * 8.7 + 13 * 9.08) / 41)


def test_years_can_be_left_out() -> None:
    late = pooled("male", [2014, 2016])
    assert late.years == (2014, 2016)
    assert late.runs == 29
    assert late.use_share[1] == pytest.approx(26 / 29)
    with pytest.raises(UsageError, match="male 2012"):
        pooled("male", [1999])


def test_contested_holds_are_those_that_men_use_now_and_then() -> None:
    men = pooled("male")
    mixed = [hold for hold, share in zip(HAND_HOLDS, men.use_share, strict=True) if 0 < share < 1]
    assert tuple(mixed) == CONTESTED
