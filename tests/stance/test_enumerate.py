"""The level-wise search against trying every combination, and what must hold of its stances."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from itertools import combinations, product

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, SMEAR, Limb
from climbpath.errors import TooLargeError
from climbpath.posture.samples import Lattice
from climbpath.stance.enumerate import Allowed, Found, _Search, all_stances, solve
from climbpath.stance.options import ContactOptions, contact_options, contact_points
from climbpath.stance.stances import StanceSet, stance_keys, stance_set
from climbpath.wall import Hold, Section, Wall
from tests.posture.drawn import LINKAGES

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

EDGE = 1e-3
"""Stances nearer to zero margin than this (m) may fall on either side."""

PAD = Hold("pad", 1.5, 3.1, use="strike", outline=((-0.2, -0.1), (0.2, -0.1), (0.0, 0.2)))


def wall(seed: int, number: int, overhang_deg: float = 5.0, pad: bool = False) -> Wall:
    """A low wall with a few random holds: hands, feet and both, some for one hand only."""
    rng = np.random.default_rng(seed)
    holds = []
    for k in range(number):
        x, y = rng.uniform(1.0, 2.0), rng.uniform(0.3, 2.6)
        use = ("both", "both", "hand", "foot")[int(rng.integers(0, 4))]
        holds.append(Hold(f"h{k}", round(x, 3), round(y, 3), use, depth=0.03,
                          hands=int(rng.integers(1, 3))))
    section = Section(3.5, float(np.deg2rad(overhang_deg)))
    return Wall("small", 3.0, 1.5, 0.0, (section,), (*holds, *((PAD,) if pad else ())), (), ())


def stances_of(given: Wall, which: int = 0, allowed: Allowed | None = None
               ) -> tuple[ContactOptions, Found]:
    options = contact_options(given)
    return options, all_stances(options, LINKAGES[which], allowed or Allowed())


def named(options: ContactOptions, found: Found) -> dict[tuple[str, ...], float]:
    """Margin of each stance, by the names of its contacts."""
    return {tuple(options.name(int(c)) for c in row): float(m)
            for row, m in zip(found.contacts, found.margin, strict=True)}


def everything(options: ContactOptions, smears: bool) -> Ints:
    """Every combination of contacts that the rules allow, whether a body can make it or not."""
    hands = [FREE, *np.flatnonzero(options.hand)]
    feet = [FREE, FLOOR, *((SMEAR,) if smears else ()), *np.flatnonzero(options.foot)]
    rows = np.array(list(product(hands, hands, feet, feet)), dtype=np.int64)
    pad = np.zeros(options.holds + 1, dtype=bool)
    pad[:-1] = options.strike
    struck = np.where(rows[:, :2] >= 0, pad[rows[:, :2]], False)
    # A hold that fits one hand is taken to fit one foot, too.
    matched = np.zeros(len(rows), dtype=bool)
    for first in (0, 2):
        same = (rows[:, first] == rows[:, first + 1]) & (rows[:, first] >= 0)
        matched |= same & (options.hands[np.maximum(rows[:, first], 0)] < 2)
    smearing = (rows[:, 2:] == SMEAR).any(axis=1)
    held = ((rows[:, :2] >= 0) & ~struck).any(axis=1)
    # A hold is in every stance; a smear needs a hand on a hold; only one hand strikes at a time.
    good = (rows >= 0).any(axis=1) & ~matched & (~smearing | held) & (struck.sum(axis=1) < 2)
    return np.asarray(rows[good])


@cache
def compared(seed: int, number: int, which: int, pad: bool) -> tuple[ContactOptions, Found, Found]:
    given = wall(seed, number, pad=pad)
    options, found = stances_of(given, which)
    return options, found, solve(options, LINKAGES[which], everything(options, True))


CASES = ((1, 5, 0, False), (2, 6, 1, False), (3, 5, 0, True))


@pytest.mark.parametrize(("seed", "number", "which", "pad"), CASES)
def test_nothing_is_found_that_trying_everything_does_not(
    seed: int, number: int, which: int, pad: bool
) -> None:
    options, found, tried = compared(seed, number, which, pad)
    brute = named(options, tried)
    mine = named(options, found)
    assert len(mine) == len(found.margin)
    assert (found.margin >= 0.0).all()
    assert mine.keys() <= brute.keys()
    assert all(brute[key] > -EDGE for key in mine)


def test_margins_do_not_depend_on_what_is_solved_together() -> None:
    options, found, tried = compared(3, 5, 0, True)
    brute = named(options, tried)
    gaps = {key: margin - brute[key] for key, margin in named(options, found).items()}
    assert max(np.abs([*gaps.values()])) < 1e-9, {k: g for k, g in gaps.items() if abs(g) > EDGE}


def test_nothing_is_missed_that_trying_everything_finds() -> None:
    missed: dict[tuple[object, ...], float] = {}
    number = 0
    for seed, holds, which, pad in CASES:
        options, found, tried = compared(seed, holds, which, pad)
        mine = named(options, found)
        possible = {key: margin for key, margin in named(options, tried).items() if margin > EDGE}
        number += len(possible)
        missed |= {(seed, *key): m for key, m in possible.items() if key not in mine}
    print(f"\n{len(missed)} of {number} missed: {missed}")
    assert missed == {}


@pytest.mark.parametrize("sections", [(5.0,), (-5.0, 30.0)])
@pytest.mark.parametrize("limbs", list(combinations(Limb, 2)))
def test_pairs_ruled_out_without_solving_are_none_that_count(
    sections: tuple[float, ...], limbs: tuple[Limb, Limb]
) -> None:
    """Holds all over a wall: what the search leaves out misses more than it would extend."""
    rng = np.random.default_rng(8)
    holds = tuple(Hold(f"h{k}", round(rng.uniform(0.0, 3.0), 3), round(rng.uniform(0.3, 5.0), 3))
                  for k in range(30))
    parts = tuple(Section(5.5 / len(sections), float(np.deg2rad(deg))) for deg in sections)
    options = contact_options(Wall("wide", 3.0, 1.5, 0.0, parts, holds, (), ()))
    search = _Search(options, LINKAGES[0], Allowed(), 0.0, np.inf)
    kept = search._near(search._choices(), limbs)
    left_out = np.ones((options.holds + 1, options.holds + 1), dtype=bool)
    left_out[kept[:, 0], kept[:, 1]] = False
    rows = np.argwhere(left_out[:-1, :-1])
    assert len(rows) > 100
    contacts = np.full((len(rows), 4), FREE, dtype=np.int64)
    contacts[:, list(limbs)] = rows
    # Matching may still move a hand or foot of a pair, unless both of a kind have their hold.
    both = (limbs[0] <= Limb.RH) == (limbs[1] <= Limb.RH)
    least = search.keep_above if both else search.extend_above
    assert solve(options, LINKAGES[0], contacts).margin.max() < least


def test_smears_only_add() -> None:
    options, found = stances_of(wall(4, 6))
    _, bare = stances_of(wall(4, 6), allowed=Allowed(smears=False))
    without = named(options, bare)
    assert not (bare.contacts == SMEAR).any()
    assert (found.contacts == SMEAR).any()
    kept = {key: margin for key, margin in named(options, found).items() if "smear" not in key}
    assert kept.keys() == without.keys()
    assert max(abs(kept[key] - without[key]) for key in kept) < EDGE


def test_no_matching_leaves_out_matched_hands_alone() -> None:
    options, found = stances_of(wall(5, 6))
    _, apart = stances_of(wall(5, 6), allowed=Allowed(matching=False))
    matched = {key for key in named(options, found) if key[0] == key[1] != "free"}
    assert matched
    # Triples and quads grown from a matched pair go with it, nothing else.
    assert named(options, apart).keys() == named(options, found).keys() - matched


def test_avoided_holds_are_in_no_stance() -> None:
    given = wall(6, 6)
    options = contact_options(given)
    _, found = stances_of(given, allowed=Allowed(avoid=frozenset({1})))
    left_out = options.ids[1]
    others = replace(given, holds=tuple(h for h in given.holds if h.id != left_out))
    fewer, expected = stances_of(others)
    assert named(options, found).keys() == named(fewer, expected).keys()


def test_matched_hands_stand_half_a_breadth_to_either_side() -> None:
    options = contact_options(wall(7, 6))
    hold = int(np.flatnonzero(options.hand & (options.hands == 2))[0])
    other = int(np.flatnonzero(options.hand)[-1])
    assert hold != other
    contacts = np.array([[hold, hold, FREE, FREE], [hold, other, FREE, FREE]])
    points = contact_points(options, LINKAGES[0], contacts)
    half = np.array([LINKAGES[0].hand_breadth / 2, 0.0, 0.0])
    middle = options.point[hold]
    assert points[0, 0] == pytest.approx(middle - half)
    assert points[0, 1] == pytest.approx(middle + half)
    assert points[1, 0] == pytest.approx(middle)


def test_order_and_names_of_holds_do_not_matter() -> None:
    given = wall(8, 7)
    options, found = stances_of(given)
    turned, again = stances_of(replace(given, holds=given.holds[::-1]))
    assert options.ids == turned.ids
    assert named(options, found) == named(turned, again)


def test_one_more_hold_keeps_every_stance() -> None:
    given = wall(9, 6)
    options, found = stances_of(given)
    more = replace(given, holds=(*given.holds, Hold("new", 1.47, 1.55, depth=0.03)))
    wider, grown = stances_of(more)
    before, after = named(options, found), named(wider, grown)
    assert before.keys() <= after.keys()
    assert max(abs(before[key] - after[key]) for key in before) < EDGE


def test_too_many_stances_are_refused() -> None:
    options = contact_options(wall(1, 6))
    with pytest.raises(TooLargeError, match="stances for this body"):
        all_stances(options, LINKAGES[0], Allowed(), memory_bytes=1e4)


@pytest.fixture(scope="module")
def linked() -> tuple[ContactOptions, StanceSet]:
    options = contact_options(wall(10, 7, pad=True))
    return options, stance_set(options, LINKAGES[0], Allowed(), 1.5, Lattice(0.0, 0.15))


def test_stances_are_in_canonical_order(linked: tuple[ContactOptions, StanceSet]) -> None:
    options, found = linked
    keys = stance_keys(found.contacts, options.holds)
    assert (np.diff(keys) > 0).all()
    assert np.array_equal(found.find(found.contacts, options.holds), np.arange(found.stances))


def test_supports_are_the_stances_without_that_limb(
    linked: tuple[ContactOptions, StanceSet],
) -> None:
    _, found = linked
    rows = {tuple(row): k for k, row in enumerate(found.contacts.tolist())}
    links = 0
    for k, row in enumerate(found.contacts.tolist()):
        for limb in range(4):
            less = [*row]
            less[limb] = FREE
            there = rows.get(tuple(less), -1) if row[limb] != FREE else -1
            if there >= 0 and SMEAR in less:
                # The foot that smears must not slide when the limb it was set from lets go.
                smearing = [foot for foot in (2, 3) if less[foot] == SMEAR]
                slid = np.abs(found.points[k] - found.points[there])[smearing].max() > 1e-3
                there = -1 if slid else there
            assert found.support[k, limb] == there, (row, limb)
            links += there >= 0
    assert links > found.stances


def test_a_possible_stance_stays_possible_when_a_limb_lets_go(
    linked: tuple[ContactOptions, StanceSet],
) -> None:
    _, found = linked
    k, limb = np.nonzero(found.support >= 0)
    less = found.support[k, limb]
    # Hands that stop matching move by half a breadth, and a strike moves on its outline.
    same = (np.abs(found.points[less] - found.points[k]).max(axis=2)
            * (found.contacts[less] != FREE) * (found.contacts[less] != FLOOR)).max(axis=1) < 1e-9
    drop = (found.margin[k] - found.margin[less])[same]
    print(f"\nless margin with a limb fewer: {(drop > EDGE).sum()} of {len(drop)}, most "
          f"{drop.max() * 1e3:.1f} mm")
    assert (drop > EDGE).mean() < 0.01


def folded(seed: int, lower: float, upper: float, split: float = 1.4) -> Wall:
    """The same holds on a wall of two sections, overhangs in degrees."""
    sections = (Section(split, float(np.deg2rad(lower))),
                Section(3.5 - split, float(np.deg2rad(upper))))
    return replace(wall(seed, 7), sections=sections)


@pytest.mark.parametrize("angle", [-10.0, 0.0, 15.0])
def test_a_fold_of_no_angle_changes_nothing(angle: float) -> None:
    plain, one = stances_of(wall(11, 7, angle))
    options, two = stances_of(folded(11, angle, angle))
    flat_wall, fold = named(plain, one), named(options, two)
    sure = {key for key, margin in flat_wall.items() if margin > EDGE}
    assert sure <= fold.keys()
    assert {key for key, margin in fold.items() if margin > EDGE} <= flat_wall.keys()
    assert max(abs(flat_wall[key] - fold[key]) for key in sure) < EDGE


def arms_length(lower: float, upper: float) -> float:
    """Margin of a stance with hands above a fold and feet below it, m."""
    sections = (Section(1.4, float(np.deg2rad(lower))), Section(2.1, float(np.deg2rad(upper))))
    holds = (Hold("f", 1.4, 0.35), Hold("g", 1.6, 0.35), Hold("h", 1.3, 2.25), Hold("k", 1.7, 2.25))
    options = contact_options(Wall("fold", 3.0, 1.5, 0.0, sections, holds, (), ()))
    index = [options.index(name) for name in ("h", "k", "f", "g")]
    return float(solve(options, LINKAGES[0], np.array([index])).margin[0])


def test_a_hollow_fold_brings_hands_and_feet_together() -> None:
    # Reach is measured in space: with the surface folded toward the climber the chord between
    # hands and feet is shorter than along the flat wall.
    flat_wall, hollow = arms_length(0.0, 0.0), arms_length(0.0, 40.0)
    assert hollow > flat_wall


def test_a_bulging_fold_lets_the_body_round_the_edge() -> None:
    bulging, flat_wall = arms_length(30.0, 0.0), arms_length(0.0, 0.0)
    # The chord is shorter too; the trunk keeps clear of one section at a time.
    assert np.isfinite(bulging)
    assert bulging > flat_wall - 0.3
