"""Read layers: what is in a file, what a layer looks like, and its rows in batches of bounded size.

GDAL reads most formats; GeoParquet is read through pyarrow, row group by row group.
"""

from __future__ import annotations

import math
import os
from collections.abc import Iterator
from dataclasses import dataclass, replace

from geoshape.errors import LayerChoiceError, OptionError
from geoshape.layers import parquet_reader, vector_info, vector_reader
from geoshape.layers.layer import Bounds, LayerBatch, LayerInfo, LayerSummary
from geoshape.layers.recut import recut
from geoshape.layers.sources import data_sets, is_parquet

__all__ = ["LayerBatch", "LayerInfo", "LayerSummary", "list_layers", "open_layer", "read_batches"]

MAX_VERTICES = 150_000


@dataclass(frozen=True)
class _Entry:
    source: str
    summary: LayerSummary


def list_layers(path: str | os.PathLike[str]) -> tuple[LayerSummary, ...]:
    """List the layers of a file, folder, archive or address, in their order.

    Parameters
    ----------
    path : str or path-like
        Anything that GDAL reads, ``/vsi...`` paths included; a ``.zip`` is looked into; GeoParquet.

    Returns
    -------
    tuple of LayerSummary
        Tables without geometries included.

    Raises
    ------
    ReadError
        The path is missing, may not be read, is damaged or is no layer.

    Examples
    --------
    >>> [layer.name for layer in list_layers("tests/data/world_geodesic_area/world.gpkg")]
    ['world']
    """
    text = os.fspath(path)
    return tuple(vector_info.counted(text, entry.source, entry.summary) for entry in _entries(text))


def _entries(path: str) -> list[_Entry]:
    """List layers without counting their rows, which would mean to open each of them."""
    entries = []
    for source in data_sets(path):
        found = parquet_reader.summaries(path, source) if is_parquet(source) else vector_info.summaries(path, source)
        entries += [_Entry(source, summary) for summary in found]
    return entries


def open_layer(
    path: str | os.PathLike[str],
    *,
    layer: str | None = None,
    where: str | None = None,
    bbox: Bounds | None = None,
) -> LayerInfo:
    """Open a layer: choose it, learn its schema, CRS and extent, check the filters.

    Parameters
    ----------
    path : str or path-like
        As for `list_layers`.
    layer : str or None
        Name of the layer; may be left out where the file holds one layer that can hold polygons.
    where : str or None
        Condition on the attributes, in SQL as GDAL takes it for the format.
    bbox : (x_min, y_min, x_max, y_max) or None
        Read only rows whose geometry has a point in common with it, in the layer's CRS.

    Returns
    -------
    LayerInfo
        Nothing stays open.

    Raises
    ------
    LayerChoiceError
        Several layers and none named, or no layer of that name.
    OptionError
        `bbox` is no box.
    ReadError
        The layer cannot be opened, has no geometries, or `where` cannot be used.

    Examples
    --------
    >>> info = open_layer("tests/data/world_geodesic_area/world.gpkg", where="continent = 'Europe'")
    >>> info.geometry_type, info.schema.names[:2]
    ('MultiPolygon', ['iso_a2', 'name_long'])
    """
    text = os.fspath(path)
    if bbox is not None:
        _check_bbox(bbox)
    entries = _entries(text)
    chosen = _choose(text, entries, layer)
    describe = parquet_reader.describe if is_parquet(chosen.source) else vector_info.describe
    info = describe(text, chosen.source, chosen.summary.name, where, bbox)
    return replace(info, layer_names=tuple(entry.summary.name for entry in entries))


def _check_bbox(bbox: Bounds) -> None:
    if len(bbox) != 4 or not all(map(math.isfinite, bbox)) or bbox[0] > bbox[2] or bbox[1] > bbox[3]:
        raise OptionError(f"bbox = {tuple(bbox)} is no box; give x_min, y_min, x_max, y_max in the layer's CRS")


def _choose(path: str, entries: list[_Entry], layer: str | None) -> _Entry:
    if layer is not None:
        named = [entry for entry in entries if entry.summary.name == layer]
        if len(named) > 1:
            inner = ", ".join(entry.source for entry in named)
            raise LayerChoiceError(f"{path}: {len(named)} layers are called {layer!r}; give the path of one: {inner}")
        if not named:
            raise LayerChoiceError(f"{path}: there is no layer {layer!r}; choose with --layer from: {_listed(entries)}")
        return named[0]
    polygonal = [entry for entry in entries if entry.summary.may_hold_polygons] or entries
    if len(polygonal) == 1:
        return polygonal[0]
    if not entries:
        raise LayerChoiceError(f"{path}: the file holds no layer; name a file that does")
    raise LayerChoiceError(f"{path}: several layers and none named; choose with --layer from: {_listed(polygonal)}")


def _listed(entries: list[_Entry]) -> str:
    return ", ".join(f"{entry.summary.name} ({entry.summary.geometry_type or 'no geometry'})" for entry in entries)


def read_batches(info: LayerInfo, *, max_vertices: int = MAX_VERTICES) -> Iterator[LayerBatch]:
    """Read a layer's rows in batches sized by vertices, in constant memory.

    Parameters
    ----------
    info : LayerInfo
        From `open_layer`.
    max_vertices : int
        Vertices a batch holds at most, as estimated from the geometries' length in bytes; a geometry with more has
        a batch of its own.

    Yields
    ------
    LayerBatch
        Rows in the file's order, those without geometry included; nothing for a layer without rows.

    Raises
    ------
    ReadError
        The file ends too early or is damaged; raised when that place is reached.

    Examples
    --------
    >>> info = open_layer("tests/data/world_geodesic_area/world.gpkg")
    >>> sum(batch.n_rows for batch in read_batches(info))
    177
    """
    stream = parquet_reader.stream(info) if is_parquet(info.source) else vector_reader.stream(info)
    return recut(stream, max_vertices)
