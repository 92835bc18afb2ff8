"""How much of the true area a projection shows, found by trying it."""

from __future__ import annotations

import math

import numpy as np
import pyproj

from geoshape.ground.crs_parts import (
    angle_unit_deg,
    globe_of,
    horizontal,
    length_unit_m,
    meridian_deg,
    to_lonlat,
    unfolded,
)
from geoshape.options import Bounds
from geoshape.rings import FloatArray

STEP_RAD = 2e-4
"""Step of the differences that give an areal scale: 1.3 km, where neither rounding nor the fourth power matters."""

FARTHEST_M = 1e9
"""Coordinates beyond this are PROJ's word for nowhere."""

GRID = 21
"""Points a side of the grid over the layer on which a CRS is tried."""

NEAR_POLE_DEG = 89.9

WORLD = (-180.0, -80.0, 180.0, 80.0)


def lonlat_grid(crs: pyproj.CRS, bounds: Bounds | None) -> tuple[FloatArray, FloatArray]:
    """Lay a grid over a layer's extent.

    Parameters
    ----------
    crs : pyproj.CRS
        The horizontal part of the layer's CRS.
    bounds : (west, south, east, north) or None
        In that CRS; where a layer has no extent, the grid is over where the CRS is used.

    Returns
    -------
    longitude, latitude : (n,) float64
        From Greenwich, in degrees; points without a place on the globe are left out.
    """
    if bounds is None or not all(map(math.isfinite, bounds)):
        use = crs.area_of_use
        west, south, east, north = WORLD if use is None else use.bounds
        east += 360.0 if east < west else 0.0
        x, y = _grid((west, south, east, north))
        return x, np.clip(y, -NEAR_POLE_DEG, NEAR_POLE_DEG)
    x, y = _grid(bounds)
    inverse = to_lonlat(crs)
    if inverse is not None:
        x, y = inverse.transform(x, y)
        good = np.isfinite(x) & np.isfinite(y)
        x, y = x[good], y[good]
    degrees = angle_unit_deg(crs)
    return x * degrees + meridian_deg(crs), np.clip(y * degrees, -NEAR_POLE_DEG, NEAR_POLE_DEG)


def layer_grid(crs: pyproj.CRS, bounds: Bounds | None) -> tuple[FloatArray, FloatArray]:
    """Lay a grid of longitudes and latitudes over a layer's extent, whatever else its CRS holds."""
    return lonlat_grid(horizontal(crs), bounds)


def _grid(bounds: Bounds) -> tuple[FloatArray, FloatArray]:
    west, south, east, north = bounds
    x, y = np.meshgrid(np.linspace(west, east, GRID), np.linspace(south, north, GRID))
    return x.ravel(), y.ravel()


def areal_scale(crs: pyproj.CRS, area: tuple[FloatArray, FloatArray]) -> tuple[float, float] | None:
    """Find the least and the largest areal scale of a projected CRS.

    Parameters
    ----------
    crs : pyproj.CRS
    area : two (n,) float64
        Longitudes and latitudes, from Greenwich, in degrees.

    Returns
    -------
    (float, float) or None
        None where the CRS has no place for any of the points.

    Notes
    -----
    Taken from the projection itself by differences: what PROJ says of its factors is true to the form it has, and of
    some projections it has only the sphere's.

    Examples
    --------
    >>> low, high = areal_scale(pyproj.CRS(32632), (np.array([9.0]), np.array([48.0])))
    >>> round(low, 6)
    0.9992
    """
    if not len(area[0]):
        return None
    projection = unfolded(crs)
    longitude, latitude = (np.radians(values) for values in area)
    along_x, along_y = _derivative(projection, longitude, latitude, (1.0, 0.0))
    up_x, up_y = _derivative(projection, longitude, latitude, (0.0, 1.0))
    scale = np.abs(along_x * up_y - along_y * up_x) * length_unit_m(crs) ** 2 / globe_of(crs).area_element(latitude)
    scale = scale[np.isfinite(scale)]
    return (float(scale.min()), float(scale.max())) if len(scale) else None


def _derivative(
    projection: pyproj.Proj, longitude: FloatArray, latitude: FloatArray, direction: tuple[float, float]
) -> tuple[FloatArray, FloatArray]:
    """Take the derivative of x and y by central differences of the fourth order; NaN where a point has no place."""
    found = np.zeros((2, len(longitude)))
    for steps, weight in ((1, 8.0), (-1, -8.0), (2, -1.0), (-2, 1.0)):
        shift = steps * STEP_RAD
        mapped = np.array(
            projection(longitude + shift * direction[0], latitude + shift * direction[1], radians=True),
            dtype=np.float64,
        )
        found += weight * np.where(np.abs(mapped) < FARTHEST_M, mapped, np.nan)
    found /= 12.0 * STEP_RAD
    return found[0], found[1]
