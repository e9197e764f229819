"""Checks that look at more than one value of a wall: ids, places, outlines, starts, finish."""

from __future__ import annotations

import difflib
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence

import numpy as np
import shapely

from climbpath.contacts import HANDS, LIMB_NAMES
from climbpath.wall.checking import Checker, joined, shown
from climbpath.wall.model import FOOT_USES, HAND_USES, Hold, Start, Wall

TOUCHING_M2 = 1e-8
"""Outlines that share less than this (0.01 mm²) only touch; more than rounding can make."""

FINISH_USES = ("hand", "both", "strike")


def check_wall(check: Checker, wall: Wall, labels: Sequence[str], all_ids: Sequence[str]) -> None:
    """Note every problem between the parts of ``wall``.

    ``labels`` names its holds in messages; ``all_ids`` are the hold ids of the file, those of
    holds that could not be read included, so that naming one of these raises no second problem.
    """
    for hold_id, count in Counter(all_ids).items():
        if count > 1:
            check.add("hold", f"{count} with the id {shown(hold_id)}", "ids used once")
    _check_places(check, wall.holds, labels)
    _check_outlines(check, wall.holds, labels)
    _check_lanes(check, wall, labels)
    uses = {hold.id: hold for hold in wall.holds}
    known: dict[str, Hold | None] = {hold_id: uses.get(hold_id) for hold_id in all_ids}
    for index, start in enumerate(wall.starts):
        _check_start(check, start, f"start[{index + 1}]", known)
    _check_finish(check, wall.finish, "finish.holds", known)
    if not wall.lanes:
        _check_presence(check, wall.starts, wall.finish, "")
    for index, lane in enumerate(wall.lanes):
        place = f"lane[{index + 1}]"
        own = {
            hold_id: hold
            for hold_id, hold in known.items()
            if hold is None or hold.lane in (None, lane.id)
        }
        for number, start in enumerate(lane.starts or wall.starts):
            # The wall's own starts were looked at above; here only who may use what is new.
            prefix = joined(place, f"start[{number + 1}]")
            _check_start(check, start, prefix, own, quiet=None if lane.starts else known)
        key = joined(place, "finish.holds")
        _check_finish(
            check, lane.finish or wall.finish, key, own, quiet=None if lane.finish else known
        )
        _check_presence(check, lane.starts or wall.starts, lane.finish or wall.finish, place)


def _check_places(check: Checker, holds: Sequence[Hold], labels: Sequence[str]) -> None:
    first: dict[tuple[float, float], str] = {}
    for hold, label in zip(holds, labels, strict=True):
        other = first.setdefault((hold.x, hold.y), label)
        if other != label:
            check.add(label, f"the place of {other}", "a place of its own")


def _check_outlines(check: Checker, holds: Sequence[Hold], labels: Sequence[str]) -> None:
    polygons = []
    owners = []
    for hold, label in zip(holds, labels, strict=True):
        if not hold.outline:
            continue
        polygon = shapely.Polygon(np.array(hold.outline) + np.array([hold.x, hold.y]))
        if not polygon.is_valid:
            # Checked about its own position before; adding that can only add rounding.
            polygon = polygon.buffer(0.0)
        polygons.append(polygon)
        owners.append(label)
    if not polygons:
        return
    shapes = np.array(polygons, dtype=object)
    left, right = shapely.STRtree(shapes).query(shapes, predicate="intersects")
    once = left < right
    left, right = left[once], right[once]
    shared = shapely.area(shapely.intersection(shapes[left], shapes[right]))
    for a, b in sorted(zip(left[shared > TOUCHING_M2], right[shared > TOUCHING_M2], strict=True)):
        check.add(f"{owners[b]}.outline", f"an overlap with {owners[a]}", "no overlap")


def _check_lanes(check: Checker, wall: Wall, labels: Sequence[str]) -> None:
    for lane_id, count in Counter(lane.id for lane in wall.lanes).items():
        if count > 1:
            check.add("lane", f"{count} with the id {shown(lane_id)}", "ids used once")
    lanes = {lane.id: lane for lane in wall.lanes}
    for hold, label in zip(wall.holds, labels, strict=True):
        if hold.lane is None:
            continue
        lane = lanes.get(hold.lane)
        if lane is None:
            names = ", ".join(shown(name) for name in lanes) or "but the wall has none"
            check.add(f"{label}.lane", shown(hold.lane), f"the id of a lane, {names}")
        elif not lane.x_from <= hold.x <= lane.x_to:
            check.add(f"{label}.lane", "a hold outside that lane", "a hold between its edges")


def _check_start(
    check: Checker,
    start: Start,
    place: str,
    known: Mapping[str, Hold | None],
    quiet: Mapping[str, Hold | None] | None = None,
) -> None:
    """``quiet``: ids looked at before, of which only those missing in ``known`` are new."""
    any_hand = False
    for limb, entries in enumerate(start.allowed):
        is_hand = limb in HANDS
        key = f"{place}.{LIMB_NAMES[limb]}"
        for entry in entries:
            if entry == "free":
                continue
            if entry in ("floor", "smear"):
                if is_hand and quiet is None:
                    check.add(key, shown(entry), 'a hold id or "free" (only feet use that)')
                continue
            any_hand = any_hand or is_hand
            if entry not in known:
                if quiet is None or entry in quiet:
                    check.add(key, shown(entry), "the id of a hold here" + _nearest(entry, known))
                continue
            hold = known[entry]
            uses, who = (HAND_USES, "hands") if is_hand else (FOOT_USES, "feet")
            if hold is not None and hold.use not in uses and quiet is None:
                check.add(key, f"{shown(entry)}, of use {hold.use}", f"a hold for {who}")
    if not any_hand and start.allowed[0] and start.allowed[1] and quiet is None:
        check.add(place, "no hand on a hold", "at least one hand that may have a hold")


def _check_finish(
    check: Checker,
    finish: Iterable[str],
    key: str,
    known: Mapping[str, Hold | None],
    quiet: Mapping[str, Hold | None] | None = None,
) -> None:
    for entry in finish:
        if entry not in known:
            if quiet is None or entry in quiet:
                check.add(key, shown(entry), "the id of a hold here" + _nearest(entry, known))
            continue
        hold = known[entry]
        if hold is not None and hold.use not in FINISH_USES and quiet is None:
            check.add(key, f"{shown(entry)}, of use {hold.use}", "a hold that a hand can touch")


def _check_presence(
    check: Checker, starts: Sequence[Start], finish: Sequence[str], place: str
) -> None:
    if not starts and not _noted(check, joined(place, "start")):
        check.add(joined(place, "start"), "no start", "at least one [[start]]")
    if not finish and not _noted(check, joined(place, "finish")):
        check.add(joined(place, "finish"), "no finish", "[finish] with holds = [...]")


def _noted(check: Checker, key: str) -> bool:
    return any(problem.key.startswith(key) for problem in check.problems)


def _nearest(entry: str, known: Iterable[str]) -> str:
    near = difflib.get_close_matches(entry[:60], [*known, "floor", "free", "smear"], n=1)
    return f" (did you mean {shown(near[0])}?)" if near else ""
