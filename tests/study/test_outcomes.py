"""Measures taken from plans made by hand, and which plans one body asks for."""

from __future__ import annotations

from dataclasses import dataclass, field
from types import SimpleNamespace
from typing import Any

import pytest

import climbpath.study.outcomes as outcomes
from climbpath.body import make_athlete
from climbpath.study.outcomes import (
    body_outcome,
    first_touch,
    mean_off_line,
    opening_way,
    stretch_speeds,
)
from climbpath.study.published_lane import published_lane
from tests.evidence_samples import made_plan

LANE = published_lane()

# Stands until 0.2 s, then a swing out to 300 mm right of the line and back across it.
CLIMB = made_plan([
    (0.0, 1500.0, 900.0, "1", "1"),
    (1.2, 1800.0, 2400.0, "1", "3"),
    (2.2, 1500.0, 4000.0, "4", "3"),
    (3.2, 1400.0, 5400.0, "7", "3"),
    (5.2, 1600.0, 9400.0, "7", "13"),
    (7.2, 1500.0, 14000.0, "pad", "13"),
])  # fmt: skip


def test_speeds_are_rise_over_time_between_touches_of_holds_6_and_12_or_higher() -> None:
    # Hold 7 stands higher than 6, and 13 higher than 12: first touches at 3.2 and 5.2 s.
    assert first_touch(CLIMB, LANE, "6") == 3.2
    assert first_touch(CLIMB, LANE, "12") == 5.2
    assert first_touch(CLIMB, LANE, "pad") == 7.2
    assert stretch_speeds(CLIMB, LANE) == pytest.approx((4.5 / 3.0, 4.0 / 2.0, 4.6 / 2.0))
    signal = made_plan([(0.0, 1500.0, 900.0, "1", "1"), (3.0, 1500.0, 5400.0, "7", "1")], None)
    first, second = stretch_speeds(signal, LANE, ("6",))
    assert first == pytest.approx(1.5)
    assert second is None


def test_a_pad_left_late_counts_from_there() -> None:
    late = made_plan([
        (0.0, 1500.0, 900.0, "1", "1"), (0.5, 1500.0, 1000.0, "1", "2"),
        (1.5, 1500.0, 2000.0, "3", "2"), (2.5, 1500.0, 5000.0, "3", "7"),
    ], pad_off_s=0.5)  # fmt: skip
    assert stretch_speeds(late, LANE)[0] == pytest.approx(4.0 / 2.0)


def test_the_mean_distance_from_the_line_is_over_time_and_crosses_it() -> None:
    # 0 to 300 in 1 s, back to 0 in 1 s, to -100 in 1 s; 0.2 s on the line before: 150 + 150 + 50.
    assert mean_off_line(CLIMB, 1500.0, 3.2) == pytest.approx(350.0 / 3.2)
    # On to +100 in 2 s: two triangles of 100 by 1 s.
    assert mean_off_line(CLIMB, 1500.0, 5.2) == pytest.approx(450.0 / 5.2)
    # Half of the first swing: 0 to 150 in 0.5 s.
    assert mean_off_line(CLIMB, 1500.0, 0.7) == pytest.approx(37.5 / 0.7)
    assert mean_off_line(CLIMB, 1500.0, 0.0) == 0.0
    way = opening_way(CLIMB, LANE)
    assert way.opening_mean_mm == pytest.approx(350.0 / 3.2)
    assert (way.time_s, way.lateral_max_mm) == (7.2, 300.0)


@dataclass(frozen=True)
class Ready:
    """A search that is asked for plans, of which only the demands matter."""

    demands: tuple[Any, ...] = ()
    options: Any = field(
        default_factory=lambda: SimpleNamespace(index=lambda name: f"hold {name}"))
    search: Any = None


def climbed(monkeypatch: pytest.MonkeyPatch, answers: list[Any]) -> list[tuple[Any, Any]]:
    """Let the search find these plans (or None) in turn; its demands and forbidden holds, as they
    were asked, are returned.
    """
    asked: list[tuple[Any, Any]] = []

    def best(climb: Ready, forbidden: Any = ()) -> Any:
        asked.append((climb.demands, forbidden))
        return answers[len(asked) - 1]

    monkeypatch.setattr(outcomes, "prepare", lambda *_: Ready())
    monkeypatch.setattr(outcomes, "demands_of", lambda _options, asks, _search: asks.include)
    monkeypatch.setattr(outcomes, "_best", best)
    return asked


BODY = make_athlete(sex="male", stature=1.8, mass=72.0)
SLOWER = made_plan([(0.0, 1500.0, 900.0, "1", "1"), (9.0, 1500.0, 14000.0, "pad", "1")])


def test_the_best_plan_is_one_way_and_the_other_is_searched(
    monkeypatch: pytest.MonkeyPatch
) -> None:
    asked = climbed(monkeypatch, [CLIMB, SLOWER])
    found = body_outcome(LANE, BODY)
    assert found.time_s == 7.2
    assert found.hand_holds == CLIMB.hand_holds
    assert found.with_hold is not None
    assert found.without_hold is not None
    assert (found.with_hold.time_s, found.without_hold.time_s) == (7.2, 9.0)
    # Hold 4 is forbidden to hands alone in the second search; all else is as it was.
    assert asked == [((), ()), ((), ["hold 4"])]


def test_a_best_plan_without_the_hold_is_set_against_one_that_must_touch_it(
    monkeypatch: pytest.MonkeyPatch
) -> None:
    asked = climbed(monkeypatch, [SLOWER, None])
    found = body_outcome(LANE, BODY)
    assert found.with_hold is None
    assert found.without_hold is not None
    assert asked == [((), ()), (("4",), ())]


def test_no_way_up_is_an_outcome(monkeypatch: pytest.MonkeyPatch) -> None:
    asked = climbed(monkeypatch, [None])
    found = body_outcome(LANE, BODY)
    assert found.time_s is None
    assert (found.hand_holds, found.with_hold, found.without_hold) == ((), None, None)
    assert (found.stature_m, found.mass_kg) == (1.8, 72.0)
    assert len(asked) == 1


def test_a_body_on_the_lane() -> None:
    """Whatever the model: the fastest plan is the faster of both ways through the opening."""
    found = body_outcome(LANE, make_athlete(sex="male", stature=1.88, mass=75.0))
    assert found.time_s is not None, "no way up the published lane"
    ways = [way.time_s for way in (found.with_hold, found.without_hold) if way is not None]
    assert found.time_s == min(ways)
    assert found.hand_holds[-1] == "pad"
    assert ("4" in found.hand_holds) == (
        found.with_hold is not None and found.with_hold.time_s == found.time_s
    )
    assert all(speed is not None and 0.1 < speed < 10.0 for speed in found.speeds_m_s)
