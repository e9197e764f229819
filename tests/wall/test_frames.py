from __future__ import annotations

import math

import numpy as np
import pytest
import shapely

from climbpath.wall import Section, Surface, Wall, surface_of


def surface(*sections: tuple[float, float], floor_y: float = 0.0) -> Surface:
    parts = tuple(Section(height, math.radians(degrees)) for height, degrees in sections)
    return surface_of(Wall("w", 3.0, 1.5, floor_y, parts, (), (), ()))


def test_lane_of_15_m_at_5_degrees_is_14_94_m_high() -> None:
    # 15 cos 5° = 14.943 m, 15 sin 5° = 1.307 m: the top hangs over the foot of the wall.
    top = surface((15.0, 5.0)).to_world(1.0, 15.0)
    assert top == pytest.approx([1.0, 14.94292, 1.30734], abs=1e-5)


def test_overhang_faces_down_and_slab_faces_up() -> None:
    assert surface((1.0, 30.0)).normal[0] == pytest.approx([0.0, -0.5, math.sqrt(3) / 2])
    assert surface((1.0, -30.0)).normal[0] == pytest.approx([0.0, 0.5, math.sqrt(3) / 2])


def test_gravity_in_section_axes_agrees_with_world_axes() -> None:
    folded = surface((2.0, -20.0), (2.0, 35.0))
    world = np.array([0.0, -9.81, 0.0])
    for k in (0, 1):
        axes = np.stack([[1.0, 0.0, 0.0], folded.up[k], folded.normal[k]])
        assert folded.gravity(k) == pytest.approx(axes @ world)
    assert folded.gravity(1)[2] > 0.0  # on the overhang it pulls out of the wall


def test_section_at_folds_and_beyond_the_ends() -> None:
    folded = surface((2.0, 0.0), (1.0, 20.0), (1.0, 0.0))
    assert folded.section_at([-1.0, 0.0, 1.999, 2.0, 2.5, 3.0, 4.0, 9.0]).tolist() == [
        0, 0, 0, 1, 1, 2, 2, 2,
    ]  # fmt: skip


def test_folded_height_is_less_than_the_unfolded() -> None:
    # 2 m upright and 2 m at 60°: 2 + 2 cos 60° = 3 m up, 2 sin 60° = 1.732 m out.
    assert surface((2.0, 0.0), (2.0, 60.0)).to_world(0.0, 4.0) == pytest.approx(
        [0.0, 3.0, math.sqrt(3)]
    )


def test_floor_is_a_level_below_the_prolonged_first_section() -> None:
    assert surface((15.0, 5.0), floor_y=-0.2).floor_height == pytest.approx(-0.2 * 0.9961947)


@pytest.mark.parametrize(
    "sections",
    [
        ((2.0, 0.0), (2.0, 40.0)),  # closes toward the climber
        ((2.0, 40.0), (2.0, 0.0)),  # opens away: a lip
        ((1.5, -30.0), (1.0, 50.0), (1.0, -10.0), (1.0, 20.0)),
    ],
)
def test_clearance_against_shapely(sections: tuple[tuple[float, float], ...]) -> None:
    folded = surface(*sections)
    total = sum(height for height, _ in sections)
    corners = folded.to_world(0.0, [-50.0, *folded.y_from[1:], total + 50.0])[:, 1:]
    profile = shapely.LineString(corners)
    behind = shapely.Polygon([*corners, (corners[-1][0], -500.0), (corners[0][0], -500.0)])
    rng = np.random.default_rng(3)
    points = np.column_stack(
        [rng.uniform(0, 3, 800), rng.uniform(-1.0, 5.0, 800), rng.uniform(-2.0, 4.0, 800)]
    )
    spots = shapely.points(points[:, 1:])
    expected = shapely.distance(profile, spots) * np.where(shapely.contains(behind, spots), -1, 1)
    assert folded.clearance(points) == pytest.approx(expected, abs=1e-9)


def test_before_a_lip_the_nearest_point_is_the_fold_itself() -> None:
    lip = surface((1.0, 45.0), (1.0, -45.0))
    # The fold lies at Y = Z = cos 45°; half a metre straight out of it nothing else is nearer.
    at_fold = math.sqrt(0.5)
    assert lip.to_surface([2.0, at_fold, at_fold + 0.5]) == pytest.approx([2.0, 1.0, 0.5])


def test_in_a_corner_the_nearer_section_counts() -> None:
    corner = surface((2.0, 0.0), (2.0, 60.0))
    # 0.3 m out of the upright part and just below the fold: the overhang above is nearer than
    # 0.3 m once less than 0.3 / sin 60° ... here at Y = 1.9 its plane is at distance
    # |(-0.1)(-sin 60°) + 0.3 cos 60°| = 0.2366 m.
    assert corner.clearance([0.0, 1.9, 0.3]) == pytest.approx(0.1 * math.sin(math.pi / 3) + 0.15)


def test_surface_coordinates_come_back() -> None:
    folded = surface((2.0, -10.0), (2.0, 25.0), (1.0, 0.0))
    x, y = np.meshgrid([0.0, 1.2], [-0.5, 0.4, 1.4, 2.6, 3.9, 4.4, 6.0])
    points = folded.to_world(x, y, 0.05)
    assert points.shape == (7, 2, 3)
    assert folded.to_surface(points) == pytest.approx(
        np.stack([x, y, np.full_like(x, 0.05)], axis=-1)
    )
    assert folded.clearance(points) == pytest.approx(np.full((7, 2), 0.05))


def test_empty_arrays_stay_empty() -> None:
    folded = surface((2.0, 0.0))
    assert folded.to_world([], []).shape == (0, 3)
    assert folded.clearance(np.zeros((0, 3))).shape == (0,)
