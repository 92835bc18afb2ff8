"""GeoParquet 1.1 through pyarrow: row groups with a bounding box column, file metadata written last."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pyproj
import shapely

from geoshape.layers.lineage import PARQUET_KEY
from geoshape.layers.names import free_name
from geoshape.layers.wkb import headers
from geoshape.rings import FloatArray

Rows = tuple[list[pa.Array], pa.BinaryArray]

_VERSION = "1.1.0"
_GROUP_ROWS = 65_536
_GROUP_BYTES = 128_000_000
_EXTENDED_FLAGS = 0xE0
_SIDES = ("xmin", "ymin", "xmax", "ymax")
# Types that GeoParquet 1.1 has a name for.
_TYPE_NAMES = {
    1: "Point",
    2: "LineString",
    3: "Polygon",
    4: "MultiPoint",
    5: "MultiLineString",
    6: "MultiPolygon",
    7: "GeometryCollection",
}
_BOX_TYPE = pa.struct([pa.field(side, pa.float64()) for side in _SIDES])


@dataclass(eq=False)
class _Extent:
    """What the file's metadata says of all geometries, gathered as they pass by."""

    low: FloatArray = field(default_factory=lambda: np.full(3, np.inf))
    high: FloatArray = field(default_factory=lambda: np.full(3, -np.inf))
    types: set[str] = field(default_factory=set)
    is_nameable: bool = True

    def add(self, geometry: pa.BinaryArray, shapes: Any, boxes: FloatArray) -> None:
        head = headers(geometry)
        self.is_nameable &= not head.has_m.any()
        for code, has_z in np.unique(np.stack([head.code, head.has_z], axis=1)[head.is_known], axis=0):
            self.is_nameable &= int(code) in _TYPE_NAMES
            self.types.add(_TYPE_NAMES.get(int(code), "") + (" Z" if has_z else ""))
        self.low[:2] = np.fmin(self.low[:2], _nan_safe(np.fmin, boxes[:, :2]))
        self.high[:2] = np.fmax(self.high[:2], _nan_safe(np.fmax, boxes[:, 2:]))
        if head.has_z.any():
            heights = shapely.get_coordinates(shapes, include_z=True)[:, 2]
            heights = heights[np.isfinite(heights)]
            if len(heights):
                self.low[2] = min(self.low[2], heights.min())
                self.high[2] = max(self.high[2], heights.max())

    def bbox(self) -> list[float] | None:
        if not np.isfinite(self.low[:2]).all():
            return None
        axes = 3 if np.isfinite(self.low[2]) else 2
        return [*self.low[:axes].tolist(), *self.high[:axes].tolist()]


def _nan_safe(reduce: Any, values: FloatArray) -> FloatArray:
    finite = np.where(np.isfinite(values), values, np.nan)
    return np.asarray(reduce.reduce(finite, axis=0, initial=np.nan), dtype=np.float64)


def write_parquet(
    path: Path, schema: pa.Schema, crs_wkt: str | None, rows: Iterable[Rows], lineage: Callable[[], str | None]
) -> None:
    """Write a GeoParquet file.

    Parameters
    ----------
    path : Path
    schema : pyarrow.Schema
        Attributes.
    crs_wkt : str or None
    rows : iterable of (list of pyarrow.Array, pyarrow.BinaryArray)
        Attributes in the schema, and geometries, batch by batch.
    lineage : callable
        Asked for the lineage as JSON after the last batch.

    Raises
    ------
    OSError
        The file cannot be written.
    """
    geometry_name = free_name("geometry", schema.names)
    box_name = free_name("bbox", schema.names)
    stored = pa.schema([*schema, pa.field(geometry_name, pa.binary()), pa.field(box_name, _BOX_TYPE)])
    extent = _Extent()
    with pq.ParquetWriter(path, stored, compression="zstd", write_page_checksum=True) as writer:
        pending: list[pa.RecordBatch] = []
        for arrays, geometry in rows:
            batch = _with_boxes(arrays, geometry, stored, extent)
            pending.append(batch)
            is_full = sum(piece.nbytes for piece in pending) >= _GROUP_BYTES
            if is_full or sum(piece.num_rows for piece in pending) >= _GROUP_ROWS:
                _write_group(writer, pending)
                pending = []
        if pending:
            _write_group(writer, pending)
        metadata = {"geo": json.dumps(_geo(geometry_name, box_name, crs_wkt, extent))}
        text = lineage()
        if text is not None:
            metadata[PARQUET_KEY.decode()] = text
        writer.add_key_value_metadata(metadata)


def _write_group(writer: pq.ParquetWriter, pending: list[pa.RecordBatch]) -> None:
    table = pa.Table.from_batches(pending)
    writer.write_table(table, row_group_size=max(table.num_rows, 1))


def _with_boxes(arrays: list[pa.Array], geometry: pa.BinaryArray, stored: pa.Schema, extent: _Extent) -> pa.RecordBatch:
    shapes = shapely.from_wkb(np.asarray(geometry.to_numpy(zero_copy_only=False), dtype=object), on_invalid="ignore")
    boxes = shapely.bounds(shapes)
    extent.add(geometry, shapes, boxes)
    is_null = np.isnan(boxes).any(axis=1)
    sides = [pa.array(boxes[:, i], pa.float64(), mask=is_null) for i in range(len(_SIDES))]
    box = pa.StructArray.from_arrays(sides, fields=list(_BOX_TYPE), mask=pa.array(is_null))
    return pa.RecordBatch.from_arrays([*arrays, _iso(geometry, shapes), box], schema=stored)


def _iso(geometry: pa.BinaryArray, shapes: Any) -> pa.BinaryArray:
    """Rewrite geometries whose header has the flags of the extended form, which GeoParquet does not know."""
    first = [None if value is None else value[:5] for value in geometry.to_pylist()] if len(geometry) else []
    flagged = np.array([len(head or b"") == 5 and _is_extended(head or b"") for head in first], dtype=np.bool_)
    if not flagged.any():
        return geometry
    wkb = np.asarray(geometry.to_numpy(zero_copy_only=False), dtype=object)
    wkb[flagged] = shapely.to_wkb(shapes[flagged], output_dimension=4, flavor="iso")
    return pa.array(wkb, pa.binary())


def _is_extended(head: bytes) -> bool:
    return bool(head[4 if head[0] else 1] & _EXTENDED_FLAGS)


def _geo(geometry_name: str, box_name: str, crs_wkt: str | None, extent: _Extent) -> dict[str, Any]:
    column: dict[str, Any] = {
        "encoding": "WKB",
        "geometry_types": sorted(extent.types) if extent.is_nameable else [],
        "crs": None if crs_wkt is None else pyproj.CRS.from_wkt(crs_wkt).to_json_dict(),
        "edges": "planar",
        "covering": {"bbox": {side: [box_name, side] for side in _SIDES}},
    }
    bbox = extent.bbox()
    if bbox is not None:
        column["bbox"] = bbox
    return {"version": _VERSION, "primary_column": geometry_name, "columns": {geometry_name: column}}
