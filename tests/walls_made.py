"""Made-up walls for tests and the benchmark: random lanes and ladders, the same every time."""

from __future__ import annotations

import math

import numpy as np

from climbpath.body import Athlete, make_athlete
from climbpath.wall.model import Hold, Section, Start, Wall

WIDTH = 3.0
"""Width of a lane, m, as on the published one."""

PAD = ((-0.2, -0.2), (0.2, -0.2), (0.2, 0.2), (-0.2, 0.2))
"""Outline of a made-up finish pad, m."""

FLOOR_START = Start((("1",), ("1",), ("floor",), ("floor", "free")))
"""Both hands on the lowest hold, one foot on the ground."""


def athlete(sex: str = "male", stature: float = 1.79) -> Athlete:
    """A body of mean mass for its stature: 22 kg/m2 for men, 20 for women (round numbers)."""
    return make_athlete(
        sex=sex, stature=stature, mass=(22.0 if sex == "male" else 20.0) * stature**2, name="made"
    )


def pad(x: float, y: float, name: str = "pad") -> Hold:
    """A finish pad that a hand strikes."""
    return Hold(name, x, y, use="strike", outline=PAD)


def lane(holds: int, height: float = 15.0, seed: int = 0, overhang_deg: float = 5.0) -> Wall:
    """A lane with ``holds`` holds, the last a finish pad.

    The others are uniform in x over 0.3 to 2.7 m and evenly spaced in height from 1.6 m to 1.2 m
    under the top, each moved up or down by up to 0.1 m.
    """
    rng = np.random.default_rng(seed)
    made = [
        Hold(str(k + 1), round(float(rng.uniform(0.3, 2.7)), 6),
             round(float(y + rng.uniform(-0.1, 0.1)), 6))
        for k, y in enumerate(np.linspace(1.6, height - 1.2, holds - 1))
    ]
    made.append(pad(WIDTH / 2, height - 0.2))
    return Wall(
        f"lane of {holds} holds", WIDTH, WIDTH / 2, -0.2,
        (Section(height, math.radians(overhang_deg)),), tuple(made), (FLOOR_START,), ("pad",),
    )


def ladder(rungs: int = 8, spacing: float = 0.45, x: float = 1.5, first: float = 1.5,
           overhang_deg: float = 0.0) -> Wall:
    """Holds one above the other on the line, a finish pad above the last."""
    made = [Hold(str(k + 1), x, round(first + spacing * k, 6)) for k in range(rungs)]
    top = made[-1].y + spacing
    made.append(pad(x, round(top + 0.2, 6)))
    return Wall(
        f"ladder of {rungs} rungs", WIDTH, x, 0.0,
        (Section(top + 1.0, math.radians(overhang_deg)),), tuple(made), (FLOOR_START,), ("pad",),
    )


def small_wall(seed: int = 0, holds: int = 7, height: float = 4.0) -> Wall:
    """A low wall with few holds, quick to solve: hand holds, foot chips and a pad.

    One third of the holds, at least one, are foot chips between 0.4 and 1.3 m; the others are
    spread over the height like those of ``lane`` but nearer to the line.
    """
    rng = np.random.default_rng(seed)
    chips = max(holds // 3, 1)
    upper = holds - chips - 1
    made = [
        Hold(str(k + 1), round(float(rng.uniform(1.0, 2.0)), 6),
             round(float(y + rng.uniform(-0.1, 0.1)), 6))
        for k, y in enumerate(np.linspace(1.5, height - 0.9, upper))
    ]
    made += [
        Hold(f"f{k + 1}", round(float(rng.uniform(1.1, 1.9)), 6),
             round(float(rng.uniform(0.4, 1.3)), 6), use="foot")
        for k in range(chips)
    ]
    made.append(pad(1.5, height - 0.2))
    return Wall(
        f"small wall {seed}", WIDTH, 1.5, 0.0, (Section(height, math.radians(5.0)),), tuple(made),
        (FLOOR_START,), ("pad",),
    )
