"""The posture solver against a careful solver of one stance, and against what must hold."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.contacts import FREE
from climbpath.posture.solver import solve_postures
from tests.posture.drawn import Drawn, drawn, flat, joints_in_world, sections_of
from tests.posture.oracle import Body, Stance, margin
from tests.posture.skeleton import verify_posture

Array = NDArray[np.float64]

MILLIMETRE = 1e-3
NEAR = 0.05
"""Stances within this of zero margin (m) are the ones where an answer can turn."""

SEEDS = (20, 21)
"""One draw for each athlete, chosen before any result was looked at."""


ONE_PLANE = (
    "at a fold each joint minds one plane, and a few in a thousand enter the other; ends when "
    "knees and ankles are placed against both"
)


@dataclass(frozen=True)
class Case:
    """One stance with both answers, m."""

    label: str
    batch: float
    careful: float

    def __str__(self) -> str:
        both = f"solver {self.batch * 1e3:.1f} mm, careful {self.careful * 1e3:.1f} mm"
        return f"{self.label}: {both}"


def compared(number: int, starts: int) -> list[Case]:
    """``number`` stances, half of them near zero margin, solved both ways."""
    cases = []
    for which, seed in enumerate(SEEDS):
        stances = drawn(which, 3000, seed)
        found = stances.solved().margin
        near = np.flatnonzero(np.abs(found) < NEAR)[: number // 4]
        others = np.setdiff1d(np.arange(len(found)), near)[: number // 4]
        body = Body.of(stances.linkage)
        for k in np.concatenate([near, others]):
            stance = Stance(body, stances.surface, stances.contacts[k], stances.points[k],
                            stances.strike[k])
            careful, _ = margin(stance, starts, int(k))
            label = f"{stances.athlete.sex} {k} {stances.contacts[k].tolist()}"
            cases.append(Case(label, float(found[k]), careful))
    return cases


def check_agreement(cases: list[Case]) -> None:
    """The solver may be better than the careful one, never much worse."""
    short = [case for case in cases if case.batch < case.careful - 5.0 * MILLIMETRE]
    turned = [case for case in cases if (case.batch >= 0.0) != (case.careful >= 0.0)
              and min(abs(case.batch), abs(case.careful)) > 5.0 * MILLIMETRE]
    gap = [(case.batch - case.careful) / MILLIMETRE for case in cases]
    print(f"\n{len(cases)} stances: {len(short)} more than 5 mm short, {len(turned)} with the "
          f"other answer; solver minus careful from {min(gap):.1f} to {max(gap):.1f} mm")
    print(*short, *turned, sep="\n")
    assert not turned
    assert not short


def test_agrees_with_a_careful_solver() -> None:
    check_agreement(compared(60, 2))


@pytest.mark.slow

def test_agrees_with_a_careful_solver_on_many() -> None:
    check_agreement(compared(200, 4))


@pytest.fixture(scope="module", params=[0, 1], ids=["male", "female"])
def many(request: pytest.FixtureRequest) -> Drawn:
    return drawn(request.param, 4000, 30 + request.param)


def wrong(stances: Drawn) -> list[str]:
    """What the joints of all possible stances break."""
    found = stances.solved()
    possible = np.flatnonzero(found.margin >= 0.0)
    kept = stances.take(possible)
    section = sections_of(stances, stances.batch())[possible]
    joints = joints_in_world(stances, found, possible)
    return verify_posture(stances.athlete, stances.surface, section, kept.contacts, kept.points,
                          kept.strike, joints)


def test_every_posture_is_a_body_on_the_wall(many: Drawn) -> None:
    assert wrong(many) == []


@pytest.mark.parametrize("overhang", [-15.0, 25.0, 45.0])
def test_every_posture_holds_on_slabs_and_overhangs(overhang: float) -> None:
    assert wrong(drawn(0, 2000, 40, flat(overhang))) == []


FOLDS = pytest.mark.parametrize(("lower", "upper"), [(0.0, 20.0), (20.0, 0.0), (45.0, 0.0)])


def at_fold(lower: float, upper: float) -> list[str]:
    return wrong(drawn(0, 3000, 71, flat(lower, upper, height=3.0)))


@FOLDS
def test_trunk_and_lengths_hold_at_folds(lower: float, upper: float) -> None:
    assert [text for text in at_fold(lower, upper) if "outside" not in text] == []


@FOLDS

@pytest.mark.xfail(strict=True, reason=ONE_PLANE)
def test_knees_and_ankles_stay_outside_at_folds(lower: float, upper: float) -> None:
    assert at_fold(lower, upper) == []


def test_mirrored_stances_have_the_same_margin(many: Drawn) -> None:
    margins, mirrored = many.solved().margin, many.mirrored().solved().margin
    possible = margins > -NEAR
    assert np.abs(margins - mirrored)[possible].max() < 1e-6


def test_margin_does_not_depend_on_the_company(many: Drawn) -> None:
    margins = many.solved().margin
    order = np.random.default_rng(5).permutation(len(margins))[:1000]
    alone = many.take(order).solved().margin
    assert np.abs(alone - margins[order]).max() < 1e-9


def share_broken(excess: Array) -> float:
    """Share of cases in which a rule is broken by more than 1 mm."""
    return float((excess > MILLIMETRE).mean())


def test_margin_changes_no_faster_than_a_contact_moves(many: Drawn) -> None:
    # The reach needed changes by at most the contact's shift while no hard limit holds, so the
    # bound applies to stances that spare reach limits alone (their hands and feet well apart).
    rng = np.random.default_rng(6)
    step = rng.normal(size=(len(many.contacts), 2))
    step *= 0.01 / np.linalg.norm(step, axis=1, keepdims=True)
    moved = many.points.copy()
    moved[:, 0, :2] += step
    there = Drawn(many.which, many.surface, many.contacts, moved, many.strike).solved().margin
    here = many.solved().margin
    excess = np.abs(there - here) - 0.01
    print(f"\nfaster than the contact: {share_broken(excess):.4f} of all")
    assert share_broken(excess[here > -NEAR]) < 0.01


def test_a_stance_with_a_contact_fewer_spares_no_less(many: Drawn) -> None:
    margins = many.solved().margin
    excess = []
    for limb in range(4):
        less = many.without(limb)
        rows = np.flatnonzero((many.contacts[:, limb] != FREE)
                              & (less.contacts != FREE).any(axis=1) & (margins > -NEAR))
        part = less.take(rows)
        excess.append(margins[rows] - solve_postures(many.linkage, part.batch()).margin)
    every = np.concatenate(excess)
    print(f"\nless reach with a contact fewer: {share_broken(every):.4f} of {len(every)}")
    assert share_broken(every) < 0.005
