"""Pacing under linear rows: closed forms, refinement, and another program of the same method."""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest
import toppra
import toppra.algorithm
import toppra.constraint as limits
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from climbpath.errors import DataError, NoPacingError
from climbpath.motion.pacing import Pacing, pace_rows
from tests.motion.pacing_cases import G

Array = NDArray[np.float64]

toppra.setup_logging("ERROR")


def between(length: float, count: int, forward: float, backward: float,
            most: float = np.inf) -> Pacing:
    """A straight way with accelerations from -backward to forward, from rest to rest."""
    ones = np.ones((count + 1, 1))
    a = np.hstack([ones, -ones])
    return pace_rows(np.linspace(0.0, length, count + 1), a, 0.0 * a,
                     np.hstack([-forward * ones, -backward * ones]), most=most)


# T and peak speed = √(2 D (a+ + a-) / (a+ a-)), √(2 D a+ a- / (a+ + a-)); for 15 m D / v + v / a.
@pytest.mark.parametrize(
    ("length", "forward", "backward", "most", "time", "peak"),
    [
        (1.0, 10.0, 10.0, np.inf, 0.632456, 3.162278),
        (1.0, 0.5 * G, G, np.inf, 0.782062, 2.557342),
        (1.0, 1.0 * G, G, np.inf, 0.638551, 3.132092),
        (1.0, 2.0 * G, G, np.inf, 0.553001, 3.616628),
        (15.0, 5.0, 5.0, 3.0, 5.6, 3.0),
    ],
)
def test_straight_ways(length: float, forward: float, backward: float, most: float, time: float,
                       peak: float) -> None:
    pacing = between(length, 600, forward, backward, most)
    assert pacing.duration == pytest.approx(time, abs=1e-6)
    assert pacing.speed.max() == pytest.approx(peak, abs=1e-6)
    assert pacing.time[-1] == pacing.duration
    assert pacing.acceleration.max() == pytest.approx(forward, rel=1e-9)
    assert pacing.acceleration.min() == pytest.approx(-backward, rel=1e-9)


def test_straight_way_on_a_grid_that_misses_the_switch() -> None:
    errors = [between(1.0, count, 0.5 * G, G).duration - 0.782062 for count in (10, 40, 160)]
    # Never quicker than the best, and closer on a finer grid.
    assert min(errors) > -1e-6
    assert errors[0] > 10.0 * errors[1] > 10.0 * errors[2] > -1e-5


def round_the_half_circle(count: int, sides: int = 90) -> Pacing:
    """Radius .5 m; the accelerations lie in a polygon inside the circle of 5 m/s²."""
    s = np.linspace(0.0, 0.5 * pi, count + 1)
    angle = s / 0.5
    along = np.stack([-np.sin(angle), np.cos(angle)], axis=1)
    inward = -np.stack([np.cos(angle), np.sin(angle)], axis=1) / 0.5
    normal = 2.0 * pi * np.arange(sides) / sides
    rows = np.stack([np.cos(normal), np.sin(normal)])
    within = np.full((count + 1, sides), -5.0 * np.cos(pi / sides))
    return pace_rows(s, along @ rows, inward @ rows, within)


def test_half_circle() -> None:
    coarse, fine = round_the_half_circle(60), round_the_half_circle(240)
    # Rest to rest in 1.325897 s with √2.5 m/s from 45° on, after 0.414584 s.
    assert 1.325897 < fine.duration < coarse.duration
    assert fine.duration == pytest.approx(1.325897, rel=2e-3)
    assert fine.speed.max() == pytest.approx(sqrt(2.5), rel=1e-3)
    assert np.interp(0.5 * pi / 4.0, fine.s, fine.time) == pytest.approx(0.414584, rel=5e-3)


class Problem:
    """A random cubic spline in space with bounds on speeds and on a linear inverse dynamic."""

    def __init__(self, seed: int) -> None:
        draw = np.random.default_rng(seed)
        knots = int(draw.integers(4, 8))
        self.place = np.cumsum(draw.uniform(0.2, 1.0, knots))
        self.place -= self.place[0]
        self.points = draw.normal(size=(knots, 3))
        self.mix = draw.normal(size=(3, 3))
        self.drag = 0.3 * draw.normal(size=3)
        self.high, self.low = draw.uniform(1.0, 6.0, 3), -draw.uniform(1.0, 6.0, 3)
        self.most = draw.uniform(0.5, 3.0, 3)

    def effort(self, q: Array, speed: Array, acceleration: Array) -> Array:
        return self.mix @ acceleration + self.drag * (speed @ speed) + 0.1 * np.sin(q)

    def rows(self, s: Array) -> tuple[Array, Array, Array, Array]:
        spline = CubicSpline(self.place, self.points)
        q, first, second = spline(s), spline(s, 1), spline(s, 2)
        a = first @ self.mix.T
        b = second @ self.mix.T + self.drag * (first**2).sum(axis=1)[:, None]
        c = 0.1 * np.sin(q)
        most = (self.most / np.maximum(np.abs(first), 1e-12)).min(axis=1)
        return (np.hstack([a, -a]), np.hstack([b, -b]),
                np.hstack([c - self.high, self.low - c]), most)

    def pacing(self, count: int) -> Pacing:
        s = np.linspace(0.0, self.place[-1], count + 1)
        a, b, c, most = self.rows(s)
        return pace_rows(s, a, b, c, most=most)

    def time_by_toppra(self, count: int) -> float:
        s = np.linspace(0.0, self.place[-1], count + 1)
        scheme = limits.DiscretizationType.Interpolation
        inside, bound = np.vstack([np.eye(3), -np.eye(3)]), np.hstack([self.high, -self.low])
        efforts = limits.SecondOrderConstraint(
            self.effort, lambda q: inside, lambda q: bound, 3, discretization_scheme=scheme)
        speeds = limits.JointVelocityConstraint(np.stack([-self.most, self.most], axis=1))
        path = toppra.SplineInterpolator(self.place, self.points, bc_type="not-a-knot")
        solver = toppra.algorithm.TOPPRA([speeds, efforts], path, gridpoints=s,
                                         solver_wrapper="seidel")
        _, speed, _ = solver.compute_parameterization(0.0, 0.0)
        return float((2.0 * np.diff(s) / (speed[1:] + speed[:-1])).sum())


