"""Every invented wall that ships can be climbed by both athletes that ship, the published lane by
some.

Statures: grown men of 1.65 to 1.90 m and women of 1.55 to 1.80 m, about the 5th to the 95th
percentile of the 2012 survey (the survey's table in ``climbpath/body/tables``), with a
body-mass index of 22 and 20 (round numbers).
"""

from __future__ import annotations

from functools import lru_cache
from pathlib import Path

import pytest

from climbpath.body import Athlete, read_athlete
from climbpath.study.foot_layouts import with_random_feet
from climbpath.study.plan import plan
from climbpath.study.results import PlanResult
from climbpath.wall import Wall, read_wall
from tests.walls_made import athlete

WALLS = Path(__file__).parents[2] / "walls"
LANE = WALLS / "published_lane.toml"

QUICK = {("male", 170), ("male", 185), ("female", 160), ("female", 175)}
STATURES = [
    pytest.param(sex, cm, marks=() if (sex, cm) in QUICK else pytest.mark.slow)
    for sex, range_cm in (("male", range(165, 191, 5)), ("female", range(155, 181, 5)))
    for cm in range_cm
]


def lanes_of(path: Path) -> list[Wall]:
    """The wall, or each of its lanes by itself where it has lanes."""
    wall = read_wall(path)
    return [wall.lane_view(lane.id) for lane in wall.lanes] or [wall]


def check(wall: Wall, body: Athlete) -> PlanResult:
    """A plan that ends with a hand on a finish hold, every stance within reach."""
    result = plan(wall, body)
    assert result.plans, result.why_not
    best = result.plans[0]
    last = best.steps[-1]
    assert last.kind == "finish"
    assert {last.contacts["LH"], last.contacts["RH"]} & set(wall.finish)
    assert set(wall.finish) & {last.contacts[limb] for limb in last.moved}
    assert best.margin_min_mm is not None
    assert best.margin_min_mm >= 0.0
    assert 0.0 < best.time_s < 60.0
    return result


@lru_cache(maxsize=1)
def published_lane() -> Wall:
    return lanes_of(LANE)[0]


@pytest.mark.parametrize("who", sorted(p.stem for p in (WALLS / "athletes").glob("*.toml")))
@pytest.mark.parametrize("wall", sorted(p.stem for p in WALLS.glob("*.toml") if p != LANE))
def test_every_shipped_wall_has_a_way_up(wall: str, who: str) -> None:
    body = read_athlete(WALLS / "athletes" / f"{who}.toml")
    for lane in lanes_of(WALLS / f"{wall}.toml"):
        check(lane, body)


@pytest.mark.parametrize(("sex", "cm"), STATURES)
def test_the_published_lane_has_a_way_up_or_says_what_is_missing(sex: str, cm: int) -> None:
    """Its foot holds are unknown. By hand holds alone tall men get up, others lack force; with a
    random layout of foot holds all men of 1.70 m and more do."""
    body = athlete(sex, cm / 100.0)
    if sex == "male" and cm >= 170:
        check(with_random_feet(published_lane(), (0, 9, 1)), body)
    result = plan(published_lane(), body)
    if result.plans:
        assert sex == "male"
        return
    assert result.why_not is not None
    assert result.why_not.missing_bw is not None
    assert 0.0 < result.why_not.missing_bw < 0.5
