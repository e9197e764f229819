"""Strengths of all samples of a search: the inverse of the load at rest."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.motion.capacity import Capacities
from climbpath.motion.cones import HoldCones, hold_cones
from climbpath.motion.load import Held, least_load
from climbpath.motion.rest import held_at_rest
from climbpath.posture.assembly import assemble
from climbpath.posture.linkage import Linkage
from climbpath.stance.enumerate import batch_of
from climbpath.stance.options import ContactOptions
from climbpath.stance.stances import StanceSet
from climbpath.wall import Wall

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

PART = 4096
"""Samples whose bodies are assembled together, so that their arrays stay in the cache."""

MOST = 100.0
"""Strengths are given up to this, body weights: a stance that needs next to nothing."""


def held_samples(
    options: ContactOptions, cones: HoldCones, linkage: Linkage, capacities: Capacities,
    stances: StanceSet, samples: Ints,
) -> Held:
    """What holds the bodies of chosen ``samples`` (M,)."""
    owner = stances.sample_stance[samples]
    batch = batch_of(options, linkage, stances.contacts[owner])
    joints = assemble(linkage, batch, stances.turn[..., samples], stances.shift[:, samples])
    world = np.moveaxis(batch.to_world(np.moveaxis(joints, 0, 1)), (0, 1, 2), (2, 1, 0))
    return held_at_rest(options, cones, linkage, capacities, stances.contacts[owner],
                        stances.points[owner], world, stances.com[samples])


def sample_strengths(
    wall: Wall, options: ContactOptions, linkage: Linkage, capacities: Capacities,
    stances: StanceSet,
) -> Array:
    """Greatest upward force of every sample's contacts, (P,) [body weights]; 0 where no forces
    hold the body.
    """
    cones = hold_cones(wall, options)
    struck = (stances.contacts >= 0) & options.strike[np.maximum(stances.contacts, 0)]
    # A strike ends the climb, and nothing rests on it.
    over = np.asarray(struck.any(axis=1))
    wanted = np.flatnonzero(~over[stances.sample_stance])
    strength = np.zeros(stances.samples)
    for begin in range(0, len(wanted), PART):
        part = wanted[begin:begin + PART]
        held = held_samples(options, cones, linkage, capacities, stances, part)
        load = least_load(held).load
        strength[part] = 1.0 / np.maximum(load, 1.0 / MOST)
    return strength

