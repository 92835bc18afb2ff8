"""Seams of the globe: outlines that cross the antimeridian, go round a pole, or were cut at either.

Coordinates are longitude and latitude in degrees. Only features wider than 180 degrees are touched: any outline that
jumps at the antimeridian, and any that goes round a pole, is as wide as that when taken literally. What goes round a
pole is drawn on that pole's plane by `geoshape.ground.polar`.
"""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray

from geoshape.ground.plane import Ellipsoid
from geoshape.ground.polar import FRAME_LAYER, FRAME_NORTH, FRAME_SOUTH, Ring, drawn_at_pole, pole_of
from geoshape.rings import BoolArray, IntArray

__all__ = ["FRAME_LAYER", "FRAME_NORTH", "FRAME_SOUTH", "rejoin", "unwrap"]

ObjectArray = NDArray[np.object_]

SNAP_DEG = 2e-5
"""How far from the antimeridian, about two metres, outlines are stored that were cut at it."""

MAX_GAP_DEG = 0.01
"""The same in degrees of longitude, next to the pole."""

FULL_TURN_DEG = 1e-9
"""How much parts together may lack of a full turn and still go round the world."""

NEAR_POLE_DEG = 89.0
"""Latitude beyond which an edge of a full turn, with nothing of its outline beyond, only closes it on a flat map."""

_HALF, _WHOLE = 180.0, 360.0


def unwrap(
    geometries: ObjectArray, ellipsoid: Ellipsoid, *, is_subdivided: bool
) -> tuple[ObjectArray, IntArray, BoolArray]:
    """Make outlines whole that jump at the antimeridian or go round a pole.

    Parameters
    ----------
    geometries : (n,) object of Polygon, MultiPolygon or None
        Longitude and latitude in degrees; latitudes within 90.
    ellipsoid : Ellipsoid
        For the polar planes.
    is_subdivided : bool
        Whether edges are straight in longitude and latitude, and so curved on a polar plane.

    Returns
    -------
    geometries : (n,) object
        Longitudes run on past 180 where an outline crosses the antimeridian.
    frames : (n,) int64
        ``FRAME_LAYER``, or ``FRAME_NORTH`` and ``FRAME_SOUTH`` for outlines round a pole: their coordinates are now
        metres on the azimuthal equal-area plane of that pole, x to 90 degrees east, y to 180 degrees in the north and
        to 0 in the south.
    is_cut : (n,) bool
        Features with several parts that meet the antimeridian: `rejoin` makes them one.

    Notes
    -----
    Longitudes follow each other by the shortest difference, ring by ring, so that an edge from 170 to -170 crosses the
    antimeridian. A longer edge can be drawn by a vertex at least every 180 degrees. One edge is taken as it stands: a
    full turn along a parallel between two edges along the meridian where the map was cut, as in a box from -180 to 180.
    Parts or rings that together cover all longitudes go round a pole too; of the two poles it is the one the outline
    touches, else the nearer.
    """
    bounds = shapely.bounds(geometries)
    with np.errstate(invalid="ignore"):
        wide = np.flatnonzero(bounds[:, 2] - bounds[:, 0] > _HALF)
    frames = np.zeros(len(geometries), dtype=np.int64)
    is_cut = np.zeros(len(geometries), dtype=np.bool_)
    if not len(wide):
        return geometries, frames, is_cut
    whole = geometries.copy()
    for row in wide.tolist():
        whole[row], frames[row], is_cut[row] = _unwrap_one(geometries[row], ellipsoid, is_subdivided=is_subdivided)
    return whole, frames, is_cut


def rejoin(geometries: ObjectArray, is_cut: BoolArray) -> ObjectArray:
    """Unite the parts that a seam had cut; what was cut is no shore.

    Parameters
    ----------
    geometries : (n,) object of Polygon, MultiPolygon or None
        Where a part is invalid by itself, the feature is left to be repaired.
    is_cut : (n,) bool
        From `unwrap`.

    Returns
    -------
    (n,) object
    """
    rows = np.flatnonzero(is_cut & ~shapely.is_missing(geometries))
    if not len(rows):
        return geometries
    joined = geometries.copy()
    for row in rows.tolist():
        parts = shapely.get_parts(geometries[row])
        if shapely.is_valid(parts).all():
            joined[row] = shapely.union_all(parts)
    return joined


def _unwrap_one(
    geometry: shapely.Geometry, ellipsoid: Ellipsoid, *, is_subdivided: bool
) -> tuple[shapely.Geometry, int, bool]:
    seam = _seam(geometry)
    parts = [[_snapped(ring, seam) for ring in _rings(part)] for part in shapely.get_parts(geometry)]
    touching = 0 if seam is None else sum(bool(np.isin(part[0][:, 0], (seam, seam + _WHOLE)).any()) for part in parts)
    unwrapped = [[_unwrap_ring(ring) for ring in part] for part in parts]
    if _go_round(unwrapped):
        frame = pole_of([ring for part in unwrapped for ring in part])
        # Parts valid on the flat map are valid on the globe: there only slits and shared edges are taken out.
        is_mended = bool(shapely.is_valid(shapely.get_parts(_assembled(parts))).all())
        polar = drawn_at_pole(unwrapped, frame, ellipsoid, is_subdivided=is_subdivided, is_mended=is_mended)
        return polar, frame, False
    anchor = seam + _WHOLE if seam is not None and touching > 1 else _middle(_widest(unwrapped)[0])
    return _assembled(_in_one_window(unwrapped, anchor)), FRAME_LAYER, touching > 1


