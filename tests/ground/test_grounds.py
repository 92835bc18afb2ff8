"""Grounds that several features share: what is chosen, what is refused, and what they do to shapes."""

import pickle

import geopandas as gpd
import numpy as np
import pyproj
import pytest
from shapely import Point, Polygon, box

import geoshape
from geoshape.errors import GroundError
from geoshape.ground.crs_parts import geodetic, globe_of, horizontal, on_globe
from geoshape.ground.equal_area import GroundKind, areal_scale, layer_grid, plan_ground
from geoshape.ground.place import open_ground
from geoshape.options import MeasureOptions
from tests.ground.layings import WGS84, area_and_perimeter, area_of, place_all, placed_on, zone

GEOD = pyproj.Geod(ellps="WGS84")
ROTATED = "+proj=ob_tran +o_proj=longlat +o_lon_p=0 +o_lat_p=40 +lon_0=10 +R=6371000 +type=crs"


def plan(name, crs=WGS84, bounds=None):
    return plan_ground(None if crs is None else pyproj.CRS(crs), bounds, MeasureOptions(ground=name))


class TestPublishedExample:
    def test_albers(self):
        # Snyder 1987, Appendix A (from memory): Clarke 1866, parallels 29.5 and 45.5, origin 23 N 96 W.
        albers = "+proj=aea +lat_1=29.5 +lat_2=45.5 +lat_0=23 +lon_0=-96 +a=6378206.4 +es=0.00676866 +units=m"
        own = "+proj=longlat +a=6378206.4 +es=0.00676866 +type=crs"
        # A feature's plane has its centre as origin: two features of which one is at the origin of the projection.
        here, there = box(-75.001, 34.999, -74.999, 35.001), box(-96.001, 22.999, -95.999, 23.001)
        target = open_ground(plan(albers, own))._target
        x, y = target(-75.0, 35.0)
        assert x == pytest.approx(1_885_472.7, abs=0.05)
        assert y == pytest.approx(1_535_925.0, abs=0.05)
        areas = area_of(place_all(albers, [here, there], own))
        centred = area_of(place_all("centred", [here, there], own))
        np.testing.assert_allclose(areas, centred, rtol=1e-8)


class TestChoice:
    @pytest.mark.parametrize(
        ("bounds", "text"),
        [
            ((-180, 55, 180, 75), "+proj=laea +lat_0=90"),
            ((-180, -75, 180, -50), "+proj=laea +lat_0=-90"),
            ((-180, -80, 180, 80), "+proj=cea +lat_ts=30"),
            ((-180, -10, 180, 10), "+proj=cea +lat_ts=5"),
            ((-180, -90, 180, 90), "+proj=cea +lat_ts=30"),
            ((10, -5, 60, 5), "+proj=cea +lat_ts=0"),
            ((-10, 35, 30, 60), "+proj=laea +lat_0=47.5 +lon_0=10"),
            ((-125, 24, -66, 50), "+proj=aea +lat_1=28.3333"),
            ((110, -44, 155, -28), "+proj=aea +lat_1=-41.3333"),
            ((10, 50, 10, 50), "+proj=laea +lat_0=50 +lon_0=10"),
            ((170, -47, 190, -34), "+proj=laea +lat_0=-40.5 +lon_0=180"),
        ],
    )
    def test_follows_the_extent(self, bounds, text):
        made = plan("layer", WGS84, bounds)
        assert made.kind is GroundKind.SHARED
        assert text in made.target_wkt

    @pytest.mark.parametrize("bounds", [None, (np.nan, np.nan, np.nan, np.nan)])
    def test_a_layer_without_extent_has_a_ground_all_the_same(self, bounds):
        for name in ("centred", "layer", "plane", "EPSG:6933", "EPSG:3035", "EPSG:5070"):
            ground = open_ground(plan(name, WGS84, bounds))
            empty = np.array([], dtype=object)
            placed = ground.place(geoshape.geometry.ring_batch(empty), np.zeros(0, dtype=np.int64))
            assert placed.batch.n_features == 0

    def test_is_made_on_the_layer_s_own_ellipsoid(self):
        own = pyproj.CRS(4267)
        chosen = open_ground(plan("layer", own, (-100, 30, -80, 45)))._target
        factors = chosen.get_factors(-90.0, 40.0)
        assert factors.areal_scale == pytest.approx(1.0, abs=1e-9)
        assert globe_of(pyproj.CRS(chosen.srs)).semi_major_m == own.ellipsoid.semi_major_metre

    def test_an_extent_off_the_globe_is_an_error(self):
        with pytest.raises(GroundError, match=r"no corner of the layer's extent has a place on the globe"):
            plan("layer", 3035, (1e9, 1e9, 2e9, 2e9))

    def test_a_projected_layer_across_the_antimeridian_is_not_the_world(self):
        # EPSG:3832 is a Mercator map centred on 150 E.
        assert "+proj=aea" in plan("layer", 3832, (2.5e6, -2.2e6, 4.5e6, -1.5e6)).target_wkt

    def test_plans_travel_to_other_processes(self):
        for name in ("centred", "layer", "plane", "EPSG:6933"):
            made = plan(name, WGS84, (0, 40, 10, 50))
            assert pickle.loads(pickle.dumps(made)) == made


