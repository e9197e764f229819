"""Cones of contacts and capacities of limbs."""

from __future__ import annotations

import math
from ast import literal_eval
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import climbpath.motion.capacity as capacity_module
from climbpath.body import make_athlete, parse_athlete
from climbpath.contacts import FLOOR, FREE, SMEAR
from climbpath.errors import DataError
from climbpath.motion.capacity import (
    KEYS,
    LimbState,
    capacities_of,
    foot_strength,
    hand_strength,
    limb_capacities,
)
from climbpath.motion.cones import (
    FLOOR_FRICTION,
    FOOT_TILT,
    SOLE_FRICTION,
    cone_rays,
    contact_cones,
    hold_cones,
)
from climbpath.stance.options import contact_options
from climbpath.wall.mirror import mirror
from climbpath.wall.model import Hold, Section, Start, Wall
from tests.walls_made import athlete, pad

START = Start((("a",), ("a",), ("floor",), ("floor",)))


def wall_of(overhang_deg: float, *holds: Hold) -> Wall:
    """A wall of one section."""
    return Wall("made", 3.0, 1.5, 0.0, (Section(6.0, math.radians(overhang_deg)),), holds,
                (START,), ("a",))


# Cones


def test_a_cone_has_its_axis_and_a_rim_at_the_half_angle() -> None:
    axis, side = np.array([0.0, 0.6, 0.8]), np.array([1.0, 0.0, 0.0])
    rays = cone_rays(axis, side, 0.5)
    assert rays.shape == (9, 3)
    np.testing.assert_allclose(np.linalg.norm(rays, axis=1), 1.0, atol=1e-12)
    np.testing.assert_allclose(rays[0], axis, atol=1e-12)
    np.testing.assert_allclose(rays[1:] @ axis, math.cos(0.5), atol=1e-12)
    # Evenly round: the rim's mean lies on the axis.
    np.testing.assert_allclose(rays[1:].mean(axis=0), math.cos(0.5) * axis, atol=1e-12)


def test_a_hold_bears_a_hand_up_the_surface_and_into_the_wall() -> None:
    wall = wall_of(0.0, Hold("a", 1.5, 2.0, support_in=math.radians(20.0)))
    cones = hold_cones(wall, contact_options(wall))
    # On a vertical wall: world up, and toward −Z, away from the climber.
    np.testing.assert_allclose(
        cones.hand[0, 0], [0.0, math.cos(math.radians(20.0)), -math.sin(math.radians(20.0))],
        atol=1e-12,
    )


def test_support_turns_with_the_surface() -> None:
    lean = math.radians(30.0)
    wall = wall_of(30.0, Hold("a", 1.5, 2.0, support_in=0.0), Hold("b", 1.5, 3.0, support=0.0),
                   Hold("c", 1.5, 4.0, support=math.radians(135.0), support_in=0.0))
    cones = hold_cones(wall, contact_options(wall))
    np.testing.assert_allclose(cones.hand[0, 0], [0.0, math.cos(lean), math.sin(lean)], atol=1e-12)
    assert cones.hand[1, 0, 0] == pytest.approx(math.cos(math.radians(15.0)))
    half = math.sqrt(0.5)
    np.testing.assert_allclose(
        cones.hand[2, 0], [-half, half * math.cos(lean), half * math.sin(lean)], atol=1e-12
    )


@pytest.mark.parametrize("overhang", [-20.0, 0.0, 35.0])
def test_no_foothold_pulls_a_foot_in(overhang: float) -> None:
    wall = wall_of(overhang, Hold("a", 1.5, 1.0))
    options = contact_options(wall)
    rays = hold_cones(wall, options).foot[0]
    normal, up = options.surface.normal[0], options.surface.up[0]
    half = math.atan(SOLE_FRICTION)
    assert (rays @ normal > 0.0).all()
    assert (rays @ normal).min() == pytest.approx(math.cos(FOOT_TILT + half), abs=1e-12)
    assert (rays @ up).max() == pytest.approx(math.sin(FOOT_TILT + half), abs=1e-12)


