"""A careful solver of one stance, one at a time.

It is written from the definitions, in world axes, and calls nothing of the package's own limits:
Euler angles and sequential quadratic programming from several starts.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize

from climbpath.contacts import FLOOR, FREE
from climbpath.posture.linkage import Linkage
from climbpath.wall import Surface

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

# The model's choices, repeated here so that a change of the package shows.
TILT, TURN, ARM_ACROSS = np.deg2rad([40.0, 50.0, 25.0])
GRIP = 0.5
LEG_BENT = 0.7
SIDE = np.array([-1.0, 1.0, -1.0, 1.0])


@dataclass(frozen=True)
class Body:
    """What the solver needs of a body, m: tests of the linkage check these against the athlete.

    ``strike`` and ``strike_fold``: what the fingertip adds to the longest reach of an arm, and
    its shortest reach.
    """

    roots: Array
    rise: float
    trunk: float
    reach: Array
    fold: Array
    stand: float
    knee: Array
    lower: float
    sideways: float
    across: Array
    chest: float
    space: tuple[float, float]
    strike: float
    strike_fold: float

    @classmethod
    def of(cls, linkage: Linkage) -> Body:
        """From the linkage's lengths."""
        upper, grip = linkage.upper_arm, linkage.forearm + GRIP * linkage.hand
        tip = linkage.forearm + linkage.hand
        # The elbow's cosine at full flexion, from the gripping arm (law of cosines).
        elbow = (upper**2 + grip**2 - linkage.fold[0] ** 2) / (2.0 * upper * grip)
        return cls(
            roots=linkage.roots,
            rise=linkage.shoulder_rise,
            trunk=float(linkage.roots[0, 1]),
            reach=linkage.reach,
            fold=linkage.fold,
            stand=float(linkage.reach[2]),
            knee=linkage.knee_limit,
            lower=linkage.lower_leg[1],
            sideways=linkage.out_limit,
            across=linkage.across,
            chest=linkage.chest_height,
            space=(linkage.pelvis_space, linkage.chest_space),
            strike=tip - grip,
            strike_fold=float(np.sqrt(upper**2 + tip**2 - 2.0 * upper * tip * elbow)),
        )


def rotation(lean: float, pitch: float, twist: float) -> Array:
    """Trunk axes (columns) of a trunk that leans right, pitches about x and twists about y."""
    cl, sl, cp, sp, ct, st = (f(a) for a in (lean, pitch, twist) for f in (np.cos, np.sin))
    about_z = np.array([[cl, sl, 0.0], [-sl, cl, 0.0], [0.0, 0.0, 1.0]])
    about_x = np.array([[1.0, 0.0, 0.0], [0.0, cp, -sp], [0.0, sp, cp]])
    about_y = np.array([[ct, 0.0, st], [0.0, 1.0, 0.0], [-st, 0.0, ct]])
    return np.asarray(about_z @ about_x @ about_y)


