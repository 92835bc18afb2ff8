"""Seams of the globe: outlines that cross the antimeridian, enclose a pole, or were cut at either.

Coordinates are longitude and latitude in degrees. Only features wider than 180 degrees are touched: any outline that
jumps at the antimeridian, and any that goes round a pole, is as wide as that when taken literally.
"""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray

from geoshape.ground.plane import Centres, Ellipsoid, project
from geoshape.rings import BoolArray, FloatArray, IntArray

ObjectArray = NDArray[np.object_]

FRAME_LAYER, FRAME_NORTH, FRAME_SOUTH = 0, 1, 2

POLAR_STEP_DEG = 0.05
"""Longest step in longitude and latitude of an outline on a polar plane: area and length to about 1e-7."""

SEAM_TOLERANCE_DEG = 1e-4
"""How far from the antimeridian, and from each other, the two ways of a detour to the pole may be."""

CLOSING_LATITUDE_DEG = 89.0
"""From here on an edge round the world, with nothing of its outline beyond, closes the outline at the pole."""

SNAP_DEG = 2e-5
"""How far from the antimeridian, about two metres, outlines are stored that were cut at it."""

_HALF, _WHOLE, _POLE = 180.0, 360.0, 90.0


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
        metres on the azimuthal equal-area plane of that pole, x to 90 degrees east, y away from the meridian of 0.
    is_cut : (n,) bool
        Features with several parts that meet the antimeridian: `rejoin` makes them one.

    Notes
    -----
    Longitudes follow each other by the shortest difference, ring by ring. An edge of exactly 360 degrees between
    -180 and 180 is taken for an edge round the world along its parallel, except along a pole, where it has no length.
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


Ring = FloatArray
"""(n, 2) longitude and latitude of a ring, its first vertex repeated at the end."""


def _unwrap_one(
    geometry: shapely.Geometry, ellipsoid: Ellipsoid, *, is_subdivided: bool
) -> tuple[shapely.Geometry, int, bool]:
    parts = [[_snapped(ring) for ring in _rings(part)] for part in shapely.get_parts(geometry)]
    touching = sum(bool(np.any(np.abs(part[0][:, 0]) == _HALF)) for part in parts)
    unwrapped = [[_unwrap_ring(ring) for ring in part] for part in parts]
    turns = [round((ring[-1, 0] - ring[0, 0]) / _WHOLE) for part in unwrapped for ring in part]
    if any(turns):
        latitudes = np.concatenate(
            [ring[:, 1] for ring, turn in zip((r for p in unwrapped for r in p), turns, strict=True) if turn]
        )
        frame = FRAME_NORTH if latitudes.mean() > 0 else FRAME_SOUTH
        polar = [[_to_pole(ring, frame, ellipsoid, is_subdivided=is_subdivided) for ring in part] for part in unwrapped]
        return _assembled(polar), frame, touching > 1
    return _assembled(_in_one_window(unwrapped)), FRAME_LAYER, touching > 1


def _rings(part: shapely.Geometry) -> list[Ring]:
    return [shapely.get_coordinates(ring) for ring in shapely.get_rings(part)]


def _snapped(ring: Ring) -> Ring:
    """Put vertices onto the antimeridian that were cut there and stored a little beside it."""
    longitude = ring[:, 0]
    near = np.abs(np.abs(longitude) - _HALF) <= SNAP_DEG
    return np.column_stack((np.where(near, np.copysign(_HALF, longitude), longitude), ring[:, 1]))


def _unwrap_ring(ring: Ring) -> Ring:
    ring = _without_turns_at_pole(ring)
    step = np.diff(ring[:, 0])
    shortest = step - _WHOLE * np.round(step / _WHOLE)
    at_seam = (np.abs(ring[:-1, 0]) == _HALF) & (np.abs(ring[1:, 0]) == _HALF)
    round_the_world = at_seam & (np.abs(step) == _WHOLE) & (ring[:-1, 1] == ring[1:, 1])
    # Outlines round a pole are often closed a little short of it: such an edge is the pole, not a shore.
    latitude = np.abs(ring[:-1, 1])
    round_the_world &= (latitude < CLOSING_LATITUDE_DEG) | (latitude < latitude.max())
    shortest[round_the_world] = step[round_the_world]
    longitude = np.concatenate((ring[:1, 0], ring[0, 0] + np.cumsum(shortest)))
    return np.column_stack((longitude, ring[:, 1]))


