from __future__ import annotations

import math
import tomllib
from itertools import pairwise
from pathlib import Path

import pytest
from hypothesis import given, settings

from climbpath.errors import DataError
from climbpath.wall import Wall, format_wall, parse_wall, read_wall, write_wall
from tests.wall.samples import SMALL, walls

ROOT = Path(__file__).parents[2]


def problems(text: str) -> dict[str, str]:
    """The problems of a wall file, what was found and expected by key."""
    with pytest.raises(DataError) as caught:
        parse_wall(text, "w.toml")
    assert all(problem.file == "w.toml" for problem in caught.value.problems)
    return {one.key: f"{one.found} | {one.expected}" for one in caught.value.problems}


def changed(old: str, new: str) -> str:
    assert old in SMALL
    return SMALL.replace(old, new, 1)


def test_small_wall_is_read_in_metres_and_radians() -> None:
    wall = parse_wall(SMALL)
    assert (wall.width, wall.height, wall.line_x, wall.floor_y) == (2.0, 3.0, 1.0, 0.0)
    assert wall.sections[0].overhang == math.radians(10)
    first = wall.hold("1")
    assert (first.x, first.y, first.use, first.hands) == (0.7, 1.5, "both", 2)
    assert (first.support, first.support_in) == (math.pi / 2, math.radians(15))
    assert wall.hold("2").x == 1.1  # x0 + 5 pitches
    assert wall.hold("2").y == 1.75
    assert wall.starts[0].allowed[1] == ("1", "2")


@pytest.mark.parametrize(("unit", "factor"), [("cm", 0.1), ("m", 0.001)])
def test_the_unit_of_the_file_changes_nothing(unit: str, factor: float) -> None:
    lines = []
    for line in SMALL.splitlines():
        key, equals, value = line.partition(" = ")
        if key in ("width", "height", "x0", "y0", "pitch", "x", "y"):
            line = f"{key}{equals}{float(value) * factor!r}"
        elif key == "outline":
            points = tomllib.loads(line)["outline"]
            line = f"outline = {[[x * factor, y * factor] for x, y in points]}"
        lines.append(line)
    wall = parse_wall(f'unit = "{unit}"\n' + "\n".join(lines))
    assert wall.holds == parse_wall(SMALL).holds
    assert (wall.sections, wall.grid) == (parse_wall(SMALL).sections, parse_wall(SMALL).grid)


def test_coordinates_are_rounded_to_the_micrometre() -> None:
    assert parse_wall(changed("x = 700", "x = 700.00049")).hold("1").x == 0.7
    assert parse_wall(changed("x = 700", "x = 700.0006")).hold("1").x == 0.700001


def test_line_fit_is_the_mean_of_the_hand_holds() -> None:
    wall = parse_wall('line_x = "fit"' + SMALL)
    assert wall.line_x == 0.9  # holds 1 and 2 at 0.7 and 1.1 m
    assert wall.line_is_fit
    assert tomllib.loads(format_wall(wall))["line_x"] == "fit"


@settings(derandomize=True, max_examples=80, deadline=None)
@given(walls())
def test_reading_what_was_written_gives_the_same_wall(wall: Wall) -> None:
    text = format_wall(wall)
    assert parse_wall(text) == wall
    assert format_wall(parse_wall(text)) == text


def test_a_hold_moved_off_its_hole_is_written_by_position(tmp_path: Path) -> None:
    wall = parse_wall(SMALL)
    write_wall(wall, tmp_path / "a.toml")
    assert read_wall(tmp_path / "a.toml") == wall
    assert '"6,9"' in (tmp_path / "a.toml").read_text()
    moved = parse_wall(changed('hole = "6,9"', "x = 1111\ny = 1750"))
    assert '"6,9"' not in format_wall(moved)


