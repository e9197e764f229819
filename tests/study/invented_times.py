"""A stand-in for the model that follows runs: invented times that depend on capacities smoothly."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from climbpath.study.sequence import Placement
from climbpath.study.sequence import Sequence as Run
from climbpath.study.splits import splits_of
from climbpath.wall import Hold, Section, Start, Wall

Array = NDArray[np.float64]

TOO_HARD = "too hard"
"""A run of this name cannot be followed."""


class InventedTimes:
    """A move takes settling, the way of the hand, the work of rising, and the way of the body.

    The pull of the hands and the push of the feet only ever act together, so nothing can tell one
    from the other. Nothing depends on the press of the hands.
    """

    def __init__(self, wall: Wall, athlete: object, runs: Sequence[Run]) -> None:
        self.wall, self.runs = wall, list(runs)
        self.tables: list[Mapping[str, float]] = []

    def times(self, capacity: Mapping[str, float]) -> list[Array]:
        self.tables.append(capacity)
        return [self._of(run, capacity) for run in self.runs]

    def _of(self, run: Run, c: Mapping[str, float]) -> Array:
        at = {p.limb: p.hold for p in run.steps[0]} if run.steps else {}
        now, when = c["reaction_s"], {}
        for number, step in enumerate(run.steps[1:], start=1):
            for p in sorted(step, key=lambda p: p.limb):
                here, there = self.wall.hold(at[p.limb]), self.wall.hold(p.hold)
                way = math.hypot(there.x - here.x, there.y - here.y)
                rise = there.y - here.y
                strength = 0.5 * (c["hand_pull_bw"] / 0.525 + c["foot_push_bw"] / 1.62)
                now += c["settle_s"] + way / c["reach_speed_m_s"] + 0.5 * rise / strength
                now += 0.8 * way**2 / c["hand_speed_m_s"]
                at[p.limb], when[number, p.limb] = p.hold, now
        splits = splits_of(run, self.wall.finish)
        if run.run == TOO_HARD:
            return np.full(len(splits), np.inf)
        return np.array([when.get((s.step, s.limb), now) for s in splits])


HOLDS = 14


def ladder() -> Wall:
    """Fourteen hand holds at uneven distances, and a pad above them."""
    holds = [Hold(str(k), 1.5 + 0.3 * math.sin(2.1 * k), 1.2 + 0.62 * k + 0.2 * math.sin(3.7 * k))
             for k in range(HOLDS)]
    pad = Hold("pad", 1.5, 10.6, use="strike")
    start = Start((("0",), ("1",), ("floor",), ("floor", "free")))
    return Wall("Ladder", 3.0, 1.5, 0.0, (Section(11.0, 0.0),), (*holds, pad), (start,), ("pad",),
                None, ())


def untimed_run(name: str, skip: int = 0) -> Run:
    """Hand over hand from the lowest holds to the pad, without hold number ``skip`` if not 0."""
    names = [str(k) for k in range(1, HOLDS) if k != skip or skip == 0]
    start = (Placement("LH", "0"), Placement("RH", names[0]))
    steps = [(Placement("LH" if k % 2 == 0 else "RH", hold),)
             for k, hold in enumerate([*names[1:], "pad"])]
    return Run(name, (start, *steps))


def timed(wall: Wall, run: Run, capacity: Mapping[str, float], error: float = 0.0,
          seed: int = 0, total_only: bool = False) -> Run:
    """The run with the times of the stand-in; errors [s] of moves pile up on the way."""
    final = replace(run, total_s=0.0)
    marked = replace(run, steps=(run.steps[0], *(
        tuple(replace(p, contact_s=0.0) for p in step) for step in run.steps[1:])))
    generator = np.random.default_rng(seed)
    if total_only:
        (times,) = InventedTimes(wall, None, [final]).times(capacity)
        moves = len(run.steps) - 1
        return replace(run, total_s=float(
            times[0] + error * math.sqrt(moves) * generator.standard_normal()))
    (times,) = InventedTimes(wall, None, [marked]).times(capacity)
    times = times + np.cumsum(error * generator.standard_normal(len(times)))
    return replace(run, steps=(run.steps[0], *(
        tuple(replace(p, contact_s=float(time)) for p in step)
        for step, time in zip(run.steps[1:], times, strict=True))))


def format_runs(runs: Sequence[Run]) -> str:
    """The runs as a table."""
    lines = ["run,step,limb,hold,contact_s,note"]
    for run in runs:
        for number, step in enumerate(run.steps):
            lines += [f"{run.run},{number},{p.limb},{p.hold},"
                      f"{'' if p.contact_s is None else f'{p.contact_s:.3f}'},{run.note}"
                      for p in step]
        if run.total_s is not None:
            lines.append(f"{run.run},,total,,{run.total_s:.3f},{run.note}")
    return "\n".join(lines) + "\n"
