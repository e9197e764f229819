"""Centre-of-mass samples: bodies on the wall, on their levels, and near the line."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import minimize

from climbpath.body import SEGMENT_ENDS, segment_table
from climbpath.posture.assembly import JOINT, assemble
from climbpath.posture.com import com_of, joint_weights
from climbpath.posture.newton import Postures
from climbpath.posture.samples import (
    HEIGHT_TOLERANCE,
    REACH_TOLERANCE,
    Lattice,
    Samples,
    com_samples,
)
from tests.posture.drawn import Drawn, drawn, flat, sections_of
from tests.posture.oracle import Body, Stance, rotation
from tests.posture.skeleton import broken

Array = NDArray[np.float64]

LATTICE = Lattice(1.0, 0.15)
LINE = 1.5



@dataclass(frozen=True)
class Sampled:
    """Possible stances with their samples, and the samples' joints (P, 19, 3) in the world."""

    stances: Drawn
    postures: Postures
    samples: Samples
    joints: Array

    @property
    def fallback(self) -> NDArray[np.bool_]:
        """Samples that are the solver's own posture, for want of any on a level. (P,)"""
        own = self.postures.shift[:, self.samples.stance]
        return np.asarray((self.samples.shift == own).all(axis=0))

    @property
    def com(self) -> Array:
        """Centre of mass in the world, (P, 3)."""
        batch = self.stances.batch().take(self.samples.stance)
        return batch.to_world(self.samples.com[:, None])[:, 0].T


def sampled(stances: Drawn, lattice: Lattice = LATTICE) -> Sampled:
    found = stances.solved()
    possible = found.margin >= 0.0
    kept = stances.take(possible)
    postures = Postures(found.margin[possible], found.turn[..., possible], found.shift[:, possible])
    batch = kept.batch()
    samples = com_samples(kept.linkage, batch, postures, LINE, lattice)
    wide = batch.take(samples.stance)
    joints = assemble(kept.linkage, wide, samples.turn, samples.shift)
    world = wide.to_world(joints.transpose(1, 0, 2)).transpose(2, 1, 0)
    return Sampled(kept, postures, samples, world)


@pytest.fixture(scope="module", params=[0, 1], ids=["male", "female"])
def many(request: pytest.FixtureRequest) -> Sampled:
    return sampled(drawn(request.param, 800, 50 + request.param))


def wrong(result: Sampled) -> list[str]:
    """What the samples' joints break, beyond the rounding of reach that samples are allowed."""
    stances, index = result.stances, result.samples.stance
    section = sections_of(stances, stances.batch())[index]
    found = broken(stances.athlete, stances.surface, section, stances.contacts[index],
                   stances.points[index], stances.strike[index], result.joints)
    texts = []
    for rule, value in found.items():
        excess = value - (REACH_TOLERANCE if rule.endswith(("at the hold", "foot")) else 0.0)
        if (excess > 0).any():
            texts.append(f"{rule}: {int((excess > 0).sum())} of {len(index)}, worst "
                         f"{excess.max():.5f}")
    return texts


def test_every_sample_is_a_body_on_the_wall(many: Sampled) -> None:
    assert [text for text in wrong(many) if "elbow outside" not in text] == []


def test_elbows_of_samples_are_hardly_ever_in_the_wall(many: Sampled) -> None:
    # An arm folded close to the wall may have no place for its elbow: none of the limits minds
    # it. In 10,000 samples it was seen 7 times, by 15 mm at most.
    outside = [many.stances.surface.clearance(many.joints[:, JOINT[f"elbow_{side}"]])
               for side in "LR"]
    assert (np.min(outside, axis=0) < -1e-3).mean() < 0.005
    assert np.min(outside) > -0.03


def test_every_possible_stance_has_a_sample_and_all_are_sorted(many: Sampled) -> None:
    samples = many.samples
    assert set(samples.stance) == set(range(len(many.postures.margin)))
    key = samples.stance * 10_000 + samples.level
    assert (np.diff(key) > 0).all()


def test_no_sample_spares_more_than_its_stance(many: Sampled) -> None:
    samples = many.samples
    assert (samples.spare >= 0.0).all()
    excess = samples.spare - many.postures.margin[samples.stance]
    # Where the solver's margin is a local optimum a sample can beat it; seldom and by little.
    print(f"\nsamples sparing over 5 mm more than the margin: {(excess > 5e-3).sum()} of "
          f"{len(excess)}, most {excess.max() * 1e3:.1f} mm")
    assert (excess > 5e-3).mean() < 1e-3


