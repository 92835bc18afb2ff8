"""The centred plane: Lambert azimuthal equal-area on an ellipsoid, a centre for each feature, in NumPy.

Latitudes go through the authalic sphere: the sphere of equal area on which the azimuthal plane is exact (Snyder 1987,
USGS Professional Paper 1395, equations 3-11, 3-12 and 24-17 ... 24-20).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.rings import FloatArray, IntArray


@dataclass(frozen=True)
class Ellipsoid:
    """An ellipsoid of revolution.

    Attributes
    ----------
    semi_major_m : float
    eccentricity_squared : float
        0 for a sphere.
    """

    semi_major_m: float
    eccentricity_squared: float

    @property
    def _whole(self) -> float:
        """Snyder's q at the pole: the area from equator to pole over pi times the squared semi-major axis."""
        return 1.0 + (1.0 - self.eccentricity_squared) * float(_atanh_ratio(self.eccentricity_squared, 1.0))

    @property
    def authalic_radius_m(self) -> float:
        """Radius of the sphere of equal area."""
        return self.semi_major_m * float(np.sqrt(self._whole / 2.0))

    def authalic(self, latitude_rad: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Take sine and cosine of the authalic latitude.

        Parameters
        ----------
        latitude_rad : (n,) float64
            Geographic latitude.

        Returns
        -------
        sine, cosine : (n,) float64

        Notes
        -----
        The cosine comes from the area between latitude and pole, in closed form without a difference of near-equal
        numbers, so that it keeps its digits up to the pole.
        """
        e2 = self.eccentricity_squared
        sine = np.sin(latitude_rad)
        cosine = np.cos(latitude_rad)
        s = np.abs(sine)
        to_pole = cosine * cosine / (1.0 + s)
        inverse = 1.0 / (1.0 - e2 * s * s)
        missing = to_pole * (1.0 + e2 * s) * inverse
        if e2 > 0.0:
            missing += (1.0 - e2) * to_pole * _atanh_ratio(e2, to_pole / (1.0 - e2 * s)) / (1.0 - e2 * s)
        else:
            missing += to_pole
        share = missing / self._whole
        return np.copysign(1.0 - share, sine), np.sqrt(share * (2.0 - share))

    def geographic_latitude(self, sine: FloatArray, cosine: FloatArray) -> FloatArray:
        """Take the geographic latitude, in radians, of authalic ones.

        Parameters
        ----------
        sine, cosine : (n,) float64
            Of the authalic latitude.

        Returns
        -------
        (n,) float64

        Notes
        -----
        Snyder's series 3-18, then corrections by what the authalic latitude of the result lacks; each leaves less than
        a hundredth of the error before it.
        """
        e2 = self.eccentricity_squared
        beta = np.arctan2(sine, cosine)
        latitude = (
            beta
            + (e2 / 3.0 + 31.0 * e2**2 / 180.0 + 517.0 * e2**3 / 5040.0) * np.sin(2.0 * beta)
            + (23.0 * e2**2 / 360.0 + 251.0 * e2**3 / 3780.0) * np.sin(4.0 * beta)
            + 761.0 * e2**3 / 45360.0 * np.sin(6.0 * beta)
        )
        for _ in range(CORRECTIONS):
            got_sine, got_cosine = self.authalic(latitude)
            # The sine of the small difference of the two latitudes is the difference itself.
            latitude = np.clip(latitude + (sine * got_cosine - cosine * got_sine), -np.pi / 2.0, np.pi / 2.0)
        return latitude


def _atanh_ratio(e2: float, value: FloatArray | float) -> FloatArray | float:
    """Take atanh(e v) / (e v); 1 on a sphere."""
    argument = np.sqrt(e2) * np.asarray(value)
    safe = np.where(argument > 0, argument, 1e-200)
    return np.arctanh(safe) / safe


@dataclass(frozen=True, eq=False)
class Centres:
    """Centres of planes, one for each feature.

    Attributes
    ----------
    longitude_rad : (n,) float64
    sine, cosine : (n,) float64
        Of the authalic latitude.
    stretch : (n,) float64
        Snyder's D: makes the plane true to shape at its centre.
    """

    longitude_rad: FloatArray
    sine: FloatArray
    cosine: FloatArray
    stretch: FloatArray

    def take(self, index: IntArray) -> Centres:
        """Give the centre of each of many points."""
        return Centres(self.longitude_rad[index], self.sine[index], self.cosine[index], self.stretch[index])

    @classmethod
    def at(cls, sphere: tuple[FloatArray, FloatArray, FloatArray], ellipsoid: Ellipsoid) -> Centres:
        """Put centres at longitudes and authalic latitudes, given by sine and cosine."""
        longitude_rad, sine, cosine = sphere
        latitude = ellipsoid.geographic_latitude(sine, cosine)
        s = np.sin(latitude)
        m = np.cos(latitude) / np.sqrt(1.0 - ellipsoid.eccentricity_squared * s * s)
        radius = ellipsoid.authalic_radius_m / ellipsoid.semi_major_m
        # At the pole both go to zero, and their ratio to 1.
        near_pole = cosine < POLE
        stretch = np.where(near_pole, 1.0, m / (radius * np.where(near_pole, 1.0, cosine)))
        return cls(longitude_rad, sine, cosine, stretch)


CORRECTIONS = 2
"""Corrections of a geographic latitude: the series is good to 1e-9, so two reach the last digits."""

POLE = 1e-9
"""Cosine of the authalic latitude below which a centre is a pole."""


def project(
    longitude_rad: FloatArray, authalic: tuple[FloatArray, FloatArray], centres: Centres, radius_m: float
) -> tuple[FloatArray, FloatArray]:
    """Project points on the plane of their centres.

    Parameters
    ----------
    longitude_rad : (n,) float64
    authalic : two (n,) float64
        Sine and cosine of the authalic latitude.
    centres : Centres, (n,)
        The centre for each point.
    radius_m : float
        Of the authalic sphere.

    Returns
    -------
    x, y : (n,) float64
        Metres, y to true north at the centre.

    References
    ----------
    .. [1] Snyder, J. P. (1987). Map Projections: A Working Manual. USGS Professional Paper 1395, p. 187.
    """
    sine, cosine = authalic
    half = np.sin(0.5 * (longitude_rad - centres.longitude_rad))
    versine = 2.0 * half * half
    across = cosine * np.sin(longitude_rad - centres.longitude_rad)
    # sin(b - b1) and cos(b - b1), with what the longitude adds: no difference of near-equal products.
    up = sine * centres.cosine - cosine * centres.sine * (1.0 - versine)
    along = sine * centres.sine + cosine * centres.cosine * (1.0 - versine)
    scale = radius_m * np.sqrt(2.0 / (1.0 + along))
    return scale * centres.stretch * across, scale / centres.stretch * up


def distortion_deg(planar_distance_m: FloatArray, radius_m: float) -> FloatArray:
    """Take the angular deformation omega of an azimuthal equal-area plane.

    Parameters
    ----------
    planar_distance_m : (n,) float64
        Distance from the centre on the plane, 2 R sin(c / 2).
    radius_m : float

    Returns
    -------
    (n,) float64
        sin(omega / 2) = tan^2(c / 2) / (2 + tan^2(c / 2)), in degrees.

    References
    ----------
    .. [1] Snyder, J. P. (1987). Map Projections: A Working Manual. USGS Professional Paper 1395, eq. 4-9.
    """
    sine2 = np.minimum((planar_distance_m / (2.0 * radius_m)) ** 2, 1.0)
    return np.degrees(2.0 * np.arcsin(sine2 / (2.0 - sine2)))
