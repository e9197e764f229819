"""Where the centre of mass can be in a stance: a few samples that span what it allows.

Sample heights are the levels of one lattice of world heights, so that samples of different
stances meet. At each level the sample is the posture whose centre of mass is nearest the line.

With the trunk's turn and its distance off the wall given, each engaged limb leaves the trunk's x
an interval (the chord of its reach at that height); the line clipped to their intersection is the
nearest point. A few turns and distances are tried, the best is assembled exactly, and two
corrections bring its centre of mass onto the level.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import Limb
from climbpath.posture.assembly import assemble
from climbpath.posture.batch import StanceBatch
from climbpath.posture.com import com_of, joint_weights
from climbpath.posture.iterates import Aim
from climbpath.posture.limits import slack, tilted, twisted, upright
from climbpath.posture.linkage import Linkage
from climbpath.posture.newton import Postures, nearer_line
from climbpath.posture.placing import ComGuess, com_guess, placed

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

CHUNK = 2048
LEAN = 0.45
"""Sideways lean of the trunk tried besides upright and the solver's own, rad."""

TWIST = 0.7
"""Turn of the trunk about its own length tried as well, rad: it brings one shoulder nearer."""

OUT = 0.15
"""Extra distance off the wall tried where folded legs need the room, m."""

TRIES = 4
"""How many of the candidate trunks are looked at before a level is given up."""

NEAR_ENOUGH = 0.01
NEARER_STEPS = (12, 8)
"""Samples farther than this (m) from the line are brought nearer, in so many Newton steps between
corrections of the centre of mass."""

ROUGH = 0.03
"""What a roughly placed trunk may miss a limit by and still be assembled, m."""

CORRECTIONS = 2
HEIGHT_TOLERANCE = 0.004
"""A sample's centre of mass stands within this of its level, m."""

REACH_TOLERANCE = 1e-4
"""Rounding allowed on reach and hard limits of a sample, m."""


@dataclass(frozen=True)
class Samples:
    """P samples of N stances, sorted by stance and level, in base axes of their stance.

    ``stance`` (P,) and ``level`` (P,): which stance, which lattice level. ``turn`` (3, 3, P),
    ``shift`` (3, P) [m]: the trunk. ``com`` (3, P) [m]: centre of mass. ``spare`` (P,) [m]: reach
    to spare in this very posture (at most the stance's margin).
    """

    stance: Ints
    level: Ints
    turn: Array
    shift: Array
    com: Array
    spare: Array


@dataclass(frozen=True)
class Lattice:
    """Levels of world height: level k stands at ``anchor`` + k ``step``. [m]"""

    anchor: float
    step: float

    def height(self, level: Ints) -> Array:
        """World height of levels [m]."""
        return np.asarray(self.anchor + self.step * level)

    def halved(self) -> Lattice:
        """The lattice with half the step: contains all levels of this one."""
        return Lattice(self.anchor, self.step / 2.0)


def com_samples(
    linkage: Linkage, batch: StanceBatch, postures: Postures, line_x: float, lattice: Lattice
) -> Samples:
    """Samples of N possible stances (margin 0 or more).

    A stance so tight that no level falls into its range has one sample, the solver's own posture,
    under the nearest level.
    """
    parts = []
    for begin in range(0, batch.size, CHUNK):
        part = slice(begin, min(begin + CHUNK, batch.size))
        inside = Postures(postures.margin[part], postures.turn[..., part], postures.shift[:, part])
        found = _chunk(linkage, batch.take(part), inside, line_x, lattice)
        parts.append((found, begin))
    return Samples(
        np.concatenate([p.stance + b for p, b in parts]) if parts else np.zeros(0, np.int64),
        np.concatenate([p.level for p, _ in parts]) if parts else np.zeros(0, np.int64),
        *(np.concatenate([getattr(p, name) for p, _ in parts], axis=-1)
          if parts else np.zeros((*lead, 0))
          for name, lead in (("turn", (3, 3)), ("shift", (3,)), ("com", (3,)), ("spare", ()))),
    )


@dataclass(frozen=True)
class _Found:
    """Samples found so far: which stance and level (index into both), trunk, CoM, spare reach."""

    index: Ints
    turn: Array
    shift: Array
    com: Array
    spare: Array

    @classmethod
    def join(cls, parts: list[_Found]) -> _Found:
        """All samples of several rounds."""
        none = cls(np.zeros(0, np.int64), np.zeros((3, 3, 0)), np.zeros((3, 0)), np.zeros((3, 0)),
                   np.zeros(0))
        return cls(*(np.concatenate([getattr(part, f.name) for part in (none, *parts)], axis=-1)
                     for f in fields(cls)))


