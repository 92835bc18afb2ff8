"""What is drawn of a shape is what its columns say."""

import geopandas as gpd
import numpy as np
import pyarrow as pa
import pyproj
import pytest
import shapely

from geoshape.columns import amplitude_name
from geoshape.formulas.arclength import resample
from geoshape.options import MeasureOptions
from geoshape.report import ReportData, ReportOptions
from geoshape.report.data import View
from geoshape.report.placing import place_close_ups, place_on_map
from geoshape.rings import outlines
from tests.report import made


def view_of(geometries, crs=None, **options):
    """A view of geometries without columns."""
    wkb = np.asarray(shapely.to_wkb(np.asarray(geometries, dtype=object)), dtype=object)
    data = ReportData(pa.table({"a": range(len(wkb))}), wkb, crs, {"options": options}, ())
    return View(data, ReportOptions())


def rows_of(view):
    return np.arange(view.data.n_rows)


GROUNDS = [
    {},
    {"ground": "layer"},
    {"ground": "EPSG:3035"},
    {"ground": "plane"},
    {"spectrum": "exact"},
    {"holes": "fill"},
    {"samples": 128},
]


@pytest.fixture(scope="module", params=GROUNDS, ids=str)
def measured(request):
    """Lakes, measured in different ways, with their close-ups."""
    options = MeasureOptions(**request.param)
    lakes = gpd.read_file(made.FOLDER / "lakes.gpkg").head(12)
    data = made.report_data(lakes, options)
    view = View(data, ReportOptions())
    return view, place_close_ups(view, rows_of(view))


def test_areas_and_lengths_are_those_of_the_columns(measured):
    view, shapes = measured
    area = shapes.outline.sum_ring_values(shapes.outline.ring_signed_area)
    np.testing.assert_allclose(area, view.bare("area_m2"), rtol=1e-9)
    np.testing.assert_allclose(np.pi * shapes.circle[:, 2] ** 2 * view.bare("reock"), area, rtol=1e-9)
    hull = shapes.hull.sum_ring_values(shapes.hull.ring_signed_area)
    np.testing.assert_allclose(hull * view.bare("convexity"), area, rtol=1e-9)
    rectangle = shapes.rectangle.sum_ring_values(shapes.rectangle.ring_signed_area)
    np.testing.assert_allclose(rectangle * view.bare("rectangularity"), area, rtol=1e-9)


def test_axes_are_those_of_the_columns_with_north_up(measured):
    view, shapes = measured
    np.testing.assert_allclose(2.0 * shapes.ellipse[:, 2], view.bare("major_axis_m"), rtol=1e-9)
    np.testing.assert_allclose(2.0 * shapes.ellipse[:, 3], view.bare("minor_axis_m"), rtol=1e-9)
    turn = (shapes.ellipse[:, 4] - view.bare("axis_azimuth_deg") + 90.0) % 180.0 - 90.0
    np.testing.assert_allclose(turn, 0.0, atol=1e-6)
    # The drawing is laid about the centroid.
    assert np.abs(shapes.ellipse[:, :2] / view.bare("major_axis_m")[:, None]).max() < 1e-9


def test_spectra_are_those_of_the_columns(measured):
    view, shapes = measured
    middle = shapes.coefficients.shape[1] // 2
    size = np.abs(shapes.coefficients[:, middle + 1])
    for k in (2, 5, -1, -4):
        expected = view.bare(amplitude_name(k))
        # An outline turned to north keeps its amplitudes but for rounding.
        np.testing.assert_allclose(np.abs(shapes.coefficients[:, middle + k]) / size, expected, rtol=1e-6, atol=1e-9)


def test_what_harmonics_leave_out_is_what_the_outline_shows(measured):
    view, shapes = measured
    is_exact = view.measure_options.spectrum == "exact"
    # The closed form is of the whole outline: many points stand in for it.
    n = 8192 if is_exact else view.measure_options.samples
    points = resample(outlines(shapes.outline), n)
    orders = np.arange(shapes.coefficients.shape[1]) - shapes.coefficients.shape[1] // 2
    turns = np.exp(2j * np.pi * orders[:, None] * np.arange(n) / n)
    left = (np.abs(points - shapes.coefficients @ turns) ** 2).mean(axis=1)
    np.testing.assert_allclose(shapes.beyond, left, rtol=1e-3 if is_exact else 1e-6)


def test_points_lie_on_the_outline(measured):
    _, shapes = measured
    for shape in (0, 5):
        rings = shapes.outline.ring_feature == shape
        span = np.repeat(rings, shapes.outline.ring_size)
        corners = np.column_stack((shapes.outline.x[span], shapes.outline.y[span]))
        size = shapes.outline.ring_size[rings]
        lines = [shapely.LinearRing(part) for part in np.split(corners, np.cumsum(size)[:-1])]
        points = shapely.points(shapes.points[shape].real, shapes.points[shape].imag)
        assert shapely.distance(points, shapely.multilinestrings(lines)).max() < 1e-6


