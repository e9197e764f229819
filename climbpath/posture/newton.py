"""Interior-point steps for all stances of a batch: the iteration behind margins and samples.

Every limit is a function g >= 0 with a slack and a multiplier; Newton's equations carry the full
curvature, so a dozen steps are enough. The seventh unknown is the spare reach, or, with an ``Aim``,
minus the distance of the centre of mass from the line.

References: S. Wright, Primal-Dual Interior-Point Methods, SIAM 1997, chapter 1 (the method).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

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
)
from climbpath.posture.linkage import LIMB_SIDE, Linkage

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

DAMPING = (0.1, 0.01)
DAMPING_PER_TARGET = (1000.0, 100.0)
"""Added to the curvature over turn and shift, constant and per unit of the barrier's weight:
heavy while far from the optimum, where the turn's curvature is often negative."""

HARD_TOLERANCE = 1e-4
"""How far a hard limit may be missed by rounding of the iteration, m."""

HELD_ABOVE = 0.05
"""Multiplier above which a limit counts as holding an optimum. Where one of ``NOT_CONVEX`` does,
the optimum may be a local one, and the stance is solved from the next start too."""

DROP_SHARE = 0.12
"""Converged stances are dropped from the arrays whenever they make up this share."""

SETTLED = 1e-4
"""A full step gains less reach than this, m, once an iteration is finished."""

STILL = 0.03
"""A full step turns the trunk by less than this, rad, once an iteration is finished: with the
damping, the slope that is left is then under 3 mm a radian."""

ON_LINE = 0.002
"""A centre of mass nearer to the line than this, m, is on it."""

HEIGHT_ROOM = 0.001
"""How far an aimed centre of mass may stand off its height, m."""

CONVERGED = 5e-4
"""Sum of slack times multiplier, m, under which an iteration counts as finished after a nearly full
step: the reach is then within about that of its optimum."""


@dataclass(frozen=True)
class Postures:
    """The trunk of N stances with the largest spare reach, in base axes.

    ``margin`` (N,) [m]: spare reach; where a hard limit cannot be kept, minus what it misses.
    ``turn`` (3, 3, N), ``shift`` (3, N) [m].
    """

    margin: Array
    turn: Array
    shift: Array

    def take(self, index: Ints) -> Postures:
        """The chosen stances."""
        return Postures(self.margin[index], self.turn[..., index], self.shift[:, index])


REACH, FOLD, HEIGHT, ACROSS = (slice(4 * k, 4 * k + 4) for k in range(4))
LIFT, OUT = slice(16, 18), slice(18, 20)
POINTS = 20
"""Rows of the arrays of limits: four for each kind of all limbs, two for each of the legs, then
one for each limit of a trunk point or floor foot."""

NOT_CONVEX = (*range(4, 8), *range(12, 20))
"""Rows of limits whose allowed places are not convex, by themselves or once the trunk turns: fold,
across, lift and out."""


@dataclass(frozen=True)
class _State:
    """Where the iterates stand: geometry and every limit, evaluated once a step.

    ``value`` (M, N): the limits in the order of the rows above.
    """

    geometry: LimbGeometry
    joints: JointLimits
    points: list[PointLimit]
    value: Array


@dataclass(frozen=True)
class Aim:
    """Bring the centre of mass near a line at a given height instead of gaining reach.

    The centre of mass is taken as ``share`` * trunk + R ``lever`` + ``fixed``: (N,), (3, N),
    (3, N) [m]. ``line`` [m] is the line's x, ``goal`` (N,) [m] the height along ``vertical``.
    """

    share: Array
    lever: Array
    fixed: Array
    line: float
    goal: Array

    def take(self, index: Ints) -> Aim:
        """The chosen stances."""
        return Aim(self.share[index], self.lever[:, index], self.fixed[:, index], self.line,
                   self.goal[index])

    def miss(self, turn: Array, shift: Array) -> Array:
        """Distance of the centre of mass from the line, (N,) [m]."""
        centre = self.share * shift[0] + self.fixed[0] - self.line
        return np.asarray(np.abs(centre + np.einsum("jn,jn->n", turn[0], self.lever)))

    def limits(self, batch: StanceBatch, turn: Array, shift: Array, spare: Array
               ) -> list[PointLimit]:
        """-spare bounds the distance from the line on both sides; the height is held narrowly."""
        limits = []
        centre = self.lever / self.share
        across = np.zeros_like(batch.vertical)
        across[0] = 1.0
        off = self.fixed[0] - self.line
        above = (batch.vertical * self.fixed).sum(axis=0) - self.goal
        for axis, rest, room, spares in ((across, off, -spare, True),
                                         (batch.vertical, above, HEIGHT_ROOM, False)):
            normal = np.stack([self.share * (turn[0, j] * axis[0] + turn[1, j] * axis[1]
                                             + turn[2, j] * axis[2]) for j in range(3)])
            place = self.share * (axis * shift).sum(axis=0) + (normal * centre).sum(axis=0) + rest
            for sign in (1.0, -1.0):
                limits.append(PointLimit(room + sign * place, sign * normal, centre, True, spares))
        return limits


