"""Statistics of numbers by group, all groups at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.rings import FloatArray, IntArray


@dataclass(frozen=True, eq=False)
class GroupStatistics:
    """Statistics of each group; NaN where a group has no values, or too few.

    Attributes
    ----------
    count : (n_groups,) int64
        Values that are not null.
    total, mean, low, high : (n_groups,) float64
    sd : (n_groups,) float64
        With n - 1; NaN for fewer than two values.
    cv : (n_groups,) float64
        Standard deviation over mean; NaN where the mean is not positive.
    quantiles : (n_quantiles, n_groups) float64
        By linear interpolation between order statistics.
    """

    count: IntArray
    total: FloatArray
    mean: FloatArray
    sd: FloatArray
    cv: FloatArray
    low: FloatArray
    quantiles: FloatArray
    high: FloatArray


def group_statistics(
    values: FloatArray, code: IntArray, n_groups: int, shares: tuple[float, ...] = ()
) -> GroupStatistics:
    """Summarise numbers by group.

    Parameters
    ----------
    values : (n_rows,) float64
        NaN is left out.
    code : (n_rows,) int64
        Group of each value, from 0.
    n_groups : int
    shares : tuple of float
        Quantiles wanted, from 0 to 1.

    Returns
    -------
    GroupStatistics

    Examples
    --------
    >>> found = group_statistics(np.array([1.0, 5.0, np.nan, 3.0]), np.array([0, 0, 1, 0]), 2, (0.25,))
    >>> found.count.tolist(), found.mean.tolist(), found.sd.tolist(), found.quantiles.tolist()
    ([3, 0], [3.0, nan], [2.0, nan], [[2.0, nan]])
    """
    has_value = ~np.isnan(values)
    order = np.lexsort((values[has_value], code[has_value]))
    values, code = values[has_value][order], code[has_value][order]
    count = np.bincount(code, minlength=n_groups)
    start = np.cumsum(count) - count
    low, high = _nth(values, start, count, 0.0), _nth(values, start, count, 1.0)
    mean = _mean(values, code, count)
    # Where all values are one and the same, rounding must not give them a spread.
    mean = np.where(low == high, low, mean)
    sd = _sd(values, code, count, mean)
    total = np.where(count > 0, np.bincount(code, weights=values, minlength=n_groups), np.nan)
    return GroupStatistics(
        count=count,
        total=total,
        mean=mean,
        sd=sd,
        cv=np.where(mean > 0, sd / np.where(mean > 0, mean, 1.0), np.nan),
        low=low,
        quantiles=np.array([_nth(values, start, count, share) for share in shares]).reshape(len(shares), n_groups),
        high=high,
    )


def weighted_means(values: FloatArray, weights: FloatArray, code: IntArray, n_groups: int) -> FloatArray:
    """Average numbers by group with weights.

    Parameters
    ----------
    values, weights : (n_rows,) float64
        Rows where either is NaN are left out; weights are not negative.
    code : (n_rows,) int64
        Group of each row, from 0.
    n_groups : int

    Returns
    -------
    (n_groups,) float64
        NaN where the weights of a group add up to nothing.

    Examples
    --------
    >>> weighted_means(np.array([1.0, 4.0]), np.array([2.0, 1.0]), np.array([0, 0]), 1)
    array([2.])
    """
    both = ~(np.isnan(values) | np.isnan(weights))
    values, weights, code = values[both], weights[both], code[both]
    sum_of_weights = np.bincount(code, weights=weights, minlength=n_groups)
    products = np.bincount(code, weights=weights * values, minlength=n_groups)
    return np.where(sum_of_weights > 0, products / np.where(sum_of_weights > 0, sum_of_weights, 1.0), np.nan)


def _mean(values: FloatArray, code: IntArray, count: IntArray) -> FloatArray:
    divisor = np.where(count > 0, count, np.nan)
    first = np.bincount(code, weights=values, minlength=len(count)) / divisor
    # What the running sum has lost is in the deviations.
    rest = np.bincount(code, weights=values - first[code], minlength=len(count)) / divisor
    return np.asarray(first + rest)


def _sd(values: FloatArray, code: IntArray, count: IntArray, mean: FloatArray) -> FloatArray:
    squares = np.bincount(code, weights=(values - mean[code]) ** 2, minlength=len(count))
    return np.asarray(np.sqrt(squares / np.where(count > 1, count - 1, np.nan)))


def _nth(values: FloatArray, start: IntArray, count: IntArray, share: float) -> FloatArray:
    """Quantile of each group of ordered values."""
    has_values = count > 0
    position = share * (count[has_values] - 1)
    below = np.floor(position).astype(np.int64)
    above = np.minimum(below + 1, count[has_values] - 1)
    first, second = values[start[has_values] + below], values[start[has_values] + above]
    result = np.full(len(count), np.nan)
    result[has_values] = first + (position - below) * (second - first)
    return result
