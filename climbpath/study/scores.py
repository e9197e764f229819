"""How well predicted shares of use agree with observed ones, and simple rivals of a model.

For one hold let p be the predicted share of use and q the share of the n observed runs that used
it. Each run's outcome o is 1 or 0, so the mean squared error over the runs, the Brier score, is

    mean (p - o)² = (p - q)² + q (1 - q).

The second part no prediction that is the same for every run can avoid; the first is what a model
adds to it and is given as the excess. Scores of several holds are means over the holds.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from climbpath.errors import UsageError

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

HALF = 0.5
LEAST_USED = 3
"""How many holds the second rival leaves out."""


@dataclass(frozen=True)
class Scores:
    """``right_side`` of ``holds`` lie on the same side of 50 % as observed.

    ``correlation`` is Pearson's, None where one side does not vary. ``brier`` and ``excess`` are
    over all holds, the last two over the contested ones.
    """

    name: str
    correlation: float | None
    right_side: int
    holds: int
    brier: float
    excess: float
    brier_contested: float
    excess_contested: float


def _pair(predicted: ArrayLike, observed: ArrayLike) -> tuple[Array, Array]:
    """Both as arrays of one shape. UsageError where they are not."""
    p, q = np.asarray(predicted, dtype=np.float64), np.asarray(observed, dtype=np.float64)
    if p.shape != q.shape or p.ndim != 1 or not len(p):
        raise UsageError(f"expected two lists of equal length, found {p.shape} and {q.shape}")
    return p, q


def correlation(predicted: ArrayLike, observed: ArrayLike) -> float | None:
    """Pearson's correlation over the holds; None where either does not vary."""
    p, q = _pair(predicted, observed)
    if np.ptp(p) == 0.0 or np.ptp(q) == 0.0:
        return None
    p, q = p - p.mean(), q - q.mean()
    return float(p @ q / np.sqrt((p @ p) * (q @ q)))


def on_right_side(predicted: ArrayLike, observed: ArrayLike) -> Flags:
    """Whether each hold is used by most, or not, as observed. Just half is on neither side."""
    p, q = _pair(predicted, observed)
    return np.asarray((p - HALF) * (q - HALF) > 0.0)


def errors(predicted: ArrayLike, observed: ArrayLike) -> Array:
    """Predicted less observed share by hold."""
    p, q = _pair(predicted, observed)
    return p - q


def excess(predicted: ArrayLike, observed: ArrayLike) -> float:
    """Mean (p - q)² over the holds."""
    p, q = _pair(predicted, observed)
    return float(np.mean((p - q) ** 2))


def brier(predicted: ArrayLike, observed: ArrayLike) -> float:
    """Mean (p - o)² over the holds and the observed runs: the excess and q (1 - q)."""
    p, q = _pair(predicted, observed)
    return float(np.mean((p - q) ** 2 + q * (1.0 - q)))


def scores(
    name: str, predicted: ArrayLike, observed: ArrayLike, contested: Sequence[int]
) -> Scores:
    """All figures of one prediction; ``contested`` are places in the lists."""
    p, q = _pair(predicted, observed)
    some = list(contested)
    return Scores(
        name=name,
        correlation=correlation(p, q),
        right_side=int(on_right_side(p, q).sum()),
        holds=len(p),
        brier=brier(p, q),
        excess=excess(p, q),
        brier_contested=brier(p[some], q[some]),
        excess_contested=excess(p[some], q[some]),
    )


def every_hold(number: int) -> Array:
    """The rival that uses every hold: 1 for each."""
    return np.ones(number)


def all_but_least_used(observed: ArrayLike, left_out: int = LEAST_USED) -> Array:
    """The rival that knows the answer: 0 for the least used holds, the first of equals, else 1."""
    q = np.asarray(observed, dtype=np.float64)
    predicted = np.ones(len(q))
    predicted[np.argsort(q, kind="stable")[:left_out]] = 0.0
    return predicted


def nearness_to_middle(x: ArrayLike, middle: float) -> Array:
    """The rival that only knows how far out a hold is: 1 - |x - middle| / the greatest of these."""
    off = np.abs(np.asarray(x, dtype=np.float64) - middle)
    return np.asarray(1.0 - off / off.max()) if off.max() > 0.0 else np.ones(len(off))
