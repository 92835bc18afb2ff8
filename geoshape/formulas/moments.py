"""Region moments to order three, exact from the edges by Green's theorem, and their invariants.

The chain is raw -> central -> normalised -> invariants; each step takes the array of the one before, whose columns
stand in the order of ``ORDERS``.
"""

from __future__ import annotations

from math import comb

import numpy as np

from geoshape.rings import FloatArray, RingBatch

ORDERS = ((0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2), (3, 0), (2, 1), (1, 2), (0, 3))
"""Exponents (p, q) of x and y in each column of a moment array."""

_COLUMN = {order: i for i, order in enumerate(ORDERS)}


def raw_moments(batch: RingBatch) -> FloatArray:
    """Take moments m_pq, the integral of x^p y^q over the region, about each feature's local origin.

    Parameters
    ----------
    batch : RingBatch
        Exteriors counter-clockwise, holes clockwise.

    Returns
    -------
    (n_features, 10) float64
        Moments in the order of ``ORDERS``; 0 for a feature without rings.

    Notes
    -----
    Each ring is integrated about its own first vertex and then moved, so that a small part far from the others
    keeps its digits.
    """
    if not batch.n_rings:
        return np.zeros((batch.n_features, len(ORDERS)))
    anchor_x = batch.x[batch.ring_start[:-1]]
    anchor_y = batch.y[batch.ring_start[:-1]]
    by_ring = translated(_ring_moments(batch, anchor_x, anchor_y), anchor_x, anchor_y)
    return np.column_stack([batch.sum_ring_values(column) for column in by_ring.T])


def _ring_moments(batch: RingBatch, anchor_x: FloatArray, anchor_y: FloatArray) -> FloatArray:
    by_vertex_x = np.repeat(anchor_x, batch.ring_size)
    by_vertex_y = np.repeat(anchor_y, batch.ring_size)
    x0, y0 = batch.x - by_vertex_x, batch.y - by_vertex_y
    x1, y1 = batch.next_x - by_vertex_x, batch.next_y - by_vertex_y
    cross = x0 * y1 - x1 * y0
    sum_x, sum_y = x0 + x1, y0 + y1
    xx0, xx1, yy0, yy1 = x0 * x0, x1 * x1, y0 * y0, y1 * y1
    products = (
        (0.5, None),
        (1 / 6, sum_x),
        (1 / 6, sum_y),
        (1 / 24, sum_x * sum_x + xx0 + xx1),
        (1 / 24, sum_x * sum_y + x0 * y0 + x1 * y1),
        (1 / 24, sum_y * sum_y + yy0 + yy1),
        (1 / 20, sum_x * (xx0 + xx1)),
        (1 / 60, sum_y * sum_x * sum_x + 2.0 * (xx0 * y0 + xx1 * y1)),
        (1 / 60, sum_x * sum_y * sum_y + 2.0 * (x0 * yy0 + x1 * yy1)),
        (1 / 20, sum_y * (yy0 + yy1)),
    )
    return np.column_stack(
        [factor * batch.sum_rings(cross if product is None else cross * product) for factor, product in products]
    )


def translated(moments: FloatArray, dx: FloatArray, dy: FloatArray) -> FloatArray:
    """Give the moments that the same regions have when they are moved by (dx, dy).

    Parameters
    ----------
    moments : (n, 10) float64
    dx, dy : (n,) float64

    Returns
    -------
    (n, 10) float64
    """
    power_x = [np.ones_like(dx), dx, dx * dx, dx * dx * dx]
    power_y = [np.ones_like(dy), dy, dy * dy, dy * dy * dy]
    moved = np.zeros_like(moments)
    for column, (p, q) in enumerate(ORDERS):
        for i in range(p + 1):
            for j in range(q + 1):
                factor = comb(p, i) * comb(q, j)
                moved[:, column] += factor * power_x[p - i] * power_y[q - j] * moments[:, _COLUMN[i, j]]
    return moved


def centroids(raw: FloatArray) -> FloatArray:
    """Give the centroid of each region relative to the local origin; NaN where there is no area.

    Parameters
    ----------
    raw : (n, 10) float64

    Returns
    -------
    (n, 2) float64
    """
    area = raw[:, :1]
    return np.asarray(np.divide(raw[:, 1:3], area, out=np.full((len(raw), 2), np.nan), where=area > 0))


