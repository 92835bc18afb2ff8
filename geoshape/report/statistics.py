"""Statistics of all rows that the page shows: quantiles, histograms, box plots and directions."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.columns import Column
from geoshape.rings import FloatArray, IntArray

QUANTILES = 101
"""Quantiles that a page carries of each column: 0 %, 1 % ... 100 %."""

MIN_BINS, MAX_BINS = 10, 36

WIDE_RATIO = 50.0
"""Ratio of the 97.5 % to the 2.5 % quantile from which a positive column is shown on a logarithmic scale."""

ONE_VALUE = 1e-9
"""Range, relative to the values, that is no range at all."""

MOST_LOG_TICKS = 5

ROSE_BINS = 18

ENDS = 3
"""Shapes told of at each end, and at the middle, of a column."""

WHISKER_REACH = 1.5
"""Whiskers end at the last value within so many interquartile ranges of the box (Tukey 1977)."""

MAX_OUTLIERS = 40


def is_logarithmic(values: FloatArray, field: Column) -> bool:
    """Tell whether a column is better seen on a logarithmic scale.

    Examples
    --------
    >>> from geoshape.columns import Kind
    >>> area = Column("area_m2", "", Kind.NUMBER, "m2", 0.0, None, "", "", "")
    >>> is_logarithmic(np.array([1.0, 10.0, 1000.0]), area), is_logarithmic(np.array([0.0, 10.0, 1000.0]), area)
    (True, False)
    """
    known = values[~np.isnan(values)]
    if len(known) < 2 or field.unit == "deg" or known.min() <= 0:
        return False
    low, high = np.quantile(known, (0.025, 0.975))
    return bool(high / low > WIDE_RATIO)


def ends_and_middle(values: FloatArray, count: int) -> tuple[IntArray, IntArray, IntArray]:
    """Find the rows with the lowest, the most typical and the highest values.

    Parameters
    ----------
    values : (n,) float64
        NaN is passed over.
    count : int
        Rows of each kind; fewer where there are not enough, and none is in two kinds.

    Returns
    -------
    lowest, typical, highest : int64
        Each ascending by value. Of equal values the earlier rows come first.

    Examples
    --------
    >>> [rows.tolist() for rows in ends_and_middle(np.array([5.0, 1.0, np.nan, 3.0, 4.0, 2.0]), 1)]
    [[1], [3], [0]]
    """
    order = np.argsort(values, kind="stable")[: np.count_nonzero(~np.isnan(values))]
    count = min(count, max(len(order) // 3, 1))
    middle = max((len(order) - count) // 2, 0)
    high = max(len(order) - count, min(count, len(order)))
    typical = order[middle : middle + count]
    lowest, highest = order[:count], order[high:]
    typical = typical[~np.isin(typical, np.concatenate((lowest, highest)))]
    return lowest, typical, highest


def quantiles(values: FloatArray) -> FloatArray:
    """(101,) quantiles in steps of one per cent; NaN where nothing is known."""
    known = values[~np.isnan(values)]
    if not len(known):
        return np.full(QUANTILES, np.nan)
    return np.asarray(np.quantile(known, np.linspace(0.0, 1.0, QUANTILES)))


@dataclass(frozen=True, eq=False)
class Histogram:
    """Counts in bins of equal width.

    Attributes
    ----------
    start, step : float
        Left edge of the first bin and width of each, of log10 of the values where ``is_log``.
    counts : (n_bins,) int64
    is_log : bool
    """

    start: float
    step: float
    counts: IntArray
    is_log: bool

    @property
    def edges(self) -> FloatArray:
        """(n_bins + 1,) edges of the bins."""
        return np.asarray(self.start + self.step * np.arange(len(self.counts) + 1), dtype=np.float64)


def is_one_value(low: float, high: float) -> bool:
    """Tell whether two ends differ by no more than rounding."""
    return high - low <= ONE_VALUE * max(abs(low), abs(high))


def histogram(values: FloatArray, *, is_log: bool, is_whole: bool = False) -> Histogram:
    """Count values in bins whose width follows Freedman and Diaconis (1981), between 10 and 36 bins.

    Parameters
    ----------
    values : (n,) float64
        NaN is passed over.
    is_log : bool
        Count log10 of the values.
    is_whole : bool
        Values are whole numbers: a few different ones have a bin each.

    Examples
    --------
    >>> histogram(np.array([1.0, 1.0, 2.0, np.nan]), is_log=False).counts.tolist()
    [2, 0, 0, 0, 0, 0, 0, 0, 0, 1]
    """
    known = values[~np.isnan(values)]
    known = np.log10(known) if is_log else known
    if not len(known):
        return Histogram(0.0, 1.0, np.zeros(1, dtype=np.int64), is_log)
    low, high = float(known.min()), float(known.max())
    if is_whole and not is_log and high - low < MAX_BINS:
        counts = np.bincount((known - low).astype(np.int64))
        return Histogram(low - 0.5, 1.0, counts, is_log)
    if is_one_value(low, high):
        half = 0.5 * max(abs(low), 1.0) * 1e-3
        return Histogram(low - half, 2.0 * half, np.array([len(known)]), is_log)
    lower, upper = np.quantile(known, (0.25, 0.75))
    width = 2.0 * (upper - lower) / len(known) ** (1.0 / 3.0)
    bins = int(np.clip(np.ceil((high - low) / width), MIN_BINS, MAX_BINS)) if width > 0 else MAX_BINS
    counts, _ = np.histogram(known, bins=bins, range=(low, high))
    return Histogram(low, (high - low) / bins, counts, is_log)


@dataclass(frozen=True, eq=False)
class Box:
    """One box of a box plot.

    Attributes
    ----------
    level : str
        Class.
    count : int
        Shapes with a value.
    low, lower, median, upper, high : float
        Ends of the whiskers, quartiles and median; NaN without values.
    outliers : (m,) float64
        Values beyond the whiskers; the farthest where there are many.
    """

    level: str
    count: int
    low: float
    lower: float
    median: float
    upper: float
    high: float
    outliers: FloatArray


def box(level: str, values: FloatArray) -> Box:
    """Summarise the values of a class.

    Examples
    --------
    >>> one = box("a", np.array([1.0, 2.0, 3.0, 4.0, 5.0, 40.0]))
    >>> one.low, one.median, one.high, one.outliers.tolist()
    (1.0, 3.5, 5.0, [40.0])
    """
    known = np.sort(values[~np.isnan(values)])
    if not len(known):
        nothing = float("nan")
        return Box(level, 0, nothing, nothing, nothing, nothing, nothing, known)
    lower, median, upper = np.quantile(known, (0.25, 0.5, 0.75)).tolist()
    reach = WHISKER_REACH * (upper - lower)
    inside = known[(known >= lower - reach) & (known <= upper + reach)]
    outside = known[(known < lower - reach) | (known > upper + reach)]
    if len(outside) > MAX_OUTLIERS:
        farthest = np.argsort(-np.abs(outside - median), kind="stable")[:MAX_OUTLIERS]
        outside = np.sort(outside[farthest])
    return Box(level, len(known), float(inside[0]), lower, median, upper, float(inside[-1]), outside)


def rose_counts(azimuth_deg: FloatArray) -> IntArray:
    """Count axial directions in 18 sectors of ten degrees, the first centred on north.

    Examples
    --------
    >>> rose_counts(np.array([0.0, 4.0, 176.0, 90.0, np.nan]))[[0, 9]].tolist()
    [3, 1]
    """
    known = azimuth_deg[~np.isnan(azimuth_deg)]
    width = 180.0 / ROSE_BINS
    sector = np.floor(np.mod(known + 0.5 * width, 180.0) / width).astype(np.int64)
    return np.bincount(np.minimum(sector, ROSE_BINS - 1), minlength=ROSE_BINS)


def nice_ticks(low: float, high: float, about: int = 5) -> list[float]:
    """Choose round values between two ends, ends included where they are round.

    Parameters
    ----------
    low, high : float
    about : int
        How many are wanted; the round step that comes closest to it is taken.

    Examples
    --------
    >>> nice_ticks(0.0, 1.0), nice_ticks(0.15, 0.97), nice_ticks(3.0, 3.0)
    ([0.0, 0.2, 0.4, 0.6, 0.8, 1.0], [0.2, 0.4, 0.6, 0.8], [3.0])
    """
    if is_one_value(low, high):
        return [low]
    power = 10.0 ** np.floor(np.log10(high - low))
    steps = [float(f"{power * factor:.12g}") for factor in (0.1, 0.2, 0.5, 1.0, 2.0, 5.0)]
    step = min(steps, key=lambda step: (abs(_count_inside(low, high, step) - about), -step))
    first = int(np.ceil(low / step - 1e-9))
    return [float(f"{step * (first + i):.12g}") for i in range(_count_inside(low, high, step))]


def _count_inside(low: float, high: float, step: float) -> int:
    return int(np.floor(high / step + 1e-9)) - int(np.ceil(low / step - 1e-9)) + 1


def log_ticks(low: float, high: float) -> list[float]:
    """Choose at most five powers of ten between two values, with threes, or twos and fives, where they would be few.

    Examples
    --------
    >>> log_ticks(3.0, 20_000.0), log_ticks(1.0, 30.0), log_ticks(4.0, 7.0)
    ([10.0, 100.0, 1000.0, 10000.0], [1.0, 2.0, 5.0, 10.0, 20.0], [4.0, 5.0, 6.0, 7.0])
    """
    first, last = int(np.floor(np.log10(low))), int(np.ceil(np.log10(high)))
    choices = []
    for factors in ((1.0,), (1.0, 3.0), (1.0, 2.0, 5.0)):
        ticks = [float(f"{factor * 10.0**power:.6g}") for power in range(first, last + 1) for factor in factors]
        choices.append([tick for tick in ticks if low <= tick <= high])
    few = [ticks for ticks in choices if len(ticks) <= MOST_LOG_TICKS]
    most = few[-1] if few else choices[0]
    if len(most) < 2:
        return nice_ticks(low, high, 4)
    return most[:: -(-len(most) // MOST_LOG_TICKS)]
