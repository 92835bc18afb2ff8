"""The same numbers from libraries of other fields: OpenCV, scikit-image, shapely."""

from pathlib import Path

import cv2
import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from shapely import Polygon, affinity
from skimage.draw import polygon2mask
from skimage.measure import regionprops

from geoshape.formulas import axes, calipers, hulls, moments
from tests import naive, shapes, strategies
from tests.formulas.plane import angle_between, batch_of, central_of, row_of

DATA = Path(__file__).parents[1] / "data"
CHECKED = [shapes.TRIANGLE, shapes.QUAD, shapes.L_SHAPE, shapes.QUAD.mirrored, shapes.TRIANGLE.mirrored]


def contour(polygon):
    """The exterior as OpenCV wants it: float32, (n, 1, 2). Our coordinates are short enough to lose nothing."""
    points = np.array(polygon.exterior.coords)[:-1]
    as_single = points.astype(np.float32)
    assert (as_single == points).all()
    return as_single[:, None, :]


class TestOpenCv:
    @given(strategies.stars())
    @settings(max_examples=25)
    def test_raw_moments(self, polygon):
        """Contour moments, in double precision inside; their sign follows the ring's direction."""
        found = cv2.moments(contour(shapely.orient_polygons(polygon)))
        raw = moments.raw_moments(batch_of(polygon, local_origin=False))[0]
        reach = max(map(abs, polygon.bounds))
        for value, (p, q) in zip(raw, moments.ORDERS, strict=True):
            assert abs(value - found[f"m{p}{q}"]) <= 1e-10 * raw[0] * reach ** (p + q)

    @pytest.mark.parametrize("shape", CHECKED, ids=lambda shape: shape.name)
    def test_hu_moments(self, shape):
        found = cv2.HuMoments(cv2.moments(contour(shape.polygon))).ravel()
        row = row_of(shape.polygon)
        assert [row[f"hu_{i}"] for i in range(1, 8)] == pytest.approx(found.tolist(), rel=1e-9, abs=1e-18)

    @given(strategies.stars())
    @settings(max_examples=25)
    def test_hu_moments_of_stars(self, polygon):
        found = cv2.HuMoments(cv2.moments(contour(polygon))).ravel()
        row = row_of(polygon)
        third = max(row["hu_1"] ** 3, row["hu_3"], row["hu_4"])
        scale = [row["hu_1"], row["hu_1"] ** 2, third, third, third**2, row["hu_1"] * third, third**2]
        for i in range(7):
            assert abs(row[f"hu_{i + 1}"] - found[i]) <= 1e-9 * scale[i], i + 1

    @given(strategies.stars())
    @settings(max_examples=25)
    def test_smallest_circle(self, polygon):
        """In single precision, and OpenCV widens its circle a little."""
        _, radius = cv2.minEnclosingCircle(contour(polygon))
        circle = calipers.smallest_circle(hulls.convex_hulls(batch_of(polygon)))
        assert circle.radius[0] == pytest.approx(radius, rel=2e-5)

    @given(strategies.stars())
    @settings(max_examples=25)
    def test_smallest_rectangle(self, polygon):
        """Single precision throughout."""
        _, (width, height), _ = cv2.minAreaRect(contour(polygon))
        spans = calipers.calipers(hulls.convex_hulls(batch_of(polygon)))
        assert spans.rectangle_area[0] == pytest.approx(width * height, rel=1e-5)


class TestShapely:
    @given(strategies.polygons())
    @settings(max_examples=25)
    def test_circle_rectangle_hull(self, polygon):
        batch = batch_of(polygon)
        hull = hulls.convex_hulls(batch)
        # On the local origin: far from it shapely's rectangle loses digits.
        local = affinity.translate(polygon, *-batch.origin[0])
        assert hull.ring_signed_area[0] == pytest.approx(local.convex_hull.area, rel=1e-12)
        assert calipers.smallest_circle(hull).radius[0] == pytest.approx(
            shapely.minimum_bounding_radius(local), rel=1e-11
        )
        spans = calipers.calipers(hull)
        assert spans.rectangle_area[0] == pytest.approx(shapely.minimum_rotated_rectangle(local).area, rel=1e-8)

    @given(strategies.polygons())
    @settings(max_examples=25)
    def test_area_perimeter_centroid(self, polygon):
        row = row_of(polygon)
        assert row["area_m2"] == pytest.approx(polygon.area, rel=1e-12)
        assert row["perimeter_m"] == pytest.approx(polygon.length, rel=1e-12)
        batch = batch_of(polygon)
        centre = moments.centroids(moments.raw_moments(batch))[0] + batch.origin[0]
        assert centre == pytest.approx([polygon.centroid.x, polygon.centroid.y], abs=1e-9)


PIXELS_PER_METRE = 100
"""Pixels of the raster for scikit-image."""


def raster_properties(polygon, width=6.0):
    """Region properties of a fine raster whose row 0 is the north: x along columns, y against rows."""
    n = int(width * PIXELS_PER_METRE)
    points = np.array(polygon.exterior.coords)
    # A pixel is in when its centre is: pixel centres stand at half pixels.
    rows = (width - 0.5 - points[:, 1]) * PIXELS_PER_METRE - 0.5
    columns = (points[:, 0] + 0.5) * PIXELS_PER_METRE - 0.5
    mask = polygon2mask((n, n), np.column_stack((rows, columns)))
    return regionprops(mask.astype(np.uint8))[0]


