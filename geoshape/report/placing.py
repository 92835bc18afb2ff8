"""Put the shapes of a page on their planes: each on its own ground for a close look, all on one for the map."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
import pyproj
import shapely
from pyproj.exceptions import CRSError

from geoshape import geometry
from geoshape.errors import GroundError
from geoshape.formulas import arclength, fourier
from geoshape.formulas.arclength import ComplexArray
from geoshape.formulas.axes import principal_axes
from geoshape.formulas.families import Shapes
from geoshape.formulas.moments import centroids
from geoshape.geometry import ObjectArray
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.place import Ground, open_ground
from geoshape.ground.seams import rejoin
from geoshape.options import GROUND_CENTRED, GROUND_PLANE, Bounds, Holes, Invalid, MeasureOptions, Spectrum
from geoshape.report.data import View
from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch, outlines, recentred

_Numbers = TypeVar("_Numbers", FloatArray, ComplexArray)

MAP_REACH_DEG = 90.0
"""Angle from the middle of a layer up to which one azimuthal plane shows it."""

SEGMENT_DEG = 1.0
"""Edges in degrees are cut to this for the map of a wide layer, so that parallels look round."""

WIDE_DEG = 20.0


@dataclass(frozen=True, eq=False)
class CloseUps:
    """Shapes on their own ground, true north up, in metres about their centre; all arrays by feature.

    Attributes
    ----------
    outline : RingBatch
        Every ring.
    hull, rectangle : RingBatch
        At most one ring a feature.
    circle : (n, 3) float64
        Centre and radius of the smallest circle; NaN without a shape.
    ellipse : (n, 5) float64
        Centroid, half axes, and direction of the major axis in degrees clockwise from north; NaN without a shape.
    points : (n, m) complex128
        Points at equal arc length along the outline; NaN without a shape.
    coefficients : (n, 2 * harmonics + 1) complex128
        Fourier coefficients for k = -harmonics ... harmonics; NaN without a shape.
    beyond : (n,) float64
        Sum of the squared amplitudes of all higher harmonics.
    """

    outline: RingBatch
    hull: RingBatch
    rectangle: RingBatch
    circle: FloatArray
    ellipse: FloatArray
    points: ComplexArray
    coefficients: ComplexArray
    beyond: FloatArray


@dataclass(frozen=True, eq=False)
class MapPlane:
    """All shapes on one plane.

    Attributes
    ----------
    outline : RingBatch
    unit : str
        ``"m"``, or ``"units"`` where the layer does not say what its coordinates count.
    is_north_up : bool
        Whether north is up in the middle of the map.
    label : str
        What the plane is, for the caption.
    """

    outline: RingBatch
    unit: str
    is_north_up: bool
    label: str


def layer_crs(view: View) -> pyproj.CRS | None:
    """Give the CRS of the layer, or the one that was assumed for it; None where neither says."""
    wkt = view.data.crs_wkt
    assumed = view.measure_options.assume_crs
    try:
        return pyproj.CRS(wkt or assumed) if wkt or assumed else None
    except CRSError:
        return None


def place_close_ups(view: View, rows: IntArray) -> CloseUps:
    """Place shapes as they were measured, turned so that true north is up.

    Parameters
    ----------
    view : View
    rows : (n,) int64
        Rows of the table.

    Returns
    -------
    CloseUps
    """
    options = view.measure_options
    ground = _ground(view, options)
    batch = _on_ground(view.data.wkb(rows), ground, options)
    shapes = Shapes(batch, np.zeros(batch.n_features), np.zeros(batch.n_features, dtype=np.int64))
    points, coefficients, beyond = _spectra(batch, options, view.options.harmonics)
    with np.errstate(divide="ignore", invalid="ignore"):
        middle = centroids(shapes.raw)
        axes = _principal(shapes)
        circles = shapes.circles
    return CloseUps(
        outline=batch,
        hull=shapes.hulls,
        rectangle=_rectangles(shapes.hulls),
        circle=np.column_stack((circles.x, circles.y, circles.radius)),
        ellipse=np.column_stack((middle, axes)),
        points=points,
        coefficients=coefficients,
        beyond=beyond,
    )


def _principal(shapes: Shapes) -> FloatArray:
    axes = principal_axes(shapes.central)
    return np.column_stack((axes.major_m / 2.0, axes.minor_m / 2.0, axes.azimuth_deg))


def _ground(view: View, options: MeasureOptions) -> Ground:
    crs = layer_crs(view)
    if crs is None and options.ground != GROUND_PLANE:
        options = MeasureOptions(ground=GROUND_PLANE)
    bounds = None if options.ground == GROUND_CENTRED else _bounds(view)
    try:
        return open_ground(plan_ground(crs, bounds, options))
    except GroundError:
        # A page is no place to stop: the numbers are there, and the coordinates as they are still show the shapes.
        return open_ground(plan_ground(crs, bounds, MeasureOptions(ground=GROUND_PLANE)))


def _bounds(view: View) -> Bounds | None:
    geometries, _ = geometry.read_wkb(view.data.wkb(np.arange(view.data.n_rows)))
    boxes = shapely.bounds(geometries)
    boxes = boxes[np.isfinite(boxes).all(axis=1)]
    if not len(boxes):
        return None
    west, south = boxes[:, :2].min(axis=0).tolist()
    east, north = boxes[:, 2:].max(axis=0).tolist()
    return west, south, east, north


def _on_ground(wkb: ObjectArray, ground: Ground, options: MeasureOptions) -> RingBatch:
    geometries, unreadable = geometry.read_wkb(wkb)
    geometries = ground.in_degrees(geometries)
    polygons, verdicts = geometry.screen(geometries, unreadable, is_geographic=ground.plan.is_geographic)
    polygons, frames, is_cut = ground.unwrap(polygons)
    kept = Invalid.NULL if options.invalid is Invalid.NULL else Invalid.REPAIR
    polygons = geometry.repair(rejoin(polygons, is_cut), verdicts, kept, 0)
    if options.holes is Holes.FILL:
        polygons = geometry.filled(polygons)
    placed = ground.place(geometry.ring_batch(polygons), frames)
    keep = placed.is_placed & (placed.batch.sum_ring_values(placed.batch.ring_signed_area) > 0)
    return _north_up(placed.batch.take_rings(keep[placed.batch.ring_feature]), placed.convergence_deg)


def _north_up(batch: RingBatch, convergence_deg: FloatArray) -> RingBatch:
    """Turn each shape clockwise by the azimuth of its plane's north, about its own middle."""
    angle = np.radians(convergence_deg)[batch.vertex_feature]
    x = batch.x * np.cos(angle) + batch.y * np.sin(angle)
    y = batch.y * np.cos(angle) - batch.x * np.sin(angle)
    turned = batch.moved(x, y, np.zeros_like(batch.origin))
    centred = recentred(turned, turned.planar_centroid)
    return centred.moved(centred.x, centred.y, np.zeros_like(batch.origin))


