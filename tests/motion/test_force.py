"""The model of forces: closed forms, an accurate integration, and what more strength may do."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from climbpath.motion.capacity import Capacities
from climbpath.motion.force import SIDE_FREE, SIDE_SHARE, SPEEDS, ForceMotion
from climbpath.motion.model import Drive
from climbpath.motion.strength import sample_strengths
from climbpath.posture.linkage import linkage_of
from climbpath.stance.enumerate import Allowed
from climbpath.stance.options import contact_options
from climbpath.stance.stances import stance_set
from climbpath.study.climb import lattice_of
from climbpath.wall.model import Hold, Section, Start, Wall
from tests.walls_made import athlete, pad

Array = NDArray[np.float64]

G = 9.81
FOREVER = 1e15
"""A V0 so large that force does not fall with speed, m/s."""

CLOSE = 1e-5
"""Share by which the law may be off there: it is taken to fall by 1e-5 of the speed a second."""

RISES = st.floats(0.01, 0.8)
STRENGTHS = st.floats(0.0, 5.0)
SPEEDS_UP = st.floats(0.0, 3.7)
V0S = st.sampled_from([6.5, 9.0, FOREVER])
"""Faster than bodies get here: what is beyond has a test of its own."""
QUICK = settings(derandomize=True, max_examples=150, deadline=None)


def motion(v0: float = FOREVER, turn: float = 6.0) -> ForceMotion:
    """Forces with every figure that matters here set by hand; strengths come from ``Drive``."""
    two = np.ones(2)
    own = Capacities(
        hand_pull=two, hand_press=two, foot_push=two, foot_smear=two, foot_bent_share=0.5,
        hand_matched_share=0.5, hand_speed=v0, foot_speed=2.0 * v0, fade=0.0, turn=turn,
        reach_speed=4.0, settle=0.05, reaction=0.25,
    )
    return ForceMotion(own, hand_start=0.10, foot_start=0.06, settle_poor=0.08, side_speed=3.0)


def drive(first: float | Array, second: float | Array | None = None) -> Drive:
    start = np.atleast_1d(np.asarray(first, dtype=np.float64))
    end = start if second is None else np.atleast_1d(np.asarray(second, dtype=np.float64))
    hands = np.ones(len(start), dtype=np.int64)
    return Drive(hands, hands, start, end)


def step(up: float, aside: float = 0.0, out: float = 0.0) -> Array:
    return np.array([[aside, up, out]])


def travel(rule: ForceMotion, up: float, c: float, speed: float = 0.0, aside: float = 0.0,
           end: float | None = None) -> tuple[float, float]:
    time, after = rule.travel(step(up, aside), drive(c, end), speed)
    return float(time[0]), float(after[0])


def unhurried(rule: ForceMotion, up: float, c: float, time: float, aside: float = 0.0,
              end: float | None = None) -> tuple[float, float]:
    need, after = rule.unhurried(step(up, aside), drive(c, end), np.array([time]))
    return float(need[0]), float(after[0])


# Closed forms, where force does not fall with speed


@pytest.mark.parametrize("c", [1.05, 1.5, 2.0, 3.0])
@pytest.mark.parametrize("rise", [0.1, 0.5, 0.8])
def test_from_rest_the_work_done_is_the_energy_gained(c: float, rise: float) -> None:
    """v² = 2 D g (c − 1) and T = √(2 D / (g (c − 1))) = 2 D / v for a constant acceleration."""
    time, after = travel(motion(), rise, c)
    assert after == pytest.approx(math.sqrt(2.0 * rise * G * (c - 1.0)), rel=CLOSE)
    assert time == pytest.approx(2.0 * rise / after, rel=CLOSE)


@pytest.mark.parametrize(
    ("most", "time_s", "peak_m_s"),
    [(1.5, 0.782062, 2.557342), (2.0, 0.638551, 3.132092), (3.0, 0.553001, 3.616628)],
)
def test_one_metre_straight_up_in_least_time(most: float, time_s: float, peak_m_s: float) -> None:
    """Full force, then none at all, from rest to rest over 1 m.

    T = √(2 D (a₊ + a₋) / (a₊ a₋)) and v = √(2 D a₊ a₋ / (a₊ + a₋)) with a₊ = g (c − 1), a₋ = g
    (textbook bang-bang motion; the figures are computed from it with g = 9.81).
    """
    rule = motion()
    pushed = 1.0 / most  # a₋ / (a₊ + a₋) of the way
    begun, peak = travel(rule, pushed, most)
    assert peak == pytest.approx(peak_m_s, rel=CLOSE)
    # A hair less than the whole arc, at the end of which the speed is nothing.
    coasted, after = travel(rule, (1.0 - pushed) * (1.0 - 1e-5), 0.0, peak)
    assert after == pytest.approx(math.sqrt(1e-5) * peak, abs=4e-3)
    assert begun + coasted + after / G == pytest.approx(time_s, abs=2e-5)


def test_without_force_the_body_flies() -> None:
    """v2² = v1² − 2 g D; a jump of 0.3 m leaves with 2.4261 m/s and lasts 0.2473 s (√(2 h / g))."""
    time, after = travel(motion(), 0.2999, 0.0, math.sqrt(2.0 * G * 0.3))
    assert math.sqrt(2.0 * G * 0.3) == pytest.approx(2.4261, abs=5e-5)
    assert time + after / G == pytest.approx(0.2473, abs=5e-5)
    assert after == pytest.approx(math.sqrt(2.0 * G * 0.0001), abs=1e-3)
    time, after = travel(motion(), 0.2, 0.0, 3.0)
    assert after == pytest.approx(math.sqrt(9.0 - 2.0 * G * 0.2), rel=CLOSE)
    assert time == pytest.approx((3.0 - after) / G, rel=CLOSE)
    assert travel(motion(), 0.5, 0.0, 3.0)[0] == math.inf
    # The same as what a flight says of itself.
    assert motion().flight(0.2, 3.0) == pytest.approx((time, after), rel=CLOSE)


@pytest.mark.parametrize(("v1", "c"), [(0.0, 1.4), (1.2, 1.4), (2.5, 0.6), (3.7, 2.2), (1.5, 1.0)])
def test_a_constant_force_is_exact_from_any_speed(v1: float, c: float) -> None:
    time, after = travel(motion(), 0.3, c, v1)
    pull = G * (c - 1.0)
    assert after == pytest.approx(math.sqrt(v1**2 + 0.6 * pull), rel=CLOSE)
    # D = v1 T + a T² / 2 and v2 = v1 + a T.
    assert v1 * time + pull * time**2 / 2.0 == pytest.approx(0.3, rel=CLOSE)
    assert after == pytest.approx(v1 + pull * time, rel=CLOSE)


@pytest.mark.parametrize("start", [1.2, 0.8])
def test_strengths_of_both_ends_count_by_their_mean(start: float) -> None:
    assert travel(motion(6.5), 0.4, start, 1.0, end=2.0 - start) == travel(motion(6.5), 0.4, 1.0,
                                                                          1.0)


# The law at every instant


def integrated(rise: float, c: float, v1: float, v0: float) -> tuple[float, float]:
    """Time and end speed of y'' = g (c (1 − y' / V0) − 1) at y = ``rise``; inf where it turns."""

    def slope(_: float, state: Array) -> list[float]:
        return [state[1], G * (c * (1.0 - state[1] / v0) - 1.0)]

    def there(_: float, state: Array) -> float:
        return float(state[0] - rise)

    def turns(_: float, state: Array) -> float:
        return float(state[1])

    there.terminal, turns.terminal = True, True  # type: ignore[attr-defined]
    turns.direction = -1.0  # type: ignore[attr-defined]
    found = solve_ivp(slope, (0.0, 60.0), [0.0, v1], method="DOP853", rtol=1e-10, atol=1e-12,
                      events=(there, turns))
    if found.t_events is None or found.y_events is None or not len(found.t_events[0]):
        return math.inf, 0.0
    return float(found.t_events[0][0]), float(found.y_events[0][0][1])


V0 = 6.5
ROUNDED_TIME, ROUNDED_SPEED = 1e-5, 1e-4
"""What a few rounds of Newton's method may leave, s and m/s."""


@pytest.mark.parametrize("v0", [4.5, V0, 12.0])
def test_a_step_is_the_law_at_every_instant(v0: float) -> None:
    """Over all rises and speeds of the search and strengths up to 5."""
    rule, infinite = motion(v0), 0
    for rise in (0.05, 0.1, 0.3, 0.8):
        for c in (0.0, 0.7, 0.98, 1.02, 1.5, 2.5, 5.0):
            for v1 in (0.0, *SPEEDS[1::2]):
                # A step that is at its end as it comes to a halt may be taken for either.
                exact, mine = integrated(rise * 1.0001, c, v1, v0), travel(rule, rise, c, v1)
                if not np.isfinite(exact[0]):
                    infinite += 1
                    assert mine[0] == math.inf or not np.isfinite(
                        integrated(rise * 1.001, c, v1, v0)[0])
                    continue
                exact = integrated(rise, c, v1, v0)
                assert mine[0] == pytest.approx(exact[0], abs=ROUNDED_TIME)
                assert mine[1] == pytest.approx(exact[1], abs=ROUNDED_SPEED)
    assert 20 < infinite < 60


def test_parts_of_a_step_are_the_step() -> None:
    whole = travel(motion(V0), 0.5, 2.0)
    for parts in (2, 10, 50):
        speed, clock = 0.0, 0.0
        for _ in range(parts):
            time, speed = travel(motion(V0), 0.5 / parts, 2.0, speed)
            clock += time
        assert (clock, speed) == pytest.approx(whole, abs=parts * ROUNDED_TIME)


# What more of anything does


@QUICK
@given(RISES, STRENGTHS, SPEEDS_UP, st.floats(0.0, 2.0), st.floats(-0.3, 0.3), V0S)
def test_more_strength_is_never_later_nor_slower(
    rise: float, c: float, speed: float, more: float, aside: float, v0: float
) -> None:
    # A shift sideways that sheds speed has a test of its own.
    assume(abs(aside) < SIDE_FREE or c >= 1.1)
    time, after = travel(motion(v0), rise, c, speed, aside)
    sooner, faster = travel(motion(v0), rise, c + more, speed, aside)
    assert sooner <= time + ROUNDED_TIME
    assert faster >= after - ROUNDED_SPEED or sooner < time
    if abs(aside) < SIDE_FREE:
        assert faster >= after - ROUNDED_SPEED


@QUICK
@given(RISES, STRENGTHS, SPEEDS_UP, st.floats(0.0, 2.0), V0S)
def test_more_speed_at_the_start_is_never_later(
    rise: float, c: float, speed: float, more: float, v0: float
) -> None:
    assert travel(motion(v0), rise, c, speed + more)[0] <= travel(motion(v0), rise, c,
                                                                  speed)[0] + ROUNDED_TIME


@QUICK
@given(RISES, STRENGTHS, SPEEDS_UP, st.floats(0.0, 2.0), V0S)
def test_more_speed_at_the_start_is_more_at_the_end(
    rise: float, c: float, speed: float, more: float, v0: float
) -> None:
    after = travel(motion(v0), rise, c, speed + more)[1]
    assert after >= travel(motion(v0), rise, c, speed)[1] - ROUNDED_SPEED


@QUICK
@given(RISES, STRENGTHS, st.floats(0.05, 0.6), st.floats(0.0, 0.4), V0S)
def test_more_time_never_needs_more_speed(
    rise: float, c: float, time: float, more: float, v0: float
) -> None:
    assume(c >= 1.0)
    need, after = unhurried(motion(v0), rise, c, time)
    less, _ = unhurried(motion(v0), rise, c, time + more)
    assert less <= need + 1e-9
    assert np.isfinite(after)


@QUICK
@given(RISES, st.floats(0.0, 3.0), st.floats(0.0, 3.0), st.floats(0.05, 0.6), st.floats(1.0, 1.5),
       V0S)
def test_more_strength_never_needs_more_speed(
    rise: float, start: float, end: float, time: float, more: float, v0: float
) -> None:
    """Contacts that hold the body at both ends let it wait for what is left of the time."""
    assume(min(start, end) >= 1.0 or max(start, end) * more < 1.0)
    need, after = unhurried(motion(v0), rise, start, time, end=end)
    assume(need < v0 and (not np.isfinite(need) or after < v0))
    less, faster = unhurried(motion(v0), rise, start * more, time, end=end * more)
    assert less <= need + 1e-9
    assert faster >= after - ROUNDED_SPEED or need == math.inf


@pytest.mark.xfail(
    raises=AssertionError,
    reason="a step that is carried by its mean strength but not held at both ends can be made from "
    "a little speed, and with more strength not at all: it would be too quick from rest and "
    "nothing is left to wait on; ends when such a step is made from rest with less force",
)
def test_more_strength_never_forbids_a_step() -> None:
    weak, strong = (0.8, 1.4), (0.88, 1.54)
    need, _ = unhurried(motion(), 0.1, weak[0], 0.4, end=weak[1])
    assert need < SPEEDS[1]
    less, _ = unhurried(motion(), 0.1, strong[0], 0.4, end=strong[1])
    assert less <= need


@pytest.mark.xfail(
    raises=AssertionError,
    reason="above the speed at which all force is gone contacts brake, the stronger the more; ends "
    "when they give nothing there",
)
def test_nobody_is_braked_by_strength() -> None:
    """At V0 = 2 m/s a body of 3 m/s flies for the first 0.25 m, (3² − 2²) / (2 g), and longer
    with no strength at all."""
    rule = motion(2.0)
    free = travel(rule, 0.25, 0.0, 3.0)
    for c in (0.5, 1.0, 3.0):
        assert travel(rule, 0.25, c, 3.0)[0] <= free[0] + ROUNDED_TIME


# A step that takes the time it is given


@QUICK
@given(RISES, st.floats(0.3, 5.0), SPEEDS_UP, V0S)
def test_the_time_of_travel_needs_the_speed_of_travel(
    rise: float, c: float, speed: float, v0: float
) -> None:
    time, after = travel(motion(v0), rise, c, speed)
    assume(np.isfinite(time) and after > 0.01)
    need, same = unhurried(motion(v0), rise, c, time * (1.0 - 1e-6))
    assert need == pytest.approx(speed, abs=2e-3)
    assert same == pytest.approx(after, abs=2e-3)


def test_a_step_in_a_given_time() -> None:
    """0.3 m in 0.2 s at 1.4 body weights: 1.5 m/s on the mean, 1.5 ∓ .4 g · .1 at the ends."""
    assert unhurried(motion(), 0.3, 1.4, 0.2) == pytest.approx((1.1076, 1.8924), rel=CLOSE)
    # Half the body weight only slows the way: 1.5 ± .5 g · .1.
    assert unhurried(motion(), 0.3, 0.5, 0.2) == pytest.approx((1.9905, 1.0095), rel=CLOSE)
    # In 0.4 s .75 ± .5 g · .2 it would have come to a stop before.
    assert unhurried(motion(), 0.3, 0.5, 0.4)[0] == math.inf


def test_waiting_takes_contacts_that_hold_the_body() -> None:
    quickest, after = travel(motion(), 0.2, 1.5)
    assert unhurried(motion(), 0.2, 1.5, 3.0 * quickest) == (0.0, after)
    assert unhurried(motion(), 0.2, 2.05, 3.0 * quickest, end=0.95)[0] == math.inf
    assert unhurried(motion(), 0.2, 0.95, 3.0 * quickest, end=2.05)[0] == math.inf
    # Where a shift sideways takes its share, 1.04 body weights hold no longer.
    assert unhurried(motion(), 0.2, 1.04, 3.0)[0] == 0.0
    assert unhurried(motion(), 0.2, 1.04, 3.0, aside=0.1)[0] == math.inf


# Down, level, sideways


@pytest.mark.parametrize(("depth", "c"), [(0.1, 1.5), (0.25, 2.0), (0.05, 1.2)])
def test_a_step_down_falls_and_is_stopped(depth: float, c: float) -> None:
    """T = √(2 D (a₊ + a₋) / (a₊ a₋)), falling with g and stopping with g (c − 1)."""
    rule = motion(6.5)
    stop = G * (c - 1.0)
    expected = math.sqrt(2.0 * depth * (stop + G) / (stop * G))
    assert travel(rule, -depth, c) == pytest.approx((expected, 0.0), rel=1e-12)
    # Nobody begins one while rising, and nobody stops without strength to spare.
    assert travel(rule, -depth, c, 1.0)[0] == math.inf
    assert travel(rule, -depth, 0.9)[0] == math.inf
    assert travel(rule, -depth, c, end=0.9)[0] == math.inf
    assert unhurried(rule, -depth, c, expected * 1.01) == (0.0, 0.0)
    assert unhurried(rule, -depth, c, expected * 0.99)[0] == math.inf


def test_a_metre_rest_to_rest_at_one_g_both_ways() -> None:
    """At two body weights down is like up: 0.638551 s a metre (closed form, g = 9.81)."""
    assert travel(motion(), -1.0, 2.0)[0] == pytest.approx(0.638551, abs=1e-6)


def test_a_level_step_takes_what_the_shift_takes() -> None:
    rule = motion()
    assert travel(rule, 0.0, 1.5) == (0.0, 0.0)
    assert travel(rule, 0.0, 0.9)[0] == math.inf
    assert travel(rule, 0.0, 1.5, 1.0)[0] == math.inf
    aside = 2.0 * math.sqrt(0.2 / (SIDE_SHARE * G * 1.5))
    assert travel(rule, 0.0, 1.5, aside=0.2) == pytest.approx((aside, 0.0), rel=1e-12)


@pytest.mark.parametrize("c", [1.2, 2.0, 4.0])
def test_sideways_is_from_rest_to_rest_with_a_share_of_the_strength(c: float) -> None:
    """d = a T² / 4 with a = share · g · c; √(1 − share²) of the strength is left for the rise."""
    rule, rise = motion(), 0.1
    left = math.sqrt(1.0 - SIDE_SHARE**2) * c
    alone = math.sqrt(2.0 * rise / (G * (left - 1.0)))
    for aside in (0.0055, 0.4):
        across = 2.0 * math.sqrt(aside / (SIDE_SHARE * G * c))
        time, after = travel(rule, rise, c, aside=aside)
        assert time == pytest.approx(max(alone, across), rel=CLOSE)
        # From rest what the shift takes longer is waited for, and the end speed is the same.
        assert after == pytest.approx(2.0 * rise / alone, rel=CLOSE)
    here = rule.travel(np.array([[0.24, rise, 0.32]]), drive(c), 0.0)[0]
    assert here == pytest.approx(rule.travel(step(rise, 0.4), drive(c), 0.0)[0], rel=1e-12)
    assert travel(rule, rise, c, aside=SIDE_FREE) == travel(rule, rise, c)


def test_a_shift_that_takes_longer_sheds_speed() -> None:
    """From 3 m/s over 0.1 m the rise is quick; 0.3 m aside takes longer, and the speed that the
    rise in that time needs is what is left at the start."""
    rule, c, rise, aside = motion(), 1.2, 0.1, 0.3
    across = 2.0 * math.sqrt(aside / (SIDE_SHARE * G * c))
    time, after = travel(rule, rise, c, 3.0, aside)
    assert time == pytest.approx(across, rel=1e-12)
    need, slower = unhurried(rule, rise, c, time, aside)
    assert need < 3.0
    assert after == slower
    # Falling short: 0.7 body weights do not last for a shift that slow.
    assert travel(rule, rise, 0.7, 1.5, aside)[0] == math.inf


# Flights, reaching, levels


def test_a_flight_is_ballistic_and_lands_on_the_way_up() -> None:
    rule = motion()
    time, after = rule.flight(0.5, 3.5)
    assert after == pytest.approx(math.sqrt(3.5**2 - 2.0 * G * 0.5), rel=1e-12)
    assert time == pytest.approx((3.5 - after) / G, rel=1e-12)
    assert rule.flight(0.63, 3.5)[0] == math.inf
    assert rule.flight(0.0, 3.5)[0] == math.inf
    assert rule.flight(-0.1, 3.5)[0] == math.inf
    assert rule.flight(0.1, 0.0)[0] == math.inf
    assert rule.take_off() == 0.0
    # 0.5 m use up the speed of a 0.5 m jump: 3.1321 m/s, 0.3193 s (√(2 g h), √(2 h / g)).
    time, after = rule.flight(0.5, 3.1322)
    assert time == pytest.approx(0.3193, abs=3e-3)
    assert after == pytest.approx(0.0, abs=0.03)
    flown = rule.flown(0.3, np.array([0.2, 0.3, 0.31]))
    assert flown == pytest.approx(np.array([0.3, 0.3, math.inf]))


def test_a_reach_starts_travels_and_settles() -> None:
    """Figures of ``motion``: 4 m/s, .1 s and .06 s to start, .05 s to settle, .08 s more at worst.
    """
    hand, foot = np.array([True]), np.array([False])
    rule, struck, held = motion(), np.array([True]), np.array([False])
    far, good, poor = np.array([0.6]), np.array([1.0]), np.array([0.25])
    assert rule.reach(far, hand, good, held) == pytest.approx(0.10 + 0.15 + 0.05)
    assert rule.reach(far, foot, good, held) == pytest.approx(0.06 + 0.15 + 0.05)
    assert rule.reach(far, hand, poor, held) == pytest.approx(0.10 + 0.15 + 0.05 + 0.06)
    assert rule.reach(far, hand, poor, struck) == pytest.approx(0.25)
    assert rule.reaction == 0.25


def test_reaching_across_turns_the_shoulders() -> None:
    """T = 2 √(asin(over) / α): half a breadth is 30°, a whole one or more 90°."""
    found = motion(turn=6.0).across(np.array([0.0, 0.5, 1.0, 1.7]))
    half, whole = 2.0 * math.sqrt(math.pi / 36.0), 2.0 * math.sqrt(math.pi / 12.0)
    assert found == pytest.approx(np.array([0.0, half, whole, whole]), rel=1e-12)


def test_a_shift_at_one_height_goes_at_a_fixed_speed() -> None:
    time = motion().shift(np.array([[0.3, 5.0, 0.4]]), drive(1.0))
    assert time == pytest.approx(0.5 / 3.0)


def test_speed_levels_are_those_of_rises_in_even_steps() -> None:
    """v = √(2 g k h): rises of 0, .1, .2, … m use them up."""
    levels = np.array(motion().speeds)
    assert levels**2 / (2.0 * G) == pytest.approx(0.1 * np.arange(8), abs=1e-12)
    for k in range(1, 8):
        _, after = motion().flight(0.1, levels[k] + 1e-12)
        assert after == pytest.approx(levels[k - 1], abs=1e-5)


def test_finer_levels_contain_the_coarser() -> None:
    rule = motion()
    once, twice = rule.finer(), rule.finer().finer()
    assert once.speeds[::2] == pytest.approx(rule.speeds, abs=1e-12)
    assert twice.speeds[::4] == pytest.approx(rule.speeds, abs=1e-12)
    assert list(once.speeds) == sorted(set(once.speeds))
    assert (once.capacities, once.hand_start) == (rule.capacities, rule.hand_start)


def test_strengths_are_those_of_the_samples_times_stronger() -> None:
    hold = Hold("a", 1.5, 1.6)
    wall = Wall("one", 3.0, 1.5, 0.0, (Section(4.0, 0.0),), (hold, pad(1.5, 2.2)),
                (Start((("a",), ("a",), ("floor",), ("floor",))),), ("pad",))
    options, linkage = contact_options(wall), linkage_of(athlete())
    stances = stance_set(options, linkage, Allowed(), wall.line_x, lattice_of(options, wall, 0.2))
    rule = motion()
    own = sample_strengths(wall, options, linkage, rule.capacities, stances)
    assert (own > 0.5).any()
    twice = replace(rule, stronger=2.0).strengths(wall, options, linkage, stances)
    np.testing.assert_array_equal(twice, 2.0 * own)
