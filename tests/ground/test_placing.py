"""Shapes put on the ground: seams, long edges, azimuths, deformation, and CRSs that do not serve."""

from itertools import pairwise

import numpy as np
import pyproj
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st
from shapely import MultiPolygon, Polygon, affinity, box

from geoshape.errors import GroundError, OptionError
from geoshape.formulas.arclength import edge_lengths
from geoshape.geometry import ring_batch
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.place import open_ground
from geoshape.options import MeasureOptions
from tests.ground.layings import WGS84, area_and_perimeter, placed_on, zone

GEOD = pyproj.Geod(ellps="WGS84")


class TestSeams:
    def test_closed_form_is_the_one_of_the_tables(self):
        assert zone(170, -10, 190, 10) == pytest.approx(4_899_329_175_911.1, rel=1e-13)
        assert zone(-180, 80, 180, 90) == pytest.approx(3_908_572_761_836.6, rel=1e-13)

    @pytest.mark.parametrize(
        "across",
        [
            Polygon([(170, -10), (-170, -10), (-170, 10), (170, 10)]),
            MultiPolygon([box(170, -10, 180, 10), box(-180, -10, -170, 10)]),
            box(170, -10, 190, 10),
            box(-190, -10, -170, 10),
        ],
    )
    def test_a_box_across_the_antimeridian(self, across):
        area, perimeter = area_and_perimeter(across)
        assert area == pytest.approx(zone(170, -10, 190, 10), rel=1e-6)
        same = area_and_perimeter(box(0, -10, 20, 10))
        assert perimeter == pytest.approx(same[1], rel=1e-9)

    @pytest.mark.parametrize(
        "cap",
        [
            Polygon([(x, 80) for x in range(-180, 180, 10)]),
            Polygon([(x, 80) for x in range(180, -180, -10)]),
            Polygon([(x, 80) for x in range(0, 360, 10)]),
            Polygon([(x, -80) for x in range(-180, 180, 10)]),
            box(-180, 80, 180, 90),
            Polygon([(-180, 80), (0, 80), (180, 80), (180, 85), (180, 90), (0, 90), (-180, 90), (-180, 85)]),
        ],
    )
    def test_a_cap_round_a_pole(self, cap):
        area, perimeter = area_and_perimeter(cap)
        assert area == pytest.approx(zone(-180, 80, 180, 90), rel=1e-6)
        # The parallel of 80 degrees: its radius on the ellipsoid times a full turn; planar length bends it little.
        s = np.sin(np.radians(80.0))
        parallel = 2 * np.pi * 6378137.0 * np.cos(np.radians(80.0)) / np.sqrt(1 - 0.0066943799901413165 * s * s)
        assert perimeter == pytest.approx(parallel, rel=5e-3)

    def test_a_detour_that_stops_short_of_the_pole_is_no_shore(self):
        cap = [(x, -70) for x in range(180, -181, -10)]
        detour = Polygon([*cap, (-180, -89.9), (179.99999, -89.9), (179.99999, -70)])
        plain = area_and_perimeter(Polygon(cap[:-1]))
        area, perimeter = area_and_perimeter(detour)
        assert area == pytest.approx(plain[0], rel=1e-6)
        assert perimeter == pytest.approx(plain[1], rel=1e-5)

    def test_a_ring_of_ice_round_the_pole_keeps_its_hole(self):
        ring = Polygon([(x, 70) for x in range(-180, 180, 10)], [[(x, 80) for x in range(-180, 180, 10)]])
        assert area_and_perimeter(ring)[0] == pytest.approx(zone(-180, 70, 180, 80), rel=1e-6)

    def test_a_hole_and_a_part_beyond_the_antimeridian_go_with_their_shape(self):
        lake = Polygon([(170, 0), (-170, 0), (-170, 10), (170, 10)], [[(-179, 4), (-178, 4), (-178, 5), (-179, 5)]])
        island = box(-168, 2, -167, 3)
        area, _ = area_and_perimeter(MultiPolygon([lake, island]))
        expected = zone(170, 0, 190, 10) - zone(-179, 4, -178, 5) + zone(-168, 2, -167, 3)
        assert area == pytest.approx(expected, rel=1e-6)

    def test_a_wedge_that_ends_at_the_pole_needs_no_seam(self):
        assert area_and_perimeter(box(0, 80, 10, 90))[0] == pytest.approx(zone(0, 80, 10, 90), rel=1e-6)

    @pytest.mark.parametrize("shift", [-360.0, 360.0])
    def test_whole_turns_change_nothing(self, shift):
        shape = Polygon([(5, 50), (6, 50.2), (6.1, 51), (5.2, 50.8)])
        np.testing.assert_allclose(
            area_and_perimeter(affinity.translate(shape, shift, 0)), area_and_perimeter(shape), rtol=1e-9
        )