@dataclass
class _Run:
    """The iterates of the stances of a chunk that are still being worked on.

    ``active``, ``slacks``, ``multipliers``: (M, N), rows as above; limits that a stance does not
    have keep slack 1 and multiplier 0.
    """

    batch: StanceBatch
    index: Ints
    turn: Array
    shift: Array
    spare: Array
    target: Array
    settled: NDArray[np.bool_]
    active: NDArray[np.bool_]
    slacks: Array
    multipliers: Array
    aim: Aim | None = None

    def keep(self, alive: Ints) -> None:
        """Drop the stances that are done."""
        self.batch = self.batch.take(alive)
        for name in ("index", "turn", "shift", "spare", "target", "settled", "active", "slacks",
                     "multipliers"):
            setattr(self, name, np.ascontiguousarray(getattr(self, name)[..., alive]))
        if self.aim is not None:
            self.aim = self.aim.take(alive)


def _evaluate(linkage: Linkage, run: _Run, layout: PointLayout) -> _State:
    geometry = limb_geometry(linkage, run.batch, run.turn, run.shift)
    joints = joint_limits(linkage, geometry)
    zero = np.zeros_like(run.spare)
    spare = run.spare if run.aim is None else zero
    points = point_limits(linkage, run.batch, run.turn, run.shift, spare, layout)
    if run.aim is not None:
        points = [replace(limit, spare=False) for limit in points]
        points += run.aim.limits(run.batch, run.turn, run.shift, run.spare)
    value = np.empty((POINTS + len(points), run.batch.size))
    np.subtract(run.batch.reach - spare, geometry.distance, out=value[REACH])
    np.subtract(geometry.distance, run.batch.fold, out=value[FOLD])
    value[HEIGHT], value[ACROSS] = joints.height, joints.across
    value[LIFT], value[OUT] = joints.lift, joints.out
    for row, limit in enumerate(points, start=POINTS):
        value[row] = limit.value
    return _State(geometry, joints, points, value)


def _active(batch: StanceBatch, layout: PointLayout, points: list[PointLimit]
            ) -> NDArray[np.bool_]:
    """Which limits each stance has, (M, N)."""
    feet = batch.engaged[2:]
    rows = [*(4 * [batch.engaged]), feet, feet]
    for limit in points:
        everywhere = np.ones((1, batch.size), dtype=bool)
        rows.append(everywhere if limit.active is None else limit.active[None, :])
    return np.concatenate(rows)


def nearer_line(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array, aim: Aim, steps: int
) -> tuple[Array, Array]:
    """Move N possible postures so that their centre of mass comes as near the line as it can.

    From ``turn`` (3, 3, N) and ``shift`` (3, N) [m]; returns both anew. Reach and hard limits
    are kept to within what the iteration leaves, so check them before use.
    """
    found, _ = descend(linkage, batch, turn, shift, steps, aim)
    return found.turn, found.shift