ENDS = {"hip_centre": "pelvis", "shoulder_centre": "neck", "head_top": "head"}


def centre_of_mass(result: Sampled) -> Array:
    """Sum over the segment table, from joints alone. (P, 3)"""
    athlete, joints = result.stances.athlete, result.joints
    table = segment_table(athlete)
    total = np.zeros((len(joints), 3))
    for (first, second), mass, centre in zip(
        SEGMENT_ENDS, table.mass_fraction, table.cm_fraction, strict=True
    ):
        part, side = first.rsplit("_", 1)
        start = joints[:, JOINT[ENDS.get(first, first)]]
        if second == "head_top":
            along = (joints[:, JOINT["head"]] - start) / 0.75
        elif second.startswith("fingertip"):
            # The hand's end may be the grip at mid-finger; its length is that to the fingertip.
            hand = joints[:, JOINT[side + "H"]] - start
            along = hand / np.linalg.norm(hand, axis=1, keepdims=True) * athlete.length("hand")
        elif part == "ankle":
            along = joints[:, JOINT[side + "F"]] - start
        else:
            along = joints[:, JOINT[ENDS.get(second, second)]] - start
        total += mass * (start + centre * along)
    return total


def test_centre_of_mass_is_that_of_the_segments(many: Sampled) -> None:
    struck = many.stances.strike[many.samples.stance].any(axis=1)
    gap = np.linalg.norm(centre_of_mass(many) - many.com, axis=1)
    assert gap[~struck].max() < 1e-9
    # A striking hand is as long as it is; its weights are those of a gripping one (0.6 % of the
    # body's mass, half a hand too far: under 1 mm).
    assert gap[struck].max() < 1e-3


def test_samples_stand_on_their_levels(many: Sampled) -> None:
    samples = many.samples
    miss = np.abs(many.com[:, 1] - LATTICE.height(samples.level))
    assert miss[~many.fallback].max() <= HEIGHT_TOLERANCE
    # The fallback stands under the nearest level, alone.
    assert miss[many.fallback].max(initial=0.0) <= LATTICE.step / 2 + 1e-9
    assert (np.bincount(samples.stance)[samples.stance[many.fallback]] == 1).all()


def test_stances_with_room_reach_a_level(many: Sampled) -> None:
    # 100 mm to spare are two thirds of a step: nearly all such stances should meet a level.
    roomy = many.postures.margin > 0.1
    alone = np.zeros(len(roomy), dtype=bool)
    alone[many.samples.stance[many.fallback]] = True
    print(f"\nstances with 100 mm to spare and no level: {(alone & roomy).sum()} of {roomy.sum()}")
    assert (alone & roomy).sum() <= 0.05 * roomy.sum()


def test_half_the_step_keeps_every_level(many: Sampled) -> None:
    fine = com_samples(many.stances.linkage, many.stances.batch(), many.postures, LINE,
                       LATTICE.halved())
    coarse = (many.samples.stance * 10_000 + 2 * many.samples.level)[~many.fallback]
    assert np.isin(coarse, fine.stance * 10_000 + fine.level).all()


def test_a_moved_line_draws_the_samples_along(many: Sampled) -> None:
    batch = many.stances.batch()
    right = com_samples(many.stances.linkage, batch, many.postures, LINE + 0.2, LATTICE)
    keys = (many.samples.stance * 10_000 + many.samples.level)[~many.fallback]
    here = dict(zip(keys, many.samples.com[0][~many.fallback], strict=True))
    gain = np.array([x - here[key] for key, x in
                     zip(right.stance * 10_000 + right.level, right.com[0], strict=True)
                     if key in here])
    # Bodies already drawn as far as they go stay where they are.
    assert np.mean(gain) > 0.02
    assert np.median(gain) >= -1e-9
    assert (gain > -0.02).mean() > 0.95