def _without_turns_at_pole(ring: Ring) -> Ring:
    """Give vertices at a pole, which have any longitude, that of the vertex before them."""
    at_pole = np.abs(ring[:, 1]) == _POLE
    if not at_pole.any() or at_pole.all():
        return ring
    before = np.maximum.accumulate(np.where(at_pole, -1, np.arange(len(ring))))
    before = np.where(before < 0, int(np.argmin(at_pole)), before)
    return np.column_stack((ring[before, 0], ring[:, 1]))


def _middle(ring: Ring) -> float:
    return float(ring[:, 0].min() + ring[:, 0].max()) / 2.0


def _in_one_window(parts: list[list[Ring]]) -> list[list[Ring]]:
    """Move parts by whole turns next to the widest, and holes into their exteriors."""
    widest = max(parts, key=lambda part: float(np.ptp(part[0][:, 0])))
    anchor = _middle(widest[0])
    moved = []
    for exterior, *holes in parts:
        shifted = _turned(exterior, anchor)
        moved.append([shifted, *(_turned(hole, _middle(shifted)) for hole in holes)])
    return moved


def _turned(ring: Ring, near: float) -> Ring:
    turns = np.round((near - _middle(ring)) / _WHOLE)
    return np.asarray(ring + np.array([_WHOLE * turns, 0.0]))


def _to_pole(ring: Ring, frame: int, ellipsoid: Ellipsoid, *, is_subdivided: bool) -> Ring:
    sign = 1.0 if frame == FRAME_NORTH else -1.0
    ring = _without_pole_detour(ring, sign * _POLE)
    if is_subdivided:
        ring = _subdivided(ring)
    radians = np.radians(ring)
    sine, cosine = ellipsoid.authalic(radians[:, 1])
    n = len(ring)
    centres = Centres(np.zeros(n), np.full(n, sign), np.zeros(n), np.ones(n))
    return np.column_stack(project(radians[:, 0], (sine, cosine), centres, ellipsoid.authalic_radius_m))


def _without_pole_detour(ring: Ring, pole: float) -> Ring:
    """Drop the way along the antimeridian to the pole and back, which closes an outline on a flat map only.

    Real layers go there and back on longitudes that differ in the last digits, and stop short of the pole.
    """
    turn = np.array([[_WHOLE * np.round((ring[-1, 0] - ring[0, 0]) / _WHOLE), 0.0]])
    points = ring[:-1][ring[:-1, 1] != pole]
    on_seam = np.abs(np.mod(points[:, 0], _WHOLE) - _HALF) <= SEAM_TOLERANCE_DEG
    if len(points) < 3 or on_seam.all():
        return np.concatenate((points, points[:1] + turn)) if len(points) else ring
    first_off = int(np.argmin(on_seam))
    points = np.concatenate((points[first_off:], points[:first_off] + turn))
    on_seam = np.roll(on_seam, -first_off)
    keep = np.ones(len(points), dtype=np.bool_)
    starts = np.flatnonzero(on_seam & ~np.roll(on_seam, 1))
    ends = np.flatnonzero(on_seam & ~np.roll(on_seam, -1))
    for start, end in zip(starts.tolist(), ends.tolist(), strict=True):
        # There and back: the run begins and ends at the same place of the shore.
        if abs(points[start, 1] - points[end, 1]) <= SEAM_TOLERANCE_DEG:
            keep[start + 1 : end] = False
    points = points[keep]
    return np.concatenate((points, points[:1] + turn))


def _subdivided(ring: Ring) -> Ring:
    step = np.diff(ring, axis=0)
    # The edge between the two ends of a full turn has no length: no piece of it.
    pieces = np.ceil(np.abs(step).max(axis=1) / POLAR_STEP_DEG).astype(np.int64)
    edge = np.repeat(np.arange(len(step)), pieces)
    piece = np.arange(len(edge)) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    points = ring[edge] + step[edge] * (piece / pieces[edge])[:, None]
    return np.concatenate((points, points[:1]))


def _assembled(parts: list[list[Ring]]) -> shapely.Geometry:
    polygons = [shapely.Polygon(exterior, holes) for exterior, *holes in parts]
    return polygons[0] if len(polygons) == 1 else shapely.MultiPolygon(polygons)
