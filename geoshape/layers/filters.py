"""GDAL's filters for layers that GDAL does not read: SQL conditions and boxes."""

from __future__ import annotations

import io
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.types as pt
import shapely
from pyogrio.raw import read_arrow, write_arrow

from geoshape.layers.complaints import Failure, quiet
from geoshape.layers.layer import Bounds
from geoshape.layers.vector_info import where_error
from geoshape.rings import BoolArray

_ROW = "geoshape_row_number"
# Holds attributes without geometry in memory, and is filtered in GDAL's own dialect of SQL.
_DRIVER = "FlatGeobuf"


@dataclass(frozen=True)
class Filter:
    """A condition in GDAL's own dialect of SQL, on rows that stand in Arrow batches.

    Attributes
    ----------
    where : str
        The condition.
    """

    where: str

    def keeps(self, attributes: pa.RecordBatch) -> BoolArray:
        """Say which rows the condition holds for.

        Parameters
        ----------
        attributes : pyarrow.RecordBatch, (n,)

        Returns
        -------
        (n,) bool
            False where the condition is false or null.

        Raises
        ------
        RuntimeError or ValueError
            GDAL cannot use the condition.
        """
        keep = np.zeros(attributes.num_rows, dtype=np.bool_)
        if not attributes.num_rows:
            return keep
        data = _in_memory(attributes)
        with quiet():
            # All columns: this driver finds no row when the one asked about is left out of the result.
            _, rows = read_arrow(data, read_geometry=False, where=self.where)
        keep[rows.column(_ROW).to_numpy()] = True
        return keep


def _in_memory(attributes: pa.RecordBatch) -> io.BytesIO:
    fields = [(field, attributes.column(i)) for i, field in enumerate(attributes.schema) if _is_plain(field.type)]
    numbers = pa.array(np.arange(attributes.num_rows), pa.int64())
    columns = {field.name: column for field, column in fields} | {_ROW: numbers}
    data = io.BytesIO()
    with quiet():
        write_arrow(pa.table(columns), data, driver=_DRIVER, layer="rows", layer_options={"SPATIAL_INDEX": "NO"})
    data.seek(0)
    return data


def _is_plain(kind: pa.DataType) -> bool:
    return not (pt.is_nested(kind) or pt.is_binary(kind) or pt.is_null(kind))


def check_where(path: str, schema: pa.Schema, where: str) -> None:
    """Raise a ReadError where GDAL cannot use a condition on these columns."""
    one = pa.RecordBatch.from_arrays([pa.nulls(1, field.type) for field in schema], schema=schema)
    data = _in_memory(one)
    try:
        with quiet():
            name = '"rows"'
            read_arrow(data, sql=f"SELECT * FROM {name} WHERE {where}", sql_dialect="OGRSQL")  # noqa: S608
            data.seek(0)
            read_arrow(data, where=where)
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
