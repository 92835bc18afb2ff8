"""Real outlines at the antimeridian and round the pole, against geodesic areas (see SOURCE.txt beside the layer)."""

from pathlib import Path

import geopandas as gpd
import numpy as np
import pyproj
import pytest
import shapely

from geoshape.geometry import ring_batch
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.place import open_ground
from geoshape.options import MeasureOptions
from tests.ground.layings import area_and_perimeter, area_of, perimeter_of, place_all, placed_on

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


@pytest.mark.parametrize("crs", ["EPSG:3857", "EPSG:6933", "EPSG:8857", "ESRI:54030", "ESRI:54009", "EPSG:3031"])
def test_maps_of_the_world_are_cut_where_they_end(countries, crs):
    # The same countries on a map whose ends, and whose pole, tear them as longitudes and latitudes do.
    to_map = pyproj.Transformer.from_crs(4326, crs, always_xy=True)
    names = ["Antarctica", "Russian Federation", "Canada", "New Zealand", "United States", "Kenya"]
    degrees = [shapely.segmentize(countries[name], 0.5) for name in names]
    drawn = [shapely.transform(shape, lambda p: np.column_stack(to_map.transform(*p.T))) for shape in degrees]
    expected, got = place_all("centred", degrees), place_all("centred", drawn, crs)
    assert got.is_placed.all(), got.faults
    # Edges are straight on the map here and in degrees there, half a degree apart.
    np.testing.assert_allclose(area_of(got), area_of(expected), rtol=5e-4)
    np.testing.assert_allclose(perimeter_of(got), perimeter_of(expected), rtol=1e-3)


def test_a_shape_off_the_map_is_left_to_be_refused():
    ground = open_ground(plan_ground(pyproj.CRS("ESRI:54009"), None, MeasureOptions()))
    shapes = np.array([shapely.box(-1.9e7, -8e6, 1.9e7, 8e6), shapely.box(0, 0, 1e5, 1e5)])
    same, frames, _ = ground.unwrap(shapes)
    assert same.tolist() == shapes.tolist()
    assert not frames.any()
    assert ground.place(ring_batch(same), frames).is_placed.tolist() == [False, True]


def test_wide_shapes_with_edges_on_the_plane_keep_their_vertices():
    shape = shapely.box(-3e6, 5e6, 3e6, 6e6)
    four = placed_on("centred", shape, "EPSG:3857", edges="plane").batch
    many = placed_on("centred", shape, "EPSG:3857").batch
    assert four.n_vertices == 4
    assert many.n_vertices > 600
