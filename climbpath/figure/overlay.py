"""A plan drawn over its wall: holds, line, path of the centre of mass, placements, bodies."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

from climbpath.contacts import LIMB_NAMES
from climbpath.errors import UsageError
from climbpath.figure.marks import (
    BODY_LINE,
    FREE_LINE,
    GREY,
    INK,
    LIMB_LOOKS,
    TEXT,
    Badge,
    BadgePlaces,
    draw_badge,
    draw_body,
    drawable,
    limb_marker_style,
)
from climbpath.figure.surface import (
    EDGE,
    OTHER_HOLD,
    USED_HOLD,
    draw_hold,
    draw_hold_name,
    draw_surface,
    half_size,
    whole_window,
)
from climbpath.figure.timeline import draw_time_height
from climbpath.study.results import Plan, PlanResult, PlanStep
from climbpath.wall.model import Wall

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.legend import Legend
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

Box = tuple[float, float, float, float]
Bodies = Literal["few", "none", "all"]
FEW_BODIES = 5
"""Bodies drawn at most between start and finish where few are asked for."""
BODY_SPACING_MM = 1200.0
"""Where few are asked for, bodies stand at least about this far apart, or they would merge."""
LABELLED_HOLDS = 80
"""With more holds than this only those the plan uses are named."""


@dataclass(frozen=True)
class OverlayArtists:
    """What ``draw_overlay`` drew, for later changes and for tests.

    ``holds`` by hold id, ``path`` of the centre of mass with its ``dots`` at the steps, ``badges``
    in the order of their steps, ``bodies`` by step.
    """

    ax: Axes
    holds: Mapping[str, Patch]
    hold_names: tuple[Artist, ...]
    line: Line2D
    path: Line2D
    dots: Line2D
    badges: tuple[Badge, ...]
    bodies: Mapping[int, tuple[Artist, ...]]


def draw_overlay(
    result: PlanResult,
    plan: Plan,
    wall: Wall,
    ax: Axes | None = None,
    bodies: Bodies = "few",
    window: tuple[float, float] | None = None,
) -> OverlayArtists:
    """Draw ``plan`` over ``wall`` into ``ax``, by default the only axes of a new figure.

    The axes are in m, x from the left edge of the wall and y along its surface. ``window`` is the
    range of y to show (m), by default the whole wall. Placements carry the number of their step
    and stand left of a hold for left limbs, right of it for right ones. ``bodies``: stick bodies
    at every step, at a few or at none (UsageError for another word).
    """
    if bodies not in ("few", "none", "all"):
        raise UsageError(f"bodies must be 'few', 'none' or 'all', not {bodies!r}")
    if ax is None:
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        figure = Figure(figsize=(6.0, 9.0))
        FigureCanvasAgg(figure)
        ax = figure.add_subplot()
    low, high = window or whole_window(wall)
    draw_surface(ax, wall, (low, high))
    used = {name for step in plan.steps for name in step.contacts.values()}
    shown = [hold for hold in wall.holds if low - 0.3 < hold.y < high + 0.3]
    holds = {hold.id: draw_hold(ax, hold, hold.id in used) for hold in shown}
    named = [h for h in shown if h.id in used or len(wall.holds) <= LABELLED_HOLDS]
    names = tuple(draw_hold_name(ax, hold, hold.id in used) for hold in named)
    line_x = result.line_x_mm / 1000
    (line,) = ax.plot(
        [line_x, line_x], [min(0.0, wall.floor_y), wall.height], ls=(0, (6, 4)), lw=0.9,
        color=INK, zorder=1.6,
    )  # fmt: skip
    chosen = body_steps(plan.steps, bodies)
    drawn = {s.step: tuple(draw_body(ax, s.joints_mm, s.step, _free_limbs(s))) for s in chosen}
    path, dots = _draw_path(ax, plan)
    ax.set_xlim(-EDGE, wall.width + EDGE)
    ax.set_ylim(low, high)
    ax.set_aspect("equal")
    badges = _draw_placements(ax, wall, plan.steps, (low, high))
    return OverlayArtists(ax, holds, names, line, path, dots, badges, drawn)


def body_steps(steps: Sequence[PlanStep], bodies: Bodies) -> list[PlanStep]:
    """The steps at which a body is drawn; "few" are start, finish and up to five between, even in
    height and not too close."""
    drawable_steps = [step for step in steps if step.joints_mm]
    if bodies == "none" or not drawable_steps:
        return []
    if bodies == "all" or len(drawable_steps) <= 2:
        return drawable_steps
    first, *rest, last = drawable_steps
    chosen = [first, last]
    rise = last.com_mm[1] - first.com_mm[1]
    between = min(FEW_BODIES, len(rest), max(int(rise / BODY_SPACING_MM) - 1, 0))
    for place in range(1, between + 1):
        height = first.com_mm[1] + place * rise / (between + 1)
        nearest = min(rest, key=lambda step: abs(step.com_mm[1] - height))
        rest.remove(nearest)
        chosen.append(nearest)
    return sorted(chosen, key=lambda step: step.step)


def _free_limbs(step: PlanStep) -> list[str]:
    return [limb for limb in LIMB_NAMES if step.contacts.get(limb) == "free"]


def _draw_path(ax: Axes, plan: Plan) -> tuple[Line2D, Line2D]:
    """The path of the centre of mass, a dot at every step, open diamonds for flights."""
    from matplotlib.patheffects import withStroke

    steps = plan.steps
    x = [step.com_mm[0] / 1000 for step in steps]
    y = [step.com_mm[1] / 1000 for step in steps]
    (path,) = ax.plot(
        [point[1] / 1000 for point in plan.com_path_mm],
        [point[2] / 1000 for point in plan.com_path_mm],
        color=INK, lw=1.7, zorder=4, solid_joinstyle="round",
    )  # fmt: skip
    (dots,) = ax.plot(
        x, y, ls="none", marker="o", ms=4.2, mfc=INK, mec="white", mew=0.6, zorder=4.05
    )
    path.set_path_effects([withStroke(linewidth=3.4, foreground="white")])
    flights = [i for i, step in enumerate(steps) if step.kind == "flight"]
    if flights:
        ax.plot(
            [x[i] for i in flights], [y[i] for i in flights], ls="none", marker="D", ms=5.2,
            mfc="white", mec=INK, mew=1.2, zorder=4.1,
        )  # fmt: skip
    return path, dots


def _draw_placements(
    ax: Axes, wall: Wall, steps: Sequence[PlanStep], window: tuple[float, float]
) -> tuple[Badge, ...]:
    """A badge for every limb that lands; those of one side of one hold stand in a row."""
    holds = {hold.id: hold for hold in wall.holds}
    places = BadgePlaces(ax, [(hold.x, hold.y) for hold in wall.holds])
    badges = []
    for step in steps:
        landed = LIMB_NAMES if step.kind == "start" else step.moved
        for limb in landed:
            contact = step.contacts.get(limb, "free")
            point = step.points_mm.get(limb)
            if contact == "free" or point is None:
                continue
            side = LIMB_LOOKS[limb].side
            x, y = point[0] / 1000, point[1] / 1000
            if contact in holds:
                hold = holds[contact]
                x, y = hold.x + side * half_size(hold)[0], hold.y
            if not window[0] <= y <= window[1]:
                continue
            if contact == "smear":
                ax.plot([x], [y], marker="x", ms=4, mew=0.9, color=GREY, zorder=2.5)
            shift = places.shift((x, y), side)
            badges.append(draw_badge(ax, limb, step.step, (x, y), shift))
    return tuple(badges)


def draw_legend(ax: Axes, plan: Plan | None = None) -> Legend:
    """Draw the key to an overlay into ``ax``, whose frame is taken away.

    With ``plan`` the marks for flights, smears and free limbs are left out where it has none.
    """
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    handles: list[Artist] = [
        Line2D([], [], label=f"{look.label}, number = step", **limb_marker_style(limb))
        for limb, look in LIMB_LOOKS.items()
    ]
    dot: dict[str, Any] = {"marker": "o", "ms": 4.2, "mfc": INK, "mec": "white"}
    flight = Line2D([], [], ls="none", marker="D", ms=5.2, mfc="white", mec=INK, label="flight")
    smear = Line2D([], [], ls="none", marker="x", ms=4, color=GREY, label="smear")
    free = Line2D([], [], label="limb that touches nothing", **FREE_LINE)
    contacts = {name for step in plan.steps for name in step.contacts.values()} if plan else set()
    handles += [
        Line2D([], [], color=INK, lw=1.7, label="centre of mass, dot = step", **dot),
        *([flight] if plan is None or any(s.kind == "flight" for s in plan.steps) else []),
        Line2D([], [], ls=(0, (4, 3)), color=INK, lw=0.9, label="line"),
        Line2D([], [], label="body, number = step", **BODY_LINE),
        *([free] if plan is None or "free" in contacts else []),
        *([smear] if plan is None or "smear" in contacts else []),
        Patch(label="hold in use", **USED_HOLD),
        Patch(label="other hold", **OTHER_HOLD),
    ]
    ax.set_axis_off()
    return ax.legend(
        handles=handles, loc="upper left", frameon=False, borderaxespad=0, labelspacing=0.65,
        prop={"family": TEXT["family"], "size": 7.2},
    )  # fmt: skip


@dataclass(frozen=True)
class _Layout:
    """Sizes of an overlay figure in inches: one column of wall, or its lower and upper half."""

    windows: tuple[tuple[float, float], ...]
    column: tuple[float, float]
    foot: float
    size: tuple[float, float]

    def box(self, left: float, bottom: float, width: float, height: float) -> Box:
        """A box given in inches as the shares of the figure that matplotlib asks for."""
        across, up = self.size
        return left / across, bottom / up, width / across, height / up


LEFT, GAP, SIDE, RIGHT, TOP = 0.55, 0.5, 2.3, 0.2, 0.9
"""Margins, the gap between columns, and the width of the side column, inches."""
HIGHEST, WIDEST = 9.4, 8.2
"""What the drawn wall takes at most, inches."""
LEAST_HEIGHT = 5.4
CUT_OVERLAP = 0.3
"""How far each half of a tall wall reaches beyond the cut, m."""
TALL = 3.0
"""A wall more than this many times as high as wide is drawn in two halves."""
CAUTION_SIZE = 6.2
CAUTION_LINE = 0.118


def overlay_figure(
    result: PlanResult, plan: Plan, wall: Wall, bodies: Bodies = "few"
) -> Figure:
    """A whole figure: the overlay at one scale, time against height, key, title and cautions.

    A wall more than three times as high as wide is shown as its lower and upper half side by
    side. The figure has an Agg canvas and is known to no pyplot.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    low, high = whole_window(wall)
    middle = wall.height / 2
    windows: tuple[tuple[float, float], ...] = ((low, high),)
    if wall.height > TALL * wall.width:
        reach = max(middle + CUT_OVERLAP - low, high - middle + CUT_OVERLAP)
        windows = ((low, low + reach), (high - reach, high))
    layout, caution_lines = _layout(wall, windows, result.cautions)
    figure = Figure(figsize=layout.size, facecolor="white")
    FigureCanvasAgg(figure)
    width, height = layout.column
    top = layout.foot + max(height, LEAST_HEIGHT)
    for place, window in enumerate(windows):
        left = LEFT + place * (width + GAP)
        ax = figure.add_axes(layout.box(left, top - height, width, height))
        draw_overlay(result, plan, wall, ax, bodies, window)
        _dress(ax, "height along the wall (m)" if place == 0 else "")
        if len(windows) > 1:
            ax.plot([0, wall.width], [middle, middle], color=GREY, lw=0.8, ls=":", zorder=1.3)
            ax.set_title(("lower half", "upper half")[place], fontsize=8, color=GREY, **TEXT)
    left = layout.size[0] - SIDE - RIGHT
    bottom = layout.foot + 2.75
    draw_time_height(plan, figure.add_axes(layout.box(left, bottom, SIDE, top - bottom)))
    draw_legend(figure.add_axes(layout.box(left - 0.3, layout.foot, SIDE + 0.3, 2.3)), plan)
    _write_title(figure, layout, result, plan)
    for place, text in enumerate(caution_lines):
        y = layout.foot - 0.52 - place * CAUTION_LINE
        figure.text(
            LEFT / layout.size[0], y / layout.size[1], text, fontsize=CAUTION_SIZE, color=GREY,
            va="top", gid="caution", **TEXT,
        )  # fmt: skip
    return figure


