"""A drawing of a wall: its surface unfolded, holds, line, folds, floor and hole grid."""

from __future__ import annotations

import math
import textwrap
from dataclasses import dataclass
from typing import TYPE_CHECKING

from climbpath.wall.model import Grid, Hold, Wall

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

# Okabe and Ito's colours, which all common kinds of colour vision tell apart.
BLUE = "#0072B2"
GREEN = "#009E73"
VERMILION = "#D55E00"
PURPLE = "#CC79A7"


@dataclass(frozen=True)
class UseStyle:
    """How holds of one use are drawn: label, colour, marker, size of the marker in points."""

    label: str
    colour: str
    marker: str
    size: float


USE_STYLES = {
    "both": UseStyle("hands and feet", BLUE, "o", 7.0),
    "hand": UseStyle("hands only", PURPLE, "D", 6.0),
    "foot": UseStyle("feet only", GREEN, "v", 5.5),
    "strike": UseStyle("finish pad", VERMILION, "*", 11.0),
}

MAX_HOLES = 20_000
"""A grid with more holes on the wall is left out of the drawing: the dots would merge."""

MARGIN_M = 0.3
"""Free space about the wall in the drawing."""

LEGEND_DROP_IN = -0.55
"""The legend's top below the axes, inches: under the numbers and the name of x."""

TITLE_LETTER_IN = 0.085
"""Room for one letter of the title, inches: a wide one of 9 points."""

SIDE_M = 0.35
"""Room on the right for the overhang of each section."""


def wall_figure(wall: Wall) -> Figure:
    """A figure of one wall by itself, as high as the wall asks for."""
    from climbpath.figure.save import new_figure

    low = min(wall.floor_y, 0.0)
    ratio = (wall.height - low + 2 * MARGIN_M) / (wall.width + 2 * MARGIN_M + SIDE_M)
    # From 5 to 12 inches high and at least 3.6 wide, so that labels stay legible and apart.
    height = min(max(6.0 * ratio, 5.0), 12.0)
    width = min(max(height / ratio + 0.9, 3.6), 12.0)
    figure = new_figure(width, height)
    draw_wall(wall, figure.add_subplot())
    return figure


def draw_wall(wall: Wall, ax: Axes | None = None) -> list[Artist]:
    """Draw a wall in surface coordinates (m) and return the artists.

    Without ``ax`` a new figure is made; it is the ``figure`` of the artists. Holds with an outline
    are drawn by it, all others by a marker of their use; each has its id beside it, literally.
    """
    if ax is None:
        from climbpath.figure.save import new_figure

        ax = new_figure(6.0, 9.0).add_subplot()
    artists = [*_draw_surface(ax, wall), *_draw_grid(ax, wall)]
    artists.append(
        ax.plot(
            [wall.line_x, wall.line_x], [min(wall.floor_y, 0.0), wall.height],
            color="black", linewidth=0.9, linestyle=(0, (6, 4)), zorder=2, label="line",
        )[0]
    )  # fmt: skip
    artists += _draw_lanes(ax, wall)
    for use, style in USE_STYLES.items():
        artists += _draw_holds(ax, [hold for hold in wall.holds if hold.use == use], style)
    _set_axes(ax, wall)
    return artists


def _draw_surface(ax: Axes, wall: Wall) -> list[Artist]:
    """The edge of the wall, its folds with the overhangs, and the floor."""
    from matplotlib.patches import Rectangle

    edge = Rectangle(
        (0.0, 0.0), wall.width, wall.height, facecolor="#F7F7F4", edgecolor="0.3", zorder=0
    )
    edge.set_gid("wall")
    ax.add_patch(edge)
    artists: list[Artist] = [edge]
    bottom = 0.0
    for index, section in enumerate(wall.sections):
        if index:
            fold = ax.plot([0.0, wall.width], [bottom, bottom], color="0.3", linewidth=1.1)[0]
            fold.set_gid(f"fold {index}")
            artists.append(fold)
        text = f"{math.degrees(section.overhang):+.3g}°" if section.overhang else "0°"
        artists.append(
            ax.text(
                wall.width + 0.06, bottom + section.height / 2, text,
                fontsize=8, color="0.3", va="center", ha="left",
            )
        )  # fmt: skip
        bottom += section.height
    floor = ax.plot(
        [-MARGIN_M, wall.width + MARGIN_M], [wall.floor_y, wall.floor_y],
        color="0.15", linewidth=2.5, solid_capstyle="butt",
    )[0]  # fmt: skip
    floor.set_gid("floor")
    artists.append(floor)
    return artists


def _draw_grid(ax: Axes, wall: Wall) -> list[Artist]:
    if wall.grid is None:
        return []
    holes = _holes(wall.grid, wall.width, wall.height)
    if not holes:
        return []
    xs, ys = zip(*holes, strict=True)
    dots = ax.plot(
        xs, ys, linestyle="none", marker=".", markersize=1.6, color="0.72",
        markeredgewidth=0.0, zorder=1, label="hole",
    )[0]  # fmt: skip
    return [dots]


