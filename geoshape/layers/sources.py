"""What a path holds: GDAL's names for the data sets behind it, archives looked into, faults named early."""

from __future__ import annotations

import os
import zipfile
from pathlib import Path, PurePosixPath

from geoshape.errors import ReadError

_ARCHIVES = frozenset({".zip", ".shz"})
_PARQUET = frozenset({".parquet", ".geoparquet", ".pq"})
_PARQUET_MAGIC = b"PAR1"
_INNER = frozenset(
    {".shp", ".gpkg", ".geojson", ".geojsonl", ".geojsons", ".json", ".fgb", ".gml", ".kml", ".tab", ".mif"}
    | {".csv", ".sqlite", ".topojson", ".parquet", ".geoparquet"}
)
_SHP_HEADER_BYTES = 100


def is_virtual(path: str) -> bool:
    """Whether GDAL, not the file system, finds this path: ``/vsi...`` or an address with a scheme."""
    return path.startswith("/vsi") or "://" in path


def data_sets(path: str) -> tuple[str, ...]:
    """List what GDAL is to open for a path: usually the path itself, of an archive what lies in it.

    Parameters
    ----------
    path : str
        File, folder, archive, ``/vsi...`` path or address.

    Returns
    -------
    tuple of str
        At least one name.

    Raises
    ------
    ReadError
        The path is missing or may not be read, or an archive is damaged or holds no layer.
    """
    if is_virtual(path):
        return (path,)
    check_readable(path)
    suffix = Path(path).suffix.lower()
    if suffix in _ARCHIVES:
        return _in_archive(path)
    if suffix == ".gz":
        return (f"/vsigzip/{Path(path).absolute()}",)
    if suffix == ".shp":
        _check_shp_length(path)
    return (path,)


def check_readable(path: str) -> None:
    """Raise a ReadError where a path is missing, or it or a folder above it may not be read."""
    try:
        Path(path).stat()
    except FileNotFoundError:
        raise ReadError(f"{path}: there is no such file; check the path") from None
    except NotADirectoryError:
        raise ReadError(f"{path}: a part of the path is a file, not a folder; check the path") from None
    except PermissionError:
        raise ReadError(f"{path}: the folder may not be entered; ask for the right to read it") from None
    except OSError as error:
        raise ReadError(f"{path}: {error.strerror or error}; check the path") from None
    if not os.access(path, os.R_OK | (os.X_OK if Path(path).is_dir() else 0)):
        raise ReadError(f"{path}: may not be read; ask for the right to read it")


def is_parquet(path: str) -> bool:
    """Whether a file is Parquet, by its name or its first bytes."""
    if is_virtual(path):
        return PurePosixPath(path).suffix.lower() in _PARQUET
    if Path(path).suffix.lower() in _PARQUET:
        return True
    if not Path(path).is_file():
        return False
    with Path(path).open("rb") as file:
        return file.read(len(_PARQUET_MAGIC)) == _PARQUET_MAGIC


def _in_archive(path: str) -> tuple[str, ...]:
    try:
        with zipfile.ZipFile(path) as archive:
            names = archive.namelist()
    except zipfile.BadZipFile as error:
        raise ReadError(f"{path}: the archive is damaged or none ({error}); fetch it again") from None
    found = sorted(_layers_among(names))
    if not found:
        known = ", ".join(sorted(_INNER))
        raise ReadError(f"{path}: the archive holds no layer (looked for {known}, .gdb); unpack it and name the file")
    # Braces let GDAL find the archive's end whatever its name ends with.
    return tuple(f"/vsizip/{{{Path(path).absolute()}}}/{name}" for name in found)


def _layers_among(names: list[str]) -> set[str]:
    found = set()
    for name in names:
        parts = PurePosixPath(name).parts
        if any(part.startswith((".", "__MACOSX")) for part in parts):
            continue
        folders = [i for i, part in enumerate(parts) if part.lower().endswith(".gdb")]
        if folders:
            found.add("/".join(parts[: folders[0] + 1]))
        elif PurePosixPath(name).suffix.lower() in _INNER:
            found.add(name)
    return found


def _check_shp_length(path: str) -> None:
    """Compare a shapefile's length with its header: GDAL reads what is cut off as missing geometries."""
    with Path(path).open("rb") as file:
        header = file.read(_SHP_HEADER_BYTES)
    actual_bytes = Path(path).stat().st_size
    stated_bytes = 2 * int.from_bytes(header[24:28], "big")
    if len(header) < _SHP_HEADER_BYTES or actual_bytes < stated_bytes:
        raise ReadError(
            f"{path}: the file is cut off ({actual_bytes} of {max(stated_bytes, _SHP_HEADER_BYTES)} bytes); "
            "fetch or copy it again"
        )


def archive_of(path: str) -> str:
    """Give the file on disk behind a path: of ``/vsizip/a.zip/b.shp`` the archive, else the path itself.

    Examples
    --------
    >>> archive_of("/vsizip/{/data/a.zip}/b.shp"), archive_of("/vsizip//data/a.zip/b.shp"), archive_of("a.gpkg")
    ('/data/a.zip', '/data/a.zip', 'a.gpkg')
    """
    if not path.startswith("/vsi"):
        return path
    rest = path.split("/", 2)[2] if path.count("/") >= 2 else ""
    while rest.startswith("/vsi"):
        rest = rest.split("/", 2)[2] if rest.count("/") >= 2 else ""
    if rest.startswith("{"):
        return rest[1 : rest.find("}")] if "}" in rest else rest[1:]
    parts = rest.split("/")
    for i in range(len(parts), 0, -1):
        candidate = "/".join(parts[:i])
        if Path(candidate).is_file():
            return candidate
    for i, part in enumerate(parts):
        if PurePosixPath(part).suffix.lower() in _ARCHIVES:
            return "/".join(parts[: i + 1])
    return rest
