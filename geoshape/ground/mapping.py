"""The way from the layer's coordinates to longitude and latitude, and from there to a plane."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pyproj

from geoshape.ground.plane import Centres, Ellipsoid, project
from geoshape.ground.seams import FRAME_LAYER, FRAME_NORTH
from geoshape.rings import FloatArray, IntArray


@dataclass(frozen=True, eq=False)
class Globe:
    """Turns coordinates of the layer into positions on its own ellipsoid.

    Attributes
    ----------
    ellipsoid : Ellipsoid
    inverse : pyproj.Transformer or None
        From a projected CRS to its own geodetic CRS; None where coordinates are degrees.
    """

    ellipsoid: Ellipsoid
    inverse: pyproj.Transformer | None

    def degrees(self, x: FloatArray, y: FloatArray, frames: IntArray) -> tuple[FloatArray, FloatArray]:
        """Take longitude and latitude in degrees, each point in its own frame; infinite where there is none."""
        if self.inverse is not None:
            longitude, latitude = self.inverse.transform(x, y)
            return longitude, latitude
        if not frames.any():
            return x, y
        longitude, latitude = x.copy(), y.copy()
        polar = frames != FRAME_LAYER
        radians, sine, cosine = self._from_pole(x[polar], y[polar], frames[polar])
        longitude[polar] = np.degrees(radians)
        latitude[polar] = np.degrees(self.ellipsoid.geographic_latitude(sine, cosine))
        return longitude, latitude

    def sphere(self, x: FloatArray, y: FloatArray, frames: IntArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Take longitude in radians, and sine and cosine of the authalic latitude."""
        if not frames.any():
            longitude, latitude = self.degrees(x, y, frames)
            with np.errstate(invalid="ignore"):
                return np.radians(longitude), *self.ellipsoid.authalic(np.radians(latitude))
        polar = frames != FRAME_LAYER
        longitude, sine, cosine = (np.empty(len(x)) for _ in range(3))
        longitude[~polar] = np.radians(x[~polar])
        sine[~polar], cosine[~polar] = self.ellipsoid.authalic(np.radians(y[~polar]))
        longitude[polar], sine[polar], cosine[polar] = self._from_pole(x[polar], y[polar], frames[polar])
        return longitude, sine, cosine

    def _from_pole(self, x: FloatArray, y: FloatArray, frames: IntArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        sign = np.where(frames == FRAME_NORTH, 1.0, -1.0)
        share = (x * x + y * y) / (2.0 * self.ellipsoid.authalic_radius_m**2)
        longitude = np.arctan2(x, -sign * y)
        return longitude, sign * (1.0 - share), np.sqrt(np.maximum(share * (2.0 - share), 0.0))


@dataclass(frozen=True, eq=False)
class CentredMap:
    """Maps each feature onto the plane of its own centre.

    Attributes
    ----------
    globe : Globe
    origin : (n_features, 2) float64
    frames : (n_features,) int64
    centres : Centres, (n_features,)
    """

    globe: Globe
    origin: FloatArray
    frames: IntArray
    centres: Centres

    def __call__(self, x: FloatArray, y: FloatArray, feature: IntArray) -> tuple[FloatArray, FloatArray]:
        """Map points given relative to the origins of their features."""
        longitude, sine, cosine = self.globe.sphere(
            x + self.origin[feature, 0], y + self.origin[feature, 1], self.frames[feature]
        )
        with np.errstate(invalid="ignore", divide="ignore"):
            return project(
                longitude, (sine, cosine), self.centres.take(feature), self.globe.ellipsoid.authalic_radius_m
            )


@dataclass(frozen=True, eq=False)
class SharedMap:
    """Maps all features onto one projection, each about its own centre there.

    Attributes
    ----------
    globe : Globe
    target : pyproj.Proj
    unit_m : float
        Metres in a unit of the projection.
    meridian_deg : float
        Longitude, from Greenwich, of the meridian that the layer counts from.
    origin : (n_features, 2) float64
    frames : (n_features,) int64
    middle : (n_features, 2) float64
        Place of each feature's centre in the projection.
    """

    globe: Globe
    target: pyproj.Proj
    unit_m: float
    meridian_deg: float
    origin: FloatArray
    frames: IntArray
    middle: FloatArray

    def __call__(self, x: FloatArray, y: FloatArray, feature: IntArray) -> tuple[FloatArray, FloatArray]:
        """Map points given relative to the origins of their features."""
        longitude, latitude = self.globe.degrees(
            x + self.origin[feature, 0], y + self.origin[feature, 1], self.frames[feature]
        )
        east, north = self.target(longitude + self.meridian_deg, latitude)
        with np.errstate(invalid="ignore"):
            return (
                self.unit_m * (np.asarray(east) - self.middle[feature, 0]),
                self.unit_m * (np.asarray(north) - self.middle[feature, 1]),
            )
