"""Several good sequences that differ enough from each other, found by forbidding holds.

Finding the k best routes that differ pairwise by a given share is hard in general. Here the best
route is exact; the next are the best that were found by forbidding, one after another, holds that
a candidate shares with the accepted ones it resembles too much, cheapest candidate first.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable
from dataclasses import dataclass
from typing import Generic, Literal, TypeVar

from climbpath.errors import UsageError

Payload = TypeVar("Payload")

Solve = Callable[[frozenset[int]], tuple[int, frozenset[int], Payload] | None]
Difference = Callable[[frozenset[int], frozenset[int]], float]


@dataclass(frozen=True)
class Alternative(Generic[Payload]):
    """One accepted result: its cost, its holds, what ``solve`` gave with it, what was forbidden."""

    cost: int
    holds: frozenset[int]
    payload: Payload
    forbidden: frozenset[int]


@dataclass(frozen=True)
class Alternatives(Generic[Payload]):
    """``found``, best first; the first is exact, the others the best found.

    ``stopped``: "enough" when k were found, "exhausted" when no set of holds was left to forbid,
    "limit" when ``max_solves`` ended the search. ``solves``: how often ``solve`` was called.
    """

    found: tuple[Alternative[Payload], ...]
    stopped: Literal["enough", "exhausted", "limit"]
    solves: int


def share_difference(a: frozenset[int], b: frozenset[int]) -> float:
    """1 - shared / union; 0 for two empty sets."""
    union = len(a | b)
    # One division of whole numbers, so that a share such as 0.3 compares as it is written.
    return (union - len(a & b)) / union if union else 0.0


def alternatives(
    solve: Solve[Payload],
    k: int,
    min_share: float,
    max_solves: int,
    difference: Difference = share_difference,
) -> Alternatives[Payload]:
    """Up to ``k`` results, each differing from every better one by at least ``min_share``.

    ``solve(forbidden)`` returns (cost, holds, payload) of the best result that uses none of the
    forbidden holds, or None. Costs never fall as more is forbidden, which makes the cheapest
    open candidate the next to judge. A result too like accepted ones is split into one search for
    each hold it shares with them, that hold forbidden too; so is an accepted one, for each of its
    holds. ``difference(accepted, candidate)`` may replace the share of hand holds. Results with
    the holds of an accepted one never count. Equal costs are taken by their holds, so the numbers
    of the holds should not depend on the order of a file. UsageError for senseless numbers.
    """
    if k < 1 or max_solves < 1 or not 0.0 <= min_share <= 1.0:
        raise UsageError(
            f"alternatives need k and max_solves of 1 or more and a share from 0 to 1,"
            f" found {k}, {max_solves} and {min_share}"
        )
    search = _Search(solve, max_solves)
    search.try_forbidding(frozenset())
    accepted: list[Alternative[Payload]] = []
    while search.waiting and len(accepted) < k:
        result = search.pop()
        alike = [
            other
            for other in accepted
            if other.holds == result.holds or difference(other.holds, result.holds) < min_share
        ]
        if not alike:
            accepted.append(result)
            if len(accepted) == k:
                break
            alike = [result]
        shared = result.holds & frozenset().union(*(other.holds for other in alike))
        for hold in sorted(shared):
            search.try_forbidding(result.forbidden | {hold})
    if len(accepted) == k:
        return Alternatives(tuple(accepted), "enough", search.solves)
    return Alternatives(tuple(accepted), "limit" if search.cut else "exhausted", search.solves)


class _Search(Generic[Payload]):
    """Solved and not yet judged results, cheapest first."""

    def __init__(self, solve: Solve[Payload], max_solves: int) -> None:
        self.solve = solve
        self.max_solves = max_solves
        self.solves = 0
        self.cut = False
        self.waiting: list[tuple[int, tuple[int, ...], tuple[int, ...]]] = []
        self.results: dict[tuple[int, ...], Alternative[Payload]] = {}
        self.tried: set[frozenset[int]] = set()
        self.impossible: list[frozenset[int]] = []

    def try_forbidding(self, forbidden: frozenset[int]) -> None:
        """Solve once for each set, unless less was already too much."""
        if forbidden in self.tried or any(less <= forbidden for less in self.impossible):
            return
        if self.solves == self.max_solves:
            self.cut = True
            return
        self.tried.add(forbidden)
        self.solves += 1
        solved = self.solve(forbidden)
        if solved is None:
            self.impossible.append(forbidden)
            return
        cost, holds, payload = solved
        key = tuple(sorted(forbidden))
        self.results[key] = Alternative(cost, holds, payload, forbidden)
        heapq.heappush(self.waiting, (cost, tuple(sorted(holds)), key))

    def pop(self) -> Alternative[Payload]:
        return self.results.pop(heapq.heappop(self.waiting)[2])