class TestLongEdges:
    """Straight in the layer's coordinates: the numbers of an outline with a thousand times the vertices."""

    @pytest.mark.parametrize(
        ("shape", "crs"),
        [
            (box(-104.05, 45.0, -96.5, 49.0), 4326),
            (box(-123.0, 48.99, -122.0, 49.0), 4326),
            (Polygon([(10, 60), (14, 61), (11, 63)]), 4326),
            (box(0, -10, 20, 10), 4326),
            (box(-30, 70, 30, 85), 4326),
            (box(300_000, 5_000_000, 700_000, 5_500_000), 32632),
            (Polygon([(1.0e6, 8.0e6), (1.5e6, 8.1e6), (1.2e6, 8.6e6)]), 3857),
            (box(-500_000, -400_000, 500_000, 600_000), 3031),
        ],
    )
    def test_agrees_with_a_densified_outline(self, shape, crs):
        step = shapely.length(shape) / 4000.0
        dense = area_and_perimeter(shapely.segmentize(shape, step), crs, edges="plane")
        np.testing.assert_allclose(area_and_perimeter(shape, crs), dense, rtol=1e-6)

    def test_edges_on_the_plane_take_the_vertices_only(self):
        county = box(-104.05, 45.0, -96.5, 49.0)
        assert placed_on("centred", county, edges="plane").batch.n_vertices == 4
        assert placed_on("centred", county).batch.n_vertices > 40

    def test_small_parcels_are_left_alone(self):
        assert placed_on("centred", box(10.0, 50.0, 10.0003, 50.0002)).batch.n_vertices == 4

    @given(
        lon=st.floats(-170, 170), lat=st.floats(-80, 80), size=st.floats(0.001, 3.0), turn=st.floats(0, 90),
    )  # fmt: skip
    def test_any_square_holds_the_promise(self, lon, lat, size, turn):
        square = affinity.rotate(box(lon, lat, lon + size, lat + size), turn)
        dense = area_and_perimeter(shapely.segmentize(square, size / 500.0), edges="plane")
        np.testing.assert_allclose(area_and_perimeter(square), dense, rtol=1e-6)


class TestAreasOnTheEllipsoid:
    """Geodesic edges: outlines are densified along geodesics, or their edges are short."""

    def test_one_degree_cell_at_the_equator(self):
        # Karney 2013: geodesic edges, 12 308 778 361.469 m2; the parallel of 1 N is no geodesic.
        points = [(0, 0), (1, 0), (1, 1), (0, 1), (0, 0)]
        dense = []
        for (x0, y0), (x1, y1) in pairwise(points):
            dense += [(x0, y0), *GEOD.npts(x0, y0, x1, y1, 400)]
        assert area_and_perimeter(Polygon(dense))[0] == pytest.approx(12_308_778_361.469, rel=1e-7)

    def test_square_round_the_pole(self):
        # Karney 2013: corners at 89 N, geodesic edges, 24 952 305 678 m2.
        corners = [0, 90, 180, 270]
        dense = []
        for west, east in zip(corners, [*corners[1:], 0], strict=True):
            dense += [(west, 89), *GEOD.npts(west, 89, east, 89, 2000)]
        ring = Polygon([((x + 180) % 360 - 180, y) for x, y in dense])
        assert area_and_perimeter(ring)[0] == pytest.approx(24_952_305_678.0, rel=1e-6)

    def test_antarctica_in_eighteen_points(self):
        # GeographicLib's planimeter test (Karney 2013): 13 662 703 680 020.1 m2 with geodesic edges.
        points = [(-58, -63.1), (-74, -72.9), (-102, -71.9), (-102, -74.9), (-131, -74.3), (-163, -77.5), (163, -77.4),
                  (172, -71.7), (140, -65.9), (113, -65.7), (88, -66.6), (59, -66.9), (25, -69.8), (-4, -70.0),
                  (-14, -71.0), (-33, -77.3), (-46, -77.9), (-61, -74.7)]  # fmt: skip
        assert abs(GEOD.polygon_area_perimeter(*zip(*points, strict=True))[0]) == pytest.approx(13_662_703_680_020.1)
        dense = []
        for a, b in zip(points, [*points[1:], points[0]], strict=True):
            dense += [a, *GEOD.npts(*a, *b, 300)]
        assert area_and_perimeter(Polygon(dense))[0] == pytest.approx(13_662_703_680_020.1, rel=1e-6)


