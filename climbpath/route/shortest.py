"""Shortest routes with exact integer costs and a choice among equals that no numbering sways.

Costs are integers below 2**53, so their sums are exact in the float64 that scipy's Dijkstra works
in: a float sum that stays below 2**53 was never rounded, and one that was rounded is at least
2**53. Hence the distances are exact whenever the largest of them is below 2**53, which is checked.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.sparse.csgraph import connected_components, dijkstra

from climbpath.errors import ClimbpathError, DataError, Problem, TooLargeError
from climbpath.route.graph import (
    Flags,
    Floats,
    Ints,
    Ints32,
    RouteGraph,
    compressed,
    flipped,
    reachable,
)

EXACT_LIMIT = 2**53
"""Costs below this are exact in float64."""

_CHUNK = 1 << 20


@dataclass(frozen=True, eq=False)
class Sources:
    """Where routes may start: ``nodes`` (s,) and what each has cost already, ``cost`` (s,).

    ``ties`` holds one (s,) array for each tie cost, or is empty where those start at 0. A node may
    stand there more than once.
    """

    nodes: Ints
    cost: Ints
    ties: tuple[Ints, ...] = ()

    @staticmethod
    def at(nodes: ArrayLike, cost: ArrayLike = 0, ties: Sequence[ArrayLike] = ()) -> Sources:
        """From anything array-like; a single cost serves all nodes."""
        numbers = np.atleast_1d(np.asarray(nodes, np.int64))
        return Sources(
            numbers,
            np.array(np.broadcast_to(np.asarray(cost, np.int64), numbers.shape)),
            tuple(np.array(np.broadcast_to(np.asarray(t, np.int64), numbers.shape)) for t in ties),
        )


SourcesLike = Sources | Sequence[int] | NDArray[np.integer]


@dataclass(frozen=True, eq=False)
class Route:
    """``nodes`` (L+1,), the ``arcs`` (L,) between them, and the exact ``cost`` with its start's."""

    nodes: Ints
    arcs: Ints
    cost: int


@dataclass(frozen=True, eq=False)
class _Net:
    """A part of the graph: local node and arc numbers, the graph's own in ``node`` and ``arc``.

    ``start`` and ``target`` are local nodes; ``entry`` says which source each start is.
    """

    node: Ints
    arc: Ints | None  # None: all arcs of the graph
    indptr: Ints
    head: Ints32
    start: Ints
    entry: Ints
    target: Ints


def shortest_route(
    graph: RouteGraph,
    weight: Ints,
    sources: SourcesLike,
    targets: Sequence[int] | NDArray[np.integer],
    tie_costs: Sequence[Ints] = (),
) -> Route | None:
    """The route of least total ``weight`` from any source to any target; None if there is none.

    ``weight`` and every one of ``tie_costs``: (m,) integers, 0 or more. Among routes of least
    weight it takes the least sum of the first tie cost, then of the second, and so on, then the
    sequence of node ranks that is lexicographically least among routes that visit no node twice.
    DataError for malformed arguments, TooLargeError where a cost reaches 2**53.
    """
    starts = as_sources(graph, sources)
    costs = [_checked_costs(graph, weight, "weight")]
    costs += [_checked_costs(graph, tie, f"tie_costs[{i}]") for i, tie in enumerate(tie_costs)]
    initial = [starts.cost, *starts.ties]
    if starts.ties and len(starts.ties) != len(tie_costs):
        found, expected = str(len(starts.ties)), f"{len(tie_costs)}, one a tie cost, or none"
        raise DataError([Problem("", "sources.ties", found, expected)])
    net = _Net(
        node=np.arange(graph.nodes),
        arc=None,
        indptr=graph.indptr,
        head=graph.head,
        start=starts.nodes,
        entry=np.arange(starts.nodes.size),
        target=checked_nodes(graph, targets, "targets"),
    )
    best: int | None = None
    for i, cost in enumerate(costs):
        local = cost if net.arc is None else cost[net.arc]
        begun = initial[i][net.entry] if i < len(initial) else np.zeros(net.entry.size, np.int64)
        refined = _best_part(net, local, begun)
        if refined is None:
            return None
        net = refined[1]
        best = refined[0] if best is None else best
    nodes, arcs = _least_by_rank(net, graph.rank)
    assured = net.arc if net.arc is not None else np.arange(graph.arcs)
    return Route(net.node[nodes], assured[arcs], 0 if best is None else best)


def distances(graph: RouteGraph, weight: Ints, sources: SourcesLike) -> Floats:
    """Least cost from any source to every node, (n,); inf where no route leads. Exact integers."""
    starts = as_sources(graph, sources)
    checked = _checked_costs(graph, weight, "weight")
    return _distances(graph.indptr, graph.head, checked, starts.nodes, starts.cost)


