"""The random field along rings: its spread, its correlation, its independence of batching."""

import numpy as np
import pytest
import shapely

from geoshape.formulas.digitising import PositionError, disturbed, median_edge, mixed, normal, uniform
from geoshape.geometry import ring_batch
from tests import shapes

SIDE = 64
"""Vertices on each side of the test square, which are 1 m apart."""


def square_copies(n):
    edge = [(i, 0.0) for i in range(SIDE)]
    ring = [*edge, *((SIDE, i) for i in range(SIDE)), *((SIDE - i, SIDE) for i in range(SIDE))]
    ring += [(0.0, SIDE - i) for i in range(SIDE)]
    return ring_batch(np.array([shapely.Polygon(ring)] * n))


def shifts(batch, length_m, sigma_m=1.0, seed=0):
    key = mixed(np.full(batch.n_features, seed, dtype=np.uint64), np.arange(batch.n_features))
    moved = disturbed(batch, PositionError(sigma_m, np.full(batch.n_features, length_m)), key)
    return np.stack([moved.x - batch.x, moved.y - batch.y]).reshape(2, batch.n_features, -1)


def test_numbers_are_uniform_and_normal():
    key = mixed(np.zeros(100_000, dtype=np.uint64), np.arange(100_000))
    assert len(np.unique(key)) == 100_000
    assert np.histogram(uniform(key), bins=20, range=(0, 1))[0] == pytest.approx(5000, abs=5 * np.sqrt(5000))
    z = normal(key)
    moments = [z.mean(), (z**2).mean(), (z**3).mean(), (z**4).mean()]
    assert moments == pytest.approx([0, 1, 0, 3], abs=0.1)
    assert np.corrcoef(z[:-1], z[1:])[0, 1] == pytest.approx(0, abs=0.015)


@pytest.mark.parametrize("length_m", [0.0, 1.0, 8.0, 60.0, 100.0, 200.0, 1e6])
def test_every_vertex_has_the_spread_asked_for(length_m):
    n = 4000
    field = shifts(square_copies(n), length_m, sigma_m=2.5)
    assert field.mean(axis=1) == pytest.approx(0, abs=5 * 2.5 / np.sqrt(n))
    assert field.std(axis=1) == pytest.approx(2.5, rel=5 / np.sqrt(2 * n))


def test_neighbours_are_off_together_and_x_and_y_are_not():
    field = shifts(square_copies(4000), 8.0)
    for distance, expected, tolerance in ((1, 1, 0.03), (4, np.exp(-0.25), 0.03), (8, np.exp(-1), 0.03), (40, 0, 0.03)):
        pairs = (field * np.roll(field, distance, axis=2)).mean()
        assert pairs == pytest.approx(expected, abs=tolerance), distance
    assert (field[0] * field[1]).mean() == pytest.approx(0, abs=0.03)


def test_field_closes_like_anywhere_else():
    field = shifts(square_copies(4000), 8.0)
    steps = np.std(np.roll(field, -1, axis=2) - field, axis=1)
    assert steps[:, -1] == pytest.approx(steps.mean(axis=1), rel=0.06)


def test_a_ring_shorter_than_the_length_moves_as_a_whole():
    field = shifts(square_copies(5), 1e6)
    assert np.ptp(field, axis=2) == pytest.approx(0, abs=1e-12)


def test_independent_errors_share_nothing():
    field = shifts(square_copies(4000), 0.0)
    assert (field * np.roll(field, 1, axis=2)).mean() == pytest.approx(0, abs=0.01)


def test_rings_of_a_feature_move_apart():
    ring = shapes.regular(12, 5.0)
    batch = ring_batch(np.array([shapely.Polygon(shapes.regular(12, 20.0), [ring])] * 2000))
    field = shifts(batch, 1e6)
    assert np.corrcoef(field[0, :, 0], field[0, :, -1])[0, 1] == pytest.approx(0, abs=0.1)


def test_median_edge_of_even_odd_and_no_edges():
    batch = ring_batch(np.array([shapely.box(0, 0, 2, 6), None, shapely.Polygon([(0, 0), (3, 0), (0, 4)])]))
    assert median_edge(batch) == pytest.approx([4, np.nan, 4], nan_ok=True)


def test_no_rings_give_no_rings():
    empty = ring_batch(np.array([None, None], dtype=object))
    error = PositionError(1.0, np.ones(2))
    assert disturbed(empty, error, np.zeros(2, dtype=np.uint64)).n_vertices == 0
