"""Attributes as a format can store them: types it lacks are turned into ones it has, losses are counted."""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Callable, Sequence

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.types as pt

from geoshape.layers.attributes import SUBTYPE
from geoshape.layers.formats import CSV, GEOJSON, GEOJSON_SEQ, GEOPARQUET, SHAPEFILE, Format

DBF_NUMBER_WIDTH = 24
"""Room for any float64 in 17 significant digits with sign and exponent: ``-1.2345678901234567e-300``."""

DBF_TEXT_BYTES = 254
WIDTH = b"GDAL:OGR:width"

_FINITE_ONLY = frozenset({SHAPEFILE, GEOJSON, GEOJSON_SEQ})
_JSON = {SUBTYPE: b"JSON"}

Losses = Counter[str]


def is_dbf_number(kind: pa.DataType) -> bool:
    """Whether a shapefile's numbers of this type are written as text of full precision and declared numbers after."""
    return bool(pt.is_floating(kind) or pt.is_decimal(kind))


def stored_schema(schema: pa.Schema, names: Sequence[str], form: Format) -> pa.Schema:
    """Give the schema in which a format stores attributes.

    Parameters
    ----------
    schema : pyarrow.Schema
        Attributes and columns as they come.
    names : sequence of str
        Names to write.
    form : Format

    Returns
    -------
    pyarrow.Schema
    """
    return pa.schema([_stored_field(field, name, form) for field, name in zip(schema, names, strict=True)])


def _stored_field(field: pa.Field, name: str, form: Format) -> pa.Field:
    kind = _stored_type(field.type, form)
    metadata = dict(field.metadata or {})
    if form is SHAPEFILE and is_dbf_number(field.type):
        metadata[WIDTH] = str(DBF_NUMBER_WIDTH).encode()
    if _is_structured(field.type) and pt.is_string(kind):
        metadata |= _JSON
    return pa.field(name, kind, metadata=metadata or None)


def _is_structured(kind: pa.DataType) -> bool:
    return bool(pt.is_nested(kind))


def _is_simple_list(kind: pa.DataType) -> bool:
    if not pt.is_list(kind):
        return False
    value = kind.value_type
    return bool(pt.is_boolean(value) or pt.is_integer(value) or pt.is_floating(value) or pt.is_string(value))


def _stored_type(kind: pa.DataType, form: Format) -> pa.DataType:
    if form is GEOPARQUET:
        return kind
    if form is SHAPEFILE and is_dbf_number(kind):
        return pa.string()
    for matches, stored in _REPLACED:
        if matches(kind):
            return stored
    if _is_structured(kind) and (form is CSV or not _is_simple_list(kind)):
        return pa.string()
    if form is CSV and pt.is_binary(kind):
        return pa.string()
    return kind


def _is_exotic(kind: pa.DataType) -> bool:
    return bool(pt.is_null(kind) or pt.is_duration(kind) or pt.is_interval(kind))


_REPLACED: tuple[tuple[Callable[[pa.DataType], bool], pa.DataType], ...] = (
    (pt.is_uint32, pa.int64()),
    (pt.is_uint64, pa.int64()),
    (pt.is_float16, pa.float32()),
    (pt.is_decimal, pa.float64()),
    (pt.is_int8, pa.int16()),
    (pt.is_uint8, pa.int16()),
    (pt.is_uint16, pa.int32()),
    (pt.is_date64, pa.date32()),
    (pt.is_time, pa.time32("ms")),
    (_is_exotic, pa.string()),
)


def stored_arrays(batch: pa.RecordBatch, stored: pa.Schema, form: Format, losses: Losses) -> list[pa.Array]:
    """Turn a batch's attributes into what a format stores.

    Parameters
    ----------
    batch : pyarrow.RecordBatch, (n,)
    stored : pyarrow.Schema
        From `stored_schema`.
    form : Format
    losses : Counter
        Gets the number of values that the format cannot hold, by what became of them.

    Returns
    -------
    list of pyarrow.Array, each (n,)
        What the format cannot hold is null; text too long for a shapefile is left for its driver to cut.
    """
    return [_stored_array(batch.column(i), field, form, losses) for i, field in enumerate(stored)]


def _stored_array(array: pa.Array, field: pa.Field, form: Format, losses: Losses) -> pa.Array:
    if form in _FINITE_ONLY and pt.is_floating(array.type):
        array = _finite(array, field.name, form, losses)
    if form is SHAPEFILE and is_dbf_number(array.type):
        return pc.utf8_lpad(_number_text(array), DBF_NUMBER_WIDTH)
    if array.type != field.type:
        array = _converted(array, field, form, losses)
    if form is SHAPEFILE:
        _count_cuts(array, field.name, losses)
    return array


def _finite(array: pa.Array, name: str, form: Format, losses: Losses) -> pa.Array:
    is_finite = pc.is_finite(array)
    n_lost = pc.sum(pc.and_(pc.invert(is_finite), pc.invert(pc.is_nan(array)))).as_py() or 0
    if n_lost:
        losses[f"{name}: infinite values, which {form.name} cannot hold, are null"] += n_lost
    return pc.if_else(is_finite, array, pa.scalar(None, array.type))


def _number_text(array: pa.Array) -> pa.StringArray:
    return (pc.cast(array, pa.float64()) if pt.is_decimal(array.type) else array).cast(pa.string())


def _converted(array: pa.Array, field: pa.Field, form: Format, losses: Losses) -> pa.Array:
    kind = array.type
    if pt.is_string(field.type):
        if pt.is_null(kind):
            return pa.nulls(len(array), pa.string())
        return pa.array([_as_text(value) for value in array.to_pylist()], pa.string())
    if pt.is_uint64(kind):
        too_large = pc.greater(array, pa.scalar(np.iinfo(np.int64).max, pa.uint64()))
        n_lost = pc.sum(too_large).as_py() or 0
        if n_lost:
            losses[f"{field.name}: values above 2^63, which {form.name} cannot hold, are null"] += n_lost
        array = pc.if_else(too_large, pa.scalar(None, kind), array)
    return pc.cast(array, field.type, safe=False)


def _as_text(value: object) -> str | None:
    if value is None:
        return None
    if isinstance(value, bytes):
        return value.hex()
    if isinstance(value, (list, dict, tuple)):
        return json.dumps(value, ensure_ascii=False, default=_leaf)
    return str(value)


def _leaf(value: object) -> str:
    return value.hex() if isinstance(value, bytes) else str(value)


def _count_cuts(array: pa.Array, name: str, losses: Losses) -> None:
    if not (pt.is_string(array.type) or pt.is_binary(array.type)):
        return
    bytes_of_text = pc.multiply(pc.binary_length(array), 2 if pt.is_binary(array.type) else 1)
    n_cut = pc.sum(pc.greater(bytes_of_text, DBF_TEXT_BYTES)).as_py() or 0
    if n_cut:
        losses[f"{name}: text longer than {DBF_TEXT_BYTES} bytes is cut"] += n_cut


def loss_texts(losses: Losses) -> tuple[str, ...]:
    """Put counted losses into sentences.

    Examples
    --------
    >>> loss_texts(Counter({"name: text longer than 254 bytes is cut": 3}))
    ('name: text longer than 254 bytes is cut (3 rows)',)
    """
    return tuple(f"{text} ({count} row{'s' if count > 1 else ''})" for text, count in losses.items())
