"""Fitting: predictors whose truth is known, closed forms, and what data cannot tell."""

from __future__ import annotations

import math
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import lsq_linear
from scipy.stats import norm

from climbpath.errors import UsageError
from climbpath.study.fitting import (
    Fit,
    FitOptions,
    Observations,
    Prior,
    alike,
    amount_told,
    fit,
    what_cannot_be_told,
)
from climbpath.study.linear_fit import ROBUST_MEAN, Linearised, boxed
from climbpath.study.prediction_errors import mean_of_others

Array = NDArray[np.float64]
Predict = Callable[[Array], Array]

NAMES = ("speed", "delay", "drag")
DEFAULT = np.array([2.0, 0.2, 0.1])
PRIOR = Prior(DEFAULT, 0.3 * DEFAULT, 0.2 * DEFAULT, 3.0 * DEFAULT)


def climbing(runs: int = 10, each: int = 12, seed: int = 0) -> tuple[Predict, NDArray[np.int64]]:
    """Times of moves over random distances: d / speed + drag d², and a delay before the first."""
    distance = np.random.default_rng(seed).uniform(0.3, 1.2, runs * each)
    first = np.tile(np.arange(each) == 0, runs)

    def predict(p: Array) -> Array:
        return np.asarray(distance / p[0] + p[1] * first + p[2] * distance**2)

    return predict, np.repeat(np.arange(runs), each)


def seen(time: Array, run: NDArray[np.int64]) -> Observations:
    return Observations(time, run, np.ones(len(time)))


def test_recovers_the_truth() -> None:
    predict, run = climbing()
    truth = np.array([2.7, 0.15, 0.13])
    time = predict(truth) + 0.001 * np.random.default_rng(1).standard_normal(len(run))
    found = fit(predict, seen(time, run), PRIOR, FitOptions(error=0.001))
    # Errors of 1 ms over 120 moves: the standard errors say how near it must come.
    assert found.converged
    assert (np.abs(found.estimate - truth) < 4.0 * found.standard_error).all()
    assert found.estimate == pytest.approx(truth, rel=0.02)
    assert found.error_size == pytest.approx(0.001, rel=0.2)
    assert found.errors.in_sample < found.errors.left_out < 0.1 * found.errors.default  # type: ignore[operator]
    assert what_cannot_be_told(found, NAMES) == ()


def test_recovers_it_from_times_on_a_lattice_with_few_predictions() -> None:
    predict, run = climbing()
    truth = np.array([1.6, 0.26, 0.08])
    time = predict(truth) + 0.005 * np.random.default_rng(2).standard_normal(len(run))
    found = fit(lambda p: np.round(predict(p), 3), seen(time, run), PRIOR, FitOptions(error=0.005))
    assert (np.abs(found.estimate - truth) < 4.0 * found.standard_error).all()
    assert found.estimate == pytest.approx(truth, rel=0.1)
    # Two searches of five or so steps (one prediction and three for slopes each), and both sides
    # of three slopes at the end; 15 steps a search is what is allowed.
    assert found.predictions <= 60


def linear_case(seed: int = 3) -> tuple[Array, Observations, Prior]:
    """A predictor that is a matrix, with wide bounds: everything has a closed form."""
    generator = np.random.default_rng(seed)
    matrix = generator.uniform(0.0, 1.0, (40, 3))
    time = matrix @ np.array([1.3, 0.7, 1.1]) + 0.1 * generator.standard_normal(40)
    ones = np.ones(3)
    prior = Prior(ones, 0.3 * ones, -50.0 * ones, 50.0 * ones)
    return matrix, Observations(time, np.repeat(np.arange(8), 5), np.ones(40)), prior


def posterior_mean(matrix: Array, time: Array, prior: Prior, size: float) -> tuple[Array, Array]:
    """Mean and covariance of a linear model with normal prior and errors (any textbook)."""
    precision = matrix.T @ matrix / size**2 + np.diag(prior.sd**-2)
    pulled = matrix.T @ time / size**2 + prior.default / prior.sd**2
    return np.linalg.solve(precision, pulled), np.linalg.inv(precision)


def test_a_linear_model_has_its_closed_form() -> None:
    matrix, data, prior = linear_case()
    found = fit(lambda p: matrix @ p, data, prior, FitOptions(robust=False))
    size = found.error_size
    mean, covariance = posterior_mean(matrix, data.time, prior, size)
    assert found.estimate == pytest.approx(mean, abs=1e-6)
    spread = np.sqrt(np.diag(covariance))
    assert found.prior_share == pytest.approx((spread / prior.sd)**2)
    assert found.correlation == pytest.approx(covariance / np.outer(spread, spread))
    scaled = matrix * prior.sd / size
    assert found.singular_values == pytest.approx(np.linalg.svd(scaled, compute_uv=False))
    # The size of the errors agrees with its own definition: expected ones count as two more.
    left = float(((data.time - matrix @ mean)**2).sum())
    used = 3.0 - float(found.prior_share.sum())
    assert size == pytest.approx(math.sqrt((2.0 * 0.08**2 + left) / (2.0 + 40.0 - used)), rel=2e-3)


