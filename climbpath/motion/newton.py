"""Newton systems of the contact-force problems, as arrays over many stances.

Eliminating the shares u and t of limbs and turning leaves a 6 by 6 system over force and moment
for each stance; its entries are arrays and it is factorised entry by entry. See
``climbpath.motion.interior`` for the problems themselves.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

PIVOT = 1e-14
"""Pivots are kept above this share of their diagonal entry."""


@dataclass(frozen=True)
class Cases:
    """n stances: ``rays`` (3, K, L, n) scaled by capacity [body weights], ``point`` (3, L, n) from
    the centre of mass [m], ``turn`` (3, n) moment bounds M [body weights times m], ``need``
    (6, n): force and moment the contacts have to give. A contact that bears nothing has rays of 0.
    """

    rays: Array
    point: Array
    turn: Array
    need: Array

    def take(self, chosen: NDArray[np.int64] | slice) -> Cases:
        """The chosen stances."""
        return Cases(
            *(np.ascontiguousarray(getattr(self, f.name)[..., chosen]) for f in fields(self))
        )

    @cached_property
    def shape(self) -> tuple[int, int, int]:
        """K, L, n."""
        _, rays, limbs, count = self.rays.shape
        return rays, limbs, count

    def forces(self, share: Array) -> Array:
        """Force of every contact (3, L, n) from ray shares (K, L, n)."""
        return np.stack([(self.rays[a] * share).sum(axis=0) for a in range(3)])

    def wrench(self, force: Array, turning: Array) -> Array:
        """Sum (6, n) of forces (3, L, n) and their moments, and of turning shares (3, n)."""
        total = np.empty((6, force.shape[-1]))
        total[:3] = force.sum(axis=1)
        total[3:] = cross(self.point, force).sum(axis=1) + self.turn * turning
        return total

    def local(self, y: Array) -> Array:
        """y_f + y_m × p of every contact, shape (3, L, n)."""
        return y[:3, None] + cross(y[3:, None], self.point)

    def along(self, y: Array) -> Array:
        """The same along every ray, shape (K, L, n)."""
        at = self.local(y)
        value = self.rays[0] * at[0]
        value += self.rays[1] * at[1]
        value += self.rays[2] * at[2]
        return np.asarray(value)


def cross(a: Array, b: Array) -> Array:
    """a × b with the components along the first axis."""
    return np.stack([a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2],
                     a[0] * b[1] - a[1] * b[0]])


class Factor:
    """The Newton matrix of one step, with u and t eliminated and the rest factorised."""

    def __init__(self, cases: Cases, common: bool, rays: Array, limb: Array, turning: Array,
                 rank: Array) -> None:
        """``rays``, ``limb``, ``turning``: x / z of the limits; ``rank`` that of Σ u + Σ t ≤ 1.

        For own shares the quadratic adds 1 to the weight of each u, and 1 to ``rank`` over t.
        """
        self.cases = cases
        self.common = common
        self.left = limb if common else limb + 1.0
        self.limb = rays.sum(axis=0) + self.left
        self.mean = cases.forces(rays) / self.limb
        self.turn = turning.sum(axis=0)
        self.tilt = cases.turn * (turning[0] - turning[1]) / self.turn
        moment = 4.0 * turning[0] * turning[1] / self.turn * cases.turn**2
        matrix = _matrix(cases, self._spread(rays), moment)
        # The limit on Σ u + Σ t joins as a product of one vector with itself: subtracting it
        # afterwards would cancel, since all other limits scale with (y, u, t).
        self.rest = 1.0 / rank + (1.0 / self.turn).sum(axis=0)
        joint = np.zeros((6, rank.shape[0]))
        if common:
            self.rest += (1.0 / self.limb).sum(axis=0)
            joint = cases.wrench(self.mean, np.zeros_like(self.turn))
        joint[3:] += self.tilt
        for j in range(6):
            scaled = joint[j] / self.rest
            for k in range(j + 1):
                matrix[j][k] += scaled * joint[k]
        self.lower, self.pivot = _factorised(matrix)

    def _spread(self, rays: Array) -> list[list[Array]]:
        """Spread of each contact's rays about their mean, with the weight ``left`` at 0."""
        off = [self.cases.rays[a] - self.mean[a] for a in range(3)]
        spread = []
        for a in range(3):
            weighted = rays * off[a]
            lead = self.left * self.mean[a]
            spread.append([(weighted * off[b]).sum(axis=0) + lead * self.mean[b]
                           for b in range(a + 1)])
        return spread

    def _pull(self, u: Array, t: Array) -> Array:
        """What the limit on Σ u + Σ t takes back per 1 / weight, from changes without it."""
        total = t.sum(axis=0)
        if self.common:
            total += u.sum(axis=0)
        return np.asarray(total / self.rest)

    def solve(self, y: Array, u: Array, t: Array) -> tuple[Array, Array, Array]:
        """Solve for right-hand sides (6, n), (L, n), (3, n)."""
        free_u, free_t = u / self.limb, t / self.turn
        pull = self._pull(free_u, free_t)
        pull_u = pull if self.common else 0.0
        right = y + self.cases.wrench(self.mean * (u - pull_u), np.zeros_like(t))
        right[3:] += self.tilt * (t - pull)
        found = _substituted(self.lower, self.pivot, right)
        free_u += (self.mean * self.cases.local(found)).sum(axis=0)
        free_t += self.tilt * found[3:]
        pull = self._pull(free_u, free_t)
        pull_u = pull if self.common else 0.0
        return found, free_u - pull_u / self.limb, free_t - pull / self.turn