class TestRefusals:
    @pytest.mark.parametrize("crs", ["EPSG:4978", "EPSG:5773", 'LOCAL_CS["site",UNIT["metre",1]]'])
    def test_a_layer_off_the_globe_is_measured_on_its_plane_only(self, crs):
        with pytest.raises(GroundError, match=r"is neither geographic nor projected; .*--ground plane"):
            plan("centred", crs)
        assert plan("plane", crs).kind is GroundKind.PLANE

    def test_a_ground_off_the_globe_is_refused(self):
        with pytest.raises(GroundError, match=r"EGM96 height has no place for areas on the globe; name a projected"):
            plan("EPSG:5773")

    def test_a_ground_that_does_not_reach_the_layer_is_refused(self):
        with pytest.raises(GroundError, match=r"does not reach the layer"):
            plan("+proj=ortho +lat_0=45 +lon_0=0 +ellps=WGS84", WGS84, (179, -46, 180, -45))

    def test_an_engineering_grid_in_feet_is_converted(self):
        feet = plan("plane", 'LOCAL_CS["site",UNIT["foot",0.3048]]')
        assert feet.unit_m == 0.3048
        assert feet.label.endswith("foot converted to metres")

    def test_another_unit_of_angle_is_named(self):
        assert "counts in grads" in plan("plane", 4807).warnings[0]

    @pytest.mark.parametrize(("name", "least"), [("EPSG:3857", 2.0), ("EPSG:32632", 0.9)])
    def test_the_scale_found_stands_in_the_error(self, name, least):
        with pytest.raises(GroundError) as caught:
            plan(name, WGS84, (8, 45, 10, 50))
        found = [float(word) for word in str(caught.value).replace(";", "").split() if word.replace(".", "").isdigit()]
        assert found[0] >= least

    def test_a_globe_is_needed(self):
        ground = open_ground(plan("plane", None))
        with pytest.raises(ValueError, match="has no globe"):
            _ = ground._globe


