"""Hulls of vertices whose rings may go anywhere, against shapely."""

import numpy as np
import shapely

from geoshape.formulas.hulls import convex_hulls, point_hulls
from geoshape.geometry import ring_batch


def hull_areas(hulls):
    return hulls.sum_ring_values(hulls.ring_signed_area)


def test_rings_that_cross_themselves():
    rng = np.random.default_rng(3)
    tangled = [shapely.Polygon(rng.normal(size=(int(n), 2)) * 100.0) for n in rng.integers(3, 60, 200)]
    shapes = np.array([*tangled, None, shapely.MultiPolygon(tangled[:3])], dtype=object)
    expected = [0.0 if shape is None else shape.convex_hull.area for shape in shapes]
    np.testing.assert_allclose(hull_areas(point_hulls(ring_batch(shapes))), expected, rtol=1e-12)


def test_simple_rings_have_the_same_hull_either_way():
    angle = np.linspace(0, 2 * np.pi, 50, endpoint=False)
    rng = np.random.default_rng(5)
    stars = [
        shapely.Polygon(np.column_stack((r * np.cos(angle), r * np.sin(angle)))) for r in rng.uniform(5, 10, (40, 50))
    ]
    batch = ring_batch(np.array(stars, dtype=object))
    np.testing.assert_allclose(hull_areas(point_hulls(batch)), hull_areas(convex_hulls(batch)), rtol=1e-12)


def test_nothing_in_nothing_out():
    assert point_hulls(ring_batch(np.array([None], dtype=object))).n_rings == 0
