"""The force solvers against HiGHS and SLSQP, and the facts any load must obey."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from climbpath.motion.load import LIMIT, Held, least_load, limb_loads
from tests.motion.contact_cases import (
    least_load_by_highs,
    limb_loads_by_slsqp,
    mirrored,
    random_held,
    random_need,
)


def test_least_load_is_that_of_a_linear_program() -> None:
    held, need = random_held(500, 1), random_need(500, 2)
    found = least_load(held, need)
    expected = np.array([least_load_by_highs(held, need, k) for k in range(held.size)])
    finite = np.isfinite(expected)
    assert 0.05 < 1.0 - finite.mean() < 0.5
    assert (np.isfinite(found.load) == finite).all()
    np.testing.assert_allclose(found.load[finite], expected[finite], rtol=0.0, atol=1e-6)
    # The gap is honest: the optimum lies between the bound and the forces that were found.
    assert (found.gap[finite] >= 0.0).all()
    assert found.gap[finite].max() < 1e-7
    assert (found.load[finite] <= expected[finite] + 1e-8).all()
    assert (found.load + found.gap)[finite] == pytest.approx(expected[finite], abs=1e-7)


def test_least_load_of_strict_balance_is_that_of_a_linear_program() -> None:
    held, need = random_held(80, 3, absent=0.1, strict=True), random_need(80, 4)
    found = least_load(held, need).load
    expected = np.array([least_load_by_highs(held, need, k) for k in range(held.size)])
    finite = np.isfinite(expected)
    assert 10 < finite.sum() < 80
    assert (np.isfinite(found) == finite).all()
    np.testing.assert_allclose(found[finite], expected[finite], rtol=0.0, atol=1e-6)


def test_limb_loads_are_those_of_another_solver() -> None:
    held, need = random_held(60, 5), random_need(60, 6)
    held_up = np.flatnonzero(np.isfinite(least_load(held, need).load))[:50]
    assert len(held_up) == 50
    found = limb_loads(held, need)
    for k in held_up:
        mine = np.append(found.share[k], found.turning[k])
        shares, half_sum, success = limb_loads_by_slsqp(held, need, int(k))
        # SLSQP stops early at times; it is never better by more than its own tolerance.
        assert 0.5 * (mine**2).sum() <= half_sum + 1e-8
        if success:
            np.testing.assert_allclose(mine, shares, rtol=0.0, atol=2e-5)


def test_the_forces_balance_and_stay_within_the_shares() -> None:
    held, need = random_held(300, 7), random_need(300, 8)
    found = limb_loads(held, need)
    fine = np.isfinite(found.turning)
    force = found.force[fine]
    np.testing.assert_allclose(force.sum(axis=1), need[fine], rtol=0.0, atol=1e-8)
    arm = held.point[fine] - held.com[fine][:, None]
    moment = np.cross(arm, force).sum(axis=1)
    assert (np.abs(moment) <= found.turning[fine, None] * held.turn[fine] + 1e-8).all()
    # A force of f body weights takes at least f of the ray coefficients.
    size = np.linalg.norm(force, axis=2)
    assert (size <= found.share[fine] * held.capacity[fine] + 1e-8).all()
    assert (found.share[~held.bearing()] == 0.0).all()
    assert np.isnan(found.force[~fine]).all()
    assert np.isinf(found.share[~fine][held.bearing()[~fine]]).all()


def test_own_shares_spread_about_the_common_share() -> None:
    held = random_held(300, 9)
    load = least_load(held).load
    fine = np.isfinite(load)
    found = limb_loads(held.take(np.flatnonzero(fine)))
    largest = np.maximum(found.share.max(axis=1), found.turning)
    assert (largest >= load[fine] - 1e-7).all()
    # The common share in every limb and in turning is one way to hold the stance.
    assert ((found.share**2).sum(axis=1) + found.turning**2
            <= (held.bearing()[fine].sum(axis=1) + 1) * load[fine] ** 2 + 1e-7).all()


@pytest.mark.parametrize("strict", [False, True])
def test_more_capacity_never_makes_a_load_larger(strict: bool) -> None:
    held = random_held(400, 10, absent=0.15, strict=strict)
    more = np.random.default_rng(11).choice([1.0, 1.1, 3.0], held.capacity.shape)
    before = least_load(held).load
    after = least_load(replace(held, capacity=held.capacity * more)).load
    assert np.isfinite(before).any()
    assert (after[np.isfinite(before)] <= before[np.isfinite(before)] + 1e-7).all()


def test_twice_the_capacity_halves_the_load() -> None:
    held = random_held(200, 12)
    double = replace(held, capacity=2.0 * held.capacity, turn=2.0 * held.turn)
    load = least_load(held).load
    fine = np.isfinite(load)
    np.testing.assert_allclose(least_load(double).load[fine], load[fine] / 2, rtol=0, atol=1e-7)


def test_another_contact_never_makes_a_load_larger() -> None:
    held = random_held(300, 13, absent=0.0)
    less = held.rays.copy()
    less[:, 1] = 0.0
    with_three = least_load(replace(held, rays=less)).load
    with_four = least_load(held).load
    finite = np.isfinite(with_three)
    assert (with_four[finite] <= with_three[finite] + 1e-7).all()
    # A hold of no worth is no hold.
    none = held.capacity.copy()
    none[:, 1] = 0.0
    worthless = least_load(replace(held, capacity=none)).load
    np.testing.assert_allclose(worthless[finite], with_three[finite], rtol=0.0, atol=1e-8)


def test_mirrored_stances_have_mirrored_loads() -> None:
    held = random_held(300, 14)
    other = mirrored(held)
    mine, theirs = least_load(held).load, least_load(other).load
    assert (np.isfinite(mine) == np.isfinite(theirs)).all()
    fine = np.isfinite(mine)
    np.testing.assert_allclose(mine[fine], theirs[fine], rtol=0.0, atol=1e-7)
    shares, swapped = limb_loads(held).share, limb_loads(other).share
    np.testing.assert_allclose(swapped[fine][:, [1, 0, 3, 2]], shares[fine], rtol=0.0, atol=2e-5)


def test_where_the_body_stands_in_space_does_not_matter() -> None:
    held = random_held(100, 15)
    away = np.array([1.0, 8.0, -2.0])
    moved = replace(held, point=held.point + away, com=held.com + away)
    mine, theirs = least_load(held).load, least_load(moved).load
    fine = np.isfinite(mine)
    np.testing.assert_allclose(theirs[fine], mine[fine], rtol=0.0, atol=1e-7)


def test_a_load_does_not_depend_on_the_company() -> None:
    held = random_held(64, 16)
    together = least_load(held).load
    alone = np.array([least_load(held.take(np.array([k]))).load[0] for k in range(held.size)])
    assert (np.isfinite(together) == np.isfinite(alone)).all()
    fine = np.isfinite(together)
    np.testing.assert_allclose(alone[fine], together[fine], rtol=0.0, atol=1e-7)


def hung(capacity: float) -> Held:
    """One hand straight above the centre of mass, a single ray upward."""
    rays = np.zeros((1, 4, 1, 3))
    rays[0, 0, 0] = [0.0, 1.0, 0.0]
    point = np.zeros((1, 4, 3))
    point[0, 0] = [0.0, 0.8, 0.0]
    caps = np.array([[capacity, 1.0, 1.0, 1.0]])
    return Held(rays, point, np.zeros((1, 3)), caps, np.full((1, 3), 0.1))


def test_a_hanging_body_loads_its_hand_with_its_weight() -> None:
    assert least_load(hung(0.8)).load == pytest.approx([1.0 / 0.8], abs=1e-8)
    found = limb_loads(hung(0.8))
    assert found.share == pytest.approx(np.array([[1.25, 0.0, 0.0, 0.0]]), abs=1e-6)
    assert found.turning == pytest.approx([0.0], abs=1e-5)
    # In free fall nothing is needed; twice the pull for 1 g upward.
    assert least_load(hung(0.8), np.zeros(3)).load == pytest.approx([0.0], abs=1e-8)
    assert least_load(hung(0.8), np.array([0.0, 2.0, 0.0])).load == pytest.approx([2.5], abs=1e-8)


def test_loads_over_the_limit_are_infinite() -> None:
    assert least_load(hung(1.01 / LIMIT)).load == pytest.approx([LIMIT / 1.01], rel=1e-6)
    assert np.isinf(least_load(hung(0.99 / LIMIT)).load).all()
    assert np.isinf(least_load(hung(0.8), np.array([0.0, -1.0, 0.0])).load).all()
    assert np.isinf(least_load(hung(0.0)).load).all()


def test_no_stances_have_no_loads() -> None:
    held = random_held(0, 0)
    assert least_load(held).load.shape == (0,)
    found = limb_loads(held)
    assert (found.share.shape, found.turning.shape, found.force.shape) == ((0, 4), (0,), (0, 4, 3))


def test_a_body_that_nothing_holds_has_no_load() -> None:
    held = random_held(20, 17, absent=1.0)
    assert np.isinf(least_load(held).load).all()
    found = limb_loads(held)
    assert (found.share == 0.0).all()
    assert np.isinf(found.turning).all()
