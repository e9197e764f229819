"""The iterates of the interior-point method: every limit where they stand, with its slope.

Every limit is a function g >= 0. Here they are evaluated, and summed to Newton's equations.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.barrier import RIGHT, SPARE, System, point_slopes
from climbpath.posture.batch import StanceBatch
from climbpath.posture.limits import (
    HEIGHT_SIDE,
    Ground,
    JointLimits,
    LimbGeometry,
    PointLayout,
    PointLimits,
    floor_limits,
    geometry_of,
    ground_of,
    joint_limits,
    planes_of,
    slack,
    trunk_active,
    trunk_limits,
)
from climbpath.posture.linkage import LIMB_SIDE, Linkage

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

DAMPING = (0.1, 0.01)
DAMPING_PER_TARGET = (1000.0, 100.0)
"""Added to the curvature over turn and shift, constant and per unit of the barrier's weight:
heavy while far from the optimum, where the turn's curvature is often negative."""

FIRST_WEIGHT, FIRST_SLACK = 0.02, 0.03
"""Products of slacks and multipliers at the start, and the least slack then, m."""

HEIGHT_ROOM = 0.001
"""How far an aimed centre of mass may stand off its height, m."""

REACH, FOLD, HEIGHT, ACROSS = (slice(4 * k, 4 * k + 4) for k in range(4))
LIFT, OUT = slice(16, 18), slice(18, 20)
POINTS = 20
"""Rows of the arrays of limits: four for each kind of all limbs, two for each of the legs, then
one for each limit of a trunk point or floor foot."""


@dataclass(frozen=True)
class Points:
    """Limits of trunk points with their slopes (6, P, n): rows ``rows`` of block ``block``.

    ``both`` ways: each slope belongs to two rows one after the other, the second against it.
    """

    limits: PointLimits
    slope: Array
    block: int
    rows: slice
    both: bool = False


@dataclass(frozen=True)
class State:
    """Where the iterates stand: geometry and every limit, evaluated once a step.

    ``value``: for each block of the run its limits (M, n).
    """

    geometry: LimbGeometry
    joints: JointLimits
    points: list[Points]
    value: list[Array]


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
        return Aim(self.share[index], self.lever.take(index, axis=-1),
                   self.fixed.take(index, axis=-1), self.line, self.goal[index])

    def miss(self, turn: Array, shift: Array) -> Array:
        """Distance of the centre of mass from the line, (N,) [m]."""
        centre = self.share * shift[0] + self.fixed[0] - self.line
        return np.asarray(np.abs(centre + np.einsum("jn,jn->n", turn[0], self.lever)))

    def limits(self, vertical: Array, turn: Array, shift: Array, spare: Array) -> PointLimits:
        """-spare bounds the distance from the line on both sides; the height is held narrowly.

        Two limits to each normal, for and against it.
        """
        count = len(self.goal)
        value, normal = np.empty((4, count)), np.empty((3, 2, count))
        off = self.fixed[0] - self.line
        above = np.einsum("in,in->n", vertical, self.fixed) - self.goal
        ways = (turn[0], np.einsum("ijn,in->jn", turn, vertical))
        places = (shift[0], np.einsum("in,in->n", vertical, shift))
        for row, way, place, rest in zip((0, 1), ways, places, (off, above), strict=True):
            value[2 * row] = self.share * place + np.einsum("in,in->n", way, self.lever) + rest
            np.multiply(self.share, way, out=normal[:, row])
        np.negative(value[::2], out=value[1::2])
        value[:2] -= spare
        value[2:] += HEIGHT_ROOM
        centre = np.broadcast_to((self.lever / self.share)[:, None], normal.shape)
        return PointLimits(value, normal, centre, np.array([True, True, False, False]))


@dataclass
class Block:
    """Limits of the first n of N stances, (M, n) each.

    ``active``, 1 or 0: which of them a stance has. Those it does not have keep multiplier 0, and
    their slacks mean nothing.
    """

    active: Array
    slacks: Array
    multipliers: Array

    def take(self, index: Ints) -> Block:
        """The chosen stances."""
        own = index[index < self.active.shape[1]]
        return Block(*(values.take(own, axis=-1)
                       for values in (self.active, self.slacks, self.multipliers)))


@dataclass
class Run:
    """The iterates of the stances of a chunk that are still being worked on.

    ``target`` (3, 4, N), ``reach``, ``fold`` (4, N) and ``ground`` are those of the batch,
    ``plane`` (4, K, N) that of the layout. Stances with a foot on the floor come first; ``ground``
    holds those alone. ``blocks``: the limits of all stances, then those of the floor, for those
    that stand there; ``limits`` (N,): how many a stance has. ``weight`` (N,) [m] is what the
    products of slacks and multipliers are brought to next.
    """

    index: Ints
    target: Array
    reach: Array
    fold: Array
    plane: Array
    vertical: Array
    ground: Ground
    turn: Array
    shift: Array
    spare: Array
    weight: Array
    settled: NDArray[np.bool_]
    limits: Array
    blocks: list[Block]
    aim: Aim | None = None

    def keep(self, alive: Ints) -> None:
        """Drop the stances that are done."""
        for name in ("index", "target", "reach", "fold", "plane", "vertical", "turn", "shift",
                     "spare", "weight", "settled", "limits"):
            setattr(self, name, getattr(self, name).take(alive, axis=-1))
        kept = [block.take(alive) for block in self.blocks]
        self.blocks = [block for block in kept if block.active.size]
        if self.ground.floor_level.size:
            own = alive[alive < self.ground.floor_level.size]
            self.ground = Ground(*(np.take(getattr(self.ground, name), own, axis=-1)
                                   for name in Ground.__dataclass_fields__))
        if self.aim is not None:
            self.aim = self.aim.take(alive)