def cost_to_go(
    graph: RouteGraph, weight: Ints, targets: Sequence[int] | NDArray[np.integer]
) -> Floats:
    """Least cost from every node to any target, (n,); inf where none is reached. Exact integers."""
    checked = _checked_costs(graph, weight, "weight")
    ends = checked_nodes(graph, targets, "targets")
    # As doubles through scipy's own transposition: the weights are exact in them.
    turned = compressed(graph.indptr, graph.head, checked.astype(np.float64)).T.tocsr()
    zero = np.zeros(ends.size, np.int64)
    return _distances(turned.indptr, turned.indices, turned.data, ends, zero)


def recost(
    graph: RouteGraph, route: Route, weight: Ints, sources: SourcesLike | None = None
) -> int:
    """Sum of ``weight`` over the route, step by step, and its start's cost if ``sources`` is given.

    ClimbpathError if the arcs of the route do not join its nodes.
    """
    if route.nodes.size != route.arcs.size + 1:
        raise ClimbpathError(f"a route of {route.arcs.size} arcs has {route.nodes.size} nodes")
    if route.arcs.size and (route.arcs.min() < 0 or route.arcs.max() >= graph.arcs):
        raise ClimbpathError(f"a route with arcs that are not among the {graph.arcs} of the graph")
    joined = (graph.arc_tails(route.arcs) == route.nodes[:-1]) & (
        graph.head[route.arcs] == route.nodes[1:]
    )
    if not joined.all():
        raise ClimbpathError(f"arc {int(np.argmin(joined))} of the route does not join its nodes")
    total = sum(int(value) for value in weight[route.arcs])
    if sources is None:
        return total
    starts = as_sources(graph, sources)
    here = starts.cost[starts.nodes == route.nodes[0]]
    if here.size == 0:
        raise ClimbpathError("the route starts at a node that is no source")
    return total + int(here.min())


def as_sources(graph: RouteGraph, sources: SourcesLike) -> Sources:
    """Checked sources; plain node numbers start at cost 0."""
    given = sources if isinstance(sources, Sources) else Sources.at(np.asarray(sources, np.int64))
    nodes = checked_nodes(graph, given.nodes, "sources")
    for key, values in (("cost", given.cost), *(("ties", tie) for tie in given.ties)):
        if values.shape != nodes.shape or values.dtype.kind not in "iu":
            found = f"{values.dtype} {values.shape}"
            raise DataError([Problem("", f"sources.{key}", found, f"integers {nodes.shape}")])
        _check_range(values, f"sources.{key}")
    return Sources(nodes, given.cost, given.ties)


def _best_part(net: _Net, weight: Ints, begun: Ints) -> tuple[int, _Net] | None:
    """Least cost from the starts to the targets, and the part of the net where such routes run.

    That part has an arc where dist[tail] + weight = dist[head] and the head leads on, over such
    arcs, to a target of least cost. Every walk in it from a start to a target has the least cost,
    because the sum telescopes; so the next cost can be refined on it alone.
    """
    n = net.node.size
    dist = _distances(net.indptr, net.head, weight, net.start, begun)
    goal = dist[net.target].min() if net.target.size else np.inf
    if not np.isfinite(goal):
        return None
    tight, tail = _tight_arcs(net, weight, dist, goal)
    head = net.head[tight]
    ends = np.unique(net.target[dist[net.target] == goal])
    back = flipped(n, tail, head, np.ones(tight.size))
    useful = reachable(back.indptr, back.indices, ends)
    kept = useful[head]  # the tail of a tight arc to a useful head is useful too
    tight, tail, head = tight[kept], tail[kept], head[kept]
    local = np.cumsum(useful) - 1
    nodes = np.flatnonzero(useful)
    open_start = useful[net.start] & (dist[net.start] == begun)
    counts = np.bincount(local[tail], minlength=nodes.size)
    return int(goal), _Net(
        node=net.node[nodes],
        arc=tight if net.arc is None else net.arc[tight],
        indptr=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        head=local[head].astype(np.int32),
        start=local[net.start[open_start]],
        entry=net.entry[open_start],
        target=local[ends],
    )


def _tight_arcs(net: _Net, weight: Ints, dist: Floats, goal: float) -> tuple[Ints, Ints]:
    """Arcs with dist[tail] + weight = dist[head] ≤ goal, ascending, and their tails.

    Goes through the rows in pieces, so that a large graph needs no more arrays of its size.
    """
    arcs: list[Ints] = []
    tails: list[Ints] = []
    n = net.indptr.size - 1
    row = 0
    while row < n:
        last = int(np.searchsorted(net.indptr, net.indptr[row] + _CHUNK, side="right")) - 1
        last = min(max(last, row + 1), n)
        first, end = int(net.indptr[row]), int(net.indptr[last])
        counts = np.diff(net.indptr[row : last + 1])
        reached = np.repeat(dist[row:last], counts) + weight[first:end]
        # reached ≤ goal also leaves out the arcs between nodes that no source leads to
        piece = np.flatnonzero((reached == dist[net.head[first:end]]) & (reached <= goal)) + first
        arcs.append(piece)
        tails.append(np.searchsorted(net.indptr, piece, side="right").astype(np.int64) - 1)
        row = last
    if not arcs:
        return np.zeros(0, np.int64), np.zeros(0, np.int64)
    return np.concatenate(arcs), np.concatenate(tails)


