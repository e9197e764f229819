"""Conditions on a route, met by searching the product of the graph with a small automaton.

Each condition is an automaton that reads the events of the arcs; together they are their product,
whose states only ever rise. A product node is (node, state); only those are built that lie on
some route from a source to a target with every condition met.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from climbpath.errors import DataError, Problem, UsageError
from climbpath.route.graph import Flags, Ints, RouteGraph, flipped, reachable
from climbpath.route.shortest import Route, Sources, SourcesLike, as_sources, checked_nodes

MAX_STATES = 64
"""Most automaton states: the product may be this many times the size of the graph."""

FORBIDDEN = -1


@dataclass(frozen=True)
class Touch:
    """At least one arc of the route has one of these events. Two states."""

    events: frozenset[int]


@dataclass(frozen=True)
class Opening:
    """The first watched events of the route are those of ``steps``, step by step.

    The events of one step may come in any order; until the last step is done no other watched
    event may occur, nor one a second time. Events of the steps are watched anyway; others are free,
    and after the opening all are. 2**k - 1 states for a step of k events, and one.
    """

    steps: tuple[frozenset[int], ...]
    watched: frozenset[int]


Demand = Touch | Opening


@dataclass(frozen=True, eq=False)
class Automaton:
    """``next_state`` (states, events + 1): the state after an event, or -1 where it is forbidden.

    The last column is for arcs without an event (-1, which numpy takes as the last). States
    never fall; the route starts in state 0 and must end in the last.
    """

    next_state: Ints

    @property
    def states(self) -> int:
        return int(self.next_state.shape[0])


class Demanded(NamedTuple):
    """The product graph and what its numbers mean in the graph it was made from.

    ``base_node`` (nodes,) and ``base_arc`` (arcs,) lead back. Sources and targets that no route
    uses are gone; without a route the product is empty.
    """

    graph: RouteGraph
    sources: Sources
    targets: Ints
    base_node: Ints
    base_arc: Ints

    def base_route(self, route: Route) -> Route:
        """The route in the numbers of the original graph."""
        return Route(self.base_node[route.nodes], self.base_arc[route.arcs], route.cost)


def compile_demands(demands: Sequence[Demand], events: int) -> Automaton:
    """The automaton of all demands together, for events 0 … ``events`` - 1.

    UsageError if it would have more than 64 states, saying what to ask less of.
    """
    sizes = [_states(demand) for demand in demands]
    total = math.prod(sizes)
    if total > MAX_STATES:
        raise UsageError(_too_many(demands, sizes, total))
    together = np.zeros((1, events + 1), np.int64)
    for demand in demands:
        part = _part(demand, events)
        joined = together[:, None, :] * part.shape[0] + part[None, :, :]
        joined[(together[:, None, :] < 0) | (part[None, :, :] < 0)] = FORBIDDEN
        together = joined.reshape(-1, events + 1)
    return Automaton(together)


def with_demands(
    graph: RouteGraph,
    demands: Sequence[Demand],
    sources: SourcesLike,
    targets: Sequence[int] | NDArray[np.integer],
    start_events: Sequence[Collection[int]] | None = None,
) -> Demanded:
    """The graph whose routes are exactly the routes of ``graph`` that meet all ``demands``.

    ``start_events``: for each source the events that hold at the start already (a hand that starts
    on a hold touches it); they count for ``Touch``, not for the steps of an ``Opening``. Ranks
    follow the original's, then the state. Without demands the graph itself comes back.
    UsageError for too many states, DataError for malformed arguments.
    """
    starts = as_sources(graph, sources)
    ends = checked_nodes(graph, targets, "targets")
    if not demands:
        return Demanded(graph, starts, ends, np.arange(graph.nodes), np.arange(graph.arcs))
    if start_events is not None and len(start_events) != starts.nodes.size:
        found, expected = str(len(start_events)), f"{starts.nodes.size}, one a source"
        raise DataError([Problem("", "start_events", found, expected)])
    events = int(graph.event.max(initial=-1)) + 1
    automaton = compile_demands(demands, events)
    began = start_events if start_events is not None else [()] * starts.nodes.size
    state = np.array([_start_state(demands, held) for held in began], np.int64)
    useful = _useful(graph, automaton, starts.nodes, state, ends)
    product, number, base_node, base_arc = _product(graph, automaton, useful)
    open_start = useful[state, starts.nodes]
    last = automaton.states - 1
    return Demanded(
        product,
        Sources(
            number[state, starts.nodes][open_start],
            starts.cost[open_start],
            tuple(tie[open_start] for tie in starts.ties),
        ),
        number[last, ends][useful[last, ends]],
        base_node,
        base_arc,
    )


def _states(demand: Demand) -> int:
    if isinstance(demand, Touch):
        return 2
    return 1 + sum((1 << len(step)) - 1 for step in demand.steps)


def _too_many(demands: Sequence[Demand], sizes: Sequence[int], total: int) -> str:
    touches = sum(isinstance(demand, Touch) for demand in demands)
    openings = (isinstance(demand, Opening) for demand in demands)
    longest = max((s for s, opens in zip(sizes, openings, strict=True) if opens), default=1)
    text = f"the conditions together need {total} states, {MAX_STATES} are possible: ask for"
    if longest == 1:
        return f"{text} fewer placements to include (each of the {touches} doubles the states)"
    if touches == 0:
        return f"{text} a shorter opening, or fewer placements in one step of it"
    return (
        f"{text} fewer placements to include (each of the {touches} doubles the states)"
        f" or a shorter opening (it takes {longest} of them)"
    )


def _part(demand: Demand, events: int) -> Ints:
    """Transition table of one demand, (states, events + 1); events beyond the table never occur."""
    size = _states(demand)
    table = np.repeat(np.arange(size)[:, None], events + 1, axis=1)
    if isinstance(demand, Touch):
        table[0, _known(demand.events, events)] = 1
        return table
    watched = _known(demand.watched.union(*demand.steps), events)
    table[:-1, watched] = FORBIDDEN
    first = 0
    for step in demand.steps:
        order = sorted(step)
        full = (1 << len(order)) - 1
        # State first + done: the bits of ``done`` are the events of the step that have occurred.
        for done in range(full):
            for bit, event in enumerate(order):
                if 0 <= event < events and not done >> bit & 1:
                    table[first + done, event] = first + (done | 1 << bit)
        first += full
    return table


def _known(wanted: frozenset[int], events: int) -> list[int]:
    return sorted(event for event in wanted if 0 <= event < events)


def _start_state(demands: Sequence[Demand], held: Collection[int]) -> int:
    state = 0
    for demand in demands:
        met = isinstance(demand, Touch) and not demand.events.isdisjoint(held)
        state = state * _states(demand) + int(met)
    return state


def _useful(graph: RouteGraph, automaton: Automaton, nodes: Ints, state: Ints, ends: Ints) -> Flags:
    """Which (state, node) lie on some route from a source to a target in the last state.

    As states never fall, one sweep a state is enough: upward from the sources, then downward
    from the targets. Shape (states, n).
    """
    tail = graph.tails()
    from_start = np.zeros((automaton.states, graph.nodes), np.bool_)
    from_start[state, nodes] = True
    for s in range(automaton.states):
        if not from_start[s].any():
            continue
        following = automaton.next_state[s][graph.event]
        stay = np.flatnonzero(following == s)
        indptr = np.searchsorted(stay, graph.indptr)
        from_start[s] = reachable(indptr, graph.head[stay], np.flatnonzero(from_start[s]))
        rise = np.flatnonzero((following > s) & from_start[s][tail])
        from_start[following[rise], graph.head[rise]] = True
    to_end = np.zeros_like(from_start)
    to_end[-1, ends] = True
    to_end &= from_start
    for s in range(automaton.states - 1, -1, -1):
        inside = from_start[s][tail]
        following = automaton.next_state[s][graph.event]
        rise = np.flatnonzero((following > s) & inside)
        to_end[s, tail[rise[to_end[following[rise], graph.head[rise]]]]] = True
        if not to_end[s].any():
            continue
        stay = np.flatnonzero((following == s) & inside)
        back = flipped(graph.nodes, tail[stay], graph.head[stay], np.ones(stay.size))
        to_end[s] = reachable(back.indptr, back.indices, np.flatnonzero(to_end[s]))
    return to_end & from_start


def _product(
    graph: RouteGraph, automaton: Automaton, useful: Flags
) -> tuple[RouteGraph, Ints, Ints, Ints]:
    """The product over the useful (state, node), their numbers (states, n), and the way back."""
    states, n = useful.shape
    # Numbered by node, then state: heads that ascend in the graph then ascend in the product.
    base_node, node_state = np.nonzero(useful.T)
    number = np.full((states, n), -1, np.int64)
    number[node_state, base_node] = np.arange(base_node.size)
    tail = graph.tails()
    arcs, tails, heads = [], [], []
    for s in range(states):
        if not useful[s].any():
            continue
        following = automaton.next_state[s][graph.event]
        arc = np.flatnonzero(useful[s][tail] & (following >= 0))
        arc = arc[useful[following[arc], graph.head[arc]]]
        arcs.append(arc)
        tails.append(number[s, tail[arc]])
        heads.append(number[following[arc], graph.head[arc]])
    empty = np.zeros(0, np.int64)
    base_arc, tails_all = np.concatenate([empty, *arcs]), np.concatenate([empty, *tails])
    heads_all = np.concatenate([empty, *heads])
    order = np.argsort(tails_all, kind="stable")
    base_arc = base_arc[order]
    counts = np.bincount(tails_all, minlength=base_node.size)
    rank = np.empty(base_node.size, np.int64)
    rank[np.lexsort((node_state, graph.rank[base_node]))] = np.arange(base_node.size)
    product = RouteGraph(
        indptr=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        head=heads_all[order].astype(np.int32),
        time_us=graph.time_us[base_arc],
        area=graph.area[base_arc],
        event=graph.event[base_arc],
        rank=rank,
        excursion=graph.excursion[base_node],
    )
    return product, number, base_node, base_arc
