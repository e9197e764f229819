"""How the work is spread, and that nothing of it shows in the result."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import jsonschema
import pytest

import climbpath.study.evidence as evidence_module
from climbpath.body import Athlete
from climbpath.errors import ClimbpathError, UsageError
from climbpath.study.document import dump_json
from climbpath.study.evidence import evidence, worker_pool
from climbpath.study.evidence_document import evidence_document
from climbpath.study.evidence_results import Evidence, EvidenceRequest
from climbpath.study.outcomes import BodyOutcome
from climbpath.wall import Wall
from tests.evidence_samples import sample_evidence
from tests.schemas import EVIDENCE_SCHEMA

ROOT = Path(__file__).parents[2]
SMALL = EvidenceRequest(bodies=5, layouts=3, layout_bodies=2, seed=11)


def pretended(wall: Wall, athlete: Athlete) -> BodyOutcome:
    """An outcome that hangs on the body and the wall, the later the sooner, short bodies lost."""
    feet = sum(hold.use == "foot" for hold in wall.holds)
    time.sleep(0.002 * (athlete.stature * 1e3 % 3))
    if athlete.stature < 1.65:
        return BodyOutcome(athlete.name, athlete.stature, athlete.mass)
    return BodyOutcome(athlete.name, athlete.stature, athlete.mass, 10.0 * athlete.stature - feet,
                       ("1", "2") if feet else ("1",), (1.0, 2.0, 1.5))


@pytest.fixture
def quick(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(evidence_module, "body_outcome", pretended)


def run(request: EvidenceRequest, workers: int) -> Evidence:
    with ThreadPoolExecutor(workers) as pool:
        return evidence(request, pool)


@pytest.mark.usefixtures("quick")
def test_the_result_does_not_depend_on_how_the_work_is_spread() -> None:
    one = run(SMALL, 1)
    assert run(SMALL, 4) == one
    assert run(EvidenceRequest(5, 3, 2, seed=12), 4) != one


@pytest.mark.usefixtures("quick")
def test_bodies_and_walls_are_those_asked_for() -> None:
    found = run(SMALL, 2)
    assert [one.population.sex for one in found.sexes] == ["male", "female"]
    assert len(found.feet_mm) == 3
    assert all(len(feet) == 11 for feet in found.feet_mm)
    assert len(set(found.feet_mm)) == 3
    for one in found.sexes:
        assert one.lane.bodies == 5
        assert [(wall.layout, wall.bodies) for wall in one.layouts] == [(1, 2), (2, 2), (3, 2)]
    # A larger population begins with the same bodies: the layouts' results stay.
    larger = run(EvidenceRequest(9, 4, 2, seed=11), 2)
    assert larger.feet_mm[:3] == found.feet_mm
    for one, other in zip(found.sexes, larger.sexes, strict=True):
        assert other.layouts[:3] == one.layouts


@pytest.mark.usefixtures("quick")
def test_bodies_without_a_way_up_are_counted() -> None:
    women = run(EvidenceRequest(40, 0, 1, seed=0), 2).sexes[1]
    assert 0 < women.lane.without_way_up < 40
    assert women.lane.bodies == 40
    assert women.lane.use_share is not None
    assert women.lane.use_share[0] == 1.0
    assert women.disagreements[0].startswith(f"{women.lane.without_way_up} of 40 bodies")


@pytest.mark.usefixtures("quick")
def test_progress_ends_at_one() -> None:
    seen: list[float] = []
    with ThreadPoolExecutor(2) as pool:
        evidence(SMALL, pool, lambda what, share: seen.append(share))
    assert len(seen) == 2 * (5 + 3 * 2)
    assert seen == sorted(seen)
    assert seen[-1] == 1.0


def test_a_failure_ends_the_work(monkeypatch: pytest.MonkeyPatch) -> None:
    done: list[str] = []

    def failing(wall: Wall, athlete: Athlete) -> BodyOutcome:
        done.append(athlete.name)
        time.sleep(0.01)
        raise UsageError("so")

    monkeypatch.setattr(evidence_module, "body_outcome", failing)
    monkeypatch.setattr(evidence_module, "cores", lambda: 1)
    with pytest.raises(UsageError, match="so"), ThreadPoolExecutor(1) as pool:
        evidence(EvidenceRequest(100, 0, 1), pool)
    assert len(done) <= 3


def test_numbers_that_make_no_sense_are_all_named() -> None:
    with pytest.raises(UsageError) as caught:
        evidence(EvidenceRequest(0, -1, 0, -5))
    assert all(name in str(caught.value) for name in ("bodies", "layouts", "seed"))


def dying(wall: Wall, athlete: Athlete) -> BodyOutcome:
    """The end of the process it runs in."""
    os._exit(1)


def test_a_worker_that_dies_is_said(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(evidence_module, "body_outcome", dying)
    with pytest.raises(ClimbpathError, match="worker process ended"), worker_pool(1) as pool:
        evidence(SMALL, pool)


@pytest.mark.parametrize("sample", [
    sample_evidence(), sample_evidence(layouts=0), sample_evidence(lost=True),
])  # fmt: skip
def test_the_document_is_as_agreed(sample: Evidence) -> None:
    document = evidence_document(sample)
    jsonschema.validate(document, EVIDENCE_SCHEMA)
    assert json.loads(dump_json(document)) == document
    (men, women) = document["populations"]
    assert (men["sex"], women["sex"]) == ("male", "female")
    assert len(women["holds"]) == 20
    assert women["lane"]["without_way_up"] == 1
    assert women["lane"]["share_with_way_up"] == pytest.approx(2 / 3, abs=1e-4)
    assert women["lane"]["time_s"]["p50"] == 9.25
    assert women["holds"][1] == {
        "hold": "2", "predicted_share": 0.5, "observed_share": 0.6585, "error": -0.1585,
        "contested": True, "right_side": False,
        "layout_shares": women["holds"][1]["layout_shares"],
        "used_by_most": women["holds"][1]["used_by_most"],
    }  # fmt: skip
    assert women["lane"]["opening"]["time_s"] == {"with": 9.0, "without": 9.2}
    assert women["lane"]["opening"]["time_without"] == {"better": 0, "worse": 1}


@pytest.mark.slow
def test_processes_give_the_same_bytes_however_many() -> None:
    request = EvidenceRequest(bodies=2, layouts=1, layout_bodies=1)
    documents = []
    for jobs in (1, 2):
        with worker_pool(jobs) as pool:
            found = evidence(request, pool)
        document = evidence_document(found)
        jsonschema.validate(document, EVIDENCE_SCHEMA)
        documents.append(dump_json(document))
    assert documents[0] == documents[1]


@pytest.mark.slow
@pytest.mark.skipif(os.name != "posix", reason="signals to a group of processes")
def test_an_interrupt_leaves_at_once_and_says_so() -> None:
    process = subprocess.Popen(
        [sys.executable, "-W", "error", "-m", "climbpath", "evidence", "--bodies", "500"],
        cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
        start_new_session=True,
    )  # fmt: skip
    time.sleep(8.0)  # the workers have started by then; what is said is the same before
    os.killpg(process.pid, signal.SIGINT)
    out, text = process.communicate(timeout=60.0)
    assert process.returncode == 130
    assert out == ""
    assert text.strip() == "climbpath: interrupted"