def _holes(grid: Grid, width: float, height: float) -> list[tuple[float, float]]:
    """Positions of the holes on the wall; none if there are too many to draw."""
    columns = max(math.floor((width - grid.x0) / grid.pitch) + 1, 0)
    rows = max(math.floor((height - grid.y0) / grid.pitch) + 1, 0)
    if columns * rows > MAX_HOLES:
        return []
    places = (
        grid.position(column, row)
        for column in range(1, columns + 1)
        for row in range(1, rows + 1)
        if grid.has_hole(column, row)
    )
    return [(x, y) for x, y in places if 0.0 < x < width and 0.0 < y < height]


def _draw_lanes(ax: Axes, wall: Wall) -> list[Artist]:
    artists: list[Artist] = []
    for lane in wall.lanes:
        for x in (lane.x_from, lane.x_to):
            edge = ax.plot([x, x], [0.0, wall.height], color="0.55", linewidth=0.8)[0]
            artists.append(edge)
        line = ax.plot(
            [lane.line_x, lane.line_x], [0.0, wall.height],
            color="0.35", linewidth=0.8, linestyle=(0, (2, 3)),
        )[0]  # fmt: skip
        line.set_gid(f"line of lane {wall.lanes.index(lane) + 1}")
        artists.append(line)
        artists.append(
            ax.text(
                (lane.x_from + lane.x_to) / 2, wall.height + 0.06, lane.id,
                fontsize=8, ha="center", va="bottom", parse_math=False,
            )
        )  # fmt: skip
    return artists


def _draw_holds(ax: Axes, holds: list[Hold], style: UseStyle) -> list[Artist]:
    from matplotlib.patches import Polygon
    from matplotlib.patheffects import Normal, Stroke

    artists: list[Artist] = []
    if not holds:
        return artists
    for hold in holds:
        if hold.outline:
            corners = [(hold.x + x, hold.y + y) for x, y in hold.outline]
            patch = Polygon(
                corners, closed=True, facecolor=style.colour, edgecolor=style.colour,
                alpha=0.35, zorder=3,
            )  # fmt: skip
            ax.add_patch(patch)
            artists.append(patch)
    # The marker stands in every hold, with an outline a small one: it tells the use without colour.
    for with_outline in (False, True):
        chosen = [hold for hold in holds if bool(hold.outline) == with_outline]
        if not chosen:
            continue
        marks = ax.plot(
            [hold.x for hold in chosen], [hold.y for hold in chosen],
            linestyle="none", marker=style.marker, color=style.colour, zorder=4,
            markersize=style.size * (0.6 if with_outline else 1.0), label=style.label,
        )[0]  # fmt: skip
        artists.append(marks)
    for hold in holds:
        out = max((x for x, _ in hold.outline), default=0.0)
        artists.append(
            ax.annotate(
                hold.id, (hold.x + out, hold.y), xytext=(5.0, 0.0), textcoords="offset points",
                fontsize=7, va="center", ha="left", zorder=5, parse_math=False,
                path_effects=[Stroke(linewidth=1.8, foreground="white"), Normal()],
            )
        )  # fmt: skip
    return artists


def _set_axes(ax: Axes, wall: Wall) -> None:
    from matplotlib.transforms import ScaledTranslation

    low = min(wall.floor_y, 0.0)
    ax.set_aspect("equal")
    ax.set_xlim(-MARGIN_M, wall.width + MARGIN_M + SIDE_M)
    ax.set_ylim(low - MARGIN_M, wall.height + MARGIN_M)
    ax.set_xlabel("x [m]")
    ax.set_ylabel("y along the surface [m]")
    # Wrapped here, since matplotlib's own wrapping would read a $ in the name as a formula.
    letters = max(int(ax.figure.bbox.width / ax.figure.dpi / TITLE_LETTER_IN), 20)
    ax.set_title(textwrap.fill(wall.name, letters), fontsize=9, parse_math=False)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    handles, labels = ax.get_legend_handles_labels()
    first = {label: handle for handle, label in reversed(list(zip(handles, labels, strict=True)))}
    shown = [label for label in dict.fromkeys(labels) if label != "hole"]
    # A fixed distance below the axes, however high they are.
    below = ax.transAxes + ScaledTranslation(0.0, LEGEND_DROP_IN, ax.figure.dpi_scale_trans)
    ax.legend(
        [first[label] for label in shown], shown,
        fontsize=7, loc="upper center", bbox_to_anchor=(0.5, 0.0), bbox_transform=below,
        ncols=2, frameon=False, borderaxespad=0.0,
    )  # fmt: skip
