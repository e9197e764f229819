"""From outcomes to shares, claims that stand many layouts, and what disagrees."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from climbpath.study.conclusions import (
    conclude,
    conclusions,
    disagreements,
    hold_uses,
    mean_use,
    opening_evidence,
    wall_evidence,
)
from climbpath.study.evidence import sex_evidence
from climbpath.study.evidence_results import (
    DOES_NOT_HOLD,
    FINALISTS,
    HOLDS,
    NOT_IDENTIFIABLE,
    NOT_TRIED,
    SexEvidence,
    WallEvidence,
)
from climbpath.study.observed import pooled
from climbpath.study.outcomes import OpeningWay
from climbpath.study.published_lane import HAND_HOLDS
from tests.evidence_samples import USED, outcome, sample_evidence, shares

MEN = pooled("male")
LANE = wall_evidence(0, [outcome()])


def test_a_wall_counts_bodies_without_a_way_up_apart() -> None:
    wall = wall_evidence(3, [
        outcome(7.0, ["1", "3", "pad"], (1.0, 2.0, None)),
        outcome(8.0, ["1", "pad"], (2.0, 3.0, None)),
        outcome(None), outcome(None), outcome(None),
    ])  # fmt: skip
    assert (wall.layout, wall.bodies, wall.without_way_up) == (3, 5, 3)
    assert wall.use_share is not None
    assert dict(zip(HAND_HOLDS, wall.use_share, strict=True))["3"] == 0.5
    assert sum(wall.use_share) == 1.5
    # Percentiles by straight lines between the ordered values, numpy's default.
    assert wall.time_s == pytest.approx((7.05, 7.5, 7.95))
    assert wall.speeds_m_s == (1.5, 2.5, None)
    lost = wall_evidence(0, [outcome(None)])
    assert (lost.use_share, lost.time_s, lost.speeds_m_s) == (None, None, (None, None, None))


def test_the_opening_compares_bodies_that_get_up_both_ways() -> None:
    way = OpeningWay
    opening = opening_evidence([
        outcome(with_hold=way(8.0, 300.0, 50.0), without_hold=way(7.0, 300.0, 20.0)),
        outcome(with_hold=way(8.0, 200.0, 40.0), without_hold=way(9.0, 100.0, 30.0)),
        outcome(with_hold=way(8.4, 200.0, 45.0), without_hold=way(8.0, 250.0, 45.0)),
        outcome(with_hold=way(1.0, 1.0, 1.0)),
        outcome(without_hold=way(1.0, 1.0, 1.0)),
        outcome(None),
    ])  # fmt: skip
    assert (opening.with_hold, opening.without_hold, opening.both) == (4, 4, 3)
    assert (opening.faster, opening.straighter, opening.narrower) == ((2, 1), (2, 0), (1, 1))
    assert opening.time_s == (8.0, 8.0)
    assert opening.opening_mean_mm == (45.0, 30.0)
    assert opening.lateral_max_mm == (200.0, 250.0)
    nobody = opening_evidence([outcome()])
    assert (nobody.both, nobody.time_s, nobody.faster) == (0, None, (0, 0))


def answers(*given: bool | None) -> Callable[[WallEvidence], bool | None]:
    """What each wall says, by its number."""
    return lambda wall: given[wall.layout]


def numbered(layouts: int) -> list[WallEvidence]:
    return [wall_evidence(k, [outcome()]) for k in range(1, layouts + 1)]


@pytest.mark.parametrize(
    ("given", "status"),
    [
        # The lane is one of ten walls, of which nine must agree.
        ([True] * 10, HOLDS),
        ([True] * 9 + [False], HOLDS),
        ([False] + [True] * 9, HOLDS),
        ([True] * 8 + [False] * 2, NOT_IDENTIFIABLE),
        ([True] * 8 + [None] * 2, NOT_IDENTIFIABLE),
        ([False] * 9 + [None], DOES_NOT_HOLD),
        ([None] * 10, NOT_IDENTIFIABLE),
        ([True, False], NOT_IDENTIFIABLE),
        ([True], NOT_TRIED),
    ],
)
def test_a_claim_must_stand_nine_tenths_of_the_walls(
    given: list[bool | None], status: str
) -> None:
    found = conclude("so", answers(*given), LANE, numbered(len(given) - 1), True)
    assert found.status == status
    assert found.lane is given[0]
    assert sum(found.layouts) == len(given) - 1
    assert found.layouts[0] == given[1:].count(True)


def test_claims_on_speed_time_and_the_opening() -> None:
    wall = wall_evidence(0, [
        outcome(6.0, speeds=(1.0, 2.0, 2.0), with_hold=OpeningWay(6.0, 100.0, 9.0),
                without_hold=OpeningWay(6.5, 90.0, 9.0)),
    ])  # fmt: skip
    said = {line.claim: line.lane for line in conclusions(wall, (), MEN)}
    assert list(said.values()) == [False, None, True, True, None, False]
    assert "faster from hold 6 to hold 12 than before" in said
    expected = [line.expected for line in conclusions(wall, (), MEN)]
    assert expected == [None, None, None, True, True, None]


def test_hold_uses_span_the_layouts() -> None:
    layouts = [wall_evidence(1, [outcome(holds=["1"]), outcome(holds=["1", "2"])]),
               wall_evidence(2, [outcome(holds=["2"])]), wall_evidence(3, [outcome(None)])]
    lane = wall_evidence(0, [outcome(holds=["1", "9"])])
    uses = {use.hold: use for use in hold_uses(lane, layouts, MEN)}
    assert uses["1"].layouts == (0.0, 0.5, 1.0)
    assert uses["2"].layouts == (0.5, 0.75, 1.0)
    assert uses["9"].layouts == (0.0, 0.0, 0.0)
    assert [uses[hold].right_side for hold in ("1", "9", "17")] == [True, False, True]
    assert uses["9"].error == 1.0
    assert uses["2"].error == pytest.approx(-36 / 43)
    assert (uses["2"].contested, uses["1"].contested) == (True, False)
    # Two of four walls do not use hold 17, and a wall without a way up cannot tell.
    assert uses["17"].status == NOT_IDENTIFIABLE
    assert mean_use(layouts) == pytest.approx([0.5, 0.75, *[0.0] * 18])
    assert mean_use([]) is None


def men(sexes: tuple[SexEvidence, ...]) -> SexEvidence:
    return next(one for one in sexes if one.population.sex == "male")


def test_what_disagrees_is_said() -> None:
    text = "\n".join(men(sample_evidence().sexes).disagreements)
    assert "1 of 3 bodies have no way up" in text
    # Half of the bodies use hold 2 and none uses 5 and 14, which most runs used.
    assert ("On the wrong side of 50 %: hold 2 (predicted 50 %, observed 84 %), 5 (predicted 0 %, "
            "observed 77 %), 14 (predicted 0 %, observed 86 %).") in text
    assert "Largest errors: hold 14 (predicted 0 %, observed 86 %), 5" in text
    assert "Median time 7.25 s, observed 6.72 s: +8 %." in text
    assert "no better than: use every hold; " in text


def test_a_model_that_is_right_disagrees_with_nothing() -> None:
    right = [*USED, "2", "5", "14"]
    bodies = [outcome(MEN.mean_of_medians_s, right, (1.0, 2.0, 1.0))] * 5
    bodies += [outcome(MEN.mean_of_medians_s, [*right, "15"], (1.0, 2.0, 1.0))]
    one = sex_evidence(FINALISTS[0], wall_evidence(0, bodies), ())
    assert one.scores[0].right_side == 20
    said = disagreements(one.lane, MEN, one.scores, (), one.conclusions)
    assert all(text.startswith("Largest errors: ") for text in said)
    assert one.holds[13].predicted == shares(right)[13]


def test_nobody_up_is_said_and_scored_by_no_one() -> None:
    one = men(sample_evidence(lost=True).sexes)
    assert one.disagreements == ("3 of 3 bodies have no way up; finals athletes all have.",)
    assert one.scores == ()
    assert len(one.rivals) == 3
    assert all(use.predicted is None and use.right_side is None for use in one.holds)
