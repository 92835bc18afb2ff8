"""The way from the layer's coordinates to longitude and latitude, and from there to a plane."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pyproj

from geoshape.ground.plane import Centres, Ellipsoid, azimuthal, project
from geoshape.ground.polar import FRAME_LAYER, FRAME_LONLAT, FRAME_NORTH, FRAME_SOUTH
from geoshape.rings import BoolArray, FloatArray, IntArray

POLE_RADIUS_M = 1e-3
"""A centre as close to a pole as this is taken to be there, reached along the meridian of 0."""


def is_polar(frames: IntArray) -> BoolArray:
    """Tell which coordinates are metres on the plane of a pole."""
    return np.isin(frames, (FRAME_NORTH, FRAME_SOUTH))


@dataclass(frozen=True, eq=False)
class Globe:
    """Turns coordinates of the layer into positions on its own ellipsoid.

    Attributes
    ----------
    ellipsoid : Ellipsoid
    inverse : pyproj.Transformer or None
        From a projected CRS to its own geodetic CRS; None where coordinates are longitude and latitude in degrees.
    unit_deg : float
        Degrees in what ``inverse`` gives.
    """

    ellipsoid: Ellipsoid
    inverse: pyproj.Transformer | None = None
    unit_deg: float = 1.0

    def degrees(self, x: FloatArray, y: FloatArray, frames: IntArray) -> tuple[FloatArray, FloatArray]:
        """Take longitude, from the layer's own prime meridian, and latitude, in degrees.

        Parameters
        ----------
        x, y : (n,) float64
        frames : (n,) int64
            Frame of each point.

        Returns
        -------
        longitude, latitude : (n,) float64
            Infinite where the projection has no inverse.
        """
        if not frames.any():
            return self._from_layer(x, y)
        longitude, latitude = x.copy(), y.copy()
        layer = frames == FRAME_LAYER
        longitude[layer], latitude[layer] = self._from_layer(x[layer], y[layer])
        polar = is_polar(frames)
        at = self.from_pole(x[polar], y[polar], frames[polar])
        longitude[polar] = np.degrees(at.longitude_rad)
        latitude[polar] = np.degrees(self.ellipsoid.geographic_latitude(at.sine, at.cosine))
        return longitude, latitude

    def _from_layer(self, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
        if self.inverse is None:
            return x, y
        longitude, latitude = self.inverse.transform(x, y)
        return self.unit_deg * np.asarray(longitude), self.unit_deg * np.asarray(latitude)

    def from_pole(self, x: FloatArray, y: FloatArray, frames: IntArray) -> SpherePoints:
        """Take places on the authalic sphere of points on a polar plane.

        The pole itself is put on the meridian of 0.
        """
        sign = np.where(frames == FRAME_NORTH, 1.0, -1.0)
        distance2 = x * x + y * y
        share = distance2 / (2.0 * self.ellipsoid.authalic_radius_m**2)
        at_pole = distance2 <= POLE_RADIUS_M**2
        longitude = np.where(at_pole, 0.0, np.arctan2(x, -sign * y))
        share = np.where(at_pole, 0.0, share)
        return SpherePoints(longitude, sign * (1.0 - share), np.sqrt(np.maximum(share * (2.0 - share), 0.0)))


@dataclass(frozen=True, eq=False)
class SpherePoints:
    """Places on the authalic sphere.

    Attributes
    ----------
    longitude_rad, sine, cosine : (n,) float64
        Longitude; sine and cosine of the authalic latitude.
    """

    longitude_rad: FloatArray
    sine: FloatArray
    cosine: FloatArray


@dataclass(frozen=True, eq=False)
class CentredMap:
    """Maps each feature onto the plane of its own centre.

    A feature on a polar plane whose centre is the pole, or that reaches beyond the equator, stays on that plane: a
    centre elsewhere could have its opposite, which no plane can show, inside the feature.

    Attributes
    ----------
    globe : Globe
    origin : (n_features, 2) float64
        What was subtracted from coordinates of the layer.
    middle : (n_features, 2) float64
        Each centre, relative to the origin.
    frames : (n_features,) int64
    keeps_pole : (n_features,) bool
        Features that stay on the plane of their pole.
    """

    globe: Globe
    origin: FloatArray
    middle: FloatArray
    frames: IntArray
    keeps_pole: BoolArray

    @cached_property
    def centre_deg(self) -> FloatArray:
        """(n_features, 2) longitude, from the layer's own prime meridian, and latitude of each centre."""
        middle = self.origin + np.where(self.keeps_pole[:, None], -self.origin, self.middle)
        return np.column_stack(self.globe.degrees(middle[:, 0], middle[:, 1], self.frames))

    @cached_property
    def _centres(self) -> Centres:
        with np.errstate(invalid="ignore"):
            return Centres.at(self.centre_deg[:, 1], self.globe.ellipsoid)

    def __call__(self, x: FloatArray, y: FloatArray, feature: IntArray) -> tuple[FloatArray, FloatArray]:
        """Map points given relative to the origins of their features."""
        if not self.frames.any():
            return self._from_layer(x, y, feature)
        mapped = np.empty((2, len(x)))
        frames = self.frames[feature]
        for chosen, way in (
            (frames == FRAME_LAYER, self._from_layer),
            (frames == FRAME_LONLAT, self._from_lonlat),
            (is_polar(frames), self._from_pole),
        ):
            mapped[:, chosen] = way(x[chosen], y[chosen], feature[chosen])
        return mapped[0], mapped[1]

    def _from_layer(self, x: FloatArray, y: FloatArray, feature: IntArray) -> tuple[FloatArray, FloatArray]:
        if self.globe.inverse is None:
            return self._from_lonlat(x, y, feature)
        in_layer = np.full(len(x), FRAME_LAYER)
        lonlat = self.globe.degrees(x + self.origin[feature, 0], y + self.origin[feature, 1], in_layer)
        with np.errstate(invalid="ignore"):
            return project(lonlat, self.centre_deg, feature, self._centres, self.globe.ellipsoid)

    def _from_lonlat(self, x: FloatArray, y: FloatArray, feature: IntArray) -> tuple[FloatArray, FloatArray]:
        # Coordinates that are near each other already: their differences keep all digits.
        return project((x, y), self.middle, feature, self._centres, self.globe.ellipsoid)

    def _from_pole(self, x: FloatArray, y: FloatArray, feature: IntArray) -> tuple[FloatArray, FloatArray]:
        x, y = x + self.origin[feature, 0], y + self.origin[feature, 1]
        points = self.globe.from_pole(x, y, self.frames[feature])
        centres = self._centres.take(feature)
        offset = points.longitude_rad - np.radians(self.centre_deg[feature, 0])
        moved_x, moved_y = azimuthal(
            offset, points.sine - centres.sine, points.cosine, centres, self.globe.ellipsoid.authalic_radius_m
        )
        keeps = self.keeps_pole[feature]
        return np.where(keeps, x, moved_x), np.where(keeps, y, moved_y)


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