class Careful:
    """Least distance of the centre of mass from the line at a fixed height, by SLSQP."""

    def __init__(self, result: Sampled, number: int) -> None:
        stances, k = result.stances, int(result.samples.stance[number])
        self.linkage = stances.linkage
        self.one = stances.batch().take(np.array([k]))
        self.stance = Stance(Body.of(stances.linkage), stances.surface, stances.contacts[k],
                             stances.points[k], stances.strike[k])
        self.weights = joint_weights(stances.linkage)
        self.height = float(result.com[number, 1])
        self.wall = np.stack([[1.0, 0.0, 0.0], stances.surface.up[0], stances.surface.normal[0]])
        self.first = [
            self.unknowns(result.samples.turn[..., number], result.samples.shift[:, number]),
            self.unknowns(result.postures.turn[..., k], result.postures.shift[:, k]),
        ]

    def unknowns(self, turn: Array, shift: Array) -> Array:
        """World place and Euler angles of a trunk in base axes."""
        pitch = np.arcsin(np.clip(turn[2, 1], -1.0, 1.0))
        lean = np.arctan2(turn[0, 1], turn[1, 1])
        twist = np.arctan2(-turn[2, 0], turn[2, 2])
        assert np.allclose(rotation(lean, pitch, twist), turn, atol=1e-6)
        place = self.one.to_world(shift[:, None])[:, 0]
        return np.array([*place, lean, pitch, twist])

    def com(self, trunks: Array) -> Array:
        """World centres of mass (3, M) of trunks (M, 6)."""
        count = len(trunks)
        batch = self.one.take(np.zeros(count, dtype=np.int64))
        turn = np.stack([rotation(*q[3:]) for q in trunks], axis=-1)
        joints = assemble(self.linkage, batch, turn, batch.to_base(trunks[:, :3].T))
        return batch.to_world(com_of(self.weights, joints)[:, None])[:, 0]

    def slopes(self, q: Array) -> Array:
        """Central differences of the centre of mass, (3, 6)."""
        step = 1e-5 * np.eye(6)
        moved = self.com(np.concatenate([q + step, q - step]))
        return np.asarray((moved[:, :6] - moved[:, 6:]) / 2e-5)

    def values(self, q: Array) -> Array:
        return np.concatenate(self.stance.limits(q)) + 1e-6

    def least(self, seed: int, random: int) -> float:
        """Smallest distance found, m."""
        rng = np.random.default_rng(seed)
        first = [*self.first]
        for _ in range(random):
            first.append(self.first[0] + rng.normal(0.0, [0.1, 0.05, 0.1, 0.3, 0.2, 0.4]))
        best = np.inf
        for q0 in first:
            careful: Any = minimize
            constraints = [
                {"type": "ineq", "fun": self.values},
                {"type": "eq", "fun": lambda q: self.com(q[None])[1] - self.height,
                 "jac": lambda q: self.slopes(q)[1:2]},
            ]
            found = careful(
                lambda q: 50.0 * (self.com(q[None])[0, 0] - LINE) ** 2, q0, method="SLSQP",
                jac=lambda q: 100.0 * (self.com(q[None])[0, 0] - LINE) * self.slopes(q)[0],
                constraints=constraints,
                options={"maxiter": 40, "ftol": 1e-9},
            )
            com = self.com(found.x[None])[:, 0]
            if self.values(found.x).min() > -1e-4 and abs(com[1] - self.height) < 1e-3:
                best = min(best, abs(com[0] - LINE))
        return float(best)


def check_near_the_line(number: int, random: int) -> None:
    excess = []
    for which in (0, 1):
        result = sampled(drawn(which, 4 * number, 60 + which))
        rng = np.random.default_rng(which)
        # One sample a stance, of those on a level.
        picked = rng.permutation(np.flatnonzero(~result.fallback))
        _, first = np.unique(result.samples.stance[picked], return_index=True)
        for k in rng.permutation(picked[first])[: number // 2]:
            own = abs(float(result.com[k, 0]) - LINE)
            excess.append(own - min(own, Careful(result, int(k)).least(int(k), random)))
    middle, high = np.percentile(excess, [50, 90]) * 1e3
    print(f"\nfarther from the line than careful, {len(excess)} samples: median {middle:.1f} mm, "
          f"90th percentile {high:.1f} mm, most {max(excess) * 1e3:.1f} mm")
    assert high <= 20.0


def test_samples_are_nearly_as_near_the_line_as_can_be() -> None:
    check_near_the_line(24, 0)


@pytest.mark.slow
def test_many_samples_are_nearly_as_near_the_line_as_can_be() -> None:
    check_near_the_line(150, 2)


def test_samples_hold_on_a_fold() -> None:
    result = sampled(drawn(0, 400, 70, flat(0.0, 20.0, height=5.0)))
    batch = result.stances.batch().take(result.samples.stance)
    assert np.isfinite(batch.to_world(result.samples.com[:, None])).all()
    assert [text for text in wrong(result) if "clear" in text or "at the hold" in text] == []
