"""The search graph as compressed sparse rows: plain integer arrays that know nothing of walls.

Arc ``a`` leads from the node whose row holds it to ``head[a]``. Row ``u`` is
``indptr[u]:indptr[u + 1]``; its heads ascend strictly, so a pair (tail, head) has one arc at most.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import coo_array, csr_array
from scipy.sparse.csgraph import breadth_first_order

from climbpath.errors import DataError, Problem, TooLargeError

Ints = NDArray[np.int64]
Ints32 = NDArray[np.int32]
Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

MAX_INDEX = 2**31 - 2
"""Most nodes, and most arcs, that the 32-bit indices of scipy's graph routines allow."""


class ReversedOrder(NamedTuple):
    """The same arcs by their end: row ``v`` lists the nodes (ascending) that lead to ``v``.

    ``indptr`` (n+1,), ``tail`` (m,), and ``arc`` (m,): the number of each arc in the graph itself.
    """

    indptr: Ints
    tail: Ints32
    arc: Ints


@dataclass(frozen=True, eq=False)
class RouteGraph:
    """A directed graph of n nodes and m arcs with two costs an arc.

    ``indptr`` (n+1,) int64. ``head`` (m,) int32. ``time_us`` (m,) [µs] and ``area`` (m,) [mm·ms],
    int64, 0 or more. ``event`` (m,) int32: -1, or a number saying which limb lands on which hold;
    its meaning is set elsewhere. ``rank`` (n,) int64: distinct canonical keys, the last word
    between equally good routes, so that the numbering of the nodes never matters.
    ``excursion`` (n,) float64: largest distance from the line at or into the node.

    Build it with ``from_arcs``, or call ``check_graph`` once after building it by hand.
    """

    indptr: Ints
    head: Ints32
    time_us: Ints
    area: Ints
    event: Ints32
    rank: Ints
    excursion: Floats

    @classmethod
    def from_arcs(
        cls,
        n: int,
        tail: ArrayLike,
        head: ArrayLike,
        time_us: ArrayLike,
        area: ArrayLike,
        event: ArrayLike | None = None,
        rank: ArrayLike | None = None,
        excursion: ArrayLike | None = None,
    ) -> RouteGraph:
        """Graph of arcs in any order; all arc arguments have shape (m,).

        Of several arcs with one (tail, head) only that of least (time, area, event) is kept, so
        a slower arc of less area is lost: where it matters, give it a node of its own between.
        ``event`` defaults to -1, ``rank`` to the node number, ``excursion`` to 0.
        DataError, with every problem, if an array is malformed.
        """
        tails = _integers(tail, "tail")
        heads = _integers(head, "head")
        time = _integers(time_us, "time_us")
        areas = _integers(area, "area")
        events = np.full(tails.size, -1, np.int64) if event is None else _integers(event, "event")
        _raise_any(_arc_problems(n, tails, heads, time, areas, events))
        order = _arc_order(n, tails, heads, time, areas, events)
        counts = np.bincount(tails[order], minlength=n)
        graph = cls(
            indptr=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
            head=heads[order].astype(np.int32),
            time_us=time[order],
            area=areas[order],
            event=events[order].astype(np.int32),
            rank=np.arange(n) if rank is None else _integers(rank, "rank"),
            excursion=np.zeros(n) if excursion is None else np.asarray(excursion, np.float64),
        )
        check_graph(graph)
        return graph

    @property
    def nodes(self) -> int:
        """Number of nodes n."""
        return self.indptr.size - 1

    @property
    def arcs(self) -> int:
        """Number of arcs m."""
        return self.head.size

    def tails(self) -> Ints32:
        """Start node of every arc, (m,). Computed anew at each call: large graphs keep none."""
        return np.repeat(np.arange(self.nodes, dtype=np.int32), np.diff(self.indptr))

    def arc_tails(self, arcs: Ints) -> Ints:
        """Start nodes of the given arcs, same shape, without computing those of all arcs."""
        return np.searchsorted(self.indptr, arcs, side="right").astype(np.int64) - 1

    def reversed_order(self) -> ReversedOrder:
        """The arcs sorted by their end, for searches backward."""
        numbers = np.arange(self.arcs, dtype=np.int64)
        flipped = compressed(self.indptr, self.head, numbers).tocsc()
        return ReversedOrder(
            flipped.indptr.astype(np.int64), flipped.indices.astype(np.int32), flipped.data
        )

    def kept_arcs(self, arc_mask: Flags | None = None, node_mask: Flags | None = None) -> Ints:
        """Numbers of the arcs that ``keep`` leaves, ascending.

        An arc stays where ``arc_mask`` (m,) is true and ``node_mask`` (n,) is true at both ends.
        """
        kept = np.ones(self.arcs, np.bool_)
        if arc_mask is not None:
            kept &= _mask(arc_mask, self.arcs, "arc_mask")
        if node_mask is not None:
            allowed = _mask(node_mask, self.nodes, "node_mask")
            kept &= allowed[self.head]
            kept &= np.repeat(allowed, np.diff(self.indptr))
        return np.flatnonzero(kept)

    def keep(self, arc_mask: Flags | None = None, node_mask: Flags | None = None) -> RouteGraph:
        """The graph with fewer arcs and the same node numbers; masked nodes become isolated."""
        return self.with_arcs(self.kept_arcs(arc_mask, node_mask))

    def with_arcs(self, arcs: Ints) -> RouteGraph:
        """The graph with the given arcs (ascending numbers) only and the same node numbers."""
        return replace(
            self,
            indptr=np.searchsorted(arcs, self.indptr).astype(np.int64),
            head=self.head[arcs],
            time_us=self.time_us[arcs],
            area=self.area[arcs],
            event=self.event[arcs],
        )


