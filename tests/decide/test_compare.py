"""Two surveys of the same ground: planted edits come back as relations, and no ground is lost between them."""

import numpy as np
import pyarrow as pa
import pytest
import shapely
from shapely import affinity, box

from geoshape.decide.compare import CompareOptions, Survey, compare
from geoshape.decide.match import MatchOptions
from geoshape.decide.pairing import pair_by_key, pair_by_overlap
from geoshape.errors import OptionError


def objects(*items):
    array = np.empty(len(items), dtype=object)
    array[:] = items
    return array


def surveyed(polygons, **columns):
    polygons = objects(*polygons)
    return Survey(pa.table({"area_m2": pa.array(shapely.area(polygons), from_pandas=True), **columns}), polygons)


def compared(before, after, *, min_share=0.5, **options):
    relations = pair_by_overlap(before.polygons, after.polygons, min_share=min_share)
    return compare(before, after, relations, CompareOptions(**options)).to_pylist()


# A survey pair with known edits: parcels of 100 m x 60 m on a plane far from its origin.

EAST, NORTH = 431_000.0, 5_270_000.0


def parcel(column, row, width=1.0, height=1.0):
    return box(EAST + 100 * column, NORTH + 60 * row, EAST + 100 * (column + width), NORTH + 60 * (row + height))


OLD = [
    parcel(0, 0),  # kept as it was
    parcel(1, 0),  # its eastern boundary moves west by 10 m
    parcel(3, 0),  # split in three
    parcel(4, 0),  # merged with the next
    parcel(5, 0),
    parcel(0, 2),  # lost
    parcel(2, 2),  # four parcels: cut anew the other way
    parcel(2, 3),
    parcel(5, 3),  # drawn anew 4 m to the south-east
]
NEW = [
    affinity.translate(parcel(5, 3), 4, -4),
    parcel(0, 0),
    parcel(1, 0, 0.9),
    parcel(3, 0, 0.2),
    parcel(3.2, 0, 0.3),
    parcel(3.5, 0, 0.5),
    parcel(4, 0, 2),
    parcel(2, 2, 0.5, 2),
    parcel(2.5, 2, 0.5, 2),
    parcel(8, 8),  # new
]
EXPECTED = {
    ("1", "2"): "kept",
    ("2", "3"): "kept",
    ("3", "4, 5, 6"): "split",
    ("4, 5", "7"): "merged",
    ("6", None): "lost",
    ("7, 8", "8, 9"): "rearranged",
    ("9", "1"): "kept",
    (None, "10"): "new",
}


@pytest.fixture(scope="module")
def edits():
    rows = compared(surveyed(OLD), surveyed(NEW))
    return {(row["before_rows"], row["after_rows"]): row for row in rows}


def test_planted_edits_come_back(edits):
    assert {key: row["relation"] for key, row in edits.items()} == EXPECTED
    # In the order of their first row before; what is new comes last.
    assert list(edits) == list(EXPECTED)
    assert (edits["3", "4, 5, 6"]["before_count"], edits["3", "4, 5, 6"]["after_count"]) == (1, 3)


def test_what_is_shared(edits):
    assert {key: row["shared_over_union"] for key, row in edits.items()} == pytest.approx(
        {
            ("1", "2"): 1.0,
            ("2", "3"): 0.9,
            ("3", "4, 5, 6"): 1.0,
            ("4, 5", "7"): 1.0,
            ("6", None): 0.0,
            ("7, 8", "8, 9"): 1.0,
            ("9", "1"): 96 * 56 / (2 * 6000 - 96 * 56),
            (None, "10"): 0.0,
        },
        abs=1e-9,
    )


def test_shift_and_bearing(edits):
    south_east = edits["9", "1"]
    assert south_east["shift_m"] == pytest.approx(4 * np.sqrt(2), abs=1e-6)
    assert south_east["shift_bearing_deg"] == pytest.approx(135, abs=1e-4)
    west = edits["2", "3"]
    assert (west["shift_m"], west["shift_bearing_deg"]) == pytest.approx((5, 270), abs=1e-6)
    same = edits["1", "2"]
    assert same["shift_m"] == pytest.approx(0, abs=1e-6)
    assert same["shift_bearing_deg"] is None
    assert edits["6", None]["shift_m"] is None


def test_outline_distance(edits):
    assert edits["1", "2"]["outline_distance"] < 1e-6
    assert edits["9", "1"]["outline_distance"] < 1e-6
    assert edits["3", "4, 5, 6"]["outline_distance"] < 1e-6
    assert 0.01 < edits["2", "3"]["outline_distance"] < 0.2
    assert edits[None, "10"]["outline_distance"] is None


