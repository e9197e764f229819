"""Conditional estimates from the 2012 survey: what a body's measured lengths say of the others.

Measures are taken as jointly normal with the survey's means, SDs and correlations. A quantity is
a weighted sum w·z of survey variables z, so its estimate from known ones K z = k is
w·µ + w Σ Kᵀ (K Σ Kᵀ)⁻¹ (k − K µ), with residual variance w (Σ − Σ Kᵀ (K Σ Kᵀ)⁻¹ K Σ) wᵀ (any text
on the normal distribution); with stature, span and sitting height known this is the
least-squares line on the three.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from climbpath.body.tables import rows, settings, survey_lines, survey_statistics

Array = NDArray[np.float64]


@cache
def variables() -> tuple[str, ...]:
    """Survey variables with known correlations, in the order of the covariance's axes."""
    return tuple(rows("survey_2012_correlations_female.csv")[0])


@cache
def covariance(sex: str) -> Array:
    """Covariance of the survey variables, shape (V, V); m², m kg, kg² for ``weightkg``."""
    table = rows(f"survey_2012_correlations_{sex}.csv")
    correlation = np.array([[float(row[name]) for name in variables()] for row in table])
    spread = np.array(
        [
            survey_statistics(sex)[name][1] * (1.0 if name == "weightkg" else 1e-3)
            for name in variables()
        ]
    )
    result: Array = correlation * np.outer(spread, spread)
    result.setflags(write=False)
    return result


def mean(sex: str, variable: str) -> float:
    """Survey mean of a length, m."""
    return survey_statistics(sex)[variable][0] * 1e-3


def residual_sd(sex: str, variable: str) -> float:
    """SD of a length about its straight line on stature, m."""
    _, spread, r = survey_statistics(sex)[variable]
    return spread * 1e-3 * sqrt(1.0 - r * r)


@cache
def joint_drop() -> float:
    """Shoulder joint below the acromion, share of acromion–radiale."""
    return float(settings("constants.toml")["landmarks"]["shoulder_below_acromion"])


@cache
def arm_shares(sex: str) -> tuple[float, float, float]:
    """Acromion–radiale, radiale–stylion and hand as shares of their sum (survey means)."""
    names = ("acromionradialelength", "radialestylionlength", "handlength")
    parts = [mean(sex, name) for name in names]
    return parts[0] / sum(parts), parts[1] / sum(parts), parts[2] / sum(parts)


@cache
def knee_share(sex: str) -> float:
    """Knee height (lateral epicondyle) as a share of hip height (survey means)."""
    return mean(sex, "lateralfemoralepicondyleheight") / mean(sex, "trochanterionheight")


@cache
def quantities(sex: str) -> Mapping[str, tuple[Array, float]]:
    """Weights on the survey variables, shape (V,), and mean (m) of each quantity of a body.

    Two variables have no published correlations and get a stand-in: acromion–radiale the
    shoulder–elbow length, scaled by their SDs, and knee (epicondyle) height the sitting knee
    height, scaled so that the SD at a given stature is its own.
    """
    index = {name: i for i, name in enumerate(variables())}

    def weights(**parts: float) -> Array:
        row = np.zeros(len(index))
        for name, weight in parts.items():
            row[index[name]] = weight
        return row

    spread = survey_statistics(sex)
    elbow = spread["acromionradialelength"][1] / spread["shoulderelbowlength"][1]
    knee_scale = residual_sd(sex, "lateralfemoralepicondyleheight") / residual_sd(
        sex, "kneeheightsitting"
    )
    stature, span = weights(stature=1.0), weights(span=1.0)
    bone = weights(shoulderelbowlength=elbow)
    forearm, hand = weights(radialestylionlength=1.0), weights(handlength=1.0)
    hip, acromion = weights(trochanterionheight=1.0), weights(acromialheight=1.0)
    reach = weights(stature=1.0, sittingheight=-1.0, overheadfingertipreachsitting=1.0)
    knee = weights(kneeheightsitting=knee_scale)
    drop = joint_drop()
    m = {name: mean(sex, name) for name in spread if name != "weightkg"}
    upper, joint = (1.0 - drop) * bone, acromion - drop * bone
    arm = upper + forearm + hand
    m_bone, m_hip = m["acromionradialelength"], m["trochanterionheight"]
    m_arm = (1.0 - drop) * m_bone + m["radialestylionlength"] + m["handlength"]
    m_joint = m["acromialheight"] - drop * m_bone
    m_reach = m["stature"] - m["sittingheight"] + m["overheadfingertipreachsitting"]
    m_knee, m_ankle = m["lateralfemoralepicondyleheight"], m["lateralmalleolusheight"]
    return {
        "stature": (stature, m["stature"]),
        "span": (span, m["span"]),
        "sitting_height": (weights(sittingheight=1.0), m["sittingheight"]),
        "standing_reach": (reach, m_reach),
        "upper_arm": (upper, (1.0 - drop) * m_bone),
        "forearm": (forearm, m["radialestylionlength"]),
        "hand": (hand, m["handlength"]),
        "arm_chain": (bone + forearm + hand, m_arm + drop * m_bone),
        "shoulder_breadth": (weights(biacromialbreadth=1.0), m["biacromialbreadth"]),
        "shoulder_height": (acromion, m["acromialheight"]),
        "shoulder_half_width": (span / 2.0 - arm, m["span"] / 2.0 - m_arm),
        "shoulder_rise": (reach - joint - arm, m_reach - m_joint - m_arm),
        "trunk": (joint - hip, m_joint - m_hip),
        "neck_head": (stature - joint, m["stature"] - m_joint),
        "hip_height": (hip, m_hip),
        "knee_height": (knee, m_knee),
        "thigh": (hip - knee, m_hip - m_knee),
        "shank": (knee, m_knee - m_ankle),
        "foot": (weights(footlength=1.0), m["footlength"]),
    }


class Conditional:
    """The survey's distribution given the known quantities of one body (m, keys of ``quantities``).

    A known quantity outside the table is ignored.
    """

    def __init__(self, sex: str, known: Mapping[str, float]) -> None:
        self._table = quantities(sex)
        used = [name for name in known if name in self._table]
        sigma = covariance(sex)
        rows_known = np.array([self._table[name][0] for name in used])
        deviation = np.array([known[name] - self._table[name][1] for name in used])
        tape = float(settings("constants.toml")["landmarks"]["tape_error_m"])
        # Stature, span, sitting height and reach count as exact, so that the least-squares lines
        # are met; the rest carries the tape's error, so that contradictions stay harmless.
        exact = ("stature", "span", "sitting_height", "standing_reach")
        noise = np.diag([0.0 if name in exact else tape**2 for name in used])
        gain = np.linalg.solve(rows_known @ sigma @ rows_known.T + noise, rows_known @ sigma).T
        self._shift: Array = gain @ deviation
        self._covariance: Array = sigma - gain @ rows_known @ sigma

    def estimate(self, name: str) -> float:
        """Conditional mean of a quantity, m."""
        weights, average = self._table[name]
        return average + float(weights @ self._shift)

    def sd(self, name: str) -> float:
        """Residual SD of a quantity, m."""
        weights = self._table[name][0]
        return sqrt(max(0.0, float(weights @ self._covariance @ weights)))


def line(sex: str, quantity: str, stature: float, span: float, sitting_height: float) -> float:
    """A least-squares line of the survey, m, from lengths in m."""
    intercept, on_stature, on_span, on_sitting = survey_lines(sex)[quantity]
    return intercept * 1e-3 + on_stature * stature + on_span * span + on_sitting * sitting_height