def started(
    linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array, layout: PointLayout,
    aim: Aim | None,
) -> tuple[Run, State]:
    """Iterates at their start; stances with a foot on the floor are moved to the front."""
    stands = batch.floor.any(axis=0)
    index = np.argsort(~stands, kind="stable")
    spare = (slack(linkage, batch, turn, shift)[0] if aim is None else -aim.miss(turn, shift))
    spare = spare[index] - 0.05
    feet = batch.engaged[2:]
    floor = np.repeat(batch.floor[list(layout.feet)], 3, axis=0)
    active = np.concatenate([*(4 * [batch.engaged]), feet, feet, trunk_active(batch, layout),
                             np.ones((0 if aim is None else 4, batch.size), dtype=bool)])
    standing = index[: int(stands.sum())]

    def sorted_(values: Array) -> Array:
        # Unlike an index in brackets, take leaves the stances adjacent in memory.
        return np.take(values, index, axis=-1)

    run = Run(
        index, sorted_(batch.target), sorted_(batch.reach), sorted_(batch.fold),
        sorted_(planes_of(batch, layout)), sorted_(batch.vertical), ground_of(batch, standing),
        sorted_(turn), sorted_(shift), spare, np.full(batch.size, FIRST_WEIGHT),
        np.zeros(batch.size, dtype=bool), sorted_(active.sum(axis=0) + floor.sum(axis=0) + 0.0), [],
        None if aim is None else aim.take(index),
    )
    state = evaluate(linkage, run, layout)
    masks = [sorted_(active.astype(float)), floor.astype(float).take(standing, axis=-1)]
    for mask, value in zip(masks, state.value, strict=False):
        slacks = np.maximum(value, FIRST_SLACK)
        run.blocks.append(Block(mask, slacks, FIRST_WEIGHT / slacks * mask))
    return run, state


def evaluate(linkage: Linkage, run: Run, layout: PointLayout) -> State:
    """Every limit where the iterates of a run stand."""
    geometry = geometry_of(linkage, run.target, run.turn, run.shift)
    joints = joint_limits(linkage, geometry)
    spare = run.spare if run.aim is None else np.zeros_like(run.spare)
    trunk = trunk_limits(linkage, run.plane, run.turn, run.shift, layout)
    last = POINTS + len(trunk.value)
    value = np.empty((last + (0 if run.aim is None else 4), len(run.spare)))
    np.subtract(run.reach, geometry.distance, out=value[REACH])
    if run.aim is None:
        value[REACH] -= spare
    np.subtract(geometry.distance, run.fold, out=value[FOLD])
    value[HEIGHT], value[ACROSS] = joints.height, joints.across
    value[LIFT], value[OUT] = joints.lift, joints.out
    value[POINTS:last] = trunk.value
    points, values = [Points(trunk, point_slopes(trunk), 0, slice(POINTS, last))], [value]
    if run.aim is not None:
        aimed = run.aim.limits(run.vertical, run.turn, run.shift, run.spare)
        value[last:] = aimed.value
        points.append(Points(aimed, point_slopes(aimed), 0, slice(last, last + 4), both=True))
    stand = run.ground.floor_level.size
    if stand:
        floor = floor_limits(linkage, run.ground, run.turn[..., :stand], run.shift[:, :stand],
                             spare[:stand], layout.feet)
        if run.aim is not None:
            floor = replace(floor, spare=np.zeros_like(floor.spare))
        points.append(Points(floor, point_slopes(floor), 1, slice(0, len(floor.value))))
        values.append(floor.value)
    return State(geometry, joints, points, values)


