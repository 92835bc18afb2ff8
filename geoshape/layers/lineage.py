"""Where a result comes from: what made it, from what and how, kept in or beside the file."""

from __future__ import annotations

import json
import os
import sqlite3
from collections.abc import Mapping
from contextlib import closing
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pyogrio
import pyproj
import shapely
from numpy import __version__ as numpy_version

import geoshape
from geoshape.layers.formats import GEOPACKAGE, GEOPARQUET

PARQUET_KEY = b"geoshape"
BESIDE_SUFFIX = ".lineage.json"
STANDARD_URI = "urn:geoshape:lineage:1"
"""Says in a GeoPackage's metadata table which text is ours."""

_MIME_TYPE = "application/json"
_EXTENSION = "gpkg_metadata"
_EXTENSION_URI = "http://www.geopackage.org/spec121/#extension_metadata"

# OGC 12-128r19, annex F.8, tables 23 and 24.
_METADATA_TABLE = """
CREATE TABLE IF NOT EXISTS gpkg_metadata (
  id INTEGER CONSTRAINT m_pk PRIMARY KEY ASC NOT NULL,
  md_scope TEXT NOT NULL DEFAULT 'dataset',
  md_standard_uri TEXT NOT NULL,
  mime_type TEXT NOT NULL DEFAULT 'text/xml',
  metadata TEXT NOT NULL DEFAULT ''
)"""
_REFERENCE_TABLE = """
CREATE TABLE IF NOT EXISTS gpkg_metadata_reference (
  reference_scope TEXT NOT NULL,
  table_name TEXT,
  column_name TEXT,
  row_id_value INTEGER,
  timestamp DATETIME NOT NULL DEFAULT (strftime('%Y-%m-%dT%H:%M:%fZ','now')),
  md_file_id INTEGER NOT NULL,
  md_parent_id INTEGER,
  CONSTRAINT crmr_mfi_fk FOREIGN KEY (md_file_id) REFERENCES gpkg_metadata(id),
  CONSTRAINT crmr_mpi_fk FOREIGN KEY (md_parent_id) REFERENCES gpkg_metadata(id)
)"""
_EXTENSIONS_TABLE = """
CREATE TABLE IF NOT EXISTS gpkg_extensions (
  table_name TEXT,
  column_name TEXT,
  extension_name TEXT NOT NULL,
  definition TEXT NOT NULL,
  scope TEXT NOT NULL,
  CONSTRAINT ge_tce UNIQUE (table_name, column_name, extension_name)
)"""


def versions() -> dict[str, str]:
    """Give the versions of what computes and writes.

    Returns
    -------
    dict of str to str
        geoshape, shapely, GEOS, GDAL, PROJ, pyarrow and numpy.
    """
    return {
        "geoshape": geoshape.__version__,
        "shapely": shapely.__version__,
        "GEOS": shapely.geos_version_string,
        "GDAL": pyogrio.__gdal_version_string__,
        "PROJ": pyproj.proj_version_str,
        "pyarrow": pa.__version__,
        "numpy": numpy_version,
    }


@dataclass(frozen=True, kw_only=True)
class Lineage:
    """Where a result comes from.

    Attributes
    ----------
    command : str
        What was done, such as ``"measure"``.
    input : str
        Name of the input file, without its folder.
    layer : str
        Layer read.
    crs : str or None
        The input's CRS as WKT; None where unknown.
    options : mapping of str to anything that JSON holds
        Options that decide the numbers.
    rows_by_status : mapping of str to int
        Rows counted by what became of them.
    ground : str
        Ground used, in a line.
    warnings : tuple of str
        What a reader of the numbers should know.
    started : str
        Start of the run in UTC, ISO 8601.
    seconds : float
        Time taken.
    versions : mapping of str to str
        What computed and wrote, by default as it is now.
    """

    command: str
    input: str
    layer: str
    crs: str | None
    options: Mapping[str, Any]
    rows_by_status: Mapping[str, int]
    ground: str
    warnings: tuple[str, ...]
    started: str
    seconds: float
    versions: Mapping[str, str] = field(default_factory=versions)

    def to_json(self) -> str:
        """Give the lineage as JSON."""
        return json.dumps(asdict(self), ensure_ascii=False, indent=1, default=str)


def lineage_path(path: Path) -> Path:
    """Give the file beside an output that holds its lineage.

    Examples
    --------
    >>> lineage_path(Path("lakes.fgb")).name
    'lakes.fgb.lineage.json'
    """
    return path.with_name(path.name + BESIDE_SUFFIX)


