"""Outlines as the page carries them, unpacked as its script does."""

import base64

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

from geoshape.geometry import ring_batch
from geoshape.report.encoding import COARSEST, extents, packed, packed_complex, packed_rings, simplified
from geoshape.report.sheet import HALF, path_of, small_paths


def unpacked(text, kind):
    return np.frombuffer(base64.b64decode(text), dtype=kind)


def rings_of(packing):
    """List the rings of each feature as (is_hole, corners), step by step as in the page's script."""
    sizes, xy = unpacked(packing["sizes"], "<i4"), unpacked(packing["xy"], "<i2").reshape(-1, 2)
    frame = unpacked(packing["frame"], "<f8").reshape(-1, 3)
    features, ring, vertex = [], 0, 0
    for feature, count in enumerate(unpacked(packing["rings"], "<i4")):
        features.append([])
        for _ in range(count):
            size = abs(sizes[ring])
            corners = frame[feature, :2] + frame[feature, 2] * xy[vertex : vertex + size]
            features[-1].append((bool(sizes[ring] < 0), corners))
            ring, vertex = ring + 1, vertex + size
    return features


def blob(centre, radius, n=200, seed=0):
    random = np.random.default_rng(seed)
    angle = 2 * np.pi * np.arange(n) / n
    distance = radius * (1 + 0.3 * np.cos(3 * angle + seed) + 0.02 * random.normal(size=n))
    return shapely.Polygon(
        np.column_stack((centre[0] + distance * np.cos(angle), centre[1] + distance * np.sin(angle)))
    )


def test_numbers_come_back_to_the_last_digit():
    values = np.array([1.0, -1e300, np.nan, 1 / 3])
    np.testing.assert_array_equal(unpacked(packed(values, "<f8"), "<f8"), values)
    np.testing.assert_array_equal(unpacked(packed_complex(np.array([1 + 2j])), "<f4"), [1, 2])


@given(st.floats(1e-3, 1e6), st.floats(-1e7, 1e7), st.integers(0, 5))
@settings(max_examples=30)
def test_rings_come_back_within_half_a_step(radius, at, seed):
    hole = shapely.box(at - radius / 10, -radius / 10, at + radius / 10, radius / 10)
    two = shapely.multipolygons([blob((at, 0), radius, seed=seed) - hole, blob((at + 5 * radius, 0), radius / 2)])
    batch = ring_batch(np.array([two, None, shapely.box(at, 0, at + radius, radius)], dtype=object))
    features = rings_of(packed_rings(batch))
    assert [[is_hole for is_hole, _ in rings] for rings in features] == [
        batch.ring_is_hole[batch.ring_feature == feature].tolist() for feature in range(3)
    ]
    corners = np.concatenate([corners for rings in features for _, corners in rings])
    original = np.column_stack((batch.x, batch.y)) + batch.origin[batch.vertex_feature]
    step = extents(batch)[batch.vertex_feature] / 65_534
    assert np.all(np.abs(corners - original) <= 0.51 * step[:, None] + 1e-9 * np.abs(at))


def test_nothing_packs_to_nothing():
    batch = ring_batch(np.array([None, None], dtype=object))
    assert rings_of(packed_rings(batch)) == [[], []]
    assert simplified(batch, np.inf, 10) is batch


@pytest.mark.parametrize("budget", [10_000, 1200, 10])
def test_simplified_outlines_stay_close(budget):
    shapes = np.array([blob((1000 * i, 0), 300 / (i + 1), 400, seed=i) for i in range(8)])
    batch = ring_batch(shapes)
    coarse = simplified(batch, np.inf, budget)
    assert coarse.n_features == batch.n_features
    assert coarse.ring_feature.tolist() == batch.ring_feature.tolist()
    assert coarse.ring_size.min() >= 3
    assert coarse.n_vertices < batch.n_vertices
    if budget == 1200:
        assert coarse.n_vertices <= budget
    for feature, extent in enumerate(extents(batch)):
        pair = [
            shapely.LinearRing(np.column_stack((one.x, one.y))[one.vertex_feature == feature])
            for one in (batch, coarse)
        ]
        assert shapely.hausdorff_distance(*pair) <= COARSEST * 1.3 * extent


def test_what_is_small_on_the_screen_is_still_a_shape():
    batch = ring_batch(np.array([blob((0, 0), 1.0, 300), blob((1e6, 0), 1e5, 300)]))
    coarse = simplified(batch, 1e6, 100_000)
    assert coarse.ring_size[0] > 50


def test_thin_slivers_keep_three_corners():
    sliver = shapely.Polygon([(0, 0), (1000, 0), (1000, 1e-6), (500, 2e-6), (0, 1e-6)])
    assert simplified(ring_batch(np.array([sliver])), np.inf, 1).ring_size.tolist()[0] >= 3


def points_of(path):
    """Read a path of M, L, H, V and z."""
    points, tokens = [], []
    for sign in path:
        if sign in "MLHVz":
            tokens.append([sign, ""])
        else:
            tokens[-1][1] += sign
    for sign, text in tokens:
        if sign == "z":
            continue
        numbers = [float(number) for number in text.split(",")]
        last = points[-1] if points else (0, 0)
        points.append({"H": (numbers[0], last[1]), "V": (last[0], numbers[0])}.get(sign, tuple(numbers)))
    return np.array(points)


@given(st.integers(0, 30), st.floats(0.1, 1e5))
@settings(max_examples=30)
def test_small_outlines_fill_their_square_upside_down(seed, radius):
    shape = blob((7.0, -3.0), radius, 150, seed)
    [path] = small_paths(ring_batch(np.array([shape])), np.array([0]))
    points = points_of(path)
    assert np.abs(points).max() == HALF
    west, south, east, north = shape.bounds
    factor = 2 * HALF / max(east - west, north - south)
    expected = shapely.transform(
        shape, lambda p: np.column_stack(((p[:, 0] - (west + east) / 2), ((south + north) / 2 - p[:, 1]))) * factor
    )
    drawn = shapely.Polygon(points)
    assert shapely.hausdorff_distance(drawn.exterior, expected.exterior) < 3.0


def test_a_path_of_nothing_is_empty():
    assert path_of(np.array([[0.0, 0.0], [0.1, 0.0], [0.0, 0.1]]), 0.5) == ""
    assert small_paths(ring_batch(np.array([None], dtype=object)), np.array([0])) == [""]
