"""What is ordinary among rows of numbers: robust location and covariance, and the limit of squared distances.

Location and covariance come from the minimum covariance determinant [1]_, so that the outliers do not hide
one another. Their subset holds three quarters of the rows; rows that lie within the 97.5 % limit of it are added until
no more are, which makes up for the many good rows that the subset leaves out, above all in small classes. Covariances
are made consistent at the normal distribution [2]_. A distance is compared with the quantile that holds for a row that
is independent of location and covariance (an F distribution, as Cerioli [3]_ has it); it tends to that of chi-square as
the class grows. Up to a quarter of the rows may be outliers; many that lie close to one another are told apart only if
they lie far from the rest.

References
----------
.. [1] Rousseeuw & Van Driessen 1999, A fast algorithm for the minimum covariance determinant estimator,
       Technometrics 41.
.. [2] Croux & Haesbroeck 1999, Influence function and efficiency of the minimum covariance determinant scatter matrix
       estimator, Journal of Multivariate Analysis 71.
.. [3] Cerioli 2010, Multivariate outlier detection with high-breakdown estimators, Journal of the American Statistical
       Association 105.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import special

from geoshape.decide.mcd import Subset, least_determinant
from geoshape.rings import BoolArray, FloatArray

MIN_ROWS = 30
MIN_ROWS_PER_COLUMN = 10
"""A class with fewer complete rows has no score: its covariance would be mostly chance, and too much be unusual.

Of normal rows beyond the 99.9 % limit there are up to 0.5 % in the smallest classes, and 0.1 to 0.2 % from a hundred
rows on; beyond the 97.5 % limit up to 4 %, and 2.3 to 3 % from a hundred rows on."""

COVERED = 0.75
"""Share of the rows in the subset of least determinant."""

REWEIGHT_LEVEL = 0.975
MAX_REWEIGHTS = 50

SAME_VALUE = 1e-12
"""Values that differ by less, relative to their size, count as the same."""

COLLINEAR = 1e-8
"""Least eigenvalue of a correlation matrix for its columns to count as different."""

LOADING = 0.1
"""Least part of a column in the direction without spread for it to belong to the columns that repeat one another."""


@dataclass(frozen=True, eq=False)
class Ordinary:
    """What is ordinary among rows.

    Attributes
    ----------
    n_rows : int
        Rows without a null in the columns used.
    used : tuple of int
        Columns that are used.
    location : (n_used,) float64
    precision : (n_used, n_used) float64
        Inverse of the covariance.
    limit : float
        Squared distance beyond which a row is unusual; NaN where nothing could be fitted.
    n_unusual : int
        Rows beyond it among those fitted.
    dropped : tuple of str
        Columns left out, each with its reason.
    reason : str
        Why nothing could be fitted; empty where it could.
    """

    n_rows: int
    used: tuple[int, ...]
    location: FloatArray
    precision: FloatArray
    limit: float
    n_unusual: int
    dropped: tuple[str, ...] = ()
    reason: str = ""

    def distances(self, values: FloatArray) -> FloatArray:
        """Squared distances of rows from what is ordinary.

        Parameters
        ----------
        values : (n_rows, n_columns) float64
            All columns, those that are not used included.

        Returns
        -------
        (n_rows,) float64
            NaN where a column used is null, and everywhere if nothing could be fitted.
        """
        if self.reason:
            return np.full(len(values), np.nan)
        return squared_distances(values[:, list(self.used)], self.location, self.precision)


def squared_distances(values: FloatArray, location: FloatArray, precision: FloatArray) -> FloatArray:
    """Squared Mahalanobis distances.

    Parameters
    ----------
    values : (n_rows, n_columns) float64
    location : (n_columns,) float64
    precision : (n_columns, n_columns) float64

    Returns
    -------
    (n_rows,) float64
    """
    centred = values - location
    return np.asarray(np.einsum("ij,jk,ik->i", centred, precision, centred, optimize=True))


def consistency_factor(n_columns: int, share: float) -> float:
    """Factor that makes the covariance of the innermost rows that of all, at the normal distribution.

    Parameters
    ----------
    n_columns : int
    share : float
        Share of the rows that the covariance was taken from.

    Returns
    -------
    float
        share / P(chi-square with n_columns + 2 degrees of freedom < its quantile with n_columns).

    Examples
    --------
    >>> round(consistency_factor(2, 0.975), 4)
    1.1045
    """
    if share >= 1:
        return 1.0
    quantile = _chi_square_quantile(share, n_columns)
    return float(share / special.chdtr(n_columns + 2, quantile))


def _chi_square_quantile(share: float, freedom: int) -> float:
    return float(special.chdtri(freedom, 1 - share))


def distance_limit(level: float, n_columns: int, n_support: int) -> float:
    """Quantile of the squared distance of a row from the location and covariance of others.

    Parameters
    ----------
    level : float
    n_columns : int
    n_support : int
        Rows that location and covariance were taken from, more than ``n_columns``.

    Returns
    -------
    float
        Of the F distribution; it tends to the quantile of chi-square as ``n_support`` grows.

    Examples
    --------
    >>> round(distance_limit(0.975, 2, 50), 2), round(distance_limit(0.975, 2, 10**6), 2)
    (8.47, 7.38)
    """
    freedom = n_support - n_columns
    return float(n_columns * (n_support + 1) / freedom * special.fdtri(n_columns, freedom, level))


def fit_ordinary(values: FloatArray, names: tuple[str, ...], *, level: float, seed: int) -> Ordinary:
    """Find out what is ordinary among rows.

    Parameters
    ----------
    values : (n_rows, n_columns) float64
        NaN is null; rows with a null in a column used take no part.
    names : tuple of str
        Names of the columns, for reasons.
    level : float
        Share of ordinary rows within the limit.
    seed : int
        Starts the search.

    Returns
    -------
    Ordinary
        Columns without values, without spread, or that repeat others are left out, the last of them first.
    """
    used = list(range(len(names)))
    dropped: list[str] = []
    if len(values) < MIN_ROWS:
        return _nothing(len(values), dropped, _too_few(len(values), MIN_ROWS, len(used)))
    for index in [index for index in used if np.isnan(values[:, index]).all()]:
        dropped.append(f"{names[index]} left out, as it has no values")
        used.remove(index)
    while used:
        complete = values[:, used]
        complete = complete[~np.isnan(complete).any(axis=1)]
        needed = max(MIN_ROWS, MIN_ROWS_PER_COLUMN * len(used))
        if len(complete) < MIN_ROWS or (len(complete) < needed and not _without_spread(complete).any()):
            return _nothing(len(complete), dropped, _too_few(len(complete), needed, len(used)))
        outcome = _fit_columns(complete, seed)
        if isinstance(outcome, _Estimate):
            return _ordinary(complete, outcome, level, used, dropped)
        place, reason = outcome
        dropped.append(f"{names[used[place]]} left out, as {reason}")
        del used[place]
    return _nothing(0, dropped, "no score, as no column is left to judge by")


def _ordinary(values: FloatArray, estimate: _Estimate, level: float, used: list[int], dropped: list[str]) -> Ordinary:
    precision = np.asarray(np.linalg.inv(estimate.covariance), dtype=np.float64)
    limit = distance_limit(level, len(used), estimate.n_support)
    n_unusual = int((squared_distances(values, estimate.location, precision) > limit).sum())
    return Ordinary(len(values), tuple(used), estimate.location, precision, limit, n_unusual, tuple(dropped))


def _nothing(n_rows: int, dropped: list[str], reason: str) -> Ordinary:
    return Ordinary(n_rows, (), np.zeros(0), np.zeros((0, 0)), math.nan, 0, tuple(dropped), reason)


def _too_few(n_rows: int, needed: int, n_columns: int) -> str:
    rows = "1 complete row is" if n_rows == 1 else f"{n_rows} complete rows are"
    columns = "1 column needs" if n_columns == 1 else f"{n_columns} columns need"
    return f"no score, as {rows} fewer than the {needed} that {columns}"


@dataclass(frozen=True, eq=False)
class _Estimate:
    location: FloatArray
    covariance: FloatArray
    n_support: int


def _fit_columns(values: FloatArray, seed: int) -> _Estimate | tuple[int, str]:
    """Location and covariance of complete rows, or the column that stands in the way and why."""
    flat = np.flatnonzero(_without_spread(values))
    if len(flat):
        return int(flat[-1]), "three quarters of its values are the same"
    # In any order of the rows the search starts alike.
    values = values[np.lexsort(values.T[::-1])]
    centre = np.median(values, axis=0)
    width = _shortest_spans(values)
    scaled = (values - centre) / width
    repeated = _repeated(np.cov(scaled, rowvar=False))
    if repeated is None:
        subset = least_determinant(scaled, COVERED, seed)
        repeated = _repeated(subset.covariance)
    if repeated is not None:
        return repeated, "the others tell it already"
    estimate = _reweighted(scaled, subset)
    covariance = estimate.covariance * np.outer(width, width)
    return _Estimate(centre + estimate.location * width, covariance, estimate.n_support)


def _shortest_spans(values: FloatArray) -> FloatArray:
    """Width of the shortest interval that holds the covered share of a column's values."""
    ordered = np.sort(values, axis=0)
    n_covered = math.ceil(COVERED * len(values))
    return np.asarray((ordered[n_covered - 1 :] - ordered[: len(values) - n_covered + 1]).min(axis=0))


