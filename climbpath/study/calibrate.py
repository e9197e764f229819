"""Fitting an athlete's few capacities to measured runs: ``calibrate``.

What is fitted are the durations from one split of a run to the next, since errors of splits pile
up on the way and those of durations hardly do. Each is expected to be off in proportion to the root
of how long it takes by the defaults. Errors are reported for the splits themselves.
"""

from __future__ import annotations

from collections.abc import Callable
from collections.abc import Sequence as Several
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete, growth_caution
from climbpath.errors import DataError, Problem, UsageError
from climbpath.motion.capacity import SIDED, capacities_of, capacity_defaults
from climbpath.study.cautions import cautions_for
from climbpath.study.fitting import (
    FEWEST_TO_RESAMPLE,
    Fit,
    FitOptions,
    Observations,
    Prior,
    amount_told,
    fit,
    what_cannot_be_told,
)
from climbpath.study.follow import Follower
from climbpath.study.prediction_errors import Errors, errors_of, root_mean_square
from climbpath.study.sequence import Sequence, unknown_holds
from climbpath.study.splits import RunTimes, Split, has_slip, later_first, splits_of
from climbpath.wall import Wall
from climbpath.wall.checking import Checker, shown

Array = NDArray[np.float64]
Progress = Callable[[str, float], None]

FEWEST_SPLITS = 2
MOST_DRAWS = 10_000
SHORTEST = 0.1
"""Durations shorter than this [s] are expected to be off as much as this long a one."""

DECIMALS = 4
"""Of fitted capacities, as they are written."""

USUAL_PREDICTIONS = 100
"""About how many a fit of six parameters takes; for the progress shown only."""

MODEL_CAUTION = (
    "Fitted capacities are those with which the model comes nearest these runs. They are no "
    "measurements of strength, and hold for this model only."
)


@dataclass(frozen=True)
class Parameter:
    """One thing that is fitted: a key of the [capacity] table, and what is known beforehand.

    ``relative_sd``: deviation of the prior as a share of the default. ``along``: keys that keep
    their default proportion to it.
    """

    key: str
    name: str
    low: float
    high: float
    relative_sd: float
    along: tuple[str, ...] = ()


PARAMETERS = (
    # Prior: the pull-ups of 82 men differ by ± .34 of 1.5 body weights (Munoz-Lopez et al. 2017,
    # abstract), and some more.
    Parameter("hand_pull_bw", "the pull of the hands", 0.2, 2.0, 0.3, along=("hand_press_bw",)),
    Parameter("foot_push_bw", "the push of the feet", 0.6, 6.0, 0.3),
    Parameter("hand_speed_m_s", "the speed of the limbs", 4.0, 40.0, 0.3,
              along=("foot_speed_m_s",)),
    Parameter("reach_speed_m_s", "the speed of reaching", 2.0, 30.0, 0.3),
    Parameter("settle_s", "the time to settle on a hold", 0.0, 0.25, 0.5),
    Parameter("reaction_s", "the reaction to the signal", 0.10, 0.50, 0.25),
)
"""What is fitted. Bounds, and deviations of the prior but for the first, are choices of the model:
wide enough for any climber, narrow enough that what the runs do not tell stays sensible."""


@dataclass(frozen=True)
class CalibrateRequest:
    """``draws``: refits for the intervals. ``file``: named in messages about the runs."""

    draws: int = 500
    seed: int = 0
    file: str = ""


@dataclass(frozen=True)
class FittedParameter:
    """One parameter with its unit in ``key``. ``interval`` 80 %; ``told``: how much the runs say.

    ``prior_share``: share of the prior's variance that is left, 1 where the runs say nothing.
    """

    key: str
    default: float
    value: float
    interval: tuple[float, float]
    standard_error: float
    prior_share: float
    told: str
    at_bound: bool


@dataclass(frozen=True)
class RunError:
    """Errors of one run's splits, and its last split as measured and as the fit has it; s.

    ``left_out_rms_s``: by a fit without this run, None with a single run. ``weight``: how much its
    durations count on average: about .8 where errors are normal, less where some are far off.
    """

    run: str
    splits: int
    rms_s: float
    left_out_rms_s: float | None
    last_s: float
    last_predicted_s: float
    weight: float


@dataclass(frozen=True)
class Calibration:
    """What one ``calibrate`` found; ``athlete`` carries the fitted [capacity] table.

    ``left_out``: runs that were not used and why. ``errors``: of splits. ``open_questions``:
    sentences on what the runs do not tell. ``correlations``: pairs of keys with that of their
    errors. ``resampled``: intervals come from drawing runs again.
    """

    wall_name: str
    athlete_name: str
    athlete: Athlete
    parameters: tuple[FittedParameter, ...]
    errors: Errors
    runs: tuple[RunError, ...]
    left_out: tuple[tuple[str, str], ...]
    singular_values: tuple[float, ...]
    correlations: tuple[tuple[str, str, float], ...]
    open_questions: tuple[str, ...]
    cautions: tuple[str, ...]
    resampled: bool
    converged: bool
    predictions: int
    draws: int
    seed: int


