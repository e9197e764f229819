"""Refitting a linearised model: bounded, robust, with a prior. Costs no predictions.

In scaled unknowns u (0 the prior's centre, 1 its standard deviation) and residuals in units of the
expected error, minimise

    Σ count · ρ((b − A u)²) + |u − centre|²,   low ≤ u ≤ high,   ρ(z) = z or 2 (√(1 + z) − 1)

by reweighted least squares. The second ρ is quadratic for small residuals and grows like the
residual itself for large ones, so that a slip nobody noted does not decide the fit.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

REWEIGHTINGS = 12
CONVERGED = 1e-6
"""Reweighting ends when no unknown moves by more than this share of its prior deviation."""

SWAPS = 50
BALANCED = 1e-9
"""A bound whose slope is less than this holds nothing back."""

ROBUST_MEAN = 0.56489
"""∫ z² / √(1 + z²) φ(z) dz over the normal density φ: what a reweighted square is on average where
errors are normal and of unit size, by numerical integration."""


@dataclass(frozen=True)
class Linearised:
    """The model about the optimum ``at`` (K,).

    ``slope`` A (N, K), ``target`` b (N,) = residual + A at, ``low`` and ``high`` (K,).
    """

    slope: Array
    target: Array
    at: Array
    low: Array
    high: Array
    robust: bool

    def refit(self, count: Array, centre: Array | None = None,
              target: Array | None = None) -> Array:
        """The optimum (K,) where observation i counts ``count[i]`` times (N,)."""
        middle = np.zeros_like(self.at) if centre is None else centre
        wanted = self.target if target is None else target
        u = self.at
        for _ in range(REWEIGHTINGS if self.robust else 1):
            weight = count * self.weights(u, wanted)
            weighted = self.slope * weight[:, None]
            curvature = self.slope.T @ weighted + np.eye(len(u))
            moved = boxed(curvature, weighted.T @ wanted + middle, self.low, self.high)
            step, u = float(np.abs(moved - u).max()), moved
            if step < CONVERGED:
                break
        return u

    def weights(self, u: Array, target: Array | None = None) -> Array:
        """ρ' of each residual (N,): 1 for small ones, less for large ones."""
        wanted = self.target if target is None else target
        if not self.robust:
            return np.ones(len(wanted))
        residual = wanted - self.slope @ u
        return np.asarray(1.0 / np.sqrt(1.0 + residual**2))

    def covariance(self, u: Array) -> Array:
        """Posterior covariance (K, K) in units of the prior's, the errors being of unit size."""
        weighted = self.slope * self.weights(u)[:, None]
        return np.asarray(np.linalg.inv(self.slope.T @ weighted + np.eye(len(u))))


def boxed(curvature: Array, pull: Array, low: Array, high: Array) -> Array:
    """Minimum (K,) of ½ uᵀ H u − gᵀ u with u held between bounds.

    Unknowns that leave the box are set on its face and the rest is solved again; one on a face
    that pulls inward is freed. That comes to its end in a few rounds for the few unknowns of a fit.
    """
    # -1: held at the lower bound, 1: at the upper, 0: free.
    side = np.zeros(len(pull), dtype=np.int64)
    u = np.zeros(len(pull))
    for _ in range(SWAPS):
        u = np.where(side < 0, low, np.where(side > 0, high, u))
        free = side == 0
        held = pull[free] - curvature[np.ix_(free, ~free)] @ u[~free]
        u[free] = np.linalg.solve(curvature[np.ix_(free, free)], held)
        out = (u > high).astype(np.int64) - (u < low)
        if out.any():
            side += out
            continue
        inward = (curvature @ u - pull) * side
        if not (inward > BALANCED).any():
            break
        side[int(inward.argmax())] = 0
    return np.clip(u, low, high)


def error_size(
    residual: Array, slope: Array, model: Linearised, expected: float, weight: float
) -> float:
    """Size of the errors, from the residuals and what was expected of them.

    ``residual`` (N,) and ``slope`` (N, K) are in s. The expectation counts as ``weight``
    observations (the mean of a scaled inverse chi-square). Each round refits the linearised model,
    since smaller errors let the data pull harder.
    """
    size = expected
    mean = ROBUST_MEAN if model.robust else 1.0
    for _ in range(30):
        scaled = slope / size
        trial = Linearised(scaled, residual / size + scaled @ model.at, model.at, model.low,
                           model.high, model.robust)
        u = trial.refit(np.ones(len(residual)))
        left = trial.target - scaled @ u
        used = len(u) - float(np.trace(trial.covariance(u)))
        squares = size**2 * float((trial.weights(u) * left**2).sum()) / mean
        among = weight + len(residual) - used
        previous, size = size, float(np.sqrt((weight * expected**2 + squares) / among))
        if abs(size - previous) < 1e-3 * size:
            break
    return size


def resampled_draws(model: Linearised, run: Ints, draws: int, generator: np.random.Generator,
                    resample: bool) -> Array:
    """Refits (draws, K) that show what else could have come out.

    With ``resample``, runs are drawn with replacement; deviations are stretched by √(R / (R − 1)),
    since R runs drawn from themselves vary that much too little. Without, normal errors of unit
    size are added to every observation. The prior's centre is drawn anew each time: it is not
    known either, and an unknown that the data say nothing about must keep its whole prior spread.
    """
    runs = int(run.max()) + 1
    stretch = float(np.sqrt(runs / (runs - 1.0))) if resample else 1.0
    ones = np.ones(len(run))
    base = model.refit(ones)  # where the true predictions bend, not quite the optimum itself
    result = np.empty((draws, len(model.at)))
    for d in range(draws):
        centre = generator.standard_normal(len(model.at)) / stretch
        if resample:
            times_drawn = np.bincount(generator.integers(0, runs, runs), minlength=runs)
            u = model.refit(times_drawn[run].astype(np.float64), centre)
        else:
            noise = generator.standard_normal(len(run))
            u = model.refit(ones, centre, model.target + noise)
        result[d] = model.at + stretch * (u - base)
    return np.clip(result, model.low, model.high)


def leave_one_out(model: Linearised, run: Ints) -> Array:
    """Unknowns (R, K) fitted without each run in turn."""
    return np.stack([
        model.refit((run != left_out).astype(np.float64)) for left_out in range(int(run.max()) + 1)
    ])
