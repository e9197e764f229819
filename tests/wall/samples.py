"""Walls for tests: a small one as text, and a hypothesis strategy for any wall a file can hold."""

from __future__ import annotations

import math

from hypothesis import strategies as st

from climbpath.wall import Grid, Hold, Lane, Section, Start, Wall
from climbpath.wall.model import mean_hand_x

SMALL = """
schema = "climbpath/wall/1"
name = "Small"
width = 2000
[[section]]
height = 3000
overhang_deg = 10
[grid]
x0 = 100
y0 = 150
pitch = 200
[[hold]]
id = "1"
x = 700
y = 1500
[[hold]]
id = "2"
hole = "6,9"
use = "hand"
[[hold]]
id = "f"
x = 900
y = 400.5
use = "foot"
[[hold]]
id = "pad"
x = 1000
y = 2800
use = "strike"
outline = [[-100, -50], [100, -50], [0, 80]]
[[start]]
LH = "1"
RH = ["1", "2"]
LF = "floor"
RF = ["floor", "free", "smear", "f"]
[finish]
holds = ["pad"]
"""


def micrometres(low: int, high: int) -> st.SearchStrategy[float]:
    """Lengths in m between bounds in mm, on whole micrometres, as files give them."""
    return st.integers(low * 1000, high * 1000).map(lambda value: round(value / 1e6, 6))


def angles(low: float, high: float) -> st.SearchStrategy[float]:
    """Angles in rad between bounds in degrees, to 1e-6 degrees, as files give them."""
    scale = 1_000_000
    return st.integers(int(low * scale), int(high * scale)).map(
        lambda value: math.radians(round(value / scale, 6))
    )


names = st.text(
    st.characters(exclude_categories=("Cc", "Cf", "Cs", "Zl", "Zp", "Zs", "Cn")),
    min_size=1,
    max_size=20,
)
ids = names.filter(lambda text: text not in ("floor", "free", "smear"))


@st.composite
def walls(draw: st.DrawFn) -> Wall:
    """Any wall a file can describe, with at least two holds for hands."""
    sections = tuple(
        Section(draw(micrometres(500, 4000)), draw(angles(-59.0, 89.0)))
        for _ in range(draw(st.integers(1, 3)))
    )
    width = draw(micrometres(2000, 6000))
    height = sum(section.height for section in sections)
    grid = _grid(draw, width)
    middle = round(width / 2, 6)
    lane_ids = draw(st.sampled_from([(), ("left", "right")]))
    spots = draw(
        st.lists(
            st.tuples(micrometres(0, 2000), micrometres(0, int(height * 1000))),
            min_size=2, max_size=6, unique=True,
        )
    )  # fmt: skip
    hold_ids = draw(st.lists(ids, min_size=len(spots), max_size=len(spots), unique=True))
    holds = []
    for index, ((x, y), hold_id) in enumerate(zip(spots, hold_ids, strict=True)):
        common = index < 2
        use = "both" if common else draw(st.sampled_from(["hand", "foot", "both", "strike"]))
        in_left = not common and bool(lane_ids) and x <= middle
        holds.append(
            Hold(
                hold_id, x, y, use,
                depth=draw(micrometres(0, 200)),
                hands=draw(st.sampled_from([1, 2])),
                support=draw(angles(-179.0, 180.0)),
                support_in=draw(angles(-90.0, 90.0)),
                range=draw(angles(1.0, 90.0)),
                hand_quality=draw(st.floats(0.0, 1.0)),
                foot_quality=draw(st.floats(0.0, 1.0)),
                lane="left" if in_left else None,
                outline=_outline(draw) if index == 0 else (),
                hole=None if grid is None else grid.hole_at(x, y),
            )
        )  # fmt: skip
    fit = draw(st.booleans())
    start = Start(((hold_ids[0],), (hold_ids[1], "free"), ("floor",), ("smear", hold_ids[0])))
    bounds = {"left": (0.0, middle), "right": (middle, width)}
    lanes = tuple(
        Lane(name, *bounds[name], bounds[name][1], (start,) if name == "left" else ())
        for name in lane_ids
    )
    line_x = mean_hand_x(tuple(holds)) if fit else draw(micrometres(0, 2000))
    return Wall(
        name=draw(names), width=width, line_x=line_x if line_x is not None else 0.0,
        floor_y=draw(micrometres(-500, 400)), sections=sections, holds=tuple(holds),
        starts=(start,), finish=(hold_ids[1],), grid=grid, lanes=lanes,
        unit=draw(st.sampled_from(["mm", "cm", "m"])), line_is_fit=fit,
    )  # fmt: skip


def _grid(draw: st.DrawFn, width: float) -> Grid | None:
    if draw(st.booleans()):
        return None
    panel = draw(st.integers(0, 6))
    inner = draw(st.integers(1, panel)) if panel else 0
    return Grid(
        draw(micrometres(1, 1900)), draw(micrometres(1, 400)), draw(micrometres(50, 300)),
        panel, inner, inner,
    )  # fmt: skip


def _outline(draw: st.DrawFn) -> tuple[tuple[float, float], ...]:
    half = draw(micrometres(1, 100))
    return ((-half, -half), (half, -half), (0.0, half))
