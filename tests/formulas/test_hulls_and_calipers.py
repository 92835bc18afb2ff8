"""Hulls, callipers, smallest rectangle and circle against trying everything."""

from math import sqrt

import numpy as np
import pytest
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st
from shapely import MultiPoint, MultiPolygon, Polygon, affinity, box

from geoshape.formulas import calipers, hulls
from tests import naive, shapes, strategies
from tests.formulas.plane import angle_between, batch_of, row_of

TOUCHING = MultiPolygon([Polygon([(0, 10), (-5, 0), (-1, 0)]), Polygon([(0, 10), (1, 0), (5, 0)])])
"""Two parts that share a corner of their hull."""


def row_of_squares(n, angle, gap=1.0):
    squares = MultiPolygon([box(i * (1 + gap), 0, i * (1 + gap) + 1, 1) for i in range(n)])
    return affinity.rotate(squares, angle, origin=(0, 0))


def measured(polygon):
    batch = batch_of(polygon)
    hull = hulls.convex_hulls(batch)
    spans, circle = calipers.calipers(hull), calipers.smallest_circle(hull)
    area = hull.sum_ring_values(hull.ring_signed_area)[0]
    centre = circle.x[0] + batch.origin[0, 0], circle.y[0] + batch.origin[0, 1]
    return hull, area, spans, (*centre, circle.radius[0])


def assert_all(polygon, relative=1e-9):
    corners = naive.hull(naive.parts_of(polygon))
    _, area, spans, (x, y, radius) = measured(polygon)
    longest = naive.feret_max(corners)
    assert area == pytest.approx(float(naive.hull_area(corners)), rel=relative)
    assert spans.longest[0] == pytest.approx(longest, rel=1e-12)
    assert spans.shortest[0] == pytest.approx(naive.feret_min(corners), rel=relative)
    assert spans.rectangle_area[0] == pytest.approx(naive.smallest_rectangle_area(corners), rel=relative)
    azimuths = naive.feret_max_azimuths(corners, 1e-12)
    assert min(angle_between(spans.longest_azimuth_deg[0], azimuth) for azimuth in azimuths) < 1e-6
    expected_x, expected_y, expected = naive.smallest_circle(corners)
    assert radius == pytest.approx(expected, rel=1e-11)
    # The centre of a circle through two close points is less certain than its radius.
    assert abs(complex(x - expected_x, y - expected_y)) <= 1e-6 * radius


@given(strategies.polygons())
@example(TOUCHING)
@example(row_of_squares(10, 30))
@settings(max_examples=40)
def test_polygons(polygon):
    assert_all(polygon)


@given(strategies.convex())
@settings(max_examples=30)
def test_convex_polygons(polygon):
    assert_all(polygon)


@given(strategies.thin())
@settings(max_examples=30)
def test_thin_polygons(polygon):
    assert_all(polygon)


@given(strategies.thin(flatness=(1e-5, 1e-7)))
@settings(max_examples=30)
def test_slivers(polygon):
    assert_all(polygon, relative=1e-7)


@given(strategies.lattice())
@settings(max_examples=35)
def test_squares_of_a_grid(polygon):
    assert_all(polygon)


@given(strategies.lattice(), strategies.angles_deg())
@settings(max_examples=35)
def test_squares_of_a_turned_grid(polygon, angle):
    """Turned, the points on a side are no longer exactly on one line."""
    assert_all(affinity.rotate(polygon, angle, origin=(0, 0)))


@given(st.integers(2, 40), st.integers(0, 359), st.sampled_from((1.0, 0.1, 7.3)))
@settings(max_examples=60)
def test_squares_in_a_turned_row(n, angle, gap):
    polygon = row_of_squares(n, angle, gap)
    length = n + (n - 1) * gap
    _, area, spans, (_, _, radius) = measured(polygon)
    assert area == pytest.approx(length, rel=1e-12)
    assert spans.longest[0] == pytest.approx(sqrt(length**2 + 1), rel=1e-12)
    assert spans.shortest[0] == pytest.approx(1, rel=1e-11)
    assert spans.rectangle_area[0] == pytest.approx(length, rel=1e-11)
    assert radius == pytest.approx(sqrt(length**2 + 1) / 2, rel=1e-12)


