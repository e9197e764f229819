from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given, settings

from climbpath.errors import DataError
from climbpath.wall import Wall, mirror, parse_wall
from climbpath.wall.table import TableFrame, format_table, parse_start, parse_table
from tests.wall.samples import SMALL, walls

FRAME = TableFrame(
    "t", 2000.0, 3000.0, 10.0, starts=(parse_start("LH=a,RH=a|b,RF=floor|free"),), finish=("b",)
)


def problems(text: str, frame: TableFrame = FRAME) -> dict[str, str]:
    with pytest.raises(DataError) as caught:
        parse_table(text, frame, "t.csv")
    return {one.key: f"{one.found} | {one.expected}" for one in caught.value.problems}


@pytest.mark.parametrize(
    "text",
    [
        "id,x,y,use,hands\na,700.5,1500,both,1\nb,1100,1750,hand,\n",
        "id;x;y;use;hands\na;700,5;1500;both;1\nb;1100,0;1750;hand;\n",
        "id\tx\ty\tuse\thands\na\t700,5\t1500\tboth\t1\nb\t1100\t1750\thand\t\n",
        '# by hand\n\n"ID", X ,y,use,hands\r\n"a", 700.5,1500,both,1\r\nb,1100,1.75e3,hand,\r\n',
    ],
    ids=["comma", "semicolon", "tab", "loose"],
)
def test_separators_and_decimal_commas(text: str) -> None:
    wall = parse_table(text, FRAME)
    assert [(h.id, h.x, h.y, h.use, h.hands) for h in wall.holds] == [
        ("a", 0.7005, 1.5, "both", 1), ("b", 1.1, 1.75, "hand", 2),
    ]  # fmt: skip
    assert (wall.width, wall.height, wall.finish) == (2.0, 3.0, ("b",))
    assert wall.starts[0].allowed == (("a",), ("a", "b"), ("floor",), ("floor", "free"))


def test_holes_need_a_grid() -> None:
    text = 'id,hole\na,"3,7"\nb,4.8\n'
    wall = parse_table(text, replace(FRAME, grid=(100.0, 150.0, 200.0)))
    assert [(hold.x, hold.y, hold.hole) for hold in wall.holds] == [
        (0.5, 1.35, "3,7"), (0.7, 1.55, "4,8"),
    ]  # fmt: skip
    assert set(problems(text)) == {'line 2 (hold "a").hole', 'line 3 (hold "b").hole'}


def test_ids_are_text_even_if_they_look_like_numbers() -> None:
    frame = replace(FRAME, starts=(parse_start("LH=1"),), finish=("2,5",))
    wall = parse_table("id;x;y\n1;1;1\n2,5;2;2\n", frame)
    assert [hold.id for hold in wall.holds] == ["1", "2,5"]


def test_pads_are_the_finish_unless_told() -> None:
    wall = parse_table("id,x,y,use\na,1,1,\nb,5,5,\np,9,9,strike\n", replace(FRAME, finish=()))
    assert wall.finish == ("p",)


def test_problems_name_the_line() -> None:
    found = problems(
        "id,x,y,use,suport_deg\na,700,15OO,both,3\n\n# note\nb,1100,1750,hnd,,,7\na,5000,1,,\n"
    )
    assert "'support_deg'" in found["line 1.suport_deg"]
    assert "'15OO'" in found["line 2.y"]
    assert "at most 5" in found["line 5"]
    assert "'hand'" in found['line 5 (hold "b").use']
    assert "0 to 2000" in found["line 6.x"]
    assert "'a'" in found["hold"]


@pytest.mark.parametrize(
    ("text", "key", "said"),
    [
        ("", "", "an empty table"),
        ("# nothing\n", "", "an empty table"),
        ("x,y\n1,2\n", "line 1", "no column id"),
        ("id,x,y,x\na,1,2,3\n", "line 1", "twice"),
        ("id,x,y\n", "hold", "no hold"),
        ("id,x,y,\na,1,2,3\n", "line 2", "without name"),
        ('id,x,y\n"a,1,2\n', "line 2", "cells of a table"),
        ("id,x,y\na,1.5.2,2\n", 'line 2 (hold "a").x', "a number"),
        ("id,x,y\na,nan,2\n", 'line 2 (hold "a").x', "a number"),
    ],
)
def test_broken_tables(text: str, key: str, said: str) -> None:
    assert said in problems(text)[key]


@pytest.mark.parametrize("text", ["", "LH", "LH=", "XX=1", "LH=1,,RH=2", "LH=1|,RH=2"])
def test_broken_starts(text: str) -> None:
    with pytest.raises(DataError, match="LH=ID"):
        parse_start(text)


@settings(derandomize=True, max_examples=40, deadline=None)
@given(walls())
def test_holds_survive_a_table(wall: Wall) -> None:
    bare = replace(wall, holds=tuple(replace(h, lane=None, hole=None) for h in wall.holds))
    per_m = {"mm": 1000.0, "cm": 100.0, "m": 1.0}[wall.unit]
    first, second = wall.holds[0].id, wall.holds[1].id
    frame = TableFrame(
        "t", wall.width * per_m, wall.height * per_m, 0.0, wall.unit,
        starts=({"LH": [first], "RH": [second], "LF": ["floor"], "RF": ["floor"]},),
        finish=(first,),
    )  # fmt: skip
    for separator in (",", ";", "\t"):
        again = parse_table(format_table(bare, separator), frame)
        assert again.holds == bare.holds


def test_a_mirrored_table_is_the_table_of_the_mirror() -> None:
    wall = parse_wall(SMALL)
    text = format_table(mirror(wall))
    assert text.splitlines()[:2] == ["id,x,y,use,outline", '"1",1300,1500,"both",""']
