"""Geometries as they come: what is sorted out, repaired, counted, and why."""

import struct

import numpy as np
import pytest
import shapely
from shapely import GeometryCollection, LineString, MultiPolygon, Point, Polygon, box

from geoshape import geometry
from geoshape.columns import Status
from geoshape.errors import GeometryError
from geoshape.geometry import Verdicts
from geoshape.options import Invalid


def objects(*items):
    array = np.empty(len(items), dtype=object)
    array[:] = items
    return array


BOW_TIE = Polygon([(0, 0), (1, 1), (1, 0), (0, 1)])


def pairs(*points):
    return b"".join(struct.pack("<dd", *point) for point in points)


CURVE_POLYGON = (
    struct.pack("<BII", 1, 10, 1) + struct.pack("<BII", 1, 8, 5) + pairs((0, 0), (1, 1), (2, 0), (1, -1), (0, 0))
)
TWO_POINT_RING = struct.pack("<BIII", 1, 3, 1, 2) + pairs((0, 0), (0, 0))
TRUNCATED = shapely.to_wkb(box(0, 0, 1, 1))[:40]


class TestReadWkb:
    def test_reads_what_shapely_reads(self):
        polygons = objects(box(0, 0, 1, 1), None, MultiPolygon([box(0, 0, 1, 1), box(3, 0, 4, 1)]))
        geometries, unreadable = geometry.read_wkb(shapely.to_wkb(polygons))
        assert shapely.equals_identical(geometries[[0, 2]], polygons[[0, 2]]).all()
        assert geometries[1] is None
        assert unreadable == {}

    @pytest.mark.parametrize(
        ("value", "reason"),
        [
            (CURVE_POLYGON, geometry.CURVED),
            (TWO_POINT_RING, geometry.TOO_FEW_POINTS),
            (TRUNCATED, "cannot be read: "),
            (b"", "cannot be read: "),
        ],
    )
    def test_says_why_a_row_cannot_be_read_and_reads_the_others(self, value, reason):
        square = shapely.to_wkb(box(0, 0, 1, 1))
        geometries, unreadable = geometry.read_wkb([square, value, None, square])
        assert list(unreadable) == [1]
        assert unreadable[1].startswith(reason)
        assert [found is None for found in geometries] == [False, True, True, False]

    def test_closes_an_open_ring(self):
        open_ring = struct.pack("<BIII", 1, 3, 1, 4) + pairs((0, 0), (1, 0), (1, 1), (0, 1))
        geometries, unreadable = geometry.read_wkb([open_ring])
        assert geometries[0].area == 1.0
        assert unreadable == {}


SCREENED = [
    (None, Status.MISSING, "no geometry"),
    (Polygon(), Status.EMPTY, "empty geometry"),
    (MultiPolygon(), Status.EMPTY, "empty geometry"),
    (Point(), Status.EMPTY, "empty geometry"),
    (Point(1, 2), Status.NOT_POLYGON, "Point: no polygon"),
    (LineString([(0, 0), (1, 1)]), Status.NOT_POLYGON, "LineString: no polygon"),
    (GeometryCollection([Point(0, 0)]), Status.NOT_POLYGON, "GeometryCollection: no polygon"),
    (box(0, 0, 1, 1), Status.OK, None),
    (GeometryCollection([Point(0, 0), box(0, 0, 1, 1)]), Status.REPAIRED, "collection: only its polygons are measured"),
    (
        geometry.read_wkb([struct.pack("<BIII", 1, 3, 1, 4) + pairs((0, 0), (1, 0), (1, np.nan), (0, 0))])[0][0],
        Status.INVALID,
        "NaN or infinite coordinates",
    ),
]


class TestScreen:
    @pytest.mark.parametrize(("item", "status", "note"), SCREENED)
    def test_gives_each_kind_its_status(self, item, status, note):
        polygons, verdicts = geometry.screen(objects(item), {}, is_geographic=False)
        assert verdicts.status.tolist() == [status]
        assert verdicts.notes.get(0) == note
        assert (polygons[0] is None) == (status not in {Status.OK, Status.REPAIRED})

    def test_finds_polygons_however_deep(self):
        deep = GeometryCollection([GeometryCollection([MultiPolygon([box(0, 0, 1, 1)]), box(3, 0, 4, 1)]), Point(0, 0)])
        polygons, _ = geometry.screen(objects(deep), {}, is_geographic=False)
        assert polygons[0].area == 2.0

    @pytest.mark.parametrize("y", [90.0, 90.0000001, -91.0])
    def test_latitude_beyond_the_pole_counts_on_the_globe_only(self, y):
        triangle = objects(Polygon([(0, 0), (1, 0), (0, y)]))
        _, flat = geometry.screen(triangle, {}, is_geographic=False)
        _, globe = geometry.screen(triangle, {}, is_geographic=True)
        assert flat.status[0] == Status.OK
        assert globe.status[0] == (Status.OK if y == 90.0 else Status.INVALID)

    @pytest.mark.parametrize(
        ("reason", "status"),
        [
            (geometry.CURVED, Status.NOT_POLYGON),
            (geometry.TOO_FEW_POINTS, Status.COLLAPSED),
            ("cannot be read: x", Status.INVALID),
        ],
    )
    def test_unreadable_rows_are_not_missing(self, reason, status):
        _, verdicts = geometry.screen(objects(None, None), {1: reason}, is_geographic=False)
        assert verdicts.status.tolist() == [Status.MISSING, status]