class TestDirection:
    @pytest.mark.parametrize(
        ("crs", "lon", "lat"),
        [("EPSG:3035", -8.0, 40.0), ("EPSG:3035", 28.0, 60.0), ("EPSG:5070", -120.0, 40.0), ("EPSG:6933", 20.0, -50.0),
         ("+proj=laea +lat_0=-40 +lon_0=-60", -70.0, -30.0)],
    )  # fmt: skip
    def test_convergence_turns_the_meridian_upright(self, crs, lon, lat):
        proj = pyproj.Proj(crs)
        placed = placed_on(crs, box(lon - 0.001, lat - 0.001, lon + 0.001, lat + 0.001))
        (x0, x1), (y0, y1) = proj([lon, lon], [lat - 1e-4, lat + 1e-4])
        assert placed.convergence_deg[0] == pytest.approx(-np.degrees(np.arctan2(x1 - x0, y1 - y0)), abs=1e-4)

    def test_grid_and_true_north_differ_by_many_degrees_in_the_european_grid(self):
        north = placed_on("EPSG:3035", box(31.0, 65.0, 31.01, 65.01)).convergence_deg[0]
        south = placed_on("EPSG:3035", box(-9.5, 37.0, -9.49, 37.01)).convergence_deg[0]
        assert abs(north) == pytest.approx(18.0, abs=1.5)
        assert north * south < 0


def circle(lon, lat, radius):
    azimuth = np.linspace(0, 360, 720, endpoint=False)
    n = len(azimuth)
    x, y, _ = GEOD.fwd(np.full(n, lon), np.full(n, lat), azimuth, np.full(n, radius))
    return Polygon(np.column_stack((x, y)))


class TestDeformation:
    def test_a_true_circle_stays_one_on_its_own_plane_only(self):
        perimeters = {}
        for name in ("centred", "EPSG:6933"):
            batch = placed_on(name, circle(10.0, 60.0, 10_000.0)).batch
            perimeters[name] = edge_lengths(batch).sum() / (2 * 720 * 10_000.0 * np.sin(np.pi / 720))
        assert perimeters["centred"] == pytest.approx(1.0, abs=1e-6)
        assert perimeters["EPSG:6933"] == pytest.approx(1.227, abs=1e-3)

    @pytest.mark.parametrize("name", ["EPSG:6933", "EPSG:3035"])
    def test_distortion_of_a_shared_plane_is_that_of_proj(self, name):
        shape = box(5, 50, 6, 51)
        expected = (
            pyproj.Proj(name).get_factors(np.array([5, 6, 5, 6]), np.array([50, 50, 51, 51])).angular_distortion.max()
        )
        assert placed_on(name, shape).distortion_deg[0] == pytest.approx(expected, rel=1e-6)

    def test_distortion_grows_with_the_distance_from_the_centre(self):
        # Snyder 1987, eq. 4-9, on the sphere: c = 10 degrees gives omega = 0.438 degrees.
        wide = placed_on("centred", Polygon([(x, 80) for x in range(-180, 180, 2)]))
        c = np.radians(10.0)
        omega = 2 * np.degrees(np.arcsin(np.tan(c / 2) ** 2 / (2 + np.tan(c / 2) ** 2)))
        assert wide.distortion_deg[0] == pytest.approx(omega, rel=0.01)