def test_each_contact_has_its_own_cone() -> None:
    wall = wall_of(10.0, Hold("a", 1.5, 2.0), pad(1.5, 5.0))
    options = contact_options(wall)
    contacts = np.array([[0, 1, FLOOR, SMEAR], [FREE, 0, FREE, 0]])
    points = np.zeros((2, 4, 3))
    points[0, 3] = options.surface.to_world(1.5, 1.0)
    cones = hold_cones(wall, options)
    rays = contact_cones(options, cones, contacts, points)
    np.testing.assert_array_equal(rays[0, 0], cones.hand[0])
    # A pad is struck and bears nothing, and nothing holds a free limb.
    assert not rays[0, 1].any()
    assert not rays[1, [0, 2]].any()
    np.testing.assert_allclose(rays[0, 2] @ [0.0, 1.0, 0.0],
                               [1.0] + [math.cos(math.atan(FLOOR_FRICTION))] * 8, atol=1e-12)
    np.testing.assert_allclose(rays[0, 3] @ options.surface.normal[0],
                               [1.0] + [math.cos(math.atan(SOLE_FRICTION))] * 8, atol=1e-12)
    np.testing.assert_array_equal(rays[1, 3], cones.foot[0])


def test_a_mirrored_wall_has_mirrored_cones() -> None:
    rng = np.random.default_rng(0)
    holds = tuple(
        Hold(name, round(float(rng.uniform(0.3, 2.7)), 3), 1.0 + k,
             support=math.radians(float(rng.integers(-180, 180))),
             support_in=math.radians(float(rng.integers(-40, 40))), range=math.radians(30.0))
        for k, name in enumerate("abcde")
    )
    wall = wall_of(25.0, *holds)
    mine, theirs = (hold_cones(w, contact_options(w)) for w in (wall, mirror(wall)))
    for a, b in ((mine.hand, theirs.hand), (mine.foot, theirs.foot)):
        flipped = a * [-1.0, 1.0, 1.0]
        # The same rays, the rim perhaps in another order.
        distance = np.linalg.norm(flipped[:, :, None] - b[:, None, :], axis=-1).min(axis=2)
        np.testing.assert_allclose(distance, 0.0, atol=1e-9)


# Capacities


def with_capacity(**capacity: float) -> Any:
    return replace(athlete(), capacity=capacity)


def test_defaults_are_those_of_the_sources() -> None:
    male, female = capacities_of(athlete("male")), capacities_of(athlete("female", 1.66))
    # The fit's own report: men's values, rounded; 2.8204 and so on.
    report = (Path(capacity_module.__file__).parent / "capacity_fit.txt").read_text("utf-8")
    told = literal_eval(report[report.index("{"):report.index("}") + 1])
    assert male.hand_pull.tolist() == pytest.approx([told["hand_pull_bw"]] * 2, rel=0.01)
    assert male.hand_press.tolist() == pytest.approx([told["hand_press_bw"]] * 2, rel=0.01)
    assert male.foot_push.tolist() == pytest.approx([told["foot_push_bw"]] * 2, rel=0.01)
    assert male.turn == pytest.approx(told["turn_rad_s2"], rel=0.01)
    assert male.speed == pytest.approx(told["hand_speed_m_s"], rel=0.01)
    # The pull-up's 1RM of 82 men is 1.5 ± .34 body weights with two hands (Munoz-Lopez et al. 2017,
    # abstract): the fitted pull of one hand lies within a standard deviation of half of it.
    assert abs(male.hand_pull[0] - 0.75) < 0.17
    # Jump-squat power 6.15 against 7.47 W/kg (Valenzuela et al. 2020, abstract), for all strengths.
    for name in ("hand_pull", "hand_press", "foot_push"):
        share = getattr(female, name) / getattr(male, name)
        assert share.tolist() == pytest.approx([6.15 / 7.47] * 2, rel=0.01)
    # Smears under half a body weight a foot agreed best with observed hand use.
    assert (male.foot_smear < 0.5).all()
    assert (female.foot_smear < 0.5).all()


