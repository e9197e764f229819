"""The linkage against the athlete, assembly against closed forms, and the centre of mass."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from climbpath.body import Athlete, make_athlete, segment_table, whole_body_com
from climbpath.posture.assembly import JOINT, JOINTS, assemble
from climbpath.posture.com import SEGMENT_JOINTS, com_of, joint_weights
from climbpath.posture.linkage import GRIP_SHARE, Linkage, linkage_of
from tests.posture.drawn import ATHLETES, LINKAGES, Drawn, drawn, flat, joints_in_world
from tests.posture.oracle import ARM_ACROSS, GRIP, LEG_BENT

Array = NDArray[np.float64]

BODIES = pytest.mark.parametrize(
    ("athlete", "linkage"), list(zip(ATHLETES, LINKAGES, strict=True)), ids=["male", "female"]
)


def bent(first: float, second: float, flexion: float) -> float:
    """Distance between the ends of two links, built from points: the second link is turned back
    by ``flexion`` from straight on."""
    end = np.array([first, 0.0]) + second * np.array([np.cos(flexion), np.sin(flexion)])
    return float(np.hypot(*end))


def foot(athlete: Athlete, ankle: float) -> Array:
    """Toe seen from the knee (forward, up) with the shank hanging straight down.

    ``ankle``: 0 with the sole at right angles to the shank, positive with the toes pointed.
    """
    toe, height = athlete.length("ankle_to_toe"), athlete.length("ankle_height")
    down = np.arcsin(height / toe) + ankle
    return np.array([toe * np.cos(down), -athlete.length("shank") - toe * np.sin(down)])


@BODIES
def test_reach_of_hands(athlete: Athlete, linkage: Linkage) -> None:
    length = athlete.length
    arm = length("upper_arm") + length("forearm") + GRIP * length("hand")
    assert GRIP_SHARE == GRIP
    assert linkage.reach[:2] == pytest.approx([arm, arm])
    # A strike ends at the fingertip: the standing reach overhead is then the athlete's.
    over = linkage.floor_reach + linkage.trunk + linkage.shoulder_rise + arm + linkage.strike_extra
    assert over == pytest.approx(athlete.standing_reach)


@BODIES
def test_lower_leg_follows_the_ankle(athlete: Athlete, linkage: Linkage) -> None:
    limit = athlete.ranges
    expected = [np.hypot(*foot(athlete, angle))
                for angle in (-limit["ankle_dorsiflexion"], 0.0, limit["ankle_plantarflexion"])]
    assert linkage.lower_leg == pytest.approx(expected)
    assert linkage.reach[2:] == pytest.approx(2 * [athlete.length("thigh") + expected[2]])


@BODIES
def test_fold_of_arms(athlete: Athlete, linkage: Linkage) -> None:
    length = athlete.length
    fore = length("forearm") + GRIP * length("hand")
    fold = bent(length("upper_arm"), fore, athlete.ranges["elbow_flexion"])
    assert linkage.fold[:2] == pytest.approx([fold, fold])


@BODIES
def test_fold_of_legs(athlete: Athlete, linkage: Linkage) -> None:
    # With the shank straight down, a thigh at full knee flexion rises behind it: the heel comes
    # to the buttock while the toe stands forward.
    knee = np.pi - athlete.ranges["knee_flexion"]
    hip = athlete.length("thigh") * np.array([-np.sin(knee), -np.cos(knee)])
    fold = np.hypot(*(foot(athlete, 0.0) - hip))
    assert linkage.fold[2:] == pytest.approx([fold, fold])


@BODIES
def test_roots_knee_and_side_limits(athlete: Athlete, linkage: Linkage) -> None:
    length, limit = athlete.length, athlete.ranges
    shoulder, hip = length("shoulder_half_width"), length("hip_half_width")
    assert linkage.roots[:, 0] == pytest.approx([-shoulder, shoulder, -hip, hip])
    assert linkage.roots[:, 1] == pytest.approx([length("trunk"), length("trunk"), 0.0, 0.0])
    assert not linkage.roots[:, 2].any()
    # Full hip flexion is measured from the standing leg.
    flexed = limit["hip_flexion"]
    assert linkage.knee_limit == pytest.approx(
        length("thigh") * np.array([np.sin(flexed), -np.cos(flexed)]))
    assert linkage.out_limit == pytest.approx(linkage.reach[2] * np.sin(limit["hip_abduction"]))
    # Crossing is a plane: that of a straight arm, and of a leg bent to this share of its reach.
    arm = linkage.reach[0] * np.sin(ARM_ACROSS)
    leg = LEG_BENT * linkage.reach[2] * np.sin(limit["hip_adduction"])
    assert linkage.across == pytest.approx([arm, arm, leg, leg])
    assert linkage.pelvis_space == pytest.approx(length("pelvis_depth") / 2)
    assert linkage.chest_space == pytest.approx(length("chest_depth") / 2)


def standing(which: int, up: bool) -> Drawn:
    """One stance: both feet on the floor, hands overhead on holds or nowhere."""
    surface = flat(0.0)
    points = np.zeros((1, 4, 3))
    linkage = LINKAGES[which]
    top = (surface.floor_height + linkage.floor_reach + linkage.trunk + linkage.shoulder_rise
           + linkage.reach[0])
    points[0, :2] = [[1.0 + linkage.roots[k, 0], top, 0.3] for k in range(2)]
    contacts = np.array([[0, 1, -2, -2] if up else [-1, -1, -2, -2]])
    return Drawn(which, surface, contacts, points, np.zeros((1, 4), dtype=bool))


@pytest.mark.parametrize("which", [0, 1], ids=["male", "female"])
def test_standing_straight_with_arms_overhead(which: int) -> None:
    """Everything in line: the joints are sums of lengths."""
    stance, linkage = standing(which, True), LINKAGES[which]
    shift = np.array([[1.0], [stance.surface.floor_height + linkage.floor_reach], [0.3]])
    joints = assemble(linkage, stance.batch(), np.eye(3)[:, :, None], shift)[:, :, 0]
    shoulder = shift[1, 0] + linkage.trunk + linkage.shoulder_rise
    for side, sign in (("L", -1.0), ("R", 1.0)):
        x = 1.0 + sign * linkage.roots[1, 0]
        heights = np.cumsum([shoulder, linkage.upper_arm, linkage.forearm, GRIP * linkage.hand])
        for name, height in zip(
            (f"shoulder_{side}", f"elbow_{side}", f"wrist_{side}", side + "H"), heights, strict=True
        ):
            assert joints[JOINT[name]] == pytest.approx([x, height, 0.3], abs=1e-6)
        x = 1.0 + sign * linkage.roots[3, 0]
        down = shift[1, 0] - np.cumsum(
            [0.0, linkage.thigh, linkage.shank, linkage.ankle_height])
        for name, height in zip(
            (f"hip_{side}", f"knee_{side}", f"ankle_{side}", side + "F"), down, strict=True
        ):
            assert joints[JOINT[name]] == pytest.approx([x, height, 0.3], abs=1e-6)


@pytest.mark.parametrize("which", [0, 1], ids=["male", "female"])
def test_arm_at_a_right_angle(which: int) -> None:
    """A hold one hypotenuse away: the elbow's angle is a right one (Pythagoras)."""
    stance, linkage = standing(which, True), LINKAGES[which]
    fore = linkage.forearm + GRIP * linkage.hand
    shift = np.array([[1.0], [0.8], [0.3]])
    shoulder = np.array([1.0 + linkage.roots[1, 0], 0.8 + linkage.trunk, 0.3])
    stance.points[0, 1] = shoulder
    stance.points[0, 1, 0] += np.hypot(linkage.upper_arm, fore)
    joints = assemble(linkage, stance.batch(), np.eye(3)[:, :, None], shift)[:, :, 0]
    elbow = joints[JOINT["elbow_R"]]
    assert (elbow - shoulder) @ (joints[JOINT["RH"]] - elbow) == pytest.approx(0.0, abs=1e-9)


