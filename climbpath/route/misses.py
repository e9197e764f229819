"""What missing holds costs a route: the chance of a miss on every arc on which a hand lands."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import Limb
from climbpath.motion.miss import MissRule
from climbpath.motion.model import Motion
from climbpath.posture.linkage import Linkage
from climbpath.route.build import SearchGraph
from climbpath.route.measures import hand_spare
from climbpath.stance.options import ContactOptions

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class Misses:
    """Chance of a miss on every arc, ``chance`` (m,), and the time it costs, ``cost_us`` (m,)."""

    chance: Array
    cost_us: Ints


def misses_of(
    options: ContactOptions, linkage: Linkage, search: SearchGraph, motion: Motion,
    rule: MissRule | None = None,
) -> Misses:
    """Chances of all arcs of a search: by the reach the landing hand has to spare in the sample it
    lands in, and the speed there.
    """
    chosen = rule or MissRule()
    graph, code = search.graph, search.code
    chance = np.zeros(graph.arcs)
    landing = graph.event // (options.holds + 2)
    arcs = np.flatnonzero((graph.event >= 0) & (landing <= Limb.RH))
    head = graph.head[arcs].astype(np.int64)
    spare = hand_spare(options, linkage, search.stances)[code.sample(head), landing[arcs]]
    speed = np.array(motion.speeds)[code.speed(head)]
    chance[arcs] = chosen.chance(spare, speed)
    return Misses(chance, np.rint(chosen.lost * chance * 1e6).astype(np.int64))
