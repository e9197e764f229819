"""Arcs of flights: leaving the wall, and landing with one hand.

A flight leads through a node of its own, by hand, height, x and upward speed at take-off, so that
take-offs and landings never pair up.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE, Limb
from climbpath.route.arcs import MAX_RISE, Arcs, Builder
from climbpath.route.measures import mean_distance
from climbpath.route.nodes import LANDED, LASTS, READY

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

FLIGHT_BIN = 0.097
FLIGHT_SIDE = 0.35
"""Flights are sorted by take-off x in bins of this width, and drift sideways by at most that, m.
The width is no round one: bodies below holds at round places do not lie on the edge of a bin."""

Landings = tuple[Ints, Ints, Array, Array, Ints]


def flights(builder: Builder) -> tuple[list[Arcs], int]:
    """All flights of a body, and the number of nodes with theirs.

    A foot must have pushed. Where the motion model knows forces the landing hand was free during
    the move or rise before, and so already under way.
    """
    stances, code = builder.stances, builder.code
    owner, contacts = stances.sample_stance, stances.contacts
    pushes = ((contacts[:, 2:] >= 0) | (contacts[:, 2:] == FLOOR)).any(axis=1) & ~builder.over
    bins = np.rint(builder.off / FLIGHT_BIN).astype(np.int64)
    left = int(bins.min(initial=0))
    wide = int(bins.max(initial=0)) - left + 1
    place = (stances.level - builder.lowest) * wide + (bins - left)
    places = builder.span * wide
    single = (builder.hands == 1) & (builder.feet == 0)
    # Without forces to tell, any hand lands; else one that was free while the body gained speed.
    phases = [(READY, np.inf)] if builder.motion.hand_holds else [
        (LANDED + kind, duration) for kind, (duration, of_hand) in enumerate(builder.classes)
        if not of_hand]
    parts: list[Arcs] = []
    base = code.plain
    for hand in (Limb.LH, Limb.RH):
        leaves = pushes & ((contacts[:, hand] == FREE) | builder.motion.hand_holds)
        leaving = np.flatnonzero(leaves[owner])
        landing = np.flatnonzero((single & (contacts[:, hand] != FREE))[owner])
        for phase, carried in phases:
            needed = np.maximum(builder.reach(hand, landing), builder.motion.hand_apart or 0.0)
            reach = np.maximum(needed - carried, 0.0)
            for level, speed in enumerate(builder.speeds):
                landed = _landings(builder, hand, landing, reach, bins, left, wide, float(speed),
                                   place[leaving])
                if landed:
                    parts.append(_left(builder, leaving, level, phase, base + place[leaving]))
                    parts += [Arcs(base + origin, head, time, off, event)
                              for origin, head, time, off, event in landed]
                base += places
    if not parts:
        return [], code.plain
    return parts, base


def _landings(
    builder: Builder, hand: int, landing: Ints, reach: Array, bins: Ints, left: int, wide: int,
    speed: float, used: Ints,
) -> list[Landings]:
    """Landings of a hand after leaving at ``speed``, for each rise and drift: which take-off
    place, head, time, mean distance from the line and event."""
    stances, motion, step = builder.stances, builder.motion, builder.stances.lattice.step
    drifts = int(FLIGHT_SIDE / FLIGHT_BIN)
    found = []
    for levels in range(int(MAX_RISE / step) + 1):
        flown, after = motion.flight(levels * step, speed)
        if not np.isfinite(flown):
            continue
        time = motion.flown(flown, reach)
        for drift in range(-drifts, drifts + 1):
            across = bins[landing] - left - drift
            below = stances.level[landing] - builder.lowest - levels
            origin = below * wide + across
            good = (across >= 0) & (across < wide) & (below >= 0) & np.isfinite(time)
            good &= np.isin(origin, used)
            end = landing[good]
            level = builder.level_of(np.full(len(end), after))
            begun = np.asarray((bins[end] - drift) * FLIGHT_BIN, dtype=np.float64)
            off = mean_distance(begun, builder.off[end])
            phase = builder.flown_phase(len(end))
            found.append((origin[good], builder.code.node(end, level, hand, phase),
                          time[good], off, builder.event(hand, end)))
    return found


def _left(builder: Builder, leaving: Ints, level: int, phase: int, head: Ints) -> Arcs:
    """Every limb lets go at a speed level."""
    tail = builder.code.node(leaving, level, 0, phase)
    many = len(leaving) * LASTS
    return Arcs((tail[:, None] + np.arange(LASTS) * builder.code.phases).ravel(),
                np.repeat(head, LASTS), np.full(many, builder.motion.take_off()),
                np.repeat(np.abs(builder.off[leaving]), LASTS), np.full(many, -1))
