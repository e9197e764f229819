"""The plan command: what goes where, exit codes, and that nothing but the wall counts."""

from __future__ import annotations

import json
import subprocess
import sys
from dataclasses import replace
from datetime import date
from pathlib import Path
from typing import Any

import jsonschema
import pytest

from climbpath.body import Athlete, make_athlete, write_athlete
from climbpath.study.climb import Conditions
from climbpath.study.plan import PlanRequest
from climbpath.study.sequence import read_sequences
from climbpath.wall import Wall
from tests.cli.running import BODY, HOLDS, START, Done, run_command, wall_text, write_wall_file
from tests.schemas import PLAN_SCHEMA
from tests.study.solved import STRONG

FILES = ("overlay.pdf", "overlay.png", "overlay.svg", "plan.csv", "plan.json", "plan.txt")


@pytest.fixture
def wall(tmp_path: Path) -> Path:
    return write_wall_file(tmp_path)


@pytest.fixture
def plan(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Any:
    """Runs ``climbpath plan`` with the wall, the body and more arguments.

    Without smears, unless asked for: there are fewer stances then.
    """

    def runner(
        wall: object, *arguments: object, body: tuple[str, ...] = BODY, smears: bool = False
    ) -> Done:
        more = () if smears else ("--no-smears",)
        return run_command(capsys, monkeypatch, "plan", wall, *body, *more, *arguments)

    return runner


def document_of(done: Done) -> dict[str, Any]:
    """The document on standard output, checked against the schema."""
    document: dict[str, Any] = json.loads(done.out)
    jsonschema.validate(document, PLAN_SCHEMA)
    return document


def test_table_on_stdout_and_json_in_a_file(plan: Any, wall: Path, tmp_path: Path) -> None:
    done = plan(wall, "--json", tmp_path / "a.json", "--seed", 3, smears=True)
    assert done.code == 0
    assert done.out.startswith("Small · male 1780 mm\n")
    assert "Plan 1: " in done.out
    assert done.err == f"wrote {tmp_path / 'a.json'}\n"
    jsonschema.validate(json.loads((tmp_path / "a.json").read_text()), PLAN_SCHEMA)


def test_json_alone_on_stdout_with_all_that_may_be_asked(plan: Any, wall: Path) -> None:
    done = plan(
        wall, "--json", "-", "--alternatives", 2, "--trade-off", "--refine",
        "--favour", "both", "--line-weight", 0.5, "--no-smears",
    )  # fmt: skip
    assert (done.code, done.err) == (0, "")
    document = document_of(done)
    assert [item["rank"] for item in document["plans"]] == [1, 2]
    assert document["aim"] == "both"
    assert document["trade_off"]
    assert document["plans"][0]["lattice_error_s"] is not None
    # Two plans differ in a fifth of their hand holds at least (1 - shared / union >= 1/5).
    first, second = (set(item["hand_holds"]) for item in document["plans"])
    assert 5 * len(first ^ second) >= len(first | second)


def test_out_writes_every_file_and_the_same_bytes_twice(
    plan: Any, wall: Path, tmp_path: Path
) -> None:
    first, second = tmp_path / "new" / "a", tmp_path / "b"
    done = plan(wall, "--out", first, "--json", "-", "--alternatives", 2)
    assert done.code == 0
    document = document_of(done)
    assert len(document["plans"]) == 2
    more = ("overlay-2.pdf", "overlay-2.png", "overlay-2.svg")
    assert sorted(path.name for path in first.iterdir()) == sorted((*FILES, *more))
    assert (first / "plan.json").read_text() == done.out
    assert done.err.startswith(f"wrote to {first}: plan.json, plan.txt, plan.csv, overlay.png")
    assert done.err.count("\n") == 1
    (run,) = read_sequences(str(first / "plan.csv"))
    assert len(run.steps) == len(document["plans"][0]["steps"])

    again = plan(wall, "--out", second, "--alternatives", 2)
    assert again.out == (first / "plan.txt").read_text()
    for path in first.iterdir():
        assert path.read_bytes() == (second / path.name).read_bytes(), path.name


def test_neither_unit_nor_order_nor_place_changes_the_time(
    plan: Any, wall: Path, tmp_path: Path
) -> None:
    plans = [document_of(plan(wall, "--json", "-"))["plans"][0]]
    for name, options in (
        ("order", {"holds": HOLDS[::-1]}),
        ("unit", {"unit": "m"}),
        ("shift", {"shift": (310.0, 470.0)}),
    ):
        other = write_wall_file(tmp_path, f"{name}.toml", **options)
        plans.append(document_of(plan(other, "--json", "-"))["plans"][0])
    # 0.02 ms is the bound that the design states for these.
    times = [one["lattice_time_s"] for one in plans]
    assert times == pytest.approx([times[0]] * 4, abs=2e-5)


def contacts_of(document: dict[str, Any], limb: str) -> list[str]:
    return [step["contacts"][limb] for step in document["plans"][0]["steps"]]


def hands_of(document: dict[str, Any]) -> set[tuple[str, str]]:
    """Every pair of hand and hold of the best plan."""
    return {(limb, name) for limb in ("LH", "RH") for name in contacts_of(document, limb)}


def test_conditions_are_honoured(plan: Any, wall: Path) -> None:
    plain = document_of(plan(wall, "--json", "-"))
    best = plain["plans"][0]["time_s"]
    # Asked for is what the plan does not do of its own accord.
    used = next(name for name in plain["plans"][0]["hand_holds"][::-1] if name in "345")
    avoided = document_of(plan(wall, "--json", "-", "--avoid", used))
    for limb in ("LH", "RH", "LF", "RF"):
        assert used not in contacts_of(avoided, limb)
    assert avoided["plans"][0]["time_s"] >= best

    unused = "5"
    assert unused not in plain["plans"][0]["hand_holds"]
    included = document_of(plan(wall, "--json", "-", "--include", unused, "--include", "f"))
    assert unused in included["plans"][0]["hand_holds"]
    assert "f" in contacts_of(included, "LF") + contacts_of(included, "RF")
    assert included["plans"][0]["time_s"] >= best

    pair = next((limb, name) for name in "435" for limb in ("LH", "RH")
                if (limb, name) not in hands_of(plain))  # fmt: skip
    assert pair in hands_of(document_of(plan(wall, "--json", "-", "--hand", "=".join(pair))))


def test_the_opening_is_honoured(plan: Any, wall: Path, tmp_path: Path) -> None:
    opening = tmp_path / "opening.csv"
    opening.write_text("step,limb,hold\n0,LH,1\n0,RH,1\n1,RH,2\n2,LH,3\n")
    document = document_of(plan(wall, "--json", "-", "--opening", opening))
    landed = [
        (limb, step["contacts"][limb])
        for step in document["plans"][0]["steps"][1:]
        for limb in ("LH", "RH")
        if limb in step["moved"] and step["contacts"][limb] != "free"
    ]
    assert contacts_of(document, "RH")[0] == contacts_of(document, "LH")[0] == "1"
    assert landed[:2] == [("RH", "2"), ("LH", "3")]


def test_every_option_reaches_the_search(
    plan: Any, wall: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    class Seen(Exception):
        """Carries what the search was asked for."""

    def look(_: Wall, __: Athlete, request: PlanRequest, **more: Any) -> None:
        raise Seen(request, more["this_year"])

    monkeypatch.setattr("climbpath.study.plan.plan", look)
    with pytest.raises(Seen) as plain:
        plan(wall, smears=True)
    assert plain.value.args == (PlanRequest(), date.today().year)
    with pytest.raises(Seen) as full:
        plan(
            wall, "--favour", "both", "--line-weight", 2.5, "--alternatives", 4, "--include", "3",
            "--include", "f", "--include", "3", "--avoid", "5", "--hand", "LH=4", "--hand", "RH=3",
            "--no-flights", "--no-matching", "--refine", "--trade-off",
        )  # fmt: skip
    assert full.value.args[0] == PlanRequest(
        aim="both", line_weight=2.5, alternatives=4, refine=True, trade_off=True,
        conditions=Conditions(
            include=("3", "f"), avoid=("5",), hands=(("LH", "4"), ("RH", "3")),
            flights=False, matching=False, smears=False,
        ),
    )  # fmt: skip


@pytest.fixture
def unreachable(tmp_path: Path) -> Path:
    """The pad moved up to 9.8 m: far above all other holds."""
    holds = [*HOLDS[:4], {**HOLDS[-1], "y": 9800.0}]
    return write_wall_file(tmp_path, "far.toml", holds=holds, height=10000.0)


def test_no_way_up(plan: Any, unreachable: Path, tmp_path: Path) -> None:
    folder = tmp_path / "out"
    done = plan(unreachable, "--json", "-", "--out", folder)
    assert done.code == 3
    document = document_of(done)
    assert document["plans"] == []
    assert set(document["why_not"]) == {
        "step", "limb", "hold", "missing_mm", "missing_bw", "change",
    }  # fmt: skip
    assert document["why_not"]["change"]
    assert done.err.splitlines()[-1].startswith("climbpath: No way up")
    assert sorted(path.name for path in folder.iterdir()) == ["plan.json", "plan.txt"]
    assert (folder / "plan.json").read_text() == done.out
    assert "No way up" in (folder / "plan.txt").read_text()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("--alternatives", "0"), "alternatives"),
        (("--alternatives", "21"), "alternatives"),
        (("--line-weight", "1"), "--favour both"),
        (("--line-weight", "1", "--favour", "narrow"), "--favour both"),
        (("--line-weight", "-1", "--favour", "both"), "--line-weight"),
        (("--line-weight", "nan", "--favour", "both"), "--line-weight"),
        (("--line-weight", "1e300", "--favour", "both"), "--line-weight"),
        (("--favour", "speed"), "favour"),
        (("--hand", "3"), "--hand"),
        (("--hand", "LF=f"), "--hand"),
        (("--hand", "LH=zz"), "zz"),
        (("--hand", "LH=f"), "feet"),
        (("--include", "zz"), "zz"),
        (("--avoid", "zz"), "zz"),
        (("--avoid", "3", "--include", "3"), "--avoid 3"),
        (("--lane", "left"), "lane"),
        (("--seed", "-1"), "seed"),
        (("--out", ""), "--out"),
        (("--json", ""), "--json"),
        (("--athlete", "a.toml"), "not both"),
        (("--no-such-option",), "--no-such-option"),
    ],
)
def test_bad_usage(plan: Any, wall: Path, arguments: tuple[str, ...], message: str) -> None:
    done = plan(wall, *arguments)
    assert (done.code, done.out) == (2, "")
    assert message in done.err


