"""The calibrate command: what goes where, and what is not overwritten."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from climbpath.body import make_athlete, read_athlete, write_athlete
from climbpath.wall import write_wall
from tests.cli.running import Done, run_command
from tests.schemas import CALIBRATE_SCHEMA
from tests.study.invented_times import InventedTimes, format_runs, ladder, timed, untimed_run

TRUTH = {"hand_pull_bw": 0.62, "foot_push_bw": 1.9, "hand_speed_m_s": 5.5, "reach_speed_m_s": 6.5,
         "settle_s": 0.09, "reaction_s": 0.26}


@pytest.fixture(autouse=True)
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty folder to work in, with a wall, an athlete and runs."""
    monkeypatch.setattr("climbpath.study.calibrate.follower", InventedTimes)
    monkeypatch.chdir(tmp_path)
    wall = ladder()
    write_wall(wall, "wall.toml")
    write_athlete(make_athlete(sex="female", stature=1.66, mass=56.0, name="Sample",
                               capacity={"fade_share": 0.1}), "a.toml")
    runs = [timed(wall, untimed_run(f"run {k}", skip=3 + k % 4), TRUTH, 0.02, seed=k)
            for k in range(6)]
    runs.append(replace(runs[0], run="slip", note="slipped"))
    Path("runs.csv").write_text(format_runs(runs))
    return tmp_path


@pytest.fixture
def calibrate(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Any:
    def runner(*arguments: object, files: tuple[str, ...] = ("wall.toml", "runs.csv")) -> Done:
        return run_command(capsys, monkeypatch, "calibrate", *files, "--athlete", "a.toml",
                           "--bootstrap", 50, *arguments)

    return runner


def test_table_on_stdout_and_the_athlete_beside(calibrate: Any, folder: Path) -> None:
    done = calibrate("--json", "c.json")
    assert (done.code, done.err) == (0, "wrote a_fitted.toml\nwrote c.json\n")
    assert done.out.startswith("Ladder · Sample\n6 runs, 72 splits\n")
    assert "- slip: its note says fell or slipped" in done.out
    document = json.loads(Path("c.json").read_text())
    jsonschema.validate(document, CALIBRATE_SCHEMA)
    written = read_athlete("a_fitted.toml")
    assert dict(written.capacity) == document["capacity"]
    assert written.capacity["fade_share"] == 0.1
    assert written.capacity["reaction_s"] == pytest.approx(TRUTH["reaction_s"], abs=0.05)
    assert read_athlete("a.toml").capacity == {"fade_share": 0.1}
    assert sorted(path.name for path in folder.iterdir()) == [
        "a.toml", "a_fitted.toml", "c.json", "runs.csv", "wall.toml"]


def test_json_alone_on_stdout_the_same_bytes_twice(calibrate: Any) -> None:
    first, second = (calibrate("--json", "-", "--out", "b.toml", "--seed", 4) for _ in range(2))
    assert (first.code, first.err) == (0, "wrote b.toml\n")
    assert first.out == second.out
    document = json.loads(first.out)
    jsonschema.validate(document, CALIBRATE_SCHEMA)
    assert (document["seed"], document["draws"]) == (4, 50)
    assert document["parameters"] != json.loads(calibrate("--json", "-").out)["parameters"]


def test_nothing_is_replaced_that_nobody_named(calibrate: Any) -> None:
    Path("a_fitted.toml").write_text("mine")
    done = calibrate()
    assert done.code == 2
    assert "a_fitted.toml exists; --out a_fitted.toml replaces it" in done.err
    assert Path("a_fitted.toml").read_text() == "mine"
    assert calibrate("--out", "a_fitted.toml").code == 0
    before = read_athlete("a.toml").capacity
    assert calibrate("--out", "a.toml").code == 0
    assert read_athlete("a.toml").capacity == read_athlete("a_fitted.toml").capacity != before


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("--out", ""), "--out"),
        (("--out", "."), "folder"),
        (("--json", ""), "--json"),
        (("--bootstrap", 3), "--bootstrap"),
        (("--lane", "left"), "lane"),
    ],
)
def test_bad_usage(calibrate: Any, arguments: tuple[object, ...], said: str) -> None:
    done = calibrate(*arguments)
    assert done.code == 2
    assert said in done.err
    assert not Path("a_fitted.toml").exists()


def test_bad_runs_name_file_and_place(calibrate: Any) -> None:
    Path("runs.csv").write_text("run,step,limb,hold,contact_s\nb,1,LH,x1,1.0\nb,2,RH,x2,1.5\n")
    done = calibrate()
    assert done.code == 1
    assert done.err.removeprefix("climbpath: ").splitlines() == [
        f"runs.csv: run 'b' hold: expected a hold of the wall or of its lane, found '{name}'"
        for name in ("x1", "x2")
    ]
    assert not Path("a_fitted.toml").exists()
