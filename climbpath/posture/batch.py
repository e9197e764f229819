"""Stances as arrays: what the posture solver is given, in the axes of one section a stance.

Arrays are stored component first, so that the last axis runs over the N stances.
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from climbpath.contacts import FLOOR, FREE
from climbpath.posture.linkage import Linkage
from climbpath.wall import Surface

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


KEPT_BYTES = 31 << 20
"""A block just under the size from which glibc takes every block from the system anew."""


def keep_memory() -> None:
    """Have the C library keep freed memory for the next arrays instead of giving it back.

    The solver makes and drops many arrays of about 100 kB. By default glibc fetches such blocks
    from the system each time, and that takes longer than the arithmetic on them; once a large
    block has been freed, its threshold stands there (mallopt(3), M_MMAP_THRESHOLD). The block is
    never touched, so it takes no memory. Elsewhere this does nothing.
    """
    np.empty(KEPT_BYTES, dtype=np.uint8)


@dataclass(frozen=True)
class StanceBatch:
    """N stances in base axes: right, up along and out of the section each one belongs to.

    ``target`` (3, 4, N) [m]: contact points (meaningless for free limbs and floor feet).
    ``engaged`` (4, N) bool: the limb has a contact point. ``floor`` (4, N) bool: the foot stands
    on the ground. ``reach`` and ``fold`` (4, N) [m]: longest and shortest distance root to contact.
    ``vertical`` (3, N): world up; ``floor_level`` (N,) [m]: height of the ground along it.
    ``out`` (3, N): world axis out of the wall; ``floor_out`` (N,) [m]: where along it the surface
    meets the ground. ``plane`` (2, 2, 4, N):
    for pelvis and chest two planes each, normal and offset, that the point must stay clear of.
    ``limb_plane`` (4, 4, N): the plane of the section each contact lies on (the pelvis' for a limb
    without one); ``hollow`` (4, N) bool: it and the pelvis' plane meet in a hollow.
    ``origin`` (3, N), ``axes`` (3, 3, N): base axes in the world (rows right, up, out).
    """

    target: Array
    engaged: NDArray[np.bool_]
    floor: NDArray[np.bool_]
    reach: Array
    fold: Array
    vertical: Array
    floor_level: Array
    out: Array
    floor_out: Array
    plane: Array
    limb_plane: Array
    hollow: NDArray[np.bool_]
    origin: Array
    axes: Array

    @property
    def size(self) -> int:
        """Number of stances."""
        return int(self.floor_level.shape[0])

    def take(self, index: slice | Ints | NDArray[np.bool_]) -> StanceBatch:
        """The chosen stances."""
        values = (getattr(self, f.name) for f in fields(self))
        if isinstance(index, slice):
            return StanceBatch(*(np.ascontiguousarray(value[..., index]) for value in values))
        chosen = np.flatnonzero(index) if index.dtype == bool else index
        # Unlike an index in brackets, take leaves the stances adjacent in memory at once.
        return StanceBatch(*(value.take(chosen, axis=-1) for value in values))

    def to_world(self, points: Array) -> Array:
        """Base axes to world. Shape (3, ..., N) both ways. [m]"""
        turned = np.einsum("ji...n,j...n->i...n", self._spread(self.axes, points), points)
        return np.asarray(turned + self._spread(self.origin, points))

    def to_base(self, points: Array) -> Array:
        """World to base axes. Shape (3, ..., N) both ways. [m]"""
        moved = points - self._spread(self.origin, points)
        return np.asarray(np.einsum("ij...n,j...n->i...n", self._spread(self.axes, points), moved))

    @staticmethod
    def _spread(values: Array, points: Array) -> Array:
        lead = values.shape[:-1]
        return values.reshape(*lead, *(1,) * (points.ndim - 2), values.shape[-1])


def stance_batch(
    linkage: Linkage, surface: Surface, contacts: Ints, points: Array, strike: NDArray[np.bool_],
    floor_level: float,
) -> StanceBatch:
    """Gather N stances for the solver.

    ``contacts`` (N, 4): hold index or contact code. ``points`` (N, 4, 3) [m]: world position of
    every contact that has one. ``strike`` (N, 4) bool: the hand touches with the fingertip.
    ``floor_level`` [m]: world height of the ground.
    """
    count = len(contacts)
    floor = contacts == FLOOR
    engaged = (contacts != FREE) & ~floor
    weight = engaged[:, :, None].astype(float)
    total = np.maximum(weight.sum(axis=1), 1.0)
    middle = (np.where(weight > 0, points, 0.0)).sum(axis=1) / total
    has_point = engaged.any(axis=1)
    middle[~has_point] = surface.to_world(np.zeros(1), np.zeros(1), np.zeros(1))[0]
    # Where only hands have a point the body hangs below them, and above where only feet do.
    hands, feet = engaged[:, :2].any(axis=1), engaged[:, 2:].any(axis=1)
    below = np.where(hands & ~feet, -0.8, np.where(feet & ~hands, 0.5, -0.1))
    along = surface.to_surface(middle)[:, 1] + below
    home = surface.section_at(along)
    axes = np.stack(
        [np.broadcast_to([1.0, 0.0, 0.0], (count, 3)), surface.up[home], surface.normal[home]]
    )
    origin = surface.origin[home]
    reach = np.repeat(linkage.reach[:, None], count, axis=1)
    reach += np.where(strike.T, linkage.strike_extra, 0.0)
    fold = np.where(strike.T, linkage.strike_fold, linkage.fold[:, None])
    meets = surface.to_world(0.0, floor_level / surface.up[0, 1])[2]
    axes_first = np.ascontiguousarray(np.moveaxis(axes, 1, 2))
    origin_first = np.ascontiguousarray(origin.T)
    safe = np.where(engaged[:, :, None], points, middle[:, None, :])
    moved = np.moveaxis(safe, (0, 1, 2), (2, 1, 0)) - origin_first[:, None, :]
    target = np.einsum("ijn,jln->iln", axes_first, moved)
    vertical = np.ascontiguousarray(axes_first[:, 1, :])
    where = surface.section_at(surface.to_surface(safe)[..., 1] - 1e-9)
    where = np.where(engaged, where, home[:, None])
    lean = surface.overhang
    upper, lower = np.maximum(where, home[:, None]), np.minimum(where, home[:, None])
    limb_plane = np.stack(
        [_plane(surface, where[:, limb], axes_first, origin_first) for limb in range(4)], axis=1
    )
    return StanceBatch(
        target=np.ascontiguousarray(target),
        engaged=np.ascontiguousarray(engaged.T),
        floor=np.ascontiguousarray(floor.T),
        reach=reach,
        fold=fold,
        vertical=vertical,
        floor_level=floor_level - origin_first[1],
        out=np.ascontiguousarray(axes_first[:, 2, :]),
        floor_out=meets - origin_first[2],
        plane=_planes(linkage, surface, home, along, axes_first, origin_first),
        limb_plane=limb_plane,
        hollow=np.ascontiguousarray((lean[upper] >= lean[lower]).T),
        origin=origin_first,
        axes=axes_first,
    )


def _planes(
    linkage: Linkage, surface: Surface, home: Ints, along: Array, axes: Array, origin: Array
) -> Array:
    """Planes (2, 2, 4, N) that pelvis and chest keep clear of.

    Each point minds the section at its own height, and the neighbour that leans further in
    where the fold is hollow (there the free space is what both leave); at a bulging fold the
    section at its height alone bounds it, so that the body may round the edge.
    """
    count = len(home)
    planes = np.empty((2, 2, 4, count))
    last = len(surface.overhang) - 1
    for which, ahead in enumerate((0.0, linkage.chest_height)):
        own = surface.section_at(along + ahead)
        above, below = np.minimum(own + 1, last), np.maximum(own - 1, 0)
        from_fold = along + ahead - surface.y_from[own]
        lean = surface.overhang
        other = np.where(lean[above] > lean[own], above, own)
        other = np.where((lean[below] < lean[own]) & (from_fold < 1.0), below, other)
        for slot, section in enumerate((own, other)):
            planes[which, slot] = _plane(surface, section, axes, origin)
    return planes


def _plane(surface: Surface, section: Ints, axes: Array, origin: Array) -> Array:
    """Normal and offset (4, N) in base axes of the sections (N,): n.p + offset is the clearance."""
    normal = surface.normal[section]
    offset = np.einsum("nj,jn->n", normal, origin)
    offset -= np.einsum("nj,nj->n", normal, surface.origin[section])
    return np.concatenate([np.einsum("ijn,nj->in", axes, normal), offset[None]])
