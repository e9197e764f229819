from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Polygon, Rectangle
from matplotlib.text import Text

from climbpath.errors import DataError, UsageError
from climbpath.figure.save import new_figure, save_figure
from climbpath.figure.wall import USE_STYLES, draw_wall, wall_figure
from climbpath.wall import parse_wall
from tests.wall.samples import SMALL
from tests.wall.test_files import LANES

WALL = parse_wall(SMALL)


def lines(artists: list[object], **want: object) -> list[Line2D]:
    found = [artist for artist in artists if isinstance(artist, Line2D)]
    return [
        line for line in found if all(getattr(line, f"get_{k}")() == v for k, v in want.items())
    ]


def test_holds_stand_where_they_are_with_the_marker_of_their_use() -> None:
    artists = draw_wall(WALL)
    for use, style in USE_STYLES.items():
        here = [(hold.x, hold.y) for hold in WALL.holds if hold.use == use]
        (marks,) = lines(artists, label=style.label)
        assert marks.get_marker() == style.marker
        assert np.array_equal(marks.get_xydata(), here)
    markers = [style.marker for style in USE_STYLES.values()]
    assert len(set(markers)) == len(markers)  # never colour alone


def test_outline_line_floor_and_grid() -> None:
    artists = draw_wall(parse_wall(SMALL.replace("width", "floor_y = -200\nwidth")))
    (outline,) = [artist for artist in artists if isinstance(artist, Polygon)]
    assert np.allclose(outline.get_xy()[:3], [[0.9, 2.75], [1.1, 2.75], [1.0, 2.88]])
    (line,) = lines(artists, label="line")
    assert list(line.get_xdata()) == [1.0, 1.0]
    assert line.get_linestyle() == "--"
    (floor,) = lines(artists, gid="floor")
    assert list(floor.get_ydata()) == [-0.2, -0.2]
    (holes,) = lines(artists, label="hole")
    # Columns at 0.1 ... 1.9 m, rows at 0.15 ... 2.95 m.
    assert len(holes.get_xdata()) == 10 * 15
    (edge,) = [artist for artist in artists if type(artist) is Rectangle]
    assert (edge.get_width(), edge.get_height()) == (2.0, 3.0)


def test_folds_and_lanes_are_drawn() -> None:
    second = "[[section]]\nheight = 500\noverhang_deg = -20\n[grid]"
    artists = draw_wall(parse_wall(SMALL.replace("[grid]", second) + LANES))
    (fold,) = lines(artists, gid="fold 1")
    assert list(fold.get_ydata()) == [3.0, 3.0]
    texts = [artist.get_text() for artist in artists if isinstance(artist, Text)]
    assert {"+10°", "-20°", "left", "right"} <= set(texts)


def test_scale_is_equal_and_in_metres() -> None:
    ax = draw_wall(WALL)[0].axes
    assert ax is not None
    assert ax.get_aspect() == 1.0
    assert ax.get_xlabel() == "x [m]"


def test_names_are_shown_literally(tmp_path: Path) -> None:
    name = r"$\\frac{1}{$ <b>&amp;"
    text = SMALL.replace('"Small"', f'"{name}"').replace('"f"', '"$x^$"')
    wall = parse_wall(text)
    artists = draw_wall(wall)
    assert "$x^$" in [artist.get_text() for artist in artists if isinstance(artist, Text)]
    save_figure(wall_figure(wall), tmp_path / "a.svg")
    content = (tmp_path / "a.svg").read_text(encoding="utf-8")
    assert "<b>" not in content


@pytest.mark.parametrize("ending", ["png", "svg", "pdf"])
def test_letters_the_font_lacks_do_no_harm(tmp_path: Path, ending: str) -> None:
    wall = parse_wall(SMALL.replace('"Small"', '"採石場の壁"'))
    save_figure(wall_figure(wall), tmp_path / f"a.{ending}")
    assert (tmp_path / f"a.{ending}").stat().st_size > 1000


def test_drawing_into_given_axes() -> None:
    ax = new_figure(4, 4).add_subplot()
    assert all(artist.axes is ax for artist in draw_wall(WALL, ax))


def test_saving(tmp_path: Path) -> None:
    figure = wall_figure(WALL)
    assert isinstance(figure, Figure)
    with pytest.raises(UsageError, match=r"\.svg"):
        save_figure(figure, tmp_path / "a")
    with pytest.raises(DataError):
        save_figure(figure, tmp_path / "none" / "a.png")
    assert list(tmp_path.iterdir()) == []


def test_pictures_carry_no_date(tmp_path: Path) -> None:
    for ending, word in (("svg", b"<dc:date>"), ("pdf", b"/CreationDate")):
        save_figure(wall_figure(WALL), tmp_path / f"a.{ending}")
        assert word not in (tmp_path / f"a.{ending}").read_bytes()
