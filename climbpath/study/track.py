"""When a plan's body is where: the clock at every node of a route, and the path of its centre of
mass. From the lattice as it was searched, or polished (``climbpath.study.polish``).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from climbpath.route.measures import mean_distance, off_line
from climbpath.route.shortest import Route
from climbpath.stance.stances import StanceSet
from climbpath.study.climb import Climb

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

DECIMALS = 9
"""Of times and places of a path, s and m: those of two parts that meet are the same."""


@dataclass(frozen=True)
class Track:
    """``clock`` (nodes,) [us]: since the signal at each node of a route. ``path`` (T, 4): s, then
    x, y, z in the world [m]; the centre of mass runs evenly between its points. ``area_mm_ms``:
    its lateral area.

    ``moved``: for places on the route at which the body stands otherwise than its sample, the row
    of ``postures`` that says how.
    """

    clock: Ints
    path: Array
    area_mm_ms: int
    moved: Mapping[int, int] = field(default_factory=dict)
    postures: StanceSet | None = None


def lattice_track(climb: Climb, route: Route) -> Track:
    """The route as it was searched: times and area of its arcs, the samples of its nodes."""
    graph, stances = climb.search.graph, climb.search.stances
    source = int(np.flatnonzero(climb.sources == route.nodes[0])[0])
    clock = int(climb.source_time[source]) + np.concatenate(
        [[0], np.cumsum(graph.time_us[route.arcs])]).astype(np.int64)
    area = int(climb.source_area[source]) + int(graph.area[route.arcs].sum())
    samples = climb.search.code.sample(route.nodes)
    plain = samples >= 0
    com = stances.com[samples[plain]]
    seconds = clock[plain] / 1e6
    path = np.column_stack([np.concatenate([[0.0], seconds]), np.concatenate([com[:1], com])])
    return Track(clock, kept_points(path), area)


def kept_points(path: Array) -> Array:
    """A path (T, 4) without points that repeat the one before."""
    rounded = np.round(path, DECIMALS)
    new = np.ones(len(path), dtype=bool)
    new[1:] = (np.diff(rounded, axis=0) != 0.0).any(axis=1)
    return np.asarray(rounded[new])


def path_area(path: Array, line_x: float) -> float:
    """Lateral area [m s] of a path (T, 4), exact for a centre of mass that runs evenly between."""
    off = off_line(path[:, 1], line_x)
    return float((np.diff(path[:, 0]) * mean_distance(off[:-1], off[1:])).sum())


def standing(stances: StanceSet, samples: Ints) -> StanceSet:
    """Chosen samples, each as a stance of its own with that one sample."""
    owner = stances.sample_stance[samples]
    rows = np.arange(len(samples))
    return StanceSet(
        contacts=stances.contacts[owner],
        points=stances.points[owner],
        margin=stances.margin[owner],
        support=np.full((len(samples), 4), -1),
        first_sample=np.arange(len(samples) + 1),
        sample_stance=rows,
        level=stances.level[samples],
        com=stances.com[samples],
        turn=stances.turn[..., samples],
        shift=stances.shift[:, samples],
        spare=stances.spare[samples],
        lattice=stances.lattice,
    )


def standing_on(track: Track, stances: StanceSet, samples: Ints, places: Ints) -> StanceSet:
    """The same for samples at places of a track, as it moved them."""
    own = standing(stances, samples)
    if track.postures is None:
        return own
    rows = np.array([k for k, place in enumerate(places.tolist()) if place in track.moved],
                    dtype=np.int64)
    if not len(rows):
        return own
    new = np.array([track.moved[int(place)] for place in places[rows]])
    com, turn, shift, spare = (a.copy() for a in (own.com, own.turn, own.shift, own.spare))
    com[rows], spare[rows] = track.postures.com[new], track.postures.spare[new]
    turn[..., rows], shift[:, rows] = track.postures.turn[..., new], track.postures.shift[:, new]
    return replace(own, com=com, turn=turn, shift=shift, spare=spare)
