"""Geometries from WKB or shapely to rings: what can be measured, what must be repaired, and why a row cannot be."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray

from geoshape.rings import FloatArray, IntArray, RingBatch, oriented, recentred, without_repeats

ObjectArray = NDArray[np.object_]

POLYGON, MULTIPOLYGON, COLLECTION = 3, 6, 7


def ring_batch(geometries: ObjectArray, *, local_origin: bool = True) -> RingBatch:
    """Lay the rings of polygons out in flat arrays.

    Parameters
    ----------
    geometries : (n,) object of Polygon, MultiPolygon or None
        None and empty geometries give a feature without rings.
    local_origin : bool
        Subtract the middle of each feature's bounding box, so that powers of coordinates keep their digits.

    Returns
    -------
    RingBatch
        Exteriors counter-clockwise, holes clockwise; no closing or repeated vertices, no ring of fewer than three.

    Examples
    --------
    >>> batch = ring_batch(shapely.box([0, 10], 0, [2, 11], 2))
    >>> batch.n_features, batch.n_vertices, batch.origin.tolist()
    (2, 8, [[1.0, 1.0], [10.5, 1.0]])
    """
    geometries = np.atleast_1d(np.asarray(geometries, dtype=object))
    parts, part_feature = shapely.get_parts(geometries, return_index=True)
    keep = ~shapely.is_empty(parts)
    parts, part_feature = parts[keep], part_feature[keep].astype(np.int64)
    holes = shapely.get_num_interior_rings(parts).astype(np.int64)
    ring_part = np.repeat(np.arange(len(parts)), holes + 1)
    first_ring = np.cumsum(holes + 1) - (holes + 1)
    ring_is_hole = np.ones(len(ring_part), dtype=np.bool_)
    ring_is_hole[first_ring] = False
    closed_size = _closed_ring_sizes(parts, holes, ring_part)
    coordinates = shapely.get_coordinates(parts)
    closed_end = np.cumsum(closed_size)
    is_vertex = np.ones(len(coordinates), dtype=np.bool_)
    is_vertex[closed_end - 1] = False
    batch = RingBatch(
        x=coordinates[is_vertex, 0],
        y=coordinates[is_vertex, 1],
        ring_start=np.concatenate(([0], np.cumsum(closed_size - 1))).astype(np.int64),
        ring_part=ring_part,
        ring_is_hole=ring_is_hole,
        part_feature=part_feature,
        n_features=len(geometries),
        origin=np.zeros((len(geometries), 2)),
    )
    if local_origin:
        batch = recentred(batch, _box_middle(batch))
    return oriented(without_repeats(batch))


def _closed_ring_sizes(parts: ObjectArray, holes: IntArray, ring_part: IntArray) -> IntArray:
    """Count the coordinates of each ring; only polygons with holes need their rings taken out."""
    size = np.zeros(len(ring_part), dtype=np.int64)
    has_holes = holes > 0
    ring_has_holes = has_holes[ring_part]
    size[~ring_has_holes] = shapely.get_num_coordinates(parts[~has_holes])
    size[ring_has_holes] = shapely.get_num_coordinates(shapely.get_rings(parts[has_holes]))
    return size


def _box_middle(batch: RingBatch) -> FloatArray:
    middle = np.zeros((batch.n_features, 2))
    if not batch.n_rings:
        return middle
    first = np.flatnonzero(np.diff(batch.ring_feature, prepend=-1))
    start = batch.ring_start[:-1][first]
    owner = batch.ring_feature[first]
    for axis, values in enumerate((batch.x, batch.y)):
        middle[owner, axis] = 0.5 * (np.minimum.reduceat(values, start) + np.maximum.reduceat(values, start))
    return middle