@given(strategies.polygons(), strategies.angles_deg(), st.integers(1, 9))
@settings(max_examples=40)
def test_vertices_on_the_sides_of_the_hull_do_not_matter(polygon, angle, n):
    hull = affinity.rotate(polygon.convex_hull, angle, origin=(0, 0))
    corners = list(hull.exterior.coords)[:-1]
    finer = [
        (a[0] + (b[0] - a[0]) * i / n, a[1] + (b[1] - a[1]) * i / n) for a, b in naive.edges(corners) for i in range(n)
    ]
    turned = finer[n // 2 :] + finer[: n // 2]
    _, area, spans, circle = measured(hull)
    _, finer_area, finer_spans, finer_circle = measured(Polygon(turned))
    assert finer_area == pytest.approx(area, rel=1e-11)
    assert finer_circle[2] == pytest.approx(circle[2], rel=1e-11)
    for name in ("longest", "shortest", "rectangle_area"):
        assert getattr(finer_spans, name) == pytest.approx(getattr(spans, name), rel=1e-10), name


@pytest.mark.parametrize("distance", [1e-2, 1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-9])
@pytest.mark.parametrize("angle", [0, 33, 90, 211])
def test_circle_through_two_close_points_and_a_far_one(distance, angle):
    ring = shapes.turned([(0, -distance / 2), (0, distance / 2), (-1, 0)], angle)
    _, _, _, (_, _, radius) = measured(Polygon(ring))
    # Circumradius a b c / (4 A), with the angles at the base below 90 degrees.
    side = sqrt(1 + distance**2 / 4)
    assert radius == pytest.approx(side**2 / 2, rel=1e-11)


@pytest.mark.parametrize("n", [3, 4, 5, 7, 16, 101, 1000])
def test_circle_of_regular_polygons(n):
    _, _, _, (x, y, radius) = measured(affinity.translate(Polygon(shapes.regular(n, 250.0)), 1e6, -3e6))
    assert radius == pytest.approx(250, rel=1e-9)
    assert (x, y) == pytest.approx((1e6, -3e6), abs=1e-6)


@given(st.lists(st.tuples(st.floats(-1, 1), st.floats(-1, 1)), min_size=3, max_size=9, unique=True))
@settings(max_examples=60)
def test_circle_of_any_points(points):
    """Points of any closeness: every hull gets a circle, it holds all, and is no larger than it need be."""
    hull = MultiPolygon([Polygon([p, (p[0] + 1e-9, p[1]), (p[0], p[1] + 1e-9)]) for p in points]).convex_hull
    _, _, _, (x, y, radius) = measured(hull)
    corners = np.array(hull.exterior.coords)
    assert np.isfinite(radius)
    assert np.hypot(corners[:, 0] - x, corners[:, 1] - y).max() <= radius * (1 + 1e-9)
    assert radius == pytest.approx(naive.smallest_circle(naive.hull(naive.parts_of(hull)))[2], rel=1e-9)


def test_many_features_at_once():
    polygons = [
        shapes.L_SHAPE.polygon,
        None,
        TOUCHING,
        shapes.TWO_SQUARES.polygon,
        Polygon(shapes.koch(3)),
        None,
        row_of_squares(5, 17),
        shapes.QUAD.polygon,
    ]
    batch = batch_of(*polygons)
    hull = hulls.convex_hulls(batch)
    spans, circles = calipers.calipers(hull), calipers.smallest_circle(hull)
    assert hull.n_features == len(polygons)
    assert np.bincount(hull.ring_feature, minlength=8).tolist() == [1, 0, 1, 1, 1, 0, 1, 1]
    for at, polygon in enumerate(polygons):
        got = [spans.longest[at], spans.shortest[at], spans.rectangle_area[at], circles.radius[at]]
        if polygon is None:
            assert np.isnan(got).all()
            assert np.isnan(spans.longest_azimuth_deg[at])
            continue
        _, _, alone, circle = measured(polygon)
        expected = [alone.longest[0], alone.shortest[0], alone.rectangle_area[0], circle[2]]
        assert got == pytest.approx(expected, rel=1e-12)


def test_a_long_batch_keeps_its_angles():
    """The last of many hulls is measured as well as the first."""
    polygon = shapes.QUAD.polygon
    hull = hulls.convex_hulls(batch_of(*[polygon] * 20_000))
    spans = calipers.calipers(hull)
    for values in (spans.longest, spans.shortest, spans.rectangle_area, spans.longest_azimuth_deg):
        assert np.ptp(values) <= 1e-12 * values[0]


def test_equally_long_spans_give_the_smallest_azimuth():
    _, _, spans, _ = measured(affinity.rotate(Polygon(shapes.rectangle(1, 1)), 10, origin=(0, 0)))
    # Diagonals at 45 and 135 degrees, turned by 10 counter-clockwise.
    assert spans.longest_azimuth_deg[0] == pytest.approx(35, abs=1e-9)


def test_holes_do_not_matter():
    holed, whole = shapes.RING.polygon, Polygon(shapes.rectangle(3, 3))
    assert measured(holed)[1] == measured(whole)[1] == 9


def test_no_features():
    for batch in (batch_of(), batch_of(None, None)):
        hull = hulls.convex_hulls(batch)
        assert hull.n_rings == 0
        spans, circles = calipers.calipers(hull), calipers.smallest_circle(hull)
        for value in (spans.longest, spans.shortest, spans.longest_azimuth_deg, spans.rectangle_area, circles.radius):
            assert value.shape == (batch.n_features,)
            assert np.isnan(value).all()


@given(
    st.lists(st.tuples(st.integers(-1000, 1000), st.integers(-1000, 1000)), min_size=3, max_size=8, unique=True),
    st.sampled_from((1e-3, 1e-4, 1e-5, 1e-6)),
    strategies.angles_deg(),
)
@settings(max_examples=60)
def test_circle_of_thin_hulls(points, flatness, angle):
    ring = shapes.turned([(x / 2.0, y * flatness / 2.0) for x, y in points], angle)
    hull = MultiPoint(ring).convex_hull
    assume(hull.geom_type == "Polygon")
    radius = measured(hull)[3][2]
    assert radius == pytest.approx(naive.smallest_circle(naive.hull(naive.parts_of(hull)))[2], rel=1e-11)


def wedges(flatness, n=500, seed=20):
    """Slivers 1 long: triangles with their tip anywhere over the base, and strips with ends of different width."""
    random = np.random.default_rng(seed)
    for _ in range(n):
        low, high, tip = flatness * random.uniform(-1, 1, size=3)
        base = [(0, -flatness), (0, flatness)]
        end = [(1, tip)] if random.random() < 0.5 else [(1, max(low, high)), (1, min(low, high))]
        yield Polygon(shapes.turned([*base, *end], random.uniform(0, 360)))


@pytest.mark.parametrize("flatness", [1e-2, 1e-3, 1e-4, 1e-5, 1e-6])
def test_circles_of_slivers(flatness):
    """As between the edges of two layers: a hundred metres long and a centimetre wide."""
    polygons = list(wedges(flatness))
    batch = batch_of(*polygons)
    radius = calipers.smallest_circle(hulls.convex_hulls(batch)).radius
    assert np.isfinite(radius).all()
    for at in range(0, len(polygons), 10):
        corners = naive.hull(naive.parts_of(polygons[at]))
        assert radius[at] == pytest.approx(naive.smallest_circle(corners)[2], rel=1e-11)
        assert row_of(polygons[at])["reock"] == pytest.approx(
            polygons[at].area / (np.pi * naive.smallest_circle(corners)[2] ** 2), rel=1e-9
        )


def thin_hulls(n, seed=20):
    """Hulls of a few points in a narrow band, and slivers."""
    random = np.random.default_rng(seed)
    points = random.normal(size=(n, 6, 2))
    points[..., 1] *= 10.0 ** random.uniform(-7, 0, size=(n, 1))
    angle = random.uniform(0, 2 * np.pi, size=(n, 1))
    x = points[..., 0] * np.cos(angle) - points[..., 1] * np.sin(angle)
    y = points[..., 0] * np.sin(angle) + points[..., 1] * np.cos(angle)
    bands = [MultiPoint(np.column_stack(pair)).convex_hull for pair in zip(x, y, strict=True)]
    return bands + [wedge for power in range(2, 7) for wedge in wedges(10.0**-power, n // 5)]


def test_circles_of_many_thin_hulls_hold_all_and_are_held_by_their_points():
    polygons = thin_hulls(2000)
    batch = batch_of(*polygons)
    hull = hulls.convex_hulls(batch)
    circles = calipers.smallest_circle(hull)
    assert np.isfinite(circles.radius).all()
    reach = np.hypot(hull.x - circles.x[hull.vertex_feature], hull.y - circles.y[hull.vertex_feature])
    farthest = np.maximum.reduceat(reach, hull.ring_start[:-1])
    assert (farthest <= circles.radius * (1 + 1e-11)).all()
    # A circle is smallest when its centre lies in the hull of the points on it: on their diameter or in an acute
    # triangle of them. Half the longest span is a lower bound, its 2 / sqrt(3) an upper one (Jung 1901).
    longest = calipers.calipers(hull).longest
    assert (circles.radius >= longest / 2 * (1 - 1e-12)).all()
    assert (circles.radius <= longest / sqrt(3) * (1 + 1e-12)).all()
