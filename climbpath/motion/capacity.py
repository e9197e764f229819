"""What each limb can bear in a posture, in body weights: pure functions on arrays of stances.

    hand   quality × (press + (pull − press) × level), level 0 at the hip to 1 at the shoulder,
    foot   quality × push × (1 down to the bent share between 90 and 140 degrees of the knee)
    smear  the same, at most the smear's own

and all of it × (1 − fade × y / height) × max(0, 1 − v / V0), v the limb's own shortening speed.
Defaults by sex with their sources: ``tables/capacity_defaults.toml``.
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from functools import cache
from importlib.resources import files
from math import inf, radians
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.errors import DataError, Problem

Array = NDArray[np.float64]
Flags = NDArray[np.bool_]

SIDED = ("hand_pull", "hand_press", "foot_push", "foot_smear")
"""Capacities in body weights; with ``_left`` or ``_right`` before the unit for one side."""

BENT_FROM = radians(90.0)
BENT_TO = radians(140.0)
"""Knee flexion from which a leg weakens, and at which its bent share is left."""

_PLAIN = {
    "foot_bent_share": (0.0, 1.0),
    "hand_matched_share": (0.0, 1.0),
    "hand_speed_m_s": (0.1, inf),
    "foot_speed_m_s": (0.1, inf),
    "fade_share": (0.0, 0.95),
    "turn_rad_s2": (0.0, inf),
    "reach_speed_m_s": (0.5, 30.0),
    "settle_s": (0.0, 1.0),
    "reaction_s": (0.0, 2.0),
}
"""Keys without sides, and the values they may have."""

KEYS = (*(f"{name}{side}_bw" for name in SIDED for side in ("", "_left", "_right")), *_PLAIN)
"""Every key of an athlete's [capacity] table that is read here."""

_OWN = ("hand_", "foot_", "fade_", "turn_", "reach_", "settle_", "reaction_")
"""What begins like this is meant for here: an unknown one is a mistake in the file."""


@dataclass(frozen=True)
class Capacities:
    """One athlete's. ``hand_pull``, ``hand_press``, ``foot_push``, ``foot_smear`` (2,): left and
    right [body weights]; ``foot_bent_share``, ``hand_matched_share``, ``fade``: shares;
    ``hand_speed``, ``foot_speed``: V0 [m/s]; ``turn`` [rad/s²]; ``reach_speed`` [m/s] of a free
    limb; ``settle`` [s] from a contact until it bears; ``reaction`` [s] to the start signal.
    """

    hand_pull: Array
    hand_press: Array
    foot_push: Array
    foot_smear: Array
    foot_bent_share: float
    hand_matched_share: float
    hand_speed: float
    foot_speed: float
    fade: float
    turn: float
    reach_speed: float = 5.0
    settle: float = 0.06
    reaction: float = 0.20

    @property
    def speed(self) -> float:
        """The one speed of shortening at which the fast form lets all force be gone [m/s]."""
        return min(self.hand_speed, self.foot_speed)


@dataclass(frozen=True)
class LimbState:
    """What the capacities of N stances depend on.

    ``quality`` (N, 4): of the hold for that limb, 1 on the floor or the bare surface, 0 for a limb
    that bears nothing. ``level`` (N, 2): of each hand's hold along the trunk, 0 at the hips and 1
    at the shoulders. ``knee`` (N, 2) [rad]: flexion, 0 for a straight leg. ``matched`` (N,) bool:
    both hands on one hold. ``smear`` (N, 2) bool. ``height`` (N,): share of the wall's height.
    ``speed`` (N, 4) [m/s]: how fast each limb shortens (a hand) or lengthens (a foot).
    """

    quality: Array
    level: Array
    knee: Array
    matched: Flags
    smear: Flags
    height: Array
    speed: Array | float = 0.0


@cache
def capacity_defaults(sex: str) -> Mapping[str, float]:
    """Default values by key."""
    path = files("climbpath.motion") / "tables" / "capacity_defaults.toml"
    tables: dict[str, Any] = tomllib.loads(path.read_text(encoding="utf-8"))
    return MappingProxyType({**tables["both"], **tables[sex]})


def _problems(given: Mapping[str, float]) -> list[Problem]:
    problems = []
    for key, value in given.items():
        place = f"capacity.{key}"
        if key not in KEYS:
            if key.startswith(_OWN):
                near = get_close_matches(key, KEYS, n=1)
                hint = near[0] if near else f"one of {', '.join(KEYS)}"
                problems.append(Problem("", place, "an unknown key", hint))
            continue
        low, high = _PLAIN.get(key, (0.0, inf))
        if not low <= value <= high:
            expected = f"at least {low:g}" if high == inf else f"{low:g} to {high:g}"
            problems.append(Problem("", place, f"{value:g}", expected))
    return problems


def capacities_of(athlete: Athlete) -> Capacities:
    """Capacities of an athlete: what is given, else the defaults of the sex.

    Keys for other models are left alone. DataError with every value that cannot be, and every
    unknown key that begins like those read here.
    """
    given = athlete.capacity
    problems = _problems(given)
    if problems:
        raise DataError(problems)
    values = {**capacity_defaults(athlete.sex), **given}

    def sides(name: str) -> Array:
        both = values[f"{name}_bw"]
        return np.array([values.get(f"{name}_{side}_bw", both) for side in ("left", "right")])

    return Capacities(
        hand_pull=sides("hand_pull"),
        hand_press=sides("hand_press"),
        foot_push=sides("foot_push"),
        foot_smear=sides("foot_smear"),
        foot_bent_share=values["foot_bent_share"],
        hand_matched_share=values["hand_matched_share"],
        hand_speed=values["hand_speed_m_s"],
        foot_speed=values["foot_speed_m_s"],
        fade=values["fade_share"],
        turn=values["turn_rad_s2"],
        reach_speed=values["reach_speed_m_s"],
        settle=values["settle_s"],
        reaction=values["reaction_s"],
    )


def hand_strength(capacities: Capacities, level: Array, matched: Flags) -> Array:
    """Each hand on a hold of quality 1, (N, 2); arguments as in ``LimbState``."""
    pull, press = capacities.hand_pull, capacities.hand_press
    strength = press + (pull - press) * np.clip(level, 0.0, 1.0)
    return np.where(matched[:, None], capacities.hand_matched_share, 1.0) * strength


def foot_strength(capacities: Capacities, knee: Array, smear: Flags) -> Array:
    """Each foot on a hold of quality 1, (N, 2); arguments as in ``LimbState``."""
    bend = np.clip((knee - BENT_FROM) / (BENT_TO - BENT_FROM), 0.0, 1.0)
    strength = capacities.foot_push * (1.0 - (1.0 - capacities.foot_bent_share) * bend)
    return np.where(smear, np.minimum(strength, capacities.foot_smear), strength)


def limb_capacities(capacities: Capacities, state: LimbState) -> Array:
    """What each limb can bear, (N, 4) [body weights]."""
    strength = np.concatenate([
        hand_strength(capacities, state.level, state.matched),
        foot_strength(capacities, state.knee, state.smear),
    ], axis=1)
    fade = 1.0 - capacities.fade * np.clip(state.height, 0.0, 1.0)
    fastest = np.array([capacities.hand_speed] * 2 + [capacities.foot_speed] * 2)
    # A limb that gives way under load is taken to be as strong as at rest.
    moving = np.clip(1.0 - np.asarray(state.speed) / fastest, 0.0, 1.0)
    return np.asarray(strength * state.quality * fade[:, None] * moving)