@pytest.mark.parametrize(
    ("old", "new", "key", "said"),
    [
        ('name = "Small"', 'nam = "Small"', "nam", "did you mean 'name'?"),
        ('name = "Small"', 'name = ""', "name", "an empty text"),
        ('name = "Small"', f'name = "{"n" * 101}"', "name", "at most 100"),
        ('name = "Small"', 'name = "a\\u001b[31m"', "name", "without control characters"),
        ('name = "Small"', 'name = "a\\u202Eb"', "name", "without control characters"),
        ('schema = "climbpath/wall/1"', "", "schema", "nothing"),
        ("wall/1", "wall/2", "schema", '"climbpath/wall/1"'),
        ("width = 2000", "width = true", "width", "true | a number"),
        ("width = 2000", "width = nan", "width", "finite"),
        ("width = 2000", "width = -inf", "width", "finite"),
        ("width = 2000", 'width = "2 m"', "width", "a number"),
        ("width = 2000", "width = 2000000", "width", "100000 mm"),
        ("width = 2000", f"width = {10**400}", "width", "finite"),
        ("height = 3000", "height = 0", "section[1].height", "100 to 100000"),
        ("overhang_deg = 10", "overhang_deg = 90", "section[1].overhang_deg", "between -60 and 90"),
        ("overhang_deg = 10", "overhang_deg = -60", "section[1].overhang_deg", "-60"),
        ("overhang_deg = 10", "", "section[1].overhang_deg", "nothing"),
        ("[[section]]\nheight = 3000\noverhang_deg = 10", "", "section", "at least one"),
        ("pitch = 200", "pitch = 0", "grid.pitch", "0"),
        ("x = 700", "x = 2000.5", 'hold "1".x', "0 to 2000 mm"),
        ("y = 1500", "y = -1", 'hold "1".y', "0 to 3000 mm"),
        ("y = 1500", "", 'hold "1".y', "nothing"),
        ("y = 1500", "y = 1500\nsuport_deg = 9", 'hold "1".suport_deg', "'support_deg'"),
        ("y = 1500", 'y = 1500\n"a b" = 9', 'hold "1"', "'a b'"),
        ("y = 1500", "y = 1500\nhands = 3", 'hold "1".hands', "1 or 2"),
        ("y = 1500", "y = 1500\nhands = true", 'hold "1".hands', "1 or 2"),
        ("y = 1500", "y = 1500\nhand_quality = 1.1", 'hold "1".hand_quality', "0 to 1"),
        ("y = 1500", "y = 1500\nrange_deg = 0", 'hold "1".range_deg', "1 to 90"),
        ("y = 1500", "y = 1500\nsupport_in_deg = 91", 'hold "1".support_in_deg', "-90 to 90"),
        ("y = 1500", "y = 1500\ndepth = -1", 'hold "1".depth', "0 to 1000"),
        ("y = 1500", 'y = 1500\nlane = "left"', 'hold "1".lane', "the wall has none"),
        ('use = "foot"', 'use = "foots"', 'hold "f".use', "'foot'"),
        ('id = "1"', 'id = "floor"', 'hold "floor".id', "other than"),
        ('id = "1"', "id = 1", "hold[1].id", "in quotes"),
        ('id = "1"', 'id = "2"', "hold", "2 with the id '2'"),
        ('hole = "6,9"', 'hole = "11,9"', 'hold "2".hole', "that the grid has"),
        ('hole = "6,9"', 'hole = "0,9"', 'hold "2".hole', "that the grid has"),
        ('hole = "6,9"', 'hole = "F9"', 'hold "2".hole', "column,row"),
        ('hole = "6,9"', 'hole = "6,9"\nx = 3', 'hold "2"', "either hole or x and y"),
        ("x = 900\ny = 400.5", "x = 700\ny = 1500", 'hold "f"', "a place of its own"),
        ("[0, 80]]", "[0, nan]]", 'hold "pad".outline[3]', "finite"),
        (", [0, 80]]", "]", 'hold "pad".outline', "3 to 64"),
        ("[100, -50], [0, 80]", "[100, 80], [100, -50], [-100, 80]", 'hold "pad".outline', "cross"),
        ("[-100, -50], [100, -50], [0, 80]", "[0, 0], [1, 1], [2, 2]", 'hold "pad".outline', ""),
        ("[[-100, -50], [100, -50], [0, 80]]", "7", 'hold "pad".outline', "a list of points"),
        ('LF = "floor"', 'LF = "flor"', "start[1].LF", "did you mean 'floor'?"),
        ('LF = "floor"', 'LF = "2"', "start[1].LF", "a hold for feet"),
        ('LF = "floor"', "LF = []", "start[1].LF", "a list of what is allowed"),
        ('LH = "1"', 'LH = "floor"', "start[1].LH", "only feet"),
        ('LH = "1"', 'LH = "f"', "start[1].LH", "a hold for hands"),
        ('LH = "1"', 'LH = "pad"', "start[1].LH", "a hold for hands"),
        ('LH = "1"', "", "start[1].LH", "nothing"),
        ('LH = "1"\nRH = ["1", "2"]', 'LH = "free"\nRH = "free"', "start[1]", "at least one hand"),
        ('holds = ["pad"]', 'holds = ["pat"]', "finish.holds", "did you mean 'pad'?"),
        ('holds = ["pad"]', 'holds = ["f"]', "finish.holds", "a hand can touch"),
        ('holds = ["pad"]', "holds = []", "finish.holds", "a list of hold ids"),
        ('[finish]\nholds = ["pad"]', "", "finish", "no finish"),
    ],
)  # fmt: skip
def test_one_problem_is_found_and_nothing_else(old: str, new: str, key: str, said: str) -> None:
    found = problems(changed(old, new))
    assert said in found[key]
    # Replacing a required key by a misspelt one leaves two: the one missing, and the unknown one.
    if new and key != "nam" and old != 'id = "1"':
        assert list(found) == [key]


