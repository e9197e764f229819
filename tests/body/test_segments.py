"""Segment tables and the sum over segments, against published examples and another body model."""

from __future__ import annotations

import numpy as np
import pytest

from climbpath.body import SEGMENT_ENDS, SEGMENT_NAMES, make_athlete, segment_table, whole_body_com
from climbpath.body.survey import mean
from tests.body.invented_body import MEASUREMENTS
from tests.body.standing import standing_com

STATURE = {"female": 1.66, "male": 1.79}
CASES = [(sex, table) for sex in STATURE for table in ("de_leva", "dempster")]


def test_half_body_of_winter_example_4_5() -> None:
    # D. A. Winter, "Biomechanics and Motor Control of Human Movement", Example 4.5.
    masses = 2 * [0.0145, 0.0465, 0.1, 0.339]
    x = [0.791, 0.814, 0.787, 0.721, 0.646, 0.648, 0.695, 0.717]
    y = [0.101, 0.374, 0.708, 1.124, 0.067, 0.334, 0.691, 1.122]
    points = np.column_stack([x, y])
    # The sum is .72450, printed as .724.
    assert whole_body_com(points, masses) == pytest.approx([0.724, 0.937], abs=5.1e-4)


def test_leg_of_a_handbook() -> None:
    # "Biomechanics of the Human Body", Example 3.4, cm: thigh, shank, foot.
    points = [[17.3, 51.3], [42.5, 32.8], [45.0, 3.3]]
    com = whole_body_com(points, [0.106, 0.046, 0.017])
    # The rounding of the inputs (0.05 cm, .0005) passes into the printed (26.9, 41.4).
    assert com == pytest.approx([26.9, 41.4], abs=0.1)


def test_arm_of_a_physics_text() -> None:
    # Giancoli, "Physics", 7th ed., problems 57 and 58; heights in % of stature.
    masses = [6.6, 4.2, 1.7]
    below = [[81.2 - height] for height in (71.7, 55.3, 43.1)]
    assert whole_body_com(below, masses) == pytest.approx([18.9], abs=0.05)
    # The same arm with a right angle at the elbow (62.2), a person of 155 cm.
    bent = [[0.0, 81.2 - 71.7], [62.2 - 55.3, 81.2 - 62.2], [62.2 - 43.1, 81.2 - 62.2]]
    com = 1.55 * whole_body_com(bent, masses)
    # Printed as 21.7 below and 7.6 out; from the inputs 7.64 and 21.7.
    assert com == pytest.approx([7.6, 21.7], abs=0.06)


def test_bent_body_of_a_physics_text() -> None:
    # Cutnell & Johnson, "Physics", problem 44: kg and m.
    points = [[0.0, 0.39], [0.17, 0.0], [0.43, -0.26]]
    assert whole_body_com(points, [41.0, 17.0, 9.9]) == pytest.approx([0.105, 0.198], abs=8e-4)


def test_sum_over_stacks_and_empty_mass() -> None:
    points = np.arange(24.0).reshape(2, 4, 3)
    com = whole_body_com(points, [1.0, 1.0, 1.0, 1.0])
    assert com.shape == (2, 3)
    np.testing.assert_allclose(com, points.mean(axis=1))
    assert np.isnan(whole_body_com(points, np.zeros(4))).all()


def test_asymmetric_pose_of_the_package_yeadon() -> None:
    # Package yeadon 2.0.1, its sample body male4: left arm up; right arm and elbow at 90°; left
    # hip and knee at 90°; right hip abducted by 30°. kg and m from the hip centre.
    table = np.array(
        [
            [15.241326, 0, 0, 0.116746],
            [7.062405, 0, 0, 0.309630],
            [19.982242, 0, 0, 0.539259],
            [1.922191, 0.229, 0, 0.691330],
            [2.013227, 0.229, 0, 1.024973],
            [1.922191, -0.349330, 0, 0.571],
            [2.013227, -0.486, -0.196973, 0.571],
            [9.142543, 0.0815, -0.178251, 0],
            [5.151554, 0.0815, -0.408, -0.264418],
            [9.142543, -0.170625, 0, -0.154370],
            [5.151554, -0.417709, 0, -0.582331],
        ]
    )
    com = whole_body_com(table[:, 1:], table[:, 0])
    assert com == pytest.approx([-0.041851, -0.052423, 0.185508], abs=2e-6)


