"""Everything that can forbid an output, checked before a row is read."""

from __future__ import annotations

import os
import sqlite3
from collections.abc import Sequence
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

import pyarrow as pa
import pyproj

from geoshape.columns import SHORT_NAME_LENGTH, Column
from geoshape.errors import ColumnNameError, WriteError
from geoshape.layers.formats import (
    FLATGEOBUF,
    GEOPACKAGE,
    SHAPEFILE,
    STDOUT,
    Format,
    format_of,
)
from geoshape.layers.layer import LayerInfo
from geoshape.layers.names import check_case, check_new_names, short_names
from geoshape.layers.rfc7946 import is_wgs84
from geoshape.layers.sources import archive_of, is_virtual
from geoshape.layers.tables import column_fields
from geoshape.layers.wkb import MULTI_POLYGON, POLYGON, UNKNOWN, GeometryType

# Drivers that call a layer "Polygon" although a row of it may have several parts.
_LOOSE_TYPES = frozenset({"ESRI Shapefile", "MapInfo File", "CSV"})
_SQLITE_HEADER_BYTES = 100
_SQLITE_MAGIC = b"SQLite format 3\0"
_APPLICATION_ID = slice(68, 72)
_GEOPACKAGE_IDS = frozenset({b"GPKG", b"GP10", b"GP11"})


@dataclass(frozen=True)
class LayerContent:
    """What a new layer will hold.

    Attributes
    ----------
    schema : pyarrow.Schema
        Attributes that pass through.
    columns : tuple of Column
        Columns that are added behind them.
    crs_wkt : str or None
        Coordinate reference system of the geometries.
    geometry_type : str
        Such as ``"MultiPolygon"`` or ``"Polygon Z"``; ``"Unknown"`` where rows may be of any type.
    """

    schema: pa.Schema
    columns: tuple[Column, ...] = ()
    crs_wkt: str | None = None
    geometry_type: str = UNKNOWN

    @classmethod
    def like(cls, source: LayerInfo, columns: Sequence[Column]) -> LayerContent:
        """Describe a layer's rows with new columns behind them.

        Parameters
        ----------
        source : LayerInfo
        columns : sequence of Column

        Returns
        -------
        LayerContent
            Of several parts where the source's format does not tell single from multiple.
        """
        kind = GeometryType.parse(source.geometry_type)
        if kind.base == POLYGON and source.driver in _LOOSE_TYPES:
            kind = GeometryType(MULTI_POLYGON, kind.has_z, kind.has_m)
        return cls(source.schema, tuple(columns), source.crs_wkt, str(kind))


@dataclass(frozen=True)
class OutputPlan:
    """An output that nothing known beforehand forbids.

    Attributes
    ----------
    target : str
        As the user gave it; ``-`` is standard output.
    path : Path or None
        File to be written, links followed; None for standard output.
    format : Format
    layer : str
        Name of the new layer.
    schema : pyarrow.Schema
        What batches must carry: attributes, then columns, under full names.
    written_names : tuple of str
        Names in the file, in the schema's order.
    columns : tuple of Column
        Columns that are added.
    crs_wkt : str or None
        CRS of the geometries in the batches.
    geometry_type : str
        Of the geometries in the batches.
    keeps_layers : bool
        Whether the file is there and its other layers are kept.
    warnings : tuple of str
        What the format will change.
    """

    target: str
    path: Path | None
    format: Format
    layer: str
    schema: pa.Schema
    written_names: tuple[str, ...]
    columns: tuple[Column, ...]
    crs_wkt: str | None
    geometry_type: str
    keeps_layers: bool
    warnings: tuple[str, ...]


def plan_output(
    target: str | os.PathLike[str],
    content: LayerContent,
    *,
    sources: Sequence[LayerInfo] = (),
    output_layer: str | None = None,
    overwrite: bool = False,
) -> OutputPlan:
    """Check all that can stop an output, and settle names, before anything is read.

    A file that is there is replaced with `overwrite` only. Of a GeoPackage only the layer of the same name is
    replaced then, and its other layers stay.

    Parameters
    ----------
    target : str or path-like
        File to write; its extension decides the format. ``-`` is CSV on standard output.
    content : LayerContent
        What the layer will hold.
    sources : sequence of LayerInfo
        Layers that are read meanwhile: none of them may be the target.
    output_layer : str or None
        Name of the new layer; by default the file's name without its extension.
    overwrite : bool
        Whether what is there may be replaced.

    Returns
    -------
    OutputPlan

    Raises
    ------
    WriteError
        Extension unknown, folder missing or closed, file there already, input equals output, too many columns, or
        the format has no room for a layer's name.
    ColumnNameError
        Names clash with one another or with names that the format needs.
    """
    text = os.fspath(target)
    form = format_of(text)
    if output_layer is not None and not form.names_layers:
        raise WriteError(f"{text}: a layer in {form.name} is called as its file; leave out --output-layer")
    path = None
    if text != STDOUT:
        _check_place(text)
        path = Path(os.path.realpath(text))
        _check_no_source(text, path, sources)
        _check_existing(text, path, overwrite=overwrite)
    schema = pa.schema([*content.schema, *column_fields(content.columns)])
    written = _written_names(text, form, content)
    return OutputPlan(
        target=text,
        path=path,
        format=form,
        layer=output_layer or (path.stem if path else "table"),
        schema=schema,
        written_names=written,
        columns=tuple(content.columns),
        crs_wkt=content.crs_wkt,
        geometry_type=content.geometry_type,
        keeps_layers=path is not None and form is GEOPACKAGE and _has_other_layers(path, output_layer or path.stem),
        warnings=tuple(_warnings(form, content)),
    )