def test_the_unit_must_be_known() -> None:
    assert "mm, cm, m" in problems('unit = "inch"' + SMALL)["unit"]


def test_all_problems_are_reported_at_once() -> None:
    text = changed("width = 2000", "width = 2000\nwidht = 3").replace("y = 400.5", "y = nan")
    text = text.replace("overhang_deg = 10", "overhang_deg = 99").replace('"pad"]', '"pat"]')
    assert set(problems(text)) == {
        "widht", "section[1].overhang_deg", 'hold "f".y', "finish.holds",
    }  # fmt: skip


OUTLINED = "y = 1500\noutline = [[0, 0], [{0}, 0], [{0}, 300], [0, 300]]"


@pytest.mark.parametrize(("width", "overlap"), [(300.0, False), (300.5, True)])
def test_outlines_overlap_only_if_they_share_area(width: float, overlap: bool) -> None:
    text = changed("y = 1500", OUTLINED.format(width)).replace(
        'use = "hand"', "outline = [[-100, -100], [100, -100], [100, 100], [-100, 100]]"
    )  # hold 2 at (1100, 1750) begins at x = 1000 = 700 + 300
    if overlap:
        assert 'an overlap with hold "1"' in problems(text)['hold "2".outline']
    else:
        assert len(parse_wall(text).holds) == 4


LANES = """
[[lane]]
id = "left"
x_to = 1000
[[lane.start]]
LH = "1"
RH = "1"
LF = "floor"
RF = "free"
[[lane]]
id = "right"
x_from = 1000
line_x = "fit"
"""


def test_lanes_take_their_own_or_the_walls_start_and_finish() -> None:
    wall = parse_wall(SMALL + LANES)
    left, right = wall.lanes
    assert (left.x_from, left.x_to, left.line_x) == (0.0, 1.0, 0.5)
    assert (right.x_from, right.x_to, right.line_x) == (1.0, 2.0, 1.1)
    assert wall.lane_view("right").starts == wall.starts
    assert parse_wall(format_wall(wall)) == wall


