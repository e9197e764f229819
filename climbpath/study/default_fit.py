"""The fit behind the default capacities: ``python -m climbpath.study.default_fit``.

What is fitted are a few capacities of the model of forces, so that bodies of one sex on the
published lane use its hand holds as often, and take as long, as observed finals athletes. The other
sex is then predicted with strengths multiplied by one published ratio and nothing else, and judged:
what was fitted is never used to judge. Both ways round, and with each year left out in turn.

The lane's foot holds are unknown: none, and a few random layouts, are climbed alike, by three
bodies of each sex (mean stature, and one standard deviation to either side). The search is a simple
evolution: change some parameters at random, keep what is better, with steps that grow on success
and shrink on failure. Geometry does not depend on capacities and is found once a process.

A run takes about a quarter of an hour on two cores. It prints its report; the values in
``motion/tables/capacity_defaults.toml`` are its result, rounded; ``motion/capacity_fit.txt`` is the
report.
"""

from __future__ import annotations

import sys
from collections.abc import Mapping
from concurrent.futures import Executor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete, make_athlete
from climbpath.motion.capacity import capacities_of
from climbpath.motion.force import ForceMotion
from climbpath.study.climb import Conditions, Ground, climb_on, ground_of
from climbpath.study.decode import plan_of
from climbpath.study.evidence import worker_pool
from climbpath.study.evidence_results import FINALISTS, PopulationOf
from climbpath.study.foot_layouts import with_random_feet
from climbpath.study.observed import CONTESTED, observed_runs, pooled
from climbpath.study.plan import PlanRequest, best_route, hand_holds_of
from climbpath.study.polish import polish
from climbpath.study.published_lane import HAND_HOLDS, published_lane
from climbpath.study.scores import correlation, excess, on_right_side
from climbpath.wall import Wall

Array = NDArray[np.float64]

STRENGTH_RATIO = 6.15 / 7.47
"""Women's strengths over men's, per body mass: mean power of jump squats, 684 elite athletes
(Valenzuela et al. 2020, abstract)."""

SCALED = ("hand_pull_bw", "hand_press_bw", "foot_push_bw")
"""The capacities it is applied to."""


@dataclass(frozen=True)
class Parameter:
    """What the fit moves: name, where it begins, and its bounds."""

    name: str
    first: float
    low: float
    high: float


PARAMETERS = (
    Parameter("hand_pull_bw", 0.64, 0.4, 1.6),
    Parameter("press_share", 0.35, 0.08, 0.9),
    Parameter("foot_push_bw", 3.9, 1.2, 5.0),
    Parameter("speed_m_s", 18.0, 6.0, 30.0),
    Parameter("turn_rad_s2", 38.0, 6.0, 45.0),
    Parameter("reach_speed_m_s", 15.5, 5.0, 16.0),
    Parameter("settle_s", 0.045, 0.01, 0.10),
)
"""Values begin near those of a first, coarser search on the men; the bounds are choices of the
model."""

LAYOUTS = 3
ROUNDS = {"male": 22, "female": 8}
SPREAD = 0.15
"""Random foot layouts, evaluations of a fit on either sex, first step as share of a parameter."""

CONTESTED_PLACES = [HAND_HOLDS.index(hold) for hold in CONTESTED]
YEARS = tuple(sorted({runs.year for runs in observed_runs()}))


@dataclass(frozen=True)
class Prediction:
    """Use of each hand hold (20,) over the climbs that get up, their median time, and the share
    that does not get up."""

    use: tuple[float, ...]
    median_s: float
    without: float


Job = tuple[str, int, int, tuple[tuple[str, float], ...]]
_grounds: dict[tuple[str, int, int], tuple[Athlete, Ground]] = {}


def wall_of(layout: int) -> Wall:
    """The lane without foot holds (0) or with a random layout."""
    lane = published_lane()
    return with_random_feet(lane, (0, 9, layout)) if layout else lane


def body_of(population: PopulationOf, place: int) -> Athlete:
    """A body ``place`` standard deviations from the mean stature, of mean build."""
    stature = population.stature[0] + place * population.stature[1]
    mass = population.body_mass_index[0] * stature**2
    return make_athlete(sex=population.sex, stature=stature, mass=mass)


def climbed(job: Job) -> tuple[float, tuple[str, ...]] | None:
    """Time, polished, and hand holds of the best way of one body on one layout; None without a way.
    """
    sex, place, layout, capacity = job
    key = sex, place, layout
    if key not in _grounds:
        population = next(p for p in FINALISTS if p.sex == sex)
        body = body_of(population, place)
        _grounds[key] = body, ground_of(wall_of(layout), body, Conditions())
    body, ground = _grounds[key]
    values = {**body.capacity, **dict(capacity)}
    athlete = make_athlete(sex=sex, stature=body.stature, mass=body.mass, capacity=values)
    climb = climb_on(ground, athlete, Conditions(), ForceMotion(capacities_of(athlete)))
    best = best_route(climb, PlanRequest())
    if best is None:
        return None
    names = tuple(climb.options.name(k) for k in sorted(hand_holds_of(climb, best.route)))
    track = polish(climb, best.route).track
    return plan_of(climb, best.route, 1, track).time_s, names


