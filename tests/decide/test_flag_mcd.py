"""The subset of least determinant against trying all subsets, and against scikit-learn's search."""

from itertools import combinations

import numpy as np
import pytest
from sklearn.covariance import MinCovDet

from geoshape.decide.mcd import least_determinant


def log_determinant(covariance):
    return np.linalg.slogdet(covariance).logabsdet


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize("n_columns", [1, 2, 3])
def test_all_subsets_tried(n_columns, seed):
    values = np.random.default_rng(seed).normal(size=(12, n_columns))
    every = [values[list(rows)] for rows in combinations(range(12), 9)]
    best = min(every, key=lambda subset: log_determinant(np.atleast_2d(np.cov(subset, rowvar=False, ddof=0))))
    found = least_determinant(values, 0.75, seed=0)
    np.testing.assert_allclose(found.location, best.mean(axis=0), rtol=1e-9)
    np.testing.assert_allclose(found.covariance, np.atleast_2d(np.cov(best, rowvar=False, ddof=0)), rtol=1e-9)
    assert found.share == 0.75


@pytest.mark.parametrize(
    ("n_rows", "n_columns", "planted", "share"), [(60, 2, 12, 0.75), (200, 4, 40, 0.75), (300, 3, 100, 0.5)]
)
def test_no_larger_than_the_determinant_of_scikit_learn(n_rows, n_columns, planted, share):
    values = np.random.default_rng(1).normal(size=(n_rows, n_columns))
    values[:planted] = 0.3 * values[:planted] + 8
    other = MinCovDet(support_fraction=share, random_state=0).fit(values)
    found = least_determinant(values, share, seed=0)
    assert log_determinant(found.covariance) <= log_determinant(other.raw_covariance_) + 1e-9
    assert np.abs(found.location).max() < 1


def test_more_rows_than_are_searched():
    values = np.random.default_rng(2).normal(size=(20_000, 2)) * [1.0, 0.5]
    values[:4000] = 20.0
    found = least_determinant(values, 0.75, seed=0)
    assert np.abs(found.location).max() < 0.1
    assert np.sqrt(found.covariance[0, 0] / found.covariance[1, 1]) == pytest.approx(2, rel=0.1)


def test_same_seed_same_subset():
    values = np.random.default_rng(3).normal(size=(500, 5))
    first, second = (least_determinant(values, 0.75, seed=4) for _ in range(2))
    np.testing.assert_array_equal(first.covariance, second.covariance)


def test_rows_on_a_plane_are_found():
    """Most rows on a plane: the determinant is 0, and the rows off the plane are left out."""
    values = np.random.default_rng(5).normal(size=(100, 3))
    values[:80, 2] = values[:80, 0]
    found = least_determinant(values, 0.75, seed=0)
    assert np.linalg.eigvalsh(found.covariance)[0] < 1e-12


def test_all_rows_are_the_classical_estimate():
    values = np.random.default_rng(6).normal(size=(50, 3))
    found = least_determinant(values, 1.0, seed=0)
    np.testing.assert_allclose(found.covariance, np.cov(values, rowvar=False, ddof=0), rtol=1e-12)
