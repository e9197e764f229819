"""The wall as figures show it: its surface, sections, ground, holds and their names."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from climbpath.figure.marks import GREY, INK, PAPER, TEXT, drawable
from climbpath.wall.model import Hold, Wall

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.patches import Patch

EDGE = 0.12
"""Room around the wall, m."""
USED_HOLD: dict[str, Any] = {"facecolor": "#b5b0a4", "edgecolor": "#4d4a44", "lw": 0.8}
OTHER_HOLD: dict[str, Any] = {"facecolor": "white", "edgecolor": "#9b978d", "lw": 0.8}
"""Patch keywords of holds in use and of the others."""


def whole_window(wall: Wall) -> tuple[float, float]:
    """The range of y that shows all of a wall and the ground below it, m."""
    return min(0.0, wall.floor_y) - EDGE, wall.height + EDGE


def draw_surface(ax: Axes, wall: Wall, window: tuple[float, float]) -> None:
    """Draw the wall between two heights (m), with its sections, metre lines and the ground."""
    from matplotlib.patches import Rectangle

    ax.add_patch(
        Rectangle((0, 0), wall.width, wall.height, facecolor=PAPER, edgecolor=GREY, lw=0.8)
    )
    bottom = 0.0
    for section in wall.sections:
        if bottom > 0:
            ax.plot([0, wall.width], [bottom, bottom], color=GREY, lw=0.8, zorder=1.1)
        if window[0] <= bottom + 0.02 <= window[1]:
            note = ax.annotate(
                _overhang_text(section.overhang),
                (wall.width, bottom),
                xytext=(-3, 3),
                textcoords="offset points",
                ha="right",
                va="bottom",
                fontsize=6,
                color=GREY,
                **TEXT,
            )
            note.set_zorder(1.2)
        bottom += section.height
    for metre in range(1, math.ceil(wall.height)):
        ax.plot([0, wall.width], [metre, metre], color="#e4e1d9", lw=0.5, zorder=1.05)
    ax.add_patch(
        Rectangle(
            (-EDGE, wall.floor_y - EDGE), wall.width + 2 * EDGE, EDGE, facecolor="white",
            edgecolor=GREY, hatch="//////", lw=0, zorder=1.1,
        )
    )  # fmt: skip
    ax.plot(
        [-EDGE, wall.width + EDGE], [wall.floor_y, wall.floor_y], color=GREY, lw=1.2, zorder=1.2
    )


def _overhang_text(overhang: float) -> str:
    degrees = round(math.degrees(overhang), 1)
    if degrees == 0:
        return "vertical"
    return f"{degrees:g}° overhang" if degrees > 0 else f"{-degrees:g}° slab"


def draw_hold(ax: Axes, hold: Hold, used: bool) -> Patch:
    """The outline of a hold, or a small disc (hands) or diamond (feet only) where it has none."""
    from matplotlib.patches import Polygon, RegularPolygon

    look: dict[str, Any] = {"zorder": 2, **(USED_HOLD if used else OTHER_HOLD)}
    patch: Patch
    if len(hold.outline) > 2:
        corners = [(hold.x + dx, hold.y + dy) for dx, dy in hold.outline]
        patch = Polygon(corners, **look)
    elif hold.use == "foot":
        patch = RegularPolygon((hold.x, hold.y), 4, radius=0.045, orientation=0, **look)
    elif hold.use == "strike":
        patch = RegularPolygon((hold.x, hold.y), 4, radius=0.14, orientation=math.pi / 4, **look)
    else:
        patch = RegularPolygon((hold.x, hold.y), 24, radius=0.055, **look)
    ax.add_patch(patch)
    return patch


def half_size(hold: Hold) -> tuple[float, float]:
    """How far a hold as drawn reaches to the sides and up, m."""
    if len(hold.outline) > 2:
        return max(abs(dx) for dx, _ in hold.outline), max(dy for _, dy in hold.outline)
    return (0.1, 0.1) if hold.use == "strike" else (0.055, 0.055)


def draw_hold_name(ax: Axes, hold: Hold, used: bool) -> Artist:
    """The name of a hold, small, above it."""
    from matplotlib.patheffects import withStroke

    name = ax.annotate(
        drawable(hold.id, 12),
        (hold.x, hold.y + half_size(hold)[1]),
        xytext=(0, 1.2),
        textcoords="offset points",
        ha="center",
        va="bottom",
        fontsize=5.6,
        fontstyle="italic",
        color=INK if used else GREY,
        annotation_clip=True,
        zorder=5,
        **TEXT,
    )
    name.set_path_effects([withStroke(linewidth=1.6, foreground=PAPER)])
    return name
