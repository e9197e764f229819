"""Standard streams, settings of the machine, and the progress bar."""

from __future__ import annotations

import io
import os
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

import climbpath.cli.progress as progress_module
from climbpath.cli.progress import Progress
from tests.cli.running import BODY, run_command, write_wall_file

ROOT = Path(__file__).parents[2]


def start(*arguments: object, **options: Any) -> subprocess.Popen[str]:
    """The program in a process of its own, warnings as errors."""
    return subprocess.Popen(
        [sys.executable, "-W", "error", "-m", "climbpath", *map(str, arguments)],
        **{"text": True, "stderr": subprocess.PIPE, "cwd": ROOT, **options},
    )


def test_a_reader_that_goes_away_makes_no_traceback() -> None:
    process = start("athlete", "show", *BODY, stdout=subprocess.PIPE)
    assert process.stdout is not None
    assert process.stderr is not None
    process.stdout.close()
    with process.stderr as stream:
        assert stream.read() == ""
    assert process.wait() == 1


@pytest.mark.skipif(not Path("/dev/full").is_char_device(), reason="the system has no full device")
def test_a_full_disk_is_said() -> None:
    with open("/dev/full", "w") as full:
        process = start("athlete", "show", *BODY, stdout=full)
        _, text = process.communicate()
    assert process.returncode == 1
    assert text.startswith("climbpath: standard output: ")
    assert text.count("\n") == 1


def test_letters_that_the_terminal_lacks_are_shown_by_their_code(tmp_path: Path) -> None:
    wall = write_wall_file(tmp_path, name="wall-→.toml")
    process = start(
        "wall", "check", wall, stdout=subprocess.PIPE,
        env={**os.environ, "PYTHONIOENCODING": "latin-1"}, encoding="latin-1",
    )  # fmt: skip
    out, text = process.communicate()
    assert (process.returncode, text) == (0, "")
    assert "wall-\\u2192.toml" in out


def test_nothing_on_this_machine_changes_a_picture(tmp_path: Path) -> None:
    wall = write_wall_file(tmp_path)
    other = tmp_path / "other"
    other.mkdir()
    (other / "matplotlibrc").write_text("axes.facecolor: red\ntext.usetex: True\nnonsense: 3\n")
    strange = {
        **{key: value for key, value in os.environ.items() if key != "HOME"},
        "MPLBACKEND": "nonsense", "MPLCONFIGDIR": str(wall), "PYTHONPATH": str(ROOT),
    }  # fmt: skip
    plain = start("wall", "show", wall, "--out", tmp_path / "a.png")
    odd = start("wall", "show", wall, "--out", tmp_path / "b.png", cwd=other, env=strange)
    for process, name in ((plain, "a.png"), (odd, "b.png")):
        _, text = process.communicate()
        assert (process.returncode, text) == (0, f"wrote {tmp_path / name}\n")
    assert (tmp_path / "a.png").read_bytes() == (tmp_path / "b.png").read_bytes()


def test_settings_that_cannot_be_read_are_named(tmp_path: Path) -> None:
    wall = write_wall_file(tmp_path)
    (tmp_path / "matplotlibrc").write_bytes(b"\xff\xfe")
    process = start(
        "wall", "show", wall, "--out", tmp_path / "a.png", cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
    )  # fmt: skip
    _, text = process.communicate()
    assert process.returncode == 1
    assert text.startswith("climbpath: matplotlibrc: expected settings")


def test_without_standard_input_nobody_is_asked(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    monkeypatch.setattr("sys.stdin", None)
    done = run_command(capsys, monkeypatch, "athlete", "new", tmp_path / "a.toml")
    assert done.code == 2
    assert "--name" in done.err


def test_too_little_memory_is_said(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    def fail(*_: object, **__: object) -> None:
        raise MemoryError

    monkeypatch.setattr("climbpath.wall.read_wall", fail)
    done = run_command(capsys, monkeypatch, "wall", "check", tmp_path / "a.toml")
    assert (done.code, done.out) == (1, "")
    assert "memory" in done.err


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def terminal(monkeypatch: pytest.MonkeyPatch) -> Terminal:
    """A terminal as standard error; the bar comes when a test asks for it, not by the clock.

    Not a fixture: what pytest catches takes the stream's place again after set-up.
    """
    stream = Terminal()
    monkeypatch.setattr("sys.stderr", stream)
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.setattr(progress_module, "DELAY_S", 3600.0)
    return stream


def test_short_work_shows_no_bar(monkeypatch: pytest.MonkeyPatch) -> None:
    stream = terminal(monkeypatch)
    with Progress() as progress:
        progress("stances", 0.0)
        progress("moves", 0.5)
    assert stream.getvalue() == ""


def test_long_work_shows_how_far_it_is(monkeypatch: pytest.MonkeyPatch) -> None:
    stream = terminal(monkeypatch)
    with Progress() as progress:
        progress("stances", 0.0)
        progress._show()
        progress("moves", 0.5)
        assert "50%" in stream.getvalue()
    text = stream.getvalue()
    assert [part in text for part in ("stances", "moves", "100%")] == [True] * 3
    assert text.endswith("\n")
    assert "\x1b[3" not in text  # no colours


def test_a_failure_leaves_the_cursor_visible(monkeypatch: pytest.MonkeyPatch) -> None:
    stream = terminal(monkeypatch)

    def stopped() -> None:
        with Progress() as progress:
            progress("stances", 0.0)
            progress._show()
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        stopped()
    assert stream.getvalue().endswith("\x1b[?25h\n")
    assert "100%" not in stream.getvalue()