def test_all_bad_options_at_once(plan: Any, wall: Path) -> None:
    done = plan(wall, "--line-weight", "-1", "--hand", "x", "--out", "")
    assert done.code == 2
    assert [part in done.err for part in ("number from 0", "--favour both", "--hand", "--out")] == [
        True
    ] * 4


def test_a_body_is_needed(plan: Any, wall: Path) -> None:
    assert plan(wall, body=()).code == 2
    assert plan(wall, body=("--sex", "male")).code == 2
    assert plan(wall, body=("--sex", "male", "--stature-mm", "nan", "--mass-kg", "70")).code == 1


def test_a_growing_athlete_earns_a_caution(plan: Any, wall: Path, tmp_path: Path) -> None:
    file = tmp_path / "young.toml"
    year = date.today().year - 15
    file.write_text(
        'schema = "climbpath/athlete/1"\nname = "Y"\nsex = "female"\nstature_mm = 1650\n'
        f"mass_kg = 52\nbirth_year = {year}\n"
    )
    done = plan(wall, "--json", "-", "--athlete", file, body=())
    assert any(f"born in {year}" in text for text in document_of(done)["cautions"])


WEIRD: dict[str, bytes] = {
    "empty": b"",
    "binary": bytes(range(256)) * 20,
    "utf-16": "name = 'x'".encode("utf-16"),
    "zeros": b"a = 1\0",
    "huge": b"#" * (9 * 1024 * 1024),
    "deep": b"x = " + b"[" * 50_000,
    "dots": b"a." * 3000 + b"b = 1",
    "digits": b"x = " + b"9" * 10_000,
    "other": b'schema = "climbpath/athlete/1"\n',
    "numbers": wall_text().replace("1300.0", "1e999").encode(),
}


