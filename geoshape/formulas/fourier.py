"""Fourier descriptors of closed outlines.

An outline z(s) = x + iy, walked once at unit speed, is the sum of harmonics Z_k exp(2 pi i k s / L). Z_0 is its place,
|Z_1| its size; amplitudes over |Z_1| do not change with place, turn, size or first point.
"""

from __future__ import annotations

import numpy as np

from geoshape.columns import amplitude_name
from geoshape.formulas.arclength import ComplexArray, arc_positions, edge_lengths
from geoshape.rings import FloatArray, RingBatch

SUM_HARMONICS = 32
"""Sums over all harmonics stop here, so that they do not depend on the number of samples."""

CARRIED_SHARE = 0.95
"""Share of the boundary's bending energy that ``fd_harmonics_95`` asks for."""

NO_DEPARTURE = 1e-9
"""Departure from a circle below which the other harmonics are rounding noise and have no entropy."""

NO_SIZE = 1e-12
"""|Z_1| over the root of the total power, below which ratios to |Z_1| mean nothing."""


def highest_harmonic(samples: int, harmonics: int) -> int:
    """Tell up to which harmonic coefficients are needed and can be had from ``samples`` points."""
    return min(max(SUM_HARMONICS, harmonics), samples // 2 - 1)


def sampled_coefficients(points: ComplexArray, highest: int) -> ComplexArray:
    """Take coefficients Z_k = (1/N) sum z_j exp(-2 pi i j k / N) of sampled outlines.

    Parameters
    ----------
    points : (n, N) complex128
        Points at equal arc length.
    highest : int
        Highest harmonic, below N / 2.

    Returns
    -------
    (n, 2 * highest + 1) complex128
        Coefficients for k = -highest ... highest.
    """
    transform = np.fft.fft(points, axis=1, norm="forward")
    return np.concatenate((transform[:, -highest:], transform[:, : highest + 1]), axis=1)


def exact_coefficients(rings: RingBatch, highest: int) -> ComplexArray:
    """Take the Fourier coefficients of polygons walked at unit speed, in closed form.

    Parameters
    ----------
    rings : RingBatch
    highest : int
        Highest harmonic.

    Returns
    -------
    (n_rings, 2 * highest + 1) complex128
        Coefficients for k = -highest ... highest; NaN for a ring of no length.

    Notes
    -----
    c_k = L / (4 pi^2 k^2) sum_j u_j (w_{j+1}^k - w_j^k), with w_j = exp(-2 pi i s_j / L) and u_j the unit direction of
    edge j, integrated by parts from the definition; summed by vertices it reads sum_j (u_{j-1} - u_j) w_j^k.
    """
    coefficients = np.full((rings.n_rings, 2 * highest + 1), np.nan + 0j)
    if not rings.n_rings:
        return coefficients
    length = edge_lengths(rings)
    position, total = arc_positions(rings, length)
    has_length = total > 0
    safe_total = np.where(has_length, total, 1.0)
    z = rings.x + 1j * rings.y
    z_next = rings.next_x + 1j * rings.next_y
    direction = np.divide(z_next - z, length, out=np.zeros_like(z), where=length > 0)
    bend = -direction
    bend[1:] += direction[:-1]
    first, last = rings.ring_start[:-1], rings.ring_start[1:] - 1
    bend[first] = direction[last] - direction[first]
    step = np.exp(-2j * np.pi * position / np.repeat(safe_total, rings.ring_size))
    step_back = step.conj()
    power, power_back = bend.copy(), bend.copy()
    for k in range(1, highest + 1):
        power *= step
        power_back *= step_back
        scale = safe_total / (4 * np.pi**2 * k**2)
        coefficients[:, highest + k] = scale * np.add.reduceat(power, first)
        coefficients[:, highest - k] = scale * np.add.reduceat(power_back, first)
    middle = np.add.reduceat(0.5 * (z + z_next) * length, first)
    coefficients[:, highest] = middle / safe_total
    coefficients[~has_length] = np.nan
    return coefficients


def spectrum_columns(coefficients: ComplexArray, harmonics: int) -> dict[str, FloatArray]:
    """Turn coefficients into the columns of the spectrum.

    Parameters
    ----------
    coefficients : (n, 2 * highest + 1) complex128
        Coefficients for k = -highest ... highest.
    harmonics : int
        Highest harmonic that gets its own columns, at most ``highest``.

    Returns
    -------
    dict of str to (n,) float64
        Amplitudes over |Z_1|, ``fd_departure`` (ratio), ``fd_entropy`` (bits; NaN for a circle, which has nothing but
        rounding there) and ``fd_harmonics_95``. NaN where the outline has no first harmonic.

    References
    ----------
    .. [1] Kuhl, F. P., Giardina, C. R. (1982). Elliptic Fourier features of a closed contour.
           Computer Graphics and Image Processing 18, 236-258.
    """
    highest = coefficients.shape[1] // 2
    power = coefficients.real**2 + coefficients.imag**2
    power[:, highest] = 0.0
    size = np.sqrt(power[:, highest + 1])
    size[~(size > NO_SIZE * np.sqrt(power.sum(axis=1)))] = np.nan
    columns: dict[str, FloatArray] = {}
    for k in (*range(2, harmonics + 1), *range(-1, -harmonics - 1, -1)):
        columns[amplitude_name(k)] = np.sqrt(power[:, highest + k]) / size
    top = min(highest, SUM_HARMONICS)
    summed = power[:, highest - top : highest + top + 1]
    others = summed.copy()
    others[:, top + 1] = 0.0
    columns["fd_departure"] = np.sqrt(others.sum(axis=1)) / size
    columns["fd_entropy"] = np.where(columns["fd_departure"] > NO_DEPARTURE, _entropy_bits(others), np.nan)
    columns["fd_harmonics_95"] = np.where(np.isnan(size), np.nan, _pairs_that_carry(summed, CARRIED_SHARE))
    return columns


def _entropy_bits(weights: FloatArray) -> FloatArray:
    total = weights.sum(axis=1, keepdims=True)
    share = np.divide(weights, total, out=np.zeros_like(weights), where=total > 0)
    logs = np.log2(share, out=np.zeros_like(share), where=share > 0)
    return np.asarray(np.maximum(-(share * logs).sum(axis=1), 0.0))


def _pairs_that_carry(power: FloatArray, share: float) -> FloatArray:
    top = power.shape[1] // 2
    orders = np.arange(1, top + 1)
    pairs = (power[:, top + 1 :] + power[:, top - 1 :: -1]) * orders**2
    carried = np.cumsum(pairs, axis=1)
    # The share is met when rounding alone keeps it from being met.
    enough = carried >= share * carried[:, -1:] * (1.0 - 1e-12)
    return np.asarray(np.argmax(enough, axis=1) + 1.0)
