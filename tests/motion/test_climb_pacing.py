"""Pacing of a climber: closed forms, the true limit, a slow second solver, phases and flights."""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.errors import DataError, NoPacingError
from climbpath.motion.climb_pacing import SLACK, climb_forces, pace_climb
from climbpath.motion.laws import push_off, rest_to_rest
from climbpath.motion.pacing import Pacing
from climbpath.motion.path_shape import path_shape
from tests.motion.pacing_cases import (
    G,
    half_circle,
    lattice_time,
    random_climb,
    straight,
    swaying,
)

Array = NDArray[np.float64]

EXACT = 1e-6
"""By how much a force may be above its limit, as a share."""


def excess(pacing: Pacing, path: Array, strength: Array, fastest: float,
           bounds: list[int]) -> float:
    """Largest share by which the needed force is above S (1 - v / V0)."""
    force = np.linalg.norm(climb_forces(pacing, path, strength, fastest, bounds=bounds), axis=2)
    speed = np.stack([pacing.speed[:-1], pacing.speed[1:]], axis=1)
    allowed = np.where(strength <= SLACK, SLACK, strength * (1.0 - speed / fastest))
    return float((force / allowed).max() - 1.0)


# Closed forms


def level(acceleration: float, count: int) -> Array:
    """Strength that leaves this acceleration [m/s²] on a level path, beside carrying the body."""
    return np.full(count + 1, sqrt(1.0 + (acceleration / G) ** 2))


def test_level_ways() -> None:
    found = pace_climb(straight(1.0, 300), level(10.0, 300), np.inf, end_speed=0.0)
    assert found.duration == pytest.approx(0.632456, abs=1e-6)
    assert found.speed.max() == pytest.approx(3.162278, abs=1e-6)
    found = pace_climb(straight(15.0, 600), level(5.0, 600), np.inf, end_speed=0.0, most_speed=3.0)
    assert found.duration == pytest.approx(5.6, abs=1e-6)
    assert found.speed.max() == pytest.approx(3.0, abs=1e-9)


def test_half_circle() -> None:
    # Radius .5 m, total acceleration up to 5 m/s²: 1.325897 s, √2.5 m/s from 45° on.
    times = [pace_climb(half_circle(count), level(5.0, count), np.inf, end_speed=0.0).duration
             for count in (60, 120, 240)]
    assert 1.325897 < times[2] < times[1] < times[0]
    assert times[2] == pytest.approx(1.325897, rel=1e-4)
    found = pace_climb(half_circle(240), level(5.0, 240), np.inf, end_speed=0.0)
    assert found.s[-1] == pytest.approx(0.5 * pi, rel=1e-8)
    assert found.speed.max() == pytest.approx(sqrt(2.5), rel=1e-4)
    assert found.time[60] == pytest.approx(0.414584, rel=1e-3)


@pytest.mark.parametrize(
    ("strength", "time", "peak"),
    [(1.5, 0.782062, 2.557342), (2.0, 0.638551, 3.132092), (3.0, 0.553001, 3.616628)],
)
def test_one_metre_up_on_a_force_from_nothing(strength: float, time: float, peak: float) -> None:
    # Full force over the share 1 / S of the way, then free fall up to the top.
    switch = 1.0 / strength
    height = np.concatenate([np.linspace(0.0, switch, 51), np.linspace(switch, 1.0, 51)[1:]])
    path = np.stack([0.0 * height, height, 0.0 * height], axis=1)
    forces = np.repeat([[strength, strength], [0.0, 0.0]], 50, axis=0)
    found = pace_climb(path, forces, np.inf, end_speed=0.0, bounds=[0, 50, 100], slack=1e-9)
    assert found.duration == pytest.approx(time, abs=1e-6)
    assert found.speed.max() == pytest.approx(peak, abs=1e-6)


@pytest.mark.parametrize("strength", [1.2, 2.0, 3.5])
def test_up_with_a_force_in_both_directions(strength: float) -> None:
    found = pace_climb(straight(2.0, 240, 1), np.full(241, strength), np.inf, end_speed=0.0)
    best = rest_to_rest(2.0, (strength - 1.0) * G, (strength + 1.0) * G)
    assert found.duration == pytest.approx(float(best.time), rel=2e-4)
    assert found.speed.max() == pytest.approx(float(best.speed), rel=2e-2)


