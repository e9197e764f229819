"""Marks that figures of a climb share: limb colours and badges, the stick body, plain text.

Every distinction is made twice, by colour (Okabe–Ito) and by shape and fill, so that a print in
black and white says the same.
"""

from __future__ import annotations

import functools
import itertools
import math
from collections.abc import Collection, Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from climbpath.figure.names import code_of, printable

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D
    from matplotlib.text import Text

FONT = "DejaVu Sans"
"""The font that comes with matplotlib: pictures look the same on every machine."""
TEXT: dict[str, Any] = {"family": FONT, "parse_math": False, "usetex": False}
"""Keywords for every text that may hold letters from a file: a dollar sign is a dollar sign."""

INK, GREY, PALE, PAPER = "#1a1a1a", "#666666", "#c9c6bf", "#f6f4ef"
BODY = "#3f4a56"


@dataclass(frozen=True)
class LimbLook:
    """How the placements of one limb look: hands round, feet square; left filled, right open."""

    label: str
    color: str
    marker: str
    filled: bool
    side: int


LIMB_LOOKS = {
    "LH": LimbLook("left hand", "#0072B2", "o", True, -1),
    "RH": LimbLook("right hand", "#D55E00", "o", False, 1),
    "LF": LimbLook("left foot", "#009E73", "s", True, -1),
    "RF": LimbLook("right foot", "#CC79A7", "s", False, 1),
}
BADGE_SIZE = {"o": 11.0, "s": 9.6}
"""Size of a badge in points; a circle looks smaller than a square of its width."""

FIRST_SHIFT, BADGE_PITCH, HOLD_CLEARANCE = 7.0, 11.0, 8.5
"""Points from a hold's edge to its first badge, between badges, and from other holds."""

LINKS = (
    ("neck", "pelvis"),
    ("shoulder_L", "shoulder_R"),
    ("hip_L", "hip_R"),
    ("shoulder_L", "elbow_L"),
    ("elbow_L", "wrist_L"),
    ("wrist_L", "LH"),
    ("shoulder_R", "elbow_R"),
    ("elbow_R", "wrist_R"),
    ("wrist_R", "RH"),
    ("hip_L", "knee_L"),
    ("knee_L", "ankle_L"),
    ("ankle_L", "LF"),
    ("hip_R", "knee_R"),
    ("knee_R", "ankle_R"),
    ("ankle_R", "RF"),
)
"""Lines of the stick body, by joint names."""
LIMB_OF_LINK = {
    pair: limb
    for limb, chain in (
        ("LH", ("shoulder_L", "elbow_L", "wrist_L", "LH")),
        ("RH", ("shoulder_R", "elbow_R", "wrist_R", "RH")),
        ("LF", ("hip_L", "knee_L", "ankle_L", "LF")),
        ("RF", ("hip_R", "knee_R", "ankle_R", "RF")),
    )
    for pair in itertools.pairwise(chain)
}
"""The limb each line of an arm or a leg belongs to."""
BODY_LINE: dict[str, Any] = {"color": BODY, "lw": 1.3, "ls": "-", "alpha": 0.75}
FREE_LINE: dict[str, Any] = {"color": BODY, "lw": 1.0, "ls": (0, (1, 1.8)), "alpha": 0.75}
"""Line keywords of the stick body, and of its limbs that touch nothing."""
TORSO = ("shoulder_L", "shoulder_R", "hip_R", "hip_L")


@dataclass(frozen=True)
class Badge:
    """A numbered placement: the limb, its step, and the two artists that show them."""

    limb: str
    step: int
    marker: Line2D
    label: Text


class BadgePlaces:
    """Finds for each badge a place beside its point that is clear of what is there already.

    Works in points on the axes as they are when it is made; ``holds`` are points (m) to stay off.
    """

    def __init__(self, ax: Axes, holds: Iterable[tuple[float, float]]) -> None:
        ax.apply_aspect()
        root = ax.get_figure(root=True)
        self._points_per_pixel = 72.0 / (root.dpi if root else 72.0)
        self._to_pixels = ax.transData
        self._holds = [self._in_points(xy) for xy in holds]
        self._badges: list[tuple[float, float]] = []

    def shift(self, xy: tuple[float, float], side: int) -> tuple[float, float]:
        """Shift in points from ``xy`` (m) for one more badge to its left (-1) or right (1)."""
        x, y = self._in_points(xy)
        clear = (s for s in self._tries(x, y, side) if self._is_clear((x + s[0], y + s[1])))
        chosen = next(clear, (side * FIRST_SHIFT, 0.0))
        self._badges.append((x + chosen[0], y + chosen[1]))
        return chosen

    def _tries(self, x: float, y: float, side: int) -> Iterator[tuple[float, float]]:
        """Places in a row outward as far as no hold is in the way, then above and below."""
        columns = [side * (FIRST_SHIFT + BADGE_PITCH * k) for k in range(3)]
        for across in columns:
            if not _is_off((x + across, y), self._holds, HOLD_CLEARANCE):
                break
            yield across, 0.0
        for up in (1, -1, 2, -2):
            for across in columns[:2]:
                yield across, up * BADGE_PITCH

    def _is_clear(self, place: tuple[float, float]) -> bool:
        return _is_off(place, self._holds, HOLD_CLEARANCE) and _is_off(
            place, self._badges, BADGE_PITCH - 0.5
        )

    def _in_points(self, xy: tuple[float, float]) -> tuple[float, float]:
        x, y = self._to_pixels.transform(xy)
        return float(x) * self._points_per_pixel, float(y) * self._points_per_pixel


