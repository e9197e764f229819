"""Chances of missing holds on whole searches, and what a plan says of them."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest

from climbpath.contacts import FREE
from climbpath.motion.miss import MissRule
from climbpath.posture.assembly import FIRST_JOINT, assemble
from climbpath.route.measures import hand_spare
from climbpath.route.misses import Misses, misses_of
from climbpath.stance.enumerate import batch_of
from climbpath.study.climb import Climb, Conditions, prepare
from climbpath.study.decode import plan_of
from climbpath.study.plan import Best, PlanRequest, plan, plan_routes, with_misses
from tests.study.solved import MAN, STRONG
from tests.walls_made import athlete, small_wall

RULE = MissRule(still=0.05, timing=0.03, catch=0.01, lost=2.0)
"""Misses that happen: nearly every hand may."""

STEP = 0.2
PERSON = replace(athlete(*MAN), capacity={**STRONG, "foot_push_bw": 1.8, "reach_speed_m_s": 5.0})


@lru_cache(maxsize=2)
def climb(seed: int) -> Climb:
    return prepare(small_wall(seed), PERSON, Conditions(), step=STEP)


@lru_cache(maxsize=2)
def misses(seed: int, rule: MissRule = RULE) -> Misses:
    ready = climb(seed)
    return misses_of(ready.options, ready.linkage, ready.search, ready.motion, rule)


@lru_cache(maxsize=2)
def best(seed: int) -> Best:
    return plan_routes(climb(seed), PlanRequest(step=STEP))[0]


def test_hands_have_the_reach_to_spare_that_their_arms_leave() -> None:
    """Shoulder to wrist joint and on, of the assembled body: reach less the way to the hold."""
    ready = climb(0)
    stances, linkage = ready.search.stances, ready.linkage
    spare = hand_spare(ready.options, linkage, stances)
    owner = stances.sample_stance
    contacts = stances.contacts[owner, :2]
    held = (contacts >= 0) & ~ready.options.strike[np.maximum(contacts, 0)]
    assert held.any()
    assert (~held).any()
    assert np.isinf(spare[~held]).all()
    joints = assemble(linkage, batch_of(ready.options, linkage, stances.contacts[owner]),
                      stances.turn, stances.shift)
    for hand in (0, 1):
        shoulder, end = joints[FIRST_JOINT[hand]], joints[FIRST_JOINT[hand] + 3]
        way = np.sqrt(((shoulder - end) ** 2).sum(axis=0))
        some = held[:, hand]
        # The arm to the middle of the fingers is the longest way that there is.
        assert (spare[some, hand] >= 0.0).all()
        total = spare[some, hand] + way[some]
        assert total.max() - total[spare[some, hand] > 0.0].min() < 1e-6
        assert total.max() < sum(PERSON.length(name) for name in ("upper_arm", "forearm", "hand"))


def test_only_landing_hands_can_miss_by_their_speed_and_reach() -> None:
    ready, found = climb(0), misses(0)
    graph, code = ready.search.graph, ready.search.code
    landing = graph.event // (ready.options.holds + 2)
    hands = (graph.event >= 0) & (landing <= 1)
    assert hands.any()
    assert (found.chance[~hands] == 0.0).all()
    assert (found.cost_us[~hands] == 0).all()
    spare = hand_spare(ready.options, ready.linkage, ready.search.stances)
    for arc in np.random.default_rng(0).choice(np.flatnonzero(hands), 50, replace=False):
        head = int(graph.head[arc])
        sample, speed = int(code.sample(np.array(head))), int(code.speed(np.array(head)))
        left = spare[sample, landing[arc]]
        spread = 0.05 + 0.03 * ready.motion.speeds[speed]
        chance = math.erfc((0.01 + left) / spread / math.sqrt(2.0))
        assert found.chance[arc] == pytest.approx(chance, rel=1e-9, abs=1e-15)
        assert found.cost_us[arc] == round(2e6 * chance)
        contact = ready.search.stances.contacts[ready.search.stances.sample_stance[sample],
                                                landing[arc]]
        assert contact != FREE
        if ready.options.strike[contact]:
            assert chance == 0.0


@pytest.mark.parametrize("seed", [0, 1])
def test_a_plan_sums_its_misses(seed: int) -> None:
    ready, found, route = climb(seed), misses(seed), best(seed).route
    plain = plan_of(ready, route, 1)
    told = with_misses(plain, route, found)
    lost, clean, landings = 0.0, 1.0, 0
    for arc in route.arcs:
        chance = float(found.chance[arc])
        landings += chance > 0.0
        lost += round(2e6 * chance) / 1e6
        clean *= 1.0 - chance
    assert landings >= 1
    assert told.expected_time_s == pytest.approx(told.time_s + lost, abs=1e-9)
    assert told.chance_clean == pytest.approx(clean, rel=1e-12)
    assert 0.0 < clean < 1.0
    assert told.time_s == plain.time_s


def test_the_plan_of_the_main_job_says_so_by_the_usual_rule() -> None:
    usual = misses(0, MissRule())
    own = plan(small_wall(0), PERSON, PlanRequest(step=STEP)).plans[0]
    told = with_misses(plan_of(climb(0), best(0).route, 1), best(0).route, usual)
    assert own.lattice_time_s == told.lattice_time_s
    assert (own.expected_time_s, own.chance_clean) == (told.expected_time_s, told.chance_clean)
    assert own.expected_time_s is not None
    assert own.chance_clean is not None
    assert own.expected_time_s >= own.time_s
    assert own.chance_clean <= 1.0


def test_a_slower_landing_with_more_to_spare_is_safer() -> None:
    sure = misses_of(climb(0).options, climb(0).linkage, climb(0).search, climb(0).motion,
                     replace(RULE, catch=0.05, timing=0.0))
    assert (sure.chance <= misses(0).chance + 1e-15).all()
    assert (sure.chance < misses(0).chance).any()
