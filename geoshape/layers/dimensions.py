"""Geometries with fewer or other dimensions."""

from __future__ import annotations

import numpy as np
import shapely
from numpy.typing import NDArray

Shapes = NDArray[np.object_]


def without_measures(shapes: Shapes) -> Shapes:
    """Leave measures (M) out and keep heights (Z).

    Parameters
    ----------
    shapes : (n,) object
        Geometries or None.

    Returns
    -------
    (n,) object
    """
    measured = shapely.has_m(shapes)
    if not measured.any():
        return shapes
    result = shapes.copy()
    high = shapely.has_z(shapes)
    result[measured & ~high] = shapely.force_2d(shapes[measured & ~high])
    # Well-known binary of three dimensions is what drops the fourth; transformations of shapely make it no number.
    result[measured & high] = shapely.from_wkb(shapely.to_wkb(shapes[measured & high], output_dimension=3))
    return result


def with_dimensions(shapes: Shapes, *, has_z: bool) -> Shapes:
    """Give all geometries heights or none of them: heights that are missing become 0, measures are left out.

    Parameters
    ----------
    shapes : (n,) object
        Geometries or None.
    has_z : bool

    Returns
    -------
    (n,) object
    """
    if not has_z:
        return np.asarray(shapely.force_2d(shapes), dtype=object)
    return np.asarray(shapely.force_3d(without_measures(shapes)), dtype=object)
