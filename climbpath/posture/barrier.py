"""Second-order terms of the posture problem: every limit with slope and curvature, as arrays.

The unknowns of a stance are a small turn w and shift u of the trunk in its own axes and the
spare reach t. A target that stood at v in trunk axes then stands at exp(-w) v - u, so
dv = -u + v x w + (w (w.v) - v |w|^2) / 2 to second order. Limits are functions g >= 0.
The curvature of that turn is what lets a Newton step see how leaning brings a root nearer.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

SIZE = 7
"""Unknowns of a stance: three of the turn, three of the shift, and the spare reach."""

_PAIRS = ((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2))
_SLOT = {pair: k for k, pair in enumerate(_PAIRS)} | {(b, a): k for k, (a, b) in enumerate(_PAIRS)}


class System:
    """The Newton systems of N stances being summed: ``matrix[i][j]`` for i >= j, and ``right``."""

    def __init__(self, count: int, damping: tuple[Array, Array]) -> None:
        self.matrix = [[np.zeros(count) for _ in range(i + 1)] for i in range(SIZE)]
        self.right = [np.zeros(count) for _ in range(SIZE)]
        for i in range(3):
            self.matrix[i][i] += damping[0]
            self.matrix[3 + i][3 + i] += damping[1]

    def add_limbs(
        self, point: Array, inner: list[Array], pull: Array, bend: Array, reach_pull: Array
    ) -> None:
        """Limits that depend on targets seen from the trunk.

        ``point`` (3, L, N): v of each limb. ``inner``: six arrays (L, N), the symmetric matrix
        over v of sum(weight g' g'^T - multiplier g''). ``pull`` (3, L, N): sum of right-hand
        coefficients times slopes; ``bend`` (3, L, N): sum of multipliers times slopes (the
        turn's curvature); ``reach_pull`` (3, L, N): weight times slope of the reach limits.
        """
        vx, vy, vz = point
        m = [[inner[_SLOT[i, j]] for j in range(3)] for i in range(3)]
        # B = M [v]x, where [v]x w = v x w.
        b = [[row[1] * vz - row[2] * vy, row[2] * vx - row[0] * vz, row[0] * vy - row[1] * vx]
             for row in m]
        dot = bend[0] * vx + bend[1] * vy + bend[2] * vz
        v = (vx, vy, vz)
        # Turn-turn block: [v]x^T B minus the turn's own curvature.
        for i in range(3):
            j, k = (i + 1) % 3, (i + 2) % 3
            for col in range(i + 1):
                value = v[k] * b[j][col] - v[j] * b[k][col]
                value -= 0.5 * (bend[i] * v[col] + bend[col] * v[i])
                if i == col:
                    value += dot
                self.matrix[i][col] += value.sum(axis=0)
                self.matrix[3 + i][3 + col] += m[i][col].sum(axis=0)
            for col in range(3):
                self.matrix[3 + i][col] -= b[i][col].sum(axis=0)
            turned = pull[j] * v[k] - pull[k] * v[j]
            self.right[i] += turned.sum(axis=0)
            self.right[3 + i] -= pull[i].sum(axis=0)
            # Reach limits fall by one with each metre of t.
            self.matrix[6][i] -= (reach_pull[j] * v[k] - reach_pull[k] * v[j]).sum(axis=0)
            self.matrix[6][3 + i] += reach_pull[i].sum(axis=0)

    def add_plane(
        self, normal: Array, offset: Array, weight: Array, right: Array, multiplier: Array,
        shifts: bool = True, spare: bool = False,
    ) -> None:
        """A limit that is linear in a point fixed in the trunk: n.(p + R o) + const >= 0.

        ``normal`` (3, N) n in trunk axes, ``offset`` (3,) or (3, N) o. ``shifts`` False for a
        direction (which a shift does not change); ``spare`` True where t counts against it.
        """
        n, o = normal, offset
        turn = [o[1] * n[2] - o[2] * n[1], o[2] * n[0] - o[0] * n[2], o[0] * n[1] - o[1] * n[0]]
        slope = [*turn, *(n if shifts else ())]
        size = len(slope)
        for i in range(size):
            weighted = weight * slope[i]
            for j in range(i + 1):
                self.matrix[i][j] += weighted * slope[j]
            if spare:
                self.matrix[6][i] -= weighted
            self.right[i] += right * slope[i]
        dot = n[0] * o[0] + n[1] * o[1] + n[2] * o[2]
        for i in range(3):
            for j in range(i + 1):
                value = 0.5 * (n[i] * o[j] + n[j] * o[i])
                if i == j:
                    value = value - dot
                self.matrix[i][j] -= multiplier * value
        if shifts:
            # n.(w x u): a turn after a shift moves the point sideways.
            for i in range(3):
                j, k = (i + 1) % 3, (i + 2) % 3
                self.matrix[3 + j][i] -= multiplier * n[k]
                self.matrix[3 + k][i] += multiplier * n[j]
        if spare:
            self.matrix[6][6] += weight
            self.right[6] -= right

    def solve(self, floor: float = 1e-2) -> list[Array]:
        """Solve all systems by LDL^T with pivots kept above ``floor``.

        Lifting a pivot that came out small or negative turns the step into one of descent.
        """
        lower = self.matrix
        pivot: list[Array] = []
        scaled: list[list[Array]] = []
        for j in range(SIZE):
            row: list[Array] = []
            value = lower[j][j].copy()
            for k in range(j):
                entry = lower[j][k].copy()
                for i in range(k):
                    entry -= row[i] * scaled[k][i]
                row.append(entry)
            lead = [row[k] / pivot[k] for k in range(j)]
            for k in range(j):
                value -= row[k] * lead[k]
            pivot.append(np.where(value > floor, value, np.maximum(np.abs(value), 1.0)))
            scaled.append(lead)
        result = [r.copy() for r in self.right]
        for j in range(SIZE):
            for k in range(j):
                result[j] -= scaled[j][k] * result[k]
        for j in range(SIZE):
            result[j] /= pivot[j]
        for j in reversed(range(SIZE)):
            for k in range(j):
                result[k] -= scaled[j][k] * result[j]
        return result
