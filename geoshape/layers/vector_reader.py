"""Layers that GDAL reads, as streams of Arrow batches."""

from __future__ import annotations

import math
import warnings
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any, Self

import pyarrow as pa
import pyogrio
import pyproj
from pyogrio.raw import open_arrow

from geoshape.errors import GeoshapeWarning, ReadError
from geoshape.layers.attributes import is_wkb_field, plain_array, plain_field
from geoshape.layers.layer import Bounds, LayerInfo, LayerSummary
from geoshape.layers.recut import Rows
from geoshape.layers.sources import archive_of
from geoshape.layers.wkb import GeometryType

_BYTES_PER_READ = 16_000_000
_MAX_ROWS_PER_READ = 4096
_DEFAULT_ROWS_PER_READ = 1024
_DEFAULT_GEOMETRY_NAME = "wkb_geometry"
_MEASURED = "Measured (M) geometry types are not supported"
# Warnings that pyogrio ascribes to its caller.
_FROM_PYOGRIO = (_MEASURED, "'crs' was not provided")
# Names that GeoPackage (OGC 12-128r19, clause 1.1.2.1.2) and GDAL give to the absence of a CRS.
_NO_CRS = frozenset({"undefined cartesian srs", "undefined geographic srs", "undefined srs"})
# GDAL's own Arrow reader of this format forgets to close the offsets of rows without geometry.
_BROKEN_NULLS = {"FlatGeobuf": "OGR_FLATGEOBUF_STREAM_BASE_IMPL"}
_SQL_DRIVERS = frozenset({"GPKG", "SQLite"})

Failure = (RuntimeError, OSError, ValueError, pa.ArrowException)


def one_line(error: BaseException | str) -> str:
    """Give an error's text as one line."""
    return " ".join(str(error).split()).rstrip(".;")


@contextmanager
def quiet() -> Iterator[list[str]]:
    """Collect what GDAL complains of, instead of having it printed; other warnings are passed on at the end."""
    texts: list[str] = []
    others: dict[tuple[type[Warning], str], warnings.WarningMessage] = {}
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        try:
            yield texts
        finally:
            for item in caught:
                text = one_line(str(item.message))
                if "pyogrio" in item.filename or text.startswith(_FROM_PYOGRIO):
                    texts.append(text)
                else:
                    others.setdefault((item.category, text), item)
    for item in others.values():
        warnings.warn_explicit(item.message, item.category, item.filename, item.lineno)


def _open_failure(path: str, error: BaseException) -> ReadError:
    text = one_line(error)
    if "does not exist in the file system" in text:
        return ReadError(f"{path}: there is no such file; check the path")
    if "not recognized as being in a supported file format" in text:
        if Path(path).is_dir():
            return ReadError(f"{path}: is a folder that GDAL does not take for a layer; name a file in it")
        return ReadError(f"{path}: no format that GDAL reads as a layer; check that the file is a vector layer")
    return ReadError(f"{path}: cannot be opened ({text}); check that the file is whole and not in use")


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
    try:
        with quiet():
            rows = pyogrio.list_layers(source)
    except Failure as error:
        raise _open_failure(path, error) from None
    types = [None if kind is None else str(GeometryType.parse(str(kind))) for _, kind in rows]
    return tuple(LayerSummary(str(name), kind, None) for (name, _), kind in zip(rows, types, strict=True))


def counted(path: str, source: str, summary: LayerSummary) -> LayerSummary:
    """Add the number of rows to what is known of a layer, where the driver knows it without counting."""
    if summary.row_count is not None or summary.geometry_type is None:
        return summary
    try:
        with quiet():
            count = int(pyogrio.read_info(source, layer=summary.name)["features"])
    except Failure as error:
        raise _open_failure(path, error) from None
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
    with quiet() as texts:
        try:
            info = pyogrio.read_info(source, layer=layer)
        except Failure as error:
            raise _open_failure(path, error) from None
        if info["geometry_type"] is None:
            raise ReadError(f"{path}: layer {layer!r} has no geometry column; name a layer that has one")
        if where is not None:
            _check_where(path, source, info, where)
        try:
            with open_arrow(source, layer=layer, use_pyarrow=True, batch_size=1) as (_, reader):
                schema = pa.schema([plain_field(field) for field in reader.schema if not is_wkb_field(field)])
        except Failure as error:
            raise _open_failure(path, error) from None
    kind = GeometryType.parse(str(info["geometry_type"]))
    is_measured = any(_MEASURED in text for text in texts)
    is_open = kind.base == "Unknown"
    features = int(info["features"])
    kind = GeometryType(kind.base, kind.has_z, is_measured or kind.has_m)
    return LayerInfo(
        path=path,
        source=source,
        layer=layer,
        driver=info["driver"],
        crs_wkt=_wkt(info["crs"]),
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
        warnings=tuple(text for text in texts if _MEASURED not in text),
        rows_per_read=_rows_per_read(source, features),
    )


def _extent(values: tuple[float, ...] | None, features: int) -> Bounds | None:
    if values is None or features == 0 or not all(map(math.isfinite, values)):
        return None
    x_min, y_min, x_max, y_max = (float(value) for value in values)
    return x_min, y_min, x_max, y_max