def system_of(run: Run, state: State, inverse: list[Array], pushed: list[Array]) -> System:
    """Newton's equations of all iterates.

    For each block, ``inverse`` of the active slacks, and ``pushed``, that times the weight.
    """
    target = run.weight
    system = System(
        len(target),
        (DAMPING[0] + DAMPING_PER_TARGET[0] * target, DAMPING[1] + DAMPING_PER_TARGET[1] * target),
    )
    weights, rights = [], []
    for block, own_inverse, own_pushed, value in zip(run.blocks, inverse, pushed, state.value,
                                                     strict=True):
        weights.append(block.multipliers * own_inverse)
        rights.append(own_pushed + block.multipliers)
        rights[-1] -= weights[-1] * value
    weight, right, m = weights[0], rights[0], run.blocks[0].multipliers
    u, joints = state.geometry.along, state.joints
    side = LIMB_SIDE[:, None]
    rows = np.empty((5, 5, 4, len(target)))
    # Reach limits have slope -u, folds +u; both bend like the distance, (1 - u u^T) / d.
    pulled = m[REACH] - m[FOLD]
    bend = pulled / state.geometry.distance
    np.multiply((weight[REACH] + weight[FOLD] - bend) * u, u[:, None], out=rows[:3, :3])
    inner = rows[:3, :3]
    inner[0, 0] += weight[ACROSS]
    # While the shoulder lifts with the hand, distance does not change along the trunk.
    inner[1, 1] += weight[HEIGHT]
    inner[1, 1] += np.where(state.geometry.rising, 0.0, bend)
    inner[0, 0] += bend
    inner[2, 2] += bend
    pull = np.multiply(right[FOLD] - right[REACH], u, out=rows[4, :3])
    curve = -pulled * u
    pull[0] += side * right[ACROSS]
    curve[0] += side * m[ACROSS]
    pull[1] += HEIGHT_SIDE[:, None] * right[HEIGHT]
    curve[1] += HEIGHT_SIDE[:, None] * m[HEIGHT]
    lift, legs = joints.lift_slope, inner[:, :, 2:]
    pull[:, 2:] += right[LIFT] * lift
    curve[:, 2:] += m[LIFT] * lift
    legs += (weight[LIFT] * lift)[:, None] * lift
    legs -= (m[LIFT] / joints.gap * joints.circle)[:, None] * joints.circle
    around = m[LIFT] * joints.before_level * joints.around[::2]
    legs[::2, ::2] -= around[:, None] * joints.around[::2]
    pull[0, 2:] -= side[2:] * right[OUT]
    curve[0, 2:] -= side[2:] * m[OUT]
    legs[0, 0] += weight[OUT]
    if run.aim is None:
        np.multiply(weight[REACH], u, out=rows[3, :3])
        system.lower[SPARE, SPARE] += weight[REACH].sum(axis=0) + 1e-9
        system.lower[RIGHT, SPARE] -= right[REACH].sum(axis=0)
    else:
        rows[3, :3] = 0.0
    system.lower[RIGHT, SPARE] += 1.0
    system.add_limbs(state.geometry.point, rows, curve)
    for own in state.points:
        _add_points(system, own, weights[own.block][own.rows], rights[own.block][own.rows],
                    run.blocks[own.block].multipliers[own.rows])
    return system


def _add_points(system: System, points: Points, weight: Array, right: Array, m: Array) -> None:
    """Add limits of trunk points; those in pairs against each other as one."""
    limits, slope = points.limits, points.slope
    if not points.both:
        system.add_points(limits, slope, weight, right, m)
        return
    for pair in np.flatnonzero(limits.spare[::2]):
        first, second = weight[2 * pair], weight[2 * pair + 1]
        system.lower[SPARE, :SPARE] -= (first - second) * slope[:, pair]
        system.lower[SPARE, SPARE] += first + second
        system.lower[RIGHT, SPARE] -= right[2 * pair] + right[2 * pair + 1]
    system.add_points(replace(limits, spare=np.zeros(len(limits.spare) // 2, dtype=bool)), slope,
                      weight[::2] + weight[1::2], right[::2] - right[1::2], m[::2] - m[1::2])


def linear_change(run: Run, state: State, step: Array) -> list[Array]:
    """How every limit changes along ``step`` to first order, (M, n) for each block."""
    w, t = step[:3], step[6]
    v = state.geometry.point
    moved = np.empty_like(v)
    for i in range(3):
        j, k = (i + 1) % 3, (i + 2) % 3
        np.multiply(v[j], w[k], out=moved[i])
        moved[i] -= v[k] * w[j]
        moved[i] -= step[3 + i]
    changes = [np.empty_like(value) for value in state.value]
    change = changes[0]
    np.einsum("iln,iln->ln", state.geometry.along, moved, out=change[FOLD])
    np.negative(change[FOLD], out=change[REACH])
    if run.aim is None:
        change[REACH] -= t
    np.multiply(HEIGHT_SIDE[:, None], moved[1], out=change[HEIGHT])
    np.multiply(LIMB_SIDE[:, None], moved[0], out=change[ACROSS])
    np.einsum("iln,iln->ln", state.joints.lift_slope, moved[:, 2:], out=change[LIFT])
    np.multiply(-LIMB_SIDE[2:, None], moved[0, 2:], out=change[OUT])
    for own in state.points:
        count = own.slope.shape[2]
        rows = changes[own.block][own.rows]
        np.einsum("ipn,in->pn", own.slope, step[:6, :count], out=rows[::2] if own.both else rows)
        if own.both:
            np.negative(rows[::2], out=rows[1::2])
        for row in np.flatnonzero(own.limits.spare):
            rows[row] -= t[:count]
    return changes