def test_leaving_a_run_out_is_fitting_the_others() -> None:
    matrix, data, prior = linear_case()
    found = fit(lambda p: matrix @ p, data, prior, FitOptions(robust=False))
    for run in range(8):
        others, own = data.run != run, data.run == run
        mean, _ = posterior_mean(matrix[others], data.time[others], prior, found.error_size)
        assert found.left_out[own] == pytest.approx(matrix[own] @ mean, abs=1e-6)
    assert found.errors.left_out == pytest.approx(
        math.sqrt(np.mean((data.time - found.left_out)**2)))


@pytest.mark.parametrize("robust", [False, True])
def test_intervals_cover_what_they_say(robust: bool) -> None:
    inside, repeats = np.zeros(3), 100
    for seed in range(repeats):
        generator = np.random.default_rng(seed)
        predict, run = climbing(seed=seed)
        drawn = PRIOR.default + PRIOR.sd * generator.standard_normal(3)
        truth = np.clip(drawn, PRIOR.low, PRIOR.high)
        # Errors of single moves, and good and bad days.
        error = 0.05 * generator.standard_normal(len(run))
        error += 0.01 * generator.standard_normal(10)[run]
        found = fit(predict, seen(predict(truth) + error, run), PRIOR,
                    FitOptions(draws=60, robust=robust))
        inside += (found.interval[:, 0] <= truth) & (truth <= found.interval[:, 1])
    # 80 %, ± 3 standard deviations of a binomial share of 300: .8 ± .07.
    assert inside.sum() / (3 * repeats) == pytest.approx(0.8, abs=0.07)
    # And each for itself, ± 3.5 of a share of 100: .8 ± .14.
    assert inside / repeats == pytest.approx(np.full(3, 0.8), abs=0.14)


def test_what_the_data_do_not_touch_keeps_its_prior() -> None:
    predict, run = climbing()

    def without_drag(p: Array) -> Array:
        return predict(np.array([p[0], p[1], 0.1]))

    time = without_drag(np.array([2.5, 0.2, 0.0]))
    found = fit(without_drag, seen(time, run), PRIOR, FitOptions(draws=4000))
    assert found.prior_share[2] == pytest.approx(1.0)
    assert found.estimate[2] == pytest.approx(DEFAULT[2])
    # 80 % of a normal prior: ± 1.2816 deviations; quantiles of 4000 draws to about 3 %.
    half = norm.ppf(0.9) * PRIOR.sd[2]
    assert found.interval[2] == pytest.approx(DEFAULT[2] + np.array([-half, half]), abs=0.08 * half)
    assert what_cannot_be_told(found, NAMES) == ("The runs say nothing about drag.",)
    assert amount_told(float(found.prior_share[0])) == "much"


def test_what_only_acts_together_is_named() -> None:
    predict, run = climbing()

    def alike_two(p: Array) -> Array:
        return predict(np.array([2.0 / (p[0] + p[2]), 0.2, 0.0])) + 0.0 * p[1]

    prior = Prior(np.ones(3), 0.3 * np.ones(3), 0.1 * np.ones(3), 3.0 * np.ones(3))
    time = alike_two(np.array([1.2, 1.0, 1.3]))
    found = fit(alike_two, seen(time, run), prior, FitOptions(error=0.01))
    assert alike(found) == [(0, 2)]
    assert found.estimate[0] + found.estimate[2] == pytest.approx(2.5, abs=0.02)
    # Of two that only add up, half of each one's prior variance is left.
    assert found.prior_share[[0, 2]] == pytest.approx([0.5, 0.5], abs=0.01)
    said = what_cannot_be_told(found, ("reach", "delay", "pull"))
    assert said[0] == "The runs cannot tell reach from pull."
    assert "The runs say nothing about delay." in said


def test_bounds_are_kept() -> None:
    predict, run = climbing()
    narrow = Prior(DEFAULT, 0.3 * DEFAULT, np.array([1.8, 0.1, 0.05]), np.array([2.2, 0.3, 0.2]))
    found = fit(predict, seen(predict(np.array([3.0, 0.2, 0.1])), run), narrow,
                FitOptions(error=0.01))
    assert 2.15 < found.estimate[0] <= 2.2
    assert found.at_bound[0]
    assert (found.interval >= narrow.low[:, None]).all()
    assert (found.interval <= narrow.high[:, None]).all()


def test_the_seed_decides_the_draws_and_nothing_else() -> None:
    predict, run = climbing()
    time = predict(DEFAULT * 1.1) + 0.05 * np.random.default_rng(5).standard_normal(len(run))

    def fitted(seed: int) -> Fit:
        return fit(predict, seen(time, run), PRIOR, FitOptions(draws=50, seed=seed))

    first, again, other = fitted(1), fitted(1), fitted(2)
    assert (first.interval == again.interval).all()
    assert (first.estimate == other.estimate).all()
    assert not (first.interval == other.interval).all()


