"""Loads of whole stances at rest: wall, body and posture together."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.contacts import FLOOR, FREE
from climbpath.motion.capacity import capacities_of
from climbpath.motion.cones import hold_cones
from climbpath.motion.load import least_load
from climbpath.motion.rest import (
    RestLoads,
    gyration,
    held_at_rest,
    knee_flexion,
    rest_loads,
    trunk_level,
)
from climbpath.posture.assembly import JOINT, assemble
from climbpath.posture.com import SEGMENT_JOINTS, com_of, joint_weights
from climbpath.posture.linkage import Linkage, linkage_of
from climbpath.posture.solver import solve_postures
from climbpath.stance.enumerate import batch_of
from climbpath.stance.options import contact_options, contact_points
from climbpath.wall.mirror import mirror
from climbpath.wall.model import Hold, Section, Start, Wall
from tests.walls_made import athlete

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

START = Start((("h1",), ("h2",), ("floor",), ("floor",)))


def wall_of(overhang_deg: float, quality: float = 1.0) -> Wall:
    """Two hand holds at 2.0 m and 2.2 m, two footholds at 0.6 m and 0.8 m."""
    holds = (
        Hold("h1", 1.3, 2.0, hand_quality=quality), Hold("h2", 1.75, 2.2, hand_quality=quality),
        Hold("f1", 1.3, 0.6, use="foot"), Hold("f2", 1.7, 0.8, use="foot"),
    )
    return Wall("made", 3.0, 1.5, 0.0, (Section(6.0, math.radians(overhang_deg)),), holds,
                (START,), ("h2",))


STANCES = (
    ("h1", "h2", "f1", "f2"),
    ("h1", "free", "f1", "f2"),
    ("free", "h2", "f1", "free"),
    ("h1", "h2", "free", "free"),
    ("h1", "h1", "floor", "floor"),
)


def contacts_of(wall: Wall, names: tuple[tuple[str, ...], ...]) -> Ints:
    options = contact_options(wall)
    codes = {"free": FREE, "floor": FLOOR}
    return np.array([[codes[n] if n in codes else options.index(n) for n in stance]
                     for stance in names])


def bodies(wall: Wall, body: Athlete, contacts: Ints) -> tuple[Linkage, Array, Array]:
    """Linkage, joints (N, 19, 3) and centres of mass (N, 3) in the world, most reach to spare."""
    options, linkage = contact_options(wall), linkage_of(body)
    batch = batch_of(options, linkage, contacts)
    found = solve_postures(linkage, batch)
    joints = batch.to_world(np.moveaxis(assemble(linkage, batch, found.turn, found.shift), 0, 1))
    com = com_of(joint_weights(linkage), np.moveaxis(joints, 0, 1))
    return linkage, np.moveaxis(joints, (0, 1, 2), (2, 1, 0)), com.T


def loads_of(wall: Wall, body: Athlete, names: tuple[tuple[str, ...], ...] = STANCES) -> RestLoads:
    options, contacts = contact_options(wall), contacts_of(wall, names)
    linkage, joints, com = bodies(wall, body, contacts)
    points = contact_points(options, linkage, contacts)
    return rest_loads(options, hold_cones(wall, options), linkage, capacities_of(body), contacts,
                      points, joints, com)


@cache
def usual() -> RestLoads:
    return loads_of(wall_of(5.0), athlete())


def test_loads_of_usual_stances_are_of_a_human_size() -> None:
    found = usual()
    assert np.isfinite(found.load).all()
    assert (found.gap < 1e-6).all()
    assert 0.1 < found.load[0] < 1.0
    # Fewer contacts, more load; hanging by the hands alone is the hardest with two hands.
    assert found.load[0] < found.load[1] < found.load[2]
    assert found.load[0] < found.load[3]
    assert (found.by_limb[np.array(STANCES) == "free"] == 0.0).all()
    # Standing on the ground takes half of the weight a foot at most.
    assert found.load[4] <= 0.5 / 1.78 / 0.98


def test_forces_at_rest_carry_the_weight() -> None:
    np.testing.assert_allclose(usual().force.sum(axis=1), np.tile([0.0, 1.0, 0.0], (5, 1)),
                               rtol=0.0, atol=1e-8)


def test_feet_alone_hold_nobody_on_an_overhang() -> None:
    # The body hangs off the wall from its hands; take them away and no force is left to pull in.
    found = loads_of(wall_of(5.0), athlete(), (("free", "free", "f1", "f2"),))
    assert np.isinf(found.load).all()
    assert np.isinf(found.by_limb[0, 2:]).all()
    assert (found.by_limb[0, :2] == 0.0).all()
    assert np.isnan(found.force).all()


def test_worthless_hand_holds_hold_nobody_on_an_overhang() -> None:
    names = (("h1", "h2", "f1", "f2"),)
    assert np.isinf(loads_of(wall_of(5.0, quality=0.0), athlete(), names).load).all()
    assert np.isfinite(loads_of(wall_of(5.0, quality=0.5), athlete(), names).load).all()


def test_feet_alone_hold_a_body_over_them_on_a_slab() -> None:
    wall = wall_of(-20.0)
    options, contacts = contact_options(wall), contacts_of(wall, (("free", "free", "f1", "f2"),))
    linkage, joints, com = bodies(wall, athlete(), contacts)
    points = contact_points(options, linkage, contacts)
    held = held_at_rest(options, hold_cones(wall, options), linkage, capacities_of(athlete()),
                        contacts, points, joints, com)
    over = points[:, 2:].mean(axis=1) + np.array([0.0, 0.9, 0.0])
    assert least_load(replace(held, com=over)).load[0] < 1.0
    # As strict balance too: between the feet there is a place for the centre of mass.
    strict = replace(held, com=over, turn=np.zeros((1, 3)))
    assert least_load(strict).load[0] < 1.0
    # The same on an overhang is out of every friction cone, wherever the body is.
    steep = wall_of(5.0)
    rays = hold_cones(steep, contact_options(steep)).foot[[2, 3]]
    assert np.isinf(least_load(replace(held, com=over, rays=np.concatenate(
        [np.zeros((1, 2, 9, 3)), rays[None]], axis=1))).load).all()


def test_poorer_holds_and_weaker_limbs_load_more() -> None:
    poorer = loads_of(wall_of(5.0, quality=0.7), athlete())
    assert (poorer.load >= usual().load - 1e-9).all()
    assert (poorer.by_limb[3, :2] > usual().by_limb[3, :2] + 0.1).all()
    weaker = replace(athlete(), capacity={"hand_pull_bw": 0.5, "foot_push_bw": 1.2})
    assert (loads_of(wall_of(5.0), weaker).load >= usual().load - 1e-9).all()


def test_a_steeper_wall_loads_the_hands_more() -> None:
    # Foot force falls as the wall steepens (Balas et al. 2014, abstract).
    names = (("h1", "h2", "f1", "f2"),)
    feet = [loads_of(wall_of(lean), athlete(), names).force[0, 2:, 1].sum()
            for lean in (0.0, 15.0, 30.0)]
    assert feet[0] > feet[1] > feet[2]


def test_mirrored_walls_and_bodies_have_the_same_loads() -> None:
    wall, other = wall_of(5.0), mirror(wall_of(5.0))
    strong_left = replace(athlete(), capacity={"hand_pull_left_bw": 1.0, "foot_push_right_bw": 1.5})
    strong_right = replace(athlete(),
                           capacity={"hand_pull_right_bw": 1.0, "foot_push_left_bw": 1.5})
    swapped = tuple((rh, lh, rf, lf) for lh, rh, lf, rf in STANCES)
    mine = loads_of(wall, strong_left)
    theirs = loads_of(other, strong_right, swapped)
    np.testing.assert_allclose(theirs.load, mine.load, rtol=0.0, atol=1e-5)
    np.testing.assert_allclose(theirs.by_limb[:, [1, 0, 3, 2]], mine.by_limb, rtol=0.0, atol=1e-4)


def test_no_stances_have_no_loads() -> None:
    none = rest_loads(
        contact_options(wall_of(5.0)), hold_cones(wall_of(5.0), contact_options(wall_of(5.0))),
        linkage_of(athlete()), capacities_of(athlete()), np.zeros((0, 4), np.int64),
        np.zeros((0, 4, 3)), np.zeros((0, 19, 3)), np.zeros((0, 3)),
    )
    assert none.load.shape == (0,)
    assert none.by_limb.shape == (0, 4)


# Geometry of the body


def test_radii_of_gyration_are_those_of_points_strung_along_the_segments() -> None:
    wall = wall_of(5.0)
    linkage, joints, com = bodies(wall, athlete(), contacts_of(wall, STANCES))
    found = gyration(linkage, joints, com)
    place = (np.arange(2000) + 0.5) / 2000 - 0.5
    for k in range(len(STANCES)):
        points, masses = [], []
        for name, mass, centre in zip(linkage.segment_names, linkage.segment_mass,
                                      linkage.segment_cm, strict=True):
            kind, side = (name[:-2], name[-1]) if name[-2:] in ("_L", "_R") else (name, "")
            first, second, share = SEGMENT_JOINTS[kind]
            names = [side + n if n in ("H", "F") else f"{n}_{side}" if side else n
                     for n in (first, second)]
            start, end = (joints[k, JOINT[n]] for n in names)
            points.append(start + (centre + place)[:, None] * (end - start) / share)
            masses.append(np.full(2000, mass / 2000))
        off, weight = np.concatenate(points) - com[k], np.concatenate(masses)
        square = (weight[:, None] * off**2).sum(axis=0)
        np.testing.assert_allclose(found[k], square.sum() - square, rtol=1e-5)
    # A standing man has about 10 to 13 kg m² about the transverse axis (from memory).
    assert 0.08 < found[0, 0] < 0.25


def test_level_runs_along_the_trunk() -> None:
    joints = np.zeros((1, 19, 3))
    joints[0, JOINT["neck"]] = [0.3, 0.4, 0.0]
    points = np.array([[[0.3, 0.4, 0.0], [0.15, 0.2, 0.7], [-0.4, 0.3, 0.0], [0.6, 0.8, 0.1]]])
    np.testing.assert_allclose(trunk_level(joints, points), [[1.0, 0.5, 0.0, 2.0]], atol=1e-12)


def test_knees_are_measured_from_straight() -> None:
    joints = np.zeros((1, 19, 3))
    joints[0, JOINT["hip_L"]] = [0.0, 1.0, 0.0]
    joints[0, JOINT["knee_L"]] = [0.0, 0.5, 0.0]
    joints[0, JOINT["hip_R"]] = [0.0, 1.0, 0.0]
    joints[0, JOINT["knee_R"]] = [0.0, 0.5, 0.0]
    joints[0, JOINT["ankle_R"]] = [0.0, 0.5, 0.4]
    assert knee_flexion(joints)[0] == pytest.approx([0.0, math.pi / 2], abs=1e-7)