@dataclass(frozen=True)
class Stance:
    """One stance on a flat wall: ``contacts``, ``strike`` (4,), ``points`` (4, 3) world [m]."""

    body: Body
    surface: Surface
    contacts: Ints
    points: Array
    strike: NDArray[np.bool_]

    def trunk(self, q: Array) -> tuple[Array, Array]:
        """Turn (3, 3) and place (3,) of the trunk in the world for unknowns ``q``."""
        wall = np.stack([[1.0, 0.0, 0.0], self.surface.up[0], self.surface.normal[0]], axis=1)
        return wall @ rotation(*q[3:6]), q[:3]

    def limits(self, q: Array) -> tuple[Array, Array]:
        """Reach limits before t is taken off, and hard limits, as values that must be >= 0."""
        body, surface = self.body, self.surface
        turn, place = self.trunk(q)
        spare, hard = [], []
        for limb in range(4):
            root = body.roots[limb]
            if self.contacts[limb] == FREE:
                continue
            if self.contacts[limb] == FLOOR:
                height = (place + turn @ root)[1] - surface.floor_height
                spare.append(body.stand - height)
                hard.append(height - body.fold[limb])
                continue
            seen = turn.T @ (self.points[limb] - place)
            away = seen - root
            if limb < 2:
                away[1] -= min(max(away[1], 0.0), body.rise)
            far = float(np.sqrt(away @ away))
            spare.append(body.reach[limb] + (body.strike if self.strike[limb] else 0.0) - far)
            hard.append(far - (body.strike_fold if self.strike[limb] else body.fold[limb]))
            hard.append(body.across[limb] + SIDE[limb] * away[0])
            if limb < 2:
                hard.append(seen[1])
                continue
            hard.append(-away[1])
            hard.append(body.sideways - SIDE[limb] * away[0])
            # With the thigh at full flexion in the plane of hip, toe and trunk, the lower leg
            # must still come down to the toe.
            level = np.hypot(away[0], away[2])
            hard.append(np.hypot(level - body.knee[0], away[1] - body.knee[1]) - body.lower)
        normal = surface.normal[0]
        out = float(normal @ (place - surface.origin[0]))
        hard.append(out - body.space[0])
        hard.append(out + body.chest * float(normal @ turn[:, 1]) - body.space[1])
        hard.append(body.trunk * (float(turn[:, 1] @ surface.up[0]) - np.cos(TILT)))
        hard.append(body.trunk * (float(turn[:, 2] @ normal) - np.cos(TURN)))
        return np.array(spare), np.array(hard)

    def starts(self, number: int, seed: int) -> list[Array]:
        """Unknowns (6,): hanging under the hands, standing on the feet, then randomised."""
        rng = np.random.default_rng(seed)
        body, surface = self.body, self.surface
        touching = (self.contacts != FREE) & (self.contacts != FLOOR)
        hands, feet = touching[:2], touching[2:]
        middle = self.points[touching].mean(axis=0) if touching.any() else np.zeros(3)
        hang = body.trunk + 0.7 * body.reach[0]
        guesses = []
        for limbs, along in ((slice(0, 2), -hang), (slice(2, 4), 0.7 * body.reach[2])):
            chosen = hands if limbs.start == 0 else feet
            root = self.points[limbs][chosen].mean(axis=0) if chosen.any() else middle
            guesses.append(root + along * surface.up[0])
        places = [guesses[0], guesses[1], (guesses[0] + guesses[1]) / 2]
        result = []
        for k in range(number):
            place = places[min(k, 2)].copy()
            place[0] = 0.5 * (place[0] + middle[0])
            if (self.contacts == FLOOR).any():
                place[1] = surface.floor_height + 0.9 * body.stand
            out = float(surface.normal[0] @ (place - surface.origin[0]))
            place += surface.normal[0] * (max(0.0, body.space[0] - out) + 0.15)
            angles = np.zeros(3)
            if k >= 2:
                place += rng.normal(0.0, 0.15, 3)
                angles = rng.normal(0.0, 0.3, 3)
            result.append(np.concatenate([place, angles]))
        return result


def margin(stance: Stance, starts: int = 4, seed: int = 0) -> tuple[float, Array]:
    """Largest spare reach [m] of one stance by SLSQP, best of several starts, and its unknowns.

    Where no start keeps the hard limits to 10 µm the result is -inf: the stance is not possible
    at any reach as far as this solver can tell.
    """
    best, chosen = -np.inf, np.zeros(6)

    def values(q: Array) -> Array:
        spare, hard = stance.limits(q)
        return np.concatenate([spare - q[6], hard])

    for guess in stance.starts(starts, seed):
        first = np.append(guess, float(stance.limits(guess)[0].min()) - 0.05)
        found = _ascend(values, first)
        spare, hard = stance.limits(found)
        if hard.min() >= -1e-5 and spare.min() > best:
            best, chosen = float(spare.min()), found[:6]
    return best, chosen


def _ascend(values: Callable[[Array], Array], first: Array) -> Array:
    """Maximise the last unknown subject to ``values`` >= 0."""
    slope = np.zeros(len(first))
    slope[-1] = -1.0
    careful: Any = minimize
    found = careful(
        lambda q: -q[-1], first, jac=lambda q: slope, method="SLSQP",
        constraints=[{"type": "ineq", "fun": values}], options={"maxiter": 150, "ftol": 1e-8},
    )
    return np.asarray(found.x)
