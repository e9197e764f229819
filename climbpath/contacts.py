"""Limbs and the kinds of contact they can have: the vocabulary all rooms share.

A stance is an integer array of shape (4,), one entry a limb in the order of ``Limb``. An entry
of 0 or more is the index of a hold of the wall; the negative codes below are the rest.
"""

from __future__ import annotations

from enum import IntEnum


class Limb(IntEnum):
    """The four limbs, in the order of every limb axis in the package."""

    LH = 0
    RH = 1
    LF = 2
    RF = 3


LIMB_NAMES = tuple(limb.name for limb in Limb)
HANDS = (Limb.LH, Limb.RH)
FEET = (Limb.LF, Limb.RF)

FREE = -1
"""The limb touches nothing."""
FLOOR = -2
"""A foot stands on the ground below its hip."""
SMEAR = -3
"""A foot presses on the bare surface, at a point that the other contacts fix."""

CONTACT_NAMES = {FREE: "free", FLOOR: "floor", SMEAR: "smear"}
CONTACT_CODES = {name: code for code, name in CONTACT_NAMES.items()}


def mirrored_limb(limb: Limb) -> Limb:
    """The limb of the other side."""
    return Limb(limb ^ 1)
