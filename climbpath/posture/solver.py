"""The margin of all stances at once: a primal-dual interior-point method on arrays.

For each stance it finds the trunk's place and turn with the largest spare reach t, subject to
|root_i - contact_i| <= reach_i - t for every engaged limb and to the hard limits of
``posture.limits``. Newton's equations carry the full curvature, so a dozen steps are enough.

References: S. Wright, Primal-Dual Interior-Point Methods, SIAM 1997, chapter 1 (the method).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.barrier import System
from climbpath.posture.batch import StanceBatch
from climbpath.posture.limits import (
    HEIGHT_SIDE,
    UPPER,
    JointLimits,
    LimbGeometry,
    PointLayout,
    PointLimit,
    joint_limits,
    limb_geometry,
    point_layout,
    point_limits,
    slack,
    turned,
    upright,
)
from climbpath.posture.linkage import LIMB_SIDE, Linkage

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

CHUNK = 4096
"""Stances solved together: arrays of this length stay in the processor's cache."""

STEPS = (20, 26, 30)
"""Newton steps from the first, second and third start."""

DAMPING = (0.1, 0.01)
DAMPING_PER_TARGET = (1000.0, 100.0)
"""Added to the curvature over turn and shift, constant and per unit of the barrier's weight:
heavy while far from the optimum, where the turn's curvature is often negative."""

HARD_TOLERANCE = 1e-4
"""How far a hard limit may be missed by rounding of the iteration, m."""

RETRY_BELOW = (0.03, 0.01)
"""Stances whose margin so far is under this (m) are solved from the next start too: a fold or a
joint range can hold a start in a local optimum, and near zero that decides."""

NOT_CONVEX = (1, 3, 4)
"""Groups of limits whose allowed regions are not convex: fold, across and lift."""

HELD_ABOVE = 0.05
"""Multiplier above which such a limit counts as holding the optimum."""

FIRST_DROP = 7
DROP_SHARE = 0.12
"""Converged stances are dropped from this step on, whenever they make up this share."""

CONVERGED = 1e-5
"""Barrier weight under which an iteration counts as finished (the reach is then within a tenth of
a millimetre of its optimum)."""


@dataclass(frozen=True)
class Postures:
    """The trunk of N stances with the largest spare reach, in base axes.

    ``margin`` (N,) [m]: spare reach; where a hard limit cannot be kept, minus what it misses.
    ``turn`` (3, 3, N), ``shift`` (3, N) [m].
    """

    margin: Array
    turn: Array
    shift: Array


def solve_postures(linkage: Linkage, batch: StanceBatch) -> Postures:
    """Largest spare reach of N stances. Every stance has at least one engaged or floor limb."""
    count = batch.size
    margin = np.empty(count)
    turn = np.empty((3, 3, count))
    shift = np.empty((3, count))
    for begin in range(0, count, CHUNK):
        part = slice(begin, min(begin + CHUNK, count))
        found = _solve_chunk(linkage, batch.take(part))
        margin[part], turn[..., part], shift[..., part] = found.margin, found.turn, found.shift
    return Postures(margin, turn, shift)


def _solve_chunk(linkage: Linkage, batch: StanceBatch) -> Postures:
    best, finished = _descend(linkage, batch, *_start(linkage, batch, 0), STEPS[0])
    for attempt, below in enumerate(RETRY_BELOW, start=1):
        doubtful = np.flatnonzero((best.margin < below) | ~finished)
        if not len(doubtful):
            break
        again = batch.take(doubtful)
        start = _start(linkage, again, attempt)
        found, done = _descend(linkage, again, *start, STEPS[attempt])
        finished[doubtful] |= done
        better = found.margin > best.margin[doubtful]
        where = doubtful[better]
        best.margin[where] = found.margin[better]
        best.turn[..., where] = found.turn[..., better]
        best.shift[..., where] = found.shift[..., better]
    return best


