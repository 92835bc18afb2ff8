"""Outlines drawn again: the first harmonic is an ellipse, more harmonics converge, areas obey their identities."""

from itertools import pairwise

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import affinity

from geoshape.decide.redraw import (
    CROSSES,
    FOLDED,
    RINGS_CROSS,
    RedrawOptions,
    polygons_of,
    rebuild,
    redraw_rings,
)
from geoshape.errors import OptionError
from geoshape.formulas.fourier import exact_coefficients
from geoshape.geometry import ring_batch
from geoshape.rings import outlines
from tests import shapes, strategies

L_POLYGON = shapely.Polygon(shapes.L_RING)


def batch_of(*polygons):
    return ring_batch(np.array(polygons, dtype=object))


def shape_of(polygon, **options):
    return polygons_of(redraw_rings(batch_of(polygon), RedrawOptions(**options)).batch)[0]


def orders(coefficients):
    highest = coefficients.shape[1] // 2
    return np.arange(-highest, highest + 1)


# The ellipse of the first harmonic


def test_one_harmonic_is_the_ellipse_of_the_published_coefficients():
    """2 x 1 rectangle from (0, 0), counter-clockwise: a, b, c, d of Kuhl & Giardina (1982) for n = 1.

    x = 1 + a cos t + b sin t, y = 1/2 + c cos t + d sin t; values as derived by them for a unit-speed walk.
    """
    a, b, c, d = -0.91189065, 0.52648031, -0.30396355, -0.52648031
    redrawn = redraw_rings(batch_of(shapely.box(0, 0, 2, 1)), RedrawOptions(harmonics=1, points=64))
    points = shapely.get_coordinates(polygons_of(redrawn.batch)[0])
    # Every point of the ellipse satisfies (cos t, sin t) of length 1.
    unit = np.linalg.solve([[a, b], [c, d]], (points - [1, 0.5]).T)
    np.testing.assert_allclose(np.hypot(*unit), 1, atol=1e-7)
    assert redrawn.area_m2[0] == pytest.approx(np.pi * abs(a * d - b * c), rel=2e-3)


@given(strategies.stars())
def test_one_harmonic_is_an_ellipse_with_axes_from_the_amplitudes(polygon):
    batch = batch_of(polygon)
    back, centre, forth = exact_coefficients(batch, 1)[0]
    back, centre, forth = abs(back), centre + complex(*batch.origin[0]), abs(forth)
    redrawn = redraw_rings(batch, RedrawOptions(harmonics=1, points=4000))
    points = shapely.get_coordinates(polygons_of(redrawn.batch)[0])
    radius = np.hypot(points[:, 0] - centre.real, points[:, 1] - centre.imag)
    assert radius.max() == pytest.approx(forth + back, rel=1e-4)
    assert radius.min() == pytest.approx(abs(forth - back), rel=1e-2, abs=1e-3)


@pytest.mark.parametrize("n", [3, 4, 7])
def test_one_harmonic_of_a_regular_polygon_is_a_circle(n):
    """|c_1| = (n sin(pi / n) / pi)^2 for circumradius 1 (derived in the methods)."""
    circle = shape_of(shapely.Polygon(shapes.regular(n)), harmonics=1, points=360)
    radius = np.hypot(*shapely.get_coordinates(circle).T)
    np.testing.assert_allclose(radius, (n * np.sin(np.pi / n) / np.pi) ** 2, rtol=1e-12)


# Convergence


@settings(max_examples=30)
@given(strategies.stars())
def test_more_harmonics_come_nearer_to_the_outline(polygon):
    """Distance and area error shrink as the polygon's harmonics, with 1 / k^2, are added up."""
    perimeter = polygon.length
    for harmonics in (8, 64, 512):
        redrawn = shape_of(polygon, harmonics=harmonics)
        away = shapely.hausdorff_distance(redrawn.exterior, polygon.exterior)
        # Sum over k > K of two amplitudes of at most n L / (2 pi^2 k^2), n corners; the corners cut by chords.
        bound = perimeter * len(polygon.exterior.coords) / (np.pi**2 * harmonics)
        assert away <= bound
    area = redraw_rings(batch_of(polygon), RedrawOptions(harmonics=512)).area_error[0]
    assert abs(area) < 2e-4


