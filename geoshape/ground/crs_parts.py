"""What a CRS is made of: its horizontal part, the globe it lies on, and the units and meridian it counts in."""

from __future__ import annotations

import math

import numpy as np
import pyproj

from geoshape.errors import GroundError
from geoshape.ground.plane import Ellipsoid


def on_globe(crs: pyproj.CRS) -> pyproj.CRS | None:
    """Take the geographic or projected part of a CRS: without heights, and without a way to another datum.

    Returns
    -------
    pyproj.CRS or None
        None where the CRS has no place on the globe, or one that is not of two dimensions.
    """
    own = crs
    while own.is_bound and own.source_crs is not None:
        own = own.source_crs
    if own.is_compound:
        return on_globe(own.sub_crs_list[0])
    return own if own.is_geographic or own.is_projected else None


def horizontal(crs: pyproj.CRS) -> pyproj.CRS:
    """Take the part of a layer's CRS that lies on the globe.

    Parameters
    ----------
    crs : pyproj.CRS

    Returns
    -------
    pyproj.CRS

    Raises
    ------
    GroundError
        There is none.

    Examples
    --------
    >>> horizontal(pyproj.CRS("EPSG:25832+7837")).name
    'ETRS89 / UTM zone 32N'
    """
    own = on_globe(crs)
    if own is None:
        raise GroundError(
            f"the layer's CRS, {crs.name}, is neither geographic nor projected; reproject the layer, "
            "or measure the coordinates as they are with --ground plane"
        )
    return own


def is_lonlat(crs: pyproj.CRS) -> bool:
    """Tell whether coordinates are longitude and latitude, and not those of a globe that was turned."""
    return bool(crs.is_geographic and not crs.is_derived)


def geodetic(crs: pyproj.CRS) -> pyproj.CRS:
    """Give the CRS of longitude and latitude that a CRS is drawn from: the same datum, without a shift."""
    if is_lonlat(crs):
        return crs
    own = crs.source_crs if crs.is_geographic else crs.geodetic_crs
    if own is None:
        raise GroundError(
            f"{crs.name} does not say which longitudes and latitudes it is drawn from; reproject the layer"
        )
    return own


def to_lonlat(crs: pyproj.CRS) -> pyproj.Transformer | None:
    """Give the way from a CRS to longitude and latitude on its own datum; None where it counts in them."""
    return None if is_lonlat(crs) else pyproj.Transformer.from_crs(crs, geodetic(crs), always_xy=True)


def globe_of(crs: pyproj.CRS) -> Ellipsoid:
    """Give the ellipsoid that a CRS lies on.

    Raises
    ------
    GroundError
        It names none.
    """
    shape = crs.ellipsoid
    if shape is None:
        raise GroundError(f"{crs.name} names no ellipsoid; reproject the layer")
    return Ellipsoid(shape.semi_major_metre, 1.0 - (shape.semi_minor_metre / shape.semi_major_metre) ** 2)


def angle_unit_deg(crs: pyproj.CRS) -> float:
    """Give the degrees in a unit of the longitudes and latitudes that a CRS is drawn from.

    Examples
    --------
    >>> round(angle_unit_deg(pyproj.CRS(4807)), 12)
    0.9
    """
    axes = geodetic(crs).axis_info
    return float(np.round(math.degrees(axes[0].unit_conversion_factor), 12)) if axes else 1.0


def meridian_deg(crs: pyproj.CRS) -> float:
    """Give the longitude, from Greenwich, of the meridian that a CRS counts from."""
    prime = crs.prime_meridian
    return 0.0 if prime is None else math.degrees(float(prime.longitude) * float(prime.unit_conversion_factor))


def length_unit_m(crs: pyproj.CRS) -> float:
    """Give the metres in a unit of a CRS that counts in lengths; 1 where it does not say."""
    return float(crs.axis_info[0].unit_conversion_factor) if crs.axis_info else 1.0


def unfolded(definition: pyproj.CRS | str | None) -> pyproj.Proj:
    """Give a projection whose longitudes run on beyond its far meridian, so that what crosses it stays whole."""
    text = pyproj.Proj(definition).srs
    return pyproj.Proj(text if "+over" in text else f"{text} +over")
