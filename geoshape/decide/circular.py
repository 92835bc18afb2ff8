"""Mean directions: of bearings, and of axes that have no sense, whose angles are doubled first.

An axis of 10 degrees is one of 190 degrees as well, so that axes repeat after 180 degrees and the mean of 1 and 179 is
0, not 90. Angles are therefore stretched to the full circle, averaged as unit vectors, and the mean is shrunk back.

References
----------
.. [1] Mardia & Jupp 2000, Directional Statistics, Wiley, sections 2.2, 6.3 and 9.1.
.. [2] Wilkie 1983, Rayleigh test for randomness of circular data, Applied Statistics 32.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.rings import FloatArray, IntArray

AXIAL_PERIOD_DEG = 180.0
FULL_PERIOD_DEG = 360.0

NO_DIRECTION = 1e-9
"""Resultant length below which rounding alone decides the direction."""

MEAN_DECIMALS = 10
"""Digits of a mean direction that double precision bears."""

MIN_TESTED = 5
"""For fewer angles the approximation of the p-value is off by half and more where it is 0.01."""


@dataclass(frozen=True, eq=False)
class Directions:
    """Mean direction of groups of angles.

    Attributes
    ----------
    mean_deg : (n_groups,) float64
        In [0, period); NaN for a group without angles, or where they cancel out.
    resultant_length : (n_groups,) float64
        Length of the mean unit vector: 1 where all angles agree, 0 where they cancel out; NaN without angles.
    rayleigh_p : (n_groups,) float64
        Probability that angles without any preferred direction have so long a resultant; NaN for fewer than five.
    """

    mean_deg: FloatArray
    resultant_length: FloatArray
    rayleigh_p: FloatArray


def mean_directions(
    angle_deg: FloatArray, code: IntArray, n_groups: int, *, period_deg: float = AXIAL_PERIOD_DEG
) -> Directions:
    """Average directions by group.

    Parameters
    ----------
    angle_deg : (n_rows,) float64
        NaN is left out.
    code : (n_rows,) int64
        Group of each angle, from 0.
    n_groups : int
    period_deg : float
        180 for axes, 360 for bearings.

    Returns
    -------
    Directions

    Examples
    --------
    >>> axes = mean_directions(np.array([179.0, 3.0]), np.array([0, 0]), 1)
    >>> axes.mean_deg.round(6), axes.resultant_length.round(4)
    (array([1.]), array([0.9976]))
    """
    has_angle = ~np.isnan(angle_deg)
    members = code[has_angle]
    turn = np.exp(2j * np.pi * (angle_deg[has_angle] % period_deg) / period_deg)
    count = np.bincount(members, minlength=n_groups).astype(np.float64)
    cosine = np.bincount(members, weights=turn.real, minlength=n_groups)
    sine = np.bincount(members, weights=turn.imag, minlength=n_groups)
    safe_count = np.where(count > 0, count, np.nan)
    length = np.minimum(np.hypot(cosine, sine) / safe_count, 1.0)
    mean = np.angle(cosine + 1j * sine) * period_deg / (2 * np.pi)
    # Rounding first keeps what is 0 but for the last digits from becoming nearly the period.
    mean = np.round(mean, MEAN_DECIMALS) % period_deg
    mean = np.where(length > NO_DIRECTION, mean, np.nan)
    return Directions(mean, length, rayleigh_p(count, length))


def rayleigh_p(count: FloatArray, resultant_length: FloatArray) -> FloatArray:
    """Probability of so long a resultant where no direction is preferred.

    Parameters
    ----------
    count : (n_groups,) float64
        Number of angles.
    resultant_length : (n_groups,) float64
        Length of the mean unit vector, from 0 to 1.

    Returns
    -------
    (n_groups,) float64
        NaN for fewer than five angles. The approximation is within 0.006 of the exact value for five angles, and
        within 0.001 from eight on.

    Notes
    -----
    exp(sqrt((1 + 2n)^2 - 4R^2) - (1 + 2n)) with R = n times the resultant length [2]_, rearranged against cancellation.

    Examples
    --------
    >>> rayleigh_p(np.array([9.0]), np.array([0.711])).round(4)
    array([0.007])
    """
    whole = 1 + 2 * count
    squared = 4 * (count * resultant_length) ** 2
    exponent = -squared / (np.sqrt(whole**2 - squared) + whole)
    return np.where(count >= MIN_TESTED, np.exp(exponent), np.nan)
