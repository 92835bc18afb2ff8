"""The turn and first point at which two outlines lie best upon each other, solved jointly.

With outlines P and Q of unit power, c(s) = sum_k P_k conj(Q_k) exp(-2 pi i k s) tells for every first point s of Q how
well they agree: the best turn is the phase of c, and |c| what is gained by it. Where the turn is held at 0, Re c is
gained. The gain is looked up on a grid of shifts by one FFT, and its peaks are refined by Newton's method.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from math import factorial

import numpy as np

from geoshape.formulas.arclength import ComplexArray
from geoshape.rings import FloatArray, IntArray

MAX_CANDIDATES = 5
"""Peaks of one pair that are refined. A shape that turns into itself more often has its smallest turns refined."""

TIE = 1e-9
"""Gains, and distances, that differ by no more than this are taken as equal."""

REACH = np.pi / 4.0
"""How far a peak may lie from its grid point, as a phase of the highest harmonic: no less than a step of the grid."""

SERIES_TERMS = 18
"""Terms of the series about a grid point: pi / 4 to the 18th over 18! is below 1e-17."""

NEWTON_STEPS = 8
CONVERGED = 1e-14
"""Step of the shift, as a phase of the highest harmonic, below which nothing is left to refine."""

ROUNDING = 1e-14
"""A gain may fall by this much at a step of Newton's method: it is no more than rounding."""


@dataclass(frozen=True, eq=False)
class Peaks:
    """Places where two outlines agree best, several to a pair.

    Attributes
    ----------
    pair : (c,) int64, not decreasing
        Pair that the peak belongs to.
    shift : (c,) float64
        First point of Q on P's scale, as a share of the outline, in [0, 1).
    turn_rad : (c,) float64
        Turn that lays Q on P, counter-clockwise.
    """

    pair: IntArray
    shift: FloatArray
    turn_rad: FloatArray


def grid_size(highest: int) -> int:
    """Tell how many shifts are looked up: the power of two from eight times the highest harmonic on.

    A peak as narrow as the highest harmonic allows still shows; those of polygons, whose harmonics fall with the
    square of their order, are much wider.
    """
    return max(16, 1 << (8 * highest - 1).bit_length())


def on_grid(products: ComplexArray) -> ComplexArray:
    """Take c(s) at equally spaced shifts.

    Parameters
    ----------
    products : (m, 2 * K + 1) complex128
        P_k conj(Q_k) for k = -K ... K.

    Returns
    -------
    (m, M) complex128
    """
    highest = products.shape[1] // 2
    size = grid_size(highest)
    padded = np.zeros((len(products), size), dtype=np.complex128)
    padded[:, : highest + 1] = products[:, highest:]
    padded[:, -highest:] = products[:, :highest]
    return np.fft.fft(padded, axis=1)


def gain_of(c: ComplexArray, *, keep_direction: bool) -> FloatArray:
    """Take what is to be made large: Re c where the turn is held, else |c|^2."""
    if keep_direction:
        return np.asarray(c.real)
    return np.asarray(c.real**2 + c.imag**2)


def expected_peak(left: FloatArray, middle: FloatArray, right: FloatArray) -> FloatArray:
    """Tell how far the parabola through three neighbouring gains rises above the middle one, at most the highest."""
    slope = right - left
    bend = 2.0 * middle - left - right
    rise = np.divide(slope * slope, 8.0 * bend, out=np.zeros_like(middle), where=bend > 0)
    return np.asarray(rise)


def highest_gain(products: ComplexArray, *, keep_direction: bool) -> tuple[FloatArray, FloatArray]:
    """Estimate the highest gain of each pair, and how far the estimate may fall short.

    Parameters
    ----------
    products : (m, 2 * K + 1) complex128
    keep_direction : bool

    Returns
    -------
    gain, slack : (m,) float64
    """
    gains = gain_of(on_grid(products), keep_direction=keep_direction)
    rows = np.arange(len(gains))
    top = gains.argmax(axis=1)
    middle = gains[rows, top]
    size = gains.shape[1]
    rise = expected_peak(gains[rows, (top - 1) % size], middle, gains[rows, (top + 1) % size])
    return middle + rise, rise


def find_peaks(products: ComplexArray, *, keep_direction: bool) -> Peaks:
    """Find the best shift and turn of each pair, with those that are equally good.

    Parameters
    ----------
    products : (m, 2 * K + 1) complex128
        P_k conj(Q_k), finite.
    keep_direction : bool
        Hold the turn at 0.

    Returns
    -------
    Peaks
        From one to ``MAX_CANDIDATES`` for each pair. Which of them is best must still be told from the outlines:
        near a perfect match their gains are all 1 to rounding.
    """
    c = on_grid(products)
    pair, at, offset = _candidates(c, keep_direction=keep_direction)
    size = c.shape[1]
    highest = products.shape[1] // 2
    at_point = products[pair] * _phases(highest)[at]
    series = _series(at_point)
    phase = _refine(series, offset * (2.0 * np.pi * highest / size), keep_direction=keep_direction)
    shift = (at / size + phase / (2.0 * np.pi * highest)) % 1.0
    turn = np.zeros_like(shift) if keep_direction else np.angle(_evaluate(series, phase)[0])
    return Peaks(pair, shift, turn)


