"""A layer kept aside on disk for commands that go over it more than once."""

from __future__ import annotations

import shutil
import tempfile
from collections.abc import Iterator, Sequence
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import Self

import pyarrow as pa

from geoshape.errors import WriteError
from geoshape.layers.layer import LayerBatch

_GEOMETRY = "wkb"


class Spool:
    """Batches of attributes and geometries in a temporary file: written once, then read as often as needed.

    Parameters
    ----------
    schema : pyarrow.Schema
        Of the attributes.
    folder : Path, optional
        Where the file goes; the system's temporary folder by default.

    Raises
    ------
    WriteError
        The file cannot be made.

    Examples
    --------
    >>> rows = pa.record_batch({"height_m": pa.array([3.0, None])})
    >>> with Spool(rows.schema) as spool:
    ...     spool.write(rows, pa.array([b"", None], pa.binary()))
    ...     spool.read_columns(["height_m"]).to_pydict()
    {'height_m': [3.0, None]}
    """

    def __init__(self, schema: pa.Schema, folder: Path | None = None) -> None:
        self.schema = schema
        self.n_rows = 0
        # The geometry stands last, whatever attributes are called.
        self._stored = pa.schema([*schema, pa.field(_GEOMETRY, pa.binary())])
        self._writer: pa.ipc.RecordBatchFileWriter | None = None
        try:
            self._folder = Path(tempfile.mkdtemp(prefix=".geoshape-spool-", dir=folder))
            self._path = self._folder / "rows.arrow"
            self._sink = pa.OSFile(str(self._path), "wb")
            self._writer = pa.ipc.new_file(self._sink, self._stored)
        except OSError as error:
            raise WriteError(f"no temporary file can be made ({error}); set TMPDIR to a folder with room") from None

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def write(self, attributes: pa.RecordBatch, geometry: pa.BinaryArray) -> None:
        """Append rows.

        Parameters
        ----------
        attributes : pyarrow.RecordBatch, (n,)
            In the spool's schema.
        geometry : pyarrow.BinaryArray, (n,)

        Raises
        ------
        WriteError
            The disk is full, or reading has begun.
        """
        if self._writer is None:
            raise WriteError("rows cannot be added to a spool that is being read; write all rows first")
        batch = pa.RecordBatch.from_arrays([*attributes.columns, geometry], schema=self._stored)
        try:
            self._writer.write_batch(batch)
        except OSError as error:
            raise self._failure(error) from None
        self.n_rows += len(geometry)

    def _finish(self) -> None:
        if self._writer is None:
            return
        try:
            self._writer.close()
            self._sink.close()
        except OSError as error:
            raise self._failure(error) from None
        self._writer = None

    def _failure(self, error: OSError) -> WriteError:
        return WriteError(f"{self._path}: rows cannot be kept aside ({error}); make room on the disk")

    def batches(self) -> Iterator[LayerBatch]:
        """Read all rows again, in the batches that were written.

        Yields
        ------
        LayerBatch
        """
        self._finish()
        first_row = 0
        with pa.memory_map(str(self._path)) as file:
            reader = pa.ipc.open_file(file)
            for i in range(reader.num_record_batches):
                batch = reader.get_batch(i)
                attributes = pa.RecordBatch.from_arrays(batch.columns[:-1], schema=self.schema)
                yield LayerBatch(attributes, batch.columns[-1], first_row)
                first_row += batch.num_rows

    def read_columns(self, names: Sequence[str]) -> pa.Table:
        """Read some attributes of all rows.

        Parameters
        ----------
        names : sequence of str

        Returns
        -------
        pyarrow.Table, (n_rows,)
            In the order of `names`.

        Raises
        ------
        KeyError
            There is no such attribute.
        """
        self._finish()
        wanted = [self._index(name) for name in names]
        # Asked for in the file's order, which is the order that comes back.
        options = pa.ipc.IpcReadOptions(included_fields=sorted(set(wanted)))
        with pa.memory_map(str(self._path)) as file:
            table = pa.ipc.open_file(file, options=options).read_all()
        at = {index: position for position, index in enumerate(sorted(set(wanted)))}
        columns = [table.column(at[index]) for index in wanted]
        return pa.Table.from_arrays(columns, schema=pa.schema([self.schema.field(index) for index in wanted]))

    def _index(self, name: str) -> int:
        if name not in self.schema.names:
            raise KeyError(name)
        return int(self.schema.names.index(name))

    def close(self) -> None:
        """Remove the file."""
        if self._writer is not None:
            # What cannot be written any more is not needed either.
            with suppress(OSError):
                self._writer.close()
            with suppress(OSError):
                self._sink.close()
            self._writer = None
        shutil.rmtree(self._folder, ignore_errors=True)
