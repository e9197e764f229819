"""Slopes and curvatures of the posture problem against differences of its limits."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.posture import iterates
from climbpath.posture import limits as lim
from climbpath.posture.barrier import RIGHT, SIZE, System
from climbpath.posture.batch import StanceBatch
from climbpath.posture.linkage import Linkage
from tests.posture.drawn import drawn, flat

Array = NDArray[np.float64]

SMALL = 1e-5


def rotation_of(step: Array) -> Array:
    """exp of a turn w by its power series, (3, 3): another way than Rodrigues' formula."""
    spin = np.array([[0.0, -step[2], step[1]], [step[2], 0.0, -step[0]], [-step[1], step[0], 0.0]])
    result, term = np.eye(3), np.eye(3)
    for k in range(1, 20):
        term = term @ spin / k
        result = result + term
    return result


def test_turned_is_the_exponential() -> None:
    rng = np.random.default_rng(1)
    steps = rng.normal(0.0, 0.5, (3, 20))
    steps[:, 0] = 0.0
    turn = lim.turned(lim.upright(20), rng.normal(0.0, 0.5, (3, 20)))
    found = lim.turned(turn, steps)
    for k in range(20):
        assert found[..., k] == pytest.approx(turn[..., k] @ rotation_of(steps[:, k]), abs=1e-12)


class Place:
    """A stance's limits as a function of a small turn, shift (trunk axes) and spare reach."""

    def __init__(self, linkage: Linkage, batch: StanceBatch, turn: Array, shift: Array,
                 spare: Array) -> None:
        self.linkage, self.batch = linkage, batch
        self.turn, self.shift, self.spare = turn, shift, spare

    def values(self, step: Array) -> Array:
        """All limits (M, N) after a step (7,) that all stances make, in the solver's order."""
        count = self.batch.size
        many = np.repeat(step[:, None], count, axis=1)
        turn = lim.turned(self.turn, many[:3])
        # A turn w and a shift u of the trunk in its own axes: targets stand at exp(-w) v - u.
        shift = self.shift + np.einsum("ijn,jn->in", turn, many[3:6])
        spare = self.spare + many[6]
        geometry = lim.limb_geometry(self.linkage, self.batch, turn, shift)
        joints = lim.joint_limits(self.linkage, geometry)
        points = lim.point_limits(self.linkage, self.batch, turn, shift, spare)
        rows = [
            self.batch.reach - spare - geometry.distance,
            geometry.distance - solver_fold(self.linkage, self.batch),
            joints.height, joints.across, joints.lift, joints.out,
            *(limit.value[None] for limit in points),
        ]
        return np.concatenate(rows)


def solver_fold(linkage: Linkage, batch: StanceBatch) -> Array:
    """Shortest reach of each limb, (4, N): of the stance where it has its own, or the body's."""
    own = getattr(batch, "fold", None)
    return np.asarray(own if own is not None else linkage.fold[:, None])


@pytest.fixture(scope="module", params=[0, 1], ids=["male", "female"])
def place(request: pytest.FixtureRequest) -> Place:
    """Trunks near, not at, their best, away from kinks of the limits."""
    stances = drawn(request.param, 400, 90 + request.param, flat(10.0))
    batch = stances.batch()
    found = stances.solved()
    rng = np.random.default_rng(3)
    turn = lim.turned(found.turn, rng.normal(0.0, 0.2, found.shift.shape))
    shift = found.shift + rng.normal(0.0, 0.1, found.shift.shape)
    geometry = lim.limb_geometry(stances.linkage, batch, turn, shift)
    lift = geometry.point[1, :2] - stances.linkage.roots[:2, 1, None]
    kink = np.minimum(np.abs(lift), np.abs(lift - stances.linkage.shoulder_rise)).min(axis=0)
    away = geometry.along * geometry.distance
    level = np.hypot(away[0, 2:], away[2, 2:]).min(axis=0)
    clear = (kink > 0.01) & (geometry.distance.min(axis=0) > 0.1) & (level > 0.15)
    kept = np.flatnonzero(clear)
    # Stances on the floor first, as the solver has them.
    kept = kept[np.argsort(~batch.floor[:, kept].any(axis=0), kind="stable")]
    assert len(kept) > 50
    spare = rng.normal(0.0, 0.1, len(kept))
    return Place(stances.linkage, batch.take(kept), turn[..., kept], shift[:, kept], spare)


def run_of(place: Place) -> iterates.Run:
    """The solver's iterates at a place."""
    layout = lim.point_layout(place.batch)
    run, _ = iterates.started(place.linkage, place.batch, place.turn, place.shift, layout, None)
    run.spare = place.spare
    return run


def state_of(place: Place) -> iterates.State:
    return iterates.evaluate(place.linkage, run_of(place), lim.point_layout(place.batch))


def joined(blocks: list[Array], count: int) -> Array:
    """All blocks as one (M, N), with 0 where a block does not reach."""
    return np.concatenate([np.pad(block, ((0, 0), (0, count - block.shape[1])))
                           for block in blocks])