class TestPlans:
    @pytest.mark.parametrize(
        ("bounds", "method"),
        [
            ((5, 45, 15, 52), "Lambert Azimuthal Equal Area"),
            ((-120, 30, -70, 48), "Albers Equal Area"),
            ((-20, -5, 50, 8), "Lambert Cylindrical Equal Area"),
            ((-180, -60, 180, 70), "Lambert Cylindrical Equal Area"),
            ((-180, 70, 180, 90), "Lambert Azimuthal Equal Area"),
        ],
    )
    def test_the_layer_ground_follows_the_extent(self, bounds, method):
        plan = plan_ground(WGS84, bounds, MeasureOptions(ground="layer"))
        assert method in plan.label
        scale = pyproj.Proj(plan.target_wkt).get_factors([bounds[0] + 1], [bounds[1] + 1]).areal_scale
        assert scale[0] == pytest.approx(1.0, abs=1e-6)

    @pytest.mark.parametrize("name", ["layer", "EPSG:6933", "EPSG:8857"])
    def test_area_is_the_same_on_every_equal_area_ground(self, name):
        shape = Polygon([(10, 48), (11, 48.1), (10.8, 49), (10.1, 48.8)])
        batch = placed_on(name, shape).batch
        assert batch.sum_ring_values(batch.ring_signed_area)[0] == pytest.approx(area_and_perimeter(shape)[0], rel=1e-6)

    def test_units_other_than_metres_are_converted(self):
        # EPSG:2264 counts in US survey feet; 1 ft = 1200/3937 m by definition.
        square = box(1_000_000, 600_000, 1_001_000, 601_000)
        batch = placed_on("plane", square, 2264).batch
        assert batch.sum_ring_values(batch.ring_signed_area)[0] == pytest.approx((1000 * 1200 / 3937) ** 2, rel=1e-12)

    @pytest.mark.parametrize("name", ["EPSG:6933", "EPSG:8857"])
    def test_the_far_meridian_is_no_fault_of_an_equal_area_crs(self, name):
        assert plan_ground(WGS84, (-180, -80, 180, 80), MeasureOptions(ground=name)).warnings == ()

    def test_grads_and_another_meridian(self):
        # EPSG:4807 counts grads from Paris, 2 degrees 20 minutes 14.025 seconds east of Greenwich.
        grads = box(0, 50, 1, 51)
        own = pyproj.CRS(4807).ellipsoid
        degrees = pyproj.CRS.from_proj4(f"+proj=longlat +a={own.semi_major_metre} +b={own.semi_minor_metre} +no_defs")
        expected = area_and_perimeter(box(0, 45, 0.9, 45.9), degrees)
        np.testing.assert_allclose(area_and_perimeter(grads, 4807), expected, rtol=1e-9)

    def test_no_crs_names_the_option(self):
        with pytest.raises(GroundError, match=r"the layer has no CRS.*--assume-crs.*--ground plane"):
            plan_ground(None, None, MeasureOptions())

    def test_no_crs_is_no_matter_on_the_plane(self):
        assert plan_ground(None, None, MeasureOptions(ground="plane")).unit_m == 1.0

    def test_a_conformal_crs_is_refused_with_its_scale(self):
        with pytest.raises(
            GroundError, match=r"UTM zone 32N is not equal-area: its areal scale over the layer is 0\.999"
        ):
            plan_ground(WGS84, (8, 47, 9, 48), MeasureOptions(ground="EPSG:32632"))

    @pytest.mark.parametrize("text", ["ESRI:54009", "ESRI:54012"])
    def test_spherical_forms_on_an_ellipsoid_are_refused(self, text):
        # PROJ has only the sphere of Mollweide and Eckert IV: areas are off by half a percent.
        with pytest.raises(GroundError, match=r"is not equal-area"):
            plan_ground(WGS84, (8, 47, 9, 48), MeasureOptions(ground=text))

    def test_degrees_are_refused_as_a_ground(self):
        with pytest.raises(GroundError, match=r"counts in degrees"):
            plan_ground(WGS84, None, MeasureOptions(ground="EPSG:4326"))

    def test_an_unknown_ground_is_named(self):
        with pytest.raises(OptionError, match=r"ground = 'middle' is no CRS that PROJ knows"):
            plan_ground(WGS84, None, MeasureOptions(ground="middle"))

    def test_a_crs_off_the_globe_is_refused(self):
        with pytest.raises(GroundError, match=r"is neither geographic nor projected"):
            plan_ground(pyproj.CRS(4978), None, MeasureOptions())

    def test_the_plane_of_a_conformal_crs_says_what_areas_are(self):
        plan = plan_ground(pyproj.CRS(3857), (1e6, 8e6, 1.1e6, 8.1e6), MeasureOptions(ground="plane"))
        assert "areas are as drawn" in plan.warnings[0]
        assert plan_ground(pyproj.CRS(3035), None, MeasureOptions(ground="plane")).warnings == ()

    def test_the_plane_of_degrees_says_so_loudly(self):
        assert "in degrees" in plan_ground(WGS84, None, MeasureOptions(ground="plane")).warnings[0]

    def test_a_compound_crs_is_measured_by_its_horizontal_part(self):
        plan = plan_ground(pyproj.CRS("EPSG:25832+7837"), None, MeasureOptions())
        assert not plan.is_geographic

    def test_another_ellipsoid_is_named(self):
        plan = plan_ground(pyproj.CRS(4267), (-100, 40, -99, 41), MeasureOptions(ground="EPSG:6933"))
        assert "ellipsoid" in plan.warnings[0]