def _wkt(crs: str | None) -> str | None:
    if not crs:
        return None
    parsed = pyproj.CRS.from_user_input(crs)
    return None if parsed.name.lower() in _NO_CRS else parsed.to_wkt()


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


def where_error(path: str, where: str, error: BaseException, fields: Iterable[str]) -> ReadError:
    """Say why a condition cannot be used, and what it could name."""
    text = one_line(one_line(error).split(" Occurred around", maxsplit=1)[0])
    return ReadError(f"{path}: --where {where!r} cannot be used ({text}); the layer's columns are: {', '.join(fields)}")


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


def stream(info: LayerInfo) -> Iterator[Rows]:
    """Read a layer batch by batch, as GDAL hands them out.

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
        The file ends too early or is damaged.
    """
    done = 0
    with _option_for(info.driver), _Reader(info) as reader:
        while (batch := reader.next_batch(done)) is not None:
            attributes, geometry = _plain_rows(batch, reader.geometry_name, info.schema)
            done += len(geometry)
            yield attributes, geometry
    _check_end(info, done)


def _check_end(info: LayerInfo, done: int) -> None:
    """Find out whether the file was whole: not every stream tells that it ended before its time."""
    if info.driver in _BROKEN_NULLS:
        count = info.row_count
        if not (done >= count if count is not None else is_whole(info.source, None, layer=info.layer)):
            raise ReadError(f"{info.path}: the file is cut off; fetch or copy it again")
    elif info.row_count is not None and done < info.row_count:
        # The count that a file keeps may be out of date; asked for a condition, a database looks closely.
        filtered = open_arrow(info.source, layer=info.layer, where="1 = 1", read_geometry=False, use_pyarrow=True)
        with quiet():
            try:
                with filtered as (_, reader):
                    count = sum(batch.num_rows for batch in reader)
            except Failure as error:
                raise _damage(info, done, one_line(error)) from None
        if count != done:
            raise _damage(info, done, f"{count} rows are there")


def _damage(info: LayerInfo, done: int, reason: str) -> ReadError:
    return ReadError(
        f"{info.path}: layer {info.layer!r} cannot be read after row {done} ({reason}); check that the file is whole"
    )


def is_whole(source: str | Path, row_count: int | None, *, layer: str | None = None) -> bool:
    """Go through a FlatGeobuf file to its end: neither its writer nor our way of reading tells when it is cut off.

    Parameters
    ----------
    source : str or Path
    row_count : int or None
        Rows it should hold, where that is known.
    layer : str or None

    Returns
    -------
    bool
    """
    # The reader that loses track of nulls is the one that notices the end.
    with quiet():
        try:
            with open_arrow(source, layer=layer, use_pyarrow=True) as (_, reader):
                rows = sum(batch.num_rows for batch in reader)
        except Failure:
            return False
    return row_count is None or rows == row_count


class _Reader:
    """GDAL's stream with its complaints turned into errors; what the consumer does between batches is its own."""

    def __init__(self, info: LayerInfo) -> None:
        self._info = info
        self._said = set(info.warnings)
        self.geometry_name = _DEFAULT_GEOMETRY_NAME

    def __enter__(self) -> Self:
        info = self._info
        self._context = open_arrow(
            info.source,
            layer=info.layer,
            where=info.where,
            bbox=info.bbox,
            use_pyarrow=True,
            batch_size=info.rows_per_read,
        )
        with quiet():
            try:
                meta, self._batches = self._context.__enter__()
            except Failure as error:
                raise _open_failure(info.path, error) from None
        self.geometry_name = meta["geometry_name"] or _DEFAULT_GEOMETRY_NAME
        return self

    def __exit__(self, *details: object) -> None:
        self._context.__exit__(None, None, None)

    def next_batch(self, done: int) -> pa.RecordBatch | None:
        """Read the next batch; None at the end."""
        with quiet() as texts:
            try:
                batch = self._batches.read_next_batch()
            except StopIteration:
                batch = None
            except Failure as error:
                raise _damage(self._info, done, one_line(error)) from None
        for text in texts:
            if text not in self._said:
                self._said.add(text)
                warnings.warn(f"{self._info.path}: {text}", GeoshapeWarning, stacklevel=2)
        return batch


@contextmanager
def _option_for(driver: str) -> Iterator[None]:
    option = _BROKEN_NULLS.get(driver)
    if option is None:
        yield
        return
    before = pyogrio.get_gdal_config_option(option)
    pyogrio.set_gdal_config_options({option: True})
    try:
        yield
    finally:
        pyogrio.set_gdal_config_options({option: before})


def _plain_rows(batch: pa.RecordBatch, geometry_name: str, schema: pa.Schema) -> Rows:
    fields = list(batch.schema)
    marked = [i for i, field in enumerate(fields) if is_wkb_field(field)]
    named = [i for i in marked if fields[i].name == geometry_name]
    geometry = batch.column((named or marked)[0])
    if isinstance(geometry.type, pa.BaseExtensionType):
        geometry = geometry.storage
    columns = [batch.column(i) for i in range(len(fields)) if i not in marked]
    plain = [plain_array(column, field.type) for column, field in zip(columns, schema, strict=True)]
    return pa.RecordBatch.from_arrays(plain, schema=schema), geometry.cast(pa.binary())