def test_areas_are_summed_over_a_relation(edits):
    merged = edits["4, 5", "7"]
    assert (merged["area_m2_before"], merged["area_m2_after"]) == pytest.approx((12_000, 12_000))
    smaller = edits["2", "3"]
    assert smaller["area_m2_difference"] == pytest.approx(-600)
    assert smaller["area_m2_ratio"] == pytest.approx(0.9)
    lost, new = edits["6", None], edits[None, "10"]
    assert (lost["area_m2_after"], lost["area_m2_difference"], lost["area_m2_ratio"]) == (None, None, None)
    assert (lost["area_after_m2"], new["area_before_m2"], new["area_after_m2"]) == (0, 0, pytest.approx(6000))


def test_ground_is_conserved_over_the_planted_relations(edits):
    assert sum(row["area_before_m2"] for row in edits.values()) == pytest.approx(6000 * len(OLD))
    assert sum(row["area_after_m2"] for row in edits.values()) == pytest.approx(sum(p.area for p in NEW))


def test_direction_can_be_made_to_count():
    old, new = surveyed([box(0, 0, 20, 10)]), surveyed([affinity.rotate(box(0, 0, 20, 10), 30)])
    assert compared(old, new)[0]["outline_distance"] < 1e-6
    assert compared(old, new, outline=MatchOptions(keep_direction=True))[0]["outline_distance"] > 0.3
    halved = surveyed([affinity.scale(box(0, 0, 20, 10), 0.5, 0.5)])
    # In units of the survey before.
    assert compared(old, halved, outline=MatchOptions(keep_size=True))[0]["outline_distance"] == pytest.approx(0.5)


def test_the_order_of_rows_changes_no_relation():
    order_old, order_new = (
        np.random.default_rng(1).permutation(len(OLD)),
        np.random.default_rng(2).permutation(len(NEW)),
    )
    rows = compared(surveyed([OLD[i] for i in order_old]), surveyed([NEW[i] for i in order_new]))

    def names(text, order):
        return frozenset() if text is None else frozenset(int(order[int(i) - 1]) + 1 for i in text.split(", "))

    found = {
        (names(row["before_rows"], order_old), names(row["after_rows"], order_new)): row["relation"] for row in rows
    }
    straight = {(names(old, range(99)), names(new, range(99))): kind for (old, new), kind in EXPECTED.items()}
    assert found == straight


# Faults of features


def test_rows_without_polygon_have_no_place():
    bow_tie = shapely.Polygon([(0, 0), (10, 10), (10, 0), (0, 10)])
    old = surveyed([None, bow_tie, shapely.Polygon()])
    new = surveyed([bow_tie, None])
    rows = compared(old, new)
    assert [row["relation"] for row in rows] == ["unplaced", "kept", "unplaced", "unplaced"]
    assert rows[1]["area_shared_m2"] == pytest.approx(50)
    assert (rows[0]["area_before_m2"], rows[0]["shift_m"], rows[0]["shared_over_union"]) == (None, None, None)


def test_a_relation_by_key_may_lack_a_polygon():
    old = surveyed([box(0, 0, 2, 2), None], id=[1, 2])
    new = surveyed([None, box(0, 0, 2, 2)], id=[1, 2])
    rows = compare(old, new, pair_by_key(old.table, new.table, "id"), CompareOptions(key="id")).to_pylist()
    assert [row["relation"] for row in rows] == ["kept", "kept"]
    for row in rows:
        assert (row["area_shared_m2"], row["shift_m"], row["outline_distance"]) == (None, None, None)
        assert row["area_m2_ratio"] is None


def test_empty_surveys():
    nothing, something = surveyed([], id=pa.array([], pa.int64())), surveyed([box(0, 0, 1, 1)], id=[5])
    assert [row["relation"] for row in compared(nothing, something)] == ["new"]
    assert [row["relation"] for row in compared(something, nothing)] == ["lost"]
    assert compared(nothing, nothing) == []
    relations = pair_by_key(nothing.table, something.table, "id")
    assert compare(nothing, something, relations, CompareOptions(key="id"))["id"].to_pylist() == [5]


# Numbers


def by_key(before, after, key="id", **options):
    square = box(0, 0, 1, 1)
    old, new = (Survey(pa.table(table), objects(*[square] * len(table[key]))) for table in (before, after))
    relations = pair_by_key(old.table, new.table, key)
    return compare(old, new, relations, CompareOptions(key=key, **options)).to_pylist()


def test_changes_are_told_by_two_standard_errors():
    """Differences of 3, 4 and 5 with standard errors of 2 * sqrt(2 * 2) / 2 = 2 are 1.5, 2 and 2.5 of them."""
    error = [np.sqrt(2.0)] * 5
    error_after = [np.sqrt(2.0)] * 4 + [None]
    before = {"id": [1, 2, 3, 4, 5], "width": [10.0, 10, 10, None, 10], "width_se": error}
    after = {"id": [1, 2, 3, 4, 5], "width": [13.0, 13.999, 5.0, 30, 99], "width_se": error_after}
    rows = by_key(before, after)
    assert [row["width_changed"] for row in rows] == [False, False, True, None, None]
    assert "width_se_before" not in rows[0]
    assert "width_changed" not in by_key({"id": [1], "width": [2.0]}, {"id": [1], "width": [2.0], "width_se": [1.0]})[0]


