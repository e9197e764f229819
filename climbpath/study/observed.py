"""Which hand holds of the published lane finals athletes used, and their times.

The table is ``tables/observed_hand_use.csv``: counts of runs by year and sex. Pooled figures weight
each year by its runs. The runs' single times are not in it, so the pooled time is the mean of the
years' medians weighted by runs, which is not the median of all runs.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache

from climbpath.errors import UsageError
from climbpath.study.published_lane import HAND_HOLDS, table_rows

SEXES = ("female", "male")

CONTESTED = ("2", "5", "14", "15", "16")
"""Hand holds that some runs used and others left out, by more than single runs: the holds that tell
models apart."""


@dataclass(frozen=True)
class ObservedRuns:
    """The runs of one year's finals: ``touched`` (20,) says in how many a hand used each hold."""

    year: int
    sex: str
    runs: int
    median_time_s: float
    touched: tuple[int, ...]


@dataclass(frozen=True)
class Pooled:
    """Several years' runs of one sex: the share of all runs that used each hold, (20,).

    ``mean_of_medians_s`` is the years' median times, averaged with the runs as weights.
    """

    sex: str
    years: tuple[int, ...]
    runs: int
    use_share: tuple[float, ...]
    mean_of_medians_s: float


@cache
def observed_runs() -> tuple[ObservedRuns, ...]:
    """Every row of the table, in its order."""
    return tuple(
        ObservedRuns(
            year=int(row["year"]),
            sex=row["sex"],
            runs=int(row["runs"]),
            median_time_s=float(row["median_time_s"]),
            touched=tuple(int(row[f"hold_{hold}"]) for hold in HAND_HOLDS),
        )
        for row in table_rows("observed_hand_use.csv")
    )


def pooled(sex: str, years: Iterable[int] | None = None) -> Pooled:
    """All runs of one sex, or of some years. UsageError where there are none."""
    wanted = None if years is None else set(years)
    rows = [
        row for row in observed_runs() if row.sex == sex and (wanted is None or row.year in wanted)
    ]
    if not rows:
        known = ", ".join(f"{row.sex} {row.year}" for row in observed_runs())
        raise UsageError(f"no runs of {sex!r} in the years asked for; there are {known}")
    runs = sum(row.runs for row in rows)
    counts = [sum(row.touched[k] for row in rows) for k in range(len(HAND_HOLDS))]
    return Pooled(
        sex=sex,
        years=tuple(row.year for row in rows),
        runs=runs,
        use_share=tuple(count / runs for count in counts),
        mean_of_medians_s=math.fsum(row.runs * row.median_time_s for row in rows) / runs,
    )