def _layout(
    wall: Wall, windows: Sequence[tuple[float, float]], cautions: Sequence[str]
) -> tuple[_Layout, list[str]]:
    """Sizes of the figure, and the cautions broken into lines that fit its width."""
    across, up = wall.width + 2 * EDGE, windows[0][1] - windows[0][0]
    scale = min(HIGHEST / up, WIDEST / (len(windows) * across))
    column = (across * scale, up * scale)
    width = LEFT + len(windows) * (column[0] + GAP) + SIDE + RIGHT + 0.2
    letters = int((width - LEFT - RIGHT) * 72 / (0.56 * CAUTION_SIZE))
    text = " ".join(_sentence(drawable(caution, 400)) for caution in cautions)
    lines = textwrap.wrap(text, letters)
    foot = 0.62 + len(lines) * CAUTION_LINE
    height = foot + max(column[1], LEAST_HEIGHT) + TOP
    return _Layout(tuple(windows), column, foot, (width, height)), lines


def _sentence(text: str) -> str:
    """Text that can stand before another sentence."""
    return text if text.endswith((".", "!", "?", "…")) else f"{text}."


def _dress(ax: Axes, y_label: str) -> None:
    """Ticks, labels and frame as all panels of the figure have them."""
    from matplotlib.ticker import MaxNLocator

    ax.tick_params(labelsize=7, labelfontfamily=TEXT["family"], length=0)
    for spine in ax.spines.values():
        spine.set_visible(False)
    ax.set_xlabel("x (m)", fontsize=7.5, **TEXT)
    ax.set_ylabel(y_label, fontsize=7.5, **TEXT)
    ax.xaxis.set_major_locator(MaxNLocator(8, integer=True))
    ax.yaxis.set_major_locator(MaxNLocator(10, integer=True))


def _write_title(figure: Figure, layout: _Layout, result: PlanResult, plan: Plan) -> None:
    width, height = layout.size
    x = LEFT / width
    title = f"{drawable(result.wall_name, 50)} · {drawable(result.athlete_name, 40)}"
    facts = (
        f"plan {plan.rank}: {plan.time_s:.3f} s · lateral mean {plan.lateral_mean_mm:.0f} mm, "
        f"max {plan.lateral_max_mm:.0f} mm · {plan.hand_moves} hand moves"
    )
    figure.text(
        x, 1 - 0.18 / height, title, fontsize=13, fontweight="bold", color=INK, va="top",
        gid="title", **TEXT,
    )  # fmt: skip
    figure.text(x, 1 - 0.43 / height, facts, fontsize=9, color=INK, va="top", gid="facts", **TEXT)
