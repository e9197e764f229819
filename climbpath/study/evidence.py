"""Does the model predict which hand holds finals athletes use on the published lane, and how fast?

A population of either sex climbs the published lane without foot holds, and its first bodies climb
it with many random foot layouts, since the lane's own are unknown. Each body has its own seed and
each climb is a task of its own, so the result does not depend on how the work is spread.
"""

from __future__ import annotations

import multiprocessing
import os
import signal
from collections.abc import Callable, Sequence
from concurrent.futures import FIRST_COMPLETED, Executor, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import ExitStack
from dataclasses import dataclass
from itertools import islice

from climbpath.body import Athlete
from climbpath.body.population import draw_bodies
from climbpath.errors import ClimbpathError, UsageError
from climbpath.study.conclusions import (
    CONTESTED_PLACES,
    conclusions,
    disagreements,
    hold_uses,
    mean_use,
    wall_evidence,
)
from climbpath.study.evidence_results import (
    FINALISTS,
    Evidence,
    EvidenceRequest,
    PopulationOf,
    SexEvidence,
    WallEvidence,
)
from climbpath.study.foot_layouts import with_random_feet
from climbpath.study.observed import Pooled, pooled
from climbpath.study.outcomes import BodyOutcome, body_outcome
from climbpath.study.published_lane import HAND_HOLDS, published_lane
from climbpath.study.scores import (
    Scores,
    all_but_least_used,
    every_hold,
    nearness_to_middle,
    scores,
)
from climbpath.wall import Wall

Progress = Callable[[str, float], None]

LAYOUT_SEEDS = len(FINALISTS)
"""Random streams: the populations' are numbered in their order, the layouts' come after them."""

CAUTIONS = (
    "The lane's foot holds, hold directions and shapes are unknown: no foot holds, or random ones, "
    "and holds that pull straight down.",
    "Bodies have soldiers' proportions at round figures for the stature and build of finals "
    "athletes.",
    "Shares are of the bodies with a way up, each by its fastest way alone; the observed runs are "
    "of 2012 to 2016, and one athlete may have made several.",
    "The observed time is the mean of the years' medians, weighted by runs.",
)


@dataclass(frozen=True)
class Task:
    """One body on one wall: ``sex`` and ``layout`` (0: no foot holds) say where it belongs."""

    sex: str
    layout: int
    wall: Wall
    athlete: Athlete


