"""From a geometry to the ground, and exact areas on the ellipsoid: what the tests of the ground share."""

import numpy as np
import pyproj
import shapely

from geoshape.formulas.arclength import edge_lengths
from geoshape.geometry import ring_batch
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.place import open_ground
from geoshape.ground.seams import rejoin
from geoshape.options import MeasureOptions

WGS84 = pyproj.CRS(4326)
SEMI_MAJOR_M, E2 = 6378137.0, 0.0066943799901413165


def place_all(ground_name, geometries, crs=WGS84, **options):
    geometries = np.asarray(geometries, dtype=object)
    bounds = tuple(shapely.total_bounds(geometries).tolist())
    ground = open_ground(plan_ground(pyproj.CRS(crs), bounds, MeasureOptions(ground=ground_name, **options)))
    geometries, frames, is_cut = ground.unwrap(ground.in_degrees(geometries))
    return ground.place(ring_batch(rejoin(geometries, is_cut)), frames)


def placed_on(ground_name, geometry, crs=WGS84, **options):
    return place_all(ground_name, [geometry], crs, **options)


def area_of(placed):
    return placed.batch.sum_ring_values(placed.batch.ring_signed_area)


def perimeter_of(placed):
    return placed.batch.sum_features(edge_lengths(placed.batch))


def area_and_perimeter(geometry, crs=WGS84, **options):
    placed = placed_on("centred", geometry, crs, **options)
    return area_of(placed)[0], perimeter_of(placed)[0]


def zone(west, south, east, north):
    """Area of a WGS 84 quadrilateral between parallels, in closed form (Snyder 1987, 3-12)."""
    e = np.sqrt(E2)

    def q(latitude):
        s = np.sin(np.radians(latitude))
        return s / (1 - E2 * s * s) + np.arctanh(e * s) / e

    return SEMI_MAJOR_M**2 * (1 - E2) / 2 * np.radians(east - west) * (q(north) - q(south))
