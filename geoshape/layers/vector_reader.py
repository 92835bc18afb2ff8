"""Rows of layers that GDAL reads, as streams of Arrow batches."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Self

import pyarrow as pa
import pyogrio
from pyogrio.raw import open_arrow

from geoshape.errors import GeoshapeWarning, ReadError
from geoshape.layers.attributes import is_wkb_field, plain_array
from geoshape.layers.complaints import MEASURED, Failure, one_line, quiet
from geoshape.layers.layer import LayerInfo
from geoshape.layers.recut import Rows
from geoshape.layers.vector_info import opening

_DEFAULT_GEOMETRY_NAME = "wkb_geometry"
# GDAL's own Arrow reader of this format forgets to close the offsets of rows without geometry.
_BROKEN_NULLS = {"FlatGeobuf": "OGR_FLATGEOBUF_STREAM_BASE_IMPL"}


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
        with opening(info.path):
            meta, self._batches = self._context.__enter__()
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
            if text not in self._said and not text.startswith(MEASURED):
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
