"""Made-up plans, outcomes and evidence, put together by hand: nothing here comes from a search."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from climbpath.study.conclusions import wall_evidence
from climbpath.study.evidence import CAUTIONS, sex_evidence
from climbpath.study.evidence_results import FINALISTS, Evidence, EvidenceRequest
from climbpath.study.outcomes import BodyOutcome, OpeningWay
from climbpath.study.published_lane import HAND_HOLDS
from climbpath.study.results import Plan, PlanStep

Row = tuple[float, float, float, str, str]
"""Time s, x and y of the centre of mass mm, hold of the left and of the right hand."""

USED = ("1", "3", "4", "6", "7", "8", "10", "11", "12", "13", "16", "18", "19", "20", "pad")


def made_plan(rows: Sequence[Row], pad_off_s: float | None = 0.2) -> Plan:
    """A plan of these steps; figures that no measure looks at are nought."""
    steps = tuple(
        PlanStep(
            step=k, time_s=time, kind="move", moved=(), com_mm=(x, y, 100.0),
            contacts={"LH": left, "RH": right, "LF": "free", "RF": "free"}, points_mm={},
            joints_mm={}, speed_m_s=None, margin_mm=None, load=None, load_by_limb={},
        )
        for k, (time, x, y, left, right) in enumerate(rows)
    )
    held = dict.fromkeys(hold for row in rows for hold in row[3:] if hold != "free")
    return Plan(
        rank=1, time_s=rows[-1][0], lattice_time_s=rows[-1][0], expected_time_s=None,
        chance_clean=None, time_interval_s=None, lattice_error_s=None, pad_off_s=pad_off_s,
        lateral_area_mm_s=0.0, lateral_mean_mm=0.0,
        lateral_max_mm=max(abs(row[1] - 1500.0) for row in rows), sideways_mm=0.0,
        path_ratio=None, hand_moves=0, hand_holds=tuple(held), margin_min_mm=None,
        load_max=None, steps=steps,
    )


def outcome(
    time_s: float | None = 8.0,
    holds: Iterable[str] = USED,
    speeds: tuple[float | None, float | None, float | None] = (1.5, 2.0, 1.8),
    with_hold: OpeningWay | None = None,
    without_hold: OpeningWay | None = None,
) -> BodyOutcome:
    """One body; without a time it has no way up."""
    if time_s is None:
        return BodyOutcome("body", 1.7, 60.0)
    return BodyOutcome("body", 1.7, 60.0, time_s, tuple(holds), speeds, with_hold, without_hold)


def sample_evidence(layouts: int = 2, lost: bool = False) -> Evidence:
    """Three men and three women on the lane and on each layout; ``lost``: no man gets up."""
    request = EvidenceRequest(bodies=3, layouts=layouts, layout_bodies=2, seed=4)
    sexes = []
    for who in FINALISTS:
        slow = 0.0 if who.sex == "male" else 2.0
        bodies = [
            outcome(7.0 + slow, with_hold=OpeningWay(7.0 + slow, 200.0, 60.0),
                    without_hold=OpeningWay(7.2 + slow, 150.0, 20.0)),
            outcome(7.5 + slow, [*USED, "2"], (1.5, 1.9, 2.0),
                    without_hold=OpeningWay(7.5 + slow, 100.0, 30.0)),
            outcome(None),
        ]
        if lost and who.sex == "male":
            bodies = [outcome(None)] * 3
        walls = [wall_evidence(0, bodies)]
        walls += [wall_evidence(k, bodies[k % 2 : k % 2 + 2]) for k in range(1, layouts + 1)]
        sexes.append(sex_evidence(who, walls[0], walls[1:]))
    feet = tuple(((1500.0, 500.0 + k), (1625.0, 1900.0)) for k in range(layouts))
    return Evidence(request, feet, tuple(sexes), CAUTIONS)


def shares(used: Iterable[str]) -> list[float]:
    """1 for the hand holds named, 0 for the others."""
    wanted = set(used)
    return [float(hold in wanted) for hold in HAND_HOLDS]
