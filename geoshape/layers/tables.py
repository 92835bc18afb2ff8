"""Measured values as Arrow columns: typed, and null where a value is not known."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pyarrow as pa

from geoshape.columns import Column, Kind

COMMENT = b"GDAL:OGR:comment"

_TYPES = {Kind.NUMBER: pa.float64(), Kind.COUNT: pa.int64(), Kind.TEXT: pa.string()}


def column_fields(columns: Sequence[Column]) -> list[pa.Field]:
    """Describe columns as Arrow fields, with unit and meaning as a comment.

    Parameters
    ----------
    columns : sequence of Column

    Returns
    -------
    list of pyarrow.Field
        float64 for numbers, int64 for counts, string for text; all nullable.
    """
    return [pa.field(column.name, _TYPES[column.kind], metadata={COMMENT: _comment(column)}) for column in columns]


def _comment(column: Column) -> str:
    unit = f" [{column.unit}]" if column.unit not in {"", "1"} else ""
    return f"{column.meaning}{unit}"


def columns_to_arrow(columns: Sequence[Column], values: Mapping[str, Any]) -> list[pa.Array]:
    """Turn measured values into Arrow arrays.

    Parameters
    ----------
    columns : sequence of Column
    values : mapping of str to (n,) array or sequence
        By full name: numbers and counts as floats (counts may be integers) with NaN as null, text as str or None.

    Returns
    -------
    list of pyarrow.Array, each (n,)
        In the columns' order. What is not finite is null; text that is None or NaN is null.

    Raises
    ------
    KeyError
        Values of a column are missing.

    Examples
    --------
    >>> from geoshape.columns import columns_for
    >>> from geoshape.options import MeasureOptions
    >>> chosen = [c for c in columns_for(MeasureOptions()) if c.name in ("area_m2", "part_count")]
    >>> values = {"area_m2": [2.5, float("nan")], "part_count": [1.0, float("nan")]}
    >>> [array.to_pylist() for array in columns_to_arrow(chosen, values)]
    [[2.5, None], [1, None]]
    """
    return [_TO_ARROW[column.kind](values[column.name]) for column in columns]


def _numbers(values: Any) -> pa.Array:
    floats = np.asarray(values, dtype=np.float64)
    return pa.array(floats, pa.float64(), mask=~np.isfinite(floats))


def _counts(values: Any) -> pa.Array:
    array = np.asarray(values)
    if np.issubdtype(array.dtype, np.integer):
        return pa.array(array.astype(np.int64), pa.int64())
    floats = array.astype(np.float64)
    is_null = ~np.isfinite(floats)
    return pa.array(np.where(is_null, 0, np.rint(floats)).astype(np.int64), pa.int64(), mask=is_null)


def _texts(values: Any) -> pa.Array:
    return pa.array(np.asarray(values, dtype=object), pa.string(), from_pandas=True)


_TO_ARROW = {Kind.NUMBER: _numbers, Kind.COUNT: _counts, Kind.TEXT: _texts}


def add_columns(
    attributes: pa.RecordBatch, columns: Sequence[Column], values: Mapping[str, Any], schema: pa.Schema
) -> pa.RecordBatch:
    """Put measured columns behind the attributes of the same rows.

    Parameters
    ----------
    attributes : pyarrow.RecordBatch, (n,)
    columns : sequence of Column
    values : mapping of str to (n,) array
        As for `columns_to_arrow`.
    schema : pyarrow.Schema
        Of the result: an output plan's.

    Returns
    -------
    pyarrow.RecordBatch, (n,)
    """
    return pa.RecordBatch.from_arrays([*attributes.columns, *columns_to_arrow(columns, values)], schema=schema)