@dataclass(frozen=True)
class _Run:
    sequence: Sequence
    splits: tuple[Split, ...]


def follower(wall: Wall, athlete: Athlete, runs: Several[Sequence]) -> RunTimes:
    """The model that follows the placements of runs."""
    return Follower(wall, athlete, runs)


def calibrate(
    wall: Wall, athlete: Athlete, sequences: Several[Sequence],
    request: CalibrateRequest | None = None, progress: Progress | None = None,
    this_year: int | None = None,
) -> Calibration:
    """Capacities of an athlete with which the model comes nearest the measured runs.

    Capacities of the athlete that are fitted start from the defaults of the sex and not from
    what stands there, so that fitting again does not count the runs twice; a difference between
    left and right stays, and so does every other key. DataError with everything wrong about the
    runs, or where fewer than two splits are left; UsageError for an impossible request.
    """
    asked = request or CalibrateRequest()
    if not 1 <= asked.draws <= MOST_DRAWS:
        raise UsageError(f"draws: 1 to {MOST_DRAWS}, found {asked.draws}")
    capacities_of(athlete)  # a wrong value of the athlete's file is found before the work begins
    runs, left_out = _usable(wall, sequences, asked.file)
    times = follower(wall, athlete, [run.sequence for run in runs])
    default = defaults_of(athlete.sex)
    found = [np.asarray(one, np.float64) for one in times.times(capacity_table(athlete, default))]
    followed = [k for k, one in enumerate(found) if np.isfinite(one).all()]
    left_out += [(run.sequence.run, "the model cannot follow it with the default capacities")
                 for k, run in enumerate(runs) if k not in followed]
    kept = [runs[k] for k in followed]
    _check_enough(kept, asked.file)

    count = 0

    def durations(values: Array) -> Array:
        nonlocal count
        predicted = times.times(capacity_table(athlete, values))
        count += 1
        if progress is not None:
            progress("fitting", min(count / USUAL_PREDICTIONS, 0.99))
        return np.concatenate([np.diff(predicted[k], prepend=0.0) for k in followed])

    observations = _observations(kept, [found[k] for k in followed])
    labels = [split.label for run in kept for split in run.splits]
    prior = prior_of(default)
    fitted = fit(durations, observations, prior, FitOptions(asked.draws, asked.seed))
    return _calibration(wall, athlete, asked, kept, left_out, observations, labels, default,
                        fitted, this_year)


def defaults_of(sex: str) -> Array:
    """Default value of every parameter (K,)."""
    known = capacity_defaults(sex)
    return np.array([known[p.key] for p in PARAMETERS])


def prior_of(default: Array) -> Prior:
    """The weak prior about the defaults (K,)."""
    return Prior(
        default=default,
        sd=default * np.array([p.relative_sd for p in PARAMETERS]),
        low=np.array([p.low for p in PARAMETERS]),
        high=np.array([p.high for p in PARAMETERS]),
    )


def capacity_table(athlete: Athlete, values: Array) -> dict[str, float]:
    """The athlete's [capacity] table with ``values`` (K,) of the parameters, rounded.

    What goes along keeps its default proportion. Where the athlete has a value for one side, both
    sides keep their proportion to their mean.
    """
    known = capacity_defaults(athlete.sex)
    given = athlete.capacity
    table = dict(given)
    for parameter, value in zip(PARAMETERS, values, strict=True):
        table[parameter.key] = float(value)
        for key in parameter.along:
            table[key] = float(value) * known[key] / known[parameter.key]
        for key in (parameter.key, *parameter.along):
            sides = [f"{key.removesuffix('_bw')}_{side}_bw" for side in ("left", "right")]
            if key.removesuffix("_bw") in SIDED and any(side in given for side in sides):
                both = [given.get(side, given.get(key, known[key])) for side in sides]
                if sum(both) > 0.0:
                    table.update({side: table[key] * 2.0 * one / sum(both)
                                  for side, one in zip(sides, both, strict=True)})
    return {key: round(value, DECIMALS) for key, value in table.items()}


def _usable(
    wall: Wall, sequences: Several[Sequence], file: str
) -> tuple[list[_Run], list[tuple[str, str]]]:
    """The runs that can be used, and the others with the reason; DataError for wrong ones."""
    check = Checker(file)
    ids = frozenset(hold.id for hold in wall.holds)
    runs, left_out = [], []
    for sequence in sequences:
        place = f"run {shown(sequence.run)}"
        for name in unknown_holds(sequence, ids):
            check.add(f"{place} hold", shown(name), "a hold of the wall or of its lane")
        splits = splits_of(sequence, wall.finish)
        for before, after in later_first(splits):
            check.add(f"{place} step {after.step} {after.limb}", f"{after.time:g} s",
                      f"a time not before the {before.time:g} s of step {before.step}")
        if has_slip(sequence):
            left_out.append((sequence.run, "its note says fell or slipped"))
        elif not splits:
            left_out.append((sequence.run, "it has no times"))
        else:
            runs.append(_Run(sequence, splits))
    check.raise_if_any()
    _check_enough(runs, file)
    return runs, left_out