def compressed(indptr: NDArray[np.integer], head: Ints32, data: NDArray[np.generic]) -> csr_array:
    """A square scipy matrix over the arrays, uncopied but for a 32-bit ``indptr``.

    Entries that are zero stay stored, hence stay arcs for scipy's graph routines.
    """
    n = indptr.size - 1
    return csr_array((data, head, indptr.astype(np.int32, copy=False)), shape=(n, n))


def reachable(indptr: NDArray[np.integer], head: Ints32, starts: NDArray[np.integer]) -> Flags:
    """Which nodes, (n,), can be reached from any of ``starts`` (s,); the starts themselves can."""
    n = indptr.size - 1
    found = np.zeros(n, np.bool_)
    if starts.size == 0:
        return found
    # One more node that leads to every start makes it a search from a single node.
    widened = np.append(indptr, indptr[-1] + starts.size)
    heads = np.concatenate([head, starts.astype(np.int32)])
    matrix = compressed(widened, heads, np.ones(heads.size))
    order = breadth_first_order(matrix, n, directed=True, return_predecessors=False)
    found[order[order < n]] = True
    return found


def flipped(
    n: int, tail: NDArray[np.integer], head: NDArray[np.integer], data: NDArray[np.float64]
) -> csr_array:
    """The matrix of the arcs turned round; the pairs (tail, head) must be distinct."""
    return coo_array((data, (head, tail)), shape=(n, n)).tocsr()


def check_graph(graph: RouteGraph) -> None:
    """Raise DataError with every problem of the arrays; nothing is returned.

    Looks at types, shapes, the row structure, negative costs, events below -1, equal ranks and
    excursions that are not numbers. TooLargeError beyond what 32-bit indices can hold.
    """
    _raise_any(_type_problems(graph))
    n, m = graph.nodes, graph.arcs
    if n > MAX_INDEX or m > MAX_INDEX:
        raise TooLargeError(f"a search graph of {n} nodes and {m} arcs: at most {MAX_INDEX} each")
    problems = []
    counts = np.diff(graph.indptr)
    if graph.indptr[0] != 0 or graph.indptr[-1] != m or np.any(counts < 0):
        found = f"{graph.indptr[0]} … {graph.indptr[-1]}"
        problems.append(_problem("indptr", found, f"a rising sequence from 0 to {m}"))
    elif m and (graph.head.min() < 0 or graph.head.max() >= n):
        found = f"{graph.head.min()} … {graph.head.max()}"
        problems.append(_problem("head", found, f"nodes from 0 to {n - 1}"))
    elif m:
        rising = np.diff(graph.head) > 0
        starts = graph.indptr[1:-1]
        rising[starts[(starts > 0) & (starts < m)] - 1] = True
        if not rising.all():
            place = int(np.argmin(rising)) + 1
            expected = "heads that ascend strictly within a row"
            problems.append(_problem(f"head[{place}]", str(graph.head[place]), expected))
    for key, least in (("time_us", 0), ("area", 0), ("event", -1)):
        problems += _least_problems(key, getattr(graph, key), least)
    ordered = np.sort(graph.rank)
    same = np.flatnonzero(ordered[1:] == ordered[:-1])
    if same.size:
        problems.append(_problem("rank", f"{ordered[same[0]]} twice", "distinct keys"))
    if np.isnan(graph.excursion).any():
        problems.append(_problem("excursion", "nan", "numbers"))
    _raise_any(problems)


