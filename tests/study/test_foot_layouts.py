"""Random foot holds: where they may stand, and that a seed is a layout."""

from __future__ import annotations

from dataclasses import replace
from math import hypot

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climbpath.errors import UsageError
from climbpath.study.foot_layouts import with_random_feet
from climbpath.study.published_lane import published_lane
from climbpath.wall import Grid, format_wall, parse_wall
from tests.walls_made import small_wall

LANE = published_lane()


@settings(derandomize=True, max_examples=40, deadline=None)
@given(st.integers(0, 2**32), st.integers(1, 24))
def test_one_in_each_band_on_the_grid_near_the_line_and_apart(seed: int, number: int) -> None:
    wall = with_random_feet(LANE, seed, number)
    feet = wall.holds[len(LANE.holds):]
    assert wall.holds[: len(LANE.holds)] == LANE.holds
    assert [hold.id for hold in feet] == [f"f{k}" for k in range(1, number + 1)]
    band = (13.0 - 0.4) / number
    for k, hold in enumerate(feet):
        assert hold.use == "foot"
        assert 0.4 + k * band <= hold.y < 0.4 + (k + 1) * band + 1e-9
        assert abs(hold.x - 1.5) <= 1.1 + 1e-9
        assert LANE.grid is not None
        assert LANE.grid.hole_at(hold.x, hold.y) == hold.hole
        others = [other for other in wall.holds if other is not hold]
        # Holes are 125 mm apart: the next one that is free is a diagonal away.
        assert min(hypot(hold.x - o.x, hold.y - o.y) for o in others) > 0.125 + 1e-6


def test_a_seed_is_a_layout_and_the_wall_can_be_written() -> None:
    one = with_random_feet(LANE, (3, 1))
    assert one == with_random_feet(LANE, (3, 1))
    assert one.holds != with_random_feet(LANE, (3, 2)).holds
    assert len(one.holds) == 21 + 11
    assert parse_wall(format_wall(one)) == one


def test_columns_are_about_uniform() -> None:
    xs = [hold.x for seed in range(200) for hold in with_random_feet(LANE, seed).holds
          if hold.use == "foot"]
    # 2,200 draws: a half has a standard error of 1.1 %, and hand holds take some of the holes.
    assert sum(x < 1.5 for x in xs) / len(xs) == pytest.approx(0.5, abs=0.05)
    assert min(xs) <= 0.5
    assert max(xs) >= 2.5


def test_a_free_foot_may_start_on_a_new_hold_below_the_start_hands() -> None:
    wall = with_random_feet(LANE, 0)
    low = {hold.id for hold in wall.holds if hold.use == "foot" and hold.y < 1.6875}
    assert low
    for before, after in zip(LANE.starts, wall.starts, strict=True):
        for limb in range(4):
            more = set(after.allowed[limb]) - set(before.allowed[limb])
            assert more == (low if limb >= 2 and "free" in before.allowed[limb] else set())


def test_walls_that_cannot_have_them() -> None:
    with pytest.raises(UsageError, match="hole grid"):
        with_random_feet(small_wall(), 0)
    with pytest.raises(UsageError, match="at least 1"):
        with_random_feet(LANE, 0, 0)
    with pytest.raises(UsageError, match="f1, f2"):
        with_random_feet(with_random_feet(LANE, 0, 2), 1)
    coarse = replace(LANE, grid=Grid(0.1, 0.1, 5.0))
    with pytest.raises(UsageError, match="no free hole"):
        with_random_feet(coarse, 0)
