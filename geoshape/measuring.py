"""Measure a batch of geometries: from what was read to columns, with a status and a note for every row.

Nothing here reads, writes or prints, and no fault of a feature raises: what cannot be measured is null with its reason.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import shapely

from geoshape import geometry
from geoshape.columns import Kind, Status, columns_for
from geoshape.formulas.arclength import edge_lengths
from geoshape.formulas.digitising import KeyArray
from geoshape.formulas.families import FAMILIES, Columns, Shapes
from geoshape.formulas.position_error import error_columns, feature_keys
from geoshape.geometry import ObjectArray, Verdicts
from geoshape.ground.place import Ground, Placed
from geoshape.ground.seams import rejoin
from geoshape.options import Holes, MeasureOptions, Parts
from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch

NO_AREA = 1e-14
"""Area over squared perimeter below which nothing but rounding is left of a polygon."""

ColumnValues = Mapping[str, FloatArray | ObjectArray]


@dataclass(frozen=True, eq=False)
class Measured:
    """Columns of a batch.

    Attributes
    ----------
    values : mapping of str to array
        By full name, in the registry's order. Numbers and counts are (m,) float64 with NaN as null; text is
        (m,) object of str or None.
    row : (m,) int64
        Row of the input that each row of the result came from: 0 ... n - 1, repeated where parts were split.
    geometry : (m,) object of shapely geometries, or None
        The parts, where they were split; None where each row keeps the geometry it was read with.
    """

    values: ColumnValues
    row: IntArray
    geometry: ObjectArray | None


def measure_geometries(
    geometries: ObjectArray,
    ground: Ground,
    options: MeasureOptions,
    *,
    unreadable: Mapping[int, str] | None = None,
    first_row: int = 0,
) -> Measured:
    """Measure geometries on a ground.

    Parameters
    ----------
    geometries : (n,) object of shapely geometries or None
        In the CRS that the ground was planned for.
    ground : Ground
    options : MeasureOptions
    unreadable : mapping of int to str, optional
        Rows that held something which is no geometry, with the reason.
    first_row : int
        Row of the layer that the batch begins with, for messages.

    Returns
    -------
    Measured

    Raises
    ------
    GeometryError
        A geometry is invalid and ``options.invalid`` is ``stop``.
    """
    lost = dict(unreadable or {})
    row = np.arange(len(geometries))
    number = np.full(len(geometries), np.nan)
    parts = None
    if options.parts is Parts.SPLIT:
        geometries, row, number = geometry.split(geometries)
        parts = geometries
        lost = {int(at): lost[source] for at, source in enumerate(row.tolist()) if source in lost}
    key = feature_keys(options.seed, first_row + row, np.nan_to_num(number).astype(np.int64))
    values = _measure_rows(geometries, lost, ground, options, first_row, key)
    values["part_number"] = number
    ordered = {}
    for column in columns_for(options):
        bare = column.name.removeprefix(options.prefix)
        value = values[bare]
        ordered[column.name] = value if column.kind is Kind.TEXT else np.where(np.isfinite(value), value, np.nan)
    return Measured(ordered, row, parts)


def _measure_rows(
    geometries: ObjectArray,
    unreadable: dict[int, str],
    ground: Ground,
    options: MeasureOptions,
    first_row: int,
    key: KeyArray,
) -> dict[str, FloatArray | ObjectArray]:
    geometries = ground.in_degrees(geometries)
    polygons, verdicts = geometry.screen(geometries, unreadable, is_geographic=ground.plan.is_geographic)
    counts = geometry.count(polygons, geometries)
    polygons, frames, is_cut = ground.unwrap(polygons)
    polygons = geometry.repair(rejoin(polygons, is_cut), verdicts, options.invalid, first_row)
    if options.holes is Holes.FILL:
        polygons = geometry.filled(polygons)
    source = geometry.ring_batch(polygons)
    placed = ground.place(source, frames)
    batch = _without_area(source, placed, verdicts)
    measured = verdicts.is_measured()
    # Seams add vertices of their own: there the edges are those that were read.
    edges = np.where(is_cut | (frames != 0), np.nan_to_num(counts.vertices), _edge_count(source)).astype(np.int64)
    shapes = Shapes(batch, placed.convergence_deg, edges)
    values: dict[str, FloatArray | ObjectArray] = {
        "shape_status": np.array([str(status) for status in verdicts.status], dtype=object),
        "shape_note": np.array([verdicts.notes.get(at) for at in range(len(polygons))], dtype=object),
        "ground_distortion": np.where(measured, placed.distortion_deg, np.nan),
        "part_count": counts.parts,
        "hole_count": counts.holes,
        "vertex_count": counts.vertices,
    }
    numbers: Columns = {}
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        # Rows without rings are null in every column; their quotients are no news.
        for family in options.families:
            numbers |= FAMILIES[family](shapes, options)
        if options.position_error_m is not None:
            numbers |= error_columns(shapes, numbers, key, options)
    values |= numbers
    return values


def _edge_count(source: RingBatch) -> IntArray:
    return source.sum_ring_values(source.ring_size.astype(np.float64)).astype(np.int64)


def _without_area(source: RingBatch, placed: Placed, verdicts: Verdicts) -> RingBatch:
    """Take out the features that could not be placed or have no area, and say so."""
    expected = verdicts.is_measured()
    batch = placed.batch
    has_rings = np.bincount(source.ring_feature, minlength=source.n_features) > 0
    lost = expected & has_rings & ~placed.is_placed
    rows = np.flatnonzero(lost)
    verdicts.mark(rows, Status.INVALID, [placed.faults[row] for row in rows.tolist()])
    flat = expected & ~lost & ~_has_area(batch)
    verdicts.mark(np.flatnonzero(flat), Status.COLLAPSED, "no area")
    keep = expected & ~lost & ~flat
    return batch.take_rings(keep[batch.ring_feature])


def _has_area(batch: RingBatch) -> BoolArray:
    area = batch.sum_ring_values(batch.ring_signed_area)
    perimeter = batch.sum_features(edge_lengths(batch))
    with np.errstate(invalid="ignore", over="ignore"):
        return np.asarray(area > NO_AREA * perimeter**2)


def wkb_of(geometries: ObjectArray) -> ObjectArray:
    """Write geometries as ISO WKB with all their dimensions; None stays None."""
    return np.asarray(shapely.to_wkb(geometries, flavor="iso"))