def test_an_athlete_sets_both_sides_or_one() -> None:
    found = capacities_of(with_capacity(hand_pull_bw=0.9, hand_pull_right_bw=0.7, fade_share=0.0,
                                        foot_speed_m_s=5.0, turn_rad_s2=0.0))
    assert found.hand_pull.tolist() == [0.9, 0.7]
    assert (found.fade, found.foot_speed, found.turn) == (0.0, 5.0, 0.0)


def test_every_key_can_stand_in_an_athlete_file() -> None:
    lines = "\n".join(f"{key} = 0.5" for key in KEYS)
    text = (
        'schema = "climbpath/athlete/1"\nname = "made"\nsex = "female"\nstature_mm = 1660\n'
        f"mass_kg = 56\n[capacity]\n{lines}\n"
    )
    found = capacities_of(parse_athlete(text))
    assert found.hand_press.tolist() == [0.5, 0.5]
    assert found.hand_matched_share == 0.5


def test_all_wrong_capacities_are_named_at_once() -> None:
    wrong = with_capacity(hand_pul_bw=0.9, fade_share=1.5, hand_speed_m_s=0.0, splits_s=0.4)
    with pytest.raises(DataError) as caught:
        capacities_of(wrong)
    problems = {p.key: p.expected for p in caught.value.problems}
    assert set(problems) == {"capacity.hand_pul_bw", "capacity.fade_share",
                             "capacity.hand_speed_m_s"}
    assert problems["capacity.hand_pul_bw"] == "hand_pull_bw"


def test_a_pull_fades_to_a_press_from_shoulder_to_hip() -> None:
    one = capacities_of(with_capacity(hand_pull_bw=0.8, hand_press_bw=0.2))
    level = np.array([[1.4, 1.0], [0.5, 0.25], [0.0, -0.3]])
    free = np.zeros(3, dtype=bool)
    np.testing.assert_allclose(
        hand_strength(one, level, free), [[0.8, 0.8], [0.5, 0.35], [0.2, 0.2]], atol=1e-12
    )
    # Two hands on one hold share it.
    np.testing.assert_allclose(hand_strength(one, level, ~free),
                               0.5 * hand_strength(one, level, free), atol=1e-12)


def test_a_leg_weakens_beyond_a_right_angle() -> None:
    one = capacities_of(with_capacity(foot_push_bw=2.0, foot_bent_share=0.4, foot_smear_bw=0.3))
    knee = np.deg2rad([[0.0, 90.0], [115.0, 140.0], [150.0, 100.0]])
    no = np.zeros((3, 2), dtype=bool)
    np.testing.assert_allclose(
        foot_strength(one, knee, no), [[2.0, 2.0], [1.4, 0.8], [0.8, 1.76]], atol=1e-12
    )
    assert (foot_strength(one, knee, ~no) == 0.3).all()


def test_quality_height_and_speed_scale_every_limb() -> None:
    one = capacities_of(with_capacity(hand_pull_bw=1.0, foot_push_bw=2.0, fade_share=0.2,
                                      hand_speed_m_s=4.0, foot_speed_m_s=5.0))
    state = LimbState(
        quality=np.array([[1.0, 0.5, 1.0, 0.0]]), level=np.ones((1, 2)), knee=np.zeros((1, 2)),
        matched=np.zeros(1, dtype=bool), smear=np.zeros((1, 2), dtype=bool),
        height=np.array([0.5]),
    )
    still = limb_capacities(one, state)
    np.testing.assert_allclose(still, 0.9 * np.array([[1.0, 0.5, 2.0, 0.0]]), atol=1e-12)
    moving = replace(state, speed=np.array([[1.0, -1.0, 5.0, 1.0]]))
    np.testing.assert_allclose(limb_capacities(one, moving),
                               still * [[0.75, 1.0, 0.0, 0.8]], atol=1e-12)


def test_measured_bodies_have_capacities_too() -> None:
    body = make_athlete(sex="female", stature=1.7, mass=60.0, name="made",
                        capacity={"foot_push_left_bw": 1.0})
    other = capacities_of(athlete("female", 1.66)).foot_push[1]
    assert capacities_of(body).foot_push.tolist() == [1.0, other]
