"""Where reach would do and force does not: how much more it takes, and in which move.

All strengths are raised together until a way opens; the move of that way which a little less would
not make is named, with the upward force that its contacts lack. Where no strength of what is there
opens one, since what bears nothing stays at nothing, it is asked how strongly hands would have to
pull.
"""

from __future__ import annotations

from bisect import bisect_left
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from climbpath.body import Athlete
from climbpath.contacts import FREE, LIMB_NAMES
from climbpath.errors import TooLargeError
from climbpath.motion.capacity import capacities_of
from climbpath.motion.force import ForceMotion
from climbpath.motion.model import Motion, PacedMotion
from climbpath.study.climb import Climb, Conditions, Ground, climb_on, ground_of
from climbpath.study.decode import Leg, legs_of
from climbpath.study.opening import way_under
from climbpath.study.results import WhyNot
from climbpath.wall import Wall

Ints = NDArray[np.int64]

MOST_STRONGER = 16.0
"""Strengths are raised up to so many times what they are."""

HALVINGS = 7
"""How often the range of more strength is halved: to 2 % of what is there."""

PULLS = (0.1, 0.25, 0.5, 0.75, 1.0, 1.5)
"""Pulls of each hand that are tried where it has none, body weights; it presses with half."""


def by_strength(
    wall: Wall, athlete: Athlete, conditions: Conditions, motion: Motion | None, step: float
) -> WhyNot | None:
    """What force is missing, or None where force is not what stands in the way."""
    rule = motion or ForceMotion(capacities_of(athlete))
    if not isinstance(rule, ForceMotion):
        return None
    try:
        ground = ground_of(wall, athlete, conditions, step)
        if way_under(climb_on(ground, athlete, conditions, PacedMotion())) is None:
            return None
    except TooLargeError:
        return None
    low, high = 1.0, MOST_STRONGER
    found = _way(ground, athlete, conditions, rule, high)
    if found is None:
        return _by_pull(ground, athlete, conditions, rule)
    for _ in range(HALVINGS):
        middle = float(np.sqrt(low * high))
        tried = _way(ground, athlete, conditions, rule, middle)
        if tried is None:
            low = middle
        else:
            high, found = middle, tried
    return _named(found, high)


def _way(ground: Ground, athlete: Athlete, conditions: Conditions, rule: ForceMotion, more: float
         ) -> Climb | None:
    climb = climb_on(ground, athlete, conditions, replace(rule, stronger=rule.stronger * more))
    return climb if way_under(climb) is not None else None


def _by_pull(ground: Ground, athlete: Athlete, conditions: Conditions, rule: ForceMotion
             ) -> WhyNot | None:
    """How strongly hands would have to pull where more of what is there does not help."""
    own = rule.capacities
    least = float(own.hand_pull.min())

    def opens(pull: float) -> bool:
        stronger = replace(own, hand_pull=np.maximum(own.hand_pull, pull),
                           hand_press=np.maximum(own.hand_press, pull / 2.0))
        climb = climb_on(ground, athlete, conditions, replace(rule, capacities=stronger))
        return way_under(climb) is not None

    tried = [pull for pull in PULLS if pull > least]
    if not tried or not opens(tried[-1]):
        return None
    pull = tried[bisect_left(tried[:-1], True, key=opens)]
    return WhyNot(
        0, "LH" if own.hand_pull[0] <= own.hand_pull[1] else "RH", None, None, pull - least,
        "feet alone hold no body on this wall, whatever their strength: with hands that pull "
        f"with {pull:g} body weights each, and press with half of that, there is a way",
    )


def _named(climb: Climb, more: float) -> WhyNot:
    """The move of the way that needs most of the strength it has."""
    route = way_under(climb)
    if route is None:  # the climb was kept because it has one
        return WhyNot(0, None, None, None, None, "more strength would free a way")
    stances, code = climb.search.stances, climb.search.code
    legs = legs_of(climb, route, 0)
    samples = code.sample(route.nodes)
    weakest, place = np.inf, 0
    for number, sample in enumerate(samples):
        strength = climb.search.strength[sample] if sample >= 0 else np.inf
        on_hands = sample >= 0 and (stances.contacts[stances.sample_stance[sample], :2] >= 0).any()
        struck = sample >= 0 and strength == 0.0
        if on_hands and not struck and strength < weakest:
            weakest, place = float(strength), number
    own = weakest / more
    step, limb, hold = _landing_after(climb, legs, samples, place)
    held = stances.contacts[stances.sample_stance[samples[place]]]
    where = ", ".join(f"{LIMB_NAMES[k]} on {climb.options.name(int(held[k]))}"
                      for k in range(4) if held[k] != FREE)
    return WhyNot(
        step, limb, hold, None, (more - 1.0) * own,
        f"every limb {100.0 * (more - 1.0):.0f} % stronger would free a way: at its weakest place "
        f"({where}) the contacts then give {weakest:.2f} body weights upward, and now {own:.2f}",
    )


def _landing_after(climb: Climb, legs: list[Leg], samples: Ints, place: int
                   ) -> tuple[int, str | None, str | None]:
    """Step, limb and hold of the first landing at or after a place of the route."""
    stances = climb.search.stances
    ends = [leg.end for leg in legs]
    for number, leg in enumerate(legs, start=1):
        reached = np.flatnonzero(samples == ends[number - 1])
        if len(reached) and reached[-1] >= place and leg.landed:
            limb = min(leg.landed)
            contact = int(stances.contacts[stances.sample_stance[leg.end], limb])
            return number, LIMB_NAMES[limb], climb.options.name(contact)
    return len(legs), None, None