def _spectra(
    batch: RingBatch, options: MeasureOptions, harmonics: int
) -> tuple[ComplexArray, ComplexArray, FloatArray]:
    rings = outlines(batch)
    highest = min(harmonics, options.samples // 2 - 1)
    points = arclength.resample(rings, options.samples)
    if options.spectrum is Spectrum.EXACT:
        coefficients = fourier.exact_coefficients(rings, highest)
        whole = _mean_square(rings)
    else:
        coefficients = fourier.sampled_coefficients(points, highest)
        whole = (np.abs(points) ** 2).mean(axis=1)
    # Parseval: what the outline holds and the harmonics do not.
    power = whole - (np.abs(coefficients) ** 2).sum(axis=1)
    return (
        _by_feature(points, rings),
        _by_feature(coefficients, rings),
        _by_feature(np.maximum(power, 0.0), rings),
    )


def _mean_square(rings: RingBatch) -> FloatArray:
    """Average the squared distance from the origin along each ring: a third of |a|^2 + |b|^2 + a.b on each edge."""
    length = arclength.edge_lengths(rings)
    squares = (
        rings.x**2 + rings.y**2 + rings.next_x**2 + rings.next_y**2 + rings.x * rings.next_x + rings.y * rings.next_y
    )
    total = rings.sum_rings(length)
    return rings.sum_rings(length * squares) / (3.0 * np.where(total > 0, total, 1.0))


def _by_feature(values: _Numbers, rings: RingBatch) -> _Numbers:
    spread: _Numbers = np.full((rings.n_features, *values.shape[1:]), np.nan, dtype=values.dtype)
    spread[rings.ring_feature] = values
    return spread


def _rectangles(hulls: RingBatch) -> RingBatch:
    """Take the smallest rectangle round each hull, as rings."""
    polygons = np.full(hulls.n_features, None, dtype=object)
    if hulls.n_rings:
        corners = np.column_stack((hulls.x, hulls.y))
        rings = shapely.linearrings(corners, indices=hulls.vertex_ring)
        polygons[hulls.ring_feature] = shapely.oriented_envelope(rings)
    return geometry.ring_batch(polygons)


def place_on_map(view: View, rows: IntArray) -> MapPlane:
    """Place shapes on one plane: equal-area about the middle of them all, or their coordinates as they are.

    Parameters
    ----------
    view : View
    rows : (n,) int64

    Returns
    -------
    MapPlane
        A shape that the plane cannot hold has no rings.
    """
    geometries, _ = geometry.read_wkb(view.data.wkb(rows))
    is_polygon = np.isin(
        shapely.get_type_id(geometries), (geometry.POLYGON, geometry.MULTIPOLYGON, geometry.COLLECTION)
    )
    geometries = _only(geometries, is_polygon & np.isfinite(shapely.bounds(geometries)).all(axis=1))
    crs = layer_crs(view)
    if crs is None or not (crs.is_geographic or crs.is_projected):
        unit = "units" if crs is None else "m"
        return MapPlane(_polygon_rings(geometries), unit, is_north_up=False, label="the layer's own coordinates")
    with warnings.catch_warnings():
        # A compound or bound CRS may warn on the way to its horizontal part; for a picture that is no news.
        warnings.simplefilter("ignore")
        return _projected_map(geometries, crs)


def _projected_map(geometries: ObjectArray, crs: pyproj.CRS) -> MapPlane:
    globe = crs.geodetic_crs or pyproj.CRS("EPSG:4326")
    boxes = shapely.bounds(geometries)
    corners = boxes[np.isfinite(boxes).all(axis=1)]
    to_globe = pyproj.Transformer.from_crs(crs, globe, always_xy=True)
    lon, lat = to_globe.transform(corners[:, [0, 2, 0, 2]].ravel(), corners[:, [1, 3, 3, 1]].ravel())
    finite = np.isfinite(lon) & np.isfinite(lat)
    lon0, lat0, reach = _middle(np.asarray(lon)[finite], np.asarray(lat)[finite])
    if crs.is_geographic and (np.ptp(corners[:, [0, 2]]) > WIDE_DEG if len(corners) else False):
        geometries = shapely.segmentize(geometries, SEGMENT_DEG)
    if reach <= MAP_REACH_DEG:
        target = f"+proj=laea +lat_0={lat0:.9f} +lon_0={lon0:.9f} +units=m"
        label = f"Lambert azimuthal equal-area about {_place_text(lat0, lon0)}"
    else:
        target, label = "+proj=eqearth +lon_0=0 +units=m", "Equal Earth"
    to_plane = pyproj.Transformer.from_crs(crs, pyproj.CRS(_on_ellipsoid(target, globe)), always_xy=True)
    projected = shapely.transform(geometries, lambda points: np.column_stack(to_plane.transform(*points.T)))
    finite = np.asarray(np.isfinite(shapely.bounds(projected)).all(axis=1))
    return MapPlane(_polygon_rings(_only(np.asarray(projected), finite)), "m", is_north_up=True, label=label)


def _only(geometries: ObjectArray, keep: BoolArray) -> ObjectArray:
    kept = geometries.copy()
    kept[~keep] = None
    return kept


def _on_ellipsoid(target: str, globe: pyproj.CRS) -> str:
    ellipsoid = globe.ellipsoid
    if ellipsoid is None:
        return f"{target} +type=crs"
    return f"{target} +a={ellipsoid.semi_major_metre!r} +b={ellipsoid.semi_minor_metre!r} +type=crs"


def _middle(lon: FloatArray, lat: FloatArray) -> tuple[float, float, float]:
    """Find the middle of places on the globe and the angle to the farthest, in degrees."""
    if not len(lon):
        return 0.0, 0.0, 0.0
    a, b = np.radians(lon), np.radians(lat)
    places = np.column_stack((np.cos(b) * np.cos(a), np.cos(b) * np.sin(a), np.sin(b)))
    low, high = places.min(axis=0), places.max(axis=0)
    middle = 0.5 * (low + high)
    length = float(np.linalg.norm(middle))
    if length < 1e-9:
        return 0.0, 0.0, 180.0
    middle /= length
    reach = np.degrees(np.arccos(np.clip(places @ middle, -1.0, 1.0))).max()
    lon0 = float(np.degrees(np.arctan2(middle[1], middle[0])))
    return lon0, float(np.degrees(np.arcsin(middle[2]))), float(reach)


def _place_text(lat: float, lon: float) -> str:
    return f"{abs(lat):.2f}\u00b0 {'S' if lat < 0 else 'N'}, {abs(lon):.2f}\u00b0 {'W' if lon < 0 else 'E'}"


def _polygon_rings(geometries: ObjectArray) -> RingBatch:
    collections = np.flatnonzero(shapely.get_type_id(geometries) == geometry.COLLECTION)
    if len(collections):
        geometries = geometries.copy()
        for row in collections.tolist():
            parts = shapely.get_parts(geometries[row])
            polygons = parts[shapely.get_type_id(parts) == geometry.POLYGON]
            geometries[row] = shapely.multipolygons(polygons) if len(polygons) else None
    return geometry.ring_batch(geometries)
