"""Numbering of search nodes: a centre-of-mass sample, which hand moved last, and the phase.

Node = (sample * 3 + last) * 2 + phase. ``last`` is 0 when the hands have moved together or not at
all, 1 after the left, 2 after the right. ``phase`` LANDED: a move has just ended here and limbs
that were free may land with it; READY: the next move may begin, and limbs may let go.
Flight nodes follow after all of these.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, SMEAR, Limb

Ints = NDArray[np.int64]

LASTS = 3
READY, LANDED = 0, 1
PHASES = 2


@dataclass(frozen=True)
class NodeCode:
    """Codes nodes and landing events of a graph over ``samples`` samples and ``holds`` holds."""

    samples: int
    holds: int

    @property
    def plain(self) -> int:
        """Number of nodes that stand for a sample (flight nodes have higher numbers)."""
        return self.samples * LASTS * PHASES

    def node(self, sample: Ints, last: Ints | int, phase: int) -> Ints:
        """Node numbers, same shape as ``sample``."""
        return (sample * LASTS + last) * PHASES + phase

    def sample(self, node: Ints) -> Ints:
        """Sample of plain nodes, -1 for flight nodes."""
        return np.where(node < self.plain, node // (LASTS * PHASES), -1)

    def last(self, node: Ints) -> Ints:
        """Which hand moved last, of plain nodes."""
        return node // PHASES % LASTS

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
