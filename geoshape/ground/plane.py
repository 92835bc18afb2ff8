"""The centred plane: Lambert azimuthal equal-area on an ellipsoid, a centre for each feature, in NumPy.

Latitudes go through the authalic sphere: the sphere of equal area on which the azimuthal plane is exact (Snyder 1987,
USGS Professional Paper 1395, equations 3-11, 3-12 and 24-17 ... 24-20). Places come as differences from the centre and
every difference stays a product, so that a shape of a metre keeps as many digits as one of a thousand kilometres, at
the equator as at a pole.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from geoshape.rings import FloatArray, IntArray

CHUNK = 8_192
"""Points projected at a time: their intermediate arrays stay in the processor's cache."""

SERIES_END = 1e-17
"""Terms of a series smaller than this are left out: less than the last digit of 1."""

MAX_SERIES_ARGUMENT = 0.1
"""Largest square for which a series is quicker than the function."""

AT_POLE = 1e-8
"""Share of the centre's way to a pole below which a point's own is taken by the rate that holds at the pole."""


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

    @cached_property
    def pole_area(self) -> float:
        """Snyder's q at the pole: the area from equator to pole over pi times the squared semi-major axis."""
        e2 = self.eccentricity_squared
        return 1.0 + (1.0 - e2) * float(_atanh_ratio(np.array([e2]))[0])

    @cached_property
    def authalic_radius_m(self) -> float:
        """Radius of the sphere of equal area."""
        return self.semi_major_m * float(np.sqrt(self.pole_area / 2.0))

    def area_element(self, latitude_rad: FloatArray) -> FloatArray:
        """Take the area of a radian of longitude by a radian of latitude at a geographic latitude, in square metres."""
        e2 = self.eccentricity_squared
        flatter = 1.0 - e2 * np.sin(latitude_rad) ** 2
        return np.asarray(self.semi_major_m**2 * (1.0 - e2) * np.cos(latitude_rad) / flatter**2)

    def way_to_pole(self, sine: FloatArray, cosine: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Take how much of a hemisphere lies between a latitude and the nearer pole.

        Parameters
        ----------
        sine, cosine : (n,) float64
            Of the geographic latitude.

        Returns
        -------
        share : (n,) float64
            1 less the absolute sine of the authalic latitude.
        slimming : (n,) float64
            Cosine of the authalic latitude over that of the geographic one.

        Notes
        -----
        With s = |sin|, 1 - s = cos^2 / (1 + s) and q Snyder's 3-12, q_pole - q is
        (1 - s)(1 + e2 s)/(1 - e2 s^2) + (1 - e2)/e atanh(e (1 - s)/(1 - e2 s)): no difference of near-equal numbers.
        """
        e2 = self.eccentricity_squared
        s = np.abs(sine)
        to_pole = cosine * cosine / (1.0 + s)
        narrow = 1.0 / (1.0 - e2 * s)
        ratio = _atanh_ratio(e2 * (to_pole * narrow) ** 2)
        growth = ((1.0 + e2 * s) / (1.0 - e2 * s * s) + (1.0 - e2) * ratio * narrow) / self.pole_area
        share = to_pole * growth
        return share, np.sqrt(growth * (2.0 - share) / (1.0 + s))

    def authalic(self, latitude_rad: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Take sine and cosine of the authalic latitude.

        Parameters
        ----------
        latitude_rad : (n,) float64
            Geographic latitude.

        Returns
        -------
        sine, cosine : (n,) float64
        """
        sine, cosine = np.sin(latitude_rad), np.cos(latitude_rad)
        share, slimming = self.way_to_pole(sine, cosine)
        return np.copysign(1.0 - share, sine), cosine * slimming

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
        Newton's method on the authalic latitude, from the authalic latitude itself; the slope stays within 2 e2 of 1.
        """
        e2 = self.eccentricity_squared
        latitude = np.arctan2(sine, cosine)
        for _ in range(4):
            got_sine, got_cosine = self.authalic(latitude)
            s = np.sin(latitude)
            _, slimming = self.way_to_pole(s, np.cos(latitude))
            slope = 2.0 * (1.0 - e2) / (self.pole_area * slimming * (1.0 - e2 * s * s) ** 2)
            error = sine * got_cosine - cosine * got_sine
            latitude = np.clip(latitude + error / slope, -np.pi / 2.0, np.pi / 2.0)
        return np.asarray(latitude)


def _atanh_ratio(square: FloatArray) -> FloatArray:
    """Take atanh(z) / z from z^2; 1 at 0."""
    largest = float(np.fmax.reduce(square, initial=0.0))
    if largest > MAX_SERIES_ARGUMENT:
        z = np.sqrt(np.maximum(square, SERIES_END))
        return np.asarray(np.arctanh(z) / z)
    degree, last = 0, 1.0
    while last > SERIES_END:
        degree += 1
        last *= largest
    ratio = np.full_like(square, 1.0 / (2 * degree + 1))
    for k in range(degree - 1, -1, -1):
        ratio *= square
        ratio += 1.0 / (2 * k + 1)
    return ratio


def _sine(angle: FloatArray) -> FloatArray:
    """Take the sine, by as few terms of its series as the largest angle needs."""
    square = angle * angle
    largest = float(np.fmax.reduce(square, initial=0.0))
    if largest > MAX_SERIES_ARGUMENT:
        return np.asarray(np.sin(angle))
    degree, last = 0, 1.0
    while last > SERIES_END:
        degree += 1
        last *= largest / (2 * degree * (2 * degree + 1))
    sine = np.ones_like(square)
    for k in range(degree, 0, -1):
        sine *= square
        sine *= -1.0 / (2 * k * (2 * k + 1))
        sine += 1.0
    sine *= angle
    return sine


@dataclass(frozen=True, eq=False)
class Centres:
    """Centres of planes, one for each feature.

    Attributes
    ----------
    sine_geographic, cosine_geographic : (n,) float64
        Of the geographic latitude.
    sine, cosine : (n,) float64
        Of the authalic latitude.
    share : (n,) float64
        1 less the absolute authalic sine.
    stretch : (n,) float64
        Snyder's D: makes the plane true to shape at its centre; 1 at a pole.
    """

    sine_geographic: FloatArray
    cosine_geographic: FloatArray
    sine: FloatArray
    cosine: FloatArray
    share: FloatArray
    stretch: FloatArray

    @classmethod
    def at(cls, latitude_deg: FloatArray, ellipsoid: Ellipsoid) -> Centres:
        """Put centres at geographic latitudes; their longitudes only ever count as differences."""
        # Near a pole the way to it has more digits than the latitude.
        sine, cosine = np.sin(np.radians(latitude_deg)), np.sin(np.radians(90.0 - np.abs(latitude_deg)))
        share, slimming = ellipsoid.way_to_pole(sine, cosine)
        radius = ellipsoid.authalic_radius_m / ellipsoid.semi_major_m
        stretch = 1.0 / (radius * slimming * np.sqrt(1.0 - ellipsoid.eccentricity_squared * sine * sine))
        return cls(sine, cosine, np.copysign(1.0 - share, sine), cosine * slimming, share, stretch)

    def take(self, index: IntArray) -> Centres:
        """Give the centre of each of many points."""
        return Centres(
            self.sine_geographic[index],
            self.cosine_geographic[index],
            self.sine[index],
            self.cosine[index],
            self.share[index],
            self.stretch[index],
        )


def project(
    points_deg: tuple[FloatArray, FloatArray],
    middle_deg: FloatArray,
    feature: IntArray,
    centres: Centres,
    ellipsoid: Ellipsoid,
) -> tuple[FloatArray, FloatArray]:
    """Project points on the planes of their features.

    Parameters
    ----------
    points_deg : two (n,) float64
        Longitude and geographic latitude, both from wherever ``middle_deg`` counts: the nearer, the more digits.
    middle_deg : (n_features, 2) float64
        Longitude and latitude of the centres.
    feature : (n,) int64
        Which centre each point belongs to.
    centres : Centres, (n_features,)
    ellipsoid : Ellipsoid

    Returns
    -------
    x, y : (n,) float64
        Metres, y to true north at the centre. Not finite opposite to the centre, which has no place on the plane.

    References
    ----------
    .. [1] Snyder, J. P. (1987). Map Projections: A Working Manual. USGS Professional Paper 1395, p. 187.

    Examples
    --------
    >>> sphere = Ellipsoid(1.0, 0.0)
    >>> equator = Centres.at(np.zeros(1), sphere)
    >>> x, y = project((np.array([90.0]), np.zeros(1)), np.zeros((1, 2)), np.zeros(1, dtype=np.int64), equator, sphere)
    >>> round(float(x[0]), 6), float(y[0])
    (1.414214, 0.0)
    """
    longitude, latitude = points_deg
    x, y = np.empty_like(longitude), np.empty_like(latitude)
    middle_x, middle_y = middle_deg.T.copy()
    for start in range(0, len(x), CHUNK):
        part = slice(start, start + CHUNK)
        owner = feature[part]
        near = centres.take(owner)
        rise, cosine = _rise(np.radians(latitude[part] - middle_y[owner]), near, ellipsoid)
        turn = np.radians(longitude[part] - middle_x[owner])
        x[part], y[part] = azimuthal(turn, rise, cosine, near, ellipsoid.authalic_radius_m)
    return x, y


def _rise(offset_rad: FloatArray, centres: Centres, ellipsoid: Ellipsoid) -> tuple[FloatArray, FloatArray]:
    """Take what the authalic sine gains from centre to point, and the point's authalic cosine."""
    e2 = ellipsoid.eccentricity_squared
    s0, c0 = centres.sine_geographic, centres.cosine_geographic
    half = _sine(0.5 * offset_rad)
    # sin(a) - sin(b) = 2 sin((a - b) / 2) cos((a + b) / 2)
    gain = 2.0 * half * (np.sqrt(1.0 - half * half) * c0 - half * s0)
    s = s0 + gain
    cross = e2 * s * s0
    narrow = 1.0 / (1.0 - cross)
    ratio = _atanh_ratio(e2 * (gain * narrow) ** 2)
    rise = (1.0 + cross) / ((1.0 - e2 * s * s) * (1.0 - e2 * s0 * s0)) + ratio * narrow
    rise *= gain
    rise *= (1.0 - e2) / ellipsoid.pole_area
    share = centres.share - np.copysign(1.0, s0) * rise
    cosine = np.sqrt(np.maximum(share * (2.0 - share), 0.0))
    at_pole = (share < AT_POLE * centres.share) | (share > 2.0 - AT_POLE)
    if at_pole.any():
        # So close to a pole, as seen from the centre, the subtraction leaves nothing: take cos(a + b) instead.
        geographic = c0 * (1.0 - 2.0 * half * half) - 2.0 * half * np.sqrt(1.0 - half * half) * s0
        slimming = np.sqrt(2.0 / ((1.0 - e2) * ellipsoid.pole_area))
        cosine[at_pole] = np.abs(geographic[at_pole]) * slimming
    return rise, cosine


def azimuthal(
    offset_rad: FloatArray, rise: FloatArray, cosine: FloatArray, centres: Centres, radius_m: float
) -> tuple[FloatArray, FloatArray]:
    """Project points of the authalic sphere on the planes of their centres.

    Parameters
    ----------
    offset_rad : (n,) float64
        Longitude less that of the centre.
    rise : (n,) float64
        Authalic sine less that of the centre.
    cosine : (n,) float64
        Authalic cosine.
    centres : Centres, (n,)
        The centre of each point.
    radius_m : float
        Of the authalic sphere.

    Returns
    -------
    x, y : (n,) float64
        Metres.
    """
    fall = -rise * (2.0 * centres.sine + rise) / np.maximum(cosine + centres.cosine, SERIES_END)
    half = _sine(0.5 * offset_rad)
    versine = 2.0 * half * half
    if float(np.fmax.reduce(np.abs(offset_rad), initial=0.0)) > np.pi:
        across = np.sin(offset_rad)
    else:
        across = 2.0 * half * np.sqrt(1.0 - half * half)
    # Squared half chord: of the latitudes, and of the longitudes along both parallels.
    chord2 = 0.25 * (rise * rise + fall * fall) + 0.5 * cosine * centres.cosine * versine
    with np.errstate(divide="ignore", invalid="ignore"):
        scale = radius_m / np.sqrt(1.0 - chord2)
        x = scale * centres.stretch * cosine * across
        y = scale / centres.stretch * (rise * centres.cosine - fall * centres.sine + cosine * centres.sine * versine)
    return x, y


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

    Notes
    -----
    The formula is the sphere's. On the Earth's ellipsoid the deformation differs from it by 0.0024 degrees at most for
    every degree of distance from the centre.

    References
    ----------
    .. [1] Snyder, J. P. (1987). Map Projections: A Working Manual. USGS Professional Paper 1395, eq. 4-9.
    """
    sine2 = np.minimum((planar_distance_m / (2.0 * radius_m)) ** 2, 1.0)
    return np.degrees(2.0 * np.arcsin(sine2 / (2.0 - sine2)))
