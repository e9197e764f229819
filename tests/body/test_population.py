"""Drawn bodies hang together as the survey says, and body k is the same however many are drawn."""

from __future__ import annotations

import csv
from functools import lru_cache
from math import sqrt
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

import climbpath.body
from climbpath.body import LENGTH_NAMES, Athlete
from climbpath.body.population import draw_bodies
from climbpath.errors import DataError, UsageError

TABLES = Path(climbpath.body.__file__).parent / "tables"
NUMBER = 3000

# A body-mass index that is independent of stature S and gives the survey's weight W again:
# mean W = b (mean S² + sd S²), sd W² = (2 b mean S sd S)² + (sd b)² (mean S)⁴ to first order.
# Men: 85.52 = 27.69 · 3.0890, 14.22² = 6.67² + 4.07² · 9.513; women the same way.
AS_THE_SURVEY = {"male": ((1.75621, 0.06855), (27.69, 4.07)),
                 "female": ((1.62847, 0.06420), (25.51, 3.54))}
FINALISTS = {"male": ((1.77, 0.08), (22.0, 1.2)), "female": ((1.67, 0.04), (20.0, 1.2))}

SAME = {"span": "span", "sitting_height": "sittingheight", "forearm": "radialestylionlength",
        "hand": "handlength", "foot": "footlength", "shoulder_height": "acromialheight",
        "shoulder_breadth": "biacromialbreadth", "hip_breadth": "hipbreadth"}
"""Measurements of an athlete that are variables of the survey as they are."""


def statistics(sex: str) -> dict[str, tuple[float, float, float]]:
    """Mean, SD (m, kg) and correlation with stature, read from the table apart from the package."""
    with open(TABLES / "survey_2012.csv", encoding="utf-8") as stream:
        rows = list(csv.DictReader(line for line in stream if not line.startswith("#")))
    return {
        row["variable"]: (
            float(row["mean"]) * (1.0 if row["variable"] == "weightkg" else 1e-3),
            float(row["sd"]) * (1.0 if row["variable"] == "weightkg" else 1e-3),
            float(row["r_with_stature"]),
        )
        for row in rows if row["sex"] == sex
    }


def correlations(sex: str) -> dict[tuple[str, str], float]:
    with open(TABLES / f"survey_2012_correlations_{sex}.csv", encoding="utf-8") as stream:
        rows = list(csv.reader(line for line in stream if not line.startswith("#")))
    return {(a, b): float(rows[i + 1][j])
            for i, a in enumerate(rows[0]) for j, b in enumerate(rows[0])}


@lru_cache(maxsize=4)
def drawn(sex: str, finalists: bool) -> tuple[Athlete, ...]:
    stature, build = (FINALISTS if finalists else AS_THE_SURVEY)[sex]
    return draw_bodies(sex, NUMBER, 5, stature=stature, body_mass_index=build)


def column(bodies: tuple[Athlete, ...], name: str) -> NDArray[np.float64]:
    if name in ("stature", "mass"):
        return np.array([getattr(body, name) for body in bodies])
    return np.array([body.measured[name] for body in bodies])


@pytest.mark.parametrize("sex", ["male", "female"])
def test_drawn_as_wide_as_the_survey_they_are_the_survey(sex: str) -> None:
    bodies, table, r = drawn(sex, False), statistics(sex), correlations(sex)
    values = {SAME[name]: column(bodies, name) for name in SAME}
    values |= {"stature": column(bodies, "stature"), "weightkg": column(bodies, "mass")}
    for name, value in values.items():
        mean, sd, with_stature = table[name]
        # Four standard errors of 3,000 draws, and a little for the one in a hundred drawn again.
        assert value.mean() == pytest.approx(mean, abs=4.5 * sd / sqrt(NUMBER)), name
        assert value.std() == pytest.approx(sd, rel=0.06), name
        if name != "weightkg":  # its relation to stature is that of the index asked for
            seen = np.corrcoef(value, values["stature"])[0, 1]
            assert seen == pytest.approx(with_stature, abs=0.06), name
    names = [name for name in values if name != "weightkg"]
    for i, a in enumerate(names):
        for b in names[:i]:
            seen = np.corrcoef(values[a], values[b])[0, 1]
            assert seen == pytest.approx(r[a, b], abs=0.07), (a, b)


