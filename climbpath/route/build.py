"""From stances and a motion model to the search graph.

A move is: limbs let go (each release an arc to the stance that is left, its support), one limb
lands (arcs from a sample of the support to a sample of the landing stance, as long as the motion
model says and as the reach takes), and others may land with it (arcs that add only what their
reach takes beyond the time the move lasted). A strike ends the climb: nothing follows it. So any
limbs may move together while arcs run only between a stance and its supports: their number grows
with those links, never with pairs of stances.

Nodes carry the upward speed. As a faster one is never worse than a slower (speed can be shed for
nothing), each start speed needs one arc for the quickest step it allows, and each class of duration
one arc from the slowest speed that still makes it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array

from climbpath.contacts import Limb
from climbpath.motion.model import Motion
from climbpath.posture.linkage import Linkage
from climbpath.route.arcs import Arcs, Builder
from climbpath.route.flights import flights as flight_arcs
from climbpath.route.graph import RouteGraph
from climbpath.route.nodes import NodeCode
from climbpath.stance.options import ContactOptions
from climbpath.stance.stances import StanceSet

Array = NDArray[np.float64]


@dataclass(frozen=True)
class SearchGraph:
    """The graph of one body on one wall and what its nodes mean.

    ``reach_distance`` (P, 4) [m]: how far each limb's contact is from where the limb would rest;
    ``strength`` (P,): what the motion model says of each sample's contacts.
    """

    graph: RouteGraph
    code: NodeCode
    stances: StanceSet
    reach_distance: Array
    strength: Array


def build_graph(
    options: ContactOptions, linkage: Linkage, stances: StanceSet, motion: Motion, line_x: float,
    strength: Array | None = None, flights: bool = True, memory_bytes: float = np.inf,
) -> SearchGraph:
    """All arcs of all moves. ``strength`` (P,) as ``motion`` gives it, 1 if left out.

    TooLargeError when they would not fit into ``memory_bytes``.
    """
    known = np.ones(stances.samples) if strength is None else strength
    builder = Builder(options, linkage, stances, motion, line_x, known)
    builder.guard(memory_bytes)
    parts = [builder.settling(), builder.shedding()]
    if motion.in_place:
        parts += builder.rising()
    for limb in Limb:
        parts.append(builder.releases(limb))
        parts += builder.moves(limb)
        parts += builder.joint_landings(limb)
    nodes = builder.code.plain
    if flights:
        arcs, nodes = flight_arcs(builder)
        parts += arcs
    graph = _compressed(nodes, parts, builder)
    return SearchGraph(graph, builder.code, stances, builder.distance, known)


def _compressed(nodes: int, parts: list[Arcs], builder: Builder) -> RouteGraph:
    """Sort the arcs into rows; no pair of nodes has two arcs, by how they are made."""
    tail = np.concatenate([p.tail for p in parts])
    head = np.concatenate([p.head for p in parts])
    number = np.arange(len(tail), dtype=np.int32)
    rows = coo_array((number, (tail, head)), shape=(nodes, nodes)).tocsr()
    del tail, head, number
    for part in parts:
        del part.tail, part.head
    rows.sort_indices()
    order = rows.data

    def sorted_(name: str) -> NDArray[np.int32]:
        joined = np.concatenate([getattr(p, name) for p in parts])
        for p in parts:
            delattr(p, name)
        return np.asarray(joined[order])

    excursion = np.zeros(nodes)
    plain = builder.code.plain
    excursion[:plain] = np.repeat(np.abs(builder.off) * 1e3, builder.code.per_sample)
    return RouteGraph(
        indptr=rows.indptr.astype(np.int64),
        head=rows.indices.astype(np.int32, copy=False),
        time_us=sorted_("time").astype(np.int64),
        area=sorted_("area").astype(np.int64),
        event=sorted_("event"),
        rank=np.arange(nodes),
        excursion=excursion,
    )