def _least_by_rank(net: _Net, rank: Ints) -> tuple[list[int], list[int]]:
    """Local nodes and arcs of the route, without a node twice, of least sequence of ranks.

    Greedy, and exact because every node of the net leads to a target: only inside a cycle (all of
    whose costs are 0) must a step be refused when the nodes already visited cut off the way out.
    """
    local_rank = rank[net.node]
    matrix = compressed(net.indptr, net.head, np.ones(net.head.size))
    part: Ints32 = connected_components(matrix, directed=True, connection="strong")[1]
    target = np.zeros(net.node.size, np.bool_)
    target[net.target] = True
    node = int(net.start[np.argmin(local_rank[net.start])])
    nodes, arcs = [node], list[int]()
    visited = {node}
    while not target[node]:
        row = np.arange(net.indptr[node], net.indptr[node + 1])
        for arc in row[np.argsort(local_rank[net.head[row]])].tolist():
            following = int(net.head[arc])
            if following in visited:
                continue
            if part[following] != part[node] or _leads_out(net, part, target, following, visited):
                break
        else:
            raise ClimbpathError("an optimal route ended before its target")
        node = following
        nodes.append(node)
        arcs.append(arc)
        visited.add(node)
    return nodes, arcs


def _leads_out(net: _Net, part: Ints32, target: Flags, node: int, visited: set[int]) -> bool:
    """Whether ``node`` leads to a target or out of its strong component past no visited node."""
    seen = {node}
    stack = [node]
    while stack:
        here = stack.pop()
        if target[here]:
            return True
        for following in net.head[net.indptr[here] : net.indptr[here + 1]].tolist():
            if part[following] != part[node]:
                return True
            if following not in seen and following not in visited:
                seen.add(following)
                stack.append(following)
    return False


def _distances(
    indptr: NDArray[np.integer],
    head: Ints32,
    weight: NDArray[np.integer] | Floats,
    nodes: Ints,
    begun: Ints,
) -> Floats:
    """Exact least costs (n,) from ``nodes`` (s,) with ``begun`` (s,) spent there already."""
    n = indptr.size - 1
    if nodes.size == 0:
        return np.full(n, np.inf)
    data = weight.astype(np.float64, copy=False)
    least = int(begun.min())
    if least == begun.max():
        matrix = compressed(indptr, head, data)
        dist: Floats = dijkstra(matrix, indices=np.unique(nodes), min_only=True) + float(least)
    else:
        # One more node that leads to each source for the least that was spent to be there.
        order = np.lexsort((begun, nodes))
        order = order[np.append(True, np.diff(nodes[order]) != 0)]
        widened = np.append(indptr, indptr[-1] + order.size)
        heads = np.concatenate([head, nodes[order].astype(np.int32)])
        matrix = compressed(widened, heads, np.concatenate([data, begun[order]]))
        dist = dijkstra(matrix, indices=np.array([n]))[0, :n]
    finite = dist[np.isfinite(dist)]
    if finite.size and finite.max() >= EXACT_LIMIT:
        raise TooLargeError(f"a route costs {finite.max():.3g}: costs are exact below 2**53 only")
    return dist


def _checked_costs(graph: RouteGraph, cost: Ints, key: str) -> Ints:
    if cost.shape != (graph.arcs,) or cost.dtype.kind not in "iu":
        found = f"{cost.dtype} {cost.shape}"
        raise DataError([Problem("", key, found, f"integers ({graph.arcs},)")])
    _check_range(cost, key)
    return cost


def _check_range(cost: NDArray[np.integer], key: str) -> None:
    if cost.size and cost.min() < 0:
        raise DataError([Problem("", key, str(cost.min()), "0 or more")])
    if cost.size and cost.max() >= EXACT_LIMIT:
        raise TooLargeError(f"{key} reaches {cost.max()}: costs are exact below 2**53 only")


def checked_nodes(graph: RouteGraph, nodes: Sequence[int] | NDArray[np.integer], key: str) -> Ints:
    array = np.atleast_1d(np.asarray(nodes))
    if array.size == 0:
        return np.zeros(0, np.int64)
    if array.dtype.kind not in "iu" or array.ndim != 1:
        found = f"{array.dtype} {array.shape}"
        raise DataError([Problem("", key, found, "node numbers, one axis")])
    if array.min() < 0 or array.max() >= graph.nodes:
        found = f"{array.min()} … {array.max()}"
        raise DataError([Problem("", key, found, f"nodes from 0 to {graph.nodes - 1}")])
    return array.astype(np.int64)
