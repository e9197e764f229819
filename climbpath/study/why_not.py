"""Why nothing gets through: the placement that stops it, what is missing, and what would free it.

Reach is loosened step by step until a way opens; among all ways that open, the one whose greatest
shortfall is least names the placement. If a condition alone stands in the way, it is named instead.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.contacts import FLOOR, FREE, LIMB_NAMES, Limb
from climbpath.errors import TooLargeError
from climbpath.motion.model import Motion, PacedMotion
from climbpath.posture.batch import stance_batch
from climbpath.posture.solver import solve_postures
from climbpath.route.graph import reachable
from climbpath.stance.enumerate import batch_of, solve
from climbpath.stance.options import contact_points
from climbpath.study.climb import Climb, Conditions, prepare
from climbpath.study.decode import legs_of
from climbpath.study.opening import way_under
from climbpath.study.results import WhyNot
from climbpath.study.why_strength import by_strength
from climbpath.wall import Wall

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

LOOSENED = (0.06, 0.18, 0.45, 1.0)
"""How much reach is lent in turn, m."""

NEARER = 2.0
NEARER_STEPS = 40
"""A hold is brought nearer by up to this, m, in so many steps, then in as many finer ones."""

CONDITION_WORDS = {
    "include": "without --include there is a way",
    "avoid": "without --avoid there is a way",
    "hands": "without --hand there is a way",
    "opening": "with another opening there is a way",
    "flights": "with flights there is a way",
    "matching": "with both hands on one hold there is a way",
    "smears": "with feet smearing there is a way",
}


@dataclass(frozen=True)
class Shortfall:
    """The worst placement of the way that is missed by least."""

    step: int
    limb: int
    stance: Ints
    missing: float


def why_not(
    wall: Wall, athlete: Athlete, conditions: Conditions, motion: Motion | None, step: float
) -> WhyNot:
    """Explain that there is no way up under ``conditions``."""
    stopped = _by_condition(wall, athlete, conditions, motion, step)
    if stopped is not None:
        return WhyNot(0, None, None, None, None, stopped)
    lacking = by_strength(wall, athlete, conditions, motion, step)
    if lacking is not None:
        return lacking
    # Reach alone stands in the way, so the rule that looks at no force will do.
    paced = motion if isinstance(motion, PacedMotion) else PacedMotion()
    for missing in LOOSENED:
        try:
            climb = prepare(wall, athlete, conditions, paced, step, missing)
        except TooLargeError:
            break
        found = _least_shortfall(climb)
        if found is not None:
            return _explained(climb, found)
    return _gap(prepare(wall, athlete, conditions, paced, step))


def _gap(climb: Climb) -> WhyNot:
    """Where more reach than ``LOOSENED`` would be needed: the hold nearest to those reached."""
    options, stances = climb.options, climb.search.stances
    graph = climb.search.graph
    if not len(climb.sources):
        return WhyNot(0, None, None, None, None,
                      "no allowed start is possible: its holds are too far apart or from the floor")
    seen = reachable(graph.indptr, graph.head, climb.sources)
    samples = climb.search.code.sample(np.flatnonzero(seen[:climb.search.code.plain]))
    held = stances.contacts[np.unique(stances.sample_stance[samples]), :2]
    reached = np.unique(held[held >= 0])
    wanted = options.hand.copy()
    wanted[reached] = False
    wanted[[options.index(name) for name in climb.conditions.avoid]] = False
    others = np.flatnonzero(wanted)
    if not len(others):
        return WhyNot(0, None, None, None, None,
                      "every hold is reached, but not in an order that the conditions allow")
    gap = np.linalg.norm(options.point[others][:, None] - options.point[reached][None], axis=2)
    other, base = np.unravel_index(int(np.argmin(gap)), gap.shape)
    hold, support = int(others[other]), int(reached[base])
    best: tuple[float, int] = (np.inf, 0)
    for hand in (Limb.LH, Limb.RH):
        stance = np.full(4, FREE, dtype=np.int64)
        stance[hand], stance[hand ^ 1] = hold, support
        best = min(best, (shortfall(climb, stance, hand, 2.0 * float(gap.min()))[0], int(hand)))
    missing, limb = best
    name, near = options.name(hold), options.name(support)
    return WhyNot(
        0, LIMB_NAMES[limb], name, missing * 1e3 if np.isfinite(missing) else None, None,
        f"the holds from {name} on cannot be reached: {near} is the nearest that can, "
        f"{gap.min() * 1e3:.0f} mm away; {name} would have to be "
        + (f"{missing * 1e3:.0f} mm nearer to it" if np.isfinite(missing) else "much nearer to it")
        + ", or a hold be set between them",
    )


def _by_condition(
    wall: Wall, athlete: Athlete, conditions: Conditions, motion: Motion | None, step: float
) -> str | None:
    """The one condition whose removal opens a way, if there is one."""
    plain = Conditions()
    changed = [f.name for f in fields(Conditions)
               if getattr(conditions, f.name) != getattr(plain, f.name)]
    for name in changed:
        freed = replace(conditions, **{name: getattr(plain, name)})
        if _opens(wall, athlete, freed, motion, step):
            for hold in conditions.avoid if name == "avoid" and len(conditions.avoid) > 1 else ():
                fewer = tuple(other for other in conditions.avoid if other != hold)
                if _opens(wall, athlete, replace(conditions, avoid=fewer), motion, step):
                    return f"without --avoid {hold} there is a way"
            return CONDITION_WORDS[name]
    return None


def _opens(
    wall: Wall, athlete: Athlete, conditions: Conditions, motion: Motion | None, step: float
) -> bool:
    """Whether there is a way under these conditions."""
    climb = prepare(wall, athlete, conditions, motion, step)
    return way_under(climb) is not None


def _least_shortfall(climb: Climb) -> Shortfall | None:
    stances = climb.search.stances
    code = climb.search.code
    missing = np.maximum(-stances.margin, 0.0)
    value = np.zeros(climb.search.graph.nodes)
    value[:code.plain] = np.repeat(missing[stances.sample_stance], code.plain // stances.samples)
    route = way_under(climb, value)
    if route is None:
        return None
    legs = legs_of(climb, route, 0)
    ends = [int(code.sample(route.nodes[0])), *(leg.end for leg in legs)]
    owners = stances.sample_stance[np.array(ends)]
    worst = int(np.argmax(missing[owners]))
    stance = stances.contacts[owners[worst]]
    if worst == 0:
        limb = int(np.flatnonzero(stance >= 0)[0])
    else:
        landed = sorted(legs[worst - 1].landed)
        limb = int(landed[0]) if landed else int(np.flatnonzero(stance != FREE)[0])
    return Shortfall(worst, limb, stance, float(missing[owners[worst]]))


def shortfall(
    climb: Climb, stance: Ints, limb: int, most: float = NEARER
) -> tuple[float, Array]:
    """How much nearer one contact would have to be for a stance to be possible.

    The contact is moved in the surface, straight toward the joint it is reached from, or, if that
    does not do, toward the other contacts. Returns the least distance [m] (inf if ``most`` [m]
    does not do) and the unit direction in surface coordinates (2,).
    """
    ways = _ways(climb, stance, limb)
    for way in ways:
        near, far = 0.0, most
        for _ in range(2):
            tried = np.linspace(near, far, NEARER_STEPS + 1)
            good = np.flatnonzero(_margins_moved(climb, stance, limb, tried, way) >= 0.0)
            if not len(good):
                break
            first = int(good[0])
            near, far = float(tried[max(first - 1, 0)]), float(tried[first])
        else:
            return far, way
    return np.inf, ways[0]


def _ways(climb: Climb, stance: Ints, limb: int) -> list[Array]:
    """Unit directions in the surface: contact to joint, contact to the middle of the others."""
    found = solve(climb.options, climb.linkage, stance[None, :])
    batch = batch_of(climb.options, climb.linkage, stance[None, :])
    root = found.shift[:, 0] + found.turn[..., 0] @ climb.linkage.roots[limb]
    surface = climb.options.surface
    points = contact_points(climb.options, climb.linkage, stance[None, :])[0]
    here = surface.to_surface(points[limb])[:2]
    goals = [surface.to_surface(batch.to_world(root[:, None])[:, 0])[:2]]
    others = [k for k in Limb if k != limb and stance[k] != FREE and stance[k] != FLOOR]
    if others:
        goals.append(surface.to_surface(points[others]).mean(axis=0)[:2])
    return [(goal - here) / max(float(np.hypot(*(goal - here))), 1e-9) for goal in goals]


def _margins_moved(climb: Climb, stance: Ints, limb: int, distances: Array, way: Array) -> Array:
    """Margins (M,) with the contact of ``limb`` moved along ``way`` by ``distances`` (M,) [m]."""
    options, linkage = climb.options, climb.linkage
    contacts = np.repeat(stance[None, :], len(distances), axis=0)
    points = contact_points(options, linkage, contacts)
    strike = (contacts >= 0) & options.strike[np.maximum(contacts, 0)]
    place = options.surface.to_surface(points[0, limb])
    x, y = place[0] + way[0] * distances, place[1] + way[1] * distances
    points[:, limb] = options.surface.to_world(x, y, np.full(len(distances), place[2]))
    batch = stance_batch(linkage, options.surface, contacts, points, strike, options.floor_level)
    return solve_postures(linkage, batch).margin


def _explained(climb: Climb, found: Shortfall) -> WhyNot:
    limb = LIMB_NAMES[found.limb]
    hold = climb.options.name(int(found.stance[found.limb]))
    others = ", ".join(
        f"{LIMB_NAMES[k]} on {climb.options.name(int(found.stance[k]))}"
        for k in Limb if k != found.limb and found.stance[k] != FREE
    )
    nearer, way = shortfall(climb, found.stance, found.limb)
    reach = f"{found.missing * 1e3:.0f} mm more reach in every limb"
    if not np.isfinite(nearer):
        return WhyNot(found.step, limb, hold, found.missing * 1e3, None,
                      f"{reach} would free it (with {others or 'nothing else'} held)")
    text = (f"{hold} moved by {nearer * 1e3:.0f} mm ({way[0] * nearer * 1e3:+.0f} across, "
            f"{way[1] * nearer * 1e3:+.0f} up), or {reach}, would free it"
            + (f" (with {others})" if others else ""))
    return WhyNot(found.step, limb, hold, nearer * 1e3, None, text)