def descend(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array, steps: int,
    aim: Aim | None = None,
) -> tuple[Postures, NDArray[np.bool_]]:
    """Interior-point steps from one start for all stances of a chunk.

    Stances leave the arrays as they converge. Also returns which of them are beyond doubt:
    converged, and not held by a limit whose allowed region is not convex.
    """
    layout = point_layout(batch)
    spare = slack(linkage, batch, turn, shift)[0] - 0.05
    if aim is not None:
        spare = -aim.miss(turn, shift) - 0.05
    end = Postures(np.zeros(batch.size), turn.copy(), shift.copy())
    certain = np.zeros(batch.size, dtype=bool)
    none = np.zeros((0, batch.size))
    run = _Run(batch, np.arange(batch.size), turn, shift, spare, np.full(batch.size, 0.02),
               np.zeros(batch.size, dtype=bool), none.astype(bool), none, none, aim)
    state = _evaluate(linkage, run, layout)
    run.active = _active(batch, layout, state.points)
    run.slacks = np.where(run.active, np.maximum(state.value, 0.03), 1.0)
    run.multipliers = np.where(run.active, 0.02 / run.slacks, 0.0)
    open_ = np.ones(batch.size, dtype=bool)
    for iteration in range(1, steps + 1):
        _step(run, state)
        state = _evaluate(linkage, run, layout)
        least = np.where(run.active, state.value, np.inf).min(axis=0)
        done = run.settled & (least > -HARD_TOLERANCE)
        if run.aim is not None:
            # On the line many postures are equally good: stop at the first, before rounding picks.
            done |= (run.aim.miss(run.turn, run.shift) < ON_LINE) & (least > -HARD_TOLERANCE)
        # What is done is taken down at once, so that no result depends on the others in the arrays.
        fresh = open_[run.index] & (done if iteration < steps else True)
        where = run.index[fresh]
        end.turn[..., where], end.shift[:, where] = run.turn[..., fresh], run.shift[:, fresh]
        held = (run.multipliers[list(NOT_CONVEX)] > HELD_ABOVE).any(axis=0)
        certain[where] = (done & ~held)[fresh]
        open_[where] = False
        if not open_.any():
            break
        going = open_[run.index]
        if going.mean() < 1.0 - DROP_SHARE:
            run.keep(np.flatnonzero(going))
            state = _evaluate(linkage, run, layout)
        # A limit that holds takes its own value as slack, so that only limits still missed
        # are approached from outside.
        own = np.where(run.active & (state.value > 0.0), state.value, 0.0)
        run.slacks = np.where(own > 0.0, np.maximum(own, 0.1 * run.slacks), run.slacks)
    reached, hard = slack(linkage, batch, end.turn, end.shift)
    margin = np.where(hard >= -HARD_TOLERANCE, reached, np.minimum(reached, hard))
    return Postures(margin, end.turn, end.shift), certain


def _step(run: _Run, state: _State) -> None:
    """One Newton step of all iterates, as long as slacks and multipliers stay positive."""
    step = _newton(run, state)
    slacks, multipliers = run.slacks, run.multipliers
    slack_step = np.where(run.active, _linear_change(run, state, step) + state.value - slacks, 0.0)
    dual_step = np.where(run.active, (run.target - multipliers * slack_step) / slacks, 0.0)
    dual_step -= multipliers
    length = np.minimum(_to_boundary(slacks, slack_step), 0.4 / np.maximum(_norm(step[:3]), 0.4))
    length = np.minimum(length, 0.4 / np.maximum(_norm(step[3:6]), 0.4))
    dual = _to_boundary(np.maximum(multipliers, 1e-300), dual_step)
    run.slacks = np.maximum(slacks + length * slack_step, 1e-10)
    run.multipliers = multipliers + dual * dual_step
    total = (run.slacks * run.multipliers).sum(axis=0)
    centring = np.where(np.minimum(length, dual) > 0.7, 0.12, 0.4)
    run.target = np.maximum(centring * total / run.active.sum(axis=0), 1e-9)
    run.settled = (total < CONVERGED) & (np.minimum(length, dual) > 0.9)
    run.settled &= (np.abs(step[6]) < SETTLED) & (_norm(step[:3]) < STILL)
    run.turn = turned(run.turn, step[:3] * length)
    turn, move = run.turn, step[3:6] * length
    run.shift = run.shift + np.stack(
        [turn[i, 0] * move[0] + turn[i, 1] * move[1] + turn[i, 2] * move[2] for i in range(3)]
    )
    run.spare = run.spare + length * step[6]


def _norm(vector: Array) -> Array:
    return np.asarray(np.sqrt((vector**2).sum(axis=0)))


def _to_boundary(value: Array, change: Array) -> Array:
    """Longest step, at most 1, that keeps all of ``value`` (M, N) positive, with some to spare."""
    fastest = (-change / value).max(axis=0)
    return np.asarray(0.99 / np.maximum(fastest, 0.99))


