"""Outlines that cross the antimeridian, go round a pole, or were cut at either, against closed forms."""

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import MultiPolygon, Polygon, affinity, box

from geoshape.ground.plane import Ellipsoid
from geoshape.ground.polar import FRAME_LAYER, FRAME_NORTH, FRAME_SOUTH
from geoshape.ground.seams import rejoin, unwrap
from tests.ground.layings import E2, SEMI_MAJOR_M, area_and_perimeter, area_of, place_all, zone

GLOBE = Ellipsoid(SEMI_MAJOR_M, E2)
LONGITUDES = list(range(-180, 180, 10))

# Karney 2013, J. Geodesy 87: the whole of WGS 84.
WHOLE_M2 = 510_065_621_724_088.5

CAP = zone(-180, 80, 180, 90)
ACROSS = zone(170, -10, 190, 10)
BAND = zone(-180, -60, 180, 60)


def ring(latitude, longitudes=LONGITUDES):
    return [(x, latitude) for x in longitudes]


def dense(shape):
    return shapely.segmentize(shape, 5.0)


SHAPES = {
    "world": (box(-180, -90, 180, 90), WHOLE_M2),
    "world, many vertices": (dense(box(-180, -90, 180, 90)), WHOLE_M2),
    "band": (box(-180, -60, 180, 60), BAND),
    "band, many vertices": (dense(box(-180, -60, 180, 60)), BAND),
    "band, a vertex on one side": (Polygon([(-180, -60), (180, -60), (180, 60), (0, 60), (-180, 60)]), BAND),
    "band from 0 to 360": (box(0, -60, 360, 60), BAND),
    "band cut elsewhere": (box(-200.5, -60, 159.5, 60), BAND),
    "band in two halves": (MultiPolygon([box(-180, -60, 0, 60), box(0, -60, 180, 60)]), BAND),
    "cap as a box": (box(-180, 80, 180, 90), CAP),
    "cap as a box, very near the pole": (box(-180, 89.5, 180, 90), zone(-180, 89.5, 180, 90)),
    "cap in two halves": (MultiPolygon([box(-180, 80, 0, 90), box(0, 80, 180, 90)]), CAP),
    "cap as a ring": (Polygon(ring(80)), CAP),
    "cap as a ring from 0 to 360": (Polygon(ring(80, range(0, 360, 10))), CAP),
    "cap with both ends of the cut": (Polygon([*ring(80), (180, 80)]), CAP),
    "southern cap": (Polygon(ring(-80)), CAP),
    "all but the southern cap": (dense(box(-180, -80, 180, 90)), WHOLE_M2 - CAP),
    "all but the northern cap": (dense(box(-180, -90, 180, 80)), WHOLE_M2 - CAP),
    "both caps": (MultiPolygon([box(-180, 80, 180, 90), box(-180, -90, 180, -80)]), 2 * CAP),
    "both caps as rings": (MultiPolygon([Polygon(ring(80)), Polygon(ring(-80))]), 2 * CAP),
    "ring of ice": (Polygon(ring(70), [ring(80)]), zone(-180, 70, 180, 80)),
    "jump": (Polygon([(170, -10), (-170, -10), (-170, 10), (170, 10)]), ACROSS),
    "beyond 180": (box(170, -10, 190, 10), ACROSS),
    "cut": (MultiPolygon([box(170, -10, 180, 10), box(-180, -10, -170, 10)]), ACROSS),
    "cut, a hair beside": (MultiPolygon([box(170, -10, 179.99999, 10), box(-180, -10, -170, 10)]), ACROSS),
    "cut, a digit beyond": (MultiPolygon([box(170, -10, 180.00000000000014, 10), box(-180, -10, -170, 10)]), ACROSS),
    "cut at 0 and 360": (MultiPolygon([box(350, -10, 360, 10), box(0, -10, 10, 10)]), ACROSS),
    "cut, and another part": (
        MultiPolygon([box(170, -10, 180, 10), box(-180, -10, -170, 10), box(100, -10, 120, 10)]),
        2 * ACROSS,
    ),
    "vertices on both sides of the cut": (
        Polygon([(170, -10), (180, -10), (-180, -10), (-170, -10), (-170, 10), (-180, 10), (180, 10), (170, 10)]),
        ACROSS,
    ),
    "hole beyond": (
        Polygon([(170, -10), (-170, -10), (-170, 10), (170, 10)], [[(-175, -5), (-174, -5), (-174, 5), (-175, 5)]]),
        ACROSS - zone(0, -5, 1, 5),
    ),
    "wide, many vertices": (dense(box(-100, -10, 100, 10)), 10 * ACROSS),
    "sea round the world with land across the cut": (
        Polygon(
            [*ring(-70), (180, -70), (180, 65), (170, 65), (170, 69), (180, 69), (180, 90), (-180, 90), (-180, 69),
             (-170, 69), (-170, 65), (-180, 65)],
            [box(0, 0, 20, 20).exterior.coords],
        ),
        zone(-180, -70, 180, 90) - zone(170, 65, 190, 69) - zone(0, 0, 20, 20),
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", SHAPES)
def test_area_is_that_of_the_closed_form(name):
    shape, expected = SHAPES[name]
    assert area_and_perimeter(shape)[0] == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("name", SHAPES)
def test_direction_of_the_rings_is_no_matter(name):
    shape, expected = SHAPES[name]
    assert area_and_perimeter(shape.reverse())[0] == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize(
    "names",
    [
        ("jump", "beyond 180", "cut", "cut, a hair beside", "cut, a digit beyond", "cut at 0 and 360",
         "vertices on both sides of the cut"),
        ("cap as a box", "cap as a ring", "cap as a ring from 0 to 360", "cap with both ends of the cut",
         "cap in two halves", "southern cap"),
        ("band", "band, many vertices", "band, a vertex on one side", "band from 0 to 360", "band cut elsewhere",
         "band in two halves"),
    ],
)  # fmt: skip
def test_what_was_cut_is_no_shore(names):
    perimeters = [area_and_perimeter(SHAPES[name][0])[1] for name in names]
    np.testing.assert_allclose(perimeters, perimeters[0], rtol=2e-6)


def test_tables_of_areas_agree():
    # 20 x 20 degrees on the equator across 180, and the cap north of 80 (WGS 84, derived).
    assert pytest.approx(4_899_329_175_911.1, rel=1e-13) == ACROSS
    assert pytest.approx(3_908_572_761_836.6, rel=1e-13) == CAP
    assert zone(-180, -90, 180, 90) == pytest.approx(WHOLE_M2, rel=1e-15)


def test_wide_and_narrow_shapes_of_one_batch_keep_to_themselves():
    shapes = [shape for shape, _ in SHAPES.values()] + [box(10, 50, 11, 51), None, Polygon()]
    areas = area_of(place_all("centred", shapes))
    expected = [area for _, area in SHAPES.values()] + [zone(10, 50, 11, 51), 0.0, 0.0]
    np.testing.assert_allclose(areas, expected, rtol=1e-6)


def test_narrow_shapes_are_not_touched():
    shapes = np.array([box(10, 50, 11, 51), None, Polygon(), box(-90, 0, 90, 10)], dtype=object)
    same, frames, is_cut = unwrap(shapes, GLOBE, is_subdivided=True)
    assert same is shapes
    assert not frames.any()
    assert not is_cut.any()
    assert rejoin(shapes, is_cut) is shapes


@pytest.mark.parametrize(
    ("name", "frame"),
    [
        ("cap as a box", FRAME_NORTH),
        ("southern cap", FRAME_SOUTH),
        ("all but the northern cap", FRAME_SOUTH),
        ("all but the southern cap", FRAME_NORTH),
        ("world", FRAME_NORTH),
        ("band", FRAME_NORTH),
        ("jump", FRAME_LAYER),
        ("cut", FRAME_LAYER),
    ],
)
def test_frame_is_that_of_the_pole_inside(name, frame):
    assert unwrap(np.array([SHAPES[name][0]]), GLOBE, is_subdivided=True)[1].tolist() == [frame]


def test_edges_on_the_plane_take_the_vertices_only():
    cap, frames, _ = unwrap(np.array([Polygon(ring(80))]), GLOBE, is_subdivided=False)
    assert frames.tolist() == [FRAME_NORTH]
    assert shapely.get_num_coordinates(cap[0]) == len(LONGITUDES) + 1


def test_a_fault_within_a_cut_part_is_left_to_be_repaired():
    bow_tie = Polygon([(170, 0), (180, 10), (180, 0), (170, 10)])
    shapes, _, is_cut = unwrap(np.array([MultiPolygon([bow_tie, box(-180, 0, -170, 10)])]), GLOBE, is_subdivided=True)
    assert is_cut.tolist() == [True]
    joined = rejoin(shapes, is_cut)
    assert shapely.get_num_geometries(joined[0]) == 2
    assert not shapely.is_valid(joined[0])


def test_a_fault_round_the_pole_is_left_to_be_repaired():
    loop = Polygon([*ring(80, range(-180, 150, 10)), (150, 80), (170, 70), (150, 70), (170, 80)])
    shapes, frames, _ = unwrap(np.array([loop]), GLOBE, is_subdivided=True)
    assert frames.tolist() == [FRAME_NORTH]
    assert not shapely.is_valid(shapes[0])


@settings(max_examples=50)
@given(lon=st.floats(-180, 180), lat=st.floats(-70, 70), width=st.floats(0.01, 60), height=st.floats(0.01, 15))
def test_place_along_a_parallel_is_no_matter(lon, lat, width, height):
    here = box(0, lat, width, lat + height)
    there = affinity.translate(here, lon, 0)
    wrapped = Polygon([((x + 180) % 360 - 180, y) for x, y in there.exterior.coords])
    expected = area_and_perimeter(here)
    np.testing.assert_allclose(area_and_perimeter(there), expected, rtol=1e-9)
    np.testing.assert_allclose(area_and_perimeter(wrapped), expected, rtol=1e-9)


@settings(max_examples=25)
@given(lon=st.floats(-180, 180), lat=st.floats(60, 88), south=st.booleans())
def test_turning_the_globe_under_a_shape_round_the_pole_is_no_matter(lon, lat, south):
    star = [(x, (lat + 1.5 * np.cos(np.radians(3 * x))) * (-1 if south else 1)) for x in range(-180, 180, 12)]
    turned = [((x + lon + 180) % 360 - 180, y) for x, y in star]
    expected = area_and_perimeter(Polygon(star))
    np.testing.assert_allclose(area_and_perimeter(Polygon(turned)), expected, rtol=1e-7)
