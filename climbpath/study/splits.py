"""The measured times of a run that a model can be held against: hands' contacts, and the total."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from itertools import pairwise
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from climbpath.study.sequence import Sequence

Array = NDArray[np.float64]

HANDS = ("LH", "RH")
TOTAL = "total"
_SLIP = re.compile(r"\b(fell|slipped)\b", re.IGNORECASE)


@dataclass(frozen=True)
class Split:
    """One measured time [s] since the start signal: a hand's contact, or the whole run (TOTAL).

    ``touch`` counts from 0 how often that hand has had that hold before in the run.
    """

    step: int
    limb: str
    hold: str
    touch: int
    time: float

    @property
    def label(self) -> tuple[str, str, int]:
        """The same for the same contact in different runs."""
        return self.limb, self.hold, self.touch


class RunTimes(Protocol):
    """A model that follows the placements of given runs and says when their splits would be."""

    def times(self, capacity: Mapping[str, float]) -> list[Array]:
        """Predicted times [s] for one [capacity] table: for each run those of ``splits_of``.

        NaN or infinity where the model cannot follow a run. The same table gives the same times.
        """
        ...


def splits_of(run: Sequence, finish: Iterable[str]) -> tuple[Split, ...]:
    """The splits of a run in order: contacts of hands after the start, then the total.

    Contacts come by step, those of one step by time. A total beside a timed contact on a hold of
    ``finish`` says the same once more and is left out.
    """
    splits: list[Split] = []
    touched: Counter[tuple[str, str]] = Counter()
    for number, step in enumerate(run.steps):
        placed = [p for p in step if p.limb in HANDS and p.hold != "free"]
        for p in sorted(placed, key=lambda p: (p.contact_s or 0.0, p.limb)):
            if number > 0 and p.contact_s is not None:
                touch = touched[p.limb, p.hold]
                splits.append(Split(number, p.limb, p.hold, touch, p.contact_s))
            touched[p.limb, p.hold] += 1
    ends = frozenset(finish)
    if run.total_s is not None and not any(split.hold in ends for split in splits):
        splits.append(Split(max(len(run.steps) - 1, 0), TOTAL, "", 0, run.total_s))
    return tuple(splits)


def has_slip(run: Sequence) -> bool:
    """Whether a note of the run says fell or slipped."""
    return _SLIP.search(run.note) is not None


def later_first(splits: tuple[Split, ...]) -> list[tuple[Split, Split]]:
    """Neighbours of which the one that comes later was timed earlier."""
    return [(a, b) for a, b in pairwise(splits) if b.time < a.time]