def _matrix(cases: Cases, spread: list[list[Array]], moment: Array) -> list[list[Array]]:
    """Lower triangle of Σ_i G_i W_i G_iᵀ with G = [1; p×], plus ``moment`` on its diagonal."""
    px, py, pz = cases.point
    w = [[spread[max(a, b)][min(a, b)] for b in range(3)] for a in range(3)]
    # Rows of p× W: the moments of the columns of W.
    turned = [[py * w[2][b] - pz * w[1][b] for b in range(3)],
              [pz * w[0][b] - px * w[2][b] for b in range(3)],
              [px * w[1][b] - py * w[0][b] for b in range(3)]]
    rows = [[w[a][b].sum(axis=0) for b in range(a + 1)] for a in range(3)]
    for a in range(3):
        row = turned[a]
        both = [py * row[2] - pz * row[1], pz * row[0] - px * row[2], px * row[1] - py * row[0]]
        rows.append([*(value.sum(axis=0) for value in row),
                     *(both[b].sum(axis=0) for b in range(a + 1))])
        rows[3 + a][3 + a] += moment[a]
    return rows


def _factorised(matrix: list[list[Array]]) -> tuple[list[list[Array]], list[Array]]:
    """L D Lᵀ of symmetric matrices given as lower triangles of arrays; unit L without diagonal."""
    lower: list[list[Array]] = []
    pivot: list[Array] = []
    for j, given in enumerate(matrix):
        scaled: list[Array] = []
        for k in range(j):
            entry = given[k]
            for i in range(k):
                entry = entry - scaled[i] * lower[k][i]
            scaled.append(entry)
        row = [scaled[k] / pivot[k] for k in range(j)]
        value = given[j].copy()
        for k in range(j):
            value -= scaled[k] * row[k]
        # Where the contacts leave a direction without hold the pivot would be 0.
        pivot.append(np.maximum(value, PIVOT * given[j] + 1e-30))
        lower.append(row)
    return lower, pivot


def _substituted(lower: list[list[Array]], pivot: list[Array], right: Array) -> Array:
    """Solve L D Lᵀ s = right, (6, n)."""
    found = right.copy()
    size = len(pivot)
    for j in range(size):
        for k in range(j):
            found[j] -= lower[j][k] * found[k]
    for j in range(size):
        found[j] /= pivot[j]
    for j in reversed(range(size)):
        for k in range(j):
            found[k] -= lower[j][k] * found[j]
    return found
