"""K-means on principal components, with the number of clusters by silhouette, in bounded time and memory."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from sklearn.cluster import KMeans
from sklearn.metrics import silhouette_score
from threadpoolctl import threadpool_limits

from geoshape.errors import OptionError
from geoshape.rings import FloatArray, IntArray

FIT_ROWS = 20_000
"""Rows that centres are fitted to; all others are assigned to the nearest centre."""

SILHOUETTE_ROWS = 2_000
"""Rows that silhouettes are taken of; their cost grows with the square."""

STARTS = 8
"""Starts of k-means, of which the best is kept."""

MAX_COUNT = 12
"""Most clusters tried where their number is left open."""


@dataclass(frozen=True, eq=False)
class Clusters:
    """Rows in clusters, which are numbered from 0 by falling size, those of equal size by their centres.

    Attributes
    ----------
    label : (n,) int64
    distance : (n,) float64
        Distance of each row from the centre of its cluster.
    centre : (k, q) float64
    silhouette : float
        Mean silhouette of a sample of rows, -1 ... 1; NaN where each row is its own cluster.
    silhouettes : dict of int to float
        The same of each number of clusters that was tried.
    explained : float
        Share of the variance that lies between clusters.
    """

    label: IntArray
    distance: FloatArray
    centre: FloatArray
    silhouette: float
    silhouettes: dict[int, float]
    explained: float


def find_clusters(points: FloatArray, count: int | None, seed: int) -> Clusters:
    """Sort points into clusters.

    Parameters
    ----------
    points : (n, q) float64
        In an order that does not depend on the layer's, for the samples are taken by position.
    count : int or None
        Number of clusters; None tries 2 to 12 and takes the one with the highest mean silhouette, of equals the
        smallest.
    seed : int

    Returns
    -------
    Clusters

    Raises
    ------
    OptionError
        There are fewer different points than clusters, or only one.

    References
    ----------
    .. [1] Rousseeuw, P. J. (1987). Silhouettes: a graphical aid to the interpretation and validation of cluster
           analysis. Journal of Computational and Applied Mathematics 20, 53-65.
    """
    random = np.random.default_rng(seed)
    fitted = points[_sample(len(points), FIT_ROWS, random)]
    judged = _sample(len(fitted), SILHOUETTE_ROWS, random)
    n_different = len(np.unique(fitted, axis=0))
    if n_different < (count or 2):
        raise OptionError(
            f"count = {count or 2} groups cannot be made of {n_different} different rows; "
            f"{'ask for fewer groups' if n_different > 1 else 'take other columns'}"
        )
    tried = {k: _fit(fitted, judged, k, seed) for k in ([count] if count else _open_counts(n_different))}
    best = max(tried, key=lambda k: (np.nan_to_num(tried[k][1], nan=-1.0), -k))
    label, distance = nearest(points, tried[best][0])
    label, centre = _numbered(label, tried[best][0])
    total = float(((points - points.mean(axis=0)) ** 2).sum())
    return Clusters(
        label=label,
        distance=distance,
        centre=centre,
        silhouette=tried[best][1],
        silhouettes={k: score for k, (_, score) in tried.items()},
        explained=1.0 - float((distance**2).sum()) / total,
    )


def _open_counts(n_different: int) -> range:
    """List the numbers to try; each point its own cluster says nothing, but two different points are two clusters."""
    return range(2, max(min(MAX_COUNT, n_different - 1), 2) + 1)


def _sample(n: int, most: int, random: np.random.Generator) -> IntArray:
    """Draw positions without repetition, in ascending order; all of them where they are few."""
    if n <= most:
        return np.arange(n)
    return np.sort(random.choice(n, size=most, replace=False))


def _fit(points: FloatArray, judged: IntArray, count: int, seed: int) -> tuple[FloatArray, float]:
    # One thread: sums in another order would make the last digits, and by them ties, depend on chance.
    with threadpool_limits(limits=1):
        model = KMeans(n_clusters=count, n_init=STARTS, random_state=seed).fit(points)
        label = model.labels_[judged]
        has_silhouette = 1 < len(np.unique(label)) < len(label)
        score = float(silhouette_score(points[judged], label)) if has_silhouette else np.nan
    return np.asarray(model.cluster_centers_, dtype=np.float64), score


def nearest(points: FloatArray, centres: FloatArray) -> tuple[IntArray, FloatArray]:
    """Find the nearest centre of each point, and its distance; of equals, the first.

    Parameters
    ----------
    points : (n, q) float64
    centres : (k, q) float64

    Returns
    -------
    label : (n,) int64
    distance : (n,) float64
    """
    label = np.zeros(len(points), dtype=np.int64)
    least = np.full(len(points), np.inf)
    for i, centre in enumerate(centres):
        squared = ((points - centre) ** 2).sum(axis=1)
        nearer = squared < least
        label[nearer] = i
        least[nearer] = squared[nearer]
    return label, np.sqrt(least)


def _numbered(label: IntArray, centres: FloatArray) -> tuple[IntArray, FloatArray]:
    """Give clusters numbers by falling size; k-means itself leaves their order to chance."""
    size = np.bincount(label, minlength=len(centres))
    order = np.lexsort((*centres.T[::-1], -size))
    order = order[size[order] > 0]
    place = np.zeros(len(centres), dtype=np.int64)
    place[order] = np.arange(len(order))
    return place[label], centres[order]
