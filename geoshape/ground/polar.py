"""Outlines round a pole, drawn on the azimuthal equal-area plane of that pole.

On a flat map they are closed along the cut and along the pole, or not at all; on the pole's plane neither is an edge.
"""

from __future__ import annotations

import numpy as np
import shapely

from geoshape.ground.plane import Ellipsoid
from geoshape.rings import FloatArray

FRAME_LAYER, FRAME_NORTH, FRAME_SOUTH, FRAME_LONLAT = 0, 1, 2, 3
"""What coordinates of a feature are: the layer's, metres on the plane of a pole, or, in a projected layer, degrees."""

STEP_DEG = 0.05
"""Longest step in longitude and latitude of an outline on a polar plane: area and length to about 1e-7."""

TOUCHES_DEG = 89.0
"""Latitude beyond which an outline is taken to be closed along the pole."""

_HALF, _WHOLE, _POLE = 180.0, 360.0, 90.0

Ring = FloatArray
"""(n, 2) longitude and latitude of a ring, its first vertex repeated at the end, or a full turn on from it."""


def pole_of(rings: list[Ring]) -> int:
    """Tell which pole rings go round.

    Returns
    -------
    int
        ``FRAME_NORTH`` or ``FRAME_SOUTH``: of the pole that they touch, else of the nearer.
    """
    turning = [ring for ring in rings if _turn(ring)] or rings
    latitude = np.concatenate([ring[:-1, 1] for ring in turning])
    north, south = latitude.max() >= TOUCHES_DEG, latitude.min() <= -TOUCHES_DEG
    if north != south:
        return FRAME_NORTH if north else FRAME_SOUTH
    return FRAME_NORTH if latitude.mean() >= 0.0 else FRAME_SOUTH


def drawn_at_pole(
    parts: list[list[Ring]], frame: int, ellipsoid: Ellipsoid, *, is_subdivided: bool, is_mended: bool
) -> shapely.Geometry:
    """Draw parts on the plane of a pole.

    Parameters
    ----------
    parts : list of list of Ring
        Exterior and holes of each part, with longitudes that run on.
    frame : int
        ``FRAME_NORTH`` or ``FRAME_SOUTH``.
    ellipsoid : Ellipsoid
    is_subdivided : bool
        Whether edges are straight in longitude and latitude.
    is_mended : bool
        Whether slits and edges that parts share are taken out; else faults stay as they are.

    Returns
    -------
    Polygon or MultiPolygon
    """
    drawn = []
    for part in parts:
        rings = [shapely.Polygon(_to_pole(ring, frame, ellipsoid, is_subdivided=is_subdivided)) for ring in part]
        around_other = [bool(_turn(ring)) and pole_of([ring]) != frame for ring in part]
        if not is_mended and not any(around_other):
            drawn.append(shapely.Polygon(rings[0].exterior, [ring.exterior for ring in rings[1:]]))
            continue
        regions = [
            shapely.difference(_everything(frame, ellipsoid), region) if is_outside else region
            for region, is_outside in zip(shapely.make_valid(rings, method="structure"), around_other, strict=True)
        ]
        drawn.append(shapely.difference(regions[0], shapely.union_all(regions[1:])))
    if is_mended:
        return shapely.union_all(drawn)
    polygons = [polygon for piece in drawn for polygon in shapely.get_parts(piece)]
    return polygons[0] if len(polygons) == 1 else shapely.MultiPolygon(polygons)


def _everything(frame: int, ellipsoid: Ellipsoid) -> shapely.Polygon:
    """Draw the whole globe: the other pole is the rim of the plane."""
    latitude = -_POLE if frame == FRAME_NORTH else _POLE
    rim = np.array([[-_HALF, latitude], [_HALF, latitude]])
    return shapely.Polygon(_to_pole(rim, frame, ellipsoid, is_subdivided=True))


def _turn(ring: Ring) -> int:
    return round(float(ring[-1, 0] - ring[0, 0]) / _WHOLE)


def _to_pole(ring: Ring, frame: int, ellipsoid: Ellipsoid, *, is_subdivided: bool) -> FloatArray:
    sign = 1.0 if frame == FRAME_NORTH else -1.0
    points = _subdivided(ring, sign * _POLE, step_deg=STEP_DEG if is_subdivided else _HALF)
    # The same place has the same digits on both sides of a cut, and a cut at 0 or 180 runs exactly along an axis.
    longitude = np.mod(points[:, 0], _WHOLE)
    angle, latitude = np.radians(longitude), np.radians(points[:, 1])
    share, _ = ellipsoid.way_to_pole(np.sin(latitude), np.cos(latitude))
    distance = ellipsoid.authalic_radius_m * np.sqrt(2.0 * np.where(sign * latitude < 0.0, 2.0 - share, share))
    distance[points[:, 1] == sign * _POLE] = 0.0
    x = np.where(longitude % _HALF == 0.0, 0.0, distance * np.sin(angle))
    return np.column_stack((x, -sign * distance * np.cos(angle)))


def _subdivided(ring: Ring, pole: float, step_deg: float) -> Ring:
    step = np.diff(ring, axis=0)
    pieces = np.maximum(np.ceil(np.abs(step).max(axis=1) / step_deg), 1.0)
    # Meridians are straight on the plane, and an edge along the pole has no length there.
    is_point = (ring[:-1, 1] == pole) & (ring[1:, 1] == pole)
    is_turn = np.abs(step[:, 0]) > _HALF
    pieces = np.where(is_turn, np.maximum(pieces, np.ceil(np.abs(step[:, 0]) / STEP_DEG)), pieces)
    pieces = np.where((step[:, 0] == 0.0) | is_point, 1.0, pieces).astype(np.int64)
    edge = np.repeat(np.arange(len(step)), pieces)
    piece = np.arange(len(edge)) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    points = ring[edge] + step[edge] * (piece / pieces[edge])[:, None]
    return np.concatenate((points, points[:1]))
