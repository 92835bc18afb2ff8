"""Geometries as RFC 7946 wants them: WGS 84 longitude and latitude, rings by the right hand, cut at 180 degrees."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pyarrow as pa
import pyproj
import shapely
from shapely.affinity import translate

from geoshape.layers.dimensions import Shapes, without_measures
from geoshape.layers.storage import Losses
from geoshape.rings import BoolArray, FloatArray

DECIMALS_KEPT = 15
"""Decimals of a degree where coordinates pass through: nothing is lost."""

DECIMALS_TRANSFORMED = 10
"""Decimals of a degree where coordinates are transformed: 0.01 mm."""

_HALF_TURN = 180.0
_TURN = 360.0
_WGS84_NAMES = ("OGC:CRS84", "EPSG:4326", "EPSG:4979")


def is_wgs84(crs_wkt: str) -> bool:
    """Whether coordinates are WGS 84 longitudes and latitudes, in whatever order the CRS names them."""
    crs = pyproj.CRS.from_wkt(crs_wkt)
    return any(crs.equals(pyproj.CRS.from_user_input(name), ignore_axis_order=True) for name in _WGS84_NAMES)


@dataclass(frozen=True)
class LongitudeLatitude:
    """Turns geometries of one CRS into those of GeoJSON.

    Attributes
    ----------
    crs_wkt : str or None
        CRS of the geometries; where it is unknown, coordinates stay as they are.
    """

    crs_wkt: str | None

    @cached_property
    def transformer(self) -> pyproj.Transformer | None:
        """What transforms coordinates; None where they are right already, or nobody knows."""
        if self.crs_wkt is None or is_wgs84(self.crs_wkt):
            return None
        return pyproj.Transformer.from_crs(pyproj.CRS.from_wkt(self.crs_wkt), "OGC:CRS84", always_xy=True)

    @property
    def decimals(self) -> int:
        """Decimals to write."""
        return DECIMALS_KEPT if self.transformer is None else DECIMALS_TRANSFORMED

    def fit(self, geometry: pa.BinaryArray, losses: Losses) -> pa.BinaryArray:
        """Turn geometries into those of GeoJSON.

        Parameters
        ----------
        geometry : pyarrow.BinaryArray, (n,)
        losses : Counter
            Gets the number of geometries that GeoJSON cannot hold.

        Returns
        -------
        pyarrow.BinaryArray, (n,)
            Null where a coordinate is not finite or beyond what the CRS can transform. Measures are left out.
        """
        wkb = np.asarray(geometry.to_numpy(zero_copy_only=False), dtype=object)
        shapes = without_measures(np.asarray(shapely.from_wkb(wkb, on_invalid="ignore"), dtype=object))
        _drop(shapes, _has_unusable(shapes), "geometries with coordinates that are not finite are null", losses)
        if self.transformer is not None:
            shapes = self._transformed(shapes)
            _drop(shapes, _has_unusable(shapes), "geometries too far away to transform are null", losses)
            shapes = _cut(shapes)
        with np.errstate(invalid="ignore"):
            turned = shapely.orient_polygons(shapes, exterior_cw=False)
        return pa.array(shapely.to_wkb(turned, output_dimension=3, flavor="iso"), pa.binary())

    def _transformed(self, shapes: Shapes) -> Shapes:
        transformer = self.transformer

        def move(points: FloatArray) -> FloatArray:
            moved = points.copy()
            if transformer is not None and len(points):
                moved[:, 0], moved[:, 1] = transformer.transform(points[:, 0], points[:, 1])
            return moved

        has_z = shapely.has_z(shapes)
        result = shapes.copy()
        # Without this distinction a flat geometry would get heights that are no number.
        result[~has_z] = shapely.transform(shapes[~has_z], move)
        result[has_z] = shapely.transform(shapes[has_z], move, include_z=True)
        return result


def _has_unusable(shapes: Shapes) -> BoolArray:
    points, owner = shapely.get_coordinates(shapes, return_index=True)
    unusable = np.zeros(len(shapes), dtype=np.bool_)
    unusable[owner[~np.isfinite(points).all(axis=1)]] = True
    return unusable


def _drop(shapes: Shapes, where: BoolArray, text: str, losses: Losses) -> None:
    if where.any():
        losses[f"{text} in GeoJSON"] += int(np.count_nonzero(where))
        shapes[where] = None


def _cut(shapes: Shapes) -> Shapes:
    """Cut polygons in two where an edge leaps over 180 degrees, which in degrees would run round the world."""
    bounds = shapely.bounds(shapes)
    wide = np.flatnonzero(bounds[:, 2] - bounds[:, 0] > _HALF_TURN)
    for i in wide:
        shapes[i] = _cut_one(shapes[i])
    return shapes


def _cut_one(shape: shapely.Geometry) -> shapely.Geometry:
    parts = shapely.get_parts(shape)
    if not (shapely.get_type_id(parts) == shapely.GeometryType.POLYGON).all():
        return shape
    try:
        pieces = [piece for part in parts for piece in _pieces(part)]
    except shapely.GEOSException:
        # Not valid: leave it as it is, rather than guess.
        return shape
    return pieces[0] if len(pieces) == 1 else shapely.MultiPolygon(pieces)


def _pieces(polygon: shapely.Polygon) -> list[shapely.Polygon]:
    rings = [shapely.get_coordinates(ring, include_z=polygon.has_z) for ring in shapely.get_rings(polygon)]
    leaps = any((np.abs(np.diff(ring[:, 0])) > _HALF_TURN).any() for ring in rings)
    if not leaps:
        return [polygon]
    for ring in rings:
        ring[:, 0] = np.unwrap(ring[:, 0], period=_TURN)
        ring[:, 0] += _TURN * np.round((rings[0][:, 0].mean() - ring[:, 0].mean()) / _TURN)
    if any(abs(ring[-1, 0] - ring[0, 0]) > _HALF_TURN for ring in rings):
        # Round a pole there is no seam to cut along.
        return [polygon]
    whole = shapely.Polygon(rings[0], rings[1:])
    west, _, east, _ = whole.bounds
    turns = range(round(np.floor((west + _HALF_TURN) / _TURN)), round(np.ceil((east + _HALF_TURN) / _TURN)))
    pieces: list[shapely.Polygon] = []
    for turn in turns:
        shift = turn * _TURN
        piece = shapely.intersection(whole, shapely.box(shift - _HALF_TURN, -90.0, shift + _HALF_TURN, 90.0))
        found = shapely.get_parts(piece)
        found = found[(shapely.get_type_id(found) == shapely.GeometryType.POLYGON) & ~shapely.is_empty(found)]
        pieces += [translate(part, xoff=-shift) for part in found]
    return pieces
