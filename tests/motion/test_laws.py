"""Closed forms against numbers worked out beforehand; g = 9.81 m/s².

The numbers were computed from the formulas in the docstrings of ``climbpath.motion.laws`` with
another program, or follow from integrating the law step by step, as it is done here.
"""

from __future__ import annotations

from math import log, pi, sqrt

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from climbpath.errors import DataError
from climbpath.motion import laws

G = 9.81


@pytest.mark.parametrize(
    ("distance", "forward", "backward", "most", "time", "speed"),
    [
        (1.0, 10.0, 10.0, np.inf, 0.632456, 3.162278),
        # Straight up with a force from 0 to 1.5, 2 and 3 body weights.
        (1.0, 0.5 * G, G, np.inf, 0.782062, 2.557342),
        (1.0, 1.0 * G, G, np.inf, 0.638551, 3.132092),
        (1.0, 2.0 * G, G, np.inf, 0.553001, 3.616628),
        (15.0, 5.0, 5.0, 3.0, 5.6, 3.0),
    ],
)
def test_least_time_from_rest_to_rest(distance: float, forward: float, backward: float,
                                      most: float, time: float, speed: float) -> None:
    found = laws.rest_to_rest(distance, forward, backward, most)
    assert found.time == pytest.approx(time, abs=6e-7)
    assert found.speed == pytest.approx(speed, abs=6e-7)


def test_least_time_broadcasts() -> None:
    found = laws.rest_to_rest([[1.0], [2.0]], [1.0, 2.0, 3.0], 4.0)
    assert found.time.shape == (2, 3)
    assert found.time[1, 2] == laws.rest_to_rest(2.0, 3.0, 4.0).time


PUSH_OFFS = [
    (3000.0, 4.0, 75.0, 0.40, 3.305846, 0.557014),
    (3579.2, 3.3527, 75.0, 0.40, 3.352740, 0.572929),
    (2500.0, 3.7, 85.0, 0.42, 2.718405, 0.376643),
]


@pytest.mark.parametrize(("force", "speed", "mass", "push", "left", "height"), PUSH_OFFS)
def test_take_off_speed_from_means(force: float, speed: float, mass: float, push: float,
                                   left: float, height: float) -> None:
    found = laws.take_off_speed(mass, push, force, speed)
    # Force and speed of the second row are rounded to five digits.
    assert found == pytest.approx(left, abs=3e-6)
    assert laws.rise_height(found) == pytest.approx(height, abs=2e-6)
    # Work and kinetic energy agree when the mean speed is half the last one.
    mean = force * (1.0 - 0.5 * found / speed)
    assert (mean - mass * G) * push == pytest.approx(0.5 * mass * found**2)


def test_the_law_of_each_instant_is_another_one() -> None:
    found = laws.push_off(75.0, 0.40, 3000.0, 4.0)
    assert found.speed == pytest.approx(2.68976, abs=6e-6)
    assert found.time == pytest.approx(0.22159, abs=6e-6)
    assert found.speed < laws.take_off_speed(75.0, 0.40, 3000.0, 4.0) - 0.6


@pytest.mark.parametrize(("force", "speed", "mass", "push"), [row[:4] for row in PUSH_OFFS])
def test_push_off_is_that_of_an_integrator(force: float, speed: float, mass: float,
                                           push: float) -> None:
    def move(_: float, state: np.ndarray) -> list[float]:
        return [state[1], force / mass * (1.0 - state[1] / speed) - G]

    def left(_: float, state: np.ndarray) -> float:
        return float(state[0] - push)

    left.terminal = True  # type: ignore[attr-defined]
    run = solve_ivp(move, (0.0, 5.0), [0.0, 0.0], events=left, rtol=1e-11, atol=1e-12)
    found = laws.push_off(mass, push, force, speed)
    assert found.time == pytest.approx(run.t_events[0][0], rel=1e-9)
    assert found.speed == pytest.approx(run.y_events[0][0][1], rel=1e-9)


def test_who_cannot_lift_the_own_weight_does_not_leave() -> None:
    assert laws.take_off_speed(75.0, 0.4, 700.0, 4.0) == 0.0
    assert laws.push_off(75.0, 0.4, 700.0, 4.0) == (np.inf, 0.0)


@given(st.floats(1.05, 6.0), st.floats(0.5, 12.0), st.floats(0.1, 0.7))
@settings(derandomize=True, max_examples=60)
def test_without_loss_by_speed_both_laws_are_one(force: float, mass: float, push: float) -> None:
    strong = force * mass * G
    expected = sqrt(2.0 * (force - 1.0) * G * push)
    assert laws.take_off_speed(mass, push, strong, 1e9) == pytest.approx(expected, rel=1e-6)
    assert laws.push_off(mass, push, strong, 1e4).speed == pytest.approx(expected, rel=1e-2)


