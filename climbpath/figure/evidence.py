"""Predicted against observed use of the published lane's hand holds."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from climbpath.figure.marks import GREY, INK, TEXT
from climbpath.study.evidence_results import Evidence, SexEvidence

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.collections import LineCollection
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D
    from matplotlib.patches import Rectangle

PREDICTED: dict[str, Any] = {"color": "#0072B2", "marker": "o", "ms": 6.0, "mec": "white",
                             "mew": 0.6, "zorder": 4}
OBSERVED: dict[str, Any] = {"color": "#D55E00", "marker": "D", "ms": 6.0, "mfc": "white",
                            "mew": 1.5, "zorder": 3}
CONTESTED_BAND: dict[str, Any] = {"facecolor": "#ece9e1", "edgecolor": "#b5b0a4", "hatch": "////",
                                  "lw": 0.0, "zorder": 0.5}
SHIFT = 0.16
"""How far the two marks of a hold stand apart, in holds."""

TITLES = {"male": "Men", "female": "Women"}


@dataclass(frozen=True)
class UseArtists:
    """What ``draw_use`` drew; ``layouts`` are the spans over foot layouts, None without any."""

    ax: Axes
    predicted: Line2D
    observed: Line2D
    contested: tuple[Rectangle, ...]
    layouts: LineCollection | None


def draw_use(one: SexEvidence, ax: Axes | None = None) -> UseArtists:
    """Draw one sex's shares of use by hold, observed as diamonds, predicted as dots.

    A bar behind a dot spans the foot layouts; contested holds stand on a hatched band. Without
    ``ax`` a new figure is made.
    """
    if ax is None:
        from climbpath.figure.save import new_figure

        ax = new_figure(8.0, 3.2).add_subplot()
    places = range(len(one.holds))
    bands = tuple(
        ax.axvspan(place - 0.5, place + 0.5, **CONTESTED_BAND)
        for place, hold in enumerate(one.holds) if hold.contested
    )
    ax.axhline(0.5, color=GREY, lw=0.8, ls=(0, (4, 3)), zorder=1)
    spans = [(place, hold.layouts) for place, hold in enumerate(one.holds)]
    known = [(place, span) for place, span in spans if span is not None]
    layouts = None
    if known:
        layouts = ax.vlines(
            [place - SHIFT for place, _ in known], [span[0] for _, span in known],
            [span[2] for _, span in known], colors=PREDICTED["color"], lw=3.0, alpha=0.35, zorder=2,
        )  # fmt: skip
    nan = float("nan")
    (predicted,) = ax.plot(
        [place - SHIFT for place in places],
        [nan if hold.predicted is None else hold.predicted for hold in one.holds],
        ls="none", **PREDICTED,
    )  # fmt: skip
    (observed,) = ax.plot(
        [place + SHIFT for place in places], [hold.observed for hold in one.holds],
        ls="none", **OBSERVED,
    )  # fmt: skip
    ax.set_title(_title(one), loc="left", fontsize=9, color=INK, **TEXT)
    ax.set_xticks(list(places), [hold.hold for hold in one.holds])
    ax.set_yticks([0.0, 0.25, 0.5, 0.75, 1.0], ["0", "25", "50", "75", "100"])
    ax.set_xlim(-0.6, len(one.holds) - 0.4)
    ax.set_ylim(-0.06, 1.06)
    ax.set_ylabel("use by hand (%)", fontsize=7.5, **TEXT)
    ax.tick_params(labelsize=7, labelfontfamily=TEXT["family"], color=GREY, length=2.5)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    return UseArtists(ax, predicted, observed, bands, layouts)


def _title(one: SexEvidence) -> str:
    predicted = "no way up" if one.lane.time_s is None else f"{one.lane.time_s[1]:.2f} s"
    return (f"{TITLES[one.population.sex]}: median time predicted {predicted}, observed "
            f"{one.observed.mean_of_medians_s:.2f} s")


def evidence_figure(result: Evidence) -> Figure:
    """Both sexes one above the other, with a legend."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    from climbpath.figure.save import new_figure

    figure = new_figure(8.0, 1.0 + 2.7 * len(result.sexes))
    panels = figure.subplots(len(result.sexes), 1, squeeze=False)[:, 0]
    for one, ax in zip(result.sexes, panels, strict=True):
        draw_use(one, ax)
    panels[-1].set_xlabel("hand hold of the published lane", fontsize=7.5, **TEXT)
    handles: list[Any] = [
        Line2D([], [], ls="none", label="predicted, no foot holds", **PREDICTED),
        Line2D([], [], ls="none", label="observed in finals", **OBSERVED),
        Patch(label="contested hold", **CONTESTED_BAND),
    ]
    if result.request.layouts:
        handles.insert(1, Line2D([], [], color=PREDICTED["color"], lw=3.0, alpha=0.35,
                                 label="predicted, span over foot layouts"))
    figure.legend(
        handles=handles, loc="outside lower center", ncols=len(handles), frameon=False,
        prop={"family": TEXT["family"], "size": 7.5},
    )  # fmt: skip
    return figure