@pytest.mark.parametrize(("strength", "fastest", "push"), [
    # 3000 N, 75 kg; 2.68976 m/s after 0.22159 s.
    (3000.0 / (75.0 * G), 4.0, 0.40),
    (1.6, 2.5, 0.7),
    (1.05, 6.0, 3.0),
])
def test_a_push_off_with_force_lost_by_speed(strength: float, fastest: float,
                                             push: float) -> None:
    closed = push_off(75.0, push, strength * 75.0 * G, fastest)
    errors = []
    for count in (50, 200, 800):
        found = pace_climb(straight(push, count, 1), np.full(count + 1, strength), fastest)
        errors.append(abs(found.duration / float(closed.time) - 1.0))
        assert found.speed[-1] == pytest.approx(float(closed.speed), rel=0.05 * 50 / count)
    assert errors[2] < 1e-3
    assert errors[2] < 0.5 * errors[1] < 0.25 * errors[0]


# The true limit


@pytest.mark.parametrize("fastest", [3.0, 6.0, 12.0, np.inf])
def test_forces_keep_within_the_strength(fastest: float) -> None:
    for seed in range(12):
        path, strength, bounds = random_climb(seed, 90 + 5 * seed, 1.05)
        found = pace_climb(path, strength, fastest, bounds=bounds,
                           end_speed=0.0 if seed % 2 else None)
        assert excess(found, path, strength, fastest, bounds) < EXACT
        assert found.speed.max() < fastest


def test_forces_make_the_motion() -> None:
    path, strength, bounds = random_climb(3, 800, 1.2)
    found = pace_climb(path, strength, 8.0, bounds=bounds)
    force = climb_forces(found, path, strength, 8.0, bounds=bounds).mean(axis=1)
    velocity = found.speed[:, None] * path_shape(path, bounds).tangent
    step = np.diff(found.time)[:, None]
    change = np.diff(velocity, axis=0) / step / G + [0.0, 1.0, 0.0]
    miss = np.linalg.norm(change - force, axis=1)
    # The first intervals pass from rest in steps of time that are not short.
    assert np.median(miss) < 2e-3
    assert miss[5:].max() < 0.1
    # Speeds are those of the points, too.
    way = np.linalg.norm(np.diff(path, axis=0), axis=1) / np.diff(found.time)
    assert way[5:] == pytest.approx(0.5 * (found.speed[:-1] + found.speed[1:])[5:], rel=1e-4)


@pytest.mark.parametrize("fastest", [4.0, 9.0, np.inf])
def test_no_profile_on_a_lattice_is_quicker(fastest: float) -> None:
    for seed in range(20, 26):
        weakest = (1.05, 0.8, 1.3)[seed % 3]
        path, strength, _ = random_climb(seed, 36, weakest)
        end = 0.0 if seed % 2 else None
        # One part: the second solver knows no others.
        other = lattice_time(path, strength, fastest, end)
        if not np.isfinite(other):
            with pytest.raises(NoPacingError):
                pace_climb(path, strength, fastest, end_speed=end)
            continue
        found = pace_climb(path, strength, fastest, end_speed=end).duration
        # Near the tips of its limits a grid this coarse costs the pacing a little.
        assert found < 1.005 * other
        assert found > 0.8 * other


def test_durations_settle_on_finer_grids() -> None:
    for strength, fastest in ((1.3, np.inf), (2.0, 8.0), (1.1, 4.0)):
        times = [pace_climb(swaying(count), np.full(count + 1, strength), fastest).duration
                 for count in (100, 200, 800)]
        assert times[1] == pytest.approx(times[2], rel=4e-3)
        assert abs(times[1] - times[2]) < 0.5 * abs(times[0] - times[2])


def test_more_strength_or_speed_is_never_slower() -> None:
    for seed in range(8):
        path, strength, bounds = random_climb(seed, 120, 1.1)
        times = [pace_climb(path, more * strength, fastest, bounds=bounds).duration
                 for more, fastest in ((1.0, 4.0), (1.05, 4.0), (1.5, 4.0), (1.5, 6.0),
                                       (1.5, np.inf))]
        assert (np.diff(times) < 1e-9).all()


def test_a_mirrored_path_takes_as_long() -> None:
    path, strength, bounds = random_climb(5, 120, 1.1)
    found = pace_climb(path, strength, 5.0, bounds=bounds)
    other = pace_climb(path * [-1.0, 1.0, 1.0], strength, 5.0, bounds=bounds)
    np.testing.assert_allclose(other.speed, found.speed, rtol=1e-9, atol=1e-9)


def test_a_weak_place_is_passed_with_the_speed_brought_along() -> None:
    # .9 body weights hold nobody, but 10 cm of it do not stop who comes with 2 m/s.
    strength = np.full((200, 2), 2.5)
    strength[100:110] = 0.9
    bounds = [0, 100, 110, 200]
    path = straight(2.0, 200, 1)
    found = pace_climb(path, strength, 8.0, bounds=bounds)
    assert found.speed[105] > 1.0
    assert found.speed[110] < found.speed[100]
    assert excess(found, path, strength, 8.0, bounds) < EXACT
    with pytest.raises(NoPacingError):
        pace_climb(path, np.full(201, 0.9), 8.0)