class TestCount:
    def test_counts_as_read_without_closing_vertices(self):
        holed = Polygon([(0, 0), (9, 0), (9, 9), (0, 9)], [[(1, 1), (2, 1), (2, 2)], [(4, 4), (5, 4), (5, 5)]])
        two = MultiPolygon([box(0, 0, 1, 1), box(3, 0, 4, 1)])
        items = objects(holed, two, Polygon(), None, Point(0, 0))
        polygons, _ = geometry.screen(items, {}, is_geographic=False)
        counts = geometry.count(polygons, items)
        np.testing.assert_array_equal(counts.parts, [1, 2, 0, np.nan, np.nan])
        np.testing.assert_array_equal(counts.holes, [2, 0, 0, np.nan, np.nan])
        np.testing.assert_array_equal(counts.vertices, [10, 8, 0, np.nan, np.nan])


REPAIRS = [
    # shape, area after repair: facts of planar geometry
    (BOW_TIE, 0.5),
    (MultiPolygon([box(0, 0, 4, 4), box(2, 2, 6, 6)]), 28.0),
    (MultiPolygon([box(0, 0, 4, 4), box(1, 1, 2, 2)]), 16.0),
    (Polygon([(0, 0), (4, 0), (4, 4), (2, 4), (2, 9), (2, 4), (0, 4)]), 16.0),
]


class TestRepair:
    @pytest.mark.parametrize(("broken", "area"), REPAIRS)
    def test_repairs_and_says_both_areas(self, broken, area):
        verdicts = Verdicts.fresh(1)
        mended = geometry.repair(objects(broken), verdicts, Invalid.REPAIR, 0)
        assert mended[0].is_valid
        assert mended[0].area == pytest.approx(area, rel=1e-12)
        assert verdicts.status[0] == Status.REPAIRED
        assert f"{broken.area:.6g} -> {area:.6g}" in verdicts.notes[0]

    @pytest.mark.parametrize(
        "broken",
        [
            Polygon([(0, 0), (1, 0), (2, 0)]),
            Polygon([(0, 0), (1, 0), (0, 0)]),
            Polygon([(0, 0), (4, 0), (4, 4), (0, 4)], [[(0, 0), (4, 0), (4, 4), (0, 4)]]),
        ],
    )
    def test_what_has_no_area_collapses(self, broken):
        verdicts = Verdicts.fresh(1)
        assert geometry.repair(objects(broken), verdicts, Invalid.REPAIR, 0)[0] is None
        assert verdicts.status[0] == Status.COLLAPSED

    def test_null_gives_the_reason_and_leaves_the_rest(self):
        verdicts = Verdicts.fresh(2)
        mended = geometry.repair(objects(BOW_TIE, box(0, 0, 1, 1)), verdicts, Invalid.NULL, 0)
        assert mended[0] is None
        assert mended[1] is not None
        assert verdicts.status.tolist() == [Status.INVALID, Status.OK]
        assert verdicts.notes == {0: "self-intersection at 0.5 0.5"}

    def test_stop_names_the_row_of_the_layer(self):
        with pytest.raises(GeometryError, match=r"row 12 is invalid: self-intersection at 0\.5 0\.5; mend it"):
            geometry.repair(objects(box(0, 0, 1, 1), BOW_TIE), Verdicts.fresh(2), Invalid.STOP, 10)


def test_notes_add_up():
    verdicts = Verdicts.fresh(1)
    verdicts.mark(np.array([0]), Status.REPAIRED, "one")
    verdicts.mark(np.array([0]), Status.COLLAPSED, "two")
    assert verdicts.notes == {0: "one; two"}


def test_filling_swallows_the_part_in_a_hole():
    lake = Polygon(box(0, 0, 10, 10).exterior, [box(2, 2, 8, 8).exterior.coords])
    island = box(4, 4, 6, 6)
    filled = geometry.filled(objects(MultiPolygon([lake, island]), lake, island, None))
    assert [None if shape is None else shape.area for shape in filled] == [100.0, 100.0, 4.0, None]


def test_split_numbers_parts_and_keeps_every_other_row():
    two = MultiPolygon([box(0, 0, 1, 1), box(3, 0, 4, 1)])
    items = objects(two, None, box(0, 0, 2, 2), MultiPolygon(), Point(0, 0))
    parts, row, number = geometry.split(items)
    assert row.tolist() == [0, 0, 1, 2, 3, 4]
    np.testing.assert_array_equal(number, [1, 2, np.nan, 1, np.nan, np.nan])
    assert parts[0].equals(box(0, 0, 1, 1))
    assert parts[1].equals(box(3, 0, 4, 1))


class TestRingBatch:
    def test_holes_and_parts_stand_in_order(self):
        holed = Polygon([(0, 0), (9, 0), (9, 9), (0, 9)], [[(1, 1), (2, 1), (2, 2)]])
        batch = geometry.ring_batch(objects(None, MultiPolygon([holed, box(20, 0, 21, 1)]), Polygon(), box(0, 0, 1, 1)))
        assert batch.ring_feature.tolist() == [1, 1, 1, 3]
        assert batch.ring_is_hole.tolist() == [False, True, False, False]
        assert batch.ring_size.tolist() == [4, 3, 4, 4]
        np.testing.assert_allclose(batch.ring_signed_area, [81, -0.5, 1, 1])

    def test_no_geometry_at_all(self):
        for items in (objects(), objects(None), objects(Polygon())):
            batch = geometry.ring_batch(items)
            assert (batch.n_features, batch.n_rings, batch.n_vertices) == (len(items), 0, 0)

    def test_far_coordinates_keep_their_digits(self):
        batch = geometry.ring_batch(objects(box(5e6, 5e6, 5e6 + 100, 5e6 + 100)))
        assert batch.origin.tolist() == [[5e6 + 50, 5e6 + 50]]
        assert sorted(set(batch.x.tolist())) == [-50.0, 50.0]
