"""Choose one equal-area projection for a layer, by the shape and place of its extent."""

from __future__ import annotations

import math

import numpy as np
import pyproj

from geoshape.errors import GroundError
from geoshape.ground.crs_parts import globe_of, is_lonlat
from geoshape.options import Bounds
from geoshape.rings import FloatArray

ROUND_ASPECT = 1.25
"""Width over height, or less, up to which an extent counts as round."""

WORLD_WIDTH_DEG = 160.0
"""Extents wider than this get a cylinder, or a plane about the pole: no cone or other plane serves them."""

EQUATORIAL_LATITUDE_DEG = 15.0
"""Mean latitude up to which an extent counts as lying along the equator."""

POLAR_LATITUDE_DEG = 70.0
"""Mean latitude from which an extent counts as polar."""

POLAR_EDGE_DEG = 45.0
"""Latitude beyond which all of an extent round the world must lie to count as polar."""


def choose_projection(own: pyproj.CRS, area: tuple[FloatArray, FloatArray]) -> pyproj.CRS:
    """Choose an equal-area projection on the layer's own ellipsoid.

    Parameters
    ----------
    own : pyproj.CRS
        The horizontal part of the layer's CRS.
    area : two (n,) float64
        Longitudes and latitudes, from Greenwich, in degrees, of a grid over the layer.

    Returns
    -------
    pyproj.CRS
        In metres. Its definition says ``+over``: outlines that cross its far meridian stay whole.

    Raises
    ------
    GroundError
        Nothing of the extent has a place on the globe.

    References
    ----------
    .. [1] Snyder, J. P. (1987). Map Projections: A Working Manual. USGS Professional Paper 1395, p. 34: azimuthal for
       round and polar regions, conic for wide ones in middle latitudes, cylindrical along the equator and for the
       world.
    """
    longitude, latitude = area
    if not len(longitude):
        raise GroundError("no corner of the layer's extent has a place on the globe; check the layer's CRS")
    if not is_lonlat(own):
        # The shorter way round: an extent that crosses the antimeridian is not the whole world.
        start = longitude[0]
        longitude = start + np.mod(longitude - start + 180.0, 360.0) - 180.0
    extent = float(longitude.min()), float(latitude.min()), float(longitude.max()), float(latitude.max())
    globe = globe_of(own)
    ellipsoid = f"+a={globe.semi_major_m!r} +es={globe.eccentricity_squared!r}"
    return pyproj.CRS.from_proj4(f"{_projection(extent)} +x_0=0 +y_0=0 {ellipsoid} +units=m +no_defs +over")


def _projection(extent: Bounds) -> str:
    west, south, east, north = extent
    longitude, latitude = (west + east) / 2.0, (south + north) / 2.0
    is_round_the_world = east - west > WORLD_WIDTH_DEG
    is_beyond = south >= POLAR_EDGE_DEG or north <= -POLAR_EDGE_DEG
    if abs(latitude) >= POLAR_LATITUDE_DEG or (is_round_the_world and is_beyond):
        return f"+proj=laea +lat_0={_degrees(math.copysign(90.0, latitude))} +lon_0={_degrees(longitude)}"
    if is_round_the_world:
        farthest = max(abs(south), abs(north))
        return f"+proj=cea +lat_ts={_degrees(min(30.0, farthest / 2.0))} +lon_0={_degrees(longitude)}"
    width = (east - west) * math.cos(math.radians(latitude))
    height = max(north - south, 1e-9)
    if width / height <= ROUND_ASPECT:
        return f"+proj=laea +lat_0={_degrees(latitude)} +lon_0={_degrees(longitude)}"
    if abs(latitude) < EQUATORIAL_LATITUDE_DEG:
        return f"+proj=cea +lat_ts={_degrees(abs(latitude))} +lon_0={_degrees(longitude)}"
    parallels = _degrees(south + height / 6.0), _degrees(north - height / 6.0)
    return (
        f"+proj=aea +lat_1={parallels[0]} +lat_2={parallels[1]} "
        f"+lat_0={_degrees(latitude)} +lon_0={_degrees(longitude)}"
    )


def _degrees(value: float) -> str:
    return f"{round(value, 6):.9g}"
