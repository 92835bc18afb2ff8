"""Convex hulls of many features at once.

Each ring's points farthest in eight directions are on its hull. The hull vertices of a simple ring stand in the ring's
own order, so what may still lie on the hull between two of them is what stands between them and outside their chord.
Sorted along the chord, it is thinned by dropping all points that do not stick out between their neighbours, until none
is left: every one dropped lies within a segment of two others.
"""

from __future__ import annotations

import numpy as np

from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch

HULL_TOLERANCE = 1e-14
"""Distance outside a chord, relative to the ring's extent, that is taken for rounding."""

CHORD_END = 1e-9
"""Share of a chord at its ends that no point but the end itself is sorted into."""


def convex_hulls(batch: RingBatch) -> RingBatch:
    """Take the convex hull of each feature.

    Parameters
    ----------
    batch : RingBatch
        Simple exteriors, counter-clockwise; holes do not matter.

    Returns
    -------
    RingBatch
        At most one ring a feature, counter-clockwise; it may hold points in the middle of a hull edge. Features
        without rings have none.
    """
    exteriors = batch.take_rings(~batch.ring_is_hole)
    if not exteriors.n_rings:
        return exteriors
    by_ring = _ring_hulls(exteriors)
    rings_per_feature = np.bincount(by_ring.ring_feature, minlength=by_ring.n_features)
    if rings_per_feature.max() > 1:
        by_ring = _merged(by_ring, rings_per_feature)
    return by_ring


def _ring_hulls(rings: RingBatch) -> RingBatch:
    rings = _without_reflex(rings)
    index, is_extreme = _outside_of_extremes(rings)
    ring = rings.vertex_ring[index]
    x, y = rings.x[index], rings.y[index]
    tolerance = HULL_TOLERANCE * _ring_extent(rings)
    while True:
        # Points stand in the order of their chords, along each: what does not stick out between its neighbours goes.
        after = _next_in_group(np.arange(len(index)), ring)
        before = np.empty_like(after)
        before[after] = np.arange(len(index))
        ex, ey = x[after] - x, y[after] - y
        turn = ex[before] * ey - ey[before] * ex
        keep = is_extreme | (turn > tolerance[ring] * np.sqrt(ex * ex + ey * ey))
        if keep.all():
            return rings.take_vertices(index, np.bincount(ring, minlength=rings.n_rings))
        index, ring, x, y, is_extreme = index[keep], ring[keep], x[keep], y[keep], is_extreme[keep]


def _without_reflex(rings: RingBatch) -> RingBatch:
    """Drop the vertices where a ring turns inwards: in a simple ring none of them is on the hull."""
    dx, dy = rings.next_x - rings.x, rings.next_y - rings.y
    before_x, before_y = np.roll(dx, 1), np.roll(dy, 1)
    first, last = rings.ring_start[:-1], rings.ring_start[1:] - 1
    before_x[first], before_y[first] = dx[last], dy[last]
    index = np.flatnonzero(before_x * dy >= before_y * dx)
    return rings.take_vertices(index, np.bincount(rings.vertex_ring[index], minlength=rings.n_rings))


def _ring_extent(rings: RingBatch) -> FloatArray:
    first = rings.ring_start[:-1]
    width = np.maximum.reduceat(rings.x, first) - np.minimum.reduceat(rings.x, first)
    height = np.maximum.reduceat(rings.y, first) - np.minimum.reduceat(rings.y, first)
    return np.asarray(width + height)


def _by_chord(
    x: FloatArray, y: FloatArray, chord: tuple[FloatArray, FloatArray, FloatArray, FloatArray], run: IntArray
) -> tuple[FloatArray, FloatArray]:
    """Measure how far points lie to the right of the chord of their run (outside, for a counter-clockwise hull).

    And the share of the chord that lies before them, within what keeps them between its ends.
    """
    start_x, start_y, chord_x, chord_y = chord
    square = chord_x * chord_x + chord_y * chord_y
    per_square = np.divide(1.0, square, out=np.zeros_like(square), where=square > 0)
    unit_x, unit_y = np.repeat(chord_x * per_square, run), np.repeat(chord_y * per_square, run)
    dx, dy = x - np.repeat(start_x, run), y - np.repeat(start_y, run)
    return dx * unit_y - dy * unit_x, np.clip(dx * unit_x + dy * unit_y, CHORD_END, 1.0 - CHORD_END)


def _next_in_group(item: IntArray, group: IntArray) -> IntArray:
    """Give for each item the next of its group, cyclic; groups are contiguous."""
    first = np.flatnonzero(np.diff(group, prepend=group[0] - 1))
    following = np.roll(item, -1)
    following[np.append(first[1:], len(item)) - 1] = item[first]
    return following


def _extremes(rings: RingBatch) -> IntArray:
    """Find a vertex farthest in each of eight directions for each ring, sorted in ring order."""
    first = rings.ring_start[:-1]
    is_extreme = np.zeros(rings.n_vertices, dtype=np.bool_)
    for value in (rings.x, rings.y, rings.x + rings.y, rings.x - rings.y):
        for extreme in (np.maximum, np.minimum):
            at = np.flatnonzero(value == np.repeat(extreme.reduceat(value, first), rings.ring_size))
            owner = rings.vertex_ring[at]
            is_extreme[at[np.flatnonzero(np.diff(owner, prepend=-1))]] = True
    return np.flatnonzero(is_extreme)


