"""Second-order terms of the posture problem: every limit with slope and curvature, as arrays.

The unknowns of a stance are a small turn w and shift u of the trunk in its own axes and the
spare reach t. A target that stood at v in trunk axes then stands at exp(-w) v - u, so
dv = -u + v x w + (w (w.v) - v |w|^2) / 2 to second order. Limits are functions g >= 0.
The curvature of that turn is what lets a Newton step see how leaning brings a root nearer.

Calls on arrays cost more than the arithmetic in them once few stances are left, so terms are
summed in blocks, with few calls a step.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.limits import PointLimits

Array = NDArray[np.float64]

SIZE = 7
"""Unknowns of a stance: three of the turn, three of the shift, and the spare reach."""

SPARE, RIGHT = 6, 7
"""Rows of ``System.lower``: that of the spare reach, and the right-hand side."""


def point_slopes(limits: PointLimits) -> Array:
    """Slopes (6, P, N) of limits of trunk points over turn and shift: o x n, and n."""
    n, o = limits.normal, limits.offset
    slope = np.empty((6, *n.shape[1:]))
    for i in range(3):
        j, k = (i + 1) % 3, (i + 2) % 3
        np.multiply(o[j], n[k], out=slope[i])
        slope[i] -= o[k] * n[j]
    slope[3:, : limits.fixed] = 0.0
    slope[3:, limits.fixed:] = n[:, limits.fixed:]
    return slope


class System:
    """The Newton systems of N stances being summed.

    ``lower`` (8, 7, N): the lower triangle of the matrix (what stands above the diagonal means
    nothing), and the right-hand side as its last row. ``bent`` (3, 3, N): what bends with the
    turn, still to be made symmetric.
    """

    def __init__(self, count: int, damping: tuple[Array, Array]) -> None:
        self.lower = np.zeros((SIZE + 1, SIZE, count))
        self.bent = np.zeros((3, 3, count))
        diagonal = np.einsum("iin->in", self.lower[:SPARE, :SPARE])
        diagonal[:3] = damping[0]
        diagonal[3:] = damping[1]

    def add_limbs(self, point: Array, rows: Array, bend: Array) -> None:
        """Limits that depend on targets seen from the trunk.

        ``point`` (3, L, N): v of each limb. ``rows`` (5, 5, L, N): in its first three columns
        (the others are filled here) the symmetric matrix over v of
        sum(weight g' g'^T - multiplier g''), then a row of minus what the spare reach adds to it
        (weight times slope of the reach limits) and one of right-hand coefficients times slopes.
        ``bend`` (3, L, N): sum of multipliers times slopes (the turn's curvature).
        """
        lower = self.lower
        rows[:, 3:] = rows[:, :2]
        wrapped = np.concatenate([point, point[:2]])
        # Each row times [v]x, where [v]x w = v x w.
        crossed = rows[:, 1:4] * wrapped[2:]
        crossed -= rows[:, 2:] * wrapped[1:4]
        for i in range(3):
            j, k = (i + 1) % 3, (i + 2) % 3
            twice = crossed[j, : i + 1] * point[k]
            twice -= crossed[k, : i + 1] * point[j]
            lower[i, : i + 1] += twice.sum(axis=1)
        turned, shifted = crossed.sum(axis=2), rows[:, :3].sum(axis=2)
        lower[3:SPARE, :3] -= turned[:3]
        lower[3:SPARE, 3:SPARE] += shifted[:3]
        lower[SPARE:, :3] += turned[3:]
        lower[SPARE:, 3:SPARE] -= shifted[3:]
        self.bent += np.einsum("iln,jln->ijn", bend, point)

    def add_points(
        self, limits: PointLimits, slope: Array, weight: Array, right: Array, multiplier: Array
    ) -> None:
        """Limits that are linear in points fixed in the trunk, of the first n of the N stances.

        ``slope`` (6, P, n): that of ``point_slopes``; ``weight``, ``right`` and ``multiplier``
        (P, n).
        """
        fixed, count = limits.fixed, weight.shape[1]
        lower, bent = self.lower[..., :count], self.bent[..., :count]
        weighted = weight * slope
        lower[:3, :3] += np.einsum("ipn,jpn->ijn", weighted[:3], slope[:3])
        lower[3:SPARE, :SPARE] += np.einsum(
            "ipn,jpn->ijn", weighted[3:, fixed:], slope[:, fixed:]
        )
        lower[RIGHT, :SPARE] += np.einsum("ipn,pn->in", slope, right)
        for row in np.flatnonzero(limits.spare):
            lower[SPARE, :SPARE] -= weighted[:, row]
            lower[SPARE, SPARE] += weight[row]
            lower[RIGHT, SPARE] -= right[row]
        pressed = multiplier * limits.normal
        bent += np.einsum("ipn,jpn->ijn", pressed, limits.offset)
        # n.(w x u): a turn after a shift moves the point sideways.
        moved = pressed[:, fixed:].sum(axis=1)
        for i in range(3):
            j, k = (i + 1) % 3, (i + 2) % 3
            lower[3 + j, i] -= moved[k]
            lower[3 + k, i] += moved[j]

    def close(self) -> None:
        """Bring what bends with the turn, -(b v^T + v b^T) / 2 + b.v, into the matrix."""
        bent = self.bent
        self.lower[:3, :3] -= 0.5 * (bent + bent.transpose(1, 0, 2))
        trace = bent[0, 0] + bent[1, 1] + bent[2, 2]
        for i in range(3):
            self.lower[i, i] += trace

    def solve(self, floor: float = 1e-2) -> Array:
        """Solve all systems, (7, N), by LDL^T with pivots kept above ``floor``.

        Lifting a pivot that came out small or negative turns the step into one of descent. The
        right-hand side is worked on as one row more of the matrix.
        """
        work = self.lower
        spare = np.empty((SIZE, SIZE - 1, work.shape[2]))
        for j in range(SIZE):
            pivot = work[j, j]
            if pivot.size and pivot.min() <= floor:
                pivot = np.where(pivot > floor, pivot, np.maximum(np.abs(pivot), 1.0))
            column = work[j + 1:, j]
            if j < SIZE - 1:
                lead = np.divide(column[:-1], pivot, out=work[j, j + 1:])
                product = np.multiply(column[:, None], lead, out=spare[: SIZE - j, : SIZE - 1 - j])
                work[j + 1:, j + 1:] -= product
            column[-1] /= pivot
        result: Array = work[RIGHT]
        for j in range(SIZE - 1, 0, -1):
            result[:j] -= work[:j, j] * result[j]
        return result