def _start(linkage: Linkage, batch: StanceBatch, attempt: int) -> tuple[Array, Array]:
    """A trunk between the contacts: upright; then leaning from feet to hands; then farther out."""
    count = batch.size
    engaged = batch.engaged.astype(float)
    hang = linkage.trunk + 0.6 * linkage.reach[0]
    stand = 0.75 * linkage.reach[2]
    offset = np.array([-hang, -hang, stand, stand])[:, None]
    total = np.maximum(engaged.sum(axis=0), 1.0)
    shift = np.empty((3, count))
    shift[0] = (batch.target[0] * engaged).sum(axis=0) / total
    shift[1] = ((batch.target[1] + offset) * engaged).sum(axis=0) / total
    out = (batch.target[2] * engaged).sum(axis=0) / total
    shift[2] = np.maximum(out, 0.0) + linkage.pelvis_space + (0.08, 0.05, 0.30)[attempt]
    on_floor = batch.floor.any(axis=0)
    level = batch.floor_level + 0.9 * linkage.floor_reach
    stood = (level - batch.vertical[2] * shift[2]) / batch.vertical[1]
    shift[1] = np.where(on_floor, stood, shift[1])
    turn = upright(count)
    if attempt == 1:
        # Lean the shoulders toward the middle of the hands, hips toward that of the feet.
        hands = _mean_x(batch, slice(0, 2), shift[0])
        feet = _mean_x(batch, slice(2, 4), shift[0])
        angle = np.clip(np.arctan2(hands - feet, 1.6 * linkage.trunk), -0.7, 0.7)
        turn[0, 0], turn[0, 1], turn[1, 0] = np.cos(angle), np.sin(angle), -np.sin(angle)
        turn[1, 1] = np.cos(angle)
        shift[1] -= 0.15
    return turn, shift


def _mean_x(batch: StanceBatch, limbs: slice, otherwise: Array) -> Array:
    engaged = batch.engaged[limbs].astype(float)
    total = engaged.sum(axis=0)
    mean = (batch.target[0, limbs] * engaged).sum(axis=0) / np.maximum(total, 1.0)
    return np.where(total > 0, mean, otherwise)


@dataclass(frozen=True)
class _State:
    """Where a chunk stands: geometry and every limit, evaluated once a step.

    ``value`` and ``active`` list the limits in groups: reach, fold, height and across of all limbs
    ((4, N) each), lift and out of the legs ((2, N)), then those of trunk points and floor feet
    ((N,) each).
    """

    geometry: LimbGeometry
    joints: JointLimits
    points: list[PointLimit]
    value: list[Array]
    active: list[NDArray[np.bool_]]


def _evaluate(linkage: Linkage, run: _Run, layout: PointLayout) -> _State:
    batch, turn, shift = run.batch, run.turn, run.shift
    geometry = limb_geometry(linkage, batch, turn, shift)
    joints = joint_limits(linkage, geometry)
    points = point_limits(linkage, batch, turn, shift, run.spare, layout)
    everywhere = np.ones(batch.size, dtype=bool)
    feet = batch.engaged[2:]
    value = [
        batch.reach - run.spare - geometry.distance,
        geometry.distance - linkage.fold[:, None],
        joints.height, joints.across, joints.lift, joints.out,
        *(limit.value for limit in points),
    ]
    active = [*(4 * [batch.engaged]), feet, feet]
    active += [everywhere if limit.active is None else limit.active for limit in points]
    return _State(geometry, joints, points, value, active)


@dataclass
class _Run:
    """The iterates of the stances of a chunk that are still being worked on."""

    batch: StanceBatch
    index: Ints
    turn: Array
    shift: Array
    spare: Array
    target: Array
    slacks: list[Array]
    multipliers: list[Array]

    def keep(self, alive: NDArray[np.bool_]) -> None:
        """Drop the stances that are done."""
        self.batch = self.batch.take(alive)
        for name in ("index", "turn", "shift", "spare", "target"):
            setattr(self, name, np.ascontiguousarray(getattr(self, name)[..., alive]))
        self.slacks = [np.ascontiguousarray(s[..., alive]) for s in self.slacks]
        self.multipliers = [np.ascontiguousarray(m[..., alive]) for m in self.multipliers]


