"""Static contact against closed forms.

Balance of forces and moments with each force in its friction cone: T. Bretl, S. Lall, IEEE
T-RO 24(4):794, 2008. The figures follow from it for two contacts in a plane.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.motion.cones import cone_rays
from climbpath.motion.load import Held, least_load, limb_loads

Array = NDArray[np.float64]

FRICTION = 0.5
PLENTY = 10.0


def on_a_vertical_wall(out: float, above: float) -> Held:
    """Both hands and feet level, hands pulling up and in, feet pushing up and out, strict."""
    hand = cone_rays(np.array([0.0, math.cos(0.26), -math.sin(0.26)]), np.array([1.0, 0.0, 0.0]),
                     math.radians(45.0))
    foot = cone_rays(np.array([0.0, math.sqrt(0.5), math.sqrt(0.5)]), np.array([1.0, 0.0, 0.0]),
                     math.radians(42.0))
    point = np.array([[-0.2, above, 0.0], [0.2, above, 0.0], [-0.15, 0.0, 0.0], [0.15, 0.0, 0.0]])
    return Held(
        rays=np.stack([hand, hand, foot, foot])[None],
        point=point[None],
        com=np.array([[0.0, 0.55 * above, out]]),
        capacity=np.array([[0.75, 0.75, 1.8, 1.8]]),
        turn=np.zeros((1, 3)),
    )


@pytest.mark.parametrize(("out", "above"), [(0.30, 1.60), (0.20, 1.60), (0.30, 1.20)])
def test_hands_hold_a_body_to_a_vertical_wall_with_its_lever(out: float, above: float) -> None:
    # Moments about the feet: horizontal force at hands and feet = W d / z; .30 and 1.60 m give
    # 18.75 % of the weight.
    force = limb_loads(on_a_vertical_wall(out, above)).force[0]
    assert force[:2, 2].sum() == pytest.approx(-out / above, abs=1e-8)
    assert force[2:, 2].sum() == pytest.approx(out / above, abs=1e-8)
    assert force[:, 1].sum() == pytest.approx(1.0, abs=1e-8)


def test_the_lever_sets_the_load_of_hands_that_only_pull_in() -> None:
    # Hands bear along −Z only, so each carries half of W d / z, and the feet the weight.
    held = on_a_vertical_wall(0.30, 1.60)
    rays = np.zeros((1, 4, 2, 3))
    rays[0, :2, :, 2] = -1.0
    rays[0, 2:, 0, 1] = 1.0
    rays[0, 2:, 1, 2] = 1.0
    found = replace(held, rays=rays, capacity=np.array([[0.5, 0.5, 5.0, 5.0]]))
    assert least_load(found).load == pytest.approx([0.1875 / 2 / 0.5], abs=1e-8)
    share = limb_loads(found).share[0]
    feet = (1.0 + 0.1875) / 2 / 5.0
    assert share == pytest.approx([0.1875, 0.1875, feet, feet], abs=1e-6)


def two_in_a_plane(first: float, second: float, com_x: Array) -> Held:
    """Contacts at x = 0 and x = 1 in the plane Z = 0, µ = .5, strict; the friction cones' edges.

    Angles of the normals from +x [rad]. Rays have a normal component of 1, so that a contact's
    coefficients add up to its normal force.
    """
    count = len(com_x)
    rays = np.zeros((count, 4, 2, 3))
    for limb, angle in ((2, first), (3, second)):
        normal = np.array([math.cos(angle), math.sin(angle), 0.0])
        along = np.array([-math.sin(angle), math.cos(angle), 0.0])
        rays[:, limb] = [normal + FRICTION * along, normal - FRICTION * along]
    point = np.zeros((count, 4, 3))
    point[:, 3, 0] = 1.0
    com = np.stack([com_x, np.full(count, 0.5), np.zeros(count)], axis=1)
    return Held(rays, point, com, np.full((count, 4), PLENTY), np.zeros((count, 3)))


FLAT = (math.pi / 2, math.pi / 2)
FACING = (math.pi / 3, 2 * math.pi / 3)
"""30 degree slopes whose normals lean toward each other."""


@pytest.mark.parametrize(
    ("normals", "low", "high"),
    [(FLAT, 0.0, 1.0), (FACING, 0.0381198, 0.9618802)],
)
def test_support_interval_of_two_contacts(
    normals: tuple[float, float], low: float, high: float
) -> None:
    off = 1e-5
    inside = np.array([low + off, 0.25, 0.5, 0.75, high - off])
    outside = np.array([low - 0.5, low - off, high + off, high + 0.5])
    assert np.isfinite(least_load(two_in_a_plane(*normals, inside)).load).all()
    assert np.isinf(least_load(two_in_a_plane(*normals, outside)).load).all()


@pytest.mark.parametrize("normal_force", [1.2, 1.5, 3.0])
def test_support_interval_between_opposed_walls(normal_force: float) -> None:
    # Vertical walls that face each other, pressed with N: [1 − µN, µN].
    x = np.linspace(0.01, 0.99, 99)
    held = two_in_a_plane(0.0, math.pi, x)
    load = least_load(replace(held, capacity=np.full((99, 4), normal_force))).load
    # Each wall bears the share of the weight that its distance gives it, all by friction.
    expected = np.maximum(x, 1.0 - x) / (FRICTION * normal_force)
    np.testing.assert_allclose(load, expected, rtol=0.0, atol=1e-6)
    inside = (x > 1.0 - FRICTION * normal_force) & (x < FRICTION * normal_force)
    edge = np.abs(expected - 1.0) < 1e-9
    assert ((load <= 1.0) == inside)[~edge].all()


def test_opposed_walls_hold_nothing_without_half_the_weight_in_friction() -> None:
    x = np.linspace(0.0, 1.0, 101)
    held = two_in_a_plane(0.0, math.pi, x)
    load = least_load(replace(held, capacity=np.full((101, 4), 0.999))).load
    assert load.min() > 1.0
    enough = least_load(replace(held, capacity=np.full((101, 4), 1.001))).load
    assert (enough <= 1.0).sum() == 1