def _is_off(
    place: tuple[float, float], others: Iterable[tuple[float, float]], room: float
) -> bool:
    return all(math.dist(place, other) >= room for other in others)


@functools.cache
def _glyph_codes() -> frozenset[int]:
    from matplotlib.font_manager import findfont, get_font

    return frozenset(get_font(findfont(FONT)).get_charmap())


def drawable(text: str, limit: int = 60) -> str:
    """``printable`` text in which letters that the font lacks are shown by their code too."""
    known = _glyph_codes()
    return "".join(c if ord(c) in known else code_of(c) for c in printable(text, limit))


def limb_marker_style(limb: str) -> dict[str, Any]:
    """Line2D keywords of a limb's badge, for the badge itself and for a legend."""
    look = LIMB_LOOKS[limb]
    return {
        "linestyle": "none",
        "marker": look.marker,
        "markersize": BADGE_SIZE[look.marker],
        "markerfacecolor": look.color if look.filled else "white",
        "markeredgecolor": look.color if not look.filled else "white",
        "markeredgewidth": 0.6 if look.filled else 1.8,
    }


def draw_badge(
    ax: Axes, limb: str, step: int, xy: tuple[float, float], shift_pt: tuple[float, float]
) -> Badge:
    """Draw the badge of one placement ``shift_pt`` points beside ``xy`` (m)."""
    from matplotlib.lines import Line2D
    from matplotlib.transforms import offset_copy

    root = ax.get_figure(root=True)
    place = offset_copy(ax.transData, fig=root, x=shift_pt[0], y=shift_pt[1], units="points")
    marker = Line2D([xy[0]], [xy[1]], transform=place, zorder=6, **limb_marker_style(limb))
    ax.add_line(marker)
    label = ax.text(
        xy[0],
        xy[1],
        str(step),
        transform=place,
        ha="center",
        va="center_baseline",
        fontsize=5.8,
        fontweight="bold",
        color="white" if LIMB_LOOKS[limb].filled else INK,
        zorder=6.1,
        clip_on=True,
        **TEXT,
    )
    return Badge(limb, step, marker, label)


def draw_body(
    ax: Axes,
    joints_mm: Mapping[str, tuple[float, float, float]],
    step: int,
    free: Collection[str] = (),
) -> list[Artist]:
    """Draw the stick body of one step, its number at the head; joints that lack are left out.

    The limbs named in ``free`` touch nothing: they are dotted and thin.
    """
    from matplotlib.collections import LineCollection
    from matplotlib.patches import Circle, Polygon
    from matplotlib.patheffects import withStroke

    points = {name: (x / 1000, y / 1000) for name, (x, y, _) in joints_mm.items()}
    artists: list[Artist] = []
    if all(name in points for name in TORSO):
        torso = Polygon(
            [points[name] for name in TORSO], facecolor=BODY, alpha=0.16, lw=0, zorder=3
        )
        artists.append(ax.add_patch(torso))
    shown = [pair for pair in LINKS if pair[0] in points and pair[1] in points]
    hanging = [LIMB_OF_LINK.get(pair) in free for pair in shown]
    links = LineCollection(
        [[points[a], points[b]] for a, b in shown],
        colors=BODY,
        linewidths=[FREE_LINE["lw"] if off else BODY_LINE["lw"] for off in hanging],
        linestyles=[FREE_LINE["ls"] if off else "-" for off in hanging],
        alpha=0.75,
        capstyle="round",
        zorder=3.1,
    )
    artists.append(ax.add_collection(links, autolim=False))
    if "neck" in points and "head" in points:
        centre, radius = _head_circle(joints_mm["neck"], joints_mm["head"])
        head = Circle(centre, radius, facecolor="white", edgecolor=BODY, lw=1.1, zorder=3.2)
        artists.append(ax.add_patch(head))
        number = ax.annotate(
            str(step),
            (centre[0] + 0.75 * radius, centre[1] + 0.75 * radius),
            xytext=(1.5, 0),
            textcoords="offset points",
            fontsize=6.4,
            color=BODY,
            zorder=4.5,
            annotation_clip=True,
            **TEXT,
        )
        number.set_path_effects([withStroke(linewidth=1.6, foreground=PAPER)])
        artists.append(number)
    return artists


def _head_circle(
    neck_mm: tuple[float, float, float], head_mm: tuple[float, float, float]
) -> tuple[tuple[float, float], float]:
    """Centre and radius (m) of a circle that ends at the top of the head."""
    length = math.dist(neck_mm, head_mm) / 1000
    radius = min(max(0.35 * length, 0.08), 0.13)
    share = 1 - radius / length if length > radius else 1.0
    x, y = (a + share * (b - a) for a, b in zip(neck_mm[:2], head_mm[:2], strict=True))
    return (x / 1000, y / 1000), radius
