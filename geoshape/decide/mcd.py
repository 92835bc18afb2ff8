"""The minimum covariance determinant: the given number of rows whose covariance has the least determinant.

Many small random subsets are each grown to the rows that lie nearest to them, again and again, which never raises the
determinant (the concentration step of [1]_). Subsets of one row more than there are columns are likely to hold no
outlier; larger ones are not. As in [1]_ the first steps are done on some of the rows only, and the best few go on.

References
----------
.. [1] Rousseeuw & Van Driessen 1999, A fast algorithm for the minimum covariance determinant estimator,
       Technometrics 41.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geoshape.rings import FloatArray, IntArray

MIN_STARTS = 50
MAX_STARTS = 500
MISSED = 1e-6
"""Probability that no start is free of outliers, where there are as many as the subset leaves out."""

N_FIRST_STEPS = 2
N_BEST = 10
MAX_STEPS = 100

MAX_FIRST_ROWS = 300
"""Rows on which all starts do their first steps."""

MAX_SEARCHED_ROWS = 5000
"""Rows on which the best starts go on to their end."""

RIDGE = 1e-10
"""Added to variances of columns of unit spread, so that rows off a plane that others fill are far, not undefined."""


@dataclass(frozen=True, eq=False)
class Subset:
    """Location and covariance of the subset of least determinant.

    Attributes
    ----------
    location : (n_columns,) float64
    covariance : (n_columns, n_columns) float64
        With n, not n - 1.
    share : float
        Share of the rows that the subset holds.
    """

    location: FloatArray
    covariance: FloatArray
    share: float


def least_determinant(values: FloatArray, share: float, seed: int) -> Subset:
    """Find the subset of rows whose covariance has the least determinant.

    Parameters
    ----------
    values : (n_rows, n_columns) float64
        Columns of about unit spread, more rows than columns.
    share : float
        Share of the rows in the subset, from 0.5 to 1; rounded up to whole rows.
    seed : int
        Starts the search, and picks the rows that are searched where there are more than 5000.

    Returns
    -------
    Subset

    Examples
    --------
    >>> rows = np.append(np.linspace(-1, 1, 9), [50.0, 60.0, 70.0])[:, np.newaxis]
    >>> found = least_determinant(rows, 0.75, seed=0)
    >>> found.location.round(12) + 0.0, found.share
    (array([0.]), 0.75)
    """
    random = np.random.default_rng(seed)
    searched = _picked(values, MAX_SEARCHED_ROWS, random)
    first = _picked(searched, MAX_FIRST_ROWS, random)
    n_covered = int(np.ceil(share * len(searched)))
    n_first = int(np.ceil(share * len(first)))
    location, covariance = _moments(first[_starts(first, _n_starts(first.shape[1], share), random)])
    for _ in range(N_FIRST_STEPS):
        location, covariance = _moments(first[_nearest(first, location, covariance, n_first)])
    best = np.argsort(_log_determinants(covariance), kind="stable")[:N_BEST]
    location, covariance = _concentrated(searched, location[best], covariance[best], n_covered)
    winner = int(np.argmin(_log_determinants(covariance)))
    return Subset(location[winner], covariance[winner], n_covered / len(searched))


def _picked(values: FloatArray, n_rows: int, random: np.random.Generator) -> FloatArray:
    if len(values) <= n_rows:
        return values
    return values[np.sort(random.choice(len(values), n_rows, replace=False))]


def _n_starts(n_columns: int, share: float) -> int:
    free = share ** (n_columns + 1)
    needed = np.log(MISSED) / np.log1p(-free) if free < 1 else 0.0
    return int(np.clip(np.ceil(needed), MIN_STARTS, MAX_STARTS))


def _starts(values: FloatArray, n_starts: int, random: np.random.Generator) -> IntArray:
    """Random subsets of one row more than there are columns, and the rows nearest to the medians as one more."""
    n_rows, n_columns = values.shape
    n_each = min(n_columns + 1, n_rows)
    subsets = np.argpartition(random.random((n_starts, n_rows)), n_each - 1, axis=1)[:, :n_each]
    off_median = np.abs(values - np.median(values, axis=0)).max(axis=1)
    central = np.argpartition(off_median, n_each - 1)[:n_each]
    return np.concatenate([central[np.newaxis], subsets])


def _concentrated(
    values: FloatArray, location: FloatArray, covariance: FloatArray, n_covered: int
) -> tuple[FloatArray, FloatArray]:
    """Repeat the concentration step of each start until no determinant falls any more."""
    least = np.full(len(location), np.inf)
    for _ in range(MAX_STEPS):
        location, covariance = _moments(values[_nearest(values, location, covariance, n_covered)])
        log_determinant = _log_determinants(covariance)
        if not (log_determinant < least - 1e-12).any():
            break
        least = log_determinant
    return location, covariance


def _moments(subsets: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Locations (n_subsets, n_columns) and covariances of subsets (n_subsets, n_each, n_columns)."""
    location = subsets.mean(axis=1)
    centred = subsets - location[:, np.newaxis]
    return location, np.swapaxes(centred, 1, 2) @ centred / subsets.shape[1]


def _nearest(values: FloatArray, location: FloatArray, covariance: FloatArray, n_covered: int) -> NDArray[np.intp]:
    """(n_subsets, n_covered) rows nearest to each location in the metric of its covariance."""
    precision = np.linalg.inv(_ridged(covariance))
    centred = values - location[:, np.newaxis]
    distance = ((centred @ precision) * centred).sum(axis=2)
    return np.argpartition(distance, n_covered - 1, axis=1)[:, :n_covered]


def _ridged(covariance: FloatArray) -> FloatArray:
    return covariance + RIDGE * np.eye(covariance.shape[-1])


def _log_determinants(covariance: FloatArray) -> FloatArray:
    return np.asarray(np.linalg.slogdet(_ridged(covariance)).logabsdet)