@pytest.mark.parametrize("kind", [*WEIRD, "folder", "loop", "absent"])
@pytest.mark.parametrize("place", ["wall", "athlete", "opening"])
def test_weird_files(plan: Any, wall: Path, tmp_path: Path, kind: str, place: str) -> None:
    weird = tmp_path / "weird\x1b[31m"
    if kind in WEIRD:
        weird.write_bytes(WEIRD[kind])
    elif kind == "folder":
        weird.mkdir()
    elif kind == "loop":
        weird.symlink_to(weird)
    if place == "wall":
        done = plan(weird)
    elif place == "athlete":
        done = plan(wall, "--athlete", weird, body=())
    else:
        done = plan(wall, "--opening", weird)
    assert (done.code, done.out) == (1, "")
    assert "weird\\x1b[31m" in done.err
    assert "\x1b" not in done.err
    assert "expected" in done.err


def test_openings_that_do_not_fit(plan: Any, wall: Path, tmp_path: Path) -> None:
    file = tmp_path / "o.csv"
    file.write_text("run,step,limb,hold\na,0,LH,1\nb,0,LH,1\n")
    done = plan(wall, "--opening", file)
    assert done.code == 1
    assert "2 runs" in done.err
    file.write_text("step,limb,hold\n0,LH,x1\n1,RH,x2\n")
    done = plan(wall, "--opening", file)
    assert done.code == 1
    assert "x1" in done.err
    assert "x2" in done.err


