"""Principal axes of the second moments."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.rings import FloatArray

NO_DIRECTION = 1e-6
"""Axis strength below which a shape has no preferred direction."""


@dataclass(frozen=True, eq=False)
class PrincipalAxes:
    """Principal axes of a batch of regions.

    Attributes
    ----------
    major_m, minor_m : (n,) float64
        Full axes of the ellipse with the same second moments.
    ratio : (n,) float64
        Minor over major axis.
    azimuth_deg : (n,) float64
        Direction of the major axis, clockwise from the plane's y axis, in [0, 180); NaN without a direction.
    strength : (n,) float64
        (l1 - l2) / (l1 + l2).
    """

    major_m: FloatArray
    minor_m: FloatArray
    ratio: FloatArray
    azimuth_deg: FloatArray
    strength: FloatArray


def principal_axes(central: FloatArray) -> PrincipalAxes:
    """Find the principal axes from central moments.

    Parameters
    ----------
    central : (n, 10) float64
        Central moments, in the order of ``moments.ORDERS``.

    Returns
    -------
    PrincipalAxes
        NaN where the region has no area.
    """
    area, mu20, mu11, mu02 = central[:, 0], central[:, 3], central[:, 4], central[:, 5]
    spread = np.hypot(mu20 - mu02, 2.0 * mu11)
    trace = mu20 + mu02
    larger = 0.5 * (trace + spread)
    # The product of the eigenvalues is the determinant: no difference of near-equal sums for thin shapes.
    smaller = np.maximum((mu20 * mu02 - mu11**2) / larger, 0.0)
    strength = np.minimum(spread / trace, 1.0)
    angle_deg = np.degrees(0.5 * np.arctan2(2.0 * mu11, mu20 - mu02))
    azimuth = np.where(strength < NO_DIRECTION, np.nan, axial(90.0 - angle_deg))
    return PrincipalAxes(
        major_m=4.0 * np.sqrt(larger / area),
        minor_m=4.0 * np.sqrt(smaller / area),
        ratio=np.minimum(np.sqrt(smaller / larger), 1.0),
        azimuth_deg=azimuth,
        strength=strength,
    )


def axial(azimuth_deg: FloatArray) -> FloatArray:
    """Bring directions without a sense into [0, 180).

    Examples
    --------
    >>> axial(np.array([-10.0, 180.0, 359.0, -1e-20]))
    array([170.,   0., 179.,   0.])
    """
    folded = np.mod(azimuth_deg, 180.0)
    # A tiny negative angle folds to 180 itself.
    return np.where(folded >= 180.0, 0.0, folded)