def _without_spread(values: FloatArray) -> BoolArray:
    return _shortest_spans(values) <= SAME_VALUE * np.abs(np.median(values, axis=0))


def _repeated(covariance: FloatArray) -> int | None:
    """Last of the columns that together have a direction without spread."""
    covariance = np.atleast_2d(covariance)
    spread = np.sqrt(np.diag(covariance))
    spread = np.where(spread > 0, spread, 1.0)
    eigenvalues, vectors = np.linalg.eigh(covariance / np.outer(spread, spread))
    if eigenvalues[0] > COLLINEAR:
        return None
    return int(np.flatnonzero(np.abs(vectors[:, 0]) > LOADING)[-1])


def _reweighted(values: FloatArray, subset: Subset) -> _Estimate:
    """Add the rows within the limit to those of the subset, until no more are.

    Rows never leave again: where the middle is more peaked than a normal one, each step would else cut off more of it.
    """
    n_columns = values.shape[1]
    location = subset.location
    covariance = subset.covariance * consistency_factor(n_columns, subset.share)
    distance = squared_distances(values, location, np.asarray(np.linalg.inv(covariance), dtype=np.float64))
    last_covered = math.ceil(subset.share * len(values)) - 1
    support = distance <= np.partition(distance, last_covered)[last_covered]
    limit = _chi_square_quantile(REWEIGHT_LEVEL, n_columns)
    factor = consistency_factor(n_columns, REWEIGHT_LEVEL)
    for _ in range(MAX_REWEIGHTS):
        within = support | (distance < limit)
        if (within == support).all():
            break
        support = within
        location = values[support].mean(axis=0)
        covariance = np.atleast_2d(np.cov(values[support], rowvar=False, ddof=0)) * factor
        limit = distance_limit(REWEIGHT_LEVEL, n_columns, int(support.sum()))
        distance = squared_distances(values, location, np.asarray(np.linalg.inv(covariance), dtype=np.float64))
    return _Estimate(location, covariance, int(support.sum()))
