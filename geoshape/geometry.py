"""Geometries from WKB or shapely to rings: what can be measured, what must be repaired, and why a row cannot be."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import shapely
from numpy.typing import NDArray
from shapely import MultiPolygon
from shapely.geometry.base import BaseGeometry

from geoshape.columns import MEASURED, Status
from geoshape.errors import GeometryError
from geoshape.options import Invalid
from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch, oriented, recentred, without_repeats

ObjectArray = NDArray[np.object_]

POLYGON, MULTIPOLYGON, COLLECTION = 3, 6, 7

MAX_LATITUDE_DEG = 90.0


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
    parts, part_feature = _parts(geometries)
    keep = ~shapely.is_empty(parts)
    parts, part_feature = parts[keep], part_feature[keep]
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


def _parts(geometries: ObjectArray) -> tuple[ObjectArray, IntArray]:
    """List the parts of polygons, and the row that each belongs to; a polygon is its own part, not a copy."""
    owner = np.repeat(np.arange(len(geometries)), shapely.get_num_geometries(geometries))
    parts = geometries[owner]
    is_multi = shapely.get_type_id(geometries) == MULTIPOLYGON
    parts[is_multi[owner]] = shapely.get_parts(geometries[is_multi])
    return parts, owner


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


def read_wkb(values: Sequence[bytes | None] | ObjectArray) -> tuple[ObjectArray, dict[int, str]]:
    """Make geometries from WKB; what cannot be made one is None, with its reason.

    Parameters
    ----------
    values : (n,) bytes or None

    Returns
    -------
    geometries : (n,) object
    unreadable : dict of int to str
        Why a row that holds something has no geometry.
    """
    buffers = np.asarray(values, dtype=object)
    # NaN coordinates are found later; here they would only raise a warning.
    with np.errstate(invalid="ignore"):
        try:
            geometries = shapely.from_wkb(buffers, on_invalid="fix")
        except NotImplementedError:
            # One curve stops the whole array: take this batch row by row.
            geometries = np.array([_one_from_wkb(value) for value in buffers], dtype=object)
    lost = np.flatnonzero(
        shapely.is_missing(geometries) & np.array([value is not None for value in buffers], dtype=bool)
    )
    return geometries, {int(row): _why_unreadable(buffers[row]) for row in lost}


def _one_from_wkb(value: bytes | None) -> BaseGeometry | None:
    try:
        return shapely.from_wkb(value, on_invalid="fix")
    except NotImplementedError:
        return None


def _why_unreadable(value: bytes) -> str:
    try:
        shapely.from_wkb(value)
    except NotImplementedError:
        return CURVED
    except shapely.errors.ShapelyError as error:
        text = str(error)
        return TOO_FEW_POINTS if any(sign in text for sign in _FEW_POINT_MESSAGES) else f"cannot be read: {text}"
    return "cannot be read"


CURVED = "curved edges are not measured; turn them into straight ones first"
TOO_FEW_POINTS = "a ring has too few points"
_FEW_POINT_MESSAGES = ("Invalid number of points", "must contain 0 or >1")


@dataclass(eq=False)
class Verdicts:
    """What became of each feature of a batch, and why.

    Attributes
    ----------
    status : (n,) object of Status
    notes : dict of int to str
    """

    status: ObjectArray
    notes: dict[int, str]

    @classmethod
    def fresh(cls, n: int) -> Verdicts:
        """Begin with every feature in order."""
        return cls(np.full(n, Status.OK, dtype=object), {})

    def mark(self, rows: IntArray, status: Status, note: str | Sequence[str]) -> None:
        """Give rows a status and a note, or a note each."""
        self.status[rows] = status
        notes = [note] * len(rows) if isinstance(note, str) else note
        for row, text in zip(rows.tolist(), notes, strict=True):
            before = self.notes.get(row)
            self.notes[row] = f"{before}; {text}" if before else text

    def is_measured(self) -> BoolArray:
        """Tell which rows are still to be measured."""
        return np.isin(self.status.astype(str), [str(status) for status in MEASURED])


@dataclass(frozen=True, eq=False)
class Counts:
    """Parts, holes and vertices as read; NaN where there is no polygon to count in.

    Attributes
    ----------
    parts, holes, vertices : (n,) float64
    """

    parts: FloatArray
    holes: FloatArray
    vertices: FloatArray


def screen(geometries: ObjectArray, unreadable: dict[int, str], *, is_geographic: bool) -> tuple[ObjectArray, Verdicts]:
    """Sort out what is no polygon or has no usable coordinates.

    Parameters
    ----------
    geometries : (n,) object
        As read.
    unreadable : dict of int to str
        Rows whose geometry could not be read, with the reason.
    is_geographic : bool
        Whether coordinates are longitude and latitude.

    Returns
    -------
    polygons : (n,) object of Polygon, MultiPolygon or None
        None for every row that is not to be measured.
    verdicts : Verdicts
    """
    verdicts = Verdicts.fresh(len(geometries))
    polygons = geometries.copy()
    type_id = shapely.get_type_id(geometries)
    missing = shapely.is_missing(geometries)
    missing[list(unreadable)] = False
    verdicts.mark(np.flatnonzero(missing), Status.MISSING, "no geometry")
    for row, reason in unreadable.items():
        status = {CURVED: Status.NOT_POLYGON, TOO_FEW_POINTS: Status.COLLAPSED}.get(reason, Status.INVALID)
        verdicts.mark(np.array([row]), status, reason)
    is_polygon = (type_id == POLYGON) | (type_id == MULTIPOLYGON)
    empty = shapely.is_empty(geometries)
    verdicts.mark(np.flatnonzero(empty), Status.EMPTY, "empty geometry")
    for row in np.flatnonzero((type_id == COLLECTION) & ~empty).tolist():
        polygons[row] = _polygons_of(geometries[row])
        is_polygon[row] = not polygons[row].is_empty
        if is_polygon[row]:
            verdicts.mark(np.array([row]), Status.REPAIRED, "collection: only its polygons are measured")
    other = np.flatnonzero(~is_polygon & ~empty & (type_id >= 0))
    kinds = [f"{geometries[row].geom_type}: no polygon" for row in other]
    verdicts.mark(other, Status.NOT_POLYGON, kinds)
    _mark_coordinates(polygons, verdicts, is_geographic=is_geographic)
    polygons[~verdicts.is_measured()] = None
    return polygons, verdicts


def _mark_coordinates(polygons: ObjectArray, verdicts: Verdicts, *, is_geographic: bool) -> None:
    rows = np.flatnonzero(verdicts.is_measured())
    coordinates = shapely.get_coordinates(polygons[rows])
    # Nothing is wrong with most batches: NaN and infinity show in the extremes, and fail the comparison.
    low, high = (coordinates.min(axis=0), coordinates.max(axis=0)) if len(coordinates) else (0.0, 0.0)
    limit = np.array([np.finfo(np.float64).max, MAX_LATITUDE_DEG if is_geographic else np.finfo(np.float64).max])
    if ((low >= -limit) & (high <= limit)).all():
        return
    coordinates, owner = shapely.get_coordinates(polygons[rows], return_index=True)
    finite = np.isfinite(coordinates).all(axis=1)
    if not finite.all():
        verdicts.mark(rows[np.unique(owner[~finite])], Status.INVALID, "NaN or infinite coordinates")
    if is_geographic:
        beyond = finite & (np.abs(coordinates[:, 1]) > MAX_LATITUDE_DEG)
        if beyond.any():
            verdicts.mark(rows[np.unique(owner[beyond])], Status.INVALID, "latitude beyond 90 degrees")


def _polygons_of(geometry: BaseGeometry) -> BaseGeometry:
    """Collect the polygons of a collection, however deep; a polygon stays as it is."""
    if shapely.get_type_id(geometry) in {POLYGON, MULTIPOLYGON}:
        return geometry
    polygons: list[Any] = []
    pending = [geometry]
    while pending:
        parts = shapely.get_parts(pending.pop())
        for part in parts:
            if shapely.get_type_id(part) == POLYGON:
                polygons.append(part)
            elif shapely.get_num_geometries(part) and shapely.get_type_id(part) in {MULTIPOLYGON, COLLECTION}:
                pending.append(part)
    return MultiPolygon(polygons)


def count(polygons: ObjectArray, geometries: ObjectArray) -> Counts:
    """Count parts, holes and vertices of polygons, closing vertices left out.

    Parameters
    ----------
    polygons : (n,) object
        Polygons to count in, None elsewhere.
    geometries : (n,) object
        As read; an empty polygon counts 0.

    Returns
    -------
    Counts
    """
    n = len(polygons)
    parts, owner = _parts(polygons)
    holes = shapely.get_num_interior_rings(parts)
    rings = np.where(shapely.is_empty(parts), 0, holes + 1)
    vertices = shapely.get_num_coordinates(polygons) - np.bincount(owner, weights=rings, minlength=n)
    counted = ~shapely.is_missing(polygons)
    is_empty_polygon = shapely.is_empty(geometries) & np.isin(shapely.get_type_id(geometries), (POLYGON, MULTIPOLYGON))
    known = counted | is_empty_polygon
    return Counts(
        parts=np.where(known, np.bincount(owner, minlength=n), np.nan),
        holes=np.where(known, np.bincount(owner, weights=holes, minlength=n), np.nan),
        vertices=np.where(known, vertices, np.nan),
    )


def repair(polygons: ObjectArray, verdicts: Verdicts, invalid: Invalid, first_row: int) -> ObjectArray:
    """Make invalid polygons valid, or give them up, as the option says.

    Parameters
    ----------
    polygons : (n,) object of Polygon, MultiPolygon or None
    verdicts : Verdicts
        Takes what was done.
    invalid : Invalid
    first_row : int
        Row of the layer that the batch begins with, for messages.

    Returns
    -------
    (n,) object of Polygon, MultiPolygon or None
        None where a polygon was given up or nothing with an area is left.

    Raises
    ------
    GeometryError
        A polygon is invalid and the option is ``stop``.
    """
    broken = np.flatnonzero(~shapely.is_valid(polygons) & ~shapely.is_missing(polygons))
    if not len(broken):
        return polygons
    reasons = [_reason(text) for text in shapely.is_valid_reason(polygons[broken])]
    if invalid is Invalid.STOP:
        raise GeometryError(
            f"row {first_row + broken[0] + 1} is invalid: {reasons[0]}; mend it, or use --invalid repair or null"
        )
    mended = polygons.copy()
    if invalid is Invalid.NULL:
        verdicts.mark(broken, Status.INVALID, reasons)
        mended[broken] = None
        return mended
    for row, reason in zip(broken.tolist(), reasons, strict=True):
        polygon = polygons[row]
        whole = _polygons_of(shapely.make_valid(polygon, method="structure", keep_collapsed=False))
        areas = f"area {shapely.area(polygon):.6g} -> {shapely.area(whole):.6g} in the layer's units"
        status = Status.COLLAPSED if whole.is_empty else Status.REPAIRED
        verdicts.mark(np.array([row]), status, f"{reason}; repaired, {areas}")
        mended[row] = None if whole.is_empty else whole
    return mended


def _reason(text: str) -> str:
    what, _, where = text.partition("[")
    return f"{what.lower()} at {where.rstrip(']')}" if where else what.lower()


def filled(polygons: ObjectArray) -> ObjectArray:
    """Fill the holes of polygons; a part that lay in a hole becomes one with what surrounds it."""
    parts, owner = shapely.get_parts(polygons, return_index=True)
    has_holes = np.unique(owner[shapely.get_num_interior_rings(parts) > 0])
    whole = polygons.copy()
    for row in has_holes:
        shells = shapely.polygons(shapely.get_exterior_ring(parts[owner == row]))
        whole[row] = shapely.union_all(shells) if len(shells) > 1 else shells[0]
    return whole


def split(geometries: ObjectArray) -> tuple[ObjectArray, IntArray, FloatArray]:
    """Make a row of each part.

    Parameters
    ----------
    geometries : (n,) object

    Returns
    -------
    parts : (m,) object
        A multipart's parts one by one; everything else, missing and empty geometries too, as it is.
    row : (m,) int64
        Row that each came from.
    number : (m,) float64
        Number of the part within its feature, from 1; NaN where nothing was taken apart.
    """
    is_multi = (shapely.get_type_id(geometries) == MULTIPOLYGON) & ~shapely.is_empty(geometries)
    pieces = np.where(is_multi, shapely.get_num_geometries(geometries), 1)
    row = np.repeat(np.arange(len(geometries)), pieces)
    parts = geometries[row]
    parts[is_multi[row]] = shapely.get_parts(geometries[is_multi])
    first = np.repeat(np.cumsum(pieces) - pieces, pieces)
    is_polygon = (shapely.get_type_id(parts) == POLYGON) & ~shapely.is_empty(parts)
    number = np.where(is_polygon, np.arange(len(row)) - first + 1.0, np.nan)
    return parts, row, number
