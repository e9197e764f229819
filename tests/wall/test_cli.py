from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
from click.testing import CliRunner

from climbpath.cli.wall import command
from climbpath.errors import ClimbpathError, DataError, UsageError
from climbpath.wall import mirror, parse_wall, read_wall
from tests.wall.samples import SMALL
from tests.wall.test_files import LANES


@pytest.fixture
def small(tmp_path: Path) -> Path:
    path = tmp_path / "small.toml"
    path.write_text(SMALL + LANES, encoding="utf-8")
    return path


def run(*arguments: object) -> str:
    """Standard output of a command that succeeds."""
    result = CliRunner().invoke(command, [str(part) for part in arguments])
    if result.exception is not None and isinstance(result.exception, ClimbpathError):
        raise result.exception
    assert result.exit_code == 0, result.output
    return result.stdout


def test_check_prints_one_line_a_good_file(small: Path) -> None:
    out = run("check", small, small)
    assert (
        out.splitlines()
        == [f"{small}: Small: 2 x 3 m, overhang 10°, holds: 2 hand, 1 foot, 1 finish pad, 2 lanes"]
        * 2
    )


def test_check_reports_the_problems_of_all_files(small: Path, tmp_path: Path) -> None:
    (tmp_path / "bad.toml").write_text("widht = 3\n")
    with pytest.raises(DataError) as caught:
        run("check", tmp_path / "bad.toml", small, tmp_path / "absent.toml")
    assert {Path(problem.file).name for problem in caught.value.problems} == {
        "bad.toml", "absent.toml",
    }  # fmt: skip


@pytest.mark.parametrize(
    ("arguments", "code"),
    [
        (["check", "small.toml"], 0),
        (["check", "small.toml", "bad.toml"], 1),
        (["check"], 2),
        (["show", "small.toml", "--out", "a.gif"], 2),
        (["show", "small.toml", "--out", "a.png", "--lane", "x"], 2),
        (["show", "small.toml", "--out", "none/a.png"], 1),
        (["convert", "small.toml", "out.json"], 2),
        (["convert", "small.toml", "out.toml", "--width-mm", "3"], 2),
        (["convert", "t.csv", "out.toml", "--width-mm", "3"], 2),
    ],
)
def test_exit_codes_of_the_program(small: Path, arguments: list[str], code: int) -> None:
    (small.parent / "bad.toml").write_text("name = 3\n")
    (small.parent / "t.csv").write_text("id,x,y\na,1,2\n")
    done = subprocess.run(
        [sys.executable, "-W", "error", "-m", "climbpath", "wall", *arguments],
        cwd=small.parent, capture_output=True, text=True, check=False, env=_environment(),
    )  # fmt: skip
    assert done.returncode == code, done.stderr
    assert "Traceback" not in done.stderr
    assert bool(done.stderr) == (code != 0)


def _environment() -> dict[str, str]:
    import os

    root = str(Path(__file__).parents[2])
    return {**os.environ, "PYTHONPATH": root}


@pytest.mark.parametrize("ending", ["png", "svg", "pdf"])
def test_show_writes_the_same_bytes_each_time(small: Path, ending: str) -> None:
    first, second = (small.parent / f"{name}.{ending}" for name in "ab")
    run("show", small, "--out", first)
    run("show", small, "--out", second)
    assert first.read_bytes() == second.read_bytes()
    run("show", small, "--out", second, "--lane", "left")
    assert first.read_bytes() != second.read_bytes()


def test_convert_there_and_back(small: Path, tmp_path: Path) -> None:
    table, again = tmp_path / "t.csv", tmp_path / "again.toml"
    plain = tmp_path / "plain.toml"
    plain.write_text(SMALL, encoding="utf-8")
    run("convert", plain, table, "--separator", "tab", "--unit", "cm")
    run(
        "convert", table, again, "--unit", "cm", "--width-mm", 2000, "--height-mm", 3000,
        "--overhang-deg", 10, "--start", "LH=1,RH=1|2,LF=floor,RF=floor|free|smear|f",
        "--name", "Small", "--grid-mm", "100,150,200",
    )  # fmt: skip
    wall, original = read_wall(again), parse_wall(SMALL)
    assert wall.unit == "cm"
    assert (wall.sections, wall.grid, wall.starts, wall.finish, wall.line_x) == (
        original.sections, original.grid, original.starts, original.finish, original.line_x,
    )  # fmt: skip
    assert [(h.id, h.x, h.y, h.outline) for h in wall.holds] == [
        (h.id, h.x, h.y, h.outline) for h in original.holds
    ]


def test_convert_mirrors(small: Path, tmp_path: Path) -> None:
    run("convert", small, tmp_path / "m.toml", "--mirror")
    assert read_wall(tmp_path / "m.toml") == mirror(read_wall(small))


def test_convert_says_what_a_table_lacks(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text("id,x,y\na,1,2\n")
    with pytest.raises(UsageError, match="--height-mm, --start"):
        run("convert", tmp_path / "t.csv", tmp_path / "o.toml", "--width-mm", "300")
    with pytest.raises(UsageError, match="--grid-mm"):
        run(
            "convert", tmp_path / "t.csv", tmp_path / "o.toml", "--width-mm", "300",
            "--height-mm", "300", "--start", "LH=a", "--grid-mm", "1,2",
        )  # fmt: skip
    assert not (tmp_path / "o.toml").exists()
