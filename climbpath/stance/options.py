"""What each limb can touch on a wall, and where the points of contact of a stance lie."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, SMEAR, Limb
from climbpath.posture.linkage import LIMB_SIDE, Linkage
from climbpath.wall import Surface, Wall, surface_of
from climbpath.wall.model import FOOT_USES, HAND_USES

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

HALF_FOOT_BREADTH = 0.05
"""Two feet that share a hold stand this far to either side of it, m (half a shoe, from memory)."""

SMEAR_SIDE = 0.16
SMEAR_DROP = 1.15
"""Where a foot smears: this far to the side of the contact it is set from, and, when that is a
hand, this share of the way down that a body hanging from it reaches with bent legs."""


@dataclass(frozen=True)
class ContactOptions:
    """The holds of a wall in canonical order (from the bottom, then from the left, then by id).

    ``ids`` (H,); ``place`` (H, 3) x, y, depth and ``point`` (H, 3) in the world [m]; ``hand``,
    ``foot``, ``strike`` (H,) bool: who may use it; ``hands`` (H,) how many hands fit;
    ``hand_quality``, ``foot_quality`` (H,). ``surface`` is the folded surface, ``width`` [m] its
    width; ``outlines`` the finish pads' outlines by hold index, in surface coordinates.
    """

    ids: tuple[str, ...]
    place: Array
    point: Array
    hand: Flags
    foot: Flags
    strike: Flags
    hands: Ints
    hand_quality: Array
    foot_quality: Array
    surface: Surface
    width: float
    height: float
    outlines: dict[int, shapely.Polygon]

    @property
    def holds(self) -> int:
        """Number of holds."""
        return len(self.ids)

    @property
    def floor_level(self) -> float:
        """World height of the ground, m."""
        return self.surface.floor_height

    def index(self, hold_id: str) -> int:
        """Canonical index of a hold; KeyError if there is none."""
        try:
            return self.ids.index(hold_id)
        except ValueError:
            raise KeyError(hold_id) from None

    def name(self, contact: int) -> str:
        """Hold id or the word for a contact code."""
        return {FREE: "free", FLOOR: "floor", SMEAR: "smear"}.get(contact) or self.ids[contact]


def contact_options(wall: Wall) -> ContactOptions:
    """Arrays of a wall's holds, independent of their order in the file."""
    holds = sorted(wall.holds, key=lambda hold: (hold.y, hold.x, hold.id))
    surface = surface_of(wall)
    place = np.array([[h.x, h.y, h.depth] for h in holds], dtype=float).reshape(-1, 3)
    outlines = {}
    for k, hold in enumerate(holds):
        if hold.use == "strike" and len(hold.outline) >= 3:
            outlines[k] = shapely.Polygon([(hold.x + dx, hold.y + dy) for dx, dy in hold.outline])
    return ContactOptions(
        ids=tuple(hold.id for hold in holds),
        place=place,
        point=surface.to_world(place[:, 0], place[:, 1], place[:, 2]),
        hand=np.array([hold.use in (*HAND_USES, "strike") for hold in holds], dtype=bool),
        foot=np.array([hold.use in FOOT_USES for hold in holds], dtype=bool),
        strike=np.array([hold.use == "strike" for hold in holds], dtype=bool),
        hands=np.array([hold.hands for hold in holds], dtype=np.int64),
        hand_quality=np.array([hold.hand_quality for hold in holds], dtype=float),
        foot_quality=np.array([hold.foot_quality for hold in holds], dtype=float),
        surface=surface,
        width=wall.width,
        height=wall.height,
        outlines=outlines,
    )


def contact_points(options: ContactOptions, linkage: Linkage, contacts: Ints) -> Array:
    """World points (N, 4, 3) [m] of stances ``contacts`` (N, 4); free and floor limbs get zeros.

    Matched hands stand half a hand breadth to either side of the hold, matched feet half a foot;
    a strike is the point of the pad's outline nearest to the other contacts; a smear's point
    follows from the other contacts (``_smears``).
    """
    on_hold = contacts >= 0
    index = np.where(on_hold, contacts, 0)
    place = np.where(on_hold[:, :, None], options.place[index], 0.0)
    for first, half in ((Limb.LH, linkage.hand_breadth / 2), (Limb.LF, HALF_FOOT_BREADTH)):
        matched = on_hold[:, first] & (contacts[:, first] == contacts[:, first + 1])
        place[matched, first, 0] -= half
        place[matched, first + 1, 0] += half
    _strikes(options, contacts, place)
    _smears(linkage, contacts, place)
    points = options.surface.to_world(place[..., 0], place[..., 1], place[..., 2])
    return np.where((on_hold | (contacts == SMEAR))[:, :, None], points, 0.0)


def _strikes(options: ContactOptions, contacts: Ints, place: Array) -> None:
    """Move strikes to the point of the outline nearest to the mean of the other contacts."""
    if not options.outlines:
        return
    for limb in (Limb.LH, Limb.RH):
        for pad, outline in options.outlines.items():
            rows = np.flatnonzero(contacts[:, limb] == pad)
            if not len(rows):
                continue
            others = (contacts[rows] >= 0) & (contacts[rows] != pad)
            weight = others[:, :, None].astype(float)
            total = weight.sum(axis=1)
            mean = (place[rows, :, :2] * weight).sum(axis=1) / np.maximum(total, 1.0)
            minx, miny, maxx, _ = outline.bounds
            alone = np.array([(minx + maxx) / 2, miny - 1.0])
            mean = np.where(total > 0, mean, alone)
            lines = shapely.shortest_line(outline, shapely.points(mean))
            place[rows, limb, :2] = shapely.get_coordinates(lines)[::2]


def _smears(linkage: Linkage, contacts: Ints, place: Array) -> None:
    """Fix the points of smearing feet from the other contacts.

    Beside the other foot where that one stands on a hold; otherwise below the lowest hand that
    has a hold (below the middle of both when they are level), as far as a hanging body's bent
    legs come. Depends on nothing else, so the point stays while the contact it is set from does.
    """
    hand_on = contacts[:, :2] >= 0
    heights = np.where(hand_on, place[:, :2, 1], np.inf)
    lowest = heights.min(axis=1)
    level = (heights <= lowest[:, None] + 1e-9) & hand_on
    weight = level.astype(float)
    across = (place[:, :2, 0] * weight).sum(axis=1) / np.maximum(weight.sum(axis=1), 1.0)
    drop = linkage.trunk + SMEAR_DROP * linkage.reach[2] * 0.7 + 0.5 * linkage.reach[0]
    for foot in (Limb.LF, Limb.RF):
        rows = contacts[:, foot] == SMEAR
        other = foot ^ 1
        beside = contacts[:, other] >= 0
        x = np.where(beside, place[:, other, 0], across)
        y = np.where(beside, place[:, other, 1], lowest - drop)
        side = np.where(beside, 2.0 * SMEAR_SIDE, SMEAR_SIDE) * LIMB_SIDE[foot]
        place[rows, foot, 0] = (x + side)[rows]
        place[rows, foot, 1] = np.where(np.isfinite(y), y, 0.0)[rows]
        place[rows, foot, 2] = 0.0
