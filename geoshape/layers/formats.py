"""The formats that can be written, and what each of them allows."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from geoshape.errors import WriteError

STDOUT = "-"


@dataclass(frozen=True)
class Format:
    """A format to write.

    Attributes
    ----------
    name : str
        As people call it.
    driver : str or None
        GDAL's name; None where GDAL does not write it.
    extensions : tuple of str
        File name extensions, in lower case, that choose it.
    names_layers : bool
        Whether the layer may be called otherwise than the file.
    max_columns : int or None
        Attributes it can hold; None where there is no bound to speak of.
    has_short_names : bool
        Whether names are bound to ten bytes.
    ignores_case : bool
        Whether names that differ in case only are the same name.
    holds_lineage : bool
        Whether lineage goes into the file.
    is_rfc7946 : bool
        Whether it is a kind of GeoJSON.
    """

    name: str
    driver: str | None
    extensions: tuple[str, ...]
    names_layers: bool = False
    max_columns: int | None = None
    has_short_names: bool = False
    ignores_case: bool = False
    holds_lineage: bool = False
    is_rfc7946: bool = False


GEOPACKAGE = Format(
    "GeoPackage", "GPKG", (".gpkg",), names_layers=True, max_columns=1990, ignores_case=True, holds_lineage=True
)
GEOPARQUET = Format("GeoParquet", None, (".parquet", ".geoparquet"), holds_lineage=True)
FLATGEOBUF = Format("FlatGeobuf", "FlatGeobuf", (".fgb",), names_layers=True)
SHAPEFILE = Format("Shapefile", "ESRI Shapefile", (".shp",), max_columns=255, has_short_names=True, ignores_case=True)
GEOJSON = Format("GeoJSON", "GeoJSON", (".geojson", ".json"), names_layers=True, is_rfc7946=True)
GEOJSON_SEQ = Format("GeoJSON text sequence", "GeoJSONSeq", (".geojsonl", ".geojsons", ".ndjson"), is_rfc7946=True)
CSV = Format("CSV", None, (".csv",))

FORMATS = (GEOPACKAGE, GEOPARQUET, FLATGEOBUF, SHAPEFILE, GEOJSON, GEOJSON_SEQ, CSV)


def format_of(target: str) -> Format:
    """Choose the format by a file's extension.

    Parameters
    ----------
    target : str
        Path, or ``-`` for CSV on standard output.

    Returns
    -------
    Format

    Raises
    ------
    WriteError
        The extension is not known.

    Examples
    --------
    >>> format_of("lakes.GPKG").name
    'GeoPackage'
    """
    if target == STDOUT:
        return CSV
    suffix = Path(target).suffix.lower()
    for known in FORMATS:
        if suffix in known.extensions:
            return known
    listed = ", ".join(f"{' '.join(known.extensions)} ({known.name})" for known in FORMATS)
    stated = f"extension {suffix!r}" if suffix else "no extension"
    raise WriteError(f"{target}: {stated} says no format that can be written; use one of: {listed}, or - for CSV")