class TestScikitImage:
    @pytest.mark.parametrize("shape", [shapes.TRIANGLE, shapes.QUAD, shapes.L_SHAPE], ids=lambda shape: shape.name)
    def test_moments_of_a_raster(self, shape):
        """The raster is right to about a pixel in 300, its second moments to some 1e-3."""
        found = raster_properties(shape.polygon)
        row = row_of(shape.polygon)
        assert row["area_m2"] == pytest.approx(found.area / PIXELS_PER_METRE**2, rel=1e-2)
        assert row["major_axis_m"] == pytest.approx(found.axis_major_length / PIXELS_PER_METRE, rel=5e-3)
        assert row["minor_axis_m"] == pytest.approx(found.axis_minor_length / PIXELS_PER_METRE, rel=5e-3)
        hu = found.moments_hu
        for i in (1, 2, 3, 4, 5, 6):
            assert row[f"hu_{i}"] == pytest.approx(hu[i - 1], rel=0.05, abs=1e-12), f"hu_{i}"

    @pytest.mark.parametrize("shape", shapes.CHIRAL, ids=lambda shape: shape.name)
    def test_hu_7_changes_its_sign(self, shape):
        """Moments there run over (row, column): with rows from north to south that is a turn of the map by a quarter.

        Rows down and columns right are a right-handed pair seen as (row, column), so x = row, y = column is the map
        turned, not mirrored; with row 0 in the south it is mirrored.
        """
        turned = raster_properties(shape.polygon).moments_hu[6]
        mirrored = raster_properties(affinity.scale(shape.polygon, yfact=-1, origin=(2.5, 2.5))).moments_hu[6]
        hu_7 = row_of(shape.polygon)["hu_7"]
        assert mirrored == pytest.approx(-turned, rel=0.05)
        assert turned == pytest.approx(hu_7, rel=0.1)

    @pytest.mark.parametrize(("shape", "azimuth", "_ratio"), shapes.AXES[1:], ids=lambda value: "")
    def test_orientation(self, shape, azimuth, _ratio):
        """Its orientation t turns from the row axis (south) to the columns: east is sin t, north -cos t."""
        found = np.degrees(raster_properties(shape.polygon).orientation)
        assert angle_between(-found, azimuth) < 0.3
        measured = axes.principal_axes(central_of(shape.polygon)).azimuth_deg[0]
        assert angle_between(measured, azimuth) < 1e-6

    def test_feret_diameter(self):
        found = raster_properties(shapes.QUAD.polygon).feret_diameter_max / PIXELS_PER_METRE
        corners = naive.hull([[list(Polygon(shapes.QUAD.parts[0][0]).exterior.coords)[:-1]]])
        assert found == pytest.approx(naive.feret_max(corners), rel=5e-3)
        assert row_of(shapes.QUAD.polygon)["feret_max_m"] == pytest.approx(found, rel=5e-3)


def winding_polygons(seed=3):
    """Simple polygons with deep pockets, and parts that touch at corners."""
    random = np.random.default_rng(seed)
    for _ in range(40):
        way = random.normal(size=(random.integers(3, 40), 2)).cumsum(axis=0)
        yield shapely.LineString(way).buffer(random.uniform(0.05, 0.5), quad_segs=3)
        turn = np.linspace(0.3, random.uniform(1, 5), random.integers(30, 200))
        spiral = turn * np.exp(2j * np.pi * turn)
        inner = (spiral * (1 - 0.1 / turn))[::-1]
        ring = np.concatenate((spiral, inner))
        yield Polygon(np.column_stack((ring.real, ring.imag)))
    for _ in range(150):
        points = random.integers(0, 6, size=(random.integers(5, 30), 2))
        triangles = shapely.get_parts(shapely.delaunay_triangles(shapely.MultiPoint(points)))
        chosen = shapely.union_all(triangles[random.random(len(triangles)) < 0.6])
        if not chosen.is_empty:
            yield affinity.rotate(chosen, random.integers(0, 4) * 22.5)


REAL_LAYERS = ["world_geodesic_area/world.gpkg", "wilderness_co_ut/coutwildrnp.shp", "mexico_states/mexicojoin.shp"]


def assert_hulls_agree(polygons):
    batch = batch_of(*polygons)
    hull = hulls.convex_hulls(batch)
    local = [affinity.translate(p, *-origin) for p, origin in zip(polygons, batch.origin, strict=True)]
    expected = shapely.convex_hull(np.array(local, dtype=object))
    assert hull.sum_ring_values(hull.ring_signed_area) == pytest.approx(shapely.area(expected), rel=1e-12)
    assert calipers.smallest_circle(hull).radius == pytest.approx(shapely.minimum_bounding_radius(expected), rel=1e-11)
    spans = calipers.calipers(hull)
    assert spans.rectangle_area == pytest.approx(shapely.area(shapely.oriented_envelope(expected)), rel=1e-10)
    for at, polygon in enumerate(expected):
        corners = np.array(polygon.exterior.coords)
        between = corners[:, None] - corners[None]
        assert spans.longest[at] == pytest.approx(np.hypot(between[..., 0], between[..., 1]).max(), rel=1e-13)


def test_hulls_of_winding_and_touching_polygons():
    polygons = list(winding_polygons())
    assert shapely.is_valid(polygons).all()
    assert_hulls_agree(polygons)


@pytest.mark.parametrize("layer", REAL_LAYERS)
def test_hulls_of_real_polygons(layer):
    geopandas = pytest.importorskip("geopandas")
    polygons = geopandas.read_file(DATA / layer).geometry.dropna().values
    assert_hulls_agree([p if p.is_valid else shapely.make_valid(p, method="structure") for p in polygons])
