"""Searches made ready once and asked many things: what the tests of the facts share."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

from climbpath.motion.model import PacedMotion
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


PACED, FORCE = "paced", "force"
MODELS = (PACED, FORCE)
"""The simple pacing rule, which has an independent re-coster, and the model of forces."""

STRONG = {"hand_pull_bw": 1.2, "hand_press_bw": 0.6, "turn_rad_s2": 15.0}
"""Capacities with which most small walls have a way up."""


@lru_cache(maxsize=64)
def climb(model: str, wall: Wall, conditions: Conditions = FREELY, step: float = LATTICE_STEP,
          body: Body = MAN) -> Climb:
    """The search of one wall and body."""
    if model == PACED:
        return prepare(wall, athlete(*body), conditions, PacedMotion(), step=step)
    return prepare(wall, replace(athlete(*body), capacity=STRONG), conditions, step=step)


@lru_cache(maxsize=256)
def plans(model: str, wall: Wall, request: PlanRequest = FASTEST, body: Body = MAN
          ) -> tuple[Plan, ...]:
    """What ``plan`` would return, from a search that is made once for all aims."""
    ready = climb(model, wall, request.conditions, request.step, body)
    return tuple(plan_of(ready, best.route, rank)
                 for rank, best in enumerate(plan_routes(ready, request), start=1))


def best(model: str, wall: Wall, request: PlanRequest = FASTEST, body: Body = MAN) -> Plan:
    """The first plan; there must be one."""
    return plans(model, wall, request, body)[0]


def best_us(model: str, wall: Wall, request: PlanRequest = FASTEST, body: Body = MAN) -> int:
    """Its lattice time, us."""
    return round(best(model, wall, request, body).lattice_time_s * 1e6)


@lru_cache(maxsize=32)
def recoster(wall: Wall, body: Body = MAN) -> Recoster:
    """The re-coster of one wall and body for the pacing rule, with the stances it knows already."""
    return Recoster(wall, athlete(*body))