def _descend(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array, steps: int
) -> tuple[Postures, NDArray[np.bool_]]:
    """Interior-point steps from one start for all stances of a chunk.

    Stances leave the arrays as they converge. Also returns which of them are beyond doubt:
    converged, and not held by a limit whose allowed region is not convex.
    """
    layout = point_layout(batch)
    spare = slack(linkage, batch, turn, shift)[0] - 0.05
    end = Postures(np.zeros(batch.size), turn.copy(), shift.copy())
    certain = np.zeros(batch.size, dtype=bool)
    run = _Run(batch, np.arange(batch.size), turn, shift, spare, np.full(batch.size, 0.02), [], [])
    state = _evaluate(linkage, run, layout)
    run.slacks = [np.maximum(value, 0.03) for value in state.value]
    run.multipliers = [np.where(active, 0.02 / s, 0.0)
                       for s, active in zip(run.slacks, state.active, strict=True)]
    directions = [k for k, limit in enumerate(state.points, start=6) if not limit.shifts]
    for iteration in range(1, steps + 1):
        _step(run, state)
        state = _evaluate(linkage, run, layout)
        done = (run.target < CONVERGED) & (_least(state) > -HARD_TOLERANCE)
        last = iteration == steps
        if last or (iteration >= FIRST_DROP and done.mean() > DROP_SHARE):
            held = np.zeros(len(done), dtype=bool)
            for k in (*NOT_CONVEX, *directions):
                held |= _sum(run.multipliers[k]) > HELD_ABOVE
            gone = np.ones(len(done), dtype=bool) if last else done
            where = run.index[gone]
            end.turn[..., where], end.shift[:, where] = run.turn[..., gone], run.shift[:, gone]
            certain[where] = (done & ~held)[gone]
            if gone.all():
                break
            run.keep(~gone)
            state = _evaluate(linkage, run, layout)
        # A limit that holds takes its own value as slack, so that only limits still missed
        # are approached from outside.
        run.slacks = [np.where(value > 0.0, np.maximum(value, 0.1 * s), s)
                      for s, value in zip(run.slacks, state.value, strict=True)]
    reached, hard = slack(linkage, batch, end.turn, end.shift)
    margin = np.where(hard >= -HARD_TOLERANCE, reached, np.minimum(reached, hard))
    return Postures(margin, end.turn, end.shift), certain


def _least(state: _State) -> Array:
    """The value of the limit that is missed most, (N,)."""
    least = np.full(state.value[-1].shape, np.inf)
    for value, active in zip(state.value, state.active, strict=True):
        own = np.where(active, value, np.inf)
        least = np.minimum(least, own if own.ndim == 1 else own.min(axis=0))
    return least


def _step(run: _Run, state: _State) -> None:
    """One Newton step of all iterates, as long as slacks and multipliers stay positive."""
    step = _newton(run.batch, state, run.slacks, run.multipliers, run.target)
    length, run.target = _advance(state, step, run.slacks, run.multipliers, run.target)
    run.turn = turned(run.turn, step[:3] * length)
    move = step[3:6] * length
    turn = run.turn
    run.shift = run.shift + np.stack(
        [turn[i, 0] * move[0] + turn[i, 1] * move[1] + turn[i, 2] * move[2] for i in range(3)]
    )
    run.spare = run.spare + length * step[6]


def _advance(
    state: _State, step: Array, slacks: list[Array], multipliers: list[Array], target: Array
) -> tuple[Array, Array]:
    """Move slacks and multipliers in place; return the step length and the next target."""
    length = np.minimum(1.0, 0.4 / np.maximum(_norm(step[:3]), 1e-12))
    length = np.minimum(length, 0.4 / np.maximum(_norm(step[3:6]), 1e-12))
    dual = np.ones_like(length)
    slack_steps, multiplier_steps = [], []
    changes = _linear_change(state, step)
    for value, active, s, m, change in zip(
        state.value, state.active, slacks, multipliers, changes, strict=True
    ):
        ds = np.where(active, change + value - s, 0.0)
        dm = np.where(active, (target - m * ds) / s - m, 0.0)
        length = np.minimum(length, _to_boundary(s, ds))
        dual = np.minimum(dual, _to_boundary(m, dm))
        slack_steps.append(ds)
        multiplier_steps.append(dm)
    total, number = np.zeros_like(length), np.zeros_like(length)
    for k, active in enumerate(state.active):
        slacks[k] = np.maximum(slacks[k] + length * slack_steps[k], 1e-10)
        multipliers[k] = multipliers[k] + dual * multiplier_steps[k]
        total += _sum(slacks[k] * multipliers[k])
        number += _sum(active)
    centring = np.where(np.minimum(length, dual) > 0.7, 0.12, 0.4)
    return length, np.maximum(centring * total / number, 1e-9)


def _norm(vector: Array) -> Array:
    return np.asarray(np.sqrt((vector**2).sum(axis=0)))


def _sum(values: Array) -> Array:
    return values if values.ndim == 1 else np.asarray(values.sum(axis=0))