def store_in_geopackage(path: Path, layer: str, text: str) -> None:
    """Put a lineage into a GeoPackage's metadata tables, in place of the layer's older one.

    Parameters
    ----------
    path : Path
    layer : str
    text : str
        JSON.

    Raises
    ------
    sqlite3.Error
        The file cannot be written.
    """
    with closing(sqlite3.connect(path)) as connection, connection:
        for statement in (_METADATA_TABLE, _REFERENCE_TABLE, _EXTENSIONS_TABLE):
            connection.execute(statement)
        for table in ("gpkg_metadata", "gpkg_metadata_reference"):
            _register(connection, table)
        _forget(connection, layer)
        row = connection.execute(
            "INSERT INTO gpkg_metadata (md_scope, md_standard_uri, mime_type, metadata) VALUES ('dataset', ?, ?, ?)",
            (STANDARD_URI, _MIME_TYPE, text),
        )
        connection.execute(
            "INSERT INTO gpkg_metadata_reference (reference_scope, table_name, md_file_id) VALUES ('table', ?, ?)",
            (layer, row.lastrowid),
        )


def _register(connection: sqlite3.Connection, table: str) -> None:
    # The uniqueness that the standard asks for does not bind rows whose column is null.
    known = connection.execute(
        "SELECT 1 FROM gpkg_extensions WHERE table_name = ? AND extension_name = ?", (table, _EXTENSION)
    )
    if known.fetchone() is None:
        connection.execute(
            "INSERT INTO gpkg_extensions VALUES (?, NULL, ?, ?, 'read-write')", (table, _EXTENSION, _EXTENSION_URI)
        )


def _forget(connection: sqlite3.Connection, layer: str) -> None:
    """Drop the layer's older lineage, and any of a layer that is there no more."""
    ours = (
        "SELECT r.md_file_id FROM gpkg_metadata_reference r JOIN gpkg_metadata m ON m.id = r.md_file_id "
        "WHERE m.md_standard_uri = ? AND (lower(r.table_name) = lower(?) OR r.table_name IS NULL)"
    )
    ids = connection.execute(ours, (STANDARD_URI, layer)).fetchall()
    connection.executemany("DELETE FROM gpkg_metadata_reference WHERE md_file_id = ?", ids)
    connection.executemany("DELETE FROM gpkg_metadata WHERE id = ?", ids)
    orphans = "DELETE FROM gpkg_metadata WHERE md_standard_uri = ? AND id NOT IN (SELECT md_file_id FROM {})"
    connection.execute(orphans.format("gpkg_metadata_reference"), (STANDARD_URI,))


def read_lineage(path: str | os.PathLike[str], layer: str | None = None) -> dict[str, Any] | None:
    """Read the lineage of a result, wherever its format keeps it.

    Parameters
    ----------
    path : str or path-like
    layer : str or None
        Layer of a GeoPackage; the first that has a lineage where left out.

    Returns
    -------
    dict or None
        None where there is none, or the file is not there.
    """
    file = Path(path)
    if not file.is_file():
        return None
    text = _READERS.get(file.suffix.lower(), _read_beside)(file, layer)
    if text is None:
        return None
    try:
        found = json.loads(text)
    except ValueError:
        return None
    return found if isinstance(found, dict) else None


def _read_geopackage(path: Path, layer: str | None) -> str | None:
    query = (
        "SELECT m.metadata FROM gpkg_metadata m JOIN gpkg_metadata_reference r ON r.md_file_id = m.id "
        "WHERE m.md_standard_uri = ? AND (? IS NULL OR lower(r.table_name) = lower(?)) ORDER BY m.id"
    )
    try:
        with closing(sqlite3.connect(f"{path.absolute().as_uri()}?mode=ro", uri=True)) as connection:
            row = connection.execute(query, (STANDARD_URI, layer, layer)).fetchone()
    except sqlite3.Error:
        return None
    return None if row is None else str(row[0])


def _read_parquet(path: Path, layer: str | None) -> str | None:
    del layer
    try:
        stored = pq.read_metadata(path).metadata or {}
    except (OSError, pa.ArrowException):
        return None
    return stored[PARQUET_KEY].decode() if PARQUET_KEY in stored else None


def _read_beside(path: Path, layer: str | None) -> str | None:
    del layer
    beside = lineage_path(path)
    return beside.read_text(encoding="utf-8") if beside.is_file() else None


_READERS = dict.fromkeys(GEOPACKAGE.extensions, _read_geopackage) | dict.fromkeys(GEOPARQUET.extensions, _read_parquet)