def _levels(
    linkage: Linkage, batch: StanceBatch, postures: Postures, guess: ComGuess, lattice: Lattice
) -> tuple[Ints, Ints]:
    """Stance and level of every lattice level a stance might reach."""
    low = np.full(batch.size, -np.inf)
    high = np.full(batch.size, np.inf)
    turn = postures.turn
    for limb in Limb:
        engaged = batch.engaged[limb]
        root = np.einsum("jn,j->n", turn[1], linkage.roots[limb])
        centre = batch.target[1, limb] - root
        reach = batch.reach[limb]
        rise = linkage.shoulder_rise if limb <= Limb.RH else 0.0
        low = np.where(engaged, np.maximum(low, centre - reach - rise), low)
        high = np.where(engaged, np.minimum(high, centre + reach), high)
    low = np.maximum(low, postures.shift[1] - 0.9)
    high = np.minimum(high, postures.shift[1] + 0.9)
    out = postures.shift[2]
    lever = np.einsum("ijn,jn->in", turn, guess.lever)
    base = np.einsum("in,in->n", batch.vertical, lever + guess.fixed)
    base += guess.share * batch.vertical[2] * out + batch.origin[1]
    slope = guess.share * batch.vertical[1]
    first = np.ceil((base + slope * low - lattice.anchor) / lattice.step).astype(np.int64)
    last = np.floor((base + slope * high - lattice.anchor) / lattice.step).astype(np.int64)
    number = np.maximum(last - first + 1, 0)
    stance = np.repeat(np.arange(batch.size), number)
    begin = np.repeat(np.cumsum(number) - number, number)
    level = np.repeat(first, number) + np.arange(len(stance)) - begin
    return stance, level


def _chunk(
    linkage: Linkage, batch: StanceBatch, postures: Postures, line_x: float, lattice: Lattice
) -> Samples:
    weights = joint_weights(linkage)
    guess = com_guess(linkage, batch, weights)
    stance, level = _levels(linkage, batch, postures, guess, lattice)
    wide = batch.take(stance)
    goal = lattice.height(level) - wide.origin[1]
    spread = guess.take(stance)
    candidates = _candidates(wide, postures, stance, line_x)
    places, misses = [], np.empty((len(candidates), len(stance)))
    for number, candidate in enumerate(candidates):
        place, misses[number] = placed(linkage, wide, spread, *candidate, line_x, goal, None)
        places.append(place)
    # Earlier candidates win ties, and small gains are not worth an odd posture.
    misses += 0.002 * np.arange(len(candidates))[:, None]
    kept: list[_Found] = []
    open_ = np.arange(len(stance))
    for _ in range(TRIES):
        open_ = open_[np.isfinite(misses[:, open_]).any(axis=0)]
        if not len(open_):
            break
        choice = np.argmin(misses[:, open_], axis=0)
        misses[choice, open_] = np.inf
        turn, out, extra, shift = _chosen(candidates, places, choice, open_)
        own = wide.take(open_)
        # Roughly placed, a trunk that breaks a limit by far is not worth assembling.
        trial = np.flatnonzero(np.minimum(*slack(linkage, own, turn, shift)) > -ROUGH)
        good, shift, com, spare = _assembled(
            linkage, own.take(trial), weights, spread.take(open_[trial]),
            turn.take(trial, axis=-1), shift.take(trial, axis=-1), out[trial], extra[trial], line_x,
            goal[open_[trial]],
        )
        done = trial[good]
        kept.append(
            _Found(open_[done], turn.take(done, axis=-1), shift[:, good], com[:, good], spare[good])
        )
        open_ = np.delete(open_, done)
    found = _Found.join(kept)
    _bring_nearer(linkage, wide, weights, spread, found, line_x, goal)
    return _gather(linkage, batch, postures, weights, lattice, stance, level, found)


Candidate = tuple[Array, Array, float]


def _chosen(
    candidates: list[Candidate], places: list[Array], choice: Ints, rows: Ints
) -> tuple[Array, Array, Array, Array]:
    """Turn, distance off the wall, extra distance and place of one candidate for each row."""
    turn, out, shift = np.empty((3, 3, len(rows))), np.empty(len(rows)), np.empty((3, len(rows)))
    for number, (candidate, place) in enumerate(zip(candidates, places, strict=True)):
        own = np.flatnonzero(choice == number)
        where = rows[own]
        turn[..., own] = candidate[0].take(where, axis=-1)
        out[own] = candidate[1][where]
        shift[:, own] = place.take(where, axis=-1)
    return turn, out, np.array([c[2] for c in candidates])[choice], shift