def test_errors_of_a_sum_are_those_of_its_parts_together():
    """Parts of 3 and 4 m2 error have 5 m2 together; with 0 on the other side a change above 10 m2 counts."""
    old = Survey(pa.table({"area_m2": [200.0], "area_m2_se": [0.0]}), objects(box(0, 0, 20, 10)))
    for difference, changed in ((9.9, False), (10.1, True)):
        parts = pa.table({"area_m2": [100.0, 100.0 + difference], "area_m2_se": [3.0, 4.0]})
        new = Survey(parts, shapely.box([0, 10], 0, [10, 20], 10))
        row = compared(old, new)[0]
        assert row["relation"] == "split"
        assert row["area_m2_changed"] is changed


def test_shape_numbers_of_several_polygons_are_null_and_sums_are_not():
    old = surveyed([box(0, 0, 20, 10)], axis_ratio=[0.5], people=[9], hole_count=[0])
    new = surveyed([box(0, 0, 10, 10), box(10, 0, 20, 10)], axis_ratio=[1.0, 1.0], people=[4, 8], hole_count=[1, 2])
    row = compared(old, new, sums=("people",))[0]
    assert (row["axis_ratio_before"], row["axis_ratio_after"], row["axis_ratio_difference"]) == (0.5, None, None)
    assert (row["people_after"], row["people_difference"]) == (12, 3)
    assert (row["hole_count_after"], row["hole_count_ratio"]) == (3, None)


def test_a_sum_with_an_unknown_part_is_unknown():
    old = surveyed([box(0, 0, 20, 10)], people=[9])
    new = surveyed([box(0, 0, 10, 10), box(10, 0, 20, 10)], people=pa.array([4, None], pa.int64()))
    assert compared(old, new, sums=("people",))[0]["people_after"] is None


@pytest.mark.parametrize(
    ("before", "after", "difference"), [(179, 1, 2), (1, 179, -2), (0, 90, 90), (90, 0, 90), (10, 40, 30)]
)
def test_azimuths_differ_by_the_smaller_angle(before, after, difference):
    row = by_key({"id": [1], "axis_azimuth_deg": [before]}, {"id": [1], "axis_azimuth_deg": [after]})[0]
    assert row["axis_azimuth_deg_difference"] == pytest.approx(difference)
    assert row["axis_azimuth_deg_ratio"] is None


def test_columns_are_those_of_numbers_that_both_have():
    before = {"id": [1], "a": [1], "b": ["x"], "only": [2.0], "yes": [True]}
    after = {"id": [1], "a": [2.0], "b": ["y"], "yes": [False]}
    names = [name for name in by_key(before, after)[0] if name.endswith("_before")]
    assert names == ["a_before"]
    chosen = by_key(before, after, columns=("yes", "a", "a"))[0]
    assert [name for name in chosen if name.endswith("_before")] == ["yes_before", "a_before"]
    assert (chosen["yes_difference"], chosen["a_ratio"]) == (-1, 2)


def test_surveys_without_numbers_are_compared_by_their_ground():
    rows = by_key({"id": [1]}, {"id": [1]})
    assert rows[0]["shared_over_union"] == 1
    assert not [name for name in rows[0] if name.endswith("_difference")]


@pytest.mark.parametrize(
    ("columns", "message"),
    [
        ({"columns": ("depht",)}, r"columns \(survey before\): column 'depht' is not in the layer; did you mean depth"),
        ({"columns": ("name",)}, "column 'name' holds string, not numbers"),
        ({"sums": ("people",)}, r"sums \(survey before\): column 'people' is not in the layer"),
    ],
)
def test_columns_that_cannot_be_compared(columns, message):
    table = {"id": [1], "depth": [1.0], "name": ["a"]}
    with pytest.raises(OptionError, match=message):
        by_key(table, table, **columns)


@pytest.mark.parametrize("min_share", [0.0, -1.0, 1.1, float("nan")])
def test_shares_that_cannot_be_used(min_share):
    with pytest.raises(OptionError, match=f"min_share = {min_share} cannot be used; give a share above 0"):
        pair_by_overlap(objects(), objects(), min_share=min_share)


def test_mirror_images_are_no_surveys():
    with pytest.raises(OptionError, match="mirror = 'yes' cannot be used between surveys"):
        CompareOptions(outline=MatchOptions(mirror="yes"))


def test_a_key_must_not_be_called_like_a_result():
    with pytest.raises(OptionError, match="the key 'relation' has the name of a column of the result; rename it"):
        by_key({"relation": [1]}, {"relation": [1]}, key="relation")