def test_out_of_reach_is_drawn_straight_and_stops_short() -> None:
    stance, linkage = standing(0, True), LINKAGES[0]
    stance.points[0, 1] += [0.0, 1.0, 0.0]
    shift = np.array([[1.0], [0.8], [0.3]])
    joints = assemble(linkage, stance.batch(), np.eye(3)[:, :, None], shift)[:, :, 0]
    arm = joints[JOINT["RH"]] - joints[JOINT["shoulder_R"]]
    assert np.linalg.norm(arm) == pytest.approx(linkage.reach[1])
    toward = stance.points[0, 1] - joints[JOINT["shoulder_R"]]
    assert np.cross(arm, toward) == pytest.approx(np.zeros(3), abs=1e-9)


@BODIES
def test_weights_are_those_of_the_segment_table(athlete: Athlete, linkage: Linkage) -> None:
    weights = joint_weights(linkage)
    assert weights.shape == (len(JOINTS),)
    assert weights.sum() == pytest.approx(1.0)
    table = segment_table(athlete)
    assert linkage.segment_names == table.names
    assert set(SEGMENT_JOINTS) == {name.removesuffix("_L").removesuffix("_R")
                                   for name in table.names}


@pytest.mark.parametrize("which", [0, 1], ids=["male", "female"])
def test_com_is_the_sum_over_segments(which: int) -> None:
    stances = drawn(which, 60, 80 + which)
    joints = joints_in_world(stances, stances.solved(), np.arange(60))
    table = segment_table(stances.athlete)
    centres = []
    for name, centre in zip(table.names, table.cm_fraction, strict=True):
        kind, side = (name[:-2], name[-1]) if name[-2:] in ("_L", "_R") else (name, "")
        first, second, share = SEGMENT_JOINTS[kind]
        ends = [side + joint if joint in ("H", "F") else f"{joint}_{side}" if side else joint
                for joint in (first, second)]
        start, end = (joints[:, JOINT[joint]] for joint in ends)
        centres.append(start + centre / share * (end - start))
    expected = whole_body_com(np.stack(centres, axis=1), table.mass_fraction)
    found = com_of(joint_weights(stances.linkage), joints.transpose(1, 2, 0)).T
    assert found == pytest.approx(expected, abs=1e-12)


