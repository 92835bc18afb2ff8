"""Small layers that hold every kind of attribute and geometry, for tests of reading and writing."""

from __future__ import annotations

import datetime as dt
import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pyarrow as pa
import shapely

from geoshape.columns import Column, Kind, columns_for
from geoshape.layers.lineage import Lineage
from geoshape.layers.plan import LayerContent, OutputPlan
from geoshape.layers.tables import add_columns
from geoshape.layers.write import OutputBatch
from geoshape.options import MeasureOptions

NOBODY = 65534

DATA = Path(__file__).parents[1] / "data"
WORLD = DATA / "world_geodesic_area" / "world.gpkg"
COUNTIES = DATA / "us_census_areas" / "cb_2016_us_county_500k_CO_KS_UT.gpkg"
WILDERNESS = DATA / "wilderness_co_ut" / "coutwildrnp.shp"
MEXICO = DATA / "mexico_states" / "mexicojoin.shp"

POLYGON = "POLYGON ((0 0, 2 0, 2 1, 0 1, 0 0), (0.5 0.25, 0.5 0.75, 1.5 0.75, 1.5 0.25, 0.5 0.25))"
MULTI = "MULTIPOLYGON (((0 0, 1 0, 1 1, 0 0)), ((5.123456789012345 5, 6 5, 6 6, 5.123456789012345 5)))"
POLYGON_Z = "POLYGON Z ((0 0 5, 2 0 6, 2 1 7, 0 0 5))"
POLYGON_M = "POLYGON M ((0 0 5, 2 0 6, 2 1 7, 0 0 5))"
POLYGON_ZM = "POLYGON ZM ((0 0 5 1, 2 0 6 2, 2 1 7 3, 0 0 5 1))"
EMPTY = "POLYGON EMPTY"

COLUMNS = tuple(
    column
    for column in columns_for(MeasureOptions(families=("extent", "spectrum"), prefix=""))
    if column.name in {"shape_status", "shape_note", "area_m2", "part_count", "fd_p02"}
)

ATTRIBUTES = {
    "name": pa.array(["Ost-See", None, 'Weiher, "klein"', "", "Éire\nÜ"], pa.string()),
    "count": pa.array([1, None, -3, 4, 2**31 - 1], pa.int32()),
    "big": pa.array([2**53 + 1, None, -3, 4, 5], pa.int64()),
    "ratio": pa.array([1.5, None, -1.5e300, 1e-12, 0.1], pa.float64()),
    "is_wet": pa.array([True, None, False, True, False], pa.bool_()),
    "day": pa.array([dt.date(2024, 2, 29), None, dt.date(1900, 1, 1), None, dt.date(2000, 1, 1)], pa.date32()),
    "moment": pa.array(
        [dt.datetime(2024, 2, 29, 12, 30, 15, 250000, dt.UTC), None, None, None, None],
        pa.timestamp("ms", "UTC"),
    ),
}
MEASURES: dict[str, list[object]] = {
    "shape_status": ["ok", "missing", "ok", "repaired", "empty"],
    "shape_note": [None, "no geometry", None, None, None],
    "area_m2": [1.5, float("nan"), -1.5e300, 1.2345678901234567e-18, float("inf")],
    "part_count": [1.0, float("nan"), 2.0, 1.0, 0.0],
    "fd_p02": [0.1, float("nan"), 1 / 3, 5e-324, 1.7976931348623157e308],
}
GEOMETRIES = [POLYGON, None, MULTI, POLYGON, EMPTY]
EXPECTED_MEASURES = {
    "shape_status": ["ok", "missing", "ok", "repaired", "empty"],
    "shape_note": [None, "no geometry", None, None, None],
    "area_m2": [1.5, None, -1.5e300, 1.2345678901234567e-18, None],
    "part_count": [1, None, 2, 1, 0],
    "fd_p02": [0.1, None, 1 / 3, 5e-324, 1.7976931348623157e308],
}


def wkb(*texts: str | None) -> pa.BinaryArray:
    """Geometries from well-known text, as ISO well-known binary with all dimensions."""
    values = [
        None if text is None else shapely.to_wkb(shapely.from_wkt(text), output_dimension=4, flavor="iso")
        for text in texts
    ]
    return pa.array(values, pa.binary())


def wkt(geometry: pa.Array) -> list[str | None]:
    """Geometries as text, rings in a settled order."""
    shapes = [None if value is None else shapely.from_wkb(value) for value in geometry.to_pylist()]
    return [
        None if shape is None else shapely.to_wkt(shapely.normalize(shape), rounding_precision=15) for shape in shapes
    ]


def attributes() -> pa.RecordBatch:
    """Five rows of attributes of every kind, with nulls."""
    return pa.RecordBatch.from_pydict(ATTRIBUTES)


def content(
    geometry_type: str = "Unknown", crs: str | None = None, columns: tuple[Column, ...] = COLUMNS
) -> LayerContent:
    """The sample's schema with its columns."""
    return LayerContent(attributes().schema, columns, crs, geometry_type)


def batch(plan: OutputPlan, *geometries: str | None) -> OutputBatch:
    """The sample's rows, for a plan made from its content."""
    rows = add_columns(attributes(), plan.columns, MEASURES, plan.schema)
    return OutputBatch(rows, wkb(*(geometries or GEOMETRIES)))


def plain_content(geometry_type: str = "Polygon", crs: str | None = None) -> LayerContent:
    """A layer with one attribute, ``row``."""
    return LayerContent(pa.schema([pa.field("row", pa.int64())]), (), crs, geometry_type)


def numbered(*geometries: str | None, first: int = 0) -> OutputBatch:
    """Rows of `plain_content`."""
    rows = pa.record_batch({"row": pa.array(range(first, first + len(geometries)), pa.int64())})
    return OutputBatch(rows, wkb(*geometries))


def failing(error: BaseException, rows: int = 1) -> Iterator[OutputBatch]:
    """Yield some rows, then raise."""
    for i in range(rows):
        yield numbered("POLYGON ((0 0, 1 0, 1 1, 0 0))", first=i)
    raise error


def lineage(status: str = "ok") -> Lineage:
    """A made-up lineage."""
    return Lineage(
        command="measure",
        input="seen.gpkg",
        layer="seen",
        crs=None,
        options={"ground": "centred", "samples": 256},
        rows_by_status={status: 5},
        ground="a plane for each feature",
        warnings=("one",),
        started="2025-01-02T03:04:05+00:00",
        seconds=1.25,
    )


def text_column(name: str, short_name: str | None = None) -> Column:
    """A column of text under any name."""
    return Column(name, short_name or name[:10], Kind.TEXT, "", None, None, "made up", "", "record")


@contextmanager
def as_nobody() -> Iterator[None]:
    """Rights do not bind the superuser: be somebody else for a while."""
    if os.geteuid() != 0:
        yield
        return
    os.setresuid(NOBODY, NOBODY, 0)
    try:
        yield
    finally:
        os.setresuid(0, 0, 0)
