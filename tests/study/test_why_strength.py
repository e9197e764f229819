"""Where force stands in the way: hands that bear nothing, and bodies a little too weak."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest

from climbpath.body import Athlete
from climbpath.motion.capacity import capacities_of
from climbpath.motion.force import ForceMotion
from climbpath.motion.model import PacedMotion
from climbpath.study.climb import Conditions, prepare
from climbpath.study.opening import way_under
from climbpath.study.plan import PlanRequest, plan
from climbpath.study.results import PlanResult, WhyNot
from climbpath.study.why_strength import HALVINGS, MOST_STRONGER, PULLS, by_strength
from climbpath.wall.model import Hold, Section, Start, Wall
from tests.study.solved import MAN
from tests.walls_made import athlete

STEP = 0.2
CAPACITY = {
    "hand_pull_bw": 0.6, "hand_press_bw": 0.3, "foot_push_bw": 1.7, "foot_smear_bw": 0.4,
    "foot_bent_share": 0.5, "hand_matched_share": 0.5, "hand_speed_m_s": 6.5,
    "foot_speed_m_s": 6.5, "fade_share": 0.1, "turn_rad_s2": 6.0, "reach_speed_m_s": 5.0,
    "settle_s": 0.06, "reaction_s": 0.2,
}
"""Every capacity, so that no default matters."""

FORCES = ("hand_pull_bw", "hand_press_bw", "foot_push_bw", "foot_smear_bw", "turn_rad_s2")
"""What a strength is made of."""

TO_A_SHARE = MOST_STRONGER ** (1.0 / 2**HALVINGS)
"""How close the strength that is missing is found: the halvings are of ratios."""


def chips(overhang_deg: float, feet: int = 6, hands: int = 2, finish: float = 3.0) -> Wall:
    """Two start holds, a ladder of foot chips from the floor on, and hand holds above."""
    holds = [Hold("1", 1.3, 1.3), Hold("2", 1.7, 1.3)]
    holds += [Hold(f"f{k}", 1.5 + (0.15 if k % 2 else -0.15), round(0.35 + 0.3 * k, 6), use="foot")
              for k in range(feet)]
    holds += [Hold(f"h{k}", 1.5 + (0.2 if k % 2 else -0.2), round(1.75 + 0.45 * k, 6))
              for k in range(hands)]
    holds.append(Hold("top", 1.5, finish))
    start = Start((("1",), ("2",), ("floor", "f0"), ("floor", "f1", "free")))
    return Wall("chips", 3.0, 1.5, 0.0, (Section(finish + 1.0, math.radians(overhang_deg)),),
                tuple(holds), (start,), ("top",))


def person(**changed: float) -> Athlete:
    return replace(athlete(*MAN), capacity={**CAPACITY, **changed})


def times(share: float, base: Athlete) -> Athlete:
    """Everything that forces are made of times ``share``."""
    return replace(base, capacity={key: value * (share if key in FORCES else 1.0)
                                   for key, value in base.capacity.items()})


@lru_cache(maxsize=8)
def planned(overhang_deg: float, *changed: tuple[str, float]) -> PlanResult:
    return plan(chips(overhang_deg), person(**dict(changed)), PlanRequest(step=STEP))


NO_HANDS = (("hand_pull_bw", 0.0), ("hand_press_bw", 0.0))


def test_without_hands_that_bear_nobody_gets_up_an_overhang() -> None:
    """Feet push up and out, so a body over them falls backward off a wall that leans over it."""
    result = planned(5.0, *NO_HANDS)
    assert result.plans == ()
    why = result.why_not
    assert why is not None
    assert why.limb in ("LH", "RH")
    assert why.missing_mm is None
    assert why.missing_bw is not None
    assert why.missing_bw > 0.0
    assert why.missing_bw in PULLS
    assert "feet alone" in why.change


@pytest.mark.slow
def test_the_least_pull_that_was_tried_and_is_enough_is_named() -> None:
    why = planned(5.0, *NO_HANDS).why_not
    assert why is not None
    pull = why.missing_bw
    assert pull is not None
    enough = planned(5.0, ("hand_pull_bw", pull), ("hand_press_bw", pull / 2.0))
    assert enough.plans
    less = max((tried for tried in PULLS if tried < pull), default=0.0)
    if less:
        assert not planned(5.0, ("hand_pull_bw", less), ("hand_press_bw", less / 2.0)).plans


def test_without_hands_that_bear_a_slab_is_walked_up() -> None:
    """On 20° the same chips carry the weight inside their cones."""
    result = planned(-20.0, *NO_HANDS)
    assert result.why_not is None
    (found,) = result.plans
    touched = {step.contacts["LF"] for step in found.steps}
    touched |= {step.contacts["RF"] for step in found.steps}
    assert {name for name in touched if name.startswith("f") and name[1:].isdigit()}
    # Wherever a hand is, it bears next to nothing: shares of a hand that can do nothing are none.
    for step in found.steps:
        assert step.load_by_limb.get("LH", 0.0) == 0.0
        assert step.load_by_limb.get("RH", 0.0) == 0.0
    # With hands it is no slower.
    assert planned(-20.0).plans[0].lattice_time_s <= found.lattice_time_s


def opens(wall: Wall, somebody: Athlete) -> bool:
    return way_under(prepare(wall, somebody, Conditions(), step=STEP)) is not None


@lru_cache(maxsize=1)
def weak() -> tuple[Athlete, WhyNot]:
    """Somebody whose strength falls a little short on an overhang, and why."""
    wall = chips(15.0)
    somebody = times(0.35, person())
    found = by_strength(wall, somebody, Conditions(), None, STEP)
    assert found is not None
    return somebody, found


def share_of(why: WhyNot) -> tuple[float, float]:
    """How much stronger, and what the contacts give now, as the text has it."""
    words = why.change.split()
    more = 1.0 + float(words[words.index("%") - 1]) / 100.0
    return more, float(words[-1])


@pytest.mark.slow
def test_somebody_a_little_too_weak_is_told_how_much() -> None:
    wall = chips(15.0)
    somebody, why = weak()
    assert not opens(wall, somebody)
    more, own = share_of(why)
    assert why.missing_bw is not None
    assert why.missing_bw > 0.0
    # The text rounds to 1 % and to .01 body weights.
    assert why.missing_bw == pytest.approx((more - 1.0) * own, rel=0.05, abs=0.01)
    assert why.limb is not None
    assert why.hold in {hold.id for hold in wall.holds} | {"floor", "smear"}
    assert why.missing_mm is None
    # So much stronger there is a way; much less than that there is none.
    assert opens(wall, times(more + 0.006, somebody))
    assert not opens(wall, times(more / TO_A_SHARE - 0.006, somebody))


@pytest.mark.slow
def test_the_plan_of_somebody_too_weak_says_so() -> None:
    somebody, why = weak()
    result = plan(chips(15.0), somebody, PlanRequest(step=STEP))
    assert result.plans == ()
    assert result.why_not == why


def test_stronger_by_that_much_is_the_same_as_all_of_its_capacities() -> None:
    """Raising every strength of the model is raising all that strengths are made of."""
    wall, somebody = chips(15.0), times(0.35, person())
    motion = ForceMotion(capacities_of(somebody), stronger=1.7)
    first = prepare(wall, somebody, Conditions(), motion, STEP).search.strength
    second = prepare(wall, times(1.7, somebody), Conditions(), step=STEP).search.strength
    some = (first > 0.02) & (second > 0.0) & (second < 99.0)
    assert some.sum() > 1000
    assert ((first > 0.0) != (second > 0.0)).mean() < 1e-3
    np.testing.assert_allclose(first[some], second[some], rtol=1e-5)


def test_where_force_is_not_what_stops_there_is_nothing_to_say() -> None:
    """A hold that is out of reach, a rule that looks at no force."""
    wall, high = chips(5.0), chips(5.0, finish=6.5)
    assert by_strength(high, person(), Conditions(), None, STEP) is None
    assert by_strength(wall, person(), Conditions(), PacedMotion(), STEP) is None
