"""Moments against exact rational integration, and invariants against their forms in complex moments and tensors."""

import numpy as np
import pytest
from hypothesis import example, given, settings
from shapely import Polygon, affinity

from geoshape.formulas import axes, compactness, moments
from geoshape.geometry import ring_batch
from tests import naive, shapes, strategies
from tests.formulas.plane import angle_between, batch_of, central_of, objects, tolerance

ALL_SHAPES = [*shapes.SHAPES, *(shape.mirrored for shape in shapes.SHAPES)]


def invariants(polygon):
    eta = moments.normalised_moments(central_of(polygon))
    hu, affine = moments.hu_invariants(eta)[0], moments.affine_invariants(eta)[0]
    return {f"hu_{i}": v for i, v in enumerate(hu, 1)} | {f"affine_{i}": v for i, v in enumerate(affine, 1)}


def naive_invariants(polygon):
    mu = naive.central_moments(naive.parts_of(polygon))
    hu, affine = naive.hu_invariants(mu), naive.affine_invariants(mu)
    values = {f"hu_{i}": v for i, v in enumerate(hu, 1)} | {f"affine_{i}": v for i, v in enumerate(affine, 1)}
    return {name: float(value) for name, value in values.items()}


def assert_invariants(got, expected, relative, names=None):
    for name in names or expected:
        value = expected[name]
        assert abs(got[name] - value) <= tolerance(expected, name, relative), f"{name}: {got[name]} is not {value}"


@pytest.mark.parametrize("shape", ALL_SHAPES, ids=lambda shape: shape.name)
def test_raw_moments_of_shapes(shape):
    raw = moments.raw_moments(batch_of(shape.polygon, local_origin=False))[0]
    expected = [float(value) for value in naive.raw_moments(naive.parts_of(shape.polygon))]
    assert raw == pytest.approx(expected, rel=1e-13, abs=1e-15 * max(map(abs, expected)))


@given(strategies.polygons())
@settings(max_examples=25)
def test_raw_moments(polygon):
    raw = moments.raw_moments(batch_of(polygon, local_origin=False))[0]
    reach = max(abs(c) for c in polygon.bounds)
    for got, value, (p, q) in zip(raw, naive.raw_moments(naive.parts_of(polygon)), moments.ORDERS, strict=True):
        assert abs(got - float(value)) <= 1e-12 * raw[0] * reach ** (p + q)


@given(strategies.polygons(), strategies.shifts())
@example(shapes.SQUARE.polygon, (5_000_000, 5_000_000))
@settings(max_examples=25)
def test_central_moments_far_from_the_origin(polygon, shift):
    moved = affinity.translate(polygon, *shift)
    got = central_of(moved)[0]
    mu = naive.central_moments(naive.parts_of(polygon))
    spread = float((mu[2, 0] + mu[0, 2]) / mu[0, 0]) ** 0.5
    for value, (p, q) in zip(got, moments.ORDERS, strict=True):
        assert abs(value - float(mu[p, q])) <= 1e-11 * got[0] * spread ** (p + q)


@given(strategies.polygons())
@settings(max_examples=25)
def test_invariants(polygon):
    assert_invariants(invariants(polygon), naive_invariants(polygon), 1e-9)


@given(strategies.thin())
@settings(max_examples=25)
def test_invariants_of_thin_polygons(polygon):
    assert_invariants(invariants(polygon), naive_invariants(polygon), 1e-9)


@given(strategies.polygons())
@settings(max_examples=25)
def test_identities(polygon):
    row = invariants(polygon)
    product = row["hu_3"] * row["hu_4"] ** 3
    rounding = 1e-12 * max(row["hu_3"], row["hu_4"]) ** 4
    assert product == pytest.approx(row["hu_5"] ** 2 + row["hu_7"] ** 2, rel=1e-11, abs=rounding)
    rounding = 1e-14 * row["hu_1"] ** 2
    assert row["hu_2"] == pytest.approx(row["hu_1"] ** 2 - 4 * row["affine_1"], rel=1e-12, abs=rounding)
    assert compactness.inertia_compactness(central_of(polygon))[0] == pytest.approx(
        1 / (2 * np.pi * row["hu_1"]), rel=1e-13
    )


@given(strategies.polygons(), strategies.angles_deg())
@settings(max_examples=25)
def test_affine_invariants_bear_shear_and_stretch(polygon, angle):
    sheared = affinity.affine_transform(affinity.rotate(polygon, angle), (2.0, 0.7, -0.3, 0.5, 11.0, -7.0))
    mirrored = affinity.scale(sheared, xfact=-1)
    row = invariants(polygon)
    for other in (invariants(sheared), invariants(mirrored)):
        assert_invariants(other, row, 1e-9, ["affine_1", "affine_2", "affine_3"])