def _newton(run: _Run, state: _State) -> Array:
    """One Newton step (7, N): turn, shift, spare reach."""
    target = run.target
    system = System(
        run.batch.size,
        (DAMPING[0] + DAMPING_PER_TARGET[0] * target, DAMPING[1] + DAMPING_PER_TARGET[1] * target),
    )
    m = run.multipliers
    weight = m / run.slacks
    right = np.where(run.active, m + target / run.slacks - weight * state.value, 0.0)
    u = state.geometry.along
    joints, side = state.joints, LIMB_SIDE[:, None]
    # Reach limits have slope -u, folds +u; both bend like the distance, (1 - u u^T) / d.
    bend = (m[REACH] - m[FOLD]) / state.geometry.distance
    along = weight[REACH] + weight[FOLD] - bend
    inner = [along * u[i] * u[j] + (bend if i == j else 0.0) for i, j in UPPER]
    inner[0] = inner[0] + weight[ACROSS]
    # While the shoulder lifts with the hand, distance does not change along the trunk.
    inner[3] = np.where(state.geometry.rising, inner[3] - bend, inner[3])
    inner[3] = inner[3] + weight[HEIGHT]
    pull = (right[FOLD] - right[REACH]) * u
    curve = (m[FOLD] - m[REACH]) * u
    pull[0] += side * right[ACROSS]
    curve[0] += side * m[ACROSS]
    pull[1] += HEIGHT_SIDE[:, None] * right[HEIGHT]
    curve[1] += HEIGHT_SIDE[:, None] * m[HEIGHT]
    lift = joints.lift_slope
    pull[:, 2:] += right[LIFT] * lift
    curve[:, 2:] += m[LIFT] * lift
    for slot, (i, j) in enumerate(UPPER):
        inner[slot][2:] += weight[LIFT] * lift[i] * lift[j] - m[LIFT] * joints.lift_curve[slot]
    pull[0, 2:] -= side[2:] * right[OUT]
    curve[0, 2:] -= side[2:] * m[OUT]
    inner[0][2:] += weight[OUT]
    system.right[6] += 1.0
    if run.aim is None:
        system.add_limbs(state.geometry.point, inner, pull, curve, -weight[REACH] * u)
        system.matrix[6][6] += weight[REACH].sum(axis=0) + 1e-9
        system.right[6] -= right[REACH].sum(axis=0)
    else:
        system.add_limbs(state.geometry.point, inner, pull, curve, np.zeros_like(u))
    for row, limit in enumerate(state.points, start=POINTS):
        system.add_plane(limit.normal, limit.offset, weight[row], right[row], m[row],
                         limit.shifts, limit.spare)
    return np.stack(system.solve())


def _linear_change(run: _Run, state: _State, step: Array) -> Array:
    """How every limit changes along ``step`` to first order, (M, N)."""
    w, u, t = step[:3], step[3:6], step[6]
    v = state.geometry.point
    moved = np.stack([v[(i + 1) % 3] * w[(i + 2) % 3] - v[(i + 2) % 3] * w[(i + 1) % 3] - u[i]
                      for i in range(3)])
    change = np.empty_like(state.value)
    change[FOLD] = (state.geometry.along * moved).sum(axis=0)
    change[REACH] = -change[FOLD] - (t if run.aim is None else 0.0)
    change[HEIGHT] = HEIGHT_SIDE[:, None] * moved[1]
    change[ACROSS] = LIMB_SIDE[:, None] * moved[0]
    change[LIFT] = (state.joints.lift_slope * moved[:, 2:]).sum(axis=0)
    change[OUT] = -LIMB_SIDE[2:, None] * moved[0, 2:]
    for row, limit in enumerate(state.points, start=POINTS):
        n, o = limit.normal, limit.offset
        arm = [w[1] * o[2] - w[2] * o[1], w[2] * o[0] - w[0] * o[2], w[0] * o[1] - w[1] * o[0]]
        change[row] = n[0] * arm[0] + n[1] * arm[1] + n[2] * arm[2]
        if limit.shifts:
            change[row] += n[0] * u[0] + n[1] * u[1] + n[2] * u[2]
        if limit.spare:
            change[row] -= t
    return change