def cores() -> int:
    """How many cores this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


class WorkerPool(ProcessPoolExecutor):
    """``workers`` processes that end at once on Ctrl-C, without a word.

    They are started afresh, not forked, so that threads of this process cannot hold them up.
    """

    def __init__(self, workers: int) -> None:
        self.workers = workers
        super().__init__(
            max_workers=workers,
            mp_context=multiprocessing.get_context("spawn"),
            initializer=signal.signal,
            initargs=(signal.SIGINT, signal.SIG_DFL),
        )


def worker_pool(jobs: int | None = None) -> WorkerPool:
    """A pool of ``jobs`` processes, by default as many as there are cores for this process."""
    return WorkerPool(jobs or cores())


def evidence(
    request: EvidenceRequest | None = None,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> Evidence:
    """Predicted against observed use and times, for women and men.

    Tasks run on ``executor``, by default a ``worker_pool`` of its own. UsageError for numbers that
    make no sense, ClimbpathError where a worker process ends before its work does.
    """
    asked = request or EvidenceRequest()
    _check(asked)
    walls = _walls(asked)
    tasks = [task for population in range(len(FINALISTS))
             for task in _tasks(asked, population, walls)]
    with ExitStack() as stack:
        pool = executor if executor is not None else stack.enter_context(worker_pool())
        outcomes = _run(tasks, pool, progress)
    sexes = []
    for population in FINALISTS:
        on_walls = [
            wall_evidence(layout, [outcome for task, outcome in zip(tasks, outcomes, strict=True)
                                   if (task.sex, task.layout) == (population.sex, layout)])
            for layout in range(len(walls))
        ]
        sexes.append(sex_evidence(population, on_walls[0], on_walls[1:]))
    return Evidence(
        request=asked,
        feet_mm=tuple(
            tuple((1e3 * hold.x, 1e3 * hold.y) for hold in wall.holds if hold.use == "foot")
            for wall in walls[1:]
        ),
        sexes=tuple(sexes),
        cautions=CAUTIONS,
    )


def _check(request: EvidenceRequest) -> None:
    wrong = []
    for name, value, least in (("bodies", request.bodies, 1), ("layouts", request.layouts, 0),
                               ("layout bodies", request.layout_bodies, 1),
                               ("seed", request.seed, 0)):
        if value < least:
            wrong.append(f"{name}: expected at least {least}, found {value}")
    if wrong:
        raise UsageError("\n".join(wrong))


def _walls(request: EvidenceRequest) -> list[Wall]:
    """The lane without foot holds, and with each random layout."""
    lane = published_lane()
    return [lane, *(with_random_feet(lane, (request.seed, LAYOUT_SEEDS, number))
                    for number in range(1, request.layouts + 1))]


def _tasks(request: EvidenceRequest, population: int, walls: Sequence[Wall]) -> list[Task]:
    """Every climb of one population, wall by wall."""
    who = FINALISTS[population]
    number = max(request.bodies, request.layout_bodies if len(walls) > 1 else 0)
    bodies = draw_bodies(
        who.sex, number, (request.seed, population), stature=who.stature,
        body_mass_index=who.body_mass_index, capacity=request.capacity.get(who.sex),
    )
    return [
        Task(who.sex, layout, wall, body)
        for layout, wall in enumerate(walls)
        for body in bodies[: request.layout_bodies if layout else request.bodies]
    ]


def _run(tasks: Sequence[Task], pool: Executor, progress: Progress | None) -> list[BodyOutcome]:
    """Outcomes in the order of the tasks.

    Few tasks are handed out ahead: after a failure or an interrupt only these are left, and none
    need be called back, which a pool whose processes have just died would trip over.
    """
    ahead = 1 + (pool.workers if isinstance(pool, WorkerPool) else cores())
    waiting = iter(enumerate(tasks))
    running: dict[Future[BodyOutcome], int] = {}
    found: dict[int, BodyOutcome] = {}
    try:
        while len(found) < len(tasks):
            for k, task in islice(waiting, ahead - len(running)):
                running[pool.submit(body_outcome, task.wall, task.athlete)] = k
            for future in wait(running, return_when=FIRST_COMPLETED).done:
                found[running.pop(future)] = future.result()
                if progress is not None:
                    progress("climbs", len(found) / len(tasks))
    except BrokenProcessPool as error:
        raise ClimbpathError(
            "a worker process ended before its work did, perhaps for want of memory; "
            "fewer jobs need less"
        ) from error
    return [found[k] for k in range(len(tasks))]


def sex_evidence(
    population: PopulationOf, lane: WallEvidence, layouts: Sequence[WallEvidence]
) -> SexEvidence:
    """Everything on one population from what it does on each wall."""
    observed = pooled(population.sex)
    model = _model_scores(lane, layouts, observed)
    rivals = _rival_scores(observed)
    claims = conclusions(lane, layouts, observed)
    return SexEvidence(
        population=population,
        observed=observed,
        lane=lane,
        layouts=tuple(layouts),
        holds=hold_uses(lane, layouts, observed),
        scores=model,
        rivals=rivals,
        conclusions=claims,
        disagreements=disagreements(lane, observed, model, rivals, claims),
    )


def _model_scores(
    lane: WallEvidence, layouts: Sequence[WallEvidence], observed: Pooled
) -> tuple[Scores, ...]:
    """The model's, on the lane without foot holds and over the layouts, where anybody gets up."""
    predictions = [
        ("model, no foot holds", lane.use_share),
        ("model, mean over the foot layouts", mean_use(layouts)),
    ]
    return tuple(scores(name, predicted, observed.use_share, CONTESTED_PLACES)
                 for name, predicted in predictions if predicted is not None)


def _rival_scores(observed: Pooled) -> tuple[Scores, ...]:
    """Those of predictions that need no model."""
    wall = published_lane()
    x = [wall.hold(hold).x for hold in HAND_HOLDS]
    seen = observed.use_share
    predictions = [
        ("use every hold", every_hold(len(x))),
        ("skip the three least used (in-sample)", all_but_least_used(seen)),
        ("nearness to the lane's middle", nearness_to_middle(x, wall.line_x)),
    ]
    return tuple(scores(name, predicted, seen, CONTESTED_PLACES)
                 for name, predicted in predictions)