@pytest.mark.parametrize("sex", ["male", "female"])
def test_lengths_of_finalists_follow_the_survey_at_their_stature_and_mass(sex: str) -> None:
    bodies, table, r = drawn(sex, True), statistics(sex), correlations(sex)
    stature, mass = column(bodies, "stature"), column(bodies, "mass")
    (mean, sd), (build, build_sd) = FINALISTS[sex]
    assert stature.mean() == pytest.approx(mean, abs=4.5 * sd / sqrt(NUMBER))
    assert stature.std() == pytest.approx(sd, rel=0.06)
    index = mass / stature**2
    assert index.mean() == pytest.approx(build, abs=4.5 * build_sd / sqrt(NUMBER))
    assert index.std() == pytest.approx(build_sd, rel=0.06)
    for name, variable in SAME.items():
        # The regression on two variables from its three correlations (any text on statistics).
        y, s, w = table[variable], table["stature"], table["weightkg"]
        ys, yw, sw = r[variable, "stature"], r[variable, "weightkg"], r["stature", "weightkg"]
        on_stature = (ys - yw * sw) / (1.0 - sw**2) * y[1] / s[1]
        on_mass = (yw - ys * sw) / (1.0 - sw**2) * y[1] / w[1]
        explained = (ys**2 + yw**2 - 2.0 * ys * yw * sw) / (1.0 - sw**2)
        left = column(bodies, name) - (
            y[0] + on_stature * (stature - s[0]) + on_mass * (mass - w[0])
        )
        spread = y[1] * sqrt(1.0 - explained)
        assert left.mean() == pytest.approx(0.0, abs=5.0 * spread / sqrt(NUMBER)), name
        assert left.std() == pytest.approx(spread, rel=0.06), name
        # Nothing of stature or mass is left in the rest.
        assert abs(np.corrcoef(left, stature)[0, 1]) < 0.08, name
        assert abs(np.corrcoef(left, mass)[0, 1]) < 0.08, name


def test_a_body_closes_and_counts_as_measured() -> None:
    for body in drawn("female", True)[:50]:
        assert 2.0 * (body.length("shoulder_half_width") + body.arm) == pytest.approx(
            body.measured["span"], abs=1e-9
        )
        assert body.standing_reach == pytest.approx(body.measured["standing_reach"], abs=1e-9)
        assert body.length("thigh") == body.measured["thigh"]
        assert all(body.length(name) > 0.0 for name in LENGTH_NAMES if name != "shoulder_rise")


def test_body_k_is_the_same_however_many_are_drawn() -> None:
    stature, build = FINALISTS["male"]
    few = draw_bodies("male", 3, 7, stature=stature, body_mass_index=build)
    many = draw_bodies("male", 9, 7, stature=stature, body_mass_index=build)
    assert many[:3] == few
    assert [body.name for body in few] == ["body 1", "body 2", "body 3"]
    assert len({body.stature for body in many}) == 9
    other = draw_bodies("male", 3, (7, 1), stature=stature, body_mass_index=build)
    assert other[0].stature != few[0].stature
    assert draw_bodies("male", 0, 7, stature=stature, body_mass_index=build) == ()


def test_capacity_goes_to_every_body() -> None:
    bodies = draw_bodies("female", 2, 0, stature=(1.67, 0.04), body_mass_index=(20.0, 1.0),
                         capacity={"hand_pull_bw": 0.9})
    assert [dict(body.capacity) for body in bodies] == [{"hand_pull_bw": 0.9}] * 2


def test_what_no_body_can_have_is_drawn_again_and_in_the_end_refused() -> None:
    # Half of the statures lie below the 1.2 m that an athlete may have at least.
    bodies = draw_bodies("female", 40, 2, stature=(1.2, 0.03), body_mass_index=(22.0, 1.0))
    assert min(body.stature for body in bodies) >= 1.2
    with pytest.raises(DataError, match="stature_mm"):
        draw_bodies("female", 1, 2, stature=(3.0, 0.01), body_mass_index=(22.0, 1.0))


def test_every_wrong_argument_is_named() -> None:
    with pytest.raises(UsageError) as caught:
        draw_bodies("none", -1, 0, stature=(float("nan"), 0.1), body_mass_index=(22.0, -1.0))
    text = str(caught.value)
    assert all(word in text for word in ("sex", "number of bodies", "stature", "body_mass_index"))
    with pytest.raises(UsageError, match="seed"):
        draw_bodies("male", 1, -4, stature=(1.8, 0.1), body_mass_index=(22.0, 1.0))
