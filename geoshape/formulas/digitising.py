"""Errors of digitised outlines: random shifts of vertices, alike for neighbours along a ring.

Every random number is a hash of what it belongs to (seed, feature, run, ring, knot), so that it does not depend on how
features are batched or in which order they are computed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geoshape.formulas.arclength import arc_positions, edge_lengths
from geoshape.rings import FloatArray, IntArray, RingBatch

KeyArray = NDArray[np.uint64]

KNOTS_PER_LENGTH = 1.18
"""Knots of the random spline in a correlation length: makes the correlation at that distance about 1/e."""

_GOLDEN = np.uint64(0x9E3779B97F4A7C15)
_MIX_1 = np.uint64(0xBF58476D1CE4E5B9)
_MIX_2 = np.uint64(0x94D049BB133111EB)
_X_STREAM, _Y_STREAM, _PHASE_STREAM = 1, 2, 3


@dataclass(frozen=True)
class PositionError:
    """How far vertices are off, and over what distance together.

    Attributes
    ----------
    sigma_m : float
        Standard deviation of x and of y.
    length_m : (n_features,) float64
        Correlation length along the ring; 0 makes the errors of vertices independent.
    """

    sigma_m: float
    length_m: FloatArray


def mixed(key: KeyArray, number: IntArray | int) -> KeyArray:
    """Mix numbers into keys: the finaliser of the SplitMix64 generator on their weighted sum.

    Parameters
    ----------
    key : (n,) uint64
    number : (n,) int64, or int

    Returns
    -------
    (n,) uint64

    Notes
    -----
    Steele, Lea & Flood 2014, Fast Splittable Pseudorandom Number Generators, OOPSLA.
    """
    z = key + (np.atleast_1d(number).astype(np.uint64) + np.uint64(1)) * _GOLDEN
    z = (z ^ (z >> np.uint64(30))) * _MIX_1
    z = (z ^ (z >> np.uint64(27))) * _MIX_2
    return np.asarray(z ^ (z >> np.uint64(31)))


def uniform(key: KeyArray) -> FloatArray:
    """Turn keys into numbers in (0, 1)."""
    return np.asarray(((key >> np.uint64(11)).astype(np.float64) + 0.5) * 2.0**-53)


def normal(key: KeyArray) -> FloatArray:
    """Turn keys into standard normal numbers (Box & Muller 1958, Annals of Mathematical Statistics 29)."""
    radius = np.sqrt(-2.0 * np.log(uniform(key)))
    return np.asarray(radius * np.cos(2.0 * np.pi * uniform(mixed(key, 0))))


def median_edge(batch: RingBatch) -> FloatArray:
    """Take the median edge length of each feature; NaN without rings.

    Examples
    --------
    >>> from geoshape.geometry import ring_batch
    >>> import shapely
    >>> median_edge(ring_batch(shapely.box([0], 0, 2, 6)))
    array([4.])
    """
    length = edge_lengths(batch)
    order = np.lexsort((length, batch.vertex_feature))
    length = length[order]
    count = np.bincount(batch.vertex_feature, minlength=batch.n_features)
    start = np.concatenate(([0], np.cumsum(count)))[:-1]
    median = np.full(batch.n_features, np.nan)
    has = count > 0
    low, high = start[has] + (count[has] - 1) // 2, start[has] + count[has] // 2
    median[has] = 0.5 * (length[low] + length[high])
    return median


def disturbed(batch: RingBatch, error: PositionError, key: KeyArray) -> RingBatch:
    """Shift the vertices of each ring by a random field along it.

    Parameters
    ----------
    batch : RingBatch
    error : PositionError
    key : (n_features,) uint64
        What the random numbers of each feature come from: equal keys give equal shifts.

    Returns
    -------
    RingBatch
        The same rings elsewhere. They may cross themselves where the error is not small beside their width.

    Notes
    -----
    x and y are shifted independently, and so is each ring. Along a ring the field is a closed cubic B-spline whose
    coefficients are independent normal numbers, scaled to the same variance everywhere; its knots lie at equal
    distances, about L / 1.18 apart, from a random first one. Averaged over that, its correlation at distance d is near
    the Gaussian exp(-(d / L)^2). The field is smooth, so edges shorter than L move almost rigidly and vertices added
    on them change nothing; a ring shorter than L moves as a whole.
    """
    ring_in_feature = np.arange(batch.n_rings) - np.searchsorted(batch.ring_feature, batch.ring_feature)
    ring_key = mixed(key[batch.ring_feature], ring_in_feature)
    length = error.length_m[batch.ring_feature]
    if not batch.n_rings:
        return batch
    shift_x, shift_y = _spline_field(batch, length, ring_key)
    alone = np.repeat(~(length > 0), batch.ring_size)
    if alone.any():
        vertex = np.arange(batch.n_vertices) - np.repeat(batch.ring_start[:-1], batch.ring_size)
        vertex_key = np.repeat(ring_key, batch.ring_size)
        shift_x = np.where(alone, normal(mixed(mixed(vertex_key, _X_STREAM), vertex)), shift_x)
        shift_y = np.where(alone, normal(mixed(mixed(vertex_key, _Y_STREAM), vertex)), shift_y)
    return batch.moved(batch.x + error.sigma_m * shift_x, batch.y + error.sigma_m * shift_y, batch.origin)


def _spline_field(batch: RingBatch, length: FloatArray, ring_key: KeyArray) -> tuple[FloatArray, FloatArray]:
    position, total = arc_positions(batch, edge_lengths(batch))
    wanted = np.divide(KNOTS_PER_LENGTH * total, length, out=np.ones_like(total), where=length > 0)
    knots = np.maximum(np.rint(wanted), 1.0)
    per_length = np.divide(knots, total, out=np.zeros_like(total), where=total > 0)
    phase = uniform(mixed(ring_key, _PHASE_STREAM))
    at = position * np.repeat(per_length, batch.ring_size) + np.repeat(phase, batch.ring_size)
    below = np.floor(at)
    weights = _spline_weights(at - below)
    n_knots = np.repeat(knots.astype(np.int64), batch.ring_size)
    scale = 1.0 / np.sqrt(_spline_variance(weights, n_knots))
    shift_x, shift_y = np.zeros(batch.n_vertices), np.zeros(batch.n_vertices)
    key_x = np.repeat(mixed(ring_key, _X_STREAM), batch.ring_size)
    key_y = np.repeat(mixed(ring_key, _Y_STREAM), batch.ring_size)
    for offset, weight in enumerate(weights):
        knot = (below.astype(np.int64) + offset) % n_knots
        shift_x += weight * normal(mixed(key_x, knot))
        shift_y += weight * normal(mixed(key_y, knot))
    return shift_x * scale, shift_y * scale


def _spline_weights(t: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Weights of the four cubic B-splines over a knot interval."""
    s = 1.0 - t
    return (
        s**3 / 6.0,
        (4.0 - 6.0 * t**2 + 3.0 * t**3) / 6.0,
        (4.0 - 6.0 * s**2 + 3.0 * s**3) / 6.0,
        t**3 / 6.0,
    )


def _spline_variance(weights: tuple[FloatArray, ...], n_knots: IntArray) -> FloatArray:
    """Variance of the field before scaling; on a ring of fewer than four knots some weights meet in one."""
    variance = np.zeros_like(weights[0])
    for first, one in enumerate(weights):
        for second, other in enumerate(weights):
            variance += np.where((second - first) % n_knots == 0, one * other, 0.0)
    return variance