class TestPartsOfACrs:
    def test_bound_and_compound(self):
        bound = pyproj.CRS("+proj=utm +zone=32 +ellps=intl +towgs84=-87,-98,-121 +type=crs")
        assert bound.is_bound
        assert not horizontal(bound).is_bound
        assert on_globe(pyproj.CRS("EPSG:5773")) is None

    def test_geodetic_of_a_turned_globe_is_the_one_it_was_turned_on(self):
        rotated = pyproj.CRS(ROTATED)
        assert rotated.is_geographic
        assert geodetic(rotated) == rotated.source_crs

    def test_what_has_no_globe_says_so(self):
        site = pyproj.CRS('LOCAL_CS["site",UNIT["metre",1]]')
        with pytest.raises(GroundError, match="site names no ellipsoid; reproject the layer"):
            globe_of(site)
        with pytest.raises(GroundError, match="site does not say which longitudes and latitudes it is drawn from"):
            geodetic(site)

    def test_areal_scale_over_an_extent(self):
        # UTM's central scale is 0.9996 by definition: areas on the central meridian are its square.
        low, high = areal_scale(pyproj.CRS(32632), layer_grid(pyproj.CRS(32632), (499_999, 5e6, 500_001, 6e6)))
        assert low == pytest.approx(0.9996**2, rel=1e-9)
        assert high == pytest.approx(0.9996**2, rel=1e-9)
        assert areal_scale(pyproj.CRS(3035), (np.zeros(0), np.zeros(0))) is None

    def test_other_ellipsoids_are_told_with_what_they_do_to_areas(self):
        text = plan("EPSG:6933", 4267, (-100, 40, -99, 41)).warnings[0]
        assert text.startswith(
            "the layer is on the Clarke 1866 ellipsoid, WGS 84 / NSIDC EASE-Grid 2.0 Global on WGS 84"
        )
        ours, theirs = (
            area_of(place_all(name, [box(-100, 40, -99, 41)], 4267))[0] for name in ("centred", "EPSG:6933")
        )
        told = float(text.split("areas are up to ")[1].split(" %")[0])
        assert told == pytest.approx(100 * (theirs / ours - 1), rel=0.2)
        assert plan("EPSG:3035", WGS84, (8, 45, 10, 50)).warnings == ()


class TestUnits:
    def test_a_named_crs_in_feet(self):
        shape = box(10, 50, 10.1, 50.1)
        feet = "+proj=laea +lat_0=50 +lon_0=10 +ellps=WGS84 +units=us-ft"
        assert area_of(placed_on(feet, shape))[0] == pytest.approx(zone(10, 50, 10.1, 50.1), rel=1e-6)

    def test_a_layer_in_feet(self):
        # EPSG:2264 (North Carolina, US survey feet) against EPSG:32119, the same grid in metres.
        feet = box(1_400_000, 600_000, 1_410_000, 610_000)
        metres = Polygon([(x * 1200 / 3937, y * 1200 / 3937) for x, y in feet.exterior.coords])
        np.testing.assert_allclose(area_and_perimeter(feet, 2264), area_and_perimeter(metres, 32119), rtol=1e-9)

    @pytest.mark.parametrize("ground", ["centred", "layer", "EPSG:3035"])
    def test_a_projected_layer_drawn_from_grads_and_paris(self, ground):
        # EPSG:27572 is drawn from NTF (Paris): grads, counted from 2.337229167 degrees east of Greenwich.
        to_grads = pyproj.Transformer.from_crs(27572, 4807, always_xy=True)
        shape = box(600_000, 2_400_000, 601_000, 2_401_000)
        grads = Polygon(np.column_stack(to_grads.transform(*np.array(shape.exterior.coords).T)))
        here, there = placed_on(ground, shape, 27572), placed_on(ground, grads, 4807)
        np.testing.assert_allclose(area_of(here), area_of(there), rtol=1e-6)
        np.testing.assert_allclose(here.centre_deg, there.centre_deg, atol=1e-6)
        np.testing.assert_allclose(here.convergence_deg, there.convergence_deg, atol=1e-5)

    def test_a_turned_globe(self):
        # A box of 2 degrees about the middle of the turned map, in closed form on the sphere.
        expected = 6_371_000.0**2 * np.radians(2.0) * 2.0 * np.sin(np.radians(1.0))
        placed = placed_on("centred", box(-1, -1, 1, 1), ROTATED)
        assert area_of(placed)[0] == pytest.approx(expected, rel=1e-6)
        np.testing.assert_allclose(placed.centre_deg, [[10.0, 50.0]], atol=1e-9)


