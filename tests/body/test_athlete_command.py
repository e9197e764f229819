"""``climbpath athlete new|show``: what is written where, and the exit codes."""

from __future__ import annotations

import io
import json
import sys
from pathlib import Path

import pytest

from climbpath.body import LENGTH_NAMES, MEASURED_NAMES, read_athlete
from climbpath.cli import athlete as athlete_command
from climbpath.cli.main import run
from climbpath.cli.options import resolve_athlete
from climbpath.errors import UsageError

BODY = ["--sex", "male", "--stature-mm", "1790", "--mass-kg", "69"]


@pytest.fixture
def climbpath(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]):
    """Runs a command line; returns exit code, standard output, standard error."""

    def call(*words: object) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["climbpath", *(str(word) for word in words)])
        monkeypatch.setattr(sys, "stdin", io.StringIO(""))
        with pytest.raises(SystemExit) as caught:
            run()
        out, err = capsys.readouterr()
        return int(caught.value.code or 0), out, err

    return call


def test_new_writes_what_show_reads(climbpath, tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    measures = ["--span-mm", "1860", "--standing-reach-mm", "2320", "--hand-mm", "197.5"]
    code, out, err = climbpath("athlete", "new", path, "--name", "B", *BODY, *measures)
    assert (code, out) == (0, "")
    assert "wrote" in err
    athlete = read_athlete(path)
    assert athlete.measured == {"span": 1.86, "standing_reach": 2.32, "hand": 0.1975}
    code, out, err = climbpath("athlete", "show", path)
    assert (code, err) == (0, "")
    hand = next(line for line in out.splitlines() if line.startswith("hand  "))
    assert hand.endswith("measured")
    assert "caution: not measured: sitting height" in out


def test_new_says_what_is_missing(climbpath, tmp_path: Path) -> None:
    code, out, err = climbpath("athlete", "new", tmp_path / "a.toml", "--sex", "male")
    assert (code, out) == (2, "")
    for option in ("--name", "--stature-mm", "--mass-kg"):
        assert option in err
    assert "--sex" not in err
    assert not (tmp_path / "a.toml").exists()


def test_new_does_not_replace_unless_forced(climbpath, tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    path.write_text("mine")
    assert climbpath("athlete", "new", path, "--name", "B", *BODY)[0] == 2
    assert path.read_text() == "mine"
    assert climbpath("athlete", "new", path, "--name", "B", *BODY, "--force")[0] == 0
    assert read_athlete(path).name == "B"


@pytest.mark.parametrize(
    "wrong",
    [
        ["--name", "B", *BODY, "--span-mm", "18600"],
        ["--name", "\x1b[31m", *BODY],
        ["--name", "B", *BODY, "--hand-mm", "nan"],
    ],
)
def test_new_writes_nothing_unreadable(climbpath, tmp_path: Path, wrong: list[str]) -> None:
    code, _, err = climbpath("athlete", "new", tmp_path / "a.toml", *wrong)
    assert code == 1
    assert "\x1b" not in err
    assert list(tmp_path.iterdir()) == []


def test_new_asks_at_a_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    answers = iter(["C", 1700.0, 60.0, "1710", "", "2130"])
    monkeypatch.setattr("click.prompt", lambda *args, **kwargs: next(answers))

    class Terminal(io.StringIO):
        def isatty(self) -> bool:
            return True

    values = {"sex": "female", "name": None, "stature_mm": None, "mass_kg": None}
    monkeypatch.setattr(sys, "stdin", Terminal())
    athlete_command._ask(values)
    assert values["name"] == "C"
    assert (values["span_mm"], values["sitting_height_mm"]) == (1710.0, None)
    assert values["standing_reach_mm"] == 2130.0


def test_show_json_is_alone_on_standard_output(climbpath, tmp_path: Path) -> None:
    code, out, err = climbpath("athlete", "show", *BODY, "--json", "-")
    assert (code, err) == (0, "")
    document = json.loads(out)
    assert document["schema"] == "climbpath/body/1"
    assert [entry["length"] for entry in document["lengths"]] == list(LENGTH_NAMES)
    assert sum(entry["mass_share"] for entry in document["segments"]) == pytest.approx(1, abs=1e-4)
    reaches = {entry["length"]: entry["value_mm"] for entry in document["reaches"]}
    assert reaches["span"] > 1700
    path = tmp_path / "body.json"
    code, table, _ = climbpath("athlete", "show", *BODY, "--json", path)
    assert code == 0
    assert "upper arm" in table
    assert path.read_text(encoding="utf-8") == out


@pytest.mark.parametrize(
    ("words", "code"),
    [
        ([], 2),
        (["x.toml", *BODY], 2),
        (["--sex", "male"], 2),
        (["--sex", "man"], 2),
        (["--span-mm", "1800"], 2),
        (["nowhere.toml"], 1),
        (["--sex", "male", "--stature-mm", "179", "--mass-kg", "69"], 1),
        ([*BODY, "--span-mm", "inf"], 1),
    ],
)
def test_show_exit_codes(climbpath, words: list[str], code: int) -> None:
    found, out, err = climbpath("athlete", "show", *words)
    assert (found, out) == (code, "")
    assert err


def test_growing_athletes_are_cautioned(climbpath, tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    words = ["--name", "D", *BODY, "--birth-year", "2090"]
    _, _, err = climbpath("athlete", "new", path, *words)
    assert "growing" in err
    assert "growing" in climbpath("athlete", "show", path)[1]


def test_every_measurement_has_an_option() -> None:
    offered = {"span", "sitting_height", *athlete_command.MORE_MEASURES}
    assert offered == set(MEASURED_NAMES)


def test_resolve_takes_a_file_or_values() -> None:
    athlete = resolve_athlete(None, "female", 1650.0, 55.0, span_mm=1680.0)
    assert athlete.span == pytest.approx(1.68)
    with pytest.raises(UsageError, match="not both"):
        resolve_athlete("a.toml", "female", None, None)
    with pytest.raises(UsageError, match="--mass-kg"):
        resolve_athlete(None, "female", 1650.0, None)