def _candidates(
    wide: StanceBatch, postures: Postures, stance: Ints, line_x: float
) -> list[Candidate]:
    """Trunk turns with the distance off the wall: given, or (NaN) as near as clearance lets.

    Leans and twists begin with the side of the line the contacts lie on, so that a mirrored
    stance tries the mirrored trunks in the same order.
    """
    own = postures.turn.take(stance, axis=-1)
    count = len(stance)
    near = np.full(count, np.nan)
    weight = wide.engaged.astype(float)
    middle = (wide.target[0] * weight).sum(axis=0) - line_x * weight.sum(axis=0)
    side = np.where(middle > -1e-6, 1.0, -1.0)
    leans = [tilted(way * LEAN * side) for way in (1.0, -1.0)]
    twists = [twisted(way * TWIST * side) for way in (1.0, -1.0)]
    return [
        (upright(count), near, 0.0),
        (upright(count), near, OUT),
        (leans[0], near, 0.0),
        (leans[1], near, 0.0),
        *((turn, near, extra) for turn in twists for extra in (0.0, OUT)),
        # Where reach is not what bounds a stance, its own posture is one of many: tried last.
        (own, near, 0.0),
        (own, postures.shift[2, stance], 0.0),
    ]


def _bring_nearer(
    linkage: Linkage, wide: StanceBatch, weights: Array, guess: ComGuess, found: _Found,
    line_x: float, goal: Array,
) -> None:
    """Bring the samples that stand off the line as near to it as the whole trunk allows."""
    off = np.flatnonzero(np.abs(found.com[0] - line_x) > NEAR_ENOUGH)
    if not len(off):
        return
    index = found.index[off]
    batch = wide.take(index)
    share, lever = guess.share[index], guess.lever.take(index, axis=-1)
    turn, shift, com = (v.take(off, axis=-1) for v in (found.turn, found.shift, found.com))
    for steps in NEARER_STEPS:
        # The guess of the centre of mass is made exact where the posture now stands.
        fixed = com - share * shift - np.einsum("ijn,jn->in", turn, lever)
        aim = Aim(share, lever, fixed, line_x, goal[index])
        turn, shift = nearer_line(linkage, batch, turn, shift, aim, steps)
        com = com_of(weights, assemble(linkage, batch, turn, shift))
    spare, hard = slack(linkage, batch, turn, shift)
    height = (batch.vertical * com).sum(axis=0)
    good = (spare >= -REACH_TOLERANCE) & (hard >= -REACH_TOLERANCE)
    good &= np.abs(height - goal[index]) <= HEIGHT_TOLERANCE
    good &= np.abs(com[0] - line_x) < np.abs(found.com[0, off] - line_x)
    better = off[good]
    found.turn[..., better], found.shift[:, better] = turn[..., good], shift[:, good]
    found.com[:, better], found.spare[better] = com[:, good], np.maximum(spare[good], 0.0)


def _assembled(
    linkage: Linkage, batch: StanceBatch, weights: Array, guess: ComGuess, turn: Array,
    shift: Array, out: Array, extra: Array, line_x: float, goal: Array,
) -> tuple[NDArray[np.bool_], Array, Array, Array]:
    """Assemble, correct the height, and check all limits: good, shift, com, spare.

    ``shift`` is where the guess of the centre of mass, not yet corrected, places the trunk.
    """
    rough = np.einsum("ijn,jn->in", turn, guess.lever) + guess.fixed
    com = com_of(weights, assemble(linkage, batch, turn, shift))
    for _ in range(CORRECTIONS):
        error = com - guess.share * shift - rough
        shift, _miss = placed(linkage, batch, guess, turn, out, extra, line_x, goal, error)
        com = com_of(weights, assemble(linkage, batch, turn, shift))
    spare, hard = slack(linkage, batch, turn, shift)
    height = (batch.vertical * com).sum(axis=0)
    good = (spare >= -REACH_TOLERANCE) & (hard >= -REACH_TOLERANCE)
    good &= np.abs(height - goal) <= HEIGHT_TOLERANCE
    return good, shift, com, np.maximum(spare, 0.0)


def _gather(
    linkage: Linkage, batch: StanceBatch, postures: Postures, weights: Array, lattice: Lattice,
    stance: Ints, level: Ints, found: _Found,
) -> Samples:
    """Add the solver's own posture where a stance has nothing, and sort."""
    has = np.zeros(batch.size, dtype=bool)
    has[stance[found.index]] = True
    bare = np.flatnonzero(~has)
    tight = batch.take(bare)
    turn, shift = postures.turn.take(bare, axis=-1), postures.shift.take(bare, axis=-1)
    com = com_of(weights, assemble(linkage, tight, turn, shift))
    height = (tight.vertical * com).sum(axis=0) + tight.origin[1]
    nearest = np.rint((height - lattice.anchor) / lattice.step).astype(np.int64)
    stances = np.concatenate([stance[found.index], bare])
    levels = np.concatenate([level[found.index], nearest])
    order = np.lexsort((levels, stances))
    turns = np.concatenate([found.turn, turn], axis=-1)
    shifts = np.concatenate([found.shift, shift], axis=-1)
    coms = np.concatenate([found.com, com], axis=-1)
    spares = np.concatenate([found.spare, np.maximum(postures.margin[bare], 0.0)])
    return Samples(stances[order], levels[order],
                   *(values.take(order, axis=-1) for values in (turns, shifts, coms, spares)))