def capacity_of(values: Mapping[str, float], ratio: float = 1.0) -> dict[str, float]:
    """The [capacity] table of fitted values, strengths multiplied by ``ratio``."""
    table = {
        "hand_pull_bw": values["hand_pull_bw"],
        "hand_press_bw": values["hand_pull_bw"] * values["press_share"],
        "foot_push_bw": values["foot_push_bw"],
        "hand_speed_m_s": values["speed_m_s"],
        "foot_speed_m_s": values["speed_m_s"],
        "turn_rad_s2": values["turn_rad_s2"],
        "reach_speed_m_s": values["reach_speed_m_s"],
        "settle_s": values["settle_s"],
    }
    return {key: round(value * (ratio if key in SCALED else 1.0), 4)
            for key, value in table.items()}


def predicted(sex: str, capacity: Mapping[str, float], pool: Executor) -> Prediction:
    """All bodies of a sex on all layouts."""
    table = tuple(sorted(capacity.items()))
    jobs = [(sex, place, layout, table) for layout in range(LAYOUTS + 1) for place in (-1, 0, 1)]
    found = list(pool.map(climbed, jobs))
    done = [climb for climb in found if climb is not None]
    if not done:
        return Prediction((0.0,) * len(HAND_HOLDS), np.inf, 1.0)
    use = np.mean([[hold in names for hold in HAND_HOLDS] for _, names in done], axis=0)
    return Prediction(tuple(float(u) for u in use), float(np.median([t for t, _ in done])),
                      1.0 - len(done) / len(found))


def misfit(prediction: Prediction, sex: str, years: tuple[int, ...] = YEARS) -> float:
    """What the fit makes small: 1 − r, thrice the mean squared error of the uses, the excess on the
    contested holds, 1.5 times the log ratio of times, and the share without a way up."""
    if not np.isfinite(prediction.median_s):
        return 9.0
    seen = pooled(sex, years)
    use, observed = np.array(prediction.use), np.array(seen.use_share)
    r = correlation(use, observed)
    contested = excess(use[CONTESTED_PLACES], observed[CONTESTED_PLACES])
    late = abs(np.log(prediction.median_s / seen.mean_of_medians_s))
    return float((1.0 - (r or 0.0)) + 3.0 * np.mean((use - observed) ** 2) + contested
                 + 1.5 * late + prediction.without)


def fitted(sex: str, pool: Executor, seed: int) -> list[tuple[dict[str, float], Prediction]]:
    """All candidates of one fit with their predictions, in the order they were tried."""
    rng = np.random.default_rng(seed)
    ratio = 1.0 if sex == "male" else STRENGTH_RATIO
    low = np.log([p.low for p in PARAMETERS])
    high = np.log([p.high for p in PARAMETERS])
    best = np.log([p.first for p in PARAMETERS])
    spread, least = SPREAD, np.inf
    tried = []
    for number in range(ROUNDS[sex]):
        change = spread * rng.standard_normal(len(best)) * (rng.random(len(best)) < 0.6)
        at = np.clip(best + change * (number > 0), low, high)
        values = {p.name: float(np.exp(x)) for p, x in zip(PARAMETERS, at, strict=True)}
        prediction = predicted(sex, capacity_of(values, ratio), pool)
        tried.append((values, prediction))
        off = misfit(prediction, sex)
        print(f"{sex} {number:3d} {off:.3f} {prediction.median_s:.2f} s "
              f"{prediction.without:.2f} {capacity_of(values)}", file=sys.stderr, flush=True)
        if off < least:
            least, best, spread = off, at, min(1.3 * spread, 0.4)
        else:
            spread = max(0.93 * spread, 0.05)
    return tried


def judged(prediction: Prediction, sex: str, years: tuple[int, ...] = YEARS) -> str:
    """One line: correlation, holds on the right side, excess on the contested, and times."""
    seen = pooled(sex, years)
    use, observed = np.array(prediction.use), np.array(seen.use_share)
    r = correlation(use, observed)
    right = int(on_right_side(use, observed).sum())
    contested = excess(use[CONTESTED_PLACES], observed[CONTESTED_PLACES])
    return (f"r {r or 0.0:.2f}, {right} of {len(use)} on the right side, excess on the contested "
            f"holds {contested:.3f}, median {prediction.median_s:.2f} s (observed "
            f"{seen.mean_of_medians_s:.2f} s), without a way up {100 * prediction.without:.0f} %")


def report(pool: Executor) -> str:
    """Both fits, each judged on the other sex, and each year left out."""
    lines = []
    for sex, other, ratio in (("male", "female", STRENGTH_RATIO), ("female", "male", 1.0)):
        tried = fitted(sex, pool, 1)
        values, prediction = min(tried, key=lambda one: misfit(one[1], sex))
        lines += [f"Fitted on the {sex} runs of {', '.join(map(str, YEARS))}:",
                  f"  men's capacities {capacity_of(values)}",
                  f"  {sex}, fitted: {judged(prediction, sex)}",
                  f"  use {[round(100 * u) for u in prediction.use]}"]
        answer = predicted(other, capacity_of(values, ratio), pool)
        lines += [f"  {other}, judged: {judged(answer, other)}",
                  f"  use {[round(100 * u) for u in answer.use]}"]
        for year in YEARS:
            rest = tuple(y for y in YEARS if y != year)
            _, without = min(tried, key=lambda one: misfit(one[1], sex, rest))
            lines.append(f"  {sex}, best of the candidates without {year}, judged on {year}: "
                         f"{judged(without, sex, (year,))}")
    return "\n".join(lines) + "\n"


if __name__ == "__main__":
    with worker_pool() as workers:
        print(report(workers), end="")
