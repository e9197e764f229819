"""What a plan returns: frozen dataclasses that carry all a table, a JSON file or a figure needs.

Field names are the keys of the JSON document, with the unit at their end; positions are surface
coordinates in mm with the distance out of the surface as third entry.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

Point2 = tuple[float, float]
Point3 = tuple[float, float, float]
PathPoint = tuple[float, float, float, float]


@dataclass(frozen=True)
class PlanStep:
    """The stance at the end of one step.

    ``contacts`` gives for each limb a hold id, "floor", "smear" or "free"; ``points_mm`` the
    points of contact of the limbs that have one; ``joints_mm`` the joints by name (left and
    right ``shoulder``, ``elbow``, ``wrist``, ``hip``, ``knee``, ``ankle`` with ``_L`` or ``_R``,
    the limb ends ``LH``, ``RH``, ``LF``, ``RF``, and ``pelvis``, ``neck``, ``head``).
    """

    step: int
    time_s: float
    kind: str  # "start", "move", "flight" or "finish"
    moved: tuple[str, ...]
    contacts: Mapping[str, str]
    points_mm: Mapping[str, Point2]
    com_mm: Point3
    joints_mm: Mapping[str, Point3]
    speed_m_s: float | None
    margin_mm: float | None
    load: float | None
    load_by_limb: Mapping[str, float]


@dataclass(frozen=True)
class Plan:
    """One sequence from start to finish with its figures; rank 1 is the best.

    ``com_path_mm``: the path of the centre of mass, (time_s, x_mm, y_mm, z_mm) from the signal on;
    between its points it runs evenly.
    """

    rank: int
    time_s: float
    lattice_time_s: float
    expected_time_s: float | None
    chance_clean: float | None
    time_interval_s: tuple[float, float] | None
    lattice_error_s: float | None
    pad_off_s: float | None
    lateral_area_mm_s: float
    lateral_mean_mm: float
    lateral_max_mm: float
    sideways_mm: float
    path_ratio: float | None
    hand_moves: int
    hand_holds: tuple[str, ...]
    margin_min_mm: float | None
    load_max: float | None
    steps: tuple[PlanStep, ...]
    com_path_mm: tuple[PathPoint, ...] = ()


@dataclass(frozen=True)
class WhyNot:
    """Where nothing gets through: what stops it and the least change that frees it."""

    step: int
    limb: str | None
    hold: str | None
    missing_mm: float | None
    missing_bw: float | None
    change: str


@dataclass(frozen=True)
class PlanResult:
    """Everything one ``plan`` run found. ``plans`` is empty exactly where ``why_not`` is given."""

    wall_name: str
    athlete_name: str
    line_x_mm: float
    aim: str
    cautions: tuple[str, ...]
    plans: tuple[Plan, ...]
    trade_off: tuple[tuple[float, float, float], ...]
    why_not: WhyNot | None
