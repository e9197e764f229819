"""Random stances for the force solvers, and the same problems for solvers of another kind."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import Bounds, LinearConstraint, linprog, minimize

from climbpath.motion.cones import cone_rays
from climbpath.motion.load import Held

Array = NDArray[np.float64]


def unit(vectors: Array) -> Array:
    return np.asarray(vectors / np.linalg.norm(vectors, axis=-1, keepdims=True))


def random_held(count: int, seed: int, absent: float = 0.3, strict: bool = False) -> Held:
    """Hands above and feet below a centre of mass at (0.3, 5, 0.4) m, each limb free with chance
    ``absent``. Axes, half-angles and capacities vary; turning absorbs .05 to .2 body weights m.
    """
    rng = np.random.default_rng(seed)
    shape = (count, 4)
    axis = np.empty((count, 4, 3))
    axis[:, :2] = [0.0, 1.0, -0.3]
    axis[:, 2:] = [0.0, 0.7, 0.7]
    axis = unit(axis + rng.normal(0.0, 0.3, axis.shape))
    side = unit(np.cross(axis, [0.3, 0.1, 1.0]))
    rays = cone_rays(axis, side, np.deg2rad(rng.uniform(20.0, 45.0, shape)))
    point = rng.normal(0.0, 1.0, (count, 4, 3)) * [0.4, 0.2, 0.1]
    point += np.array([[0.0, 0.6, -0.3]] * 2 + [[0.0, -0.8, -0.3]] * 2)
    com = np.broadcast_to([0.3, 5.0, 0.4], (count, 3))
    engaged = rng.random(shape) >= absent
    turn = np.zeros((count, 3)) if strict else rng.uniform(0.05, 0.2, (count, 3))
    return Held(
        rays=np.where(engaged[:, :, None, None], rays, 0.0),
        point=point + com[:, None],
        com=com,
        capacity=rng.uniform(0.2, 2.0, shape),
        turn=turn,
    )


def random_need(count: int, seed: int) -> Array:
    """About one body weight upward, with accelerations of some .15 g."""
    rng = np.random.default_rng(seed)
    return np.array([0.0, 1.0, 0.0]) + rng.normal(0.0, 0.15, (count, 3))


@dataclass(frozen=True)
class Program:
    """One stance over the unknowns c (L K), m (3), then what is minimised.

    ``equal`` (6, n) @ x = ``wanted`` (6,).
    """

    equal: Array
    wanted: Array
    rays: int
    limbs: int


def program(held: Held, need: Array, k: int, extra: int) -> Program:
    """Balance of forces and moments of stance ``k`` with ``extra`` unknowns at the end."""
    limbs, rays = held.rays.shape[1:3]
    equal = np.zeros((6, limbs * rays + 3 + extra))
    for limb in range(limbs):
        for ray in range(rays):
            force = held.rays[k, limb, ray]
            equal[:3, limb * rays + ray] = force
            equal[3:, limb * rays + ray] = np.cross(held.point[k, limb] - held.com[k], force)
    equal[3:, limbs * rays : limbs * rays + 3] = np.eye(3)
    return Program(equal, np.concatenate([need[k], np.zeros(3)]), rays, limbs)


def least_load_by_highs(held: Held, need: Array, k: int) -> float:
    """Least common share of stance ``k`` by a linear program; inf where there is none."""
    one = program(held, need, k, 1)
    cut = one.limbs * one.rays
    size = one.equal.shape[1]
    bound = np.zeros((one.limbs + 6, size))
    bound[:, -1] = [-c for c in (*held.capacity[k], *held.turn[k], *held.turn[k])]
    for limb in range(one.limbs):
        bound[limb, limb * one.rays : (limb + 1) * one.rays] = 1.0
    bound[one.limbs :, cut : cut + 3] = np.concatenate([np.eye(3), -np.eye(3)])
    cost = np.zeros(size)
    cost[-1] = 1.0
    limits = [(0.0, None)] * cut + [(None, None)] * 3 + [(0.0, None)]
    found = linprog(cost, A_ub=bound, b_ub=np.zeros(len(bound)), A_eq=one.equal,
                    b_eq=one.wanted, bounds=limits, method="highs")
    if found.status == 2:
        return float("inf")
    assert found.status == 0, found.message
    assert found.fun is not None
    return float(found.fun)


def limb_loads_by_slsqp(held: Held, need: Array, k: int) -> tuple[Array, float, bool]:
    """Shares (limbs, then turning) with the least sum of squares, half that sum, and success."""
    one = program(held, need, k, held.rays.shape[1] + 1)
    cut = one.limbs * one.rays
    size = one.equal.shape[1]
    bound = np.zeros((one.limbs + 6, size))
    for limb in range(one.limbs):
        bound[limb, limb * one.rays : (limb + 1) * one.rays] = -1.0
        bound[limb, cut + 3 + limb] = held.capacity[k, limb]
    bound[one.limbs :, cut : cut + 3] = np.concatenate([np.eye(3), -np.eye(3)])
    bound[one.limbs :, -1] = np.concatenate([held.turn[k], held.turn[k]])
    squared = np.zeros(size)
    squared[cut + 3 :] = 1.0

    def half_sum(x: Array) -> float:
        return 0.5 * float(squared @ x**2)

    def slope(x: Array) -> Array:
        return squared * x

    start = np.full(size, 0.1)
    found = minimize(
        half_sum, start, method="SLSQP", jac=slope,
        bounds=Bounds(np.where(np.arange(size) < cut, 0.0, -np.inf), np.full(size, np.inf)),
        constraints=[LinearConstraint(one.equal, one.wanted, one.wanted),
                     LinearConstraint(bound, 0.0, np.inf)],
        options={"maxiter": 500, "ftol": 1e-14},
    )
    return found.x[cut + 3 :], float(found.fun), bool(found.success)


def mirrored(held: Held) -> Held:
    """Left for right about x = 0: limbs swap sides, x changes sign."""
    flip = np.array([-1.0, 1.0, 1.0])
    swap = [1, 0, 3, 2]
    return Held(held.rays[:, swap] * flip, held.point[:, swap] * flip, held.com * flip,
                held.capacity[:, swap], held.turn)


