"""The overlay: what is drawn where, that names are shown as they are, and the text table."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import pytest
from matplotlib.colors import to_hex
from matplotlib.figure import Figure
from matplotlib.text import Text

from climbpath.errors import UsageError
from climbpath.figure.marks import LIMB_LOOKS, LINKS, drawable
from climbpath.figure.names import printable, text_width
from climbpath.figure.overlay import OverlayArtists, draw_legend, draw_overlay, overlay_figure
from climbpath.figure.save import save_figure
from climbpath.figure.table import number, plan_table
from climbpath.figure.timeline import draw_time_height
from climbpath.study.results import PlanResult, WhyNot
from climbpath.wall.model import Section, Wall
from tests.plan_samples import no_way_result, sample_plan, sample_result, sample_wall

HOSTILE = (r"$x^2\frac$", "<b>&", "a\nb", "\x1b[31m\x07", "\u202eevil", "墙 \U0001f9d7", "x" * 900)


@pytest.fixture
def wall() -> Wall:
    return sample_wall()


@pytest.fixture
def drawn(wall: Wall) -> OverlayArtists:
    result = sample_result(wall)
    return draw_overlay(result, result.plans[0], wall)


def texts_of(figure: Figure) -> list[Text]:
    return [artist for artist in figure.findobj(Text) if isinstance(artist, Text)]


def with_hold_named(name: str) -> tuple[PlanResult, Wall]:
    """The sample with every "3" renamed, also as the name of wall, athlete and a caution."""
    wall = sample_wall(name)
    holds = tuple(replace(h, id=name) if h.id == "3" else h for h in wall.holds)
    result = sample_result(wall, athlete_name=name)
    steps = tuple(
        replace(s, contacts={k: name if v == "3" else v for k, v in s.contacts.items()})
        for s in result.plans[0].steps
    )
    held = tuple(name if hold == "3" else hold for hold in result.plans[0].hand_holds)
    plan = replace(result.plans[0], steps=steps, hand_holds=held)
    return replace(result, plans=(plan,), cautions=(name,)), replace(wall, holds=holds)


def test_line_path_and_holds_lie_where_the_result_says(
    drawn: OverlayArtists, wall: Wall
) -> None:
    plan = sample_plan(wall)
    assert list(drawn.line.get_xdata()) == [1.5, 1.5]
    assert drawn.line.get_linestyle() == "--"
    assert list(drawn.path.get_xdata()) == [point[1] / 1000 for point in plan.com_path_mm]
    assert list(drawn.path.get_ydata()) == [point[2] / 1000 for point in plan.com_path_mm]
    assert drawn.path.get_linestyle() == "-"
    assert list(drawn.dots.get_xdata()) == [step.com_mm[0] / 1000 for step in plan.steps]
    assert list(drawn.dots.get_ydata()) == [step.com_mm[1] / 1000 for step in plan.steps]
    assert drawn.dots.get_marker() == "o"
    assert drawn.dots.get_linestyle() == "None"
    assert set(drawn.holds) == {hold.id for hold in wall.holds}
    box = drawn.holds["pad"].get_path().get_extents()
    # The pad of the sample: 300 by 400 mm about (1500, 14700).
    assert box.extents.tolist() == pytest.approx([1.35, 14.5, 1.65, 14.9])
    assert drawn.ax.get_aspect() == 1.0


def test_every_landing_has_a_badge_with_its_step(drawn: OverlayArtists, wall: Wall) -> None:
    expected = []
    for step in sample_plan(wall).steps:
        for limb in step.moved:
            if step.contacts[limb] != "free":
                expected.append((limb, step.step))
    assert sorted((badge.limb, badge.step) for badge in drawn.badges) == sorted(expected)
    assert all(badge.label.get_text() == str(badge.step) for badge in drawn.badges)


def test_badges_stand_on_their_side_of_the_hold(drawn: OverlayArtists, wall: Wall) -> None:
    pixels = drawn.ax.transData
    for badge in drawn.badges:
        name = sample_plan(wall).steps[badge.step].contacts[badge.limb]
        if name in ("floor", "smear"):
            continue
        hold = pixels.transform((wall.hold(name).x, wall.hold(name).y))[0]
        place = badge.marker.get_transform().transform(badge.marker.get_xydata())[0][0]
        assert (place - hold) * LIMB_LOOKS[badge.limb].side > 0


def test_badges_do_not_cover_each_other(drawn: OverlayArtists) -> None:
    points = 72 / drawn.ax.figure.dpi
    places = [b.marker.get_transform().transform(b.marker.get_xydata())[0] for b in drawn.badges]
    for i, one in enumerate(places):
        for other in places[:i]:
            assert points * math.dist(one, other) > 9.5


def test_limbs_differ_without_colour_and_in_colour() -> None:
    looks = LIMB_LOOKS.values()
    assert len({(look.marker, look.filled) for look in looks}) == 4
    # Colours named by Okabe and Ito (from memory): blue, vermilion, bluish green, reddish purple.
    assert [look.color for look in looks] == ["#0072B2", "#D55E00", "#009E73", "#CC79A7"]


def test_badge_fill_tells_left_from_right(drawn: OverlayArtists) -> None:
    for badge in drawn.badges:
        face = to_hex(badge.marker.get_markerfacecolor())
        assert (face == "#ffffff") == badge.limb.startswith("R")


@pytest.mark.parametrize(("bodies", "count"), [("none", 0), ("few", 7), ("all", 20)])
def test_bodies_at_chosen_steps(wall: Wall, bodies: Any, count: int) -> None:
    result = sample_result(wall)
    drawn = draw_overlay(result, result.plans[0], wall, bodies=bodies)
    assert len(drawn.bodies) == count
    if count:
        assert {0, 19} <= set(drawn.bodies)
        links = drawn.bodies[19][1]
        assert len(links.get_segments()) == len(LINKS)
        joints = result.plans[0].steps[19].joints_mm
        first = [[joints[name][0] / 1000, joints[name][1] / 1000] for name in LINKS[0]]
        assert links.get_segments()[0].tolist() == first


def test_limbs_that_touch_nothing_are_dotted(wall: Wall) -> None:
    result = sample_result(wall)
    step = result.plans[0].steps[3]
    off = replace(step, contacts={"LH": "1", "RH": "free", "LF": "floor", "RF": "1"})
    plan = replace(result.plans[0], steps=(off,))
    links = draw_overlay(result, plan, wall).bodies[3][1]
    dotted = [pattern is not None for _, pattern in links.get_linestyle()]
    arm = {("shoulder_R", "elbow_R"), ("elbow_R", "wrist_R"), ("wrist_R", "RH")}
    assert {pair for pair, is_dotted in zip(LINKS, dotted, strict=True) if is_dotted} == arm


def test_key_names_only_what_the_plan_has(wall: Wall) -> None:
    plan = sample_result(wall).plans[0]
    held = dict.fromkeys(("LH", "RH", "LF", "RF"), "1")
    plain = replace(plan, steps=tuple(replace(s, kind="move", contacts=held) for s in plan.steps))
    some = {"flight", "smear", "limb that touches nothing"}
    for one, expected in ((plain, set()), (None, some)):
        legend = draw_legend(Figure().add_subplot(), one)
        assert {text.get_text() for text in legend.get_texts()} & some == expected


def test_few_bodies_on_a_short_climb_do_not_merge(wall: Wall) -> None:
    result = sample_result(wall)
    # The first five steps of the sample gain about 2.5 m: room for one body between the ends.
    plan = replace(result.plans[0], steps=result.plans[0].steps[:5])
    assert len(draw_overlay(result, plan, wall).bodies) == 3


def test_another_word_for_bodies_is_refused(wall: Wall) -> None:
    result = sample_result(wall)
    word: Any = "some"
    with pytest.raises(UsageError, match="bodies"):
        draw_overlay(result, result.plans[0], wall, bodies=word)


def test_joints_that_lack_are_left_out(wall: Wall) -> None:
    result = sample_result(wall)
    plan = result.plans[0]
    bare = replace(plan, steps=tuple(replace(step, joints_mm={}) for step in plan.steps))
    assert draw_overlay(result, bare, wall, bodies="all").bodies == {}
    arm = {k: v for k, v in plan.steps[3].joints_mm.items() if k in ("shoulder_L", "elbow_L")}
    only = replace(plan, steps=(replace(plan.steps[3], joints_mm=arm),))
    (links,) = draw_overlay(result, only, wall).bodies[3]
    assert len(links.get_segments()) == 1


def test_draws_into_the_axes_given(wall: Wall) -> None:
    ax = Figure().add_subplot()
    result = sample_result(wall)
    assert draw_overlay(result, result.plans[0], wall, ax).ax is ax


def test_tall_wall_comes_in_two_halves_at_one_scale(wall: Wall) -> None:
    result = sample_result(wall)
    figure = overlay_figure(result, result.plans[0], wall)
    lower, upper = figure.axes[:2]
    assert lower.get_ylim()[0] < -0.2
    assert lower.get_ylim()[1] > 7.5 > upper.get_ylim()[0]
    assert upper.get_ylim()[1] > 15.0
    assert lower.get_position().size.tolist() == pytest.approx(upper.get_position().size.tolist())
    width, height = figure.get_size_inches() * lower.get_position().size
    x, y = lower.get_xlim(), lower.get_ylim()
    assert width / (x[1] - x[0]) == pytest.approx(height / (y[1] - y[0]))
    titles = [text.get_text() for text in texts_of(figure) if text.get_gid() == "title"]
    assert titles == ["Quarry lane · A. Sample"]
    facts = [text.get_text() for text in texts_of(figure) if text.get_gid() == "facts"]
    assert "6.313 s" in facts[0]
    assert "lateral mean 94 mm" in facts[0]


@pytest.mark.parametrize(("width", "height"), [(6.0, 4.5), (30.0, 4.0), (3.0, 9.0), (0.5, 0.5)])
def test_other_walls_come_in_one_piece(wall: Wall, width: float, height: float) -> None:
    low = tuple(hold for hold in wall.holds if hold.y < height)
    other = replace(wall, width=width, sections=(Section(height, 0.0),), holds=low)
    result = sample_result()
    plan = replace(result.plans[0], steps=result.plans[0].steps[:5])
    figure = overlay_figure(result, plan, other)
    assert len(figure.axes) == 3
    assert max(figure.get_size_inches()) < 16
    figure.canvas.draw()


def test_all_cautions_stand_at_the_foot_inside_the_figure(wall: Wall) -> None:
    result = sample_result(wall)
    figure = overlay_figure(result, result.plans[0], wall)
    figure.canvas.draw()
    lines = [text for text in texts_of(figure) if text.get_gid() == "caution"]
    assert " ".join(text.get_text() for text in lines) == " ".join(result.cautions)
    for text in lines:
        box = text.get_window_extent()
        assert box.x1 <= figure.bbox.x1
        assert box.y0 >= 0
        assert text.get_position()[1] < min(ax.get_position().y0 for ax in figure.axes)


def test_legend_names_what_is_drawn(wall: Wall) -> None:
    result = sample_result(wall)
    legend = overlay_figure(result, result.plans[0], wall).axes[-1].get_legend()
    assert legend is not None
    words = " / ".join(text.get_text() for text in legend.get_texts())
    for word in ("left hand", "right hand", "left foot", "right foot", "mass", "line", "flight"):
        assert word in words


def test_time_against_height(wall: Wall) -> None:
    plan = sample_plan(wall)
    drawn = draw_time_height(plan)
    assert list(drawn.curve.get_xdata()) == [point[0] for point in plan.com_path_mm]
    assert list(drawn.curve.get_ydata()) == [point[2] / 1000 for point in plan.com_path_mm]
    assert list(drawn.dots.get_xdata()) == [step.time_s for step in plan.steps]
    assert list(drawn.dots.get_ydata()) == [step.com_mm[1] / 1000 for step in plan.steps]
    assert list(drawn.flights.get_xdata()) == [plan.steps[11].time_s]
    assert drawn.numbers[0].get_text() == "0"


@pytest.mark.parametrize("name", HOSTILE)
@pytest.mark.parametrize("ending", ["png", "svg"])
def test_hostile_names_are_drawn_as_they_are(name: str, ending: str, tmp_path: Any) -> None:
    result, wall = with_hold_named(name)
    figure = overlay_figure(result, result.plans[0], wall)
    shown = [text for text in texts_of(figure) if text.get_text() == drawable(name, 12)]
    assert shown
    assert not any(text.get_parse_math() for text in shown)
    assert not any("\n" in text.get_text() for text in texts_of(figure))
    path = tmp_path / f"plan.{ending}"
    save_figure(figure, path)  # a missing glyph or a failed formula would be a warning or an error
    first = path.read_bytes()
    save_figure(overlay_figure(result, result.plans[0], wall), path)
    assert path.read_bytes() == first


@pytest.mark.parametrize("name", HOSTILE)
def test_table_is_narrow_and_harmless(name: str) -> None:
    result, _ = with_hold_named(name)
    plan = result.plans[0]
    several = (plan, replace(plan, rank=2, hand_holds=(name,) * 40))
    trade_off = tuple((6.0 + 0.1 * i, 900.0 - i, 300.0 - i) for i in range(40))
    text = plan_table(replace(result, plans=several, trade_off=trade_off))
    why_not = WhyNot(2, "LH", name, 12.0, 0.25, name)
    text += plan_table(replace(result, plans=(), why_not=why_not))
    assert all(letter == "\n" or letter.isprintable() for letter in text)
    assert max(text_width(line) for line in text.split("\n")) <= 100
    assert printable(name, 24) in text


def test_table_rows() -> None:
    text = plan_table(sample_result())
    lines = text.split("\n")
    assert lines[0] == "Quarry lane · A. Sample"
    assert "Plan 1: 6.313 s, lateral mean 94 mm, max 231 mm, 19 hand moves, 20 steps" in lines
    rows = [line.split() for line in lines if line.lstrip()[:2].strip().isdigit()]
    assert [row[0] for row in rows] == [str(i) for i in range(20)]
    assert "LH → 1, RH → 1, LF → floor, RF → f1" in text
    # The flight has neither margin nor load.
    assert rows[11][2] == "flight"
    assert rows[11][-2:] == ["–", "–"]
    assert "– not computed" in text.replace("\n", " ")
    assert rows[19][2:6] == ["finish", "RH", "→", "pad,"]


def test_table_without_a_plan_says_why() -> None:
    text = plan_table(no_way_result())
    assert "it stops at step 4, RH on hold 7" in text
    assert "38 mm of reach" in text
    assert "move hold 7 down by 38 mm" in text


@pytest.mark.parametrize(
    ("value", "shown"), [(None, "–"), (math.nan, "–"), (math.inf, "–"), (-0.04, "0.0"), (2, "2.0")]
)
def test_numbers_in_the_table(value: float | None, shown: str) -> None:
    assert number(value, 1) == shown


def test_printable() -> None:
    assert printable("a\nb\x1b\u202e") == "a\\nb\\x1b\\u202e"
    assert printable("abcdef", 4) == "abc…"
    assert printable("墙墙墙", 5) == "墙墙…"
    assert text_width(printable("a" + "\u0301" * 1000, 10)) <= 10
    assert len(printable("a" + "\u0301" * 1000, 10)) <= 41
