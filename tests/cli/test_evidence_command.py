"""The evidence command: what goes where; the work itself is left out here."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import jsonschema
import pytest

import climbpath.study.evidence as evidence_module
from climbpath.study.evidence_results import Evidence, EvidenceRequest
from tests.cli.running import Done, run_command
from tests.evidence_samples import sample_evidence
from tests.schemas import EVIDENCE_SCHEMA

FILES = ["evidence.json", "evidence.pdf", "evidence.png", "evidence.svg", "evidence.txt"]


@pytest.fixture
def asked(monkeypatch: pytest.MonkeyPatch) -> list[EvidenceRequest]:
    """Requests of the command, which are answered with the sample."""
    seen: list[EvidenceRequest] = []

    def evidence(request: EvidenceRequest, executor: object, progress: Any) -> Evidence:
        seen.append(request)
        progress("climbs", 1.0)
        return sample_evidence()

    monkeypatch.setattr(evidence_module, "evidence", evidence)
    return seen


@pytest.fixture
def command(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Any:
    def runner(*arguments: object) -> Done:
        return run_command(capsys, monkeypatch, "evidence", *arguments)

    return runner


def test_the_table_goes_to_standard_output(command: Any, asked: list[EvidenceRequest]) -> None:
    done = command("--bodies", 7, "--layouts", 0, "--layout-bodies", 3, "--seed", 9, "--jobs", 1)
    assert (done.code, done.err) == (0, "")
    assert done.out.startswith("Published 15 m lane: predicted against observed")
    assert asked == [EvidenceRequest(7, 0, 3, 9)]


def test_json_alone_on_standard_output(command: Any, asked: list[EvidenceRequest]) -> None:
    done = command("--json", "-")
    assert (done.code, done.err) == (0, "")
    jsonschema.validate(json.loads(done.out), EVIDENCE_SCHEMA)
    assert asked == [EvidenceRequest()]


@pytest.mark.usefixtures("asked")
def test_all_files_in_a_folder(command: Any, tmp_path: Path) -> None:
    folder = tmp_path / "out"
    done = command("--out", folder, "--json", tmp_path / "a.json")
    assert done.code == 0
    assert sorted(path.name for path in folder.iterdir()) == FILES
    assert done.out == (folder / "evidence.txt").read_text(encoding="utf-8")
    assert (folder / "evidence.json").read_bytes() == (tmp_path / "a.json").read_bytes()
    assert done.err.splitlines()[-1] == f"wrote {tmp_path / 'a.json'}"
    again = tmp_path / "again"
    command("--out", again)
    for name in FILES:
        assert (folder / name).read_bytes() == (again / name).read_bytes(), name


@pytest.mark.parametrize("arguments", [
    ("--bodies", 0), ("--layouts", -1), ("--layout-bodies", 0), ("--seed", -1), ("--jobs", 0),
    ("--json", ""), ("--out", ""), ("--out", __file__), ("--bodies", "many"), ("wall.toml",),
])  # fmt: skip
def test_bad_usage_before_any_work(
    command: Any, asked: list[EvidenceRequest], arguments: tuple[object, ...]
) -> None:
    assert command(*arguments).code == 2
    assert asked == []
