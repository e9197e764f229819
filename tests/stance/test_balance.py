"""Where contacts best carry a body: cases by hand, and what samples there keep and gain."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, SMEAR
from climbpath.motion.capacity import capacities_of
from climbpath.motion.cones import hold_cones
from climbpath.motion.load import least_load
from climbpath.motion.strength import held_samples
from climbpath.posture.assembly import assemble
from climbpath.posture.com import com_of, joint_weights
from climbpath.posture.limits import slack
from climbpath.posture.samples import HEIGHT_TOLERANCE, REACH_TOLERANCE, Samples
from climbpath.stance.balance import APART, FOOT, HAND, SMEARING, balance_x, with_balance
from climbpath.stance.enumerate import batch_of
from climbpath.study.climb import Conditions, Ground, ground_of
from climbpath.wall import Wall, read_wall
from climbpath.wall.mirror import mirror
from tests.motion.contact_cases import least_load_by_highs
from tests.motion.test_strength import with_capacity
from tests.study.solved import MAN, WOMAN, Body
from tests.walls_made import athlete, small_wall

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

STEP = 0.1
LANE = Path(__file__).parents[2] / "walls" / "published_lane.toml"


def at(*x: float) -> Array:
    """Points of one stance, (1, 4, 3), with these x."""
    points = np.zeros((1, 4, 3))
    points[0, :, 0] = x
    points[0, :, 1] = [2.0, 2.0, 0.5, 0.5]
    return points


@pytest.mark.parametrize(
    ("contacts", "expected"),
    [
        # Hands at 1 and 2 m, feet at 1.2 and 1.4 m.
        ((0, FREE, FREE, FREE), 1.0),
        ((0, 1, FREE, FREE), 1.5),
        ((FREE, FREE, 2, 3), 1.3),
        ((0, 1, 2, 3), (HAND * 3.0 + FOOT * 2.6) / (2.0 * HAND + 2.0 * FOOT)),
        ((0, FREE, FREE, 3), (HAND * 1.0 + FOOT * 1.4) / (HAND + FOOT)),
        # A foot on the floor stands anywhere, a smear bears little.
        ((0, 1, FLOOR, FLOOR), 1.5),
        ((0, FREE, FLOOR, 3), (HAND * 1.0 + FOOT * 1.4) / (HAND + FOOT)),
        ((FREE, 1, SMEAR, FREE), (HAND * 2.0 + SMEARING * 1.2) / (HAND + SMEARING)),
        # Both hands on one hold count twice.
        ((0, 0, 2, FREE), (HAND * 3.0 + FOOT * 1.2) / (2.0 * HAND + FOOT)),
        ((FREE, FREE, FREE, FLOOR), np.nan),
        ((FREE, FREE, FREE, FREE), np.nan),
    ],
)
def test_the_best_x_is_the_mean_of_what_bears(
    contacts: tuple[int, int, int, int], expected: float
) -> None:
    found = balance_x(np.array([contacts]), at(1.0, 2.0, 1.2, 1.4))
    np.testing.assert_allclose(found, [expected], rtol=1e-12, equal_nan=True)


def test_the_best_x_moves_and_turns_with_the_contacts() -> None:
    rng = np.random.default_rng(3)
    contacts = rng.integers(-3, 4, (200, 4))
    points = rng.normal(1.5, 0.4, (200, 4, 3))
    found = balance_x(contacts, points)
    assert 0.5 < np.isfinite(found).mean() < 1.0
    aside = balance_x(contacts, points + np.array([0.7, 3.0, -1.0]))
    np.testing.assert_allclose(aside, found + 0.7, atol=1e-12, equal_nan=True)
    turned = balance_x(contacts[:, [1, 0, 3, 2]], points[:, [1, 0, 3, 2]] * [-1.0, 1.0, 1.0])
    np.testing.assert_allclose(turned, -found, atol=1e-12, equal_nan=True)


# Samples of whole walls


@lru_cache(maxsize=8)
def ground(seed: int, body: Body = MAN, turned: bool = False, balanced: bool = True) -> Ground:
    wall = small_wall(seed)
    return ground_of(mirror(wall) if turned else wall, athlete(*body), Conditions(),
                     STEP, balanced)


def kinds(made: Ground) -> tuple[Ints, Ints]:
    """The first sample of every stance and level, and the second or -1."""
    stances = made.stances
    new = np.ones(stances.samples, dtype=bool)
    new[1:] = ((np.diff(stances.sample_stance) != 0) | (np.diff(stances.level) != 0))
    first = np.flatnonzero(new)
    number = np.diff(np.append(first, stances.samples))
    assert number.max() <= 2
    return first, np.where(number == 2, first + 1, -1)


@pytest.mark.parametrize(("seed", "body"), [(0, MAN), (4, WOMAN)])
def test_samples_are_bodies_that_the_limits_allow(seed: int, body: Body) -> None:
    made = ground(seed, body)
    stances, linkage = made.stances, made.linkage
    owner = stances.sample_stance
    batch = batch_of(made.options, linkage, stances.contacts[owner])
    spare, hard = slack(linkage, batch, stances.turn, stances.shift)
    assert spare.min() >= -REACH_TOLERANCE
    assert hard.min() >= -REACH_TOLERANCE
    assert (stances.spare <= stances.margin[owner] + REACH_TOLERANCE).all()
    # The centre of mass is that of the assembled body, on its level of the lattice.
    joints = assemble(linkage, batch, stances.turn, stances.shift)
    com = com_of(joint_weights(linkage), joints)
    world = batch.to_world(com[:, None])[:, 0].T
    np.testing.assert_allclose(world, stances.com, atol=2e-6)
    off = np.abs(stances.com[:, 1] - stances.lattice.height(stances.level))
    # A stance into which no level falls keeps the solver's own posture, in either search.
    own = off > HEIGHT_TOLERANCE
    assert off.max() <= stances.lattice.step / 2.0 + 1e-9
    assert own.mean() < 0.05
    assert (own & (np.diff(stances.first_sample)[owner] > 1)).mean() < 0.01


def test_samples_nearest_the_line_are_those_there_were() -> None:
    """The others come in addition, in the order stance, level, kind."""
    both, single = ground(0).stances, ground(0, balanced=False).stances
    key = both.sample_stance * 1000 + both.level
    assert (np.diff(key) >= 0).all()
    first, second = kinds(ground(0))
    assert 0.2 < (second >= 0).mean() < 1.0
    places = {tuple(row) for row in np.stack([both.sample_stance, both.level], axis=1).tolist()}
    kept = [(s, k) for s, k in zip(single.sample_stance, single.level, strict=True)]
    assert {(int(s), int(k)) for s, k in kept} <= places
    own = {(int(both.sample_stance[f]), int(both.level[f])): both.com[f] for f in first}
    gap = [np.abs(own[int(s), int(k)] - com).max() for (s, k), com in zip(kept, single.com,
                                                                        strict=True)]
    assert max(gap) < 1e-9


def test_second_samples_stand_apart_and_nearer_to_the_best_x() -> None:
    made = ground(0)
    stances = made.stances
    first, second = kinds(made)
    first, second = first[second >= 0], second[second >= 0]
    x = stances.com[:, 0]
    assert (np.abs(x[second] - x[first]) > APART).all()
    best = balance_x(stances.contacts, stances.points)[stances.sample_stance[second]]
    assert np.isfinite(best).all()
    nearer = np.abs(x[second] - best) <= np.abs(x[first] - best) + 1e-6
    # Both searches try few postures: the one about the line may chance on the better.
    assert nearer.mean() > 0.99
    there = np.abs(x[second] - best) < 0.02
    assert there.mean() > 0.5


def test_levels_that_only_one_search_finds_are_kept() -> None:
    def samples(rows: list[tuple[int, int, float]]) -> Samples:
        stance, level, x = (np.array(column) for column in zip(*rows, strict=True))
        zeros = np.zeros((3, len(rows)))
        com = np.stack([x, np.zeros(len(rows)), np.zeros(len(rows))])
        return Samples(stance, level, np.zeros((3, 3, len(rows))), zeros, com, x)

    near = samples([(0, -2, 1.0), (0, 1, 1.0), (2, 3, 1.0)])
    best = samples([(0, -2, 1.03), (0, 0, 1.5), (0, 1, 1.5), (1, 2, 1.02), (2, 3, 1.041)])
    found = with_balance(near, best)
    rows = list(zip(found.stance.tolist(), found.level.tolist(), found.com[0].tolist(),
                    strict=True))
    assert rows == [(0, -2, 1.0), (0, 0, 1.5), (0, 1, 1.0), (0, 1, 1.5), (1, 2, 1.02),
                    (2, 3, 1.0), (2, 3, 1.041)]
    assert found.spare.tolist() == [row[2] for row in rows]


SAMPLES_MIRRORED, PLACES_MIRRORED = 0.99, 0.97
"""Shares of the samples that the mirrored wall has too, and of those that stand at the mirrored
place to 10 µm: the searches for samples try few postures, and rounding decides between equals."""


@pytest.mark.parametrize("seed", [0, 1])
def test_a_mirrored_wall_has_mirrored_samples(seed: int) -> None:
    width, rows = small_wall(seed).width, []
    for turned in (False, True):
        made = ground(seed, turned=turned)
        stances, swap = made.stances, [1, 0, 3, 2] if turned else [0, 1, 2, 3]
        found: dict[tuple[object, ...], list[float]] = {}
        for owner, level, com in zip(stances.sample_stance, stances.level, stances.com,
                                     strict=True):
            names = [made.options.name(int(c)) for c in stances.contacts[owner]]
            key = (*(names[limb] for limb in swap), int(level))
            found.setdefault(key, []).append(width - com[0] if turned else com[0])
        rows.append(found)
    here, there = rows
    assert {key[:4] for key in here} == {key[:4] for key in there}
    both = here.keys() & there.keys()
    assert len(both) > SAMPLES_MIRRORED * max(len(here), len(there))
    alike = [len(here[key]) == len(there[key]) and np.allclose(here[key], there[key], atol=1e-5)
             for key in both]
    assert np.mean(alike) > PLACES_MIRRORED


# What it gains


def shares(wall: Wall, made: Ground, samples: Ints) -> Array:
    """Strength of samples as a share of that at the best x of the same posture, where any holds.

    With the x of the centre of mass free the moment about the axis out of the wall may be any, so
    that is the load without a bound on it.
    """
    own = capacities_of(with_capacity(MAN))
    held = held_samples(made.options, hold_cones(wall, made.options), made.linkage, own,
                        made.stances, samples)
    free = held.turn.copy()
    free[:, 2] = 1e3
    loads, best = least_load(held).load, least_load(replace(held, turn=free)).load
    fine = np.isfinite(best)
    # Spot check of both with another solver.
    need = np.broadcast_to(np.array([0.0, 1.0, 0.0]), (held.size, 3))
    for k in np.flatnonzero(fine)[:5]:
        expected = least_load_by_highs(replace(held, turn=free), need, int(k))
        assert best[k] == pytest.approx(expected, rel=1e-5)
    return np.asarray(best[fine] / loads[fine])


@pytest.mark.slow
def test_samples_there_have_nearly_the_strength_of_the_best_x() -> None:
    """The figures of the docstring of ``climbpath.stance.balance``."""
    wall = read_wall(str(LANE))
    made = ground_of(wall, with_capacity(MAN), Conditions(), STEP)
    first, second = kinds(made)
    owner = made.stances.sample_stance
    pads = np.flatnonzero(made.options.strike)
    bears = np.asarray(~np.isin(made.stances.contacts[owner], pads).any(axis=1))
    first, second = first[bears[first]], second[bears[first]]
    chosen = np.random.default_rng(0).choice(len(first), 600, replace=False)
    nearest = first[chosen]
    balanced = np.where(second[chosen] >= 0, second[chosen], nearest)
    near, there = shares(wall, made, nearest), shares(wall, made, balanced)
    assert np.median(there) == pytest.approx(0.99, abs=0.01)
    assert np.median(near) == pytest.approx(0.87, abs=0.03)
    assert np.quantile(there, 0.1) > np.quantile(near, 0.1) + 0.2
