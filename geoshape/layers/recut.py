"""Streams of record batches cut anew by the number of vertices."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

import numpy as np
import pyarrow as pa

from geoshape.layers.layer import LayerBatch
from geoshape.layers.wkb import vertex_counts

Rows = tuple[pa.RecordBatch, pa.BinaryArray]


def recut(stream: Iterable[Rows], max_vertices: int) -> Iterator[LayerBatch]:
    """Cut and join batches so that each holds at most a given number of vertices, or one row.

    Parameters
    ----------
    stream : iterable of (attributes, geometry)
    max_vertices : int
        Vertices a batch, as estimated from the length of the geometries; a null counts as one.

    Yields
    ------
    LayerBatch
        In the stream's order, none of it empty.
    """
    pending: list[Rows] = []
    room = max_vertices
    first_row = 0
    for attributes, geometry in stream:
        cost = np.cumsum(np.maximum(vertex_counts(geometry), 1))
        start = 0
        while start < len(geometry):
            spent = int(cost[start - 1]) if start else 0
            stop = int(np.searchsorted(cost, spent + room, side="right"))
            if stop == start and not pending:
                stop = start + 1
            if stop > start:
                length = stop - start
                pending.append((attributes.slice(start, length), geometry.slice(start, length)))
                room -= int(cost[stop - 1]) - spent
                start = stop
            if start < len(geometry) or room <= 0:
                batch = _joined(pending, first_row)
                yield batch
                first_row += batch.n_rows
                pending, room = [], max_vertices
    if pending:
        yield _joined(pending, first_row)


def _joined(pieces: list[Rows], first_row: int) -> LayerBatch:
    if len(pieces) == 1:
        return LayerBatch(*pieces[0], first_row)
    attributes = pa.concat_batches([piece[0] for piece in pieces])
    return LayerBatch(attributes, pa.concat_arrays([piece[1] for piece in pieces]), first_row)
