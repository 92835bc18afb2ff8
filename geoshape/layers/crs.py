"""Coordinate reference systems of layers as WKT."""

from __future__ import annotations

from typing import Any

import pyproj

from geoshape.errors import ReadError

# Names that GeoPackage (OGC 12-128r19, clause 1.1.2.1.2) and GDAL give to the absence of a CRS.
_NO_CRS = frozenset({"undefined cartesian srs", "undefined geographic srs", "undefined srs"})


def crs_wkt(path: str, crs: Any) -> str | None:
    """Give a CRS as WKT 2.

    Parameters
    ----------
    path : str
        Layer it belongs to, for the message.
    crs : str, dict or None
        Anything that PROJ understands.

    Returns
    -------
    str or None
        None where there is none, or it says that it is undefined.

    Raises
    ------
    ReadError
        PROJ does not understand it.

    Examples
    --------
    >>> crs_wkt("lakes.gpkg", "EPSG:32632")[:28]
    'PROJCRS["WGS 84 / UTM zone 3'
    """
    if not crs:
        return None
    try:
        parsed = pyproj.CRS.from_user_input(crs)
    except pyproj.exceptions.CRSError as error:
        text = " ".join(str(error).split())
        raise ReadError(f"{path}: its CRS is not understood ({text}); write the file anew") from None
    return None if parsed.name.lower() in _NO_CRS else parsed.to_wkt()