class TestDirections:
    """Azimuths of PROJ's geodesics, in both hemispheres, against directions on the plane and their convergence."""

    @pytest.mark.parametrize(
        ("name", "crs", "lon", "lat"),
        [
            ("EPSG:3035", 4326, -8.0, 40.0),
            ("EPSG:3035", 4326, 28.0, 65.0),
            ("EPSG:5070", 4326, -120.0, 40.0),
            ("EPSG:6933", 4326, 20.0, -50.0),
            ("EPSG:3577", 4326, 118.0, -25.0),
            ("layer", 4326, 150.0, -40.0),
            ("EPSG:3035", 25832, 11.0, 60.0),
        ],
    )
    def test_north_on_an_equal_area_plane(self, name, crs, lon, lat):
        assert true_azimuth(name, crs, (lon, lat), 0.0) == pytest.approx(0.0, abs=2e-4)

    @pytest.mark.parametrize("azimuth", [-170.0, -60.0, 0.0, 45.0, 120.0])
    @pytest.mark.parametrize(
        ("crs", "lon", "lat"),
        [(32632, 11.5, 55.0), (32632, 6.5, 55.0), (32719, -71.0, -40.0), (32719, -66.5, -40.0), (3031, 100.0, -75.0)],
    )
    def test_any_direction_on_a_conformal_plane(self, azimuth, crs, lon, lat):
        assert true_azimuth("plane", crs, (lon, lat), azimuth) == pytest.approx(azimuth, abs=2e-3)

    @pytest.mark.parametrize("azimuth", [-100.0, 0.0, 77.0])
    @pytest.mark.parametrize(("lon", "lat"), [(10.0, 50.0), (-70.0, -40.0), (150.0, 89.9), (30.0, -89.0), (180.0, 0.0)])
    def test_any_direction_on_a_centred_plane(self, azimuth, lon, lat):
        assert true_azimuth("centred", 4326, (lon, lat), azimuth) == pytest.approx(azimuth, abs=5e-3)

    def test_a_shape_round_the_pole_has_true_north_at_its_centre(self):
        # An ellipse-like outline whose centre lies off the pole, its long axis along the meridian of 30 E.
        placed = placed_on("centred", polar_ellipse(30.0, 2.0))
        lon, lat = placed.centre_deg[0]
        assert lon == pytest.approx(30.0, abs=1e-6)
        assert lat == pytest.approx(88.0, abs=0.05)
        assert placed.convergence_deg.tolist() == [0.0]
        assert np.ptp(placed.batch.y) == pytest.approx(2.0 * np.ptp(placed.batch.x), rel=0.01)

    @pytest.mark.parametrize("sign", [1.0, -1.0])
    def test_a_centre_on_the_pole_is_reached_along_the_meridian_of_0(self, sign):
        # A sharp spike along the meridian of 0 points against y in the north, along it in the south.
        outline = [(x, sign * 80.0) for x in range(-180, 180, 10)]
        placed = placed_on("centred", Polygon(outline))
        first = np.argmin(np.abs(placed.batch.x) + sign * placed.batch.y)
        assert placed.batch.y[first] * sign < 0
        np.testing.assert_allclose(placed.centre_deg, [[0.0, sign * 90.0]], atol=1e-12)


def polar_ellipse(meridian, offset_deg):
    angle = np.linspace(0, 2 * np.pi, 360, endpoint=False)
    u, v = offset_deg + 6.0 * np.cos(angle), 3.0 * np.sin(angle)
    lon = (np.degrees(np.arctan2(v, u)) + meridian + 180) % 360 - 180
    return Polygon(np.column_stack((lon, 90.0 - np.hypot(u, v))))


