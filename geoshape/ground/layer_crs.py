"""The CRS that a layer is taken to be in: its own, or the one that the options assume."""

from __future__ import annotations

import pyproj
from pyproj.exceptions import CRSError

from geoshape.errors import GroundError, OptionError
from geoshape.options import MeasureOptions


def resolve_crs(own: pyproj.CRS | None, options: MeasureOptions) -> pyproj.CRS | None:
    """Settle a layer's CRS.

    Parameters
    ----------
    own : pyproj.CRS or None
        What the layer says.
    options : MeasureOptions
        ``assume_crs`` fills a gap; it does not overrule.

    Returns
    -------
    pyproj.CRS or None
        None where neither knows.

    Raises
    ------
    OptionError
        PROJ does not understand ``assume_crs``.
    GroundError
        The layer has another CRS.

    Examples
    --------
    >>> resolve_crs(None, MeasureOptions(assume_crs="EPSG:4326")).to_epsg()
    4326
    """
    if options.assume_crs is None:
        return own
    try:
        assumed = pyproj.CRS.from_user_input(options.assume_crs)
    except CRSError as error:
        raise OptionError(
            f"assume_crs = {options.assume_crs!r} is no CRS that PROJ knows ({_first_line(error)}); "
            "give an EPSG code, WKT or PROJ string"
        ) from None
    if own is not None and not own.equals(assumed, ignore_axis_order=True):
        raise GroundError(
            f"the layer is in {own.name}, not in {assumed.name}; leave out --assume-crs, "
            "or reproject the layer if its own CRS is wrong"
        )
    return own or assumed


def _first_line(error: Exception) -> str:
    return str(error).splitlines()[0]