# Phases


def test_phases_last_as_long_as_they_must_and_the_others_stay() -> None:
    path, bounds = swaying(200), [0, 70, 120, 160, 200]
    strength = np.full((200, 2), 1.6)
    free = pace_climb(path, strength, np.inf, bounds=bounds, end_speed=0.0)
    times = np.diff(free.time[bounds])
    least = times * [0.5, 1.2, 0.9, 1.0]
    held = pace_climb(path, strength, np.inf, bounds=bounds, end_speed=0.0, least=least)
    found = np.diff(held.time[bounds])
    assert (found >= least).all()
    assert found[1] == pytest.approx(least[1], rel=1e-6)
    # The second phase slows down between its ends, so that no other one has to.
    assert found[[0, 2, 3]] == pytest.approx(times[[0, 2, 3]], rel=1e-4)
    assert excess(held, path, strength, np.inf, bounds) < EXACT


def test_a_phase_too_short_to_slow_down_slows_its_neighbours() -> None:
    path, bounds = straight(2.0, 200, 1), [0, 95, 105, 200]
    strength = np.full((200, 2), 1.5)
    free = pace_climb(path, strength, 10.0, bounds=bounds, end_speed=0.0)
    least = [0.0, 0.5, 0.0]
    held = pace_climb(path, strength, 10.0, bounds=bounds, end_speed=0.0, least=least)
    found, before = np.diff(held.time[bounds]), np.diff(free.time[bounds])
    assert found[1] == pytest.approx(0.5, rel=1e-5)
    assert (found[[0, 2]] > before[[0, 2]]).all()
    assert excess(held, path, strength, 10.0, bounds) < EXACT


@pytest.mark.parametrize("fastest", [5.0, np.inf])
def test_many_phases(fastest: float) -> None:
    draw = np.random.default_rng(7)
    path, bounds = swaying(180), list(range(0, 181, 15))
    for _ in range(3):
        strength = np.repeat(draw.uniform(1.3, 3.0, 12), 15)[:, None].repeat(2, axis=1)
        free = pace_climb(path, strength, fastest, bounds=bounds, end_speed=0.0)
        times = np.diff(free.time[bounds])
        least = times * draw.choice([0.5, 1.1, 1.5, 3.0], 12)
        held = pace_climb(path, strength, fastest, bounds=bounds, end_speed=0.0, least=least)
        found = np.diff(held.time[bounds])
        assert (found >= least).all()
        assert held.duration < 1.25 * np.maximum(least, times).sum()
        assert excess(held, path, strength, fastest, bounds) < EXACT


def test_a_phase_that_cannot_take_so_long() -> None:
    # Free fall takes what it takes.
    path, bounds = straight(1.0, 100, 1), [0, 70, 100]
    strength = np.repeat([[2.0, 2.0], [0.0, 0.0]], [70, 30], axis=0)
    found = pace_climb(path, strength, 8.0, bounds=bounds)
    longest = pace_climb(path, strength, 8.0, bounds=bounds, end_speed=0.0)
    assert np.diff(longest.time[bounds])[1] > np.diff(found.time[bounds])[1]
    with pytest.raises(NoPacingError):
        pace_climb(path, strength, 8.0, bounds=bounds, least=[0.0, 1.0])


# Flights


def leap(count: int) -> tuple[Array, Array, list[int]]:
    """A run-up, .4 s of flight from (1.5, 2) m/s, and a landing along the last direction."""
    left = np.array([1.5, 2.0, 0.0])
    landed = left - [0.0, 0.4 * G, 0.0]
    time = np.linspace(0.0, 0.4, count + 1)[:, None]
    arc = left * time - 0.5 * time**2 * [0.0, G, 0.0]
    way = np.linspace(0.0, 0.6, count + 1)[:, None]
    before = (way - 0.6) * left / np.linalg.norm(left)
    after = arc[-1] + way * landed / np.linalg.norm(landed)
    strength = np.repeat([[3.0, 3.0], [0.0, 0.0], [3.0, 3.0]], count, axis=0)
    return (np.concatenate([before[:-1], arc, after[1:]]), strength,
            [0, count, 2 * count, 3 * count])