def _candidates(c: ComplexArray, *, keep_direction: bool) -> tuple[IntArray, IntArray, FloatArray]:
    """Pick the grid points next to the highest peaks, with the offset of the parabola's vertex in grid steps."""
    gains = gain_of(c, keep_direction=keep_direction)
    left, right = np.roll(gains, 1, axis=1), np.roll(gains, -1, axis=1)
    is_peak = (gains > left) & (gains >= right)
    # Where all gains are equal, as for circles, no point stands out.
    is_peak[np.arange(len(gains)), gains.argmax(axis=1)] = True
    pair, at = np.nonzero(is_peak)
    rise = expected_peak(left[pair, at], gains[pair, at], right[pair, at])
    gain = gains[pair, at] + rise
    first = np.searchsorted(pair, np.arange(len(gains)))
    best = np.maximum.reduceat(gain, first) if len(first) else gain
    # An estimate may fall short of its peak; by less than what it adds to the grid's value.
    may_win = gain + rise >= best[pair] - TIE * np.abs(best[pair])
    pair, at, rise, gain = pair[may_win], at[may_win], rise[may_win], gain[may_win]
    turn = np.abs(np.angle(c[pair, at]))
    order = np.lexsort((turn, gain < best[pair], pair))
    order = order[_position(pair) < MAX_CANDIDATES]
    order.sort()
    pair, at = pair[order], at[order]
    slope = right[pair, at] - left[pair, at]
    bend = 2.0 * gains[pair, at] - left[pair, at] - right[pair, at]
    offset = np.divide(slope, 2.0 * bend, out=np.zeros_like(slope), where=bend > 0)
    return pair, at, np.clip(offset, -0.5, 0.5)


def _position(pair: IntArray) -> IntArray:
    """Count the entries of each pair from 0; ``pair`` does not decrease."""
    return np.arange(len(pair)) - np.searchsorted(pair, pair)


@lru_cache(maxsize=4)
def _phases(highest: int) -> ComplexArray:
    """(M, 2 K + 1) exp(-2 pi i k j / M): what moves the series to grid point j."""
    size = grid_size(highest)
    turns = np.outer(np.arange(size), np.arange(-highest, highest + 1)) % size
    return np.asarray(np.exp(-2j * np.pi * turns / size))


@lru_cache(maxsize=4)
def _powers(highest: int) -> FloatArray:
    """(2 K + 1, terms) (k / K)^n / n!."""
    order = np.arange(-highest, highest + 1)[:, None] / highest
    terms = np.arange(SERIES_TERMS)
    return np.asarray(order**terms / np.array([float(factorial(n)) for n in terms]))


def _series(at_point: ComplexArray) -> ComplexArray:
    """Expand c about a grid point in powers of t, the phase of the highest harmonic: (terms, m)."""
    powers = _powers(at_point.shape[1] // 2)
    moments = at_point.real @ powers + 1j * (at_point.imag @ powers)
    return np.ascontiguousarray((moments * (-1j) ** np.arange(SERIES_TERMS)).T)


def _evaluate(series: ComplexArray, phase: FloatArray) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    """Take c and its first two derivatives by t, by Horner's rule."""
    value = series[-1].copy()
    first = np.zeros_like(value)
    half_second = np.zeros_like(value)
    for term in series[-2::-1]:
        half_second = half_second * phase + first
        first = first * phase + value
        value = value * phase + term
    return value, first, 2.0 * half_second


def _gain_slopes(
    series: ComplexArray, phase: FloatArray, *, keep_direction: bool
) -> tuple[FloatArray, FloatArray, FloatArray]:
    value, first, second = _evaluate(series, phase)
    if keep_direction:
        return value.real, first.real, second.real
    gain = value.real**2 + value.imag**2
    slope = 2.0 * (value.conj() * first).real
    bend = 2.0 * (first.real**2 + first.imag**2 + (value.conj() * second).real)
    return gain, slope, bend


def _refine(series: ComplexArray, phase: FloatArray, *, keep_direction: bool) -> FloatArray:
    """Climb to the peak by Newton's method; a step that would lose gain is shortened instead of taken."""
    gain, slope, bend = _gain_slopes(series, phase, keep_direction=keep_direction)
    reach = np.full_like(phase, REACH)
    for _ in range(NEWTON_STEPS):
        uphill = np.sign(slope) * reach
        step = np.divide(-slope, bend, out=uphill.copy(), where=bend < 0)
        step = np.clip(step, -reach, reach)
        if np.all(np.abs(step) < CONVERGED):
            break
        tried = np.clip(phase + step, -REACH, REACH)
        new_gain, new_slope, new_bend = _gain_slopes(series, tried, keep_direction=keep_direction)
        better = new_gain >= gain - ROUNDING
        phase = np.where(better, tried, phase)
        gain, slope, bend = (
            np.where(better, new, old) for new, old in ((new_gain, gain), (new_slope, slope), (new_bend, bend))
        )
        reach = np.where(better, reach, 0.25 * np.abs(step))
    return phase
