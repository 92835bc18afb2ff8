"""GeoParquet read through pyarrow, a row group after the other, with GDAL's filters."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path, PurePosixPath
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import shapely

from geoshape.errors import ReadError
from geoshape.layers.attributes import plain_array, plain_field, plain_type
from geoshape.layers.crs import crs_wkt
from geoshape.layers.filters import Filter, check_where, meets_box
from geoshape.layers.layer import Bounds, LayerInfo, LayerSummary
from geoshape.layers.recut import Rows
from geoshape.layers.sources import is_virtual
from geoshape.layers.wkb import GeometryType

DRIVER = "Parquet"
_GEO_KEY = b"geo"
_DEFAULT_CRS = "OGC:CRS84"
_NATIVE = {"polygon": shapely.GeometryType.POLYGON, "multipolygon": shapely.GeometryType.MULTIPOLYGON}
_NATIVE_BASES = {"polygon": "Polygon", "multipolygon": "MultiPolygon"}
_BYTES_PER_READ = 16_000_000
_MAX_ROWS_PER_READ = 4096
_WKB = "WKB"

Failure = (OSError, ValueError, KeyError, TypeError, pa.ArrowException)


def summaries(path: str, source: str) -> tuple[LayerSummary, ...]:
    """Give the one layer of a GeoParquet file, called as the file.

    Parameters
    ----------
    path, source : str

    Returns
    -------
    tuple of LayerSummary

    Raises
    ------
    ReadError
        The file is damaged, no Parquet, or in an archive.
    """
    with _opened(path, source) as file:
        kind = None
        if _GEO_KEY in (file.metadata.metadata or {}):
            kind = str(_geometry_type(_primary(path, file)[1]))
        return (LayerSummary(PurePosixPath(source).stem, kind, file.metadata.num_rows),)


def _opened(path: str, source: str) -> pq.ParquetFile:
    if is_virtual(source):
        raise ReadError(f"{path}: GeoParquet is read from plain files only; unpack or fetch it first")
    if Path(source).is_dir():
        raise ReadError(f"{path}: is a folder; name one Parquet file")
    try:
        return pq.ParquetFile(source, page_checksum_verification=True)
    except Failure as error:
        text = " ".join(str(error).split()).rstrip(".")
        raise ReadError(f"{path}: cannot be read as Parquet ({text}); check that the file is whole") from None


def _primary(path: str, file: pq.ParquetFile) -> tuple[str, dict[str, Any]]:
    """Find the primary geometry column and what the file says of it."""
    raw = (file.metadata.metadata or {}).get(_GEO_KEY)
    if raw is None:
        raise ReadError(
            f"{path}: has no geometry column (there is no 'geo' entry of GeoParquet); write it as GeoParquet"
        )
    try:
        geo = json.loads(raw)
        name = geo["primary_column"]
        column = geo["columns"][name]
        encoding = column["encoding"]
    except Failure as error:
        raise ReadError(f"{path}: its 'geo' entry is not GeoParquet's ({error!r}); write the file anew") from None
    if name not in file.schema_arrow.names:
        raise ReadError(f"{path}: its geometry column {name!r} is missing; write the file anew")
    if encoding != _WKB and encoding not in _NATIVE:
        known = ", ".join([_WKB, *_NATIVE])
        raise ReadError(f"{path}: geometry encoding {encoding!r} is not known (known: {known}); write it as WKB")
    return name, column


def _geometry_type(column: dict[str, Any]) -> GeometryType:
    kinds = [GeometryType.parse(name) for name in column.get("geometry_types", [])]
    if column["encoding"] in _NATIVE and not kinds:
        kinds = [GeometryType(_NATIVE_BASES[column["encoding"]])]
    bases = {kind.base for kind in kinds}
    has_z = any(kind.has_z for kind in kinds)
    has_m = any(kind.has_m for kind in kinds)
    if len(bases) == 1:
        return GeometryType(bases.pop(), has_z, has_m)
    if bases == {"Polygon", "MultiPolygon"}:
        return GeometryType("MultiPolygon", has_z, has_m)
    return GeometryType("Unknown", has_z, has_m)


def describe(path: str, source: str, layer: str, where: str | None, bbox: Bounds | None) -> LayerInfo:
    """Open a GeoParquet file far enough to know its schema, CRS and extent.

    Parameters
    ----------
    path, source, layer : str
    where : str or None
    bbox : tuple of float or None

    Returns
    -------
    LayerInfo

    Raises
    ------
    ReadError
        The file is damaged, has no geometry column, or `where` cannot be used.
    """
    with _opened(path, source) as file:
        name, column = _primary(path, file)
        kind = _geometry_type(column)
        hidden = {name, *_covering_roots(column)}
        schema = pa.schema([plain_field(field) for field in file.schema_arrow if field.name not in hidden])
        if where is not None:
            check_where(path, schema, where)
        rows = file.metadata.num_rows
        filtered = where is not None or bbox is not None
        is_open = not column.get("geometry_types")
        return LayerInfo(
            path=path,
            source=source,
            layer=layer,
            driver=DRIVER,
            crs_wkt=crs_wkt(path, column.get("crs", _DEFAULT_CRS)),
            geometry_type=str(kind),
            has_z=None if is_open and not kind.has_z else kind.has_z,
            has_m=None if is_open and not kind.has_m else kind.has_m,
            geometry_name=name,
            fid_column="",
            row_count=None if filtered else rows,
            bounds=_bounds(column),
            schema=schema,
            where=where,
            bbox=bbox,
            warnings=_complaints(column),
            rows_per_read=_rows_per_read(file),
        )


def _complaints(column: dict[str, Any]) -> tuple[str, ...]:
    if column.get("edges", "planar") != "planar":
        return (f"the file says that edges are {column['edges']}; they are taken as straight in its coordinates",)
    return ()


def _bounds(column: dict[str, Any]) -> Bounds | None:
    bbox = column.get("bbox")
    if not bbox or len(bbox) not in {4, 6}:
        return None
    half = len(bbox) // 2
    return float(bbox[0]), float(bbox[1]), float(bbox[half]), float(bbox[half + 1])


def _rows_per_read(file: pq.ParquetFile) -> int:
    metadata = file.metadata
    size = sum(metadata.row_group(i).total_byte_size for i in range(metadata.num_row_groups))
    bytes_per_row = max(size // max(metadata.num_rows, 1), 1)
    return int(min(max(_BYTES_PER_READ // bytes_per_row, 1), _MAX_ROWS_PER_READ))


def _covering(column: dict[str, Any]) -> dict[str, list[str]]:
    bbox = (column.get("covering") or {}).get("bbox") or {}
    return bbox if {"xmin", "ymin", "xmax", "ymax"} <= bbox.keys() else {}


def _covering_roots(column: dict[str, Any]) -> set[str]:
    return {path[0] for path in _covering(column).values()}


def _row_groups(file: pq.ParquetFile, column: dict[str, Any], bbox: Bounds | None) -> list[int]:
    """List the row groups whose statistics do not rule the box out."""
    every = list(range(file.metadata.num_row_groups))
    covering = _covering(column)
    if bbox is None or not covering:
        return every
    return [i for i in every if _may_meet(file.metadata.row_group(i), covering, bbox)]


def _may_meet(group: Any, covering: dict[str, list[str]], bbox: Bounds) -> bool:
    statistics = {}
    for i in range(group.num_columns):
        chunk = group.column(i)
        if chunk.statistics is not None and chunk.statistics.has_min_max:
            statistics[chunk.path_in_schema] = chunk.statistics
    found = {side: statistics.get(".".join(path)) for side, path in covering.items()}
    x_min, y_min, x_max, y_max = (found[side] for side in ("xmin", "ymin", "xmax", "ymax"))
    if x_min is None or y_min is None or x_max is None or y_max is None:
        return True
    return bool(x_min.min <= bbox[2] and x_max.max >= bbox[0] and y_min.min <= bbox[3] and y_max.max >= bbox[1])


def stream(info: LayerInfo) -> Iterator[Rows]:
    """Read a GeoParquet file batch by batch.

    Parameters
    ----------
    info : LayerInfo

    Yields
    ------
    attributes : pyarrow.RecordBatch
    geometry : pyarrow.BinaryArray

    Raises
    ------
    ReadError
        The file is damaged.
    """
    with _opened(info.path, info.source) as file:
        name, column = _primary(info.path, file)
        groups = _row_groups(file, column, info.bbox)
        wanted = [*info.schema.names, name]
        batches = file.iter_batches(batch_size=info.rows_per_read, row_groups=groups, columns=wanted)
        row_filter = Filter(info.where) if info.where is not None else None
        while (batch := _next(info, batches)) is not None:
            rows = _plain_rows(batch, name, column["encoding"], info.schema)
            yield _chosen(rows, row_filter, info.bbox)


def _next(info: LayerInfo, batches: Iterator[pa.RecordBatch]) -> pa.RecordBatch | None:
    try:
        return next(batches, None)
    except Failure as error:
        text = " ".join(str(error).split()).rstrip(".")
        raise ReadError(f"{info.path}: cannot be read to its end ({text}); check that the file is whole") from None


def _plain_rows(batch: pa.RecordBatch, name: str, encoding: str, schema: pa.Schema) -> Rows:
    geometry = batch.column(batch.schema.get_field_index(name))
    if isinstance(geometry.type, pa.BaseExtensionType):
        geometry = geometry.storage
    wkb = geometry.cast(pa.binary()) if encoding == _WKB else _native_wkb(geometry, encoding)
    columns = [batch.column(batch.schema.get_field_index(field.name)) for field in schema]
    plain = [plain_array(array, field.type) for array, field in zip(columns, schema, strict=True)]
    return pa.RecordBatch.from_arrays(plain, schema=schema), wkb


def _chosen(rows: Rows, row_filter: Filter | None, bbox: Bounds | None) -> Rows:
    attributes, geometry = rows
    keep = np.ones(len(geometry), dtype=np.bool_)
    if bbox is not None:
        keep &= meets_box(geometry, bbox)
    if row_filter is not None:
        keep &= row_filter.keeps(attributes, len(geometry))
    if keep.all():
        return rows
    index = pa.array(np.flatnonzero(keep))
    return attributes.take(index), geometry.take(index)


def _native_wkb(geometry: pa.Array, encoding: str) -> pa.BinaryArray:
    """Turn nested lists of coordinates into well-known binary; a null stays null."""
    is_valid = np.asarray(geometry.is_valid().to_numpy(zero_copy_only=False), dtype=np.bool_)
    filled = geometry.drop_null().cast(_nested(geometry.type))
    offsets = []
    level = filled
    while pa.types.is_list(level.type):
        start = level.offsets.to_numpy()
        offsets.append((start - start[0]).astype(np.int64))
        level = level.flatten()
    axes = [level.field(axis).to_numpy(zero_copy_only=False) for axis in ("x", "y", "z") if _has_axis(level.type, axis)]
    shapes = shapely.from_ragged_array(_NATIVE[encoding], np.stack(axes, axis=1), tuple(reversed(offsets)))
    wkb = np.full(len(geometry), None, dtype=object)
    wkb[is_valid] = shapely.to_wkb(shapes, output_dimension=3, flavor="iso")
    return pa.array(wkb, pa.binary())


def _has_axis(kind: pa.StructType, axis: str) -> bool:
    return bool(kind.get_field_index(axis) >= 0)


def _nested(kind: pa.DataType) -> pa.DataType:
    if pa.types.is_list(kind) or pa.types.is_large_list(kind) or pa.types.is_fixed_size_list(kind):
        return pa.list_(_nested(kind.value_type))
    return plain_type(kind)
