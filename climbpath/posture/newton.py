"""Interior-point steps for all stances of a batch: the iteration behind margins and samples.

Every limit is a function g >= 0 with a slack and a multiplier; Newton's equations carry the full
curvature, so a dozen steps are enough. The seventh unknown is the spare reach, or, with an ``Aim``,
minus the distance of the centre of mass from the line.

References: S. Wright, Primal-Dual Interior-Point Methods, SIAM 1997, chapter 1 (the method).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.posture.batch import StanceBatch
from climbpath.posture.iterates import Aim, Run, State, evaluate, linear_change, started, system_of
from climbpath.posture.limits import point_layout, slack, turned
from climbpath.posture.linkage import Linkage

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

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
        return Postures(self.margin[index], self.turn.take(index, axis=-1),
                        self.shift.take(index, axis=-1))


NOT_CONVEX = np.array([*range(4, 8), *range(12, 20)])
"""Rows of limits whose allowed places are not convex, by themselves or once the trunk turns: fold,
across, lift and out."""


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
    end = Postures(np.zeros(batch.size), turn.copy(), shift.copy())
    certain = np.zeros(batch.size, dtype=bool)
    run, state = started(linkage, batch, turn, shift, layout, aim)
    going = np.ones(batch.size, dtype=bool)
    for _ in range(steps):
        _step(run, state)
        left = int(np.count_nonzero(going))
        if left < (1.0 - DROP_SHARE) * len(going):
            run.keep(np.flatnonzero(going))
            going = np.ones(left, dtype=bool)
        state = evaluate(linkage, run, layout)
        done = run.settled.copy()
        if run.aim is not None:
            # On the line many postures are equally good: stop at the first, before rounding picks.
            done |= run.aim.miss(run.turn, run.shift) < ON_LINE
        # What is done is taken down at once, so that no result depends on the others in the arrays.
        asked = np.flatnonzero(done & going)
        if len(asked):
            fresh = asked[_kept(run, state, asked)]
            held = run.blocks[0].multipliers[NOT_CONVEX[:, None], fresh] > HELD_ABOVE
            certain[run.index[fresh]] = ~held.any(axis=0)
            _take_down(end, run, fresh)
            going[fresh] = False
            if not going.any():
                break
        # A limit that holds takes its own value as slack, so that only limits still missed
        # are approached from outside.
        for block, value in zip(run.blocks, state.value, strict=True):
            least = 0.1 * block.slacks
            np.copyto(block.slacks, np.maximum(value, least, out=least), where=value > 0.0)
    _take_down(end, run, np.flatnonzero(going))
    reached, hard = slack(linkage, batch, end.turn, end.shift)
    margin = np.where(hard >= -HARD_TOLERANCE, reached, np.minimum(reached, hard))
    return Postures(margin, end.turn, end.shift), certain


def _take_down(end: Postures, run: Run, index: Ints) -> None:
    """Where the chosen iterates stand is where they end."""
    where = run.index[index]
    end.turn[..., where] = run.turn.take(index, axis=-1)
    end.shift[:, where] = run.shift.take(index, axis=-1)


def _kept(run: Run, state: State, index: Ints) -> NDArray[np.bool_]:
    """Which of the chosen iterates miss no limit."""
    kept = np.ones(len(index), dtype=bool)
    for block, value in zip(run.blocks, state.value, strict=True):
        own = np.flatnonzero(index < value.shape[1])
        chosen = index[own]
        missed = (value[:, chosen] <= -HARD_TOLERANCE) & (block.active[:, chosen] > 0.0)
        kept[own] &= ~missed.any(axis=0)
    return kept


def _step(run: Run, state: State) -> None:
    """One Newton step of all iterates, as long as slacks and multipliers stay positive."""
    inverse = [block.active / block.slacks for block in run.blocks]
    pushed = [own * run.weight[: own.shape[1]] for own in inverse]
    system = system_of(run, state, inverse, pushed)
    system.close()
    step = system.solve()
    slack_steps = linear_change(run, state, step)
    dual_steps = []
    fastest, lost = np.zeros(len(run.spare)), np.zeros(len(run.spare))
    for block, own, dual_step, slack_step, value in zip(run.blocks, inverse, pushed, slack_steps,
                                                        state.value, strict=True):
        slack_step += value
        slack_step -= block.slacks
        own *= slack_step
        count = own.shape[1]
        np.minimum(fastest[:count], own.min(axis=0), out=fastest[:count])
        own += 1.0
        own *= block.multipliers
        dual_step -= own
        dual_steps.append(dual_step)
        np.divide(dual_step, np.maximum(block.multipliers, 1e-300, out=own), out=own)
        np.minimum(lost[:count], own.min(axis=0), out=lost[:count])
    turn_size, shift_size = (np.sqrt(np.einsum("in,in->n", part, part))
                             for part in (step[:3], step[3:6]))
    length = 0.99 / np.maximum(-fastest, 0.99)
    length = np.minimum(length, 0.4 / np.maximum(np.maximum(turn_size, shift_size), 0.4))
    dual = 0.99 / np.maximum(-lost, 0.99)
    total = np.zeros_like(length)
    for block, slack_step, dual_step in zip(run.blocks, slack_steps, dual_steps, strict=True):
        count = slack_step.shape[1]
        slack_step *= length[:count]
        slack_step += block.slacks
        block.slacks = np.maximum(slack_step, 1e-10, out=slack_step)
        dual_step *= dual[:count]
        block.multipliers += dual_step
        total[:count] += np.einsum("mn,mn->n", block.slacks, block.multipliers)
    least = np.minimum(length, dual)
    centring = np.where(least > 0.7, 0.12, 0.4)
    run.weight = np.maximum(centring * total / run.limits, 1e-9)
    run.settled = (total < CONVERGED) & (least > 0.9) & (turn_size < STILL)
    run.settled &= np.abs(step[6]) < SETTLED
    step *= length
    run.turn = turned(run.turn, step[:3])
    run.shift = run.shift + np.einsum("ijn,jn->in", run.turn, step[3:6])
    run.spare = run.spare + step[6]
