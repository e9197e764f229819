"""Fitting a few parameters to measured times, with what the data can and cannot tell.

``fit`` minimises, over bounded parameters p,

    Σ ρ(((time − predict(p)) / (σ · scale))²) + Σ ((p − default) / sd)²

by a trust-region method (scipy's ``least_squares``). Predictions are costly and rounded, so slopes
come from steps of a good part of the prior's deviation, and everything after the optimum
(intervals, leaving runs out, the size σ of the errors) works on the model linearised there and
costs no predictions. The prior is weak and always there: with few runs the data cannot tell
everything, and where they say nothing the default stays.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from climbpath.errors import UsageError
from climbpath.study.linear_fit import (
    Linearised,
    error_size,
    leave_one_out,
    resampled_draws,
)
from climbpath.study.prediction_errors import Errors, errors_of

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Predict = Callable[[Array], Array]

SLOPE_STEP = 0.15
LAST_STEP = 0.3
"""Steps of slopes in prior deviations: 4.5 % of a parameter whose deviation is 30 %, and at the
optimum 9 % to both sides, where the errors of rounding count more than those of bending."""

NEAR_BOUND = 0.1
"""A parameter as near to its bound, in prior deviations, is reported to be at it."""

FINISHED = 1e-4
SMALLEST_STEP = 1e-3
"""The search ends when a step gains less than this share of the sum, or moves u by less than this
share of itself."""

MOST_STEPS = 15
"""Most steps of one search; each costs one prediction and a slope, one more a parameter."""

FEWEST_TO_RESAMPLE = 5
"""With fewer runs there are too few ways to draw them again (a choice of the model)."""

TAILS = (10.0, 90.0)
"""Percentiles of the 80 % interval."""

NOTHING_FROM = 0.9
LITTLE_FROM = 0.5
SOME_FROM = 0.15
"""Shares of the prior's variance left, from which the data say nothing, little, something."""

ALIKE_FROM = 0.95
"""Two parameters whose errors correlate more than this cannot be told apart."""


@dataclass(frozen=True)
class Observations:
    """``time`` (N,) [s] in the order of the predictions; ``run`` (N,): 0, 1, … without gaps.

    ``scale`` (N,): how large the error of each is expected to be compared with the others.
    """

    time: Array
    run: Ints
    scale: Array

    @property
    def runs(self) -> int:
        """How many runs there are."""
        return int(self.run.max()) + 1


@dataclass(frozen=True)
class Prior:
    """What is thought of K parameters beforehand: normal about ``default``, within bounds."""

    default: Array
    sd: Array
    low: Array
    high: Array


@dataclass(frozen=True)
class FitOptions:
    """``error``: expected size [s] of an error whose scale is 1; it counts as ``error_weight``
    observations when their size is estimated. ``robust``: large residuals count less.
    """

    draws: int = 500
    seed: int = 0
    robust: bool = True
    error: float = 0.08
    error_weight: float = 2.0


@dataclass(frozen=True)
class Fit:
    """What a fit found. K parameters, N observations.

    ``estimate`` and ``standard_error`` (K,), ``interval`` (K, 2) 80 %; ``error_size``: σ [s].
    ``predicted``, ``at_default``, ``left_out`` (N,) [s] (the last NaN with a single run);
    ``weight`` (N,): below 1 where a large residual counts less. ``singular_values``: of the slopes
    in prior deviations over errors; below 1 the prior says more than the data. ``prior_share``
    (K,): share of the prior's variance that is left, 1 where the data say nothing.
    ``correlation`` (K, K) of the errors. ``at_bound`` (K,). ``resampled``: intervals come from
    drawing runs again, else from normal errors. ``predictions``: how many were asked for.
    """

    estimate: Array
    interval: Array
    standard_error: Array
    error_size: float
    predicted: Array
    at_default: Array
    left_out: Array
    weight: Array
    errors: Errors
    singular_values: Array
    prior_share: Array
    correlation: Array
    at_bound: NDArray[np.bool_]
    resampled: bool
    converged: bool
    predictions: int


