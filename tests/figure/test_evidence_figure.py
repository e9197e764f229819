"""The figure and the table of the evidence: what is drawn where, and that it is told twice."""

from __future__ import annotations

import math

import pytest
from matplotlib.colors import to_hex

from climbpath.figure.evidence import draw_use, evidence_figure
from climbpath.figure.evidence_table import evidence_table
from climbpath.figure.names import text_width
from climbpath.figure.save import figure_bytes
from climbpath.study.evidence_results import Evidence
from tests.evidence_samples import sample_evidence


def test_predicted_and_observed_shares_stand_side_by_side() -> None:
    one = sample_evidence().sexes[1]
    drawn = draw_use(one)
    assert list(drawn.predicted.get_ydata()) == [hold.predicted for hold in one.holds]
    assert list(drawn.observed.get_ydata()) == [hold.observed for hold in one.holds]
    for left, right in zip(drawn.predicted.get_xdata(), drawn.observed.get_xdata(), strict=True):
        assert 0.2 < float(right) - float(left) < 0.5
    # Never by colour alone.
    assert drawn.predicted.get_marker() != drawn.observed.get_marker()
    assert to_hex(drawn.predicted.get_color()) != to_hex(drawn.observed.get_color())
    middles = [band.get_x() + band.get_width() / 2 for band in drawn.contested]
    assert middles == pytest.approx([1.0, 4.0, 13.0, 14.0, 15.0])
    assert all(band.get_hatch() for band in drawn.contested)
    assert drawn.layouts is not None
    spans = [[float(y) for y in segment[:, 1]] for segment in drawn.layouts.get_segments()]
    assert spans == [[hold.layouts[0], hold.layouts[2]] for hold in one.holds if hold.layouts]


def test_without_layouts_or_a_way_up_there_is_less_to_draw() -> None:
    men = sample_evidence(layouts=0, lost=True).sexes[0]
    drawn = draw_use(men)
    assert drawn.layouts is None
    assert all(math.isnan(float(y)) for y in drawn.predicted.get_ydata())
    assert "no way up" in drawn.ax.get_title(loc="left")


@pytest.mark.parametrize("layouts", [0, 2])
def test_the_figure_has_a_panel_for_each_sex_and_a_legend(layouts: int) -> None:
    figure = evidence_figure(sample_evidence(layouts=layouts))
    titles = [ax.get_title(loc="left") for ax in figure.axes]
    assert titles == ["Men: median time predicted 7.25 s, observed 6.72 s",
                      "Women: median time predicted 9.25 s, observed 9.16 s"]
    (legend,) = figure.legends
    assert len(legend.get_texts()) == (4 if layouts else 3)
    assert figure_bytes(figure, "svg") == figure_bytes(
        evidence_figure(sample_evidence(layouts=layouts)), "svg"
    )


@pytest.mark.parametrize("sample", [
    sample_evidence(), sample_evidence(layouts=0), sample_evidence(lost=True),
])  # fmt: skip
def test_the_table_fits_and_says_what_disagrees(sample: Evidence) -> None:
    text = evidence_table(sample)
    assert max(text_width(line) for line in text.splitlines()) <= 100
    assert "None" not in text
    assert "nan" not in text
    for one in sample.sexes:
        folded = " ".join(text.split())
        for said in one.disagreements:
            assert " ".join(said.split()) in folded
        for line in one.rivals:
            assert line.name in text


def test_lines_of_the_table() -> None:
    lines = evidence_table(sample_evidence()).splitlines()
    rows = [line for line in lines if line.startswith("   2*!")]
    # Men: half of those with a way up use hold 2, observed 36 of 43.
    assert rows[0].split()[:4] == ["2*!", "0.500", "0.837", "-0.337"]
    scores = [line for line in lines if line.startswith("use every hold")]
    assert all(line.split()[3:5] == ["–", "17/20"] for line in scores)
    assert any(line.startswith("no foot holds") and "1 of 3" in line for line in lines)
