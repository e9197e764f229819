"""Athlete files: reading, every error at once, writing, the growth caution."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climbpath.body import (
    format_athlete,
    growth_caution,
    make_athlete,
    parse_athlete,
    read_athlete,
    write_athlete,
)
from climbpath.errors import DataError, Problem

ATHLETES = Path(__file__).parents[2] / "walls" / "athletes"

FULL = """
schema = "climbpath/athlete/1"
name = "Åsa Prøve"
sex = "female"
stature_mm = 1650
mass_kg = 55.5
birth_year = 2001
mass_table = "dempster"
[measured]
span_mm = 1690.5
sitting_height_mm = 865
standing_reach_mm = 2110
[range]
hip_abduction_deg = 60
[capacity]
hand_pull_bw = 0.9
leg_push_left_bw = 1.5
"""
HEAD = 'schema = "climbpath/athlete/1"\nname = "A"\nsex = "male"\nstature_mm = 1750\nmass_kg = 70\n'


def problems_of(text: str) -> dict[str, Problem]:
    with pytest.raises(DataError) as caught:
        parse_athlete(text, "a.toml")
    assert all(problem.file == "a.toml" for problem in caught.value.problems)
    return {problem.key: problem for problem in caught.value.problems}


def test_a_full_file_is_read() -> None:
    athlete = parse_athlete(FULL)
    assert (athlete.name, athlete.sex, athlete.birth_year) == ("Åsa Prøve", "female", 2001)
    assert athlete.mass == 55.5
    assert athlete.mass_table == "dempster"
    assert athlete.span == pytest.approx(1.6905, abs=1e-12)
    assert athlete.standing_reach == pytest.approx(2.110, abs=1e-12)
    assert athlete.ranges["hip_abduction"] == pytest.approx(1.0471975512)
    assert dict(athlete.capacity) == {"hand_pull_bw": 0.9, "leg_push_left_bw": 1.5}


def test_every_problem_comes_at_once() -> None:
    found = problems_of(
        """
schema = "climbpath/athlete/2"
nam = "A"
sex = "man"
stature_mm = true
mass_kg = inf
birth_year = 2001.5
[measured]
span_mn = 1700
hand_mm = nan
[range]
hip_flexion_deg = "wide"
[capacity]
hand_pull = 1.0
leg_push_bw = -1
"""
    )
    assert set(found) == {
        "schema",
        "nam",
        "name",
        "sex",
        "stature_mm",
        "mass_kg",
        "birth_year",
        "measured.span_mn",
        "measured.hand_mm",
        "range.hip_flexion_deg",
        "capacity.hand_pull",
        "capacity.leg_push_bw",
    }
    assert found["nam"].expected == '"name"'
    assert found["measured.span_mn"].expected == '"span_mm"'
    assert found["stature_mm"].found == "True"
    assert found["sex"].found == "'man'"


@pytest.mark.parametrize(
    ("text", "key"),
    [
        (HEAD.replace("1750", "1.75"), "stature_mm"),
        (HEAD.replace("1750", "2400"), "stature_mm"),
        (HEAD.replace("= 70", "= 20"), "mass_kg"),
        (HEAD.replace("= 70", "= 201"), "mass_kg"),
        (HEAD.replace("1750", "1" + "0" * 400), "stature_mm"),
        (HEAD + "birth_year = 99\n", "birth_year"),
        (HEAD + "birth_year = true\n", "birth_year"),
        (HEAD + 'mass_table = "zatsiorsky"\n', "mass_table"),
        (HEAD + "mass_table = 1\n", "mass_table"),
        (HEAD + "measured = 3\n", "measured"),
        (HEAD + "[measured]\nspan_mm = 2200\n", "measured.span_mm"),  # more than 25 % over
        (HEAD + "[measured]\nspan_mm = 1300\n", "measured.span_mm"),
        (HEAD + "[measured]\nthigh_mm = 60\n", "measured.thigh_mm"),
        (HEAD + "[range]\nelbow_flexion_deg = 200\n", "range.elbow_flexion_deg"),
        (HEAD.replace('"A"', '""'), "name"),
        (HEAD.replace('"A"', '"a\\u001b[31m"'), "name"),
        (HEAD.replace('"A"', f'"{"a" * 101}"'), "name"),
        (HEAD.replace('name = "A"\n', ""), "name"),
        (HEAD.replace('sex = "male"\n', ""), "sex"),
        ("stature = [", ""),
        (HEAD + "x = " + "[" * 5000 + "]" * 5000, ""),
    ],
)
def test_one_wrong_value_is_one_problem(text: str, key: str) -> None:
    assert list(problems_of(text)) == [key]


def test_control_characters_of_a_key_are_escaped() -> None:
    (key,) = problems_of(HEAD + '"\\u001b[31mred" = 1\n')
    assert "\x1b" not in key


def test_bounds_of_a_range_are_allowed() -> None:
    athlete = parse_athlete(HEAD + "[range]\nelbow_flexion_deg = 165\nhip_adduction_deg = 0\n")
    assert athlete.ranges["hip_adduction"] == 0.0


def test_missing_file_names_it(tmp_path: Path) -> None:
    with pytest.raises(DataError, match=r"none\.toml"):
        read_athlete(tmp_path / "none.toml")


def test_round_trip_is_stable(tmp_path: Path) -> None:
    first = parse_athlete(FULL)
    path = tmp_path / "a.toml"
    write_athlete(first, path)
    second = read_athlete(path)
    assert second == first
    assert format_athlete(second) == path.read_text(encoding="utf-8")


@settings(derandomize=True, max_examples=60, deadline=None)
@given(
    sex=st.sampled_from(["female", "male"]),
    stature=st.floats(1.45, 2.05),
    bulk=st.floats(18.0, 30.0),
    ape=st.floats(0.97, 1.09),
    abduction=st.floats(0.6, 1.4),
    name=st.text(min_size=1, max_size=20).filter(lambda s: bool(s.strip()) and s.isprintable()),
)
def test_any_body_round_trips(
    sex: str, stature: float, bulk: float, ape: float, abduction: float, name: str
) -> None:
    first = make_athlete(
        sex=sex,
        stature=stature,
        mass=bulk * stature**2,
        measured={"span": ape * stature},
        ranges={"hip_abduction": abduction},
        name=name,
    )
    text = format_athlete(first)
    second = parse_athlete(text)
    assert format_athlete(second) == text
    assert second.name == name
    for key, length in first.lengths.items():
        assert second.length(key) == pytest.approx(length.value, abs=1e-7)


def test_growth_caution_needs_a_birth_year_and_youth() -> None:
    def body(year: int | None) -> str | None:
        athlete = make_athlete(sex="male", stature=1.6, mass=50.0, birth_year=year)
        return growth_caution(athlete, 2030)

    assert body(None) is None
    assert body(2011) is None  # turns 19 this year
    assert body(2012) is not None  # may still be 17
    assert "2016" in (body(2016) or "")


def test_invented_athletes_are_readable_and_measured() -> None:
    files = sorted(ATHLETES.glob("*.toml"))
    athletes = [read_athlete(path) for path in files]
    assert {(a.sex, a.stature) for a in athletes} == {("female", 1.66), ("male", 1.79)}
    for athlete, path in zip(athletes, files, strict=True):
        assert {"span", "sitting_height"} <= set(athlete.measured)
        assert "invented" in path.read_text(encoding="utf-8").splitlines()[0]
