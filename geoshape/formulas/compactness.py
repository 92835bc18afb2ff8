"""Compactness: how far a shape is from a circle, each ratio 1 for the circle (or the rectangle) itself."""

from __future__ import annotations

import numpy as np

from geoshape.rings import FloatArray


def polsby_popper(area: FloatArray, perimeter: FloatArray) -> FloatArray:
    """Area over that of the circle of equal perimeter, 4 pi A / P^2.

    References
    ----------
    .. [1] Cox, E. P. (1927). A method of assigning numerical and percentage values to the degree of roundness of sand
           grains. Journal of Paleontology 1, 179-183.
    .. [2] Polsby, D. D., Popper, R. D. (1991). The third criterion. Yale Law & Policy Review 9, 301-353.
    """
    return _share(4.0 * np.pi * area, perimeter * perimeter)


def perimeter_ratio(area: FloatArray, perimeter: FloatArray) -> FloatArray:
    """Perimeter over that of the circle of equal area, P / (2 sqrt(pi A)), at least 1.

    References
    ----------
    .. [1] Hutchinson, G. E. (1957). A Treatise on Limnology, volume 1. Wiley. (shoreline development)
    .. [2] Gravelius, H. (1914). Flusskunde. Goeschen. (compactness of a catchment)
    .. [3] Patton, D. R. (1975). A diversity index for quantifying habitat edge. Wildlife Society Bulletin 3, 171-173.
    """
    return np.maximum(perimeter / (2.0 * np.sqrt(np.pi * area)), 1.0)


def reock(area: FloatArray, circle_radius: FloatArray) -> FloatArray:
    """Area over that of the minimum bounding circle.

    References
    ----------
    .. [1] Reock, E. C. (1961). A note: measuring compactness as a requirement of legislative apportionment.
           Midwest Journal of Political Science 5, 70-74.
    """
    return _share(area, np.pi * circle_radius * circle_radius)


def convexity(area: FloatArray, hull_area: FloatArray) -> FloatArray:
    """Area over that of the convex hull."""
    return _share(area, hull_area)


def rectangularity(area: FloatArray, rectangle_area: FloatArray) -> FloatArray:
    """Area over that of the minimum-area bounding rectangle."""
    return _share(area, rectangle_area)


def inertia_compactness(central: FloatArray) -> FloatArray:
    """Second moment of the circle of equal area over that of the shape, A^2 / (2 pi (mu20 + mu02)).

    Parameters
    ----------
    central : (n, 10) float64
        Central moments, in the order of ``moments.ORDERS``.

    References
    ----------
    .. [1] Li, W., Goodchild, M. F., Church, R. (2013). An efficient measure of compactness for two-dimensional shapes
           and its application in regionalization problems. Int. J. Geographical Information Science 27, 1227-1250.
    """
    return _share(central[:, 0] ** 2, 2.0 * np.pi * (central[:, 3] + central[:, 5]))


def _share(part: FloatArray, whole: FloatArray) -> FloatArray:
    ratio = np.divide(part, whole, out=np.full_like(part, np.nan), where=whole > 0)
    # A share is at most 1; rounding may put a circle or a convex shape an ulp above.
    return np.minimum(ratio, 1.0)