class TestWhatHasNoPlace:
    def test_points_that_no_crs_can_hold_are_not_placed(self):
        placed = placed_on("centred", box(1e9, 1e9, 1e9 + 10, 1e9 + 10), 32632)
        assert placed.is_placed.tolist() == [False]

    def test_a_cap_that_a_cylinder_cannot_hold_is_not_placed(self):
        placed = placed_on("EPSG:6933", box(-180, 80, 180, 90))
        assert placed.is_placed.tolist() == [False]
        assert placed.faults == {0: "the ground's projection has no place for it, or tears it; use --ground centred"}

    def test_the_far_meridian_of_a_named_crs_tears_nothing(self):
        across = Polygon([(179, 0), (-179, 0), (-179, 1), (179, 1)])
        batch = placed_on("EPSG:6933", across).batch
        assert batch.sum_ring_values(batch.ring_signed_area)[0] == pytest.approx(zone(179, 0, 181, 1), rel=1e-6)

    def test_latitudes_beyond_the_pole_are_not_placed(self):
        ground = open_ground(plan_ground(WGS84, None, MeasureOptions()))
        shapes = np.array([box(0, 80, 10, 91), box(0, 80, 10, 90)], dtype=object)
        placed = ground.place(ring_batch(shapes), np.zeros(2, dtype=np.int64))
        assert placed.is_placed.tolist() == [False, True]
        assert placed.faults == {0: "coordinates lie outside what the layer's CRS can hold"}

    def test_a_part_round_the_opposite_of_the_centre_is_not_placed(self):
        here, opposite = [box(-40, 20, -10, 60), box(-100, 20, -75, 60)], box(126.5, -41.7, 132.5, -35.7)
        placed = placed_on("centred", MultiPolygon([*here, opposite]))
        assert placed.is_placed.tolist() == [False]
        assert placed.faults == {0: "it reaches round the globe, where no plane can show it; split it into parts"}
        beside = placed_on("centred", MultiPolygon([*here, box(100, -41, 106, -35)]))
        assert beside.is_placed.tolist() == [True]

    def test_nothing_in_nothing_out(self):
        ground = open_ground(plan_ground(WGS84, None, MeasureOptions()))
        for geometries in (np.array([], dtype=object), np.array([None, Polygon()], dtype=object)):
            placed = ground.place(ring_batch(geometries), np.zeros(len(geometries), dtype=np.int64))
            assert placed.batch.n_features == len(geometries)
            assert placed.is_placed.all()
