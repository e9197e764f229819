"""A whole body from a few measurements: identities, precedence, errors, refusals."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climbpath.body import LENGTH_NAMES, MEASURED_NAMES, Athlete, make_athlete
from climbpath.body.tables import share_bounds
from climbpath.errors import DataError

SEXES = ("female", "male")


def check_identities(body: Athlete) -> None:
    length = body.length
    arm = length("upper_arm") + length("forearm") + length("hand")
    hip = length("thigh") + length("shank") + length("ankle_height")
    reach = hip + length("trunk") + length("shoulder_rise") + arm
    assert body.stature == pytest.approx(hip + length("trunk") + length("neck_head"), abs=1e-12)
    assert body.reaches["hip_height"].value == pytest.approx(hip, abs=1e-12)
    assert body.reaches["standing_reach"].value == pytest.approx(reach, abs=1e-12)
    span = 2 * (length("shoulder_half_width") + arm)
    assert body.reaches["span"].value == pytest.approx(span, abs=1e-12)


@st.composite
def bodies(draw: st.DrawFn) -> dict[str, object]:
    """Inputs of a body with some of span, sitting height and reach, not too odd (about 3 SD)."""
    stature = draw(st.floats(1.35, 2.15))
    shares = {"span": (0.96, 1.10), "sitting_height": (0.49, 0.56), "standing_reach": (1.24, 1.36)}
    measured = {
        name: stature * draw(st.floats(*shares[name]))
        for name in draw(st.sets(st.sampled_from(sorted(shares))))
    }
    return {
        "sex": draw(st.sampled_from(SEXES)),
        "stature": stature,
        "mass": draw(st.floats(17.0, 32.0)) * stature**2,
        "measured": measured,
    }


@settings(derandomize=True, max_examples=150, deadline=None)
@given(bodies())
def test_identities_hold_and_measured_values_stand(inputs: dict[str, object]) -> None:
    body = make_athlete(**inputs)
    check_identities(body)
    assert tuple(body.lengths) == LENGTH_NAMES
    for name, value in inputs["measured"].items():
        if name in body.reaches:
            assert body.reaches[name].value == pytest.approx(value, abs=1e-9)
            assert body.reaches[name].sd == 0.0
    for name, length in body.lengths.items():
        low, high = share_bounds()[name]
        assert low * body.stature <= length.value <= high * body.stature
        assert length.sd >= 0.0


@pytest.mark.parametrize("sex", SEXES)
@pytest.mark.parametrize("plain", [{}, {"span": 1.74}, {"span": 1.74, "sitting_height": 0.89}])
def test_any_measured_limb_part_stands(sex: str, plain: dict[str, float]) -> None:
    base = make_athlete(sex=sex, stature=1.70, mass=62.0, measured=plain)
    parts = ("upper_arm", "forearm", "hand", "thigh", "shank", "ankle_height", "foot")
    chosen_sets = [itertools.combinations(parts, n) for n in (1, 2, 3)]
    for chosen in itertools.chain.from_iterable(chosen_sets):
        measured = {name: base.length(name) * 1.03 for name in chosen}
        body = make_athlete(sex=sex, stature=1.70, mass=62.0, measured={**plain, **measured})
        check_identities(body)
        for name, value in measured.items():
            assert body.length(name) == pytest.approx(value, abs=1e-12)
            assert body.lengths[name].source == "measured"
        if "span" in plain:
            assert body.span == pytest.approx(plain["span"], abs=1e-12)


@pytest.mark.parametrize("sex", SEXES)
def test_unmeasured_arm_parts_follow_the_span(sex: str) -> None:
    plain = {"span": 1.74, "sitting_height": 0.89}
    base = make_athlete(sex=sex, stature=1.70, mass=62.0, measured=plain)
    measured = {**plain, "upper_arm": base.length("upper_arm") + 0.015}
    body = make_athlete(sex=sex, stature=1.70, mass=62.0, measured=measured)
    assert body.arm == pytest.approx(base.arm, abs=1e-12)
    assert body.length("forearm") < base.length("forearm")


@pytest.mark.parametrize("sex", SEXES)
def test_measured_reach_moves_the_rise_first_then_the_arm(sex: str) -> None:
    base = make_athlete(sex=sex, stature=1.70, mass=62.0, measured={"span": 1.74})
    near = make_athlete(
        sex=sex,
        stature=1.70,
        mass=62.0,
        measured={"span": 1.74, "standing_reach": base.standing_reach + 0.02},
    )
    # The reach also tells of the sitting height, so shoulders and hips may move a little.
    assert near.standing_reach == pytest.approx(base.standing_reach + 0.02, abs=1e-12)
    assert near.length("shoulder_rise") > base.length("shoulder_rise")
    low = 1.70 * 1.20
    far = make_athlete(
        sex=sex, stature=1.70, mass=62.0, measured={"span": 1.74, "standing_reach": low}
    )
    check_identities(far)
    assert far.standing_reach == pytest.approx(low, abs=1e-12)
    assert far.length("shoulder_rise") == pytest.approx(0.0, abs=1e-12)
    assert far.arm < base.arm
    assert far.span == pytest.approx(1.74, abs=1e-12)


def test_reach_alone_lengthens_the_estimated_span() -> None:
    plain = make_athlete(sex="male", stature=1.75, mass=70.0)
    tall = {"standing_reach": plain.standing_reach + 0.06}
    reached = make_athlete(sex="male", stature=1.75, mass=70.0, measured=tall)
    assert reached.span > plain.span + 0.02


@pytest.mark.parametrize("sex", SEXES)
def test_residual_sd_falls_with_what_is_measured(sex: str) -> None:
    plain = make_athlete(sex=sex, stature=1.70, mass=62.0)
    span = {"span": plain.span}
    both = {**span, "sitting_height": 0.52 * 1.70}
    with_span = make_athlete(sex=sex, stature=1.70, mass=62.0, measured=span)
    with_both = make_athlete(sex=sex, stature=1.70, mass=62.0, measured=both)
    for name in ("upper_arm", "forearm", "hand", "shoulder_half_width", "thigh", "shank"):
        assert with_span.lengths[name].sd < plain.lengths[name].sd
        assert with_both.lengths[name].sd <= with_span.lengths[name].sd
    for name in ("trunk", "thigh", "shank", "neck_head"):
        assert with_both.lengths[name].sd < with_span.lengths[name].sd
    assert with_both.reaches["hip_height"].sd < with_span.reaches["hip_height"].sd


def test_lower_mass_means_a_shallower_trunk() -> None:
    light = make_athlete(sex="female", stature=1.65, mass=50.0)
    heavy = make_athlete(sex="female", stature=1.65, mass=72.0)
    ratio = heavy.length("chest_depth") / light.length("chest_depth")
    assert ratio == pytest.approx(np.sqrt(72.0 / 50.0))
    assert heavy.length("trunk") == light.length("trunk")


def test_ranges_are_norms_unless_given() -> None:
    body = make_athlete(sex="male", stature=1.75, mass=70.0, ranges={"hip_abduction": 1.2})
    assert body.ranges["hip_abduction"] == 1.2
    assert body.ranges["elbow_flexion"] == pytest.approx(np.deg2rad(143.0))  # Boone & Azen


def test_missing_measurements_and_odd_statures_are_said() -> None:
    plain = make_athlete(sex="male", stature=2.05, mass=90.0)
    assert any("extrapolated" in text for text in plain.cautions)
    assert any("span, sitting height, standing reach" in text for text in plain.cautions)
    known = {"span": 1.80, "sitting_height": 0.92, "standing_reach": 2.25}
    assert make_athlete(sex="male", stature=1.75, mass=70.0, measured=known).cautions == ()


def test_every_wrong_input_is_reported_at_once() -> None:
    with pytest.raises(DataError) as caught:
        make_athlete(
            sex="m",
            stature=1.7,
            mass=float("nan"),
            measured={"span": 17.0, "wing": 1.0},
            ranges={"elbow_flexion": 9.0, "toe": 1.0},
            birth_year=1492,
            mass_table="none",
        )
    keys = {problem.key for problem in caught.value.problems}
    assert keys == {
        "sex",
        "mass_kg",
        "measured.span_mm",
        "measured.wing_mm",
        "range.elbow_flexion_deg",
        "range.toe_deg",
        "birth_year",
        "mass_table",
    }


@pytest.mark.parametrize(
    ("measured", "key"),
    [
        # Arms as long as half the span leave no shoulders.
        ({"span": 1.50, "upper_arm": 0.33, "forearm": 0.28, "hand": 0.2}, "measured"),
        # A reach lower than these arms on these shoulders.
        ({"standing_reach": 1.92, "upper_arm": 0.3, "forearm": 0.26, "hand": 0.19}, "measured"),
        # Leg parts that do not add up to the hip height.
        ({"hip_height": 0.90, "thigh": 0.45, "shank": 0.45}, "measured.hip_height_mm"),
    ],
)
def test_contradictions_are_refused(measured: dict[str, float], key: str) -> None:
    with pytest.raises(DataError) as caught:
        make_athlete(sex="male", stature=1.70, mass=65.0, measured=measured)
    assert key in {problem.key for problem in caught.value.problems}


def test_every_measurement_has_bounds() -> None:
    assert set(MEASURED_NAMES) | set(LENGTH_NAMES) == set(share_bounds())