def central_moments(raw: FloatArray) -> FloatArray:
    """Take moments about the centroid.

    Parameters
    ----------
    raw : (n, 10) float64
        Moments about a local origin near the centroid.

    Returns
    -------
    (n, 10) float64
        mu_10 and mu_01 are 0; NaN in the whole row where the region has no area.
    """
    centre = centroids(raw)
    central = translated(raw, -centre[:, 0], -centre[:, 1])
    central[:, 1:3] = np.where(np.isnan(centre), np.nan, 0.0)
    central[np.isnan(centre[:, 0])] = np.nan
    return central


def normalised_moments(central: FloatArray) -> FloatArray:
    """Free central moments of size: eta_pq = mu_pq / mu_00^(1 + (p + q) / 2).

    Parameters
    ----------
    central : (n, 10) float64

    Returns
    -------
    (n, 10) float64
    """
    exponent = np.array([1.0 + (p + q) / 2.0 for p, q in ORDERS])
    return np.asarray(central / central[:, :1] ** exponent)


def hu_invariants(normalised: FloatArray) -> FloatArray:
    """Combine normalised moments to Hu's seven invariants.

    Parameters
    ----------
    normalised : (n, 10) float64

    Returns
    -------
    (n, 7) float64
        Unchanged by shift, turn and scale; the seventh changes its sign under reflection.

    References
    ----------
    .. [1] Hu, M.-K. (1962). Visual pattern recognition by moment invariants.
           IRE Transactions on Information Theory 8, 179-187.
    """
    _, _, _, n20, n11, n02, n30, n21, n12, n03 = normalised.T
    a, b = n30 + n12, n21 + n03
    c, d = n30 - 3.0 * n12, 3.0 * n21 - n03
    aa, bb = a * a, b * b
    e, f = a * (aa - 3.0 * bb), b * (3.0 * aa - bb)
    return np.column_stack(
        (
            n20 + n02,
            (n20 - n02) ** 2 + 4.0 * n11**2,
            c * c + d * d,
            aa + bb,
            c * e + d * f,
            (n20 - n02) * (aa - bb) + 4.0 * n11 * a * b,
            d * e - c * f,
        )
    )


def affine_invariants(normalised: FloatArray) -> FloatArray:
    """Combine normalised moments to the affine moment invariants I1, I2 and I3.

    Parameters
    ----------
    normalised : (n, 10) float64

    Returns
    -------
    (n, 3) float64
        Unchanged by any affine map, reflections included. Authors differ in the sign of I2; here a triangle's is
        positive.

    References
    ----------
    .. [1] Flusser, J., Suk, T. (1993). Pattern recognition by affine moment invariants.
           Pattern Recognition 26, 167-174.
    """
    _, _, _, n20, n11, n02, n30, n21, n12, n03 = normalised.T
    i1 = n20 * n02 - n11**2
    i2 = 6.0 * n30 * n21 * n12 * n03 - (n30 * n03) ** 2 - 4.0 * (n30 * n12**3 + n21**3 * n03) + 3.0 * (n21 * n12) ** 2
    i3 = n20 * (n21 * n03 - n12**2) - n11 * (n30 * n03 - n21 * n12) + n02 * (n30 * n12 - n21**2)
    return np.column_stack((i1, i2, i3))


def rosin_measures(affine_1: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Measure likeness to an ellipse and to a triangle.

    Parameters
    ----------
    affine_1 : (n,) float64

    Returns
    -------
    ellipticity, triangularity : (n,) float64
        16 pi^2 I1 and 108 I1, each inverted where it exceeds 1.

    References
    ----------
    .. [1] Rosin, P. L. (2003). Measuring shape: ellipticity, rectangularity, and triangularity.
           Machine Vision and Applications 14, 172-184.
    """
    return _at_most_one(16.0 * np.pi**2 * affine_1), _at_most_one(108.0 * affine_1)


def _at_most_one(value: FloatArray) -> FloatArray:
    inverse = np.divide(1.0, value, out=np.full_like(value, np.nan), where=value > 0)
    return np.minimum(value, inverse)


def signed_log10(value: FloatArray) -> FloatArray:
    """Give sign(v) log10 |v|; NaN where v is 0."""
    magnitude = np.log10(np.abs(value), out=np.full_like(value, np.nan), where=value != 0)
    return np.sign(value) * magnitude
