"""Searches made ready once and asked many things: what the tests of the facts share."""

from __future__ import annotations

from functools import lru_cache

from climbpath.study.climb import LATTICE_STEP, Climb, Conditions, prepare
from climbpath.study.decode import plan_of
from climbpath.study.plan import PlanRequest, plan_routes
from climbpath.study.results import Plan
from climbpath.wall import Wall
from tests.recost import Recoster
from tests.walls_made import athlete

Body = tuple[str, float]

MAN: Body = ("male", 1.79)
WOMAN: Body = ("female", 1.66)

FREELY = Conditions()
FASTEST = PlanRequest()

SAME_US = 20
"""Best times that must be equal are equal to 0.02 ms."""


@lru_cache(maxsize=64)
def climb(wall: Wall, conditions: Conditions = FREELY, step: float = LATTICE_STEP,
          body: Body = MAN) -> Climb:
    """The search of one wall and body."""
    return prepare(wall, athlete(*body), conditions, step=step)


@lru_cache(maxsize=256)
def plans(wall: Wall, request: PlanRequest = FASTEST, body: Body = MAN) -> tuple[Plan, ...]:
    """What ``plan`` would return, from a search that is made once for all aims."""
    ready = climb(wall, request.conditions, request.step, body)
    return tuple(plan_of(ready, best.route, rank)
                 for rank, best in enumerate(plan_routes(ready, request), start=1))


def best(wall: Wall, request: PlanRequest = FASTEST, body: Body = MAN) -> Plan:
    """The first plan; there must be one."""
    return plans(wall, request, body)[0]


def best_us(wall: Wall, request: PlanRequest = FASTEST, body: Body = MAN) -> int:
    """Its lattice time, us."""
    return round(best(wall, request, body).lattice_time_s * 1e6)


@lru_cache(maxsize=32)
def recoster(wall: Wall, body: Body = MAN) -> Recoster:
    """The re-coster of one wall and body, with the stances it knows already."""
    return Recoster(wall, athlete(*body))
