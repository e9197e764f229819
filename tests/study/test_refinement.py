"""Best times converge as the lattice of heights and the levels of speed are refined."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from climbpath.body import Athlete
from climbpath.motion.capacity import capacities_of
from climbpath.motion.force import ForceMotion, speed_levels
from climbpath.motion.model import Motion
from climbpath.study.climb import Conditions, prepare
from climbpath.study.plan import PlanRequest, best_route
from climbpath.wall import Wall
from tests.study.solved import MAN
from tests.walls_made import athlete, ladder, small_wall

CAPACITY = {
    "hand_pull_bw": 0.9, "hand_press_bw": 0.5, "foot_push_bw": 1.6, "foot_smear_bw": 0.4,
    "foot_bent_share": 0.5, "hand_matched_share": 0.5, "hand_speed_m_s": 9.0,
    "foot_speed_m_s": 9.0, "fade_share": 0.1, "turn_rad_s2": 12.0, "reach_speed_m_s": 6.0,
    "settle_s": 0.05, "reaction_s": 0.2,
}
STEPS = (0.2, 0.1, 0.05, 0.025)


def best_us(wall: Wall, somebody: Athlete, motion: Motion, step: float) -> int:
    climb = prepare(wall, somebody, Conditions(smears=False), motion, step)
    found = best_route(climb, PlanRequest())
    assert found is not None
    return found.cost


def best_times(wall: Wall) -> list[int]:
    """Best times [us] for each step, with the levels of speed as much finer."""
    somebody = replace(athlete(*MAN), capacity=CAPACITY)
    motion: Motion = ForceMotion(capacities_of(somebody), speeds=speed_levels(4, 0.2))
    times = []
    for step in STEPS:
        times.append(best_us(wall, somebody, motion, step))
        motion = motion.finer()
    return times


@pytest.mark.slow
@pytest.mark.parametrize("wall", [small_wall(1, 6), small_wall(2, 6), ladder(3)],
                         ids=["small wall", "another small wall", "ladder"])
def test_best_times_fall_and_converge_with_a_finer_lattice(wall: Wall) -> None:
    """Heights and speeds of the coarser lattices are among those of the finer."""
    times = best_times(wall)
    gains = -np.diff(times)
    assert (gains >= 0).all()
    assert (np.diff(gains) < 0).all()
    # What is left is about as much again as the last gain.
    assert gains[-1] < 0.08 * times[-1]


@pytest.mark.slow
def test_best_times_fall_where_a_finer_lattice_opens_another_way() -> None:
    """Gains need not shrink from one lattice to the next: another sequence may become the best."""
    times = best_times(small_wall(0, 6))
    assert (np.diff(times) <= 0).all()
    assert times[-1] < times[0]