def test_durations_are_those_of_another_program() -> None:
    for seed in range(60):
        problem = Problem(seed)
        times = np.array([problem.pacing(count).duration for count in (60, 120)])
        others = np.array([problem.time_by_toppra(count) for count in (60, 120)])
        np.testing.assert_allclose(times, others, rtol=5e-4, err_msg=f"seed {seed}")


def test_refined_durations_go_where_those_of_another_program_go() -> None:
    for seed in range(100, 106):
        problem = Problem(seed)
        limit = problem.time_by_toppra(960)
        coarse, fine = (abs(problem.pacing(count).duration / limit - 1.0) for count in (60, 480))
        assert fine < 5e-3
        assert fine < 0.5 * coarse + 1e-4


def test_rows_hold_at_both_ends_of_every_interval() -> None:
    for seed in range(20):
        problem = Problem(seed)
        pacing = problem.pacing(100)
        a, b, c, most = problem.rows(pacing.s)
        u, x = pacing.acceleration[:, None], (pacing.speed**2)[:, None]
        assert (a[:-1] * u + b[:-1] * x[:-1] + c[:-1]).max() < 1e-7
        assert (a[1:] * u + b[1:] * x[1:] + c[1:]).max() < 1e-7
        assert (pacing.speed - most).max() < 1e-9


@pytest.mark.parametrize("count", [40, 41])
def test_a_place_without_inertia(count: int) -> None:
    # q = (s, s² - s) with bounds by axis: in the middle no u moves the second one.
    s = np.linspace(0.0, 1.0, count + 1)
    first = np.stack([np.ones_like(s), 2.0 * s - 1.0], axis=1)
    second = np.stack([np.zeros_like(s), np.full_like(s, 2.0)], axis=1)
    pacing = pace_rows(s, np.hstack([first, -first]), np.hstack([second, -second]),
                       np.full((count + 1, 4), -4.0))
    # There 2 x <= 4 is all that bounds the speed.
    assert pacing.speed.max() == pytest.approx(sqrt(2.0), rel=1e-2)
    assert pacing.speed[count // 2] <= sqrt(2.0) + 1e-9


def test_only_the_near_end_counts_without_the_far_one() -> None:
    s = np.linspace(0.0, 1.0, 11)
    rows = np.array([[1.0, -1.0]]).repeat(11, axis=0)
    bound = -np.stack([2.0 + s, 2.0 + s], axis=1)
    both = pace_rows(s, rows, 0.0 * rows, bound, end=None)
    near = pace_rows(s, rows, 0.0 * rows, bound, end=None, far_end=False)
    np.testing.assert_allclose(both.acceleration, 2.0 + s[:-1], rtol=1e-9)
    np.testing.assert_allclose(near.acceleration, 2.0 + s[:-1], rtol=1e-9)
    falling = pace_rows(s, rows, 0.0 * rows, bound[::-1], end=None)
    np.testing.assert_allclose(falling.acceleration, 3.0 - s[1:], rtol=1e-9)


def test_what_cannot_be_paced_says_where() -> None:
    s, ones = np.linspace(0.0, 1.0, 6), np.ones((6, 2))
    a = ones * [1.0, -1.0]
    c = -ones
    c[3, 0] = 2.0
    with pytest.raises(NoPacingError) as caught:
        pace_rows(s, a, 0.0 * a, c)
    assert caught.value.place in (2, 3)
    # 2 m/s cannot be shed within a metre at 1 m/s², and no limit at all has no best.
    with pytest.raises(NoPacingError, match="grid point 0"):
        pace_rows(s, a, 0.0 * a, -ones, start=2.0)
    with pytest.raises(NoPacingError, match="nothing bounds"):
        pace_rows(s, -ones, 0.0 * a, -ones, end=None)
    with pytest.raises(NoPacingError, match="stops"):
        pace_rows(s, a, 0.0 * a, 0.0 * ones)


def test_every_argument_that_does_not_fit_is_named() -> None:
    with pytest.raises(DataError) as caught:
        pace_rows([0.0, 1.0, 1.0], np.ones((3, 2)), np.ones((2, 2)), np.full((3, 2), np.nan),
                  most=[1.0, 2.0], start=-1.0, end=np.inf)
    assert [problem.key for problem in caught.value.problems] == [
        "s", "b", "c", "most", "start", "end"]
