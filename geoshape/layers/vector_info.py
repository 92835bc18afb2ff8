"""What GDAL knows of a layer before it is read."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyogrio
from pyogrio.raw import open_arrow

from geoshape.errors import ReadError
from geoshape.layers.attributes import is_wkb_field, plain_field
from geoshape.layers.complaints import MEASURED, Failure, one_line, quiet
from geoshape.layers.crs import crs_wkt
from geoshape.layers.layer import Bounds, LayerInfo, LayerSummary
from geoshape.layers.sources import archive_of
from geoshape.layers.wkb import GeometryType

_BYTES_PER_READ = 16_000_000
_MAX_ROWS_PER_READ = 4096
_DEFAULT_ROWS_PER_READ = 1024
_SQL_DRIVERS = frozenset({"GPKG", "SQLite"})


def open_failure(path: str, error: BaseException) -> ReadError:
    """Say why a data set cannot be opened."""
    text = one_line(error)
    if "does not exist in the file system" in text:
        return ReadError(f"{path}: there is no such file; check the path")
    if "not recognized as being in a supported file format" in text:
        if Path(path).is_dir():
            return ReadError(f"{path}: is a folder that GDAL does not take for a layer; name a file in it")
        return ReadError(f"{path}: no format that GDAL reads as a layer; check that the file is a vector layer")
    return ReadError(f"{path}: cannot be opened ({text}); check that the file is whole and not in use")


@contextmanager
def opening(path: str) -> Iterator[list[str]]:
    """Collect complaints, and turn what opening a data set raises into a ReadError."""
    with quiet() as texts:
        try:
            yield texts
        except Failure as error:
            raise open_failure(path, error) from None


def summaries(path: str, source: str) -> tuple[LayerSummary, ...]:
    """List the layers of a data set.

    Parameters
    ----------
    path : str
        What the user gave, for messages.
    source : str
        Data set to open.

    Returns
    -------
    tuple of LayerSummary
        Without the number of rows.

    Raises
    ------
    ReadError
        It cannot be opened.
    """
    with opening(path):
        rows = pyogrio.list_layers(source)
    types = [None if kind is None else str(GeometryType.parse(str(kind))) for _, kind in rows]
    return tuple(LayerSummary(str(name), kind, None) for (name, _), kind in zip(rows, types, strict=True))


def counted(path: str, source: str, summary: LayerSummary) -> LayerSummary:
    """Add the number of rows to what is known of a layer, where the driver knows it without counting."""
    if summary.row_count is not None or summary.geometry_type is None:
        return summary
    with opening(path):
        count = int(pyogrio.read_info(source, layer=summary.name)["features"])
    return replace(summary, row_count=count if count >= 0 else None)


def describe(path: str, source: str, layer: str, where: str | None, bbox: Bounds | None) -> LayerInfo:
    """Open a layer far enough to know its schema, CRS and extent, and that `where` is sound.

    Parameters
    ----------
    path, source, layer : str
        What the user gave, the data set, and the layer in it.
    where : str or None
    bbox : tuple of float or None

    Returns
    -------
    LayerInfo

    Raises
    ------
    ReadError
        The layer cannot be opened, has no geometries, or `where` is no condition that GDAL understands.
    """
    with opening(path) as texts:
        info = pyogrio.read_info(source, layer=layer)
        if info["geometry_type"] is None:
            raise ReadError(f"{path}: layer {layer!r} has no geometry column; name a layer that has one")
        if where is not None:
            _check_where(path, source, info, where)
        with open_arrow(source, layer=layer, use_pyarrow=True, batch_size=1) as (_, reader):
            schema = pa.schema([plain_field(field) for field in reader.schema if not is_wkb_field(field)])
    kind = GeometryType.parse(str(info["geometry_type"]))
    is_measured = any(MEASURED in text for text in texts)
    is_open = kind.base == "Unknown"
    features = int(info["features"])
    kind = GeometryType(kind.base, kind.has_z, is_measured or kind.has_m)
    return LayerInfo(
        path=path,
        source=source,
        layer=layer,
        driver=info["driver"],
        crs_wkt=crs_wkt(path, info["crs"]),
        geometry_type=str(kind),
        has_z=None if is_open and not kind.has_z else kind.has_z,
        has_m=None if is_open and not kind.has_m else kind.has_m,
        geometry_name=info["geometry_name"] or "",
        fid_column=info["fid_column"] or "",
        row_count=features if features >= 0 and where is None and bbox is None else None,
        bounds=_extent(info["total_bounds"], features),
        schema=schema,
        where=where,
        bbox=bbox,
        warnings=tuple(text for text in texts if MEASURED not in text),
        rows_per_read=_rows_per_read(source, features),
    )


def _extent(values: tuple[float, ...] | None, features: int) -> Bounds | None:
    if values is None or features == 0 or not all(map(math.isfinite, values)):
        return None
    x_min, y_min, x_max, y_max = (float(value) for value in values)
    return x_min, y_min, x_max, y_max


def _rows_per_read(source: str, features: int) -> int:
    file = Path(archive_of(source))
    if features <= 0 or not file.is_file():
        return _DEFAULT_ROWS_PER_READ
    bytes_per_row = max(file.stat().st_size // features, 1)
    return int(min(max(_BYTES_PER_READ // bytes_per_row, 1), _MAX_ROWS_PER_READ))


def _check_where(path: str, source: str, info: dict[str, Any], where: str) -> None:
    """Let GDAL judge a condition without reading the layer."""
    layer = info["layer_name"]
    try:
        if info["driver"] in _SQL_DRIVERS:
            _try_in_database(source, layer, where)
            return
        name = layer.replace('"', '""')
        sql = f'SELECT * FROM "{name}" WHERE {where}'  # noqa: S608
        with open_arrow(source, sql=sql, sql_dialect="OGRSQL", use_pyarrow=True, batch_size=1):
            return
    except Failure as error:
        raise where_error(path, where, error, map(str, info["fields"])) from None


def where_error(path: str, where: str, error: BaseException | str, fields: Iterable[str]) -> ReadError:
    """Say why a condition cannot be used, and what it could name."""
    text = one_line(one_line(error).split(" Occurred around", maxsplit=1)[0])
    listed = ", ".join(fields) or "none"
    return ReadError(f"{path}: --where {where!r} cannot be used ({text}); the layer's columns are: {listed}")


def _try_in_database(source: str, layer: str, where: str) -> None:
    # A database looks at every row until one fits, unless it is told that none can.
    for condition in (f"({where}\n) AND 1 = 0", where):
        try:
            with open_arrow(source, layer=layer, where=condition, use_pyarrow=True, batch_size=1) as (_, reader):
                next(reader, None)
                return
        except Failure:
            # Without the brackets the database speaks of what the user wrote.
            if condition == where:
                raise
