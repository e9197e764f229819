"""What ``evidence`` returns: frozen dataclasses with all that a table, a document, a figure needs.

Tuples over holds have 20 entries, in the order of ``published_lane.HAND_HOLDS``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from climbpath.study.observed import Pooled
from climbpath.study.scores import Scores

HOLDS = "holds"
DOES_NOT_HOLD = "does not hold"
NOT_IDENTIFIABLE = "not identifiable"
NOT_TRIED = "one wall only"
"""Whether a claim stands many foot layouts; see ``conclusions.AGREEMENT``."""

Three = tuple[float | None, float | None, float | None]


@dataclass(frozen=True)
class PopulationOf:
    """Whom the bodies stand for: ``stature`` (m) and ``body_mass_index`` (kg/m²) as (mean, SD)."""

    sex: str
    stature: tuple[float, float]
    body_mass_index: tuple[float, float]


FINALISTS = (
    PopulationOf("male", (1.77, 0.08), (22.0, 1.2)),
    PopulationOf("female", (1.67, 0.04), (20.0, 1.2)),
)
"""Round figures for finals athletes (from memory); the SD of the body-mass index is a choice, no
source."""


@dataclass(frozen=True)
class EvidenceRequest:
    """How much is drawn: bodies on the lane without foot holds, layouts, and bodies on each.

    The first ``layout_bodies`` bodies of the same population climb every layout. ``capacity`` gives
    capacities by sex, in place of the defaults.
    """

    bodies: int = 200
    layouts: int = 20
    layout_bodies: int = 12
    seed: int = 0
    capacity: Mapping[str, Mapping[str, float]] = field(default_factory=dict)


@dataclass(frozen=True)
class OpeningEvidence:
    """Bodies with a hand on the opening's hold against the same bodies without.

    ``with_hold`` and ``without_hold``: how many bodies get up that way; ``both``: how many both
    ways. Of these, ``faster``, ``straighter`` and ``narrower`` (better, worse without the hold)
    count by time, by the mean distance from the line in the opening, and by the greatest distance
    in the climb; the rest are equal. Times and distances are medians (with, without) over
    ``both``, None where it is 0.
    """

    with_hold: int
    without_hold: int
    both: int
    faster: tuple[int, int]
    straighter: tuple[int, int]
    narrower: tuple[int, int]
    time_s: tuple[float, float] | None
    opening_mean_mm: tuple[float, float] | None
    lateral_max_mm: tuple[float, float] | None


@dataclass(frozen=True)
class WallEvidence:
    """One population on one wall. ``layout`` 0 is the lane without foot holds.

    ``use_share``, times and speeds are of the bodies with a way up: None where there are none.
    ``time_s`` is the 5th percentile, the median and the 95th; ``speeds_m_s`` medians by stretch.
    """

    layout: int
    bodies: int
    without_way_up: int
    use_share: tuple[float, ...] | None
    time_s: tuple[float, float, float] | None
    speeds_m_s: Three
    opening: OpeningEvidence


@dataclass(frozen=True)
class Conclusion:
    """One claim over all walls. ``expected`` is what was observed or published, None if nothing.

    ``lane`` is the answer on the lane without foot holds, None where it cannot be told there;
    ``layouts`` counts (true, false, undecided) over the foot layouts.
    """

    claim: str
    lane: bool | None
    layouts: tuple[int, int, int]
    status: str
    expected: bool | None


@dataclass(frozen=True)
class HoldUse:
    """One hand hold: shares of use on the lane without foot holds and over the layouts.

    ``error`` is predicted less observed; both are None without a way up. ``layouts``: least,
    median and greatest share over the foot layouts, None without any. ``status``: whether "most
    use it" stands many layouts.
    """

    hold: str
    predicted: float | None
    observed: float
    error: float | None
    layouts: tuple[float, float, float] | None
    contested: bool
    right_side: bool | None
    status: str


@dataclass(frozen=True)
class SexEvidence:
    """Everything on one sex. ``scores``: the model's, on the lane without foot holds and averaged
    over the layouts, as far as anybody gets up; ``rivals``: what a model must beat.
    """

    population: PopulationOf
    observed: Pooled
    lane: WallEvidence
    layouts: tuple[WallEvidence, ...]
    holds: tuple[HoldUse, ...]
    scores: tuple[Scores, ...]
    rivals: tuple[Scores, ...]
    conclusions: tuple[Conclusion, ...]
    disagreements: tuple[str, ...]


@dataclass(frozen=True)
class Evidence:
    """The whole result. ``feet_mm``: the foot holds (x, y) of each layout."""

    request: EvidenceRequest
    feet_mm: tuple[tuple[tuple[float, float], ...], ...]
    sexes: tuple[SexEvidence, ...]
    cautions: tuple[str, ...]
