from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given, settings

from climbpath.wall import Grid, Hold, Lane, Section, Start, Wall, mirror, parse_wall
from climbpath.wall.model import mean_hand_x
from tests.wall.samples import SMALL, walls

# Holes of the published lane: 1500 mm panels with 11 x 10 holes at 125 mm pitch, the first column
# 125 mm and the first row 187.5 mm from the panel's edge (conversion of the positions in the
# supplementary data of Proc. R. Soc. B 2025, doi 10.1098/rspb.2025.1433).
LANE_GRID = Grid(0.125, 0.1875, 0.125, panel=12, panel_columns=11, panel_rows=10)


def test_holes_of_the_published_lane() -> None:
    for right in (0, 1):
        for column in range(1, 12):
            x, _ = LANE_GRID.position(12 * right + column, 1)
            assert x == pytest.approx(1.5 * right + (125 + (column - 1) * 125) / 1000)
    # Hold 1: panel DX2 (right, second from below), column 6, row 1, at (2250, 1687.5) mm.
    assert LANE_GRID.position(12 + 6, 12 + 1) == (2.25, 1.6875)
    assert LANE_GRID.hole_at(2.25, 1.6875) == "18,13"
    # Hold 17: panel SN8, column 3, row 8, at (375, 11562.5) mm.
    assert LANE_GRID.hole_at(0.375, 11.5625) == "3,92"
    assert not LANE_GRID.has_hole(12, 1)  # the joint of two panels
    assert LANE_GRID.hole_at(1.5, 0.1875) is None
    assert LANE_GRID.hole_at(0.2, 0.1875) is None


def test_lane_view_keeps_its_holds_and_those_of_no_lane() -> None:
    start = Start((("a",), ("a",), ("floor",), ("free",)))
    own = Start((("c",), ("free",), ("floor",), ("free",)))
    wall = Wall(
        "w", 4.0, 2.0, 0.0, (Section(3.0, 0.0),),
        (Hold("a", 1, 1), Hold("b", 1, 2, lane="L"), Hold("c", 3, 2, lane="R")),
        (start,), ("a",),
        lanes=(Lane("L", 0, 2, 1.0), Lane("R", 2, 4, 3.0, (own,), ("c",))),
    )  # fmt: skip
    left, right = wall.lane_view("L"), wall.lane_view("R")
    assert [hold.id for hold in left.holds] == ["a", "b"]
    assert (left.line_x, left.starts, left.finish, left.lanes) == (1.0, (start,), ("a",), ())
    assert [hold.id for hold in right.holds] == ["a", "c"]
    assert (right.line_x, right.starts, right.finish) == (3.0, (own,), ("c",))
    with pytest.raises(KeyError):
        wall.lane_view("M")
    with pytest.raises(KeyError):
        wall.hold("z")


def test_mean_hand_x_leaves_feet_and_pads_out() -> None:
    holds = (Hold("a", 1.0, 1), Hold("b", 2.0, 1, "hand"), Hold("f", 9.0, 1, "foot"))
    assert mean_hand_x(holds) == 1.5
    assert mean_hand_x(holds[2:]) is None


def test_mirror_of_the_small_wall() -> None:
    wall = parse_wall(SMALL.replace('use = "hand"', 'use = "hand"\nsupport_deg = 60'))
    turned = mirror(wall)
    assert turned.hold("1").x == 1.3
    # Holes at 100, 300, ... 1900 mm: column 6 (1100 mm) becomes column 5 (900 mm).
    assert (turned.hold("2").x, turned.hold("2").hole) == (0.9, "5,9")
    assert turned.hold("2").support == pytest.approx(2.0943951)  # 180° − 60° = 120°
    assert turned.hold("pad").outline == ((0.0, 0.08), (-0.1, -0.05), (0.1, -0.05))
    assert turned.starts[0].allowed == (
        ("1", "2"), ("1",), ("floor", "free", "smear", "f"), ("floor",),
    )  # fmt: skip


def test_mirrored_panels_keep_their_gaps() -> None:
    wall = replace(parse_wall(SMALL), width=3.0, grid=LANE_GRID)
    assert mirror(wall).grid == LANE_GRID


@settings(derandomize=True, max_examples=60, deadline=None)
@given(walls())
def test_mirroring_twice_changes_nothing(wall: Wall) -> None:
    assert mirror(mirror(wall)) == wall


@settings(derandomize=True, max_examples=60, deadline=None)
@given(walls())
def test_every_hole_stays_a_hole_in_the_mirror(wall: Wall) -> None:
    named = {hold.id for hold in wall.holds if hold.hole is not None}
    assert {hold.id for hold in mirror(wall).holds if hold.hole is not None} == named
