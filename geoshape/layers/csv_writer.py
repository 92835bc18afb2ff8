"""Tables without geometry as CSV."""

from __future__ import annotations

from collections.abc import Iterable
from typing import IO

import pyarrow as pa
import pyarrow.csv as pa_csv


def write_csv(sink: IO[bytes], schema: pa.Schema, rows: Iterable[list[pa.Array]]) -> None:
    """Write rows as CSV (RFC 4180, UTF-8): null is empty, an empty text is quoted.

    Parameters
    ----------
    sink : binary file
        Stays open.
    schema : pyarrow.Schema
    rows : iterable of list of pyarrow.Array
        Batches, in the schema.

    Raises
    ------
    OSError
        The sink takes no more.
    """
    plain = pa.schema([pa.field(field.name, field.type) for field in schema])
    options = pa_csv.WriteOptions(quoting_style="needed")
    with pa_csv.CSVWriter(sink, plain, write_options=options) as writer:
        for arrays in rows:
            writer.write_batch(pa.RecordBatch.from_arrays(arrays, schema=plain))