def _seam(geometry: shapely.Geometry) -> float | None:
    """Find the western longitude of the cut of a feature that reaches from one side of it to the other."""
    west, _, east, _ = shapely.bounds(geometry).tolist()
    seam = float(np.round(west))
    if abs(west - seam) <= MAX_GAP_DEG and abs(east - seam - _WHOLE) <= MAX_GAP_DEG:
        points = shapely.get_coordinates(geometry)
        if is_near(points, seam).any() and is_near(points, seam + _WHOLE).any():
            return seam
    return float(west) if east - west == _WHOLE else None


def is_near(points: Ring, longitude_deg: float) -> BoolArray:
    """Tell which points lie within two metres of a meridian."""
    # Near the pole a metre is many degrees.
    off = np.minimum(np.abs(points[:, 0] - longitude_deg), MAX_GAP_DEG)
    return np.asarray(off * np.cos(np.radians(points[:, 1])) <= SNAP_DEG) & (off < MAX_GAP_DEG)


def _rings(part: shapely.Geometry) -> list[Ring]:
    return [shapely.get_coordinates(ring) for ring in shapely.get_rings(part)]


def _snapped(ring: Ring, seam: float | None) -> Ring:
    """Put vertices onto the cut that were cut there and stored a little beside it."""
    if seam is None:
        return ring
    longitude = ring[:, 0].copy()
    for side in (seam, seam + _WHOLE):
        longitude[is_near(ring, side)] = side
    return np.column_stack((longitude, ring[:, 1]))


def _unwrap_ring(ring: Ring) -> Ring:
    step = np.diff(ring[:, 0])
    turns = -np.round(step / _WHOLE)
    is_turn = (np.abs(step) == _WHOLE) & (ring[:-1, 1] == ring[1:, 1])
    if is_turn.any():
        # Where the neighbours run along the cut, the edge is one side of a box round the world.
        at_cut = step == 0.0
        height = np.abs(ring[:-1, 1])
        closes = (height >= NEAR_POLE_DEG) & (height == height.max())
        is_box = is_turn & np.roll(at_cut, 1) & np.roll(at_cut, -1) & ~closes
        if _touches_both_poles(ring):
            is_box |= is_turn & (ring[:-1, 1] < 0.0)
        turns[is_box] = 0.0
    # Whole turns added to what was read: a vertex on the cut stays on it to the last digit.
    longitude = ring[:, 0] + _WHOLE * np.concatenate(([0.0], np.cumsum(turns)))
    return np.column_stack((longitude, ring[:, 1]))


def _touches_both_poles(ring: Ring) -> bool:
    return bool(ring[:, 1].min() <= -NEAR_POLE_DEG and ring[:, 1].max() >= NEAR_POLE_DEG)


def _go_round(parts: list[list[Ring]]) -> bool:
    """Tell whether a ring makes a full turn, or parts together cover all longitudes."""
    if any(abs(ring[-1, 0] - ring[0, 0]) > _HALF for part in parts for ring in part):
        return True
    west = np.array([part[0][:, 0].min() for part in parts])
    east = np.array([part[0][:, 0].max() for part in parts])
    start = np.mod(west, _WHOLE)
    order = np.argsort(start)
    reach = np.maximum.accumulate((start + east - west)[order]) + FULL_TURN_DEG
    follows = np.append(start[order][1:], start.min() + _WHOLE)
    return bool((follows <= reach).all())


def _middle(ring: Ring) -> float:
    return float(ring[:, 0].min() + ring[:, 0].max()) / 2.0


def _widest(parts: list[list[Ring]]) -> list[Ring]:
    return max(parts, key=lambda part: float(np.ptp(part[0][:, 0])))


def _in_one_window(parts: list[list[Ring]], anchor: float) -> list[list[Ring]]:
    """Move parts by whole turns next to a longitude, and holes into their exteriors."""
    moved = []
    for exterior, *holes in parts:
        shifted = _turned(exterior, anchor)
        moved.append([shifted, *(_turned(hole, _middle(shifted)) for hole in holes)])
    return moved


def _turned(ring: Ring, near: float) -> Ring:
    turns = np.round((near - _middle(ring)) / _WHOLE)
    return np.asarray(ring + np.array([_WHOLE * turns, 0.0]))


def _assembled(parts: list[list[Ring]]) -> shapely.Geometry:
    polygons = [shapely.Polygon(exterior, holes) for exterior, *holes in parts]
    return polygons[0] if len(polygons) == 1 else shapely.MultiPolygon(polygons)
