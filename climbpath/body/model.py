"""The athlete: lengths with their error, joint ranges, mass."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

LENGTH_NAMES = (
    "upper_arm",
    "forearm",
    "hand",
    "hand_breadth",
    "shoulder_half_width",
    "shoulder_rise",
    "trunk",
    "hip_half_width",
    "thigh",
    "shank",
    "ankle_height",
    "foot",
    "ankle_to_toe",
    "neck_head",
    "chest_depth",
    "pelvis_depth",
)
"""The lengths of every athlete, in the order of tables."""

MASS_TABLES = ("de_leva", "dempster")


@dataclass(frozen=True)
class Length:
    """One length. ``value`` and residual ``sd`` in m; ``sd`` is 0 for what was measured.

    ``source`` is "measured" (or follows from measured lengths alone), "survey" (the 2012 survey's
    least-squares lines and the identities between lengths) or "stature" (a share of stature).
    """

    value: float
    sd: float
    source: str


@dataclass(frozen=True)
class Athlete:
    """A body. Lengths in m, mass in kg, joint ranges in rad; build it with ``make_athlete``.

    ``lengths`` has the keys of ``LENGTH_NAMES``:
    ``upper_arm`` shoulder joint to elbow, ``forearm`` elbow to wrist, ``hand`` wrist to fingertip,
    ``hand_breadth``, ``shoulder_half_width`` midline to shoulder joint in the span pose,
    ``shoulder_rise`` what the shoulder joint gains overhead, ``trunk`` hip-joint line to
    shoulder-joint line (arms down), ``hip_half_width`` midline to hip joint, ``thigh``, ``shank``,
    ``ankle_height`` ankle joint to ground, ``foot`` heel to toe tip, ``ankle_to_toe`` ankle joint
    straight to the part of the sole that stands on a hold, ``neck_head`` shoulder-joint line to
    the top of the head, ``chest_depth`` and ``pelvis_depth`` front to back.
    ``reaches`` has what follows from the lengths, with the residual SD of the whole:
    ``standing_reach``, ``span``, ``shoulder_height`` (the joint's) and ``hip_height``.
    ``measured`` holds what was measured, m, as given to ``make_athlete``.
    """

    name: str
    sex: str
    stature: float
    mass: float
    birth_year: int | None
    lengths: Mapping[str, Length]
    reaches: Mapping[str, Length]
    ranges: Mapping[str, float]
    capacity: Mapping[str, float] = field(default_factory=dict)
    mass_table: str = "de_leva"
    measured: Mapping[str, float] = field(default_factory=dict)
    cautions: tuple[str, ...] = ()

    def length(self, name: str) -> float:
        """The value of one length, m."""
        return self.lengths[name].value

    @property
    def arm(self) -> float:
        """Shoulder joint to fingertip, m."""
        return self.length("upper_arm") + self.length("forearm") + self.length("hand")

    @property
    def hip_height(self) -> float:
        """Hip joint above the ground, standing, m."""
        return self.length("thigh") + self.length("shank") + self.length("ankle_height")

    @property
    def shoulder_height(self) -> float:
        """Shoulder joint above the ground, standing with the arms down, m."""
        return self.hip_height + self.length("trunk")

    @property
    def standing_reach(self) -> float:
        """Fingertip above the ground, flat on the feet with one arm overhead, m."""
        return self.shoulder_height + self.length("shoulder_rise") + self.arm

    @property
    def span(self) -> float:
        """Fingertip to fingertip with both arms out, m."""
        return 2.0 * (self.length("shoulder_half_width") + self.arm)
