"""Populations: bodies drawn at random that hang together as those of the 2012 survey do.

Stature S and body-mass index B are normal and independent, the mass is B S². The other lengths are
drawn from the survey's joint normal distribution given stature and mass k (any text on the normal
distribution): with its means µ and covariance Σ, split into the known part K and the rest R,

    z_R = µ_R + Σ_RK Σ_KK⁻¹ (k − µ_K) + L e,    L Lᵀ = Σ_RR − Σ_RK Σ_KK⁻¹ Σ_KR,    e ~ N(0, I),

and go to ``make_athlete`` as if they had been measured. The survey's people are soldiers: of
climbers this takes the stature and the build asked for, and soldiers' proportions at that build.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from functools import cache
from math import isfinite

import numpy as np
from numpy.typing import NDArray

from climbpath.body.lengths import make_athlete
from climbpath.body.model import Athlete
from climbpath.body.survey import covariance, quantities, variables
from climbpath.body.tables import SEXES, survey_statistics
from climbpath.errors import DataError, UsageError

Array = NDArray[np.float64]

DRAWN = (
    "span",
    "sitting_height",
    "standing_reach",
    "shoulder_height",
    "shoulder_breadth",
    "upper_arm",
    "forearm",
    "hand",
    "thigh",
    "shank",
    "foot",
)
"""Measured lengths that are drawn: those of ``survey.quantities`` that ``make_athlete`` takes,
hip height excepted, which thigh and shank give. Hip breadth is drawn as well."""

KNOWN = ("stature", "weightkg")
"""Survey variables that are given before the rest is drawn."""

MAX_ATTEMPTS = 100
"""Draws for one body until one is accepted. About one in a hundred is refused (measured on 2,000
men and 2,000 women, drawn as wide as the survey), so a hundred in a row say that what was asked for
is impossible."""

MAX_BODIES = 100_000


def _means(sex: str) -> Array:
    """Survey means of ``variables``, m and kg. Shape (V,)."""
    table = survey_statistics(sex)
    return np.array(
        [table[name][0] * (1.0 if name == "weightkg" else 1e-3) for name in variables()]
    )


@cache
def _given_stature_and_mass(sex: str) -> tuple[Array, Array]:
    """Gain on the deviation of stature and mass, (V, 2), and factor L of what is left, (V, V-2)."""
    sigma = covariance(sex)
    known = [variables().index(name) for name in KNOWN]
    rest = [i for i in range(len(sigma)) if i not in known]
    solved = np.linalg.solve(sigma[np.ix_(known, known)], sigma[known])
    gain = np.asarray(solved.T, dtype=np.float64)
    left = sigma - gain @ sigma[known]
    factor = np.zeros((len(sigma), len(rest)))
    # Cholesky's factor is unique; that of an eigenvalue routine has signs of its own choosing.
    factor[rest] = np.linalg.cholesky(left[np.ix_(rest, rest)])
    for array in (gain, factor):
        array.setflags(write=False)
    return gain, factor


def draw_measured(sex: str, stature: float, mass: float, rng: np.random.Generator
                  ) -> dict[str, float]:
    """One draw of the measured lengths (m) of a body of that stature (m) and mass (kg)."""
    gain, factor = _given_stature_and_mass(sex)
    means = _means(sex)
    known = [variables().index(name) for name in KNOWN]
    deviation = gain @ (np.array([stature, mass]) - means[known])
    deviation += factor @ rng.standard_normal(factor.shape[1])
    table = quantities(sex)
    measured = {name: table[name][1] + float(table[name][0] @ deviation) for name in DRAWN}
    hip = variables().index("hipbreadth")
    measured["hip_breadth"] = float(means[hip] + deviation[hip])
    return measured


def _check(sex: str, number: int, pairs: Mapping[str, tuple[float, float]]) -> None:
    """UsageError that names everything wrong with what is asked for."""
    wrong = []
    if sex not in SEXES:
        wrong.append(f"sex: expected one of {', '.join(SEXES)}, found {sex!r}")
    if not 0 <= number <= MAX_BODIES:
        wrong.append(f"number of bodies: expected 0 to {MAX_BODIES}, found {number}")
    for name, (mean, sd) in pairs.items():
        if not (isfinite(mean) and mean > 0.0 and isfinite(sd) and sd >= 0.0):
            wrong.append(f"{name}: expected a mean above 0 and an SD from 0, found {mean}, {sd}")
    if wrong:
        raise UsageError("\n".join(wrong))


def draw_bodies(
    sex: str,
    number: int,
    seed: int | Sequence[int],
    *,
    stature: tuple[float, float],
    body_mass_index: tuple[float, float],
    capacity: Mapping[str, float] | None = None,
) -> tuple[Athlete, ...]:
    """``number`` bodies; ``stature`` (m) and ``body_mass_index`` (kg/m²) are (mean, SD).

    Each body has a seed of its own, so body k is the same whatever ``number`` is. ``seed`` is a
    whole number from 0, or several. ``capacity`` goes to every athlete. A draw whose lengths
    contradict each other is drawn again; DataError with the last problems where that never ends,
    UsageError for arguments that make no sense.
    """
    _check(sex, number, {"stature": stature, "body_mass_index": body_mass_index})
    try:
        children = np.random.SeedSequence(seed).spawn(number)
    except (TypeError, ValueError) as error:
        raise UsageError(f"seed: expected whole numbers from 0, found {seed!r}") from error
    return tuple(
        _draw_body(sex, np.random.default_rng(child), f"body {k}", stature, body_mass_index,
                   capacity)
        for k, child in enumerate(children, start=1)
    )


def _draw_body(
    sex: str,
    rng: np.random.Generator,
    name: str,
    stature: tuple[float, float],
    body_mass_index: tuple[float, float],
    capacity: Mapping[str, float] | None,
) -> Athlete:
    last: DataError | None = None
    for _ in range(MAX_ATTEMPTS):
        height = stature[0] + stature[1] * float(rng.standard_normal())
        build = body_mass_index[0] + body_mass_index[1] * float(rng.standard_normal())
        mass = build * height**2
        try:
            return make_athlete(
                sex=sex, stature=height, mass=mass, capacity=capacity, name=name,
                measured=draw_measured(sex, height, mass, rng),
            )
        except DataError as error:
            last = error
    problems = () if last is None else last.problems
    raise DataError(problems)
