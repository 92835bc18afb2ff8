"""Edges straight in the layer's coordinates: the numbers of an outline with a thousand times the vertices."""

from itertools import pairwise

import numpy as np
import pytest
import shapely
from hypothesis import example, given
from hypothesis import strategies as st
from shapely import Polygon, box

from tests.ground.layings import area_and_perimeter, area_of, perimeter_of, place_all, placed_on

PROMISE = 1e-6


def thousandfold(shape):
    """Put 999 vertices on every edge."""
    share = np.arange(1000)[:, None] / 1000.0
    points = shapely.get_coordinates(shape)
    pieces = [start + share * (end - start) for start, end in pairwise(points)]
    return Polygon(np.concatenate(pieces))


def held(shape, crs, name="centred"):
    got = placed_on(name, shape, crs)
    dense = placed_on(name, thousandfold(shape), crs, edges="plane")
    np.testing.assert_allclose(area_of(got), area_of(dense), rtol=PROMISE)
    np.testing.assert_allclose(perimeter_of(got), perimeter_of(dense), rtol=PROMISE)


COUNTY = box(-104.05, 48.0, -102.9, 49.0)


def test_a_county_along_the_49th_parallel():
    held(COUNTY, 4326)
    # With its four vertices alone its northern edge cuts a strip off: this is what is at stake.
    four = area_and_perimeter(COUNTY, edges="plane")[0]
    assert abs(four / area_and_perimeter(COUNTY)[0] - 1.0) > 1e-5
    assert placed_on("centred", COUNTY).batch.n_vertices < 250


@pytest.mark.parametrize("name", ["centred", "layer", "EPSG:3035", "EPSG:8857"])
def test_a_box_of_twenty_degrees(name):
    held(box(0, 40, 20, 60), 4326, name)


@pytest.mark.parametrize("crs", [3857, 32632, 2154, 3031, 3035, 8857, 27572, 2056])
def test_a_projected_layer_with_edges_of_500_km(crs):
    x, y = {3031: (0.0, 0.0), 3857: (1.0e6, 6.0e6), 8857: (1.0e6, 5.5e6)}.get(crs, (5.0e5, 2.3e6))
    held(Polygon([(x, y), (x + 5.0e5, y), (x + 5.0e5, y + 5.0e5), (x, y + 5.0e5)]), crs)


coordinate = st.floats(0.05, 1.0)


@given(
    lon=st.floats(-180, 180), lat=st.floats(-89, 89), size=st.floats(-3, 1.3),
    radii=st.lists(coordinate, min_size=3, max_size=12),
)  # fmt: skip
@example(lon=0.0, lat=89.0, size=0.0, radii=[1.0] * 12)
@example(lon=0.0, lat=0.0, size=1.3, radii=[1.0, 0.1, 1.0])
def test_any_star_holds_the_promise(lon, lat, size, radii):
    angle = 2.0 * np.pi * np.arange(len(radii)) / len(radii)
    radius = 10.0**size * np.array(radii)
    star = Polygon(
        np.column_stack((lon + radius * np.cos(angle), np.clip(lat + 0.7 * radius * np.sin(angle), -90.0, 90.0)))
    )
    if star.area / star.length**2 < 1e-3:
        return
    held(star, 4326)


@pytest.mark.parametrize("latitude", [0.0, 49.0, 80.0])
def test_parcels_and_finely_drawn_lakes_pay_nothing(latitude):
    angle = np.linspace(0, 2 * np.pi, 400, endpoint=False)
    lake = Polygon(np.column_stack((10 + 0.05 * np.cos(angle), latitude + 0.05 * np.sin(angle))))
    parcels = [box(10 + x, latitude, 10.0003 + x, latitude + 0.0002) for x in np.arange(50) / 100]
    placed = place_all("centred", [lake, *parcels])
    assert placed.batch.n_vertices == 400 + 4 * 50


def test_one_millimetre_is_measured_as_well_as_its_coordinates_are_stored():
    # Coordinates of 5 500 000 m hold 1e-9 m; degrees hold 7e-15 of themselves, 1e-9 m as well.
    side = 1e-3
    square = box(500_000, 5_500_000, 500_000 + side, 5_500_000 + side)
    area, _ = area_and_perimeter(square, 32632)
    assert area == pytest.approx(side**2 / 0.9996**2, rel=1e-5)
    degree = side / 111_000.0
    area, _ = area_and_perimeter(box(10, 50, 10 + degree, 50 + degree))
    wide = area_and_perimeter(box(10, 50, 10 + 1e5 * degree, 50 + degree))[0] / 1e5
    assert area == pytest.approx(wide, rel=1e-5)