@pytest.mark.parametrize(("count", "slack"), [(40, 1e-2), (80, 1e-2), (80, 1e-3)])
def test_a_flight_fixes_its_speeds(count: int, slack: float) -> None:
    path, strength, bounds = leap(count)
    found = pace_climb(path, strength, 9.0, bounds=bounds, end_speed=0.0, slack=slack)
    assert np.diff(found.time[bounds])[1] == pytest.approx(0.4, rel=slack)
    assert found.speed[bounds[1]] == pytest.approx(2.5, rel=slack)
    assert found.speed[bounds[2]] == pytest.approx(np.hypot(1.5, 2.0 - 0.4 * G), rel=2.0 * slack)
    force = np.linalg.norm(climb_forces(found, path, strength, 9.0, bounds=bounds, slack=slack),
                           axis=2)
    assert force[bounds[1] : bounds[2]].max() <= slack * (1.0 + EXACT)


def test_no_free_fall_on_a_level_line() -> None:
    with pytest.raises(NoPacingError, match="too little strength"):
        pace_climb(straight(1.0, 20), np.zeros(21), 8.0, start_speed=1.0)


# Paths


def test_shape_of_a_circle() -> None:
    shape = path_shape(half_circle(100))
    angle = np.linspace(0.0, pi, 101)
    np.testing.assert_allclose(shape.s, 0.5 * angle, rtol=1e-7)
    tangent = np.stack([-np.sin(angle), 0.0 * angle, np.cos(angle)], axis=1)
    np.testing.assert_allclose(shape.tangent, tangent, atol=3e-5)
    assert np.linalg.norm(shape.curvature[5:-5], axis=2) == pytest.approx(2.0, rel=1e-3)
    assert np.linalg.norm(shape.curvature, axis=2) == pytest.approx(2.0, rel=1e-1)


def test_curvature_jumps_between_parts_only() -> None:
    line = straight(1.0, 40)
    angle = np.linspace(0.0, 1.0, 41)[1:]
    arc = np.stack([1.0 + 0.5 * np.sin(angle), 0.5 - 0.5 * np.cos(angle), 0.0 * angle], axis=1)
    shape = path_shape(np.concatenate([line, arc]), [0, 40, 80])
    bend = shape.curvature[..., 1]
    assert np.abs(bend[:39]).max() < 5e-3
    assert bend[39, 1] == pytest.approx(0.0, abs=0.03)
    assert bend[40, 0] == pytest.approx(2.0, abs=0.03)


def test_two_points_make_a_path() -> None:
    shape = path_shape([[0.0, 0.0, 0.0], [0.0, 2.0, 0.0]])
    assert shape.s.tolist() == [0.0, 2.0]
    found = pace_climb(shape, np.full(2, 2.0), np.inf)
    assert found.duration == pytest.approx(float(np.sqrt(2.0 * 2.0 / G)))


@pytest.mark.parametrize(
    ("path", "bounds", "message"),
    [
        ([[0.0, 0.0, 0.0]], (), "two or more points"),
        ([[0.0, 0.0, 0.0], [0.0, np.nan, 0.0]], (), "finite"),
        ([[0.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 1.0, 0.0]], (), "same point"),
        ([[0.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 0.0, 0.0]], (), "corner"),
        ([[0.0, 0.0, 0.0], [0.0, 1.0, 0.0], [0.0, 2.0, 0.0]], (0, 2, 1), "increase"),
    ],
)
def test_paths_that_are_none(path: list[list[float]], bounds: tuple[int, ...],
                             message: str) -> None:
    with pytest.raises(DataError, match=message):
        path_shape(path, bounds)


def test_every_argument_that_does_not_fit_is_named() -> None:
    with pytest.raises(DataError) as caught:
        pace_climb(straight(1.0, 4), np.ones(4), 0.0, start_speed=-1.0, end_speed=np.inf,
                   most_speed=[1.0, 2.0], slack=-0.1)
    assert [problem.key for problem in caught.value.problems] == [
        "strength", "most_speed", "fastest_speed", "start_speed", "end_speed", "slack"]
    with pytest.raises(DataError, match="least"):
        pace_climb(straight(1.0, 4), np.full(5, 2.0), 5.0, least=[1.0, 2.0])
    with pytest.raises(DataError, match="strength"):
        pace_climb(straight(1.0, 4), np.full(5, -2.0), 5.0)


def test_too_fast_to_stop_or_too_slow_to_go_on() -> None:
    with pytest.raises(NoPacingError):
        pace_climb(straight(0.1, 20, 1), np.full(21, 1.2), np.inf, start_speed=4.0, end_speed=0.0)
    with pytest.raises(NoPacingError):
        pace_climb(straight(1.0, 20, 1), np.full(21, 2.0), np.inf, end_speed=9.0)