def test_package_yeadon_sums_alike_and_lifts_alike() -> None:
    import yeadon

    human = yeadon.Human(dict(MEASUREMENTS))
    down = human.center_of_mass.ravel()[2]
    bend = {"J1J2flexion": np.pi / 2, "PJ1extension": -1.2, "PK1abduction": 0.5}
    for name, angle in {"CA1adduction": -np.pi, "CB1abduction": np.pi, **bend}.items():
        human.set_CFG(name, angle)
    points = np.array([segment.center_of_mass.ravel() for segment in human.segments])
    masses = [segment.mass for segment in human.segments]
    ours = whole_body_com(points, masses)
    np.testing.assert_allclose(ours, human.center_of_mass.ravel(), atol=1e-12)
    for name in bend:
        human.set_CFG(name, 0.0)
    # Two unrelated models of a 1.76 m body: how far swinging both arms up lifts the whole, about
    # fixed shoulders as yeadon's are.
    lift = human.center_of_mass.ravel()[2] - down
    body = make_athlete(sex="male", stature=1.76, mass=74.0)
    ours_lift = standing_com(body, "swung")[2] - standing_com(body, "down")[2]
    assert ours_lift == pytest.approx(lift, rel=0.20)


@pytest.mark.parametrize(("sex", "table"), CASES)
def test_standing_height_and_lift(sex: str, table: str) -> None:
    # Bands that course notes (M .57, F .55), a physics text (.580) and both tables agree with:
    # standing .54 to .585 of stature; swinging both arms up about fixed shoulders lifts it by
    # .027 to .036.
    body = make_athlete(sex=sex, stature=STATURE[sex], mass=60.0, mass_table=table)
    down, swung, up = (standing_com(body, arms) for arms in ("down", "swung", "up"))
    assert 0.54 <= down[2] / body.stature <= 0.585
    assert 0.027 <= (swung - down)[2] / body.stature <= 0.036
    assert down[0] == pytest.approx(0.0, abs=1e-15)
    # The shoulders' own rise carries the arms along.
    segments = segment_table(body)
    arms = [name.startswith(("upper_arm", "forearm", "hand")) for name in segments.names]
    rise = body.length("shoulder_rise") * segments.mass_fraction[arms].sum()
    assert (up - swung)[2] == pytest.approx(rise, abs=1e-12)


@pytest.mark.parametrize(
    ("sex", "table", "down", "swung"),
    [("male", "de_leva", 0.558, 0.592), ("female", "de_leva", 0.559, 0.589)],
)
def test_standing_height_on_the_survey_heights(
    sex: str, table: str, down: float, swung: float
) -> None:
    # De Leva's masses put on the 2012 survey's mean heights, computed apart from this program;
    # .005 covers where the head and the shoulder line are put.
    body = make_athlete(sex=sex, stature=mean(sex, "stature"), mass=70.0, mass_table=table)
    assert standing_com(body, "down")[2] / body.stature == pytest.approx(down, abs=0.005)
    assert standing_com(body, "swung")[2] / body.stature == pytest.approx(swung, abs=0.005)


@pytest.mark.parametrize(("sex", "table"), CASES)
def test_segments_are_ordered_whole_and_symmetric(sex: str, table: str) -> None:
    body = make_athlete(sex=sex, stature=STATURE[sex], mass=60.0, mass_table=table)
    segments = segment_table(body)
    assert segments.names == SEGMENT_NAMES
    assert len(SEGMENT_NAMES) == len(SEGMENT_ENDS) == 14
    assert segments.names[:4] == ("trunk", "head_neck", "upper_arm_L", "upper_arm_R")
    assert segments.mass_fraction.sum() == pytest.approx(1.0, abs=1e-15)
    np.testing.assert_array_equal(segments.mass_fraction[2::2], segments.mass_fraction[3::2])
    np.testing.assert_array_equal(segments.cm_fraction[2::2], segments.cm_fraction[3::2])
    assert np.all((segments.cm_fraction > 0.0) & (segments.cm_fraction < 1.0))


@pytest.mark.parametrize("sex", STATURE)
def test_heavier_legs_lower_the_centre(sex: str) -> None:
    body = make_athlete(sex=sex, stature=STATURE[sex], mass=60.0)
    table = segment_table(body)
    heights = np.linspace(0.0, 1.0, 14)
    legs = np.array([name.startswith(("thigh", "shank", "foot")) for name in table.names])
    centres = np.column_stack([np.where(legs, 0.5, 1.2) + 0.0 * heights])
    heavier = np.where(legs, 1.1, 1.0) * table.mass_fraction
    assert whole_body_com(centres, heavier)[0] < whole_body_com(centres, table.mass_fraction)[0]
