"""Errors of predicted times, beside those of the rivals that a model must beat."""

from __future__ import annotations

from collections.abc import Hashable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class Errors:
    """Root mean square errors, s; None where there is none.

    ``left_out``: each run predicted by a fit without it (linearised); ``default``: by the
    defaults; ``others``: by the mean of the other runs, where they have the same observation
    (``others_count`` of them), and ``left_out_there`` the error of the fit on the same ones.
    """

    in_sample: float
    left_out: float | None
    default: float
    others: float | None
    left_out_there: float | None
    others_count: int


def mean_of_others(time: Array, run: Ints, labels: Sequence[Hashable]) -> Array:
    """For each observation the mean over other runs of those with its label (N,), NaN if none."""
    numbers = {label: k for k, label in enumerate(dict.fromkeys(labels))}
    label = np.array([numbers[one] for one in labels])
    other = (label[:, None] == label) & (run[:, None] != run)
    count = other.sum(axis=1)
    means = np.divide(other @ time, count, out=np.full(len(time), np.nan), where=count > 0)
    return np.asarray(means)


def errors_of(
    time: Array, run: Ints, predicted: Array, left_out: Array, at_default: Array,
    labels: Sequence[Hashable] | None = None,
) -> Errors:
    """Errors of N predictions against what was measured, and of what they must beat."""
    others = np.full(len(time), np.nan)
    if labels is not None:
        others = mean_of_others(time, run, labels)
    there = np.isfinite(others)
    rms = root_mean_square
    return Errors(
        in_sample=rms(time - predicted) or 0.0,
        left_out=rms(time - left_out),
        default=rms(time - at_default) or 0.0,
        others=rms((time - others)[there]),
        left_out_there=rms((time - left_out)[there]),
        others_count=int(there.sum()),
    )


def root_mean_square(values: Array) -> float | None:
    """Root of the mean square; None for no values or where one is not a number."""
    if not len(values) or not np.isfinite(values).all():
        return None
    return float(np.sqrt(np.mean(values**2)))
