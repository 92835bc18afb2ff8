"""Real outlines at the antimeridian and round the pole, against geodesic areas (see SOURCE.txt beside the layer)."""

from pathlib import Path

import geopandas as gpd
import numpy as np
import pyproj
import pytest
import shapely

from tests.ground.layings import area_and_perimeter, placed_on

WORLD = Path(__file__).parents[1] / "data" / "world_geodesic_area" / "world.gpkg"
GEOD = pyproj.Geod(ellps="WGS84")


@pytest.fixture(scope="module")
def countries():
    world = gpd.read_file(WORLD)
    return dict(zip(world.name_long, world.geometry, strict=True))


def geodesic_area(shape):
    """Geodesics between the vertices of an outline that is straight in longitude and latitude: 0.02 degrees apart."""
    parts = shapely.get_parts(shapely.segmentize(shape, 0.02))
    return sum(GEOD.geometry_area_perimeter(shapely.geometry.polygon.orient(part))[0] for part in parts)


@pytest.mark.parametrize(("name", "tolerance"), [("Fiji", 5e-6), ("Russian Federation", 1e-6), ("Canada", 1e-6)])
def test_countries_at_the_antimeridian(countries, name, tolerance):
    # Fiji is stored with a gap of a metre at 180 degrees, 3e-6 of its area, which is closed here.
    area, _ = area_and_perimeter(countries[name])
    assert area == pytest.approx(geodesic_area(countries[name]), rel=tolerance)


def test_fiji_is_joined(countries):
    parts = shapely.get_parts(countries["Fiji"])
    assert placed_on("centred", countries["Fiji"]).batch.n_parts == len(parts) - 1


def test_antarctica_is_its_shore(countries):
    parts = shapely.get_parts(countries["Antarctica"])
    mainland = parts[np.argmin(shapely.bounds(parts)[:, 1])]
    islands = [part for part in parts if part is not mainland]
    points = shapely.get_coordinates(mainland)[:-1]
    # The way along the antimeridian to 89.9 S and back is left out: what remains goes once round the pole.
    shore = points[points[:, 1] > -89.0]
    dense = shapely.get_coordinates(shapely.segmentize(shapely.LineString(shore), 0.02))
    area, length = GEOD.polygon_area_perimeter(*dense.T)
    expected = abs(area) + sum(geodesic_area(island) for island in islands)
    found = placed_on("centred", countries["Antarctica"])
    total, shores = area_and_perimeter(countries["Antarctica"])
    assert total == pytest.approx(expected, rel=1e-6)
    # Lengths on the plane bend by up to a hundredth so far from its centre; the detour would add 1 150 km.
    lengths = length + sum(GEOD.geometry_length(island.exterior) for island in islands)
    assert shores == pytest.approx(lengths, rel=0.01)
    assert found.centre_deg[0, 1] < -85.0


def test_a_layer_of_the_world_on_one_cylinder(countries):
    # All but what goes round the pole has its area there; that has none, and its reason.
    for name in ("Fiji", "Russian Federation", "Brazil"):
        placed = placed_on("EPSG:6933", countries[name])
        area = placed.batch.sum_ring_values(placed.batch.ring_signed_area)[0]
        assert area == pytest.approx(area_and_perimeter(countries[name])[0], rel=2e-6)
    assert not placed_on("EPSG:6933", countries["Antarctica"]).is_placed[0]
