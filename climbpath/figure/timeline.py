"""Height of the centre of mass against time."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from climbpath.figure.marks import GREY, INK, TEXT
from climbpath.study.results import Plan

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D
    from matplotlib.text import Text

NUMBER_ROOM = 0.022
"""Share of the height of the panel that a step number takes."""


@dataclass(frozen=True)
class TimeHeightArtists:
    """What ``draw_time_height`` drew: the curve, the dots of steps, the diamonds of flights, the
    step numbers.
    """

    ax: Axes
    curve: Line2D
    dots: Line2D
    flights: Line2D
    numbers: tuple[Text, ...]


def draw_time_height(plan: Plan, ax: Axes | None = None) -> TimeHeightArtists:
    """Draw the height of the centre of mass (m along the wall) against time (s).

    Every step has a dot; steps are numbered as far as the numbers do not meet. Without ``ax`` a
    new figure is made.
    """
    from matplotlib.ticker import MaxNLocator

    if ax is None:
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        figure = Figure(figsize=(3.0, 6.0))
        FigureCanvasAgg(figure)
        ax = figure.add_subplot()
    times = [step.time_s for step in plan.steps]
    heights = [step.com_mm[1] / 1000 for step in plan.steps]
    (curve,) = ax.plot(
        [point[0] for point in plan.com_path_mm], [point[2] / 1000 for point in plan.com_path_mm],
        color=INK, lw=1.4,
    )  # fmt: skip
    (dots,) = ax.plot(
        times, heights, ls="none", marker="o", ms=4.2, mfc=INK, mec="white", mew=0.6
    )
    in_flight = [i for i, step in enumerate(plan.steps) if step.kind == "flight"]
    (flights,) = ax.plot(
        [times[i] for i in in_flight], [heights[i] for i in in_flight], ls="none", marker="D",
        ms=5.2, mfc="white", mec=INK, mew=1.2,
    )  # fmt: skip
    numbers = []
    room = NUMBER_ROOM * (max(heights, default=0.0) - min(heights, default=0.0))
    last = float("-inf")
    for step, time, height in zip(plan.steps, times, heights, strict=True):
        if height - last < room:
            continue
        last = height
        number = ax.annotate(
            str(step.step), (time, height), xytext=(5, -1), textcoords="offset points",
            ha="left", va="top", fontsize=6, color=GREY, **TEXT,
        )  # fmt: skip
        numbers.append(number)
    ax.set_xlabel("time since the signal (s)", fontsize=7.5, **TEXT)
    ax.set_ylabel("height of the centre of mass (m)", fontsize=7.5, **TEXT)
    ax.tick_params(labelsize=7, labelfontfamily=TEXT["family"], color=GREY, length=2.5)
    ax.xaxis.set_major_locator(MaxNLocator(6))
    ax.yaxis.set_major_locator(MaxNLocator(12, integer=True))
    ax.grid(color="#e4e1d9", lw=0.5)
    ax.set_axisbelow(True)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    ax.margins(x=0.07, y=0.03)
    return TimeHeightArtists(ax, curve, dots, flights, tuple(numbers))
