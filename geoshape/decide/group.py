"""Group features of alike shape, and tell what is typical of each group and sets it apart.

Everything is computed on rows put in order by their values, so that the order of rows in the layer plays no part.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from geoshape.decide.clusters import Clusters, find_clusters
from geoshape.decide.scaling import Scaling, fit_scaling, principal_components
from geoshape.errors import OptionError
from geoshape.rings import BoolArray, FloatArray, IntArray

ObjectArray = NDArray[np.object_]

VARIANCE_KEPT = 0.95
"""Share of the variance of the scaled columns that the principal components must hold."""

MIN_ROWS = 3

AZIMUTH_SUFFIX = "_azimuth_deg"


@dataclass(frozen=True, kw_only=True)
class GroupOptions:
    """What is grouped, and into how many groups.

    Attributes
    ----------
    columns : tuple of str
        Names of the columns, in the order of the values.
    count : int or None
        Number of groups, 2 or more; None takes the number from 2 to 12 with the highest mean silhouette.
    seed : int
        Seed of the starts of k-means and of the samples; the same seed gives the same groups.
    logs : bool
        Take logarithms of positive columns with a long upper tail.

    Raises
    ------
    OptionError
        There is no column, one is named twice or holds azimuths, or ``count`` or ``seed`` is out of its range.
    """

    columns: tuple[str, ...]
    count: int | None = None
    seed: int = 0
    logs: bool = True

    def __post_init__(self) -> None:
        if not self.columns:
            raise OptionError("columns is empty, and there is nothing to group by; name one column or more")
        repeated = [name for name in dict.fromkeys(self.columns) if self.columns.count(name) > 1]
        if repeated:
            raise OptionError(f"columns names {', '.join(repeated)} more than once; name each column once")
        round_ones = [name for name in self.columns if name.endswith(AZIMUTH_SUFFIX)]
        if round_ones:
            raise OptionError(
                f"columns names {', '.join(round_ones)}, whose values run in a circle and have no median; leave it out"
            )
        if self.count is not None and self.count < 2:
            raise OptionError(
                f"count = {self.count} sets nothing apart; give 2 groups or more, or leave the number open"
            )
        if self.seed < 0:
            raise OptionError(f"seed = {self.seed} cannot be used; give a whole number from 0 on")


@dataclass(frozen=True, eq=False)
class Groups:
    """Groups of alike features, numbered from 1 by falling size.

    Attributes
    ----------
    group : (n,) float64
        Whole numbers from 1; NaN for a row with a null in one of the columns.
    distance : (n,) float64
        Distance from the group's centre in the space of principal components, in robust standard deviations; NaN
        where there is no group.
    is_prototype : (n,) bool
        The row of each group that is nearest to its centre; of equals, the first.
    columns : tuple of str
        Columns that took part.
    left_out : tuple of str
        Columns without any differences, which took no part.
    logged : tuple of str
        Columns whose logarithms were taken.
    size : (k,) int64
        Rows in each group.
    typical : (k, p) float64
        Median of each column in each group, in the column's unit.
    apart : (k, p) float64
        Median of the group's scaled values less that of all other rows: how many robust standard deviations each
        column sets the group apart by, and in which direction.
    silhouette : float
        Mean silhouette, -1 ... 1, of a sample of rows: near 1 where groups are compact and far apart. NaN where each
        row is a group of its own.
    silhouettes : dict of int to float
        The same of each number of groups that was tried.
    variance_kept : float
        Share of the variance of the scaled columns that the principal components hold.
    variance_explained : float
        Share of the variance of the components that lies between groups.
    """

    group: FloatArray
    distance: FloatArray
    is_prototype: BoolArray
    columns: tuple[str, ...]
    left_out: tuple[str, ...]
    logged: tuple[str, ...]
    size: IntArray
    typical: FloatArray
    apart: FloatArray
    silhouette: float
    silhouettes: dict[int, float]
    variance_kept: float
    variance_explained: float

    @property
    def count(self) -> int:
        """Number of groups."""
        return len(self.size)

    def set_apart_by(self, group: int, most: int = 3) -> list[tuple[str, float]]:
        """List the columns that set a group apart, the strongest first.

        Parameters
        ----------
        group : int
            Number of the group, from 1.
        most : int
            Most columns to list.

        Returns
        -------
        list of (str, float)
            Name, and robust standard deviations above (positive) or below the other rows.
        """
        effect = self.apart[group - 1]
        order = np.argsort(-np.abs(effect), kind="stable")[:most]
        return [(self.columns[i], float(effect[i])) for i in order]

    def column_values(self) -> dict[str, FloatArray | ObjectArray]:
        """Give the layer's new columns: ``group``, ``group_distance``, ``is_prototype`` (bool; None without group)."""
        prototype = self.is_prototype.astype(object)
        prototype[np.isnan(self.group)] = None
        return {"group": self.group, "group_distance": self.distance, "is_prototype": prototype}


