"""The chance of missing a hold, by hand."""

from __future__ import annotations

import math

import numpy as np
import pytest

from climbpath.motion.miss import MissRule

RULE = MissRule(still=0.01, timing=0.02, catch=0.03, lost=1.5)


def two_tails(deviations: float) -> float:
    """2 Φ(−z) = erfc(z / √2)."""
    return math.erfc(deviations / math.sqrt(2.0))


@pytest.mark.parametrize(
    ("spare", "speed", "deviations"),
    [
        (0.0, 0.0, 3.0),    # 30 mm over 10 mm
        (0.0, 1.0, 1.0),    # 30 mm over 10 + 20 mm
        (0.03, 1.0, 2.0),
        (0.0, 2.5, 0.5),
        (0.07, 2.0, 2.0),
        (-0.05, 1.0, 1.0),  # nothing to spare is not less than nothing
        (0.03, -1.0, 2.0),  # downward is as quick
        (math.inf, 3.0, math.inf),
    ],
)
def test_chances_are_the_tails_of_a_normal_spread(
    spare: float, speed: float, deviations: float
) -> None:
    chance = RULE.chance(np.array([spare]), np.array([speed]))
    assert chance == pytest.approx([two_tails(deviations)], rel=1e-12)
    assert RULE.cost(np.array([spare]), np.array([speed])) == pytest.approx(1.5 * chance)


def test_tails_of_the_normal_are_those_of_tables() -> None:
    """P(|z| > 1, 2, 3) = .3173, .0455, .0027 (any table of the normal distribution)."""
    spare, speed = np.array([0.0, 0.03, 0.06]), np.ones(3)
    assert RULE.chance(spare, speed) == pytest.approx([0.3173, 0.0455, 0.0027], abs=5e-5)


def test_reach_to_spare_helps_and_speed_harms() -> None:
    spare, speed = np.meshgrid(np.linspace(0.0, 0.3, 7), np.linspace(0.0, 4.0, 9))
    chance = MissRule().chance(spare, speed)
    assert chance.shape == spare.shape
    assert ((chance >= 0.0) & (chance <= 1.0)).all()
    assert (np.diff(chance, axis=1) < 0.0).all()
    assert (np.diff(chance, axis=0) > 0.0).all()
