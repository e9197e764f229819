"""Numbering of search nodes: a centre-of-mass sample, its upward speed, which hand moved last, and
the phase.

Node = ((sample * speeds + speed) * 2 + last) * phases + phase. ``speed`` is the number of a speed
level. ``last`` is 0 after the left hand and 1 after the right; a climb may begin in either, since
the hand that moves first has nothing to wait for. Phase 0 is READY: the next move may begin, and
limbs may let go. Phases from LANDED on: a move has just ended here, and limbs that were free may
land with it or go on from it. Their classes (``measures.landing_classes``) tell how long it lasted.
Flight nodes follow after all of these.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, SMEAR, Limb

Ints = NDArray[np.int64]

LASTS = 2
READY, LANDED = 0, 1


@dataclass(frozen=True)
class NodeCode:
    """Codes nodes and landing events of a graph over ``samples`` samples and ``holds`` holds, with
    ``speeds`` speed levels and ``classes`` of landings.
    """

    samples: int
    holds: int
    speeds: int = 1
    classes: int = 1

    @property
    def phases(self) -> int:
        """READY and one for each class of landings."""
        return 1 + self.classes

    @property
    def per_sample(self) -> int:
        """Nodes of one sample."""
        return self.speeds * LASTS * self.phases

    @property
    def plain(self) -> int:
        """Number of nodes that stand for a sample (flight nodes have higher numbers)."""
        return self.samples * self.per_sample

    def node(self, sample: Ints, speed: Ints | int, last: Ints | int, phase: Ints | int) -> Ints:
        """Node numbers, same shape as ``sample``."""
        return ((sample * self.speeds + speed) * LASTS + last) * self.phases + phase

    def sample(self, node: Ints) -> Ints:
        """Sample of plain nodes, -1 for flight nodes."""
        return np.where(node < self.plain, node // self.per_sample, -1)

    def speed(self, node: Ints) -> Ints:
        """Speed level of plain nodes."""
        return node // (self.phases * LASTS) % self.speeds

    def last(self, node: Ints) -> Ints:
        """Which hand moved last, of plain nodes."""
        return node // self.phases % LASTS

    def phase(self, node: Ints) -> Ints:
        """Phase of plain nodes."""
        return node % self.phases

    def all_landed(self, samples: Ints) -> Ints:
        """Every node of some samples in which a move has just ended."""
        return np.concatenate([
            self.node(samples, speed, last, phase)
            for speed in range(self.speeds) for last in range(LASTS)
            for phase in range(LANDED, self.phases)
        ]).astype(np.int64)

    @property
    def events(self) -> int:
        """Number of landing events."""
        return 4 * (self.holds + 2)

    def event(self, limb: int, contact: Ints) -> Ints:
        """Number of the landing of ``limb`` on contacts (hold, floor or smear), -1 for free."""
        bare = np.where(contact == FLOOR, self.holds, self.holds + 1)
        place = np.where(contact >= 0, contact, bare)
        return np.where(contact == FREE, -1, limb * (self.holds + 2) + place)

    def landing(self, event: int) -> tuple[Limb, int]:
        """Limb and contact of an event number."""
        limb, place = divmod(event, self.holds + 2)
        contact = {self.holds: FLOOR, self.holds + 1: SMEAR}.get(place, place)
        return Limb(limb), contact
