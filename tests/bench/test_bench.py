"""Timings of the program, printed: ``python -m pytest tests/bench -m bench -s``. Asserts no time.

Each end-to-end case runs in a process of its own, so that its peak memory is its own.
"""

from __future__ import annotations

import json
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from climbpath.motion.model import Motion, PacedMotion
from climbpath.posture.linkage import linkage_of
from climbpath.posture.newton import Postures
from climbpath.posture.samples import Lattice, com_samples
from climbpath.posture.solver import solve_postures
from climbpath.route.build import build_graph
from climbpath.stance.enumerate import Allowed, all_stances, batch_of
from climbpath.stance.options import contact_options
from climbpath.stance.stances import stance_set
from climbpath.study.climb import LATTICE_STEP, Conditions, motion_of
from climbpath.study.plan import PlanRequest, plan
from climbpath.wall import read_wall, write_wall
from climbpath.wall.model import Wall
from tests.plain_way import PlainWay
from tests.walls_made import athlete, lane, small_wall

pytestmark = pytest.mark.bench

STANCES = 10_000
ROOT = Path(__file__).resolve().parents[2]

DENSE = ((31, 15.0), (60, 15.0), (120, 15.0))
TALL = ((31, 15.0), (62, 30.0), (124, 60.0))
"""Holds and height [m]: more holds on one lane, and the same density on taller walls."""


def stances_of(wall: Wall, number: int) -> tuple[NDArray[np.int64], int]:
    """Contacts (number, 4) of possible stances of a wall, repeated where it has fewer."""
    options, linkage = contact_options(wall), linkage_of(athlete())
    found = all_stances(options, linkage, Allowed())
    order = np.random.default_rng(0).permutation(len(found.margin))
    return found.contacts[np.resize(order, number)], len(found.margin)


def test_posture_per_stance() -> None:
    """Margin and samples of 10,000 possible stances of the 31-hold lane."""
    wall = lane(31)
    options, linkage = contact_options(wall), linkage_of(athlete())
    contacts, different = stances_of(wall, STANCES)
    batch = batch_of(options, linkage, contacts)
    begin = time.perf_counter()
    postures = solve_postures(linkage, batch)
    solved = time.perf_counter()
    good = np.flatnonzero(postures.margin >= 0.0)
    kept = Postures(postures.margin[good], postures.turn[..., good], postures.shift[:, good])
    part = batch.take(good)
    ready = time.perf_counter()
    samples = com_samples(linkage, part, kept, wall.line_x, Lattice(1.6, LATTICE_STEP))
    end = time.perf_counter()
    margin_us = (solved - begin) / STANCES * 1e6
    samples_us = (end - ready) / len(good) * 1e6
    print(f"\nposture, {STANCES} stances ({different} different, {len(samples.stance)} samples): "
          f"margin {margin_us:.1f} us, samples {samples_us:.1f} us, "
          f"both {margin_us + samples_us:.1f} us per stance")


def test_arcs_per_second() -> None:
    """Building the search graph of the 31-hold lane, stances given: by pacing, and by forces."""
    wall = lane(31)
    options, linkage = contact_options(wall), linkage_of(athlete())
    lattice = Lattice(1.6, LATTICE_STEP)
    models: tuple[tuple[str, Motion], ...] = (
        ("pacing", PacedMotion()), ("forces", motion_of(athlete())))
    for name, motion in models:
        stances = stance_set(options, linkage, Allowed(), wall.line_x, lattice,
                             balanced=motion.balanced)
        begin = time.perf_counter()
        strength = motion.strengths(wall, options, linkage, stances)
        forces = time.perf_counter() - begin
        begin = time.perf_counter()
        search = build_graph(options, linkage, stances, motion, wall.line_x, strength)
        seconds = time.perf_counter() - begin
        print(f"\ngraph by {name}, {stances.stances} stances, {stances.samples} samples (strengths "
              f"in {forces:.2f} s): {search.graph.nodes} nodes, {search.graph.arcs} arcs in "
              f"{seconds:.2f} s, {search.graph.arcs / seconds / 1e6:.2f} million arcs per second")


def one_case(path: str) -> None:
    """Runs in a child process: read a wall, plan, and print what it took as JSON."""
    begin = time.perf_counter()
    result = plan(read_wall(path), athlete())
    seconds = time.perf_counter() - begin
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    print(json.dumps({"seconds": seconds, "peak": peak,
                      "time_s": result.plans[0].time_s if result.plans else None}))


def child(wall: Wall, folder: Path) -> tuple[float | None, str]:
    """Seconds (None where it failed) and a line for print."""
    path = folder / f"{len(wall.holds)}.toml"
    write_wall(wall, path)
    done = subprocess.run(
        [sys.executable, "-c", "import sys; from tests.bench.test_bench import one_case; "
         "one_case(sys.argv[1])", str(path)],
        cwd=ROOT, capture_output=True, text=True, check=False,
    )
    if done.returncode:
        lines = done.stderr.strip().splitlines() or [f"ended by signal {-done.returncode}"]
        return None, lines[-1]
    told = json.loads(done.stdout.splitlines()[-1])
    reached = "no way up" if told["time_s"] is None else f"best time {told['time_s']:.2f} s"
    return told["seconds"], (f"{told['seconds']:.2f} s from wall file to result, peak "
                             f"{told['peak'] / 1e6:.0f} MB, {reached}")


def test_end_to_end() -> None:
    """Read a wall, find the plan: by number of holds, then by height at one density."""
    seconds: dict[tuple[int, float], float | None] = {}
    print()
    with tempfile.TemporaryDirectory() as folder:
        for holds, height in dict.fromkeys(DENSE + TALL):
            seconds[holds, height], line = child(lane(holds, height), Path(folder))
            print(f"end to end, {holds} holds in {height:.0f} m: {line}")
    low, high = seconds[TALL[0]], seconds[TALL[-1]]
    if low is not None and high is not None:
        print(f"60 m / 15 m at one density: ratio {high / low:.2f}")


def test_whole_process() -> None:
    """The command itself, start of Python included, files and pictures written."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "lane.toml"
        write_wall(lane(31), path)
        command = [sys.executable, "-m", "climbpath", "plan", str(path), "--sex", "male",
                   "--stature-mm", "1790", "--mass-kg", "70.5"]
        for more in ([], ["--out", str(Path(folder) / "out")]):
            begin = time.perf_counter()
            done = subprocess.run([*command, *more], cwd=ROOT, capture_output=True, text=True,
                                  check=False)
            seconds = time.perf_counter() - begin
            told = "" if done.returncode == 0 else f", {done.stderr.strip().splitlines()[-1]}"
            print(f"\nwhole process{' with --out' if more else ''}: {seconds:.2f} s, exit code "
                  f"{done.returncode}{told}", end="")
    print()


def test_against_the_plain_way() -> None:
    """The same best time, found stance by stance and arc by arc in plain Python."""
    wall = small_wall(0, holds=5, height=3.5)
    request = PlanRequest(conditions=Conditions(smears=False))
    begin = time.perf_counter()
    result = plan(wall, athlete(), request, PacedMotion())
    program = time.perf_counter() - begin
    begin = time.perf_counter()
    plain = PlainWay(wall, athlete(), smears=False)
    least = plain.best_time_us()
    seconds = time.perf_counter() - begin
    own = round(result.plans[0].time_s * 1e6) if result.plans else None
    print(f"\nplain way, {len(wall.holds)} holds, {len(plain.sets)} contact sets: {seconds:.1f} s "
          f"against {program:.2f} s, ratio {seconds / program:.0f}, "
          f"best times {least} and {own} us")
