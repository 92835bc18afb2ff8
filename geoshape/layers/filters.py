"""GDAL's filters for layers that GDAL does not read: SQL conditions and boxes."""

from __future__ import annotations

import io
import re
from collections import Counter
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import shapely
from pyogrio.raw import read_arrow, write_arrow

from geoshape.layers.complaints import Failure, quiet
from geoshape.layers.formats import FLATGEOBUF
from geoshape.layers.layer import Bounds
from geoshape.layers.storage import stored_arrays, stored_schema
from geoshape.layers.vector_info import where_error
from geoshape.rings import BoolArray

_ROW = "geoshape_row_number"
# Holds attributes without geometry in memory, and is filtered in GDAL's own dialect of SQL.
_DRIVER = "FlatGeobuf"
# Words that GDAL answers from its own store of features, which here is a batch without geometries.
_OF_DRIVERS = frozenset({"FID", "OGR_GEOMETRY", "OGR_GEOM_AREA", "OGR_GEOM_WKT", "OGR_STYLE"})
_TEXT = re.compile(r"'(?:[^']|'')*'")
_WORD = re.compile(r"\w+")


@dataclass(frozen=True)
class Filter:
    """A condition in GDAL's own dialect of SQL, on rows that stand in Arrow batches.

    Attributes
    ----------
    where : str
        The condition.
    """

    where: str

    def keeps(self, attributes: pa.RecordBatch, n_rows: int) -> BoolArray:
        """Say which rows the condition holds for.

        Parameters
        ----------
        attributes : pyarrow.RecordBatch, (n,)
        n_rows : int
            n, which a batch without attributes does not know.

        Returns
        -------
        (n,) bool
            False where the condition is false or null.

        Raises
        ------
        RuntimeError or ValueError
            GDAL cannot use the condition.
        """
        keep = np.zeros(n_rows, dtype=np.bool_)
        if not n_rows:
            return keep
        data = _in_memory(attributes, n_rows)
        with quiet():
            # All columns: this driver finds no row when the one asked about is left out of the result.
            _, rows = read_arrow(data, read_geometry=False, where=self.where)
        keep[rows.column(_ROW).to_numpy()] = True
        return keep


def _in_memory(attributes: pa.RecordBatch, n_rows: int) -> io.BytesIO:
    stored = stored_schema(attributes.schema, attributes.schema.names, FLATGEOBUF)
    arrays = stored_arrays(attributes, stored, FLATGEOBUF, Counter())
    numbers = pa.array(np.arange(n_rows), pa.int64())
    columns = dict(zip(stored.names, arrays, strict=True)) | {_ROW: numbers}
    data = io.BytesIO()
    with quiet():
        write_arrow(pa.table(columns), data, driver=_DRIVER, layer="rows", layer_options={"SPATIAL_INDEX": "NO"})
    data.seek(0)
    return data


def check_where(path: str, schema: pa.Schema, where: str) -> None:
    """Raise a ReadError where GDAL cannot use a condition on these columns.

    Parameters
    ----------
    path : str
    schema : pyarrow.Schema
    where : str

    Raises
    ------
    ReadError
        The condition is no SQL, or asks for what is not there: another column, a feature id, or the geometry.
    """
    for word in _WORD.findall(_TEXT.sub("", where)):
        if word.upper() in _OF_DRIVERS and word.casefold() not in map(str.casefold, schema.names):
            raise where_error(path, where, f"GeoParquet has no {word}", schema.names)
    one = pa.RecordBatch.from_arrays([pa.nulls(1, field.type) for field in schema], schema=schema)
    data = _in_memory(one, 1)
    try:
        with quiet():
            read_arrow(data, sql=f"SELECT * FROM rows WHERE {where}", sql_dialect="OGRSQL")  # noqa: S608
    except Failure as error:
        raise where_error(path, where, error, schema.names) from None


def meets_box(geometry: pa.BinaryArray, bbox: Bounds) -> BoolArray:
    """Say which geometries have a point in common with a box, as GDAL's spatial filter does.

    Parameters
    ----------
    geometry : pyarrow.BinaryArray, (n,)
    bbox : (x_min, y_min, x_max, y_max)

    Returns
    -------
    (n,) bool
        False for null, empty and unreadable geometries.
    """
    wkb = np.asarray(geometry.to_numpy(zero_copy_only=False), dtype=object)
    shapes = shapely.from_wkb(wkb, on_invalid="ignore")
    bounds = shapely.bounds(shapes)
    x_min, y_min, x_max, y_max = bbox
    # NaN of an empty geometry compares as false.
    near = (bounds[:, 0] <= x_max) & (bounds[:, 2] >= x_min) & (bounds[:, 1] <= y_max) & (bounds[:, 3] >= y_min)
    inside = (bounds[:, 0] >= x_min) & (bounds[:, 2] <= x_max) & (bounds[:, 1] >= y_min) & (bounds[:, 3] <= y_max)
    doubtful = np.flatnonzero(near & ~inside)
    box = shapely.box(*bbox)
    near[doubtful] = [_meets(shape, box) for shape in shapes[doubtful]]
    return np.asarray(near, dtype=np.bool_)


def _meets(shape: shapely.Geometry, box: shapely.Geometry) -> bool:
    try:
        return bool(shapely.intersects(shape, box))
    except shapely.GEOSException:
        # An invalid geometry: its envelope has to do.
        return True
