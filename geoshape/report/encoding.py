"""Pack numbers and outlines into text that a page can carry: little-endian arrays in base64."""

from __future__ import annotations

import base64

import numpy as np
import shapely
from numpy.typing import NDArray

from geoshape.rings import FloatArray, IntArray, RingBatch

GRID = 32_767
"""Steps from the middle of an outline to its farthest side: finer than any screen."""

FINEST = 1.0 / 1600.0
"""Tolerance of simplification, relative to what is on the screen at once; half a pixel of a large window."""

COARSEST = 1.0 / 50.0

CLOSED_TRIANGLE = 4
"""Coordinates of the smallest closed ring."""


def packed(values: NDArray[np.generic], kind: str) -> str:
    """Pack an array, row by row, as ``kind``: ``"<f8"``, ``"<f4"``, ``"<i2"`` or ``"<i4"``.

    Examples
    --------
    >>> packed(np.array([1.0, np.nan]), "<f4")
    'AACAPwAAwH8='
    """
    return base64.b64encode(np.ascontiguousarray(values, dtype=kind).tobytes()).decode("ascii")


def packed_complex(values: NDArray[np.complex128]) -> str:
    """Pack complex numbers as pairs of float32."""
    pairs = np.stack((values.real, values.imag), axis=-1)
    return packed(pairs, "<f4")


def packed_rings(batch: RingBatch) -> dict[str, str]:
    """Pack rings: their number by feature, their sizes (holes negative), a middle and a step, and whole steps.

    Parameters
    ----------
    batch : RingBatch

    Returns
    -------
    dict of str to str
        ``rings`` int32 by feature, ``sizes`` int32 by ring, ``frame`` float64 (x, y, step) by feature, ``xy`` int16
        by vertex: a coordinate is the middle plus its whole number times the step.
    """
    rings = np.bincount(batch.ring_feature, minlength=batch.n_features)
    sizes = np.where(batch.ring_is_hole, -batch.ring_size, batch.ring_size)
    low, high = _boxes(batch)
    middle = 0.5 * (low + high)
    step = np.maximum((high - low).max(axis=1) / (2 * GRID), np.finfo(np.float64).tiny)
    owner = batch.vertex_feature
    xy = np.column_stack((batch.x, batch.y)) - middle[owner]
    whole = np.clip(np.rint(xy / step[owner, None]), -GRID, GRID)
    frame = np.column_stack((middle + batch.origin, step))
    return {
        "rings": packed(rings, "<i4"),
        "sizes": packed(sizes, "<i4"),
        "frame": packed(frame, "<f8"),
        "xy": packed(whole, "<i2"),
    }


def _boxes(batch: RingBatch) -> tuple[FloatArray, FloatArray]:
    """Bound each feature; zeros without rings."""
    low, high = np.zeros((batch.n_features, 2)), np.zeros((batch.n_features, 2))
    if batch.n_rings:
        start, owner = _feature_starts(batch)
        for axis, values in enumerate((batch.x, batch.y)):
            low[owner, axis] = np.minimum.reduceat(values, start)
            high[owner, axis] = np.maximum.reduceat(values, start)
    return low, high


def _feature_starts(batch: RingBatch) -> tuple[IntArray, IntArray]:
    first = np.flatnonzero(np.diff(batch.ring_feature, prepend=-1))
    return batch.ring_start[:-1][first], batch.ring_feature[first]


def extents(batch: RingBatch) -> FloatArray:
    """(n_features,) longer side of each bounding box; 0 without rings."""
    low, high = _boxes(batch)
    return np.asarray((high - low).max(axis=1))


def simplified_rings(rings: NDArray[np.object_], tolerance: FloatArray) -> NDArray[np.object_]:
    """Simplify rings, with care only where the quick way leaves too little of one."""
    coarse = np.asarray(shapely.simplify(rings, tolerance, preserve_topology=False))
    lost = shapely.get_num_coordinates(coarse) < CLOSED_TRIANGLE
    if lost.any():
        coarse[lost] = shapely.simplify(rings[lost], tolerance[lost], preserve_topology=True)
    return coarse


def simplified(batch: RingBatch, screen: float, budget: int) -> RingBatch:
    """Simplify outlines to what a screen shows, and further until they keep to a budget.

    Parameters
    ----------
    batch : RingBatch
    screen : float
        Extent that fills the screen at first; infinite where each shape fills it alone.
    budget : int
        Vertices to stay below, as far as the coarsest tolerance allows.

    Returns
    -------
    RingBatch
        Rings in the same order, each with at least three vertices. A shape is never coarser than a fiftieth of its
        own extent, nor than a 1600th of the screen's.
    """
    if not batch.n_rings:
        return batch
    own = extents(batch)[batch.ring_feature]
    rings = shapely.linearrings(np.column_stack((batch.x, batch.y)), indices=batch.vertex_ring)
    share = FINEST
    while True:
        tolerance = np.minimum(share * own, max(FINEST * screen, share * screen / 8.0))
        coarse = simplified_rings(np.asarray(rings), tolerance)
        if shapely.get_num_coordinates(coarse).sum() <= budget or share >= COARSEST:
            break
        share *= 2.0
    coordinates, owner = shapely.get_coordinates(coarse, return_index=True)
    closing = np.append(np.diff(owner) > 0, True)
    coordinates, owner = coordinates[~closing], owner[~closing]
    size = np.bincount(owner, minlength=batch.n_rings)
    start = np.concatenate(([0], np.cumsum(size)))
    return RingBatch(
        x=coordinates[:, 0],
        y=coordinates[:, 1],
        ring_start=start,
        ring_part=batch.ring_part,
        ring_is_hole=batch.ring_is_hole,
        part_feature=batch.part_feature,
        n_features=batch.n_features,
        origin=batch.origin,
    )