def true_azimuth(name, crs, centre, azimuth):
    """Measure the direction of the long diagonal of a diamond, and add the convergence of its ground."""
    to_layer = pyproj.Transformer.from_crs(4326, crs, always_xy=True)
    corners = [
        GEOD.fwd(*centre, azimuth + turn, reach)[:2] for turn, reach in ((0, 100), (-90, 25), (180, 100), (90, 25))
    ]
    lon, lat = np.array(corners).T
    lon = centre[0] + (lon - centre[0] + 180) % 360 - 180
    placed = placed_on(name, Polygon(np.column_stack(to_layer.transform(lon, lat))), crs, edges="plane")
    x, y = placed.batch.x, placed.batch.y
    found = np.degrees(np.arctan2(x[0] - x[2], y[0] - y[2])) + placed.convergence_deg[0]
    return (found - azimuth + 180.0) % 360.0 - 180.0 + azimuth


class TestCircles:
    """A true circle of 10 km, by geodesics, on several grounds (the table of the methods)."""

    @staticmethod
    def measured(lon, lat, ground):
        azimuth = np.linspace(0, 360, 1440, endpoint=False)
        x, y, _ = GEOD.fwd(np.full(1440, lon), np.full(1440, lat), azimuth, np.full(1440, 10_000.0))
        layer = geoshape_frame(Polygon(np.column_stack((x, y))))
        options = MeasureOptions(ground=ground, families=("extent", "compactness", "axes"))
        return geoshape.measure(layer, options=options).iloc[0]

    def test_a_world_cylinder_at_sixty_degrees(self):
        circle = self.measured(10.0, 60.0, "EPSG:6933")
        assert circle.perimeter_m / (2 * np.pi * 10_000.0) == pytest.approx(1.227, abs=5e-4)
        assert 1.0 / circle.axis_ratio == pytest.approx(2.99, abs=0.01)
        assert circle.polsby_popper == pytest.approx(0.665, abs=1e-3)

    def test_the_european_grid_in_portugal(self):
        assert 1.0 / self.measured(-7.91, 38.57, "EPSG:3035").axis_ratio == pytest.approx(1.026, abs=5e-4)

    @pytest.mark.parametrize(("lon", "lat"), [(10.0, 60.0), (-8.0, 39.5), (180.0, 0.0), (0.0, 89.95), (0.0, -75.0)])
    def test_a_centred_plane(self, lon, lat):
        circle = self.measured(lon, lat, "centred")
        assert circle.perimeter_m / (2 * np.pi * 10_000.0) == pytest.approx(1.0, abs=5e-6)
        assert circle.axis_ratio == pytest.approx(1.0, abs=5e-6)
        assert circle.polsby_popper == pytest.approx(1.0, abs=1e-5)


def geoshape_frame(shape):
    return gpd.GeoDataFrame(geometry=[shape], crs=4326)


class TestDeformation:
    def test_is_nan_where_the_plane_has_no_place_on_the_globe(self):
        for crs in (None, 4326):
            ground = open_ground(plan("plane", crs))
            placed = ground.place(
                geoshape.geometry.ring_batch(np.array([box(0, 0, 1, 1)])), np.zeros(1, dtype=np.int64)
            )
            assert np.isnan(placed.distortion_deg).all()
            assert np.isnan(placed.centre_deg).all()

    def test_of_many_vertices_is_found_nearly(self):
        shape = Point(20, 60).buffer(8, quad_segs=500)
        lon, lat = np.array(shape.exterior.coords).T
        expected = np.asarray(pyproj.Proj(3035).get_factors(lon, lat).angular_distortion).max()
        assert placed_on("EPSG:3035", shape).distortion_deg[0] == pytest.approx(expected, rel=0.01)

    def test_conformal_planes_have_none(self):
        assert placed_on("plane", box(4e5, 5e6, 5e5, 5.1e6), 32632).distortion_deg[0] == pytest.approx(0.0, abs=1e-5)


def test_interrupted_maps_tear():
    # Goode's homolosine on a sphere is equal-area; at 40 W in the north its lobes part.
    sphere = "+proj=longlat +R=6371000 +type=crs"
    shapes = [box(-45, 30, -35, 40), box(0, 30, 10, 40)]
    placed = place_all("+proj=igh +R=6371000", shapes, sphere)
    assert placed.is_placed.tolist() == [False, True]
    assert list(placed.faults) == [0]