def _outside_of_extremes(rings: RingBatch) -> tuple[IntArray, BoolArray]:
    """Keep the extremes and what lies outside their chords, in the order of the chords and along each."""
    extremes = _extremes(rings)
    owner = rings.vertex_ring[extremes]
    following = _next_in_group(extremes, owner)
    chord_x, chord_y = rings.x[following] - rings.x[extremes], rings.y[following] - rings.y[extremes]
    # A run goes from one extreme to the next; what stands before a ring's first extreme belongs to its last.
    is_start = np.zeros(rings.n_vertices, dtype=np.bool_)
    is_start[extremes] = True
    is_start[rings.ring_start[:-1]] = True
    run_start = np.flatnonzero(is_start)
    extreme_before = np.searchsorted(extremes, run_start, side="right") - 1
    last_of_ring = np.searchsorted(owner, np.arange(rings.n_rings), side="right") - 1
    run_ring = rings.vertex_ring[run_start]
    is_wrapped = (extreme_before < 0) | (owner[np.maximum(extreme_before, 0)] != run_ring)
    extreme_before = np.where(is_wrapped, last_of_ring[run_ring], extreme_before)
    run = np.diff(np.append(run_start, rings.n_vertices))
    chord = (
        rings.x[extremes][extreme_before],
        rings.y[extremes][extreme_before],
        chord_x[extreme_before],
        chord_y[extreme_before],
    )
    outside, along = _by_chord(rings.x, rings.y, chord, run)
    keep = outside > 0
    keep[extremes] = True
    along[extremes] = 0.0
    index = np.flatnonzero(keep)
    # Neighbouring extremes are half a right angle apart, so what lies outside their chord lies beside it.
    order = np.argsort(np.repeat(extreme_before, run)[index] + along[index])
    index = index[order]
    is_extreme = np.zeros(rings.n_vertices, dtype=np.bool_)
    is_extreme[extremes] = True
    return index, is_extreme[index]


def point_hulls(batch: RingBatch) -> RingBatch:
    """Take the convex hull of each feature's vertices, whatever way its rings go.

    Slower than `convex_hulls`, and right where rings cross themselves.

    Parameters
    ----------
    batch : RingBatch

    Returns
    -------
    RingBatch
        At most one ring a feature, counter-clockwise.
    """
    exteriors = batch.take_rings(~batch.ring_is_hole)
    index = _point_hulls(exteriors.x, exteriors.y, exteriors.vertex_feature)
    return _one_ring_each(exteriors, index)


def _merged(hulls: RingBatch, rings_per_feature: IntArray) -> RingBatch:
    """Replace the hulls of the parts of a feature by the hull of them all."""
    several = rings_per_feature[hulls.vertex_feature] > 1
    index = np.flatnonzero(several)
    merged = index[_point_hulls(hulls.x[index], hulls.y[index], hulls.vertex_feature[index])]
    return _one_ring_each(hulls, np.concatenate((np.flatnonzero(~several), merged)))


def _one_ring_each(batch: RingBatch, index: IntArray) -> RingBatch:
    """Make one ring of each feature's chosen vertices, in the order given."""
    feature = batch.vertex_feature[index]
    index = index[np.argsort(feature, kind="stable")]
    size = np.bincount(feature, minlength=batch.n_features)
    owner = np.flatnonzero(size)
    return RingBatch(
        x=batch.x[index],
        y=batch.y[index],
        ring_start=np.concatenate(([0], np.cumsum(size[owner]))),
        ring_part=np.arange(len(owner)),
        ring_is_hole=np.zeros(len(owner), dtype=np.bool_),
        part_feature=owner,
        n_features=batch.n_features,
        origin=batch.origin,
    )


def _point_hulls(x: FloatArray, y: FloatArray, group: IntArray) -> IntArray:
    """Find the hulls of groups of points: indices, group by group, counter-clockwise."""
    if not len(x):
        return np.zeros(0, dtype=np.int64)
    order = np.lexsort((y, x, group))
    # Parts may share a corner, and equal points would each look like no turn at the other.
    again = (x[order[1:]] == x[order[:-1]]) & (y[order[1:]] == y[order[:-1]]) & (group[order[1:]] == group[order[:-1]])
    order = order[np.append(True, ~again)]
    lower = _chain(x, y, group, order)
    upper = _chain(x, y, group, order[::-1])
    # Each chain ends where the other begins.
    lower = lower[np.flatnonzero(np.diff(group[lower], append=-1) == 0)]
    upper = upper[np.flatnonzero(np.diff(group[upper], append=-1) == 0)]
    chains = np.concatenate((lower, upper))
    return chains[np.argsort(group[chains], kind="stable")]


def _chain(x: FloatArray, y: FloatArray, group: IntArray, order: IntArray) -> IntArray:
    """Drop, until none is left, the points that do not turn left between their neighbours in the sorted chain."""
    while True:
        before, after = np.roll(order, 1), np.roll(order, -1)
        inner = (group[before] == group[order]) & (group[after] == group[order])
        inner[[0, -1]] = False
        turn = (x[order] - x[before]) * (y[after] - y[before]) - (y[order] - y[before]) * (x[after] - x[before])
        drop = inner & (turn <= 0)
        if not drop.any():
            return order
        order = order[~drop]