@pytest.mark.parametrize(
    ("height", "speed", "time"),
    [(0.3, 2.4261, 0.2473), (0.5, 3.1321, 0.3193), (0.8, 3.9618, 0.4039)],
)
def test_flight(height: float, speed: float, time: float) -> None:
    assert laws.rise_speed(height) == pytest.approx(speed, abs=6e-5)
    assert laws.rise_time(height) == pytest.approx(time, abs=6e-5)
    assert laws.rise_height(laws.rise_speed(height)) == pytest.approx(height)


@pytest.mark.parametrize(("drop", "time"), [(0.02, 0.1277), (0.05, 0.2019), (0.10, 0.2856)])
def test_time_near_the_top(drop: float, time: float) -> None:
    assert laws.time_near_top(drop) == pytest.approx(time, abs=6e-5)


def test_minimum_jerk_peaks() -> None:
    speed, acceleration = laws.minimum_jerk_peaks(0.6, 0.35)
    assert speed == pytest.approx(3.2143, abs=6e-5)
    assert acceleration == pytest.approx(28.278, abs=6e-4)
    tau = np.linspace(0.0, 1.0, 2001)
    way = laws.minimum_jerk(tau, 0.6)
    step = 0.35 / 2000
    assert np.gradient(way, step).max() == pytest.approx(speed, rel=1e-5)
    assert (np.diff(way, 2) / step**2).max() == pytest.approx(acceleration, rel=1e-5)
    assert way[[0, 1000, 2000]] == pytest.approx([0.0, 0.3, 0.6])
    assert laws.minimum_jerk([-1.0, 2.0], 0.6) == pytest.approx([0.0, 0.6])


def test_dimensionless_jerk_of_minimum_jerk() -> None:
    time = np.linspace(0.0, 0.35, 4001)
    tau = time / 0.35
    jerk = 0.6 / 0.35**3 * (60.0 - 360.0 * tau + 360.0 * tau**2)
    found = laws.dimensionless_jerk(time, jerk, float(laws.minimum_jerk_peaks(0.6, 0.35)[0]))
    assert found == pytest.approx(204.8, rel=1e-5)
    assert -log(found) == pytest.approx(-5.3220, abs=6e-5)


def _zigzag() -> np.ndarray:
    side = np.where(np.arange(11) % 2 == 0, -0.25, 0.25)
    return np.stack([side, np.linspace(0.0, 15.0, 11)], axis=1)


def _sine() -> np.ndarray:
    y = np.linspace(0.0, 15.0, 20001)
    return np.stack([0.3 * np.sin(2.0 * pi * y / 3.0), y], axis=1)


@pytest.mark.parametrize(
    ("points", "entropy", "error"),
    [
        ([[0.3, 0.0], [0.3, 4.0], [0.3, 15.0]], 0.0, 1e-12),
        ([[0.0, 0.0], [1.0, 2.0], [0.0, 0.0]], log(2.0), 1e-12),
        ([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]], 0.405465, 6e-7),
        (_zigzag(), 0.047286, 6e-7),
        (_sine(), 0.08241, 6e-6),
    ],
)
def test_geometric_entropy(points: object, entropy: float, error: float) -> None:
    assert laws.geometric_entropy(np.array(points)) == pytest.approx(entropy, abs=error)


def test_path_length_and_hull() -> None:
    assert laws.path_length(_zigzag()) == pytest.approx(15.811388, abs=6e-7)
    assert laws.path_length([[0.0, 0.0, 0.0], [1.0, 2.0, 2.0]]) == pytest.approx(3.0)
    assert laws.hull_perimeter([[0.0, 0.0], [3.0, 4.0]]) == pytest.approx(10.0)
    assert laws.hull_perimeter([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.5, 0.5]]) == (
        pytest.approx(2.0 + sqrt(2.0)))


def test_every_value_that_cannot_be_is_named() -> None:
    with pytest.raises(DataError) as caught:
        laws.push_off(0.0, 0.4, -1.0, 4.0)
    assert [problem.key for problem in caught.value.problems] == ["mass", "force"]
    with pytest.raises(DataError, match="different points"):
        laws.geometric_entropy([[1.0, 1.0], [1.0, 1.0]])
    with pytest.raises(DataError, match="increasing"):
        laws.dimensionless_jerk([0.0, 0.0], [1.0, 1.0], 1.0)
