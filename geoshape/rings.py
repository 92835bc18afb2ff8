"""Rings of many features in flat arrays: coordinates once, offsets for ring, part and feature."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

MIN_RING_VERTICES = 3


@dataclass(frozen=True, eq=False)
class RingBatch:
    """Closed rings of a batch of features, without their closing vertices.

    Rings are never empty; a feature may own no ring. Rings of one part, parts of one feature and features stand
    one behind the other, and the first ring of a part is its exterior.

    Attributes
    ----------
    x, y : (n_vertices,) float64
        Coordinates less the feature's ``origin``.
    ring_start : (n_rings + 1,) int64
        Where each ring begins in ``x`` and ``y``; the last entry is ``n_vertices``.
    ring_part : (n_rings,) int64, not decreasing
        Part that the ring belongs to.
    ring_is_hole : (n_rings,) bool
        False for the exterior ring of a part.
    part_feature : (n_parts,) int64, not decreasing
        Feature that the part belongs to.
    n_features : int
        Number of features, those without rings included.
    origin : (n_features, 2) float64
        What was subtracted from the coordinates of each feature.
    """

    x: FloatArray
    y: FloatArray
    ring_start: IntArray
    ring_part: IntArray
    ring_is_hole: BoolArray
    part_feature: IntArray
    n_features: int
    origin: FloatArray

    @property
    def n_vertices(self) -> int:
        """Number of vertices in all rings."""
        return len(self.x)

    @property
    def n_rings(self) -> int:
        """Number of rings."""
        return len(self.ring_part)

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return len(self.part_feature)

    @cached_property
    def ring_size(self) -> IntArray:
        """(n_rings,) vertices in each ring."""
        return np.diff(self.ring_start)

    @cached_property
    def ring_feature(self) -> IntArray:
        """(n_rings,) feature of each ring."""
        return self.part_feature[self.ring_part]

    @cached_property
    def vertex_ring(self) -> IntArray:
        """(n_vertices,) ring of each vertex."""
        return np.repeat(np.arange(self.n_rings), self.ring_size)

    @cached_property
    def vertex_feature(self) -> IntArray:
        """(n_vertices,) feature of each vertex."""
        return np.repeat(self.ring_feature, self.ring_size)

    @cached_property
    def next_x(self) -> FloatArray:
        """(n_vertices,) x of the vertex that follows in the ring."""
        return self.shift_back(self.x)

    @cached_property
    def next_y(self) -> FloatArray:
        """(n_vertices,) y of the vertex that follows in the ring."""
        return self.shift_back(self.y)

    def shift_back(self, values: FloatArray) -> FloatArray:
        """Give each vertex the value of the vertex that follows it in its ring."""
        following = np.empty_like(values)
        following[:-1] = values[1:]
        following[self.ring_start[1:] - 1] = values[self.ring_start[:-1]]
        return following

    def sum_rings(self, values: FloatArray) -> FloatArray:
        """Sum values of vertices (or of the edges that start there) by ring."""
        if not self.n_rings:
            return np.zeros(0)
        return np.add.reduceat(values, self.ring_start[:-1])

    def sum_ring_values(self, values: FloatArray) -> FloatArray:
        """Sum values of rings by feature; a feature without rings gets 0."""
        total = np.bincount(self.ring_feature, weights=values, minlength=self.n_features)
        return np.asarray(total, dtype=np.float64)

    def sum_features(self, values: FloatArray) -> FloatArray:
        """Sum values of vertices (or of the edges that start there) by feature."""
        return self.sum_ring_values(self.sum_rings(values))

    @cached_property
    def ring_signed_area(self) -> FloatArray:
        """(n_rings,) area by the shoelace formula, positive for a counter-clockwise ring.

        Taken from each ring's first vertex, so that a ring far from the origin keeps its digits.
        """
        x0 = np.repeat(self.x[self.ring_start[:-1]], self.ring_size)
        y0 = np.repeat(self.y[self.ring_start[:-1]], self.ring_size)
        cross = (self.x - x0) * (self.next_y - y0) - (self.next_x - x0) * (self.y - y0)
        return 0.5 * self.sum_rings(cross)

    @cached_property
    def planar_centroid(self) -> FloatArray:
        """(n_features, 2) centroid of the area, holes out, relative to the origin; mean of vertices without area."""
        x0 = np.repeat(self.x[self.ring_start[:-1]], self.ring_size)
        y0 = np.repeat(self.y[self.ring_start[:-1]], self.ring_size)
        ax, ay, bx, by = self.x - x0, self.y - y0, self.next_x - x0, self.next_y - y0
        cross = ax * by - bx * ay
        ring_area = 0.5 * self.sum_rings(cross)
        first_x = self.sum_rings(cross * (ax + bx)) / 6.0 + ring_area * self.x[self.ring_start[:-1]]
        first_y = self.sum_rings(cross * (ay + by)) / 6.0 + ring_area * self.y[self.ring_start[:-1]]
        area = self.sum_ring_values(ring_area)
        count = np.maximum(self.sum_ring_values(self.ring_size.astype(np.float64)), 1.0)
        has_area = area > 0
        safe_area = np.where(has_area, area, 1.0)
        centroid = [
            np.where(has_area, self.sum_ring_values(first) / safe_area, self.sum_features(values) / count)
            for first, values in ((first_x, self.x), (first_y, self.y))
        ]
        return np.column_stack(centroid)

    def moved(self, x: FloatArray, y: FloatArray, origin: FloatArray) -> RingBatch:
        """Return the same rings with other coordinates."""
        return replace(self, x=x, y=y, origin=origin)

    def take_vertices(self, index: IntArray, ring_size: IntArray) -> RingBatch:
        """Return rings of ``ring_size`` vertices gathered by ``index``; no ring may become empty."""
        start = np.concatenate(([0], np.cumsum(ring_size)))
        return replace(self, x=self.x[index], y=self.y[index], ring_start=start)

    def take_rings(self, keep: BoolArray) -> RingBatch:
        """Return the batch without the rings where ``keep`` is false; parts and features stay numbered."""
        if keep.all():
            return self
        vertices = np.repeat(keep, self.ring_size)
        return replace(
            self,
            x=self.x[vertices],
            y=self.y[vertices],
            ring_start=np.concatenate(([0], np.cumsum(self.ring_size[keep]))),
            ring_part=self.ring_part[keep],
            ring_is_hole=self.ring_is_hole[keep],
        )


def oriented(batch: RingBatch) -> RingBatch:
    """Turn exteriors counter-clockwise and holes clockwise; each ring keeps its first vertex.

    Parameters
    ----------
    batch : RingBatch

    Returns
    -------
    RingBatch
    """
    wrong = (batch.ring_signed_area > 0) == batch.ring_is_hole
    if not wrong.any():
        return batch
    index = np.arange(batch.n_vertices)
    first = np.repeat(batch.ring_start[:-1], batch.ring_size)
    mirrored = 2 * first + np.repeat(batch.ring_size, batch.ring_size) - index
    mirrored[batch.ring_start[:-1]] = batch.ring_start[:-1]
    index = np.where(np.repeat(wrong, batch.ring_size), mirrored, index)
    return batch.take_vertices(index, batch.ring_size)


def without_repeats(batch: RingBatch) -> RingBatch:
    """Drop vertices that repeat the one before them, and rings left with fewer than three vertices.

    A part whose exterior goes takes its holes with it.
    """
    repeats = (batch.x == batch.next_x) & (batch.y == batch.next_y)
    if not repeats.any():
        return _without_small(batch)
    first = batch.ring_start[:-1]
    # The later vertex of a repeated pair goes, so that a ring keeps its first; then what still closes the ring.
    keep = np.ones_like(repeats)
    keep[1:] = ~repeats[:-1]
    keep[first] = True
    once = batch.take_vertices(np.flatnonzero(keep), np.add.reduceat(keep.astype(np.int64), first))
    first, last = once.ring_start[:-1], once.ring_start[1:] - 1
    closes = (last > first) & (once.x[last] == once.x[first]) & (once.y[last] == once.y[first])
    keep = np.ones(once.n_vertices, dtype=np.bool_)
    keep[last[closes]] = False
    return _without_small(once.take_vertices(np.flatnonzero(keep), np.add.reduceat(keep.astype(np.int64), first)))


def _without_small(batch: RingBatch) -> RingBatch:
    small = batch.ring_size < MIN_RING_VERTICES
    if not small.any():
        return batch
    lost_part = np.zeros(batch.n_parts, dtype=np.bool_)
    lost_part[batch.ring_part[small & ~batch.ring_is_hole]] = True
    return batch.take_rings(~(small | lost_part[batch.ring_part]))


def recentred(batch: RingBatch, shift: FloatArray) -> RingBatch:
    """Move the local origin of each feature by ``shift``, an (n_features, 2) array."""
    by_vertex = shift[batch.vertex_feature]
    return batch.moved(batch.x - by_vertex[:, 0], batch.y - by_vertex[:, 1], batch.origin + shift)


def outlines(batch: RingBatch) -> RingBatch:
    """Return the exterior ring of each feature's largest part: at most one ring a feature.

    The largest part is the one whose exterior less its holes has the largest area; the first of equals wins.
    """
    ring_net = np.where(batch.ring_is_hole, -1.0, 1.0) * np.abs(batch.ring_signed_area)
    part_area = np.bincount(batch.ring_part, weights=ring_net, minlength=batch.n_parts)
    best = np.full(batch.n_features, -np.inf)
    exterior = np.flatnonzero(~batch.ring_is_hole)
    owner = batch.ring_feature[exterior]
    area = part_area[batch.ring_part[exterior]]
    np.maximum.at(best, owner, area)
    winners = exterior[area == best[owner]]
    _, first = np.unique(batch.ring_feature[winners], return_index=True)
    keep = np.zeros(batch.n_rings, dtype=np.bool_)
    keep[winners[first]] = True
    return batch.take_rings(keep)
