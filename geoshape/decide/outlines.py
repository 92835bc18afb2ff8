"""Outlines made ready to be laid upon each other: centred, of unit power, with their size kept aside."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.formulas.arclength import ComplexArray
from geoshape.formulas.fourier import exact_coefficients, sampled_coefficients
from geoshape.rings import FloatArray, IntArray, RingBatch
from geoshape.rings import outlines as outlines_of

MATCH_HARMONICS = 64
"""Harmonics that take part in a match. Beyond them a polygon holds well below a thousandth of its shape."""


@dataclass(frozen=True, eq=False)
class Outlines:
    """Outlines ready to be matched, a row a feature.

    Attributes
    ----------
    coefficients : (n, 2 * K + 1) complex128
        Fourier coefficients for k = -K ... K, with Z_0 = 0 and sum |Z_k|^2 = 1; NaN for a feature without an outline.
    size_m : (n,) float64
        Root of sum |Z_k|^2 (k other than 0) before scaling: the quadratic mean distance of the outline from its
        centre. NaN for a feature without an outline.
    """

    coefficients: ComplexArray
    size_m: FloatArray

    def __len__(self) -> int:
        return len(self.size_m)

    @property
    def highest(self) -> int:
        """Highest harmonic K."""
        return int(self.coefficients.shape[1] // 2)

    def take(self, rows: IntArray) -> Outlines:
        """Return some of the outlines, in the order of ``rows``."""
        return Outlines(self.coefficients[rows], self.size_m[rows])


def prepare_coefficients(coefficients: ComplexArray) -> Outlines:
    """Centre outlines and scale them to unit power.

    Parameters
    ----------
    coefficients : (n, 2 * K + 1) complex128
        Fourier coefficients for k = -K ... K, metres; NaN where there is no outline.

    Returns
    -------
    Outlines
        An outline that is one point has no shape: NaN.
    """
    highest = coefficients.shape[1] // 2
    has_outline = np.asarray(np.isfinite(coefficients).all(axis=1))[:, None]
    centred = np.where(has_outline, coefficients, 0.0)
    centred[:, highest] = 0.0
    size = np.sqrt((centred.real**2 + centred.imag**2).sum(axis=1))
    has_shape = size > 0
    centred /= np.where(has_shape, size, 1.0)[:, None]
    centred[~has_shape] = np.nan
    return Outlines(centred, np.where(has_shape, size, np.nan))


def prepare(points: ComplexArray) -> Outlines:
    """Make sampled outlines ready to be matched.

    Parameters
    ----------
    points : (n, N) complex128
        Points x + iy at equal arc length, counter-clockwise, metres; NaN where there is no outline.

    Returns
    -------
    Outlines
        With the harmonics |k| <= min(64, N / 2 - 1).

    Notes
    -----
    Samples of the same outline begun at another vertex differ slightly, and so do their coefficients: about 2e-5 at
    N = 256. ``prepare_rings`` has no such difference.

    Examples
    --------
    >>> square = np.array([[1 + 1j, 1j, -1 + 1j, -1 + 0j, -1 - 1j, -1j, 1 - 1j, 1 + 0j]])
    >>> prepare(square).highest
    3
    """
    return prepare_coefficients(sampled_coefficients(points, min(MATCH_HARMONICS, points.shape[1] // 2 - 1)))


def prepare_rings(batch: RingBatch, highest: int = MATCH_HARMONICS) -> Outlines:
    """Make the outlines of polygons ready to be matched, from their exact Fourier coefficients.

    Parameters
    ----------
    batch : RingBatch
        In metres on an equal-area plane. The outline of a feature is the exterior of its largest part.
    highest : int
        Highest harmonic.

    Returns
    -------
    Outlines
        A row a feature; NaN for a feature without rings.

    Notes
    -----
    Independent of the first vertex to 1e-12. Costs about 0.5 microseconds a vertex at 64 harmonics, several times
    what sampling and a fast Fourier transform cost.

    Examples
    --------
    >>> import shapely
    >>> from geoshape.geometry import ring_batch
    >>> squares = prepare_rings(ring_batch([shapely.box(0, 0, 2, 2), None]))
    >>> np.round(squares.size_m, 4)
    array([1.1547,    nan])
    """
    rings = outlines_of(batch)
    coefficients = np.full((batch.n_features, 2 * highest + 1), np.nan + 0j)
    coefficients[rings.ring_feature] = exact_coefficients(rings, highest)
    return prepare_coefficients(coefficients)