@given(strategies.polygons())
@settings(max_examples=25)
def test_axes_are_the_eigenvectors_of_the_second_moments(polygon):
    found = axes.principal_axes(central_of(polygon))
    major, minor, strength, azimuth = naive.principal_axes(naive.central_moments(naive.parts_of(polygon)))
    assert found.major_m[0] == pytest.approx(major, rel=1e-12)
    assert found.minor_m[0] == pytest.approx(minor, rel=1e-10)
    assert found.ratio[0] == pytest.approx(minor / major, rel=1e-10)
    assert found.strength[0] == pytest.approx(strength, rel=1e-9, abs=1e-13)
    if strength > 1e-6:
        assert angle_between(found.azimuth_deg[0], azimuth) <= 1e-10 / strength
        assert 0 <= found.azimuth_deg[0] < 180
    else:
        assert np.isnan(found.azimuth_deg[0])


@pytest.mark.parametrize("angle", [0, 1e-9, 30, 45, 89.999999, 90, 135, 179.9999999])
@pytest.mark.parametrize("ratio", [2, 100, 1000, 100_000])
def test_axes_of_a_turned_rectangle(angle, ratio):
    """The smaller second moment is ratio^2 times smaller than the larger, whose rounding it bears."""
    rounding = max(1e-12, 2.0 * np.finfo(float).eps * ratio**2)
    ring = shapes.turned([(x - ratio / 2, y - 0.5) for x, y in shapes.rectangle(ratio, 1)], angle)
    found = axes.principal_axes(central_of(Polygon(ring)))
    assert found.major_m[0] == pytest.approx(2 * ratio / 3**0.5, rel=1e-12)
    assert found.minor_m[0] == pytest.approx(2 / 3**0.5, rel=rounding)
    assert found.ratio[0] == pytest.approx(1 / ratio, rel=rounding)
    assert angle_between(found.azimuth_deg[0], 90 - angle) < 1e-9


def test_weak_axes_have_no_direction():
    just_below, just_above = 1 + 0.9e-6, 1 + 1.1e-6
    central = central_of(*(Polygon(shapes.rectangle(1, height)) for height in (just_below, just_above, 1)))
    found = axes.principal_axes(central)
    # (h^2 - 1) / (h^2 + 1) is nearly h - 1.
    assert found.strength == pytest.approx([0.9e-6, 1.1e-6, 0], rel=1e-4, abs=1e-15)
    assert np.isnan(found.azimuth_deg).tolist() == [True, False, True]
    assert angle_between(found.azimuth_deg[1], 0) < 1e-6


def test_one_small_part_far_away_keeps_its_digits():
    near = Polygon(shapes.rectangle(1000, 500))
    small = affinity.translate(Polygon([(0, 0), (0.5, 0), (0.25, 0.125)]), 2.0**20, 2.0**19)
    both = ring_batch(objects(near.union(small)), local_origin=False)
    raw = moments.raw_moments(both)[0]
    expected = [float(value) for value in naive.raw_moments(naive.parts_of(near.union(small)))]
    assert raw == pytest.approx(expected, rel=1e-13)


def test_translated_is_undone():
    raw = moments.raw_moments(batch_of(shapes.QUAD.polygon, shapes.L_SHAPE.polygon, local_origin=False))
    dx, dy = np.array([3.0, -1.5]), np.array([-2.0, 0.25])
    there_and_back = moments.translated(moments.translated(raw, dx, dy), -dx, -dy)
    assert there_and_back == pytest.approx(raw, rel=1e-12, abs=1e-12)
    moved = moments.translated(raw, dx, dy)[0]
    shifted = affinity.translate(shapes.QUAD.polygon, 3.0, -2.0)
    assert moved == pytest.approx([float(v) for v in naive.raw_moments(naive.parts_of(shifted))], rel=1e-13)


def test_centroids_and_orders():
    raw = moments.raw_moments(batch_of(shapes.TRIANGLE.polygon, None, local_origin=False))
    assert moments.centroids(raw)[0] == pytest.approx([4 / 3, 1])
    assert np.isnan(moments.centroids(raw)[1]).all()
    assert list(moments.ORDERS) == naive.ORDERS
    central = moments.central_moments(raw)
    assert central[0, 1:3].tolist() == [0.0, 0.0]
    assert np.isnan(central[1]).all()


def test_rosin_measures_peak_at_their_shapes():
    first = np.array([1 / (16 * np.pi**2), 1 / 108, 1 / 144, 0.02, np.nan, 0.0])
    ellipticity, triangularity = moments.rosin_measures(first)
    # From memory, Rosin 2003: a triangle has ellipticity 27 / (4 pi^2), an ellipse triangularity the same.
    assert ellipticity[:3] == pytest.approx([1, 27 / (4 * np.pi**2), 9 / np.pi**2], rel=1e-14)
    assert triangularity[:3] == pytest.approx([27 / (4 * np.pi**2), 1, 0.75], rel=1e-14)
    assert triangularity[3] == pytest.approx(1 / 2.16)
    assert np.isnan(ellipticity[4:]).all()
    assert np.isnan(triangularity[4:]).all()


def test_signed_log10():
    found = moments.signed_log10(np.array([1e-3, -1e-3, 0.0, 100.0, np.nan]))
    assert found[[0, 1, 3]].tolist() == [-3.0, 3.0, 2.0]
    assert np.isnan(found[[2, 4]]).all()