@dataclass
class _Model:
    """Predictions, residuals and slopes in scaled unknowns u = (p − default) / sd; kept, counted.

    Residuals are over the scale of their observation, [s].
    """

    predict: Predict
    observations: Observations
    prior: Prior
    robust: bool
    executor: Executor | None
    calls: int = 0
    kept: dict[bytes, Array] = field(default_factory=dict)
    low: Array = field(init=False)
    high: Array = field(init=False)

    def __post_init__(self) -> None:
        self.low = (self.prior.low - self.prior.default) / self.prior.sd
        self.high = (self.prior.high - self.prior.default) / self.prior.sd

    def parameters(self, u: Array) -> Array:
        p = self.prior
        return np.clip(p.default + p.sd * u, p.low, p.high)

    def times(self, points: Sequence[Array]) -> list[Array]:
        """Predictions (N,) of several u; those already known cost nothing."""
        new = {u.tobytes(): u for u in points if u.tobytes() not in self.kept}
        values = [self.parameters(u) for u in new.values()]
        several = map if self.executor is None or len(values) < 2 else self.executor.map
        found = list(several(self.predict, values))
        self.calls += len(found)
        self.kept.update(zip(new, found, strict=True))
        return [self.kept[u.tobytes()] for u in points]

    def residual(self, u: Array) -> Array:
        return np.asarray((self.observations.time - self.times([u])[0]) / self.observations.scale)

    def slope(self, u: Array, step: float = SLOPE_STEP, both_sides: bool = False) -> Array:
        """∂ times / ∂ u over the scale, (N, K). Steps out of the bounds or to nothing turn back."""
        points = []
        for k in range(len(u)):
            ahead = step if u[k] + step <= self.high[k] else -step
            points.append([_moved(u, k, ahead)])
            if both_sides and self.low[k] <= u[k] - ahead <= self.high[k]:
                points[k].append(_moved(u, k, -ahead))
        base, *_ = self.times([u, *(point for of_one in points for point in of_one)])
        columns = []
        for k, of_one in enumerate(points):
            found = self._finite(of_one)
            back = _moved(u, k, -step)
            if not found and self.low[k] <= back[k] <= self.high[k]:
                found = self._finite([back])
            if len(found) == 1:
                found.append((u, base))
            # Without a finite neighbour the slope stays 0: there is no way to go from here.
            columns.append(np.zeros_like(base) if not found else
                           (found[0][1] - found[1][1]) / (found[0][0][k] - found[1][0][k]))
        return np.asarray(np.stack(columns, axis=1) / self.observations.scale[:, None])

    def _finite(self, points: Sequence[Array]) -> list[tuple[Array, Array]]:
        found = zip(points, self.times(points), strict=True)
        return [(point, times) for point, times in found if np.isfinite(times).all()]

    def linearised(self, u: Array, slope: Array, size: float) -> Linearised:
        """The model about u for errors of a given size."""
        scaled = slope / size
        target = self.residual(u) / size + scaled @ u
        return Linearised(scaled, target, u, self.low, self.high, self.robust)

    def total(self, u: Array, size: float) -> float:
        """What is minimised."""
        left = (self.residual(u) / size)**2
        rho = 2.0 * (np.sqrt(1.0 + left) - 1.0) if self.robust else left
        return float(rho.sum() + (u**2).sum())


def _moved(u: Array, k: int, step: float) -> Array:
    moved = u.copy()
    moved[k] += step
    return moved


def fit(
    predict: Predict, observations: Observations, prior: Prior,
    options: FitOptions | None = None, executor: Executor | None = None,
    labels: Sequence[Hashable] | None = None,
) -> Fit:
    """Fit K parameters to N times; see the module for what is minimised.

    ``predict`` takes parameters (K,) and gives all N times [s]; it may give NaN or infinity where
    it finds none, and the search then keeps away, but not at the defaults: UsageError. Slopes go
    through ``executor`` if given (for one of processes ``predict`` must be picklable). ``labels``
    (N,) say which observations of different runs are of the same thing.
    """
    chosen = options or FitOptions()
    model = _Model(predict, observations, prior, chosen.robust, executor)
    u, size, converged = np.zeros(len(prior.default)), chosen.error, False
    if not np.isfinite(model.residual(u)).all():
        raise UsageError("a fit needs finite times at the default parameters")
    # The second search knows how large the errors are, and starts near its end.
    for _ in range(2):
        u, converged = _search(model, u, size)
        slope = model.slope(u)
        size = error_size(model.residual(u), slope, model.linearised(u, slope, size),
                          chosen.error, chosen.error_weight)
        u = _polished(model, u, slope, size)
    slope = model.slope(u, LAST_STEP, both_sides=True)
    linear = model.linearised(_polished(model, u, slope, size), slope, size)
    return _judged(model, linear, size, chosen, converged, labels)


def _polished(model: _Model, u: Array, slope: Array, size: float) -> Array:
    """The optimum of the model linearised at u, if the predictions confirm that it is better."""
    moved = model.linearised(u, slope, size).refit(np.ones(len(slope)))
    return moved if model.total(moved, size) < model.total(u, size) else u


