"""Attributes in a few plain Arrow types, so that what comes later need not know every variant."""

from __future__ import annotations

import warnings

import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.types as pt

from geoshape.errors import GeoshapeWarning

SUBTYPE = b"GDAL:OGR:subtype"
_JSON = {SUBTYPE: b"JSON"}
# Constraints of the source do not hold in the result (a part of a feature repeats its feature's key).
_DROPPED_KEYS = frozenset(
    {b"GDAL:OGR:unique", b"GDAL:OGR:domain_name", b"GDAL:OGR:default", b"GDAL:OGR:precision"}
    | {b"ARROW:extension:name", b"ARROW:extension:metadata", b"PARQUET:field_id"}
)
_WKB_EXTENSIONS = frozenset({b"geoarrow.wkb", b"ogc.wkb"})


def is_wkb_field(field: pa.Field) -> bool:
    """Whether a field says that it holds geometries."""
    if isinstance(field.type, pa.BaseExtensionType):
        return field.type.extension_name.encode() in _WKB_EXTENSIONS
    return bool((field.metadata or {}).get(b"ARROW:extension:name") in _WKB_EXTENSIONS)


def plain_field(field: pa.Field) -> pa.Field:
    """Give a field its plain type: no dictionaries, views, large offsets or extensions."""
    metadata = {key: value for key, value in (field.metadata or {}).items() if key not in _DROPPED_KEYS}
    if isinstance(field.type, pa.BaseExtensionType) and field.type.extension_name == "arrow.json":
        metadata |= _JSON
    return pa.field(field.name, plain_type(field.type), metadata=metadata or None)


def plain_type(kind: pa.DataType) -> pa.DataType:
    """Give the plain form of a type.

    Examples
    --------
    >>> plain_type(pa.dictionary(pa.int8(), pa.large_string()))
    DataType(string)
    """
    if isinstance(kind, pa.BaseExtensionType):
        return plain_type(kind.storage_type)
    if pt.is_dictionary(kind):
        return plain_type(kind.value_type)
    if pt.is_large_string(kind) or pt.is_string_view(kind):
        return pa.string()
    if pt.is_large_binary(kind) or pt.is_binary_view(kind) or pt.is_fixed_size_binary(kind):
        return pa.binary()
    if pt.is_list(kind) or pt.is_large_list(kind) or pt.is_fixed_size_list(kind):
        return pa.list_(plain_type(kind.value_type))
    return kind


def plain_array(array: pa.Array, kind: pa.DataType) -> pa.Array:
    """Turn an array into its plain type.

    Parameters
    ----------
    array : pyarrow.Array, (n,)
    kind : pyarrow.DataType
        What `plain_type` gave for the array's type.

    Returns
    -------
    pyarrow.Array, (n,)
        Text that is not UTF-8 is taken as Windows-1252, with a GeoshapeWarning.
    """
    if isinstance(array.type, pa.BaseExtensionType):
        array = array.storage
    if array.type != kind:
        array = pc.cast(array, kind)
    return _valid_text(array) if pt.is_string(kind) else array


def _valid_text(array: pa.StringArray) -> pa.StringArray:
    raw = array.view(pa.binary())
    try:
        raw.cast(pa.string())
    except pa.ArrowInvalid:
        warnings.warn("text that is not UTF-8 was taken as Windows-1252", GeoshapeWarning, stacklevel=2)
        return pa.array([None if text is None else _decoded(text) for text in raw.to_pylist()], pa.string())
    return array


def _decoded(text: bytes) -> str:
    try:
        return text.decode()
    except UnicodeDecodeError:
        return text.decode("cp1252", errors="replace")