def test_rows_without_a_shape_have_nothing_to_draw():
    bow_tie = shapely.Polygon([(0, 0), (2, 2), (2, 0), (0, 2)])
    view = view_of([shapely.box(0, 0, 2, 2), None, shapely.Point(1, 1), shapely.Polygon(), bow_tie])
    shapes = place_close_ups(view, rows_of(view))
    assert np.unique(shapes.outline.ring_feature).tolist() == [0, 4]
    assert np.isnan(shapes.circle[1:4]).all()
    assert np.isnan(shapes.points[1:4]).all()
    assert np.unique(place_on_map(view, rows_of(view)).outline.ring_feature).tolist() == [0, 4]


def test_nothing_at_all():
    view = view_of([None])
    assert place_close_ups(view, rows_of(view)).outline.n_rings == 0
    assert place_on_map(view, rows_of(view)).outline.n_rings == 0


def corners_of(plane):
    owner = plane.outline.vertex_feature
    return np.column_stack((plane.outline.x, plane.outline.y)) + plane.outline.origin[owner]


def test_map_keeps_distances_and_areas_about_its_middle():
    # Two small boxes a degree apart; distances by geodesics on the ellipsoid.
    boxes = [shapely.box(10.0, 50.0, 10.001, 50.001), shapely.box(11.0, 50.0, 11.001, 50.001)]
    view = view_of(boxes, "EPSG:4326")
    plane = place_on_map(view, rows_of(view))
    centres = plane.outline.planar_centroid + plane.outline.origin
    _, _, expected = pyproj.Geod(ellps="WGS84").inv(10.0005, 50.0005, 11.0005, 50.0005)
    np.testing.assert_allclose(np.hypot(*(centres[1] - centres[0])), expected, rtol=1e-4)
    area = plane.outline.sum_ring_values(plane.outline.ring_signed_area)
    geod_area = abs(pyproj.Geod(ellps="WGS84").geometry_area_perimeter(boxes[0])[0])
    np.testing.assert_allclose(area, geod_area, rtol=1e-4)
    assert plane.unit == "m"
    assert plane.is_north_up
    assert "50.00\u00b0 N, 10.50\u00b0 E" in plane.label


def test_map_is_small_across_the_antimeridian():
    view = view_of([shapely.box(179.0, -17.0, 179.5, -16.0), shapely.box(-179.9, -17.0, -179.0, -16.0)], "EPSG:4326")
    assert np.ptp(corners_of(place_on_map(view, rows_of(view)))[:, 0]) < 250_000


def test_map_of_the_world_is_one_piece_of_equal_areas():
    boxes = [shapely.box(lon, -60, lon + 20, 60) for lon in range(-180, 180, 20)]
    view = view_of(boxes, "EPSG:4326")
    plane = place_on_map(view, rows_of(view))
    assert plane.label == "Equal Earth"
    area = plane.outline.sum_ring_values(plane.outline.ring_signed_area)
    np.testing.assert_allclose(area, area[0], rtol=1e-3)


@pytest.mark.parametrize("crs", [None, 'LOCAL_CS["grid",UNIT["metre",1]]'])
def test_coordinates_that_are_nowhere_stay_as_they_are(crs):
    view = view_of([shapely.box(5.0, 6.0, 8.0, 10.0)], crs)
    plane = place_on_map(view, rows_of(view))
    assert corners_of(plane).max(axis=0).tolist() == [8.0, 10.0]
    assert not plane.is_north_up
    assert plane.unit == ("units" if crs is None else "m")
    shapes = place_close_ups(view, rows_of(view))
    assert shapes.outline.sum_ring_values(shapes.outline.ring_signed_area).tolist() == [12.0]


def test_assumed_crs_counts():
    view = view_of([shapely.box(10.0, 50.0, 10.1, 50.1)], None, assume_crs="EPSG:4326")
    assert place_on_map(view, rows_of(view)).is_north_up


def test_a_crs_that_cannot_be_read_is_none():
    view = view_of([shapely.box(0, 0, 1, 1)], "nonsense")
    assert place_on_map(view, rows_of(view)).unit == "units"


def test_a_ground_that_cannot_be_laid_gives_way_to_the_coordinates():
    view = view_of([shapely.box(0, 0, 2, 2)], 'LOCAL_CS["grid",UNIT["metre",1]]', ground="centred")
    shapes = place_close_ups(view, rows_of(view))
    np.testing.assert_allclose(shapes.circle[0], [0.0, 0.0, np.sqrt(2.0)], atol=1e-12)


def test_collections_show_their_polygons():
    collection = shapely.GeometryCollection([shapely.Point(9, 9), shapely.box(0, 0, 2, 2)])
    view = view_of([collection, shapely.GeometryCollection([shapely.Point(0, 0)])])
    plane = place_on_map(view, rows_of(view))
    assert plane.outline.sum_ring_values(plane.outline.ring_signed_area).tolist() == [4.0, 0.0]
