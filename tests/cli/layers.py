"""Small layers whose decisions are known beforehand."""

import geopandas as gpd
import numpy as np
import shapely
from shapely import affinity, box

CRS = "EPSG:3035"
# Near the centre of the projection, but not there: that one point is brought back to a tenth of a millimetre only.
EAST, NORTH = 4_321_300.0, 3_210_300.0


def at(shape, dx=0.0, dy=0.0):
    """Move a shape near the middle of the CRS, where it is true to size and angle."""
    return affinity.translate(shape, EAST + dx, NORTH + dy)


def write(path, geometries, crs=CRS, **columns):
    """Write geometries with columns."""
    gpd.GeoDataFrame(columns, geometry=list(geometries), crs=crs).to_file(path)
    return path


def lots(path):
    """A square, a strip, a large square, a missing and an empty one, in two zones; three have a class."""
    shapes = [box(0, 0, 20, 20), box(100, 0, 200, 4), box(300, 0, 400, 100), None, shapely.Polygon()]
    places = [shape if shape is None or shape.is_empty else at(shape) for shape in shapes]
    return write(path, places, lot=["a", "b", "c", "d", "e"], zone=["R", "R", "M", "M", None])


def bolt(scale=1.0, turn_deg=0.0, *, mirrored=False):
    """An outline without any symmetry, turned counter-clockwise."""
    points = np.array([(0, 0), (6, 0), (6, 1), (3, 1), (3, 2.5), (2, 2.5), (2, 1), (0, 1)], dtype=float)
    if mirrored:
        points = points * (-1, 1)
    return affinity.scale(
        affinity.rotate(shapely.Polygon(points), turn_deg, origin=(0, 0)), scale, scale, origin=(0, 0)
    )


def strips_and_squares(path, n=12):
    """Two kinds of shape, `n` each, every one a little different."""
    rng = np.random.default_rng(4)
    squares = [at(box(0, 0, 10, 10 + rng.uniform(-1, 1)), 50 * i) for i in range(n)]
    strips = [at(box(0, 0, 30 + rng.uniform(-1, 1), 2), 50 * i, 100) for i in range(n)]
    return write(path, squares + strips, kind=["square"] * n + ["strip"] * n)
