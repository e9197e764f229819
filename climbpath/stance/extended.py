"""Stances made from others by one contact more: smearing feet, and hands on finish pads."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FREE, SMEAR, Limb
from climbpath.posture.linkage import Linkage
from climbpath.stance.options import ContactOptions

Ints = NDArray[np.int64]


@dataclass(frozen=True)
class Allowed:
    """Which stances may be used at all: conditions that leave stances out."""

    avoid: frozenset[int] = frozenset()
    matching: bool = True
    smears: bool = True


def smeared(contacts: Ints, allowed: Allowed) -> tuple[Ints, Ints]:
    """Stances with one or both free feet smearing, where a hand has a hold; made from which."""
    if not allowed.smears:
        return np.zeros((0, 4), np.int64), np.zeros(0, np.int64)
    hand = np.asarray((contacts[:, :2] >= 0).any(axis=1))
    free = (contacts[:, 2:] == FREE) & hand[:, None]
    grown, sources = [], []
    for feet in ((Limb.LF,), (Limb.RF,), (Limb.LF, Limb.RF)):
        source = np.flatnonzero(free[:, [foot - 2 for foot in feet]].all(axis=1))
        rows = contacts[source]
        rows[:, list(feet)] = SMEAR
        grown.append(rows)
        sources.append(source)
    return np.concatenate(grown), np.concatenate(sources)


def struck_alone(options: ContactOptions, allowed: Allowed) -> Ints:
    """Each hand alone on each finish pad."""
    pads = _pads(options, allowed)
    grown = np.full((2 * len(pads), 4), FREE, dtype=np.int64)
    for k, pad in enumerate(pads):
        grown[2 * k, Limb.LH] = grown[2 * k + 1, Limb.RH] = pad
    return grown


def struck(
    options: ContactOptions, linkage: Linkage, contacts: Ints, allowed: Allowed
) -> tuple[Ints, Ints]:
    """Stances with a free hand on a finish pad, and from which of ``contacts`` each is made."""
    grown, sources = [np.zeros((0, 4), np.int64)], [np.zeros(0, np.int64)]
    arm = float(linkage.reach[0]) + linkage.strike_extra + linkage.shoulder_rise
    body = linkage.trunk + float(linkage.reach[2]) + arm + 0.4
    for pad in _pads(options, allowed):
        outline = options.outlines.get(pad)
        size = _radius(outline, options, pad) if outline is not None else 0.0
        gap = np.linalg.norm(options.point - options.point[pad], axis=1)
        index = np.maximum(contacts, 0)
        far = np.asarray(((contacts >= 0) & (gap[index] > body + size)).any(axis=1))
        for hand in (Limb.LH, Limb.RH):
            source = np.flatnonzero((contacts[:, hand] == FREE) & ~far)
            rows = contacts[source]
            rows[:, hand] = pad
            grown.append(rows)
            sources.append(source)
    return np.concatenate(grown), np.concatenate(sources)


def _pads(options: ContactOptions, allowed: Allowed) -> list[int]:
    return [int(pad) for pad in np.flatnonzero(options.strike) if int(pad) not in allowed.avoid]


def _radius(outline: object, options: ContactOptions, pad: int) -> float:
    """Largest distance of an outline's corners from the pad's point of grip, m."""
    corners = np.asarray(outline.exterior.coords)  # type: ignore[attr-defined]
    return float(np.hypot(*(corners - options.place[pad, :2]).T).max())
