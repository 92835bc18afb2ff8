"""The way back from planes, against PROJ, the way forth, and by hand."""

import numpy as np
import pyproj
import pytest
import shapely

from geoshape.geometry import ring_batch
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.inverse import WayBack, unproject
from geoshape.ground.place import open_ground
from geoshape.ground.plane import Centres, Ellipsoid, project
from geoshape.options import MeasureOptions

WGS84 = Ellipsoid(6_378_137.0, 0.006_694_379_990_141_316)


@pytest.mark.parametrize(
    "centre", [(15.0, 61.5), (-170.0, -33.0), (0.0, 0.0), (100.0, 89.9), (20.0, 90.0), (7.0, -90.0)]
)
def test_agrees_with_proj(centre):
    rng = np.random.default_rng(1)
    x, y = rng.uniform(-2e6, 2e6, (2, 500))
    owner = np.zeros(500, dtype=np.int64)
    longitude, latitude = unproject(x, y, owner, np.array([centre]), WGS84)
    projection = pyproj.Proj(f"+proj=laea +lon_0={centre[0]} +lat_0={centre[1]} +ellps=WGS84")
    expected_longitude, expected_latitude = projection(x, y, inverse=True)
    # PROJ's own series for the latitude is good to a tenth of a millimetre, 1e-9 degrees.
    np.testing.assert_allclose(latitude, expected_latitude, atol=5e-9)
    turn = (longitude - expected_longitude + 180.0) % 360.0 - 180.0
    np.testing.assert_allclose(turn * np.cos(np.radians(latitude)), 0.0, atol=5e-9)


@pytest.mark.parametrize("centre", [(15.0, 61.5), (179.9, -5.0), (0.0, 90.0)])
def test_goes_back_the_way_it_came(centre):
    rng = np.random.default_rng(2)
    x, y = rng.uniform(-1e5, 1e5, (2, 500))
    owner = np.zeros(500, dtype=np.int64)
    middle = np.array([centre])
    points = unproject(x, y, owner, middle, WGS84)
    again = project(points, middle, owner, Centres.at(middle[:, 1], WGS84), WGS84)
    np.testing.assert_allclose(again, (x, y), atol=1e-8)


def test_beyond_the_plane_is_nan():
    longitude, _ = unproject(np.array([2e7]), np.zeros(1), np.zeros(1, dtype=np.int64), np.zeros((1, 2)), WGS84)
    assert np.isnan(longitude[0])


@pytest.mark.parametrize("ground", ["centred", "layer", "plane"])
@pytest.mark.parametrize("crs", ["EPSG:32633", "EPSG:2263", "EPSG:4326", "EPSG:4807", "EPSG:3006", "EPSG:27572"])
def test_vertices_come_back_to_the_layer(crs, ground):
    """EPSG:4807 and EPSG:27572 count from Paris, in grads; EPSG:2263 in US survey feet."""
    own = pyproj.CRS(crs)
    area = own.area_of_use
    to_own = pyproj.Transformer.from_crs("EPSG:4326", own, always_xy=True)
    middle = np.array(to_own.transform((area.west + area.east) / 2, (area.south + area.north) / 2))
    width = 0.01 if own.is_geographic else 500.0
    corners = middle + width * np.array([(0, 0), (3, 0), (3, 1), (1, 1), (1, 2), (0, 2)])
    plan = plan_ground(own, (*corners.min(axis=0), *corners.max(axis=0)), MeasureOptions(ground=ground, edges="plane"))
    laid = open_ground(plan)
    batch = ring_batch(laid.in_degrees(np.array([shapely.Polygon(corners)], dtype=object)))
    placed = laid.place(batch, np.zeros(1, dtype=np.int64))
    x, y = WayBack(plan).coordinates(placed.batch, placed)
    np.testing.assert_allclose(np.column_stack((x, y)), corners, atol=1e-8 if own.is_geographic else 5e-4)
