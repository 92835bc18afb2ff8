"""Very wide features of projected layers: on a map of the world they may be cut where the map ends.

They are taken back to longitude and latitude, where seams are found and joined as in any layer of degrees.
"""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray

from geoshape.ground import seams
from geoshape.ground.mapping import Globe
from geoshape.ground.polar import FRAME_LAYER, FRAME_LONLAT
from geoshape.rings import BoolArray, FloatArray, IntArray

ObjectArray = NDArray[np.object_]

WIDE_M = 5e6
"""Extent from which a feature of a projected layer is taken back to longitude and latitude."""

STEP_M, MAX_PIECES = 10_000.0, 50_000
"""Longest piece of an edge that is straight on the map, and drawn as straight in longitude and latitude; longer where
an outline would have too many."""

INWARDS = 1.0 - 1e-8
"""By what coordinates at the edge of a map of the world, 0.2 m at most, are drawn inwards."""

_HALF = 180.0


def unwrap_wide(
    geometries: ObjectArray, globe: Globe, unit_m: float, *, is_subdivided: bool
) -> tuple[ObjectArray, IntArray, BoolArray]:
    """Make features whole that the edge of a projected map tears.

    Parameters
    ----------
    geometries : (n,) object of Polygon, MultiPolygon or None
        In the layer's own, projected coordinates.
    globe : Globe
    unit_m : float
        Metres in a unit of the coordinates.
    is_subdivided : bool
        Whether edges are straight in the layer's coordinates.

    Returns
    -------
    geometries : (n,) object
        Features wider than `WIDE_M` in longitude and latitude, or on a polar plane; the others as they are.
    frames : (n,) int64
    is_cut : (n,) bool
        See `seams.unwrap`.
    """
    bounds = unit_m * shapely.bounds(geometries)
    frames = np.full(len(geometries), FRAME_LAYER)
    is_cut = np.zeros(len(geometries), dtype=np.bool_)
    with np.errstate(invalid="ignore"):
        wide = np.flatnonzero(np.maximum(bounds[:, 2] - bounds[:, 0], bounds[:, 3] - bounds[:, 1]) > WIDE_M)
    if not len(wide):
        return geometries, frames, is_cut
    whole = geometries.copy()
    for row in wide.tolist():
        drawn = _in_lonlat(geometries[row], globe, unit_m, is_subdivided=is_subdivided)
        if drawn is None:
            continue
        found, frame, _ = seams.unwrap(np.array([drawn], dtype=object), globe.ellipsoid, is_subdivided=is_subdivided)
        whole[row] = found[0]
        frames[row] = frame[0] if frame[0] != FRAME_LAYER else FRAME_LONLAT
        # The map may be cut anywhere: parts that share an edge of longitude are one.
        is_cut[row] = frames[row] == FRAME_LONLAT and shapely.get_num_geometries(found[0]) > 1
    return whole, frames, is_cut


def _in_lonlat(shape: shapely.Geometry, globe: Globe, unit_m: float, *, is_subdivided: bool) -> shapely.Geometry | None:
    """Draw a feature in degrees; None where a vertex has no place on the globe."""
    step = max(STEP_M / unit_m, shapely.length(shape) / MAX_PIECES) if is_subdivided else np.inf
    drawn = []
    for part in shapely.get_parts(shape):
        rings = [_ring_in_lonlat(shapely.get_coordinates(ring), globe, step) for ring in shapely.get_rings(part)]
        if not all(np.isfinite(ring).all() for ring in rings):
            return None
        drawn.append(shapely.Polygon(rings[0], rings[1:]))
    return drawn[0] if len(drawn) == 1 else shapely.MultiPolygon(drawn)


def _ring_in_lonlat(ring: FloatArray, globe: Globe, step: float) -> FloatArray:
    corners = _lonlat(ring, globe)
    if not np.isfinite(corners).all():
        return corners
    edge = np.diff(ring, axis=0)
    pieces = np.maximum(np.ceil(np.hypot(edge[:, 0], edge[:, 1]) / step), 1.0)
    # An edge along the cut is straight on the map, but on the globe it is the meridian.
    on_cut = seams.is_near(corners, _HALF) | seams.is_near(corners, -_HALF)
    pieces[on_cut[:-1] & on_cut[1:]] = 1.0
    owner = np.repeat(np.arange(len(edge)), pieces.astype(np.int64))
    piece = np.arange(len(owner)) - np.flatnonzero(np.diff(owner, prepend=-1))[owner]
    inner = np.flatnonzero(piece)
    lonlat = corners[owner]
    share = (piece[inner] / pieces[owner[inner]])[:, None]
    inserted = _lonlat(ring[owner[inner]] + share * edge[owner[inner]], globe)
    lonlat[inner] = inserted
    # Pieces of edges that leave the map are left out.
    kept = (piece == 0) | np.isfinite(lonlat).all(axis=1)
    return np.concatenate((lonlat[kept], lonlat[:1]))


def _lonlat(points: FloatArray, globe: Globe) -> FloatArray:
    x, y = points.T
    in_layer = np.full(len(x), FRAME_LAYER)
    lonlat = np.column_stack(globe.degrees(x, y, in_layer))
    off = ~np.isfinite(lonlat).all(axis=1)
    if off.any():
        # Rounding alone puts vertices off the edge of a map.
        lonlat[off] = np.column_stack(globe.degrees(INWARDS * x[off], INWARDS * y[off], in_layer[off]))
    return lonlat