def test_problems_of_lanes() -> None:
    in_left = SMALL.replace('id = "1"', 'id = "1"\nlane = "left"')
    # Hold 1 is in the left lane: the right one cannot begin with it, as the wall's start says.
    assert set(problems(in_left + LANES)) == {"lane[2].start[1].LH", "lane[2].start[1].RH"}
    outside = SMALL.replace('hole = "6,9"', 'hole = "6,9"\nlane = "left"')
    assert 'hold "2".lane' in problems(outside + LANES)
    assert "lane" in problems(SMALL + LANES.replace('"right"', '"left"'))
    assert "lane[1].x_to" in problems(SMALL + LANES.replace("x_to = 1000", "x_to = 0"))


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("width = = 3", "line 1"),
        ("\n\nname = 'a", "line 3"),
        ("a = " + "[" * 100_000, "nested too deep"),
        ("a = " + "1" * 5000, "too many digits"),
    ],
)
def test_what_is_no_toml(text: str, said: str) -> None:
    assert said in problems(text)[""]


def test_sizes_are_bounded() -> None:
    hold = '[[hold]]\nid = "{0}"\nx = {1}\ny = {2}\n'
    many = "".join(hold.format(f"h{i}", i % 2000, 1 + i // 2000) for i in range(2001))
    assert "at most 2000" in problems(SMALL + many)["hold"]
    sections = "[[section]]\nheight = 100\noverhang_deg = 0\n" * 51
    assert "at most 50" in problems(SMALL + sections)["section"]


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    (tmp_path / "latin.toml").write_bytes(b'name = "\xe9"')
    for name in ("absent.toml", "latin.toml", "."):
        with pytest.raises(DataError):
            read_wall(tmp_path / name)


@pytest.mark.parametrize("path", sorted(ROOT.glob("walls/*.toml")), ids=lambda path: path.stem)
def test_walls_of_the_project(path: Path) -> None:
    wall = read_wall(path)
    assert parse_wall(format_wall(wall)) == wall
    assert len(wall.starts) > 1
    # A start is of use only if its lowest holds can be reached from the floor: 1.5 to 2 m up.
    hands = {entry for start in wall.starts for entry in start.allowed[0]}
    assert all(1.3 <= wall.hold(hand).y - wall.floor_y <= 2.2 for hand in hands)


def test_the_invented_lanes_are_climbable_and_differ() -> None:
    swings = {}
    for name in ("kiln_lane", "crane_lane"):
        wall = read_wall(ROOT / "walls" / f"{name}.toml")
        hands = sorted((h for h in wall.holds if h.use == "both"), key=lambda hold: hold.y)
        rises = [b.y - a.y for a, b in pairwise(hands)]
        assert max(rises) <= 0.75
        swings[name] = max(abs(hold.x - wall.line_x) for hold in hands)
    assert swings["crane_lane"] > 1.5 * swings["kiln_lane"]
    chips = [h for h in read_wall(ROOT / "walls/crane_lane.toml").holds if h.use == "foot"]
    assert len(chips) == 11


def test_published_lane_holds_what_was_published() -> None:
    # Positions, see the header of the wall file: supplementary data of Proc. R. Soc. B 2025,
    # doi 10.1098/rspb.2025.1433.
    wall = read_wall(ROOT / "walls/published_lane.toml")
    assert len(wall.holds) == 21
    assert wall.height == 15.0
    assert math.degrees(wall.sections[0].overhang) == pytest.approx(5.0)
    assert wall.floor_y == -0.2
    assert (wall.hold("4").x, wall.hold("4").y) == (0.875, 3.5625)
    assert (wall.hold("20").x, wall.hold("20").y) == (1.375, 13.3125)
    assert (wall.hold("pad").x, wall.hold("pad").y) == (1.625, 14.8125)
    assert wall.grid is not None
    assert all(wall.grid.hole_at(hold.x, hold.y) for hold in wall.holds)
    for start in wall.starts:
        assert ("floor",) in start.allowed[2:]  # at least one foot on the floor
