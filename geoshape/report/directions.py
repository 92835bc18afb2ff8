"""Axial directions: their mean and the Rayleigh test on doubled angles."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.rings import FloatArray

FEWEST = 8
"""Directions below which no test is made."""


@dataclass(frozen=True)
class Rayleigh:
    """Outcome of the test.

    Attributes
    ----------
    count : int
        Directions.
    mean_deg : float
        Mean axial direction, clockwise from north, in [0, 180).
    length : float
        Length of the mean vector of the doubled angles: 0 even, 1 all alike.
    probability : float
        Of so long a mean vector, were the directions even.
    """

    count: int
    mean_deg: float
    length: float
    probability: float


def rayleigh(azimuth_deg: FloatArray) -> Rayleigh | None:
    """Test axial directions for a preferred one.

    Parameters
    ----------
    azimuth_deg : (n,) float64
        NaN is passed over.

    Returns
    -------
    Rayleigh or None
        None with fewer than eight directions.

    Notes
    -----
    Angles are doubled, since an axis has two ends; p = exp(sqrt(1 + 4 n + 4 (n^2 - (n R)^2)) - (1 + 2 n)) [1]_.

    References
    ----------
    .. [1] Zar, J. H. (1999). Biostatistical analysis, 4th ed., eq. 27.4.

    Examples
    --------
    >>> result = rayleigh(np.array([170.0, 10.0] * 10))
    >>> round(result.mean_deg) % 180, round(result.length, 3), result.probability < 1e-6
    (0, 0.94, True)
    """
    known = azimuth_deg[~np.isnan(azimuth_deg)]
    n = len(known)
    if n < FEWEST:
        return None
    vector = complex(np.exp(2j * np.radians(known)).mean())
    length = min(abs(vector), 1.0)
    mean = float(np.degrees(np.angle(vector)) / 2.0 % 180.0)
    exponent = np.sqrt(1.0 + 4.0 * n + 4.0 * n**2 * (1.0 - length**2)) - (1.0 + 2.0 * n)
    return Rayleigh(n, mean, length, float(np.exp(exponent)))