def _check_place(target: str) -> None:
    if is_virtual(target):
        raise WriteError(f"{target}: only plain files can be written; name a file in a folder")
    path = Path(target)
    folder = path.parent
    try:
        if path.is_dir():
            raise WriteError(f"{target}: is a folder; name a file in it")
        if not folder.is_dir():
            raise WriteError(f"{target}: the folder {folder} does not exist; make it first")
    except PermissionError:
        raise WriteError(f"{target}: the folder {folder} may not be entered; choose another folder") from None
    if not os.access(folder, os.W_OK | os.X_OK):
        raise WriteError(f"{target}: nothing can be written in {folder}; choose another folder")


def _check_no_source(target: str, path: Path, sources: Sequence[LayerInfo]) -> None:
    for source in sources:
        for name in (source.path, source.source):
            if not is_virtual(name) or name.startswith("/vsi"):
                _check_differs(target, path, Path(os.path.realpath(archive_of(name))))


def _check_differs(target: str, path: Path, source: Path) -> None:
    same = path == source or (path.exists() and source.exists() and path.samefile(source))
    # A shapefile is several files of one stem; a folder of them may be opened as a whole.
    if path.suffix.lower() == ".shp":
        same = same or path.with_suffix("") == source.with_suffix("") or (source.is_dir() and path.parent == source)
    if same:
        raise WriteError(f"{target}: is the input as well; write to another file")


def _check_existing(target: str, path: Path, *, overwrite: bool) -> None:
    if path.exists() and not overwrite:
        stays = "; its other layers stay" if path.suffix.lower() in GEOPACKAGE.extensions else ""
        raise WriteError(f"{target}: exists already; use --overwrite to replace it{stays}, or write to another file")


def _is_geopackage(path: Path) -> bool:
    """Whether a file says that it is a GeoPackage (OGC 12-128r19, clause 1.1.1.1)."""
    if not path.is_file():
        return False
    with path.open("rb") as file:
        header = file.read(_SQLITE_HEADER_BYTES)
    return header.startswith(_SQLITE_MAGIC) and header[_APPLICATION_ID] in _GEOPACKAGE_IDS


def _has_other_layers(path: Path, layer: str) -> bool:
    """Whether a GeoPackage holds more than the layer to be written; a damaged one does, so as not to be lost."""
    if not _is_geopackage(path):
        return False
    query = "SELECT count(*) FROM gpkg_contents WHERE lower(table_name) <> lower(?)"
    try:
        with closing(sqlite3.connect(path)) as connection:
            return bool(connection.execute(query, (layer,)).fetchone()[0])
    except sqlite3.Error:
        return True


def _written_names(target: str, form: Format, content: LayerContent) -> tuple[str, ...]:
    existing = content.schema.names
    check_new_names(existing, content.columns)
    count = len(existing) + len(content.columns)
    if form.max_columns is not None and count > form.max_columns:
        raise WriteError(
            f"{target}: {count} columns, but {form.name} holds {form.max_columns}; "
            "choose fewer --families, or write .gpkg or .parquet"
        )
    if form.has_short_names:
        return tuple(short_names(existing, content.columns).values())
    if form.ignores_case:
        check_case(existing, form.name)
    doubled = sorted({name for name in existing if existing.count(name) > 1})
    if doubled:
        raise ColumnNameError(f"the layer has several columns called {', '.join(doubled)}; rename them first")
    return (*existing, *(column.name for column in content.columns))


def _warnings(form: Format, content: LayerContent) -> list[str]:
    kind = GeometryType.parse(content.geometry_type)
    texts = []
    if form.is_rfc7946:
        texts += _crs_warnings(form, content.crs_wkt)
    if kind.has_m and (form.is_rfc7946 or form is FLATGEOBUF):
        texts.append(f"{form.name} has no room for measures (M); they are left out")
    if form is SHAPEFILE:
        cut = [name for name in content.schema.names if len(name.encode()) > SHORT_NAME_LENGTH]
        if cut:
            texts.append(
                f"names of {', '.join(cut)} are cut to {SHORT_NAME_LENGTH} characters; the file beside says how"
            )
    return texts


def _crs_warnings(form: Format, crs_wkt: str | None) -> list[str]:
    if crs_wkt is None:
        return [f"{form.name} means WGS 84, but the layer has no CRS: coordinates are written as they are"]
    if is_wgs84(crs_wkt):
        return []
    name = pyproj.CRS.from_wkt(crs_wkt).name
    return [f"{form.name} means WGS 84: geometries are transformed from {name} to longitude and latitude"]