def group(values: FloatArray, options: GroupOptions) -> Groups:
    """Group rows of alike values.

    Parameters
    ----------
    values : (n, p) float64
        A column for each name in ``options.columns``; NaN is null.
    options : GroupOptions

    Returns
    -------
    Groups

    Raises
    ------
    OptionError
        Fewer than three rows have all values, no column has differences, or there are fewer different rows than
        groups.

    Notes
    -----
    Each column is centred on its median and scaled by its interquartile range, after logarithms where its upper tail
    is long, and far values are drawn in (see `Scaling`). The principal components that hold 95 % of the variance go
    to k-means, which is fitted to at most 20 000 rows drawn at random; all rows are then assigned to the nearest
    centre. A kind of shape that fewer than some ten rows of the sample have may have no group of its own.

    Examples
    --------
    >>> rounds, strips = [[0.9, 1.0], [0.92, 1.1], [0.91, 1.05]], [[0.2, 4.0], [0.22, 4.1], [0.21, 4.2]]
    >>> groups = group(np.array(rounds + strips), GroupOptions(columns=("axis_ratio", "feret_max_m"), count=2))
    >>> sorted(set(groups.group[:3])) == sorted(set(groups.group[3:])), groups.size.tolist()
    (False, [3, 3])
    """
    known = np.flatnonzero(np.isfinite(values).all(axis=1))
    if len(known) < MIN_ROWS:
        raise OptionError(
            f"{len(known)} of {len(values)} rows have a value in each of {', '.join(options.columns)}, and grouping "
            f"needs {MIN_ROWS}; take other columns"
        )
    order = known[np.lexsort(values[known].T[::-1])]
    scaling = fit_scaling(values[order], options.columns, logs=options.logs)
    if not scaling.columns:
        raise OptionError(
            f"{', '.join(options.columns)} have the same value in all {len(known)} rows, and nothing sets them apart; "
            "take other columns"
        )
    scaled = scaling.apply(values[order])
    components, variance_kept = principal_components(scaled, VARIANCE_KEPT)
    clusters = find_clusters(components, options.count, options.seed)
    return _described(values, order, scaling, clusters, scaled, variance_kept)


def _described(
    values: FloatArray,
    order: IntArray,
    scaling: Scaling,
    clusters: Clusters,
    scaled: FloatArray,
    variance_kept: float,
) -> Groups:
    """Give clusters of ordered rows back to the rows of the layer, with what is typical of them."""
    number, distance = np.full(len(values), np.nan), np.full(len(values), np.nan)
    number[order] = clusters.label + 1.0
    distance[order] = clusters.distance
    is_prototype = np.zeros(len(values), dtype=np.bool_)
    by_nearness = np.lexsort((order, clusters.distance, clusters.label))
    first = np.flatnonzero(np.diff(clusters.label[by_nearness], prepend=-1))
    is_prototype[order[by_nearness[first]]] = True
    size = np.bincount(clusters.label)
    typical, apart = np.empty((len(size), len(scaling.columns))), np.empty((len(size), len(scaling.columns)))
    for i in range(len(size)):
        own = clusters.label == i
        typical[i] = np.median(values[order[own]][:, scaling.index], axis=0)
        apart[i] = np.median(scaled[own], axis=0) - np.median(scaled[~own], axis=0)
    return Groups(
        group=number,
        distance=distance,
        is_prototype=is_prototype,
        columns=scaling.columns,
        left_out=scaling.left_out,
        logged=scaling.logged,
        size=size,
        typical=typical,
        apart=apart,
        silhouette=clusters.silhouette,
        silhouettes=clusters.silhouettes,
        variance_kept=variance_kept,
        variance_explained=clusters.explained,
    )
