"""Interior-point solver for the contact forces of many stances at once.

Both questions of ``climbpath.motion.load`` have one form. With the rays of every contact scaled
by its capacity, contact i carries Σ_k c_ik r_ik at a share Σ_k c_ik of what it can, and turning
carries ±m_j M_j about axis j. The duals, over y (force and moment), u (4) and t (3), are

    common share   max b·y                           with Σ u + Σ t ≤ 1
    own shares     max b·y − (Σ u_i² + (Σ t)²) / 2

both under r_ik·(y_f + y_m × p_i) ≤ u_i, 0 ≤ u_i and ± M_j y_mj ≤ t_j, where p_i is the point of
contact i from the centre of mass. y = 0 is always inside, so every iterate bounds the answer from
below, and grows without limit where no forces hold the stance. Eliminating u and t leaves 6 by 6
systems, which are factorised entry by entry over all stances.

References: S. Mehrotra, On the implementation of a primal-dual interior point method, SIAM J.
Optim. 2(4) 1992, 10.1137/0802028 (predictor and corrector, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

STEPS = 40
"""Most iterations; a dozen are usual."""

SHORTEN = 0.9995
"""Share of the way to the nearest bound that a step goes at most."""

GAP = 1e-9
RESIDUAL = 1e-10
"""Done when the answer is known within ``GAP`` (relative to 1 + itself) and equilibrium is missed
by less than ``RESIDUAL`` (body weights, and body weights times m)."""

DROP_SHARE = 0.15
"""Stances that are done leave the arrays once they make up this share."""

PIVOT = 1e-14
"""Pivots are kept above this share of their diagonal entry."""

LEAST = 1e-12
"""The barrier weight is not lowered further: stances that are done wait for the others there."""

START = 0.05
"""Barrier weight of the start (the shares then begin near those of usual stances)."""


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
        return value


def cross(a: Array, b: Array) -> Array:
    """a × b with the components along the first axis."""
    return np.stack([a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2],
                     a[0] * b[1] - a[1] * b[0]])


@dataclass(frozen=True)
class Solution:
    """``value`` (n,): least common share, or half the sum of squared shares; ``gap`` (n,) its
    bound minus it; ``missed`` (n,): largest entry of what equilibrium lacks; ``ray_share``
    (K, L, n), ``limb_share`` (L, n), ``turn_share`` (n,); ``bounded`` (n,) bool: False where the
    value passed the limit, which proves that it is larger.
    """

    value: Array
    gap: Array
    missed: Array
    ray_share: Array
    limb_share: Array
    turn_share: Array
    bounded: Flags


def solve(cases: Cases, common: bool, limit: float) -> Solution:
    """Solve n stances; ``common`` asks for the least common share, else for own shares."""
    rays, limbs, count = cases.shape
    state = _State.first(cases, common)
    result = Solution(
        np.empty(count), np.empty(count), np.empty(count), np.empty((rays, limbs, count)),
        np.empty((limbs, count)), np.empty(count), np.ones(count, dtype=bool),
    )
    where = np.arange(count)
    for step in range(STEPS + 1):
        value, gap, missed = state.progress()
        over = value > limit
        done = over | ((gap <= GAP * (1.0 + np.abs(value))) & (missed <= RESIDUAL))
        if step == STEPS or done.mean() >= DROP_SHARE:
            leaving = np.flatnonzero(done) if step < STEPS else np.arange(len(where))
            _store(result, state, where[leaving], leaving, (value, gap, missed), over)
            staying = np.flatnonzero(~done) if step < STEPS else leaving[:0]
            if not len(staying):
                break
            state, where = state.take(staying), where[staying]
        state.step()
    return result


def _store(
    result: Solution, state: _State, to: NDArray[np.int64], of: NDArray[np.int64],
    figures: tuple[Array, Array, Array], over: Flags,
) -> None:
    """Write stances ``of`` of the state to places ``to`` of the result."""
    for array, values in zip((result.value, result.gap, result.missed), figures, strict=True):
        array[to] = values[of]
    result.bounded[to] = ~over[of]
    share, _, turning = state.parts(state.x)
    result.ray_share[..., to] = share[..., of]
    if state.common:
        result.limb_share[:, to] = share.sum(axis=0)[:, of]
        result.turn_share[to] = turning.sum(axis=0).max(axis=0)[of]
    else:
        result.limb_share[:, to] = state.u[:, of]
        result.turn_share[to] = state.t.sum(axis=0)[of]


class _State:
    """Iterates of n stances: duals y, u, t; multipliers ``x`` and slacks ``z`` of all limits.

    Rows of ``x`` and ``z``: K L of the rays, L of 0 ≤ u, 3 + 3 of the turning bounds, and for the
    common share one of Σ u + Σ t ≤ 1.
    """

    def __init__(self, cases: Cases, common: bool, dual: tuple[Array, Array, Array], x: Array,
                 z: Array) -> None:
        self.cases, self.common, self.x, self.z = cases, common, x, z
        self.y, self.u, self.t = dual

    @classmethod
    def first(cls, cases: Cases, common: bool) -> _State:
        """y = 0 and everything else well inside."""
        rays, limbs, count = cases.shape
        level = 0.5 / (limbs + 3)
        dual = (np.zeros((6, count)), np.full((limbs, count), level), np.full((3, count), level))
        z = np.full(((rays + 1) * limbs + 6 + common, count), level)
        if common:
            z[-1] = 0.5
        return cls(cases, common, dual, START / z, z)

    def take(self, chosen: NDArray[np.int64]) -> _State:
        """The chosen stances."""
        dual = (self.y[:, chosen], self.u[:, chosen], self.t[:, chosen])
        return _State(self.cases.take(chosen), self.common, dual, self.x[:, chosen],
                      self.z[:, chosen])

    def parts(self, rows: Array) -> tuple[Array, Array, Array]:
        """Views of rows of limits: rays (K, L, n), limbs (L, n), turning (2, 3, n)."""
        rays, limbs, count = self.cases.shape
        cut = rays * limbs
        return (rows[:cut].reshape(rays, limbs, count), rows[cut:cut + limbs],
                rows[cut + limbs:cut + limbs + 6].reshape(2, 3, count))

    def lacking(self, x: Array) -> Array:
        """need minus the wrench of multipliers ``x``, shape (6, n)."""
        share, _, turning = self.parts(x)
        forces = self.cases.forces(share)
        return self.cases.need - self.cases.wrench(forces, turning[0] - turning[1])

    def progress(self) -> tuple[Array, Array, Array]:
        """Lower bound, gap above it, and largest miss of equilibrium."""
        value = (self.cases.need * self.y).sum(axis=0)
        if not self.common:
            value -= 0.5 * ((self.u**2).sum(axis=0) + self.t.sum(axis=0) ** 2)
        gap = (self.x * self.z).sum(axis=0)
        return value, gap, np.abs(self.lacking(self.x)).max(axis=0)

    def step(self) -> None:
        """One predictor-corrector step."""
        x, z = self.x, self.z
        weight = x / z
        factor = _Factor(self.cases, self.common, *self.parts(weight),
                         weight[-1] if self.common else np.ones(x.shape[1]))
        size = len(x)
        gap = (x * z).sum(axis=0)
        _, dz, dx = self._direction(factor, weight, None)
        primal, dual = self._lengths(dx, dz)
        after = ((x + primal * dx) * (z + dual * dz)).sum(axis=0)
        target = np.maximum((after / gap) ** 3 * gap / size, LEAST)
        push = dx
        push *= dz
        np.subtract(target, push, out=push)
        push /= z
        dv, dz, dx = self._direction(factor, weight, push)
        primal, dual = self._lengths(dx, dz)
        primal *= SHORTEN
        dual *= SHORTEN
        x += primal * dx
        z += dual * dz
        for mine, change in zip((self.y, self.u, self.t), dv, strict=True):
            mine += dual * change

    def _direction(
        self, factor: _Factor, weight: Array, push: Array | None
    ) -> tuple[tuple[Array, Array, Array], Array, Array]:
        """Newton direction: changes of (y, u, t), of z, and of x."""
        if push is None:
            right_y = self.cases.need
            right_u, right_t = np.zeros_like(self.u), np.zeros_like(self.t)
        else:
            share, limb, turning = self.parts(push)
            right_y = self.lacking(push)
            right_u = share.sum(axis=0) + limb
            right_t = turning.sum(axis=0)
            if self.common:
                right_u -= push[-1]
                right_t -= push[-1]
        if not self.common:
            right_u = right_u - self.u
            right_t = right_t - self.t.sum(axis=0)
        dv = factor.solve(right_y, right_u, right_t)
        dz = self._slack_change(dv)
        dx = weight * dz
        dx += self.x
        np.negative(dx, out=dx)
        if push is not None:
            dx += push
        return dv, dz, dx

    def _slack_change(self, dv: tuple[Array, Array, Array]) -> Array:
        dy, du, dt = dv
        dz = np.empty_like(self.z)
        rays, limb, turning = self.parts(dz)
        np.subtract(du, self.cases.along(dy), out=rays)
        limb[:] = du
        moment = self.cases.turn * dy[3:]
        np.subtract(dt, moment, out=turning[0])
        np.add(dt, moment, out=turning[1])
        if self.common:
            dz[-1] = -du.sum(axis=0) - dt.sum(axis=0)
        return dz

    def _lengths(self, dx: Array, dz: Array) -> tuple[Array, Array]:
        """Longest steps, at most 1, that keep x and z positive."""
        primal = 1.0 / np.maximum((-dx / self.x).max(axis=0), 1.0)
        dual = 1.0 / np.maximum((-dz / self.z).max(axis=0), 1.0)
        if not self.common:
            # The quadratic ties x to u and t: only equal steps shrink what equilibrium lacks.
            primal = np.minimum(primal, dual)
            dual = primal.copy()
        return primal, dual


class _Factor:
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
        self.lower, self.pivot = _factorised(_matrix(cases, self._spread(rays), moment))
        ones = np.ones_like(self.turn)
        zero = np.zeros((6, ones.shape[-1]))
        like_u = np.ones_like(self.limb) if common else np.zeros_like(self.limb)
        self.side = self._plain(zero, like_u, ones)
        self.rank = rank / (1.0 + rank * self._total(self.side))

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

    def _total(self, dual: tuple[Array, Array, Array]) -> Array:
        total = dual[2].sum(axis=0)
        if self.common:
            total += dual[1].sum(axis=0)
        return np.asarray(total)

    def _plain(self, y: Array, u: Array, t: Array) -> tuple[Array, Array, Array]:
        """Solve without the limit on Σ u + Σ t."""
        right = y + self.cases.wrench(self.mean * u, np.zeros_like(t))
        right[3:] += self.tilt * t
        found = _substituted(self.lower, self.pivot, right)
        at = self.cases.local(found)
        du = u / self.limb + (self.mean * at).sum(axis=0)
        dt = t / self.turn + self.tilt * found[3:]
        return found, du, dt

    def solve(self, y: Array, u: Array, t: Array) -> tuple[Array, Array, Array]:
        """Solve for right-hand sides (6, n), (L, n), (3, n)."""
        found = self._plain(y, u, t)
        pull = self.rank * self._total(found)
        return (found[0] - pull * self.side[0], found[1] - pull * self.side[1],
                found[2] - pull * self.side[2])


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
        scaled = []
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