def test_places_that_cannot_be_written(plan: Any, wall: Path, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("mine")
    (tmp_path / "out" / "plan.json" / "x").mkdir(parents=True)
    usage = plan(wall, "--out", tmp_path / "file")
    assert (usage.code, usage.out) == (2, "")
    assert (tmp_path / "file").read_text() == "mine"
    for arguments in (
        ("--out", tmp_path / "file" / "in"),
        ("--out", tmp_path / "out"),
        ("--json", tmp_path / "out"),
        ("--json", tmp_path / "none" / "a.json"),
    ):
        done = plan(wall, *arguments)
        assert done.code == 1, arguments
        assert done.out == ""
        assert "expected" in done.err


LANES: dict[str, Any] = {
    "lane": [
        {"id": "left", "x_from": 0.0, "x_to": 1100.0, "line_x": 900.0, "start": [START],
         "finish": {"holds": ["pad"]}},
        {"id": "right", "x_from": 1100.0, "x_to": 2000.0, "line_x": 1200.0, "start": [START],
         "finish": {"holds": ["pad"]}},
    ],
    "start": None,
    "finish": None,
}  # fmt: skip


def test_lanes(plan: Any, tmp_path: Path) -> None:
    wall = write_wall_file(tmp_path, **LANES)
    for arguments in ((), ("--lane", "middle")):
        done = plan(wall, *arguments)
        assert (done.code, done.out) == (2, "")
        assert "left, right" in done.err
    done = plan(wall, "--lane", "left", "--json", "-")
    assert document_of(done)["line_x_mm"] == 900.0


def test_interrupted(
    plan: Any, wall: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def stop(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("climbpath.cli.plan_files.plan_files", stop)
    folder = tmp_path / "out"
    done = plan(wall, "--out", folder, "--json", tmp_path / "a.json")
    assert (done.code, done.out) == (130, "")
    assert done.err.strip() == "climbpath: interrupted"
    assert not folder.exists()
    assert not (tmp_path / "a.json").exists()


def test_help_needs_no_numpy() -> None:
    code = (
        "import sys\n"
        "from climbpath.cli.main import climbpath\n"
        "climbpath.main(['plan', '--help'], standalone_mode=False)\n"
        "assert not {'numpy', 'scipy', 'matplotlib', 'shapely'} & set(sys.modules)\n"
    )
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code],
        capture_output=True, text=True, check=False, cwd=Path(__file__).parents[2],
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert "draws nothing at random" in " ".join(done.stdout.split())


def test_polish_keeps_contacts_and_lattice_time(plan: Any, wall: Path, tmp_path: Path) -> None:
    body = make_athlete(sex="male", stature=1.78, mass=70.0, name="Made")
    file = tmp_path / "athlete.toml"
    # Strong enough for a way up whatever the defaults are.
    write_athlete(replace(body, capacity=STRONG), file)
    given = ("--athlete", str(file))
    before = document_of(plan(wall, "--json", "-", body=given))["plans"][0]
    done = plan(wall, "--json", "-", "--polish", "--out", tmp_path / "out", body=given)
    after = document_of(done)["plans"][0]
    assert after["lattice_time_s"] == before["lattice_time_s"] == before["time_s"]
    assert after["time_s"] <= before["time_s"]
    assert after["com_path_mm"][0][0] == 0.0
    assert after["com_path_mm"][-1][0] == after["time_s"]
    assert [step["contacts"] for step in after["steps"]] == [
        step["contacts"] for step in before["steps"]
    ]
    text = (tmp_path / "out" / "plan.txt").read_text()
    assert ("before the polish" in text) == (after["time_s"] != after["lattice_time_s"])