def test_limits_have_one_definition(place: Place) -> None:
    # What a stance does not have is not evaluated, so it is left out.
    count = place.batch.size
    had = joined([block.active for block in run_of(place).blocks], count)
    expected = had * place.values(np.zeros(7))
    assert had * joined(state_of(place).value, count) == pytest.approx(expected, abs=1e-12)


def test_linear_change_is_the_slope(place: Place) -> None:
    state = state_of(place)
    for k in range(SIZE):
        step = np.zeros(SIZE)
        step[k] = SMALL
        slope = (place.values(step) - place.values(-step)) / (2.0 * SMALL)
        unit = np.repeat(np.eye(SIZE)[:, k, None], place.batch.size, axis=1)
        run, count = run_of(place), place.batch.size
        had = joined([block.active for block in run.blocks], count)
        found = joined(iterates.linear_change(run, state, unit), count)
        assert had * found == pytest.approx(had * slope, abs=1e-5)


def second(place: Place) -> Array:
    """Second differences of every limit, (7, 7, M, N)."""
    h = 2e-4
    basis = h * np.eye(SIZE)
    middle = place.values(np.zeros(SIZE))
    result = np.empty((SIZE, SIZE, *middle.shape))
    for i in range(SIZE):
        for j in range(i + 1):
            if i == j:
                value = place.values(basis[i]) - 2.0 * middle + place.values(-basis[i])
            else:
                value = (place.values(basis[i] + basis[j]) - place.values(basis[i] - basis[j])
                         - place.values(basis[j] - basis[i])
                         + place.values(-basis[i] - basis[j])) / 4.0
            result[i, j] = result[j, i] = value / h**2
    return result


def test_newton_system_is_slopes_and_curvatures(place: Place) -> None:
    """The matrix is sum of m/s g' g'^T - m g'', the right-hand side sum of r g' plus that of t."""
    state = state_of(place)
    values = place.values(np.zeros(SIZE))
    run, count = run_of(place), place.batch.size
    active = joined([block.active for block in run.blocks], count) > 0.0
    rng = np.random.default_rng(4)
    slacks = np.where(active, rng.uniform(0.02, 0.5, values.shape), 1.0)
    multipliers = np.where(active, rng.uniform(0.0, 0.5, values.shape), 0.0)
    target = np.full(count, 0.01)
    run.weight, begin = target, 0
    for block in run.blocks:
        rows, size = block.active.shape
        block.slacks = slacks[begin:begin + rows, :size]
        block.multipliers = multipliers[begin:begin + rows, :size]
        begin += rows
    inverse = [block.active / block.slacks for block in run.blocks]
    system = iterates.system_of(run, state, inverse, [0.01 * own for own in inverse])
    system.close()
    units = [np.repeat(np.eye(SIZE)[:, k, None], count, axis=1) for k in range(SIZE)]
    slope = np.stack([joined(iterates.linear_change(run, state, unit), count) for unit in units])
    curve = second(place)
    weight = multipliers / slacks
    right = np.where(active, multipliers + target / slacks - weight * values, 0.0)
    matrix = np.einsum("mn,imn,jmn->ijn", weight, slope, slope)
    matrix -= np.einsum("mn,ijmn->ijn", multipliers, curve)
    damping = [iterates.DAMPING[k] + iterates.DAMPING_PER_TARGET[k] * target for k in (0, 1)]
    for k in range(3):
        matrix[k, k] += damping[0]
        matrix[3 + k, 3 + k] += damping[1]
    aim = np.einsum("mn,imn->in", right, slope)
    aim[6] += 1.0
    assert system.lower[RIGHT] == pytest.approx(aim, abs=1e-5)
    # The lift limit's curvature leaves out the rounding of the level distance near zero, a share
    # (SOFT / level)^2, at most 0.5 % here, of one term.
    for i in range(SIZE):
        for j in range(i + 1):
            scale = 1.0 + np.abs(matrix[i, j])
            assert np.abs(system.lower[i, j] - matrix[i, j]).max() < 1e-3 * scale.max(), (i, j)


def test_solve_is_that_of_linear_algebra() -> None:
    rng = np.random.default_rng(5)
    count = 30
    root = rng.normal(size=(count, SIZE, SIZE))
    matrix = root @ root.transpose(0, 2, 1) + np.eye(SIZE)
    right = rng.normal(size=(count, SIZE))
    system = System(count, (np.zeros(count), np.zeros(count)))
    system.lower[:RIGHT] = np.moveaxis(matrix, 0, 2)
    system.lower[RIGHT] = right.T
    expected = np.linalg.solve(matrix, right[..., None])[..., 0]
    step = system.solve().T
    assert step == pytest.approx(expected, abs=1e-9)


def test_solve_descends_where_the_matrix_is_not_positive() -> None:
    rng = np.random.default_rng(6)
    count = 200
    root = rng.normal(size=(count, SIZE, SIZE))
    matrix = root + root.transpose(0, 2, 1)
    right = rng.normal(size=(count, SIZE))
    system = System(count, (np.zeros(count), np.zeros(count)))
    system.lower[:RIGHT] = np.moveaxis(matrix, 0, 2)
    system.lower[RIGHT] = right.T
    step = system.solve().T
    assert ((step * right).sum(axis=1) > 0.0).all()