def _to_boundary(value: Array, change: Array) -> Array:
    """Longest step that keeps ``value`` positive, with a little to spare; 0 change is no bound."""
    ratio = 0.99 * value / np.maximum(-change, 1e-12)
    ratio = np.where(change < 0.0, ratio, 1.0)
    return ratio if ratio.ndim == 1 else np.asarray(ratio.min(axis=0))


def _newton(
    batch: StanceBatch, state: _State, slacks: list[Array], multipliers: list[Array], target: Array
) -> Array:
    """One Newton step (7, N): turn, shift, spare reach."""
    system = System(
        batch.size,
        (DAMPING[0] + DAMPING_PER_TARGET[0] * target, DAMPING[1] + DAMPING_PER_TARGET[1] * target),
    )
    weights, rights = [], []
    for value, active, s, m in zip(state.value, state.active, slacks, multipliers, strict=True):
        weight = np.where(active, m / s, 0.0)
        weights.append(weight)
        rights.append(np.where(active, m + target / s - weight * value, 0.0))
    u = state.geometry.along
    joints, cross = state.joints, state.joints.across_slope
    # Reach limits have slope -u, folds +u; both bend like the distance, (1 - u u^T) / d, and so
    # does the share of it in the limit on crossing.
    sine = cross[0] * u[0] + cross[1] * u[1] + cross[2] * u[2] - LIMB_SIDE[:, None] * u[0]
    bend = (multipliers[0] - multipliers[1] - sine * multipliers[3]) / state.geometry.distance
    along = weights[0] + weights[1] - bend
    inner = [along * u[i] * u[j] + weights[3] * cross[i] * cross[j] + (bend if i == j else 0.0)
             for i, j in UPPER]
    # While the shoulder lifts with the hand, distance does not change along the trunk.
    inner[3] = np.where(state.geometry.rising, inner[3] - bend, inner[3])
    inner[3] = inner[3] + weights[2]
    pull = (rights[1] - rights[0]) * u + rights[3] * cross
    curve = (multipliers[1] - multipliers[0]) * u + multipliers[3] * cross
    pull[1] += HEIGHT_SIDE[:, None] * rights[2]
    curve[1] += HEIGHT_SIDE[:, None] * multipliers[2]
    lift = joints.lift_slope
    pull[:, 2:] += rights[4] * lift
    curve[:, 2:] += multipliers[4] * lift
    for slot, (i, j) in enumerate(UPPER):
        inner[slot][2:] += weights[4] * lift[i] * lift[j]
        inner[slot][2:] -= multipliers[4] * joints.lift_curve[slot]
    side = LIMB_SIDE[2:, None]
    pull[0, 2:] -= side * rights[5]
    curve[0, 2:] -= side * multipliers[5]
    inner[0][2:] += weights[5]
    system.add_limbs(state.geometry.point, inner, pull, curve, -weights[0] * u)
    system.matrix[6][6] += weights[0].sum(axis=0) + 1e-9
    system.right[6] += 1.0 - rights[0].sum(axis=0)
    for k, limit in enumerate(state.points, start=6):
        system.add_plane(limit.normal, limit.offset, weights[k], rights[k], multipliers[k],
                         limit.shifts, limit.spare)
    return np.stack(system.solve())


def _linear_change(state: _State, step: Array) -> list[Array]:
    """How every limit changes along ``step`` to first order, in the order of ``_State``."""
    w, u, t = step[:3], step[3:6], step[6]
    v = state.geometry.point
    moved = np.stack([v[(i + 1) % 3] * w[(i + 2) % 3] - v[(i + 2) % 3] * w[(i + 1) % 3] - u[i]
                      for i in range(3)])
    distance = (state.geometry.along * moved).sum(axis=0)
    feet = moved[:, 2:]
    changes = [
        -distance - t,
        distance,
        HEIGHT_SIDE[:, None] * moved[1],
        (state.joints.across_slope * moved).sum(axis=0),
        (state.joints.lift_slope * feet).sum(axis=0),
        -LIMB_SIDE[2:, None] * feet[0],
    ]
    for limit in state.points:
        n, o = limit.normal, limit.offset
        arm = [w[1] * o[2] - w[2] * o[1], w[2] * o[0] - w[0] * o[2], w[0] * o[1] - w[1] * o[0]]
        change = n[0] * arm[0] + n[1] * arm[1] + n[2] * arm[2]
        if limit.shifts:
            change = change + n[0] * u[0] + n[1] * u[1] + n[2] * u[2]
        if limit.spare:
            change = change - t
        changes.append(change)
    return changes
