"""Columns of different units and spreads brought to one scale, and turned to their principal components."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from geoshape.rings import BoolArray, FloatArray, IntArray

NORMAL_QUARTILE_RANGE = 1.3489795003921634
"""Interquartile range of the standard normal distribution."""

NO_SPREAD = 1e-9
"""Range over the largest absolute value below which a column differs by rounding only."""

LONG_TAIL = 3.0
"""Upper over lower tail, from the median to the outer percentiles, from which on logarithms are tried."""

DRAWN_IN = 3.0
"""Robust standard deviations from which on values are drawn in: 3 becomes 2.6, 10 becomes 5.7, 100 becomes 12.6."""


@dataclass(frozen=True, eq=False)
class Scaling:
    """How columns are brought to one scale.

    Attributes
    ----------
    columns : tuple of str
        Columns that are left, in their order.
    left_out : tuple of str
        Columns that hold one value only.
    index : (p,) int64
        Where the columns stand in the values.
    is_logged : (p,) bool
        Whether natural logarithms are taken.
    centre, scale : (p,) float64
        Median and robust standard deviation, of the logarithms where those are taken.
    """

    columns: tuple[str, ...]
    left_out: tuple[str, ...]
    index: IntArray
    is_logged: BoolArray
    centre: FloatArray
    scale: FloatArray

    @property
    def logged(self) -> tuple[str, ...]:
        """Names of the columns whose logarithms are taken."""
        return tuple(name for name, logged in zip(self.columns, self.is_logged, strict=True) if logged)

    def apply(self, values: FloatArray) -> FloatArray:
        """Scale values.

        Parameters
        ----------
        values : (n, all columns) float64
            Finite.

        Returns
        -------
        (n, p) float64
            Robust standard deviations from the median, drawn in by 3 asinh(z / 3).
        """
        chosen = values[:, self.index]
        chosen[:, self.is_logged] = np.log(chosen[:, self.is_logged])
        chosen -= self.centre
        chosen /= DRAWN_IN * self.scale
        return np.asarray(DRAWN_IN * np.arcsinh(chosen))


def fit_scaling(values: FloatArray, names: Sequence[str], *, logs: bool = True) -> Scaling:
    """Find the scale of each column.

    Parameters
    ----------
    values : (n, p) float64
        Finite, one row at least.
    names : sequence of str
        One for each column.
    logs : bool
        Take logarithms of columns whose values are all positive and whose upper tail is more than 3 times as long as
        the lower one, where that makes the tails more equal.

    Returns
    -------
    Scaling

    Notes
    -----
    The robust standard deviation is the interquartile range over 1.349; where half of the values are equal and the
    range is 0, the plain standard deviation.

    Examples
    --------
    >>> values = np.column_stack((10.0 ** np.arange(5), np.arange(5), np.ones(5)))
    >>> scaling = fit_scaling(values, ["area_m2", "convexity", "part_count"])
    >>> scaling.logged, scaling.left_out, scaling.centre.round(3)
    (('area_m2',), ('part_count',), array([4.605, 2.   ]))
    """
    largest = np.abs(values).max(axis=0)
    differs = np.ptp(values, axis=0) > NO_SPREAD * largest
    index = np.flatnonzero(differs)
    chosen = values[:, index]
    is_logged = np.array([logs and _wants_logarithm(column) for column in chosen.T], dtype=np.bool_)
    chosen[:, is_logged] = np.log(chosen[:, is_logged])
    quartile_1, centre, quartile_3 = np.quantile(chosen, (0.25, 0.5, 0.75), axis=0)
    scale = (quartile_3 - quartile_1) / NORMAL_QUARTILE_RANGE
    half_equal = scale <= NO_SPREAD * np.maximum(np.abs(quartile_1), np.abs(quartile_3))
    scale[half_equal] = chosen.std(axis=0)[half_equal]
    return Scaling(
        columns=tuple(name for name, kept in zip(names, differs, strict=True) if kept),
        left_out=tuple(name for name, kept in zip(names, differs, strict=True) if not kept),
        index=index,
        is_logged=is_logged,
        centre=centre,
        scale=scale,
    )


def _wants_logarithm(column: FloatArray) -> bool:
    if column.min() <= 0:
        return False
    lower, upper = _tails(column)
    if upper <= LONG_TAIL * lower:
        return False
    log_lower, log_upper = _tails(np.log(column))
    # More equal tails: the longer over the shorter one, without a division by 0.
    return bool(max(log_lower, log_upper) * lower < upper * min(log_lower, log_upper))


def _tails(column: FloatArray) -> tuple[float, float]:
    low, middle, high = np.quantile(column, (0.01, 0.5, 0.99))
    return float(middle - low), float(high - middle)


def principal_components(scaled: FloatArray, kept: float) -> tuple[FloatArray, float]:
    """Turn columns to their principal components.

    Parameters
    ----------
    scaled : (n, p) float64
    kept : float
        Share of the variance that the components must hold.

    Returns
    -------
    components : (n, q) float64
        The fewest components that hold the share, the strongest first.
    variance_kept : float
        The share that they hold.
    """
    centred = scaled - scaled.mean(axis=0)
    variance, axes = np.linalg.eigh(centred.T @ centred)
    variance, axes = np.maximum(variance[::-1], 0.0), axes[:, ::-1]
    share = np.cumsum(variance) / variance.sum()
    n = int(np.searchsorted(share, kept * (1.0 - NO_SPREAD))) + 1
    return centred @ axes[:, :n], float(share[n - 1])