def _search(model: _Model, start: Array, size: float) -> tuple[Array, bool]:
    """Optimum (K,) for errors of a given size, and whether the search came to its end."""
    from scipy.optimize import least_squares

    count = len(model.observations.time)

    def residuals(u: Array) -> Array:
        return np.concatenate([model.residual(u) / size, u])

    def slopes(u: Array) -> Array:
        return np.concatenate([-model.slope(u) / size, np.eye(len(u))])

    def loss(z: Array) -> Array:
        # The prior's own terms, at the end, stay quadratic.
        root = np.sqrt(1.0 + z)
        rho = np.stack([2.0 * (root - 1.0), 1.0 / root, -0.5 / root**3])
        rho[:, count:] = np.stack([z[count:], np.ones_like(z[count:]), np.zeros_like(z[count:])])
        return rho

    # The stubs of scipy want an argument more than scipy gives to a loss.
    rule: Any = loss if model.robust else "linear"
    found = least_squares(
        residuals, start, jac=slopes, bounds=(model.low, model.high), method="trf", loss=rule,
        ftol=FINISHED, xtol=SMALLEST_STEP, gtol=1e-6, max_nfev=MOST_STEPS,
    )
    return np.asarray(found.x, dtype=np.float64), bool(found.success)


def _judged(
    model: _Model, linear: Linearised, size: float, options: FitOptions, converged: bool,
    labels: Sequence[Hashable] | None,
) -> Fit:
    """Everything that follows from the model linearised at the optimum."""
    seen, u = model.observations, linear.at
    resample = seen.runs >= FEWEST_TO_RESAMPLE
    generator = np.random.default_rng(np.random.SeedSequence(options.seed))
    draws = np.stack([
        model.parameters(draw)
        for draw in resampled_draws(linear, seen.run, options.draws, generator, resample)
    ])
    predicted, at_default = model.times([u, np.zeros_like(u)])
    left_out = np.full(len(seen.time), np.nan)
    if seen.runs > 1:
        without = leave_one_out(linear, seen.run)[seen.run] - linear.refit(np.ones(len(seen.run)))
        left_out = predicted + size * seen.scale * (linear.slope * without).sum(axis=1)
    covariance = linear.covariance(u)
    spread = np.sqrt(np.diag(covariance))
    estimate = model.parameters(u)
    near = NEAR_BOUND * model.prior.sd
    return Fit(
        estimate=estimate,
        interval=np.percentile(draws, TAILS, axis=0).T,
        standard_error=draws.std(axis=0),
        error_size=size,
        predicted=predicted,
        at_default=at_default,
        left_out=left_out,
        weight=linear.weights(u),
        errors=errors_of(seen.time, seen.run, predicted, left_out, at_default, labels),
        singular_values=np.asarray(np.linalg.svd(linear.slope, compute_uv=False), np.float64),
        prior_share=np.diag(covariance).copy(),
        correlation=covariance / np.outer(spread, spread),
        at_bound=(estimate < model.prior.low + near) | (estimate > model.prior.high - near),
        resampled=resample,
        converged=converged,
        predictions=model.calls,
    )


def amount_told(prior_share: float) -> str:
    """How much the data tell of a parameter: much, some, little or nothing."""
    words = ((NOTHING_FROM, "nothing"), (LITTLE_FROM, "little"), (SOME_FROM, "some"))
    return next((word for least, word in words if prior_share >= least), "much")


def alike(found: Fit) -> list[tuple[int, int]]:
    """Pairs of parameters that the data cannot tell apart, neither of which they tell well.

    Their errors correlate, either as they are or if all other parameters were known: where those
    are uncertain too they blur a pair that only acts together.
    """
    spread = np.sqrt(found.prior_share)
    covariance = found.correlation * np.outer(spread, spread)
    precision = np.linalg.inv(covariance)
    count = len(spread)

    def confused(two: Array) -> bool:
        vague = min(two[0, 0], two[1, 1]) >= SOME_FROM
        return bool(vague and abs(two[0, 1]) > ALIKE_FROM * np.sqrt(two[0, 0] * two[1, 1]))

    pairs = [(i, j) for i in range(count) for j in range(i + 1, count)]
    return [pair for pair in pairs if confused(covariance[np.ix_(pair, pair)])
            or confused(np.linalg.inv(precision[np.ix_(pair, pair)]))]


def what_cannot_be_told(found: Fit, names: Sequence[str]) -> tuple[str, ...]:
    """Sentences on what the runs leave open; none where they tell every parameter."""
    pairs = [f"The runs cannot tell {names[i]} from {names[j]}." for i, j in alike(found)]
    told = [amount_told(float(share)) for share in found.prior_share]
    open_ones = [f"The runs say {amount} about {name}." for name, amount in
                 zip(names, told, strict=True) if amount in ("nothing", "little")]
    return (*pairs, *open_ones)
