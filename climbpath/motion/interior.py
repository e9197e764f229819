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

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.motion.newton import Cases, Factor

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

STEPS = 40
"""Most iterations; a dozen are usual."""

SHORTEN = 0.9995
"""Share of the way to the nearest bound that a step goes at most."""

GAP_COMMON = 1e-9
GAP_OWN = 1e-11
RESIDUAL = 1e-10
"""Done when the answer is known within the gap (relative to 1 + itself) and equilibrium is missed
by less than ``RESIDUAL`` (body weights, and body weights times m). Own shares are known to the
root of twice the gap only, hence the smaller one."""

DROP_SHARE = 0.15
"""Stances that are done leave the arrays once they make up this share."""

LEAST = 1e-14
"""The barrier weight is not lowered further: stances that are done wait for the others there."""

START = 0.05
"""Barrier weight of the start (the shares then begin near those of usual stances)."""


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
    within = GAP_COMMON if common else GAP_OWN
    result = Solution(
        np.empty(count), np.empty(count), np.empty(count), np.empty((rays, limbs, count)),
        np.empty((limbs, count)), np.empty(count), np.ones(count, dtype=bool),
    )
    where = np.arange(count)
    for step in range(STEPS + 1):
        value, gap, missed = state.progress()
        over = value > limit
        done = over | ((gap <= within * (1.0 + np.abs(value))) & (missed <= RESIDUAL))
        if step == STEPS or over.any() or done.mean() >= DROP_SHARE:
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
        factor = Factor(self.cases, self.common, *self.parts(weight),
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
        self, factor: Factor, weight: Array, push: Array | None
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