def _type_problems(graph: RouteGraph) -> list[Problem]:
    if graph.indptr.ndim != 1 or graph.indptr.size < 1:
        return [_problem("indptr", str(graph.indptr.shape), "shape (n + 1,)")]
    n, m = graph.indptr.size - 1, graph.head.size
    expected = {
        "indptr": (n + 1, np.int64),
        "head": (m, np.int32),
        "time_us": (m, np.int64),
        "area": (m, np.int64),
        "event": (m, np.int32),
        "rank": (n, np.int64),
        "excursion": (n, np.float64),
    }
    problems = []
    for key, (size, kind) in expected.items():
        array = getattr(graph, key)
        if array.shape != (size,) or array.dtype != kind:
            found = f"{array.dtype} {array.shape}"
            problems.append(_problem(key, found, f"{np.dtype(kind)} ({size},)"))
    return problems


def _arc_problems(
    n: int, tail: Ints, head: Ints, time: Ints, area: Ints, event: Ints
) -> list[Problem]:
    problems = []
    if n < 0 or n > MAX_INDEX:
        problems.append(_problem("n", str(n), f"a count from 0 to {MAX_INDEX}"))
    named = {"tail": tail, "head": head, "time_us": time, "area": area, "event": event}
    for key, array in named.items():
        if array.shape != (tail.size,):
            problems.append(_problem(key, str(array.shape), f"shape ({tail.size},)"))
    for key, array in (("tail", tail), ("head", head)):
        if array.size and (array.min() < 0 or array.max() >= n):
            found = f"{array.min()} … {array.max()}"
            problems.append(_problem(key, found, f"nodes from 0 to {n - 1}"))
    if event.size and event.max() > MAX_INDEX:
        problems.append(_problem("event", str(event.max()), f"at most {MAX_INDEX}"))
    for key, array, least in (("time_us", time, 0), ("area", area, 0), ("event", event, -1)):
        problems += _least_problems(key, array, least)
    return problems


def _least_problems(key: str, array: NDArray[np.integer], least: int) -> list[Problem]:
    if array.size and array.min() < least:
        place = int(np.argmin(array))
        return [_problem(f"{key}[{place}]", str(array[place]), f"{least} or more")]
    return []


def _arc_order(n: int, tail: Ints, head: Ints, time: Ints, area: Ints, event: Ints) -> Ints:
    """Indices of the arcs to keep, sorted by (tail, head)."""
    key = tail * n + head
    if key.size == 0 or np.all(key[1:] > key[:-1]):
        return np.arange(key.size)
    order = np.argsort(key, kind="stable")
    again = key[order[1:]] == key[order[:-1]]
    if not again.any():
        return order
    # Only the groups of equal pairs need the long comparison.
    grouped = np.append(again, False) | np.append(False, again)
    members = order[grouped]
    by_cost = np.lexsort((event[members], area[members], time[members], key[members]))
    order[grouped] = members[by_cost]
    first: Ints = order[np.append(True, ~again)]
    return first


def _integers(values: ArrayLike, key: str) -> Ints:
    array = np.asarray(values)
    if array.size == 0:
        return array.astype(np.int64)
    if array.dtype.kind not in "iu":
        raise DataError([_problem(key, str(array.dtype), "integers")])
    if array.dtype == np.uint64 and array.max() > np.iinfo(np.int64).max:
        raise DataError([_problem(key, str(array.max()), "integers of 64 bits with sign")])
    return array.astype(np.int64)


def _mask(mask: Flags, size: int, key: str) -> Flags:
    if mask.dtype != np.bool_ or mask.shape != (size,):
        raise DataError([_problem(key, f"{mask.dtype} {mask.shape}", f"bool ({size},)")])
    return mask


def _problem(key: str, found: str, expected: str) -> Problem:
    return Problem("", f"graph.{key}", found, expected)


def _raise_any(problems: list[Problem]) -> None:
    if problems:
        raise DataError(problems)