def _check_enough(runs: Several[_Run], file: str) -> None:
    splits = sum(len(run.splits) for run in runs)
    if splits < FEWEST_SPLITS:
        expected = f"at least {FEWEST_SPLITS} times of hands or totals in runs that can be used"
        raise DataError([Problem(file, "contact_s", str(splits), expected)])


def _observations(runs: Several[_Run], at_default: Several[Array]) -> Observations:
    """Durations of all runs, and how much each is expected to be off."""
    measured = [np.array([split.time for split in run.splits]) for run in runs]
    long = np.concatenate([np.diff(one, prepend=0.0) for one in at_default])
    return Observations(
        time=np.concatenate([np.diff(one, prepend=0.0) for one in measured]),
        run=np.repeat(np.arange(len(runs)), [len(one) for one in measured]),
        scale=np.sqrt(np.maximum(long, SHORTEST)),
    )


def _calibration(
    wall: Wall, athlete: Athlete, asked: CalibrateRequest, runs: Several[_Run],
    left_out: Several[tuple[str, str]], observations: Observations,
    labels: Several[tuple[str, str, int]], default: Array, fitted: Fit, this_year: int | None,
) -> Calibration:
    run = observations.run

    def summed(durations: Array) -> Array:
        return np.concatenate([np.cumsum(durations[run == k]) for k in range(len(runs))])

    measured, predicted = summed(observations.time), summed(fitted.predicted)
    without = summed(fitted.left_out)
    errors = errors_of(measured, run, predicted, without, summed(fitted.at_default), labels)
    names = [p.name for p in PARAMETERS]
    return Calibration(
        wall_name=wall.name,
        athlete_name=athlete.name,
        athlete=replace(athlete, capacity=capacity_table(athlete, fitted.estimate)),
        parameters=_parameters(default, fitted),
        errors=errors,
        runs=tuple(
            RunError(
                run=one.sequence.run,
                splits=len(one.splits),
                rms_s=root_mean_square((measured - predicted)[run == k]) or 0.0,
                left_out_rms_s=root_mean_square((measured - without)[run == k]),
                last_s=float(measured[run == k][-1]),
                last_predicted_s=float(predicted[run == k][-1]),
                weight=float(fitted.weight[run == k].mean()),
            )
            for k, one in enumerate(runs)
        ),
        left_out=tuple(left_out),
        singular_values=tuple(float(value) for value in fitted.singular_values),
        correlations=tuple(
            (PARAMETERS[i].key, PARAMETERS[j].key, float(fitted.correlation[i, j]))
            for i in range(len(PARAMETERS)) for j in range(i + 1, len(PARAMETERS))
        ),
        open_questions=what_cannot_be_told(fitted, names),
        cautions=_cautions(athlete, fitted, errors, len(runs), this_year),
        resampled=fitted.resampled,
        converged=fitted.converged,
        predictions=fitted.predictions,
        draws=asked.draws,
        seed=asked.seed,
    )


def _parameters(default: Array, fitted: Fit) -> tuple[FittedParameter, ...]:
    return tuple(
        FittedParameter(
            key=parameter.key,
            default=float(default[k]),
            value=round(float(fitted.estimate[k]), DECIMALS),
            interval=(float(fitted.interval[k, 0]), float(fitted.interval[k, 1])),
            standard_error=float(fitted.standard_error[k]),
            prior_share=float(fitted.prior_share[k]),
            told=amount_told(float(fitted.prior_share[k])),
            at_bound=bool(fitted.at_bound[k]),
        )
        for k, parameter in enumerate(PARAMETERS)
    )


def _cautions(
    athlete: Athlete, fitted: Fit, errors: Errors, runs: int, this_year: int | None
) -> tuple[str, ...]:
    """What must be known to read the result, then the standing cautions."""
    notes = [growth_caution(athlete, this_year) or "" if this_year is not None else ""]
    own = [p.key for p in PARAMETERS if p.key in athlete.capacity]
    if own:
        notes.append(f"The athlete's own {', '.join(own)} were not used: a fit starts from the "
                     "defaults, so that no run counts twice.")
    if not fitted.resampled:
        notes.append(f"With fewer than {FEWEST_TO_RESAMPLE} runs ({runs} here) the intervals take "
                     "the errors of durations for independent; they may be too narrow.")
    if not fitted.converged:
        notes.append("The search for the best fit did not come to its end.")
    notes += [f"The fit has {p.key} at a bound of what is allowed: the model may lack something."
              for p, bound in zip(PARAMETERS, fitted.at_bound, strict=True) if bound]
    rival, ours = errors.others, errors.left_out_there
    if rival is not None and ours is not None and rival <= ours:
        notes.append("The mean of the other runs predicts a run no worse than the fit does: for "
                     "runs like these the fit adds nothing.")
    if errors.left_out is not None and errors.left_out >= errors.default:
        notes.append("The defaults predict a run no worse than a fit to the others does.")
    return cautions_for(*notes, *athlete.cautions, MODEL_CAUTION)
