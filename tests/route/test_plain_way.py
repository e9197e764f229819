"""The program's best time against the same answer found the plain way (``tests/plain_way.py``).

The plain way shares the samples and nothing of how stances are found, linked or searched, so the
two agree to the microsecond or one of them is wrong.
"""

from __future__ import annotations

import math

import pytest

from climbpath.motion.model import PacedMotion
from climbpath.study.climb import Conditions, prepare
from climbpath.study.plan import PlanRequest, best_route
from climbpath.wall.model import Hold, Section, Start, Wall
from tests.plain_way import CLEAR, ROUNDING, PlainWay
from tests.recost import Contacts, Stand
from tests.walls_made import athlete, pad, small_wall


def five_holds(side: float = 0.0) -> Wall:
    """Two hand holds, two foot chips and a pad on 3.5 m of slightly overhanging wall."""
    holds = (
        Hold("1", 1.35 + side, 1.5, use="hand"),
        Hold("2", 1.72 - side, 2.35, use="hand", hand_quality=0.8),
        Hold("f1", 1.42, 0.55, use="foot"),
        Hold("f2", 1.66, 1.05 + side, use="foot", foot_quality=0.7),
        pad(1.5, 3.2),
    )
    start = Start((("1",), ("1", "free"), ("floor", "f1"), ("floor", "free")))
    return Wall("five holds", 3.0, 1.5, 0.0, (Section(3.5, math.radians(5.0)),), holds,
                (start,), ("pad",))


known: dict[tuple[Wall, bool], tuple[dict[Contacts, float], dict[Contacts, dict[int, Stand]]]] = {}
"""Stances solved so far, by wall: most of the time goes there."""


def both_ways(wall: Wall, conditions: Conditions) -> tuple[int, int | None, PlainWay]:
    """Least times [us] of the program and of the plain way."""
    body = athlete()
    climb = prepare(wall, body, conditions, PacedMotion())
    best = best_route(climb, PlanRequest(conditions=conditions))
    assert best is not None
    plain = PlainWay(wall, body, conditions.smears, conditions.flights)
    plain.margins, plain.known = known.setdefault((wall, conditions.smears), ({}, {}))
    least = plain.best_time_us()
    # Each decides the other's stances alike, except within rounding of a margin of 0.
    own = {tuple(int(c) for c in row): float(margin) for row, margin
           in zip(climb.search.stances.contacts, climb.search.stances.margin, strict=True)}
    for contacts in plain.sets:
        margin = plain.margins[contacts]
        if contacts in own:
            assert margin >= min(own[contacts], CLEAR) - 2e-3, contacts
        elif not all(c == -1 or c == -3 for c in contacts[:2]):
            assert margin < ROUNDING, contacts
    return best.cost, least, plain


@pytest.mark.parametrize("flights", [True, False])
def test_same_best_time_on_a_small_wall(flights: bool) -> None:
    program, plain, _ = both_ways(five_holds(), Conditions(smears=False, flights=flights))
    assert program == plain


@pytest.mark.slow
@pytest.mark.parametrize("wall", [five_holds(), five_holds(0.2), small_wall(0, 4, 3.2)],
                         ids=["five holds", "moved", "random"])
def test_same_best_time_with_smears(wall: Wall) -> None:
    program, plain, _ = both_ways(wall, Conditions())
    assert program == plain