def test_a_slip_that_nobody_noted_does_not_decide() -> None:
    predict, run = climbing()
    truth = np.array([2.4, 0.2, 0.1])
    time = predict(truth) + 0.02 * np.random.default_rng(7).standard_normal(len(run))
    time[[17, 55, 90]] += 1.0
    robust = fit(predict, seen(time, run), PRIOR)
    plain = fit(predict, seen(time, run), PRIOR, FitOptions(robust=False))
    assert abs(robust.estimate[0] - 2.4) < 0.5 * abs(plain.estimate[0] - 2.4)
    assert (robust.weight[[17, 55, 90]] < 0.2).all()
    assert np.median(robust.weight) > 0.8


def test_where_nothing_is_found_the_search_keeps_away() -> None:
    predict, run = climbing()

    def up_to_a_speed(p: Array) -> Array:
        return predict(p) if p[0] < 2.3 else np.full(len(run), np.inf)

    time = predict(np.array([2.6, 0.2, 0.1]))
    found = fit(up_to_a_speed, seen(time, run), PRIOR, FitOptions(error=0.01))
    assert 2.1 < found.estimate[0] < 2.3
    with pytest.raises(UsageError, match="default"):
        fit(lambda _: np.full(len(run), np.nan), seen(time, run), PRIOR)


def test_an_executor_changes_nothing() -> None:
    predict, run = climbing()
    data = seen(predict(DEFAULT * 1.2), run)
    alone = fit(predict, data, PRIOR)
    with ThreadPoolExecutor(2) as pool:
        shared = fit(predict, data, PRIOR, executor=pool)
    assert (alone.estimate == shared.estimate).all()
    assert (alone.interval == shared.interval).all()


def test_one_run_is_enough_and_says_less() -> None:
    predict, run = climbing(runs=1)
    found = fit(predict, seen(predict(DEFAULT * 1.2), run), PRIOR)
    assert not found.resampled
    assert found.errors.left_out is None
    assert np.isnan(found.left_out).all()
    assert (found.interval[:, 0] < found.interval[:, 1]).all()
    more_predict, more_run = climbing(runs=20)
    more = fit(more_predict, seen(more_predict(DEFAULT * 1.2), more_run), PRIOR)
    assert more.resampled
    assert (more.prior_share < found.prior_share).all()


def test_the_mean_of_other_runs() -> None:
    time, run = np.array([1.0, 2.0, 4.0, 9.0, 5.0]), np.array([0, 0, 1, 1, 2])
    others = mean_of_others(time, run, ["a", "b", "a", "c", "a"])
    # "a" is in all three runs; "b" and "c" in one each.
    assert others[[0, 2, 4]].tolist() == [4.5, 3.0, 2.5]
    assert np.isnan(others[[1, 3]]).all()
    predict, number = climbing(runs=3, each=4)
    labels = list(range(4)) * 3
    found = fit(predict, seen(predict(DEFAULT), number), PRIOR, labels=labels)
    assert found.errors.others_count == 12
    assert found.errors.left_out_there == found.errors.left_out


def test_the_box_is_solved_as_an_independent_solver_does() -> None:
    generator = np.random.default_rng(11)
    low, high = -np.ones(6), 0.5 * np.ones(6)
    for _ in range(100):
        matrix = generator.standard_normal((9, 6)) * 10.0**generator.uniform(-2.0, 1.0, 6)
        matrix = np.vstack([matrix, np.eye(6)])
        wanted = 3.0 * generator.standard_normal(15)
        oracle = lsq_linear(matrix, wanted, (-1.0, 0.5), method="bvls", tol=1e-14).x
        found = boxed(matrix.T @ matrix, matrix.T @ wanted, low, high)
        assert found == pytest.approx(oracle, abs=1e-8)


def test_reweighting_ends_at_the_minimum_of_the_robust_sum() -> None:
    generator = np.random.default_rng(13)
    slope, wide = generator.standard_normal((30, 2)), 100.0 * np.ones(2)
    target = slope @ np.array([0.5, -0.3]) + generator.standard_t(2.0, 30)
    model = Linearised(slope, target, np.zeros(2), -wide, wide, robust=True)
    found = model.refit(np.ones(30))

    def total(u: Array) -> float:
        left = target - slope @ u
        return float((2.0 * np.sqrt(1.0 + left**2)).sum() + (u**2).sum())

    for step in (1e-3, -1e-3):
        for axis in np.eye(2):
            assert total(found + step * axis) > total(found)


def test_the_mean_of_a_reweighted_square() -> None:
    z = np.linspace(-12.0, 12.0, 200_001)
    value = np.trapezoid(z**2 / np.sqrt(1.0 + z**2) * norm.pdf(z), z)
    assert value == pytest.approx(ROBUST_MEAN, abs=1e-5)