def test_the_outline_is_reached():
    errors = []
    for harmonics in (4, 16, 64, 256, 1024):
        redrawn = shape_of(L_POLYGON, harmonics=harmonics)
        errors.append(shapely.hausdorff_distance(redrawn.exterior, L_POLYGON.exterior))
    assert all(finer < 0.4 * coarser for coarser, finer in pairwise(errors))
    assert errors[-1] < 1e-3


# Areas


@given(strategies.stars(), st.integers(1, 30), st.integers(0, 40))
def test_area_of_the_polygon_through_the_points(polygon, harmonics, more):
    """N / 2 sum sin(2 pi k / N) |Z_k|^2: the shoelace formula on the series."""
    batch = batch_of(polygon)
    n = 2 * harmonics + 2 + more
    coefficients = exact_coefficients(batch, harmonics)
    expected = n / 2 * np.sum(np.sin(2 * np.pi * orders(coefficients) / n) * np.abs(coefficients) ** 2)
    redrawn = redraw_rings(batch, RedrawOptions(harmonics=harmonics, points=n))
    assert redrawn.area_m2[0] == pytest.approx(abs(expected), rel=1e-9, abs=1e-9)
    assert redrawn.area_error[0] == pytest.approx(abs(expected) / polygon.area - 1, abs=1e-9)


@given(strategies.stars())
def test_area_identity_of_the_whole_series(polygon):
    """A = pi sum k |Z_k|^2 (Kuhl & Giardina 1982); what is cut off at k = 2000 is below 1e-5."""
    coefficients = exact_coefficients(batch_of(polygon), 2000)
    assert np.pi * np.sum(orders(coefficients) * np.abs(coefficients) ** 2) == pytest.approx(polygon.area, rel=1e-5)


@given(strategies.stars(), st.integers(1, 20))
def test_smooth_outline_encloses_pi_sum_k_power(polygon, harmonics):
    """With many points the polygon's area tends to that of the smooth outline."""
    coefficients = exact_coefficients(batch_of(polygon), harmonics)
    z = rebuild(coefficients, 20_000)
    shoelace = 0.5 * np.sum((z.conj() * np.roll(z, -1, axis=1)).imag)
    smooth = np.pi * np.sum(orders(coefficients) * np.abs(coefficients) ** 2)
    assert shoelace == pytest.approx(smooth, rel=1e-4)


def test_rebuild_is_the_series_point_by_point():
    rng = np.random.default_rng(2)
    coefficients = rng.normal(size=(3, 11)) + 1j * rng.normal(size=(3, 11))
    t = np.arange(23) / 23
    series = np.array(
        [
            [sum(z * np.exp(2j * np.pi * k * s) for k, z in zip(range(-5, 6), row, strict=True)) for s in t]
            for row in coefficients
        ]
    )
    np.testing.assert_allclose(rebuild(coefficients, 23), series, atol=1e-12)
    np.testing.assert_allclose(rebuild(coefficients[:, 5:6], 3), np.repeat(coefficients[:, 5:6], 3, axis=1))


# What is drawn


@given(strategies.stars(), st.integers(1, 4), strategies.shifts(), strategies.angles_deg())
def test_the_drawing_moves_with_the_shape(polygon, harmonics, shift, turn):
    moved = affinity.translate(affinity.rotate(polygon, turn, origin=(0, 0)), *shift)
    there = affinity.translate(affinity.rotate(shape_of(polygon, harmonics=harmonics), turn, origin=(0, 0)), *shift)
    np.testing.assert_allclose(
        shapely.get_coordinates(shape_of(moved, harmonics=harmonics)), shapely.get_coordinates(there), atol=1e-6
    )


def test_the_drawing_does_not_depend_on_the_first_vertex():
    ring = shapes.L_RING
    smooth = shape_of(L_POLYGON, harmonics=6, points=4000)
    other = shape_of(shapely.Polygon(ring[2:] + ring[:2]), harmonics=6, points=4000)
    assert shapely.hausdorff_distance(smooth, other) < 1e-2
    assert smooth.area == pytest.approx(other.area, rel=1e-12)


HOLED = shapely.Polygon(shapely.box(0, 0, 30, 30).exterior, [shapely.box(10, 10, 20, 20).exterior])
ISLAND = shapely.box(50, 0, 60, 10)