def heavier_legs(linkage: Linkage, share: float) -> Linkage:
    """The same body with ``share`` of its mass moved from the trunk to the legs."""
    mass = linkage.segment_mass.copy()
    legs = [k for k, name in enumerate(linkage.segment_names)
            if name.startswith(("thigh", "shank", "foot"))]
    mass[linkage.segment_names.index("trunk")] -= share
    mass[legs] += share / len(legs)
    return replace(linkage, segment_mass=mass)


@settings(derandomize=True, max_examples=15, deadline=None)
@given(which=st.integers(0, 1), seed=st.integers(0, 10_000), share=st.floats(0.01, 0.2))
def test_heavier_legs_lower_the_centre_of_mass(which: int, seed: int, share: float) -> None:
    # Trunks stay within 40 degrees of the wall and toes below hips, so the legs' segments lie
    # below the trunk's centre of mass on the average of both legs, for free and used legs alike.
    stances = drawn(which, 30, seed)
    found = stances.solved()
    possible = np.flatnonzero(found.margin >= 0.0)
    joints = joints_in_world(stances, found, possible).transpose(1, 2, 0)
    plain = com_of(joint_weights(stances.linkage), joints)
    heavy = com_of(joint_weights(heavier_legs(stances.linkage, share)), joints)
    assert (heavy[1] < plain[1]).all()


def test_measured_lengths_reach_the_linkage() -> None:
    longer = make_athlete(sex="male", stature=1.79, mass=70.0, measured={"span": 1.90})
    assert linkage_of(longer).reach[0] > LINKAGES[0].reach[0]


@pytest.mark.parametrize("which", [0, 1], ids=["male", "female"])
def test_rising_on_the_toes_gives_a_floor_foot_more_reach(which: int) -> None:
    """Between whole foot and tiptoe the toe stays on the ground and the ankle rises."""
    stance, linkage = standing(which, False), LINKAGES[which]
    assert linkage.tiptoe_reach > linkage.floor_reach + 0.03
    middle = (linkage.tiptoe_reach + linkage.floor_reach) / 2.0
    shift = np.array([[1.0], [stance.surface.floor_height + middle], [0.3]])
    joints = assemble(linkage, stance.batch(), np.eye(3)[:, :, None], shift)[:, :, 0]
    ankle, toe = joints[JOINT["ankle_L"]], joints[JOINT["LF"]]
    assert toe[1] == pytest.approx(stance.surface.floor_height, abs=1e-9)
    assert ankle[1] - toe[1] > linkage.ankle_height
    assert np.linalg.norm(ankle - toe) == pytest.approx(linkage.toe, abs=1e-9)
