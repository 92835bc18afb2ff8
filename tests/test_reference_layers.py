"""Real layers against the values that came with them; each folder's SOURCE.txt says what to expect."""

from pathlib import Path

import geopandas as gpd
import numpy as np
import pyproj
import pytest
import shapely

import geoshape
from geoshape import MeasureOptions

DATA = Path(__file__).parent / "data"


@pytest.fixture(scope="module")
def states():
    layer = gpd.read_file(DATA / "mexico_states" / "mexicojoin.shp")
    options = MeasureOptions(
        assume_crs="EPSG:4326", ground="ESRI:102003", edges="plane", families=("extent", "compactness")
    )
    states = geoshape.measure(layer, options=options)
    # Sonora's AREA is wrong in the data.
    return states[states.NAME != "Sonora"]


@pytest.fixture(scope="module")
def world():
    return gpd.read_file(DATA / "world_geodesic_area" / "world.gpkg")


class TestMexicanStates:
    """libpysal's mexicojoin: area and perimeter in one Albers CRS, vertices projected only."""

    def test_areas(self, states):
        error = np.abs(states.area_m2 / states.AREA - 1.0)
        assert len(states) == 31
        assert error.median() < 2e-11
        assert error.max() < 5e-11

    def test_perimeters(self, states):
        error = np.abs(states.perimeter_m / states.PERIMETER - 1.0)
        assert error.median() < 1e-9
        assert error.max() < 5e-9

    def test_compactness(self, states):
        expected = 4.0 * np.pi * states.AREA / states.PERIMETER**2
        assert np.abs(states.polsby_popper / expected - 1.0).max() < 1e-8


class TestWilderness:
    """fiona's coutwildrnp: shoelace and length on raw coordinates, six digits stored."""

    def test_area_and_length_as_drawn(self):
        layer = gpd.read_file(DATA / "wilderness_co_ut" / "coutwildrnp.shp")
        with pytest.warns(geoshape.GeoshapeWarning, match="counts in degrees"):
            drawn = geoshape.measure(layer, options=MeasureOptions(ground="plane", families=("extent",)))
        assert len(drawn) == 67
        assert np.abs(drawn.area_m2 / drawn.AREA - 1.0).max() < 5e-6
        assert np.abs(drawn.perimeter_m / drawn.PERIMETER - 1.0).max() < 5e-6


class TestCountries:
    """Natural Earth through spData: geodesic areas, with the antimeridian and a pole among them."""

    def test_areas_with_edges_straight_in_longitude_and_latitude(self, world):
        geod = pyproj.Geod(ellps="WGS84")
        measured = geoshape.measure(world, options=MeasureOptions(families=("extent",)))
        expected = np.array([_geodesic_area(geod, shapely.segmentize(shape, 0.02)) for shape in world.geometry])
        error = np.abs(measured.area_m2 / expected - 1.0)
        assert (measured.shape_status == "ok").all()
        assert error.median() < 1e-7
        # Antarctica stops at 89.9 S in the data; what goes round the pole takes the rest of it in.
        is_ice = world.name_long == "Antarctica"
        # Fiji and Russia were cut at 180 degrees and stored at 179.99999: the metre between is taken in.
        is_cut = world.name_long.isin(["Fiji", "Russian Federation"])
        assert error[~is_ice & ~is_cut].max() < 1e-6
        assert error[is_cut].max() < 5e-6
        assert measured.area_m2[is_ice].item() - expected[is_ice.to_numpy()].item() == pytest.approx(
            np.pi * (0.1 * 111_694.0) ** 2, rel=0.02
        )

    def test_geodesic_areas_stored_in_the_layer(self, world):
        # Short edges are near to geodesics, long ones are not: the median is what the comparison can give.
        measured = geoshape.measure(world, options=MeasureOptions(families=("extent",)))
        error = np.abs(measured.area_m2 / (1e6 * world.area_km2) - 1.0)
        assert error.median() < 5e-4
        assert error.max() < 1e-2

    def test_crossing_the_antimeridian_is_no_shore(self, world):
        russia = world[world.name_long == "Russian Federation"]
        parts = shapely.get_parts(russia.geometry.item())
        joined = shapely.union_all([shapely.transform(part, _eastwards) for part in parts])
        by_hand = russia.set_geometry(gpd.GeoSeries([joined], index=russia.index, crs=russia.crs))
        assert shapely.get_num_geometries(joined) < len(parts)
        exact = MeasureOptions(spectrum="exact")
        ours, expected = (geoshape.measure(layer, options=exact).iloc[0] for layer in (russia, by_hand))
        for column in ("area_m2", "perimeter_m", "polsby_popper", "feret_max_m", "fd_departure"):
            assert ours[column] == pytest.approx(expected[column], rel=1e-9), column


def _eastwards(points):
    # The layer was cut at 180 degrees and stored at 179.99999.
    x = np.where(points[:, 0] > 179.9999, 180.0, points[:, 0])
    return np.column_stack((np.where(x < 0, x + 360.0, x), points[:, 1]))


def _geodesic_area(geod, shape):
    polygons = [shapely.geometry.polygon.orient(part) for part in shapely.get_parts(shape)]
    return sum(geod.geometry_area_perimeter(polygon)[0] for polygon in polygons)


class TestCensusAreas:
    """US Census outlines: land and water area of the bureau against the area of the outline, on GRS 80."""

    def test_new_hampshire_at_full_resolution(self):
        layer = gpd.read_file(DATA / "us_census_areas" / "tl_2016_us_state_NH.gpkg")
        state = geoshape.measure(layer, options=MeasureOptions(families=("extent",)))
        assert state.area_m2.item() == pytest.approx(layer.ALAND.item() + layer.AWATER.item(), rel=1e-7)

    def test_counties_as_far_as_their_outlines_were_generalised(self):
        layer = gpd.read_file(DATA / "us_census_areas" / "cb_2016_us_county_500k_CO_KS_UT.gpkg")
        counties = geoshape.measure(layer, options=MeasureOptions(families=("extent",)))
        error = np.abs(counties.area_m2 / (layer.ALAND.astype(float) + layer.AWATER.astype(float)) - 1.0)
        assert len(counties) == 198
        assert error.median() < 1.2e-4
        assert error.max() < 1.2e-3

    @pytest.mark.parametrize("ground", ["layer", "EPSG:5070", "EPSG:6933"])
    def test_every_equal_area_ground_gives_the_same_area(self, ground):
        layer = gpd.read_file(DATA / "us_census_areas" / "cb_2016_us_county_500k_CO_KS_UT.gpkg")[:40]
        centred = geoshape.measure(layer, options=MeasureOptions(families=("extent",)))
        other = geoshape.measure(layer, options=MeasureOptions(families=("extent",), ground=ground))
        np.testing.assert_allclose(other.area_m2, centred.area_m2, rtol=2e-6)