def test_parts_and_holes_are_drawn_on_request():
    feature = shapely.MultiPolygon([ISLAND, HOLED])
    drawn = {
        (all_parts, holes): redraw_rings(
            batch_of(feature), RedrawOptions(harmonics=40, all_parts=all_parts, holes=holes)
        )
        for all_parts in (False, True)
        for holes in (False, True)
    }
    counts = {key: (value.batch.n_rings, int(value.batch.ring_is_hole.sum())) for key, value in drawn.items()}
    assert counts == {(False, False): (1, 0), (False, True): (2, 1), (True, False): (2, 0), (True, True): (3, 1)}
    areas = {key: value.area_m2[0] for key, value in drawn.items()}
    assert areas == pytest.approx(
        {(False, False): 900, (False, True): 800, (True, False): 1000, (True, True): 900}, rel=2e-3
    )
    assert all(abs(value.area_error[0]) < 2e-3 for value in drawn.values())
    geometry = polygons_of(drawn[True, True].batch)[0]
    assert (geometry.geom_type, geometry.is_valid) == ("MultiPolygon", True)
    assert geometry.area == pytest.approx(areas[True, True], rel=1e-12)


def test_features_without_rings_stay_without():
    redrawn = redraw_rings(batch_of(None, L_POLYGON, shapely.Polygon()), RedrawOptions())
    assert np.isnan(redrawn.area_m2).tolist() == [True, False, True]
    assert np.isnan(redrawn.area_error).tolist() == [True, False, True]
    assert [geometry is None for geometry in polygons_of(redrawn.batch)] == [True, False, True]
    nothing = redraw_rings(batch_of(None), RedrawOptions(all_parts=True, holes=True))
    assert (nothing.batch.n_rings, nothing.note.tolist()) == (0, [None])
    assert list(nothing.columns()) == ["redraw_area_m2", "redraw_area_error", "redraw_note"]


def test_crossings_are_noted():
    """A narrow spiral folds over itself when only its first harmonics are drawn."""
    path = [(0, 0), (100, 0), (100, 100), (0, 100), (0, 20), (80, 20), (80, 80), (20, 80)]
    spiral = shapely.LineString(path).buffer(3, cap_style="flat", join_style="mitre")
    redrawn = redraw_rings(batch_of(spiral, L_POLYGON), RedrawOptions(harmonics=4))
    assert redrawn.note.tolist() == [CROSSES, None]
    assert not polygons_of(redrawn.batch)[0].is_valid
    assert redraw_rings(batch_of(spiral), RedrawOptions(harmonics=50)).note[0] is None


def test_rings_that_cross_each_other_are_noted():
    near_corner = shapely.Polygon(shapely.box(0, 0, 30, 30).exterior, [shapely.box(0.1, 0.1, 3, 3).exterior])
    redrawn = redraw_rings(batch_of(near_corner), RedrawOptions(harmonics=2, holes=True))
    assert redrawn.note[0] == RINGS_CROSS


def test_an_outline_that_folds_to_a_line_is_noted():
    batch = batch_of(L_POLYGON)
    line = batch.moved(np.array([0.0, 1, 2, 1, 0, 0]), np.array([0.0, 0, 0, 0, 0, 0]), batch.origin)
    assert redraw_rings(line, RedrawOptions(harmonics=3)).note.tolist() == [FOLDED]


# Geometries of rings


@given(st.lists(strategies.polygons(), min_size=1, max_size=4))
def test_rings_become_the_polygons_they_came_from(polygons):
    array = np.array([*polygons, None], dtype=object)
    back = polygons_of(ring_batch(array))
    assert back[-1] is None
    for before, after in zip(polygons, back[:-1], strict=True):
        assert shapely.equals_exact(shapely.normalize(before), shapely.normalize(after), tolerance=1e-9)
        assert before.geom_type == after.geom_type


def test_parts_without_rings_are_left_out():
    batch = outlines(batch_of(shapely.MultiPolygon([ISLAND, HOLED]), ISLAND))
    assert [geometry.area for geometry in polygons_of(batch)] == [900, 100]


# Errors


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"harmonics": 0}, "harmonics = 0 cannot be drawn; give a number from 1 to 1024"),
        ({"harmonics": 1025}, "harmonics = 1025 cannot be drawn"),
        (
            {"harmonics": 8, "points": 17},
            "points = 17 are too few for 8 harmonics; give 18 or more, or fewer harmonics",
        ),
    ],
)
def test_options_that_cannot_be_used(options, message):
    with pytest.raises(OptionError, match=message):
        RedrawOptions(**options)
