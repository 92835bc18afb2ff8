"""Two surveys of the same ground: planted edits come back as relations, and no ground is lost between them."""

from itertools import product

import numpy as np
import pyarrow as pa
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import affinity, box

from geoshape.decide.compare import CompareOptions, Survey, compare
from geoshape.decide.match import MatchOptions
from geoshape.decide.pairing import Relation, overlaps, pair_by_key, pair_by_overlap
from geoshape.errors import OptionError
from tests import strategies


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


# Against cells counted one by one

SIDE = 4


@st.composite
def land_use(draw):
    """Cells of a square grid, each owned by one of a few parcels, or by nobody."""
    return np.array(draw(st.lists(st.integers(-1, 3), min_size=SIDE**2, max_size=SIDE**2)))


def parcels(owner):
    names = [name for name in range(4) if np.any(owner == name)]
    cells = [{int(cell) for cell in np.flatnonzero(owner == name)} for name in names]
    polygons = [
        shapely.union_all([box(c % SIDE, c // SIDE, c % SIDE + 1, c // SIDE + 1) for c in owned]) for owned in cells
    ]
    return cells, polygons


def slow_relations(before, after, min_share):
    """Grow each relation from one parcel, tie by tie."""
    ties = {
        (i, j)
        for (i, a), (j, b) in product(enumerate(before), enumerate(after))
        if a & b and len(a & b) >= min_share * min(len(a), len(b))
    }
    left = {("b", i) for i in range(len(before))} | {("a", j) for j in range(len(after))}
    found = set()
    while left:
        group = {left.pop()}
        while True:
            grown = group | {
                node for i, j in ties if ("b", i) in group or ("a", j) in group for node in (("b", i), ("a", j))
            }
            if grown == group:
                break
            group = grown
        left -= group
        found.add((frozenset(i for side, i in group if side == "b"), frozenset(j for side, j in group if side == "a")))
    return found


@settings(max_examples=80)
@given(land_use(), land_use(), st.sampled_from([0.2, 0.5, 1.0]))
def test_relations_agree_with_counted_cells(old_owner, new_owner, min_share):
    old_cells, old = parcels(old_owner)
    new_cells, new = parcels(new_owner)
    relations = pair_by_overlap(objects(*old), objects(*new), min_share=min_share)
    found = {
        (frozenset(relations.before.of(r).tolist()), frozenset(relations.after.of(r).tolist()))
        for r in range(len(relations))
    }
    assert found == slow_relations(old_cells, new_cells, min_share)
    names = {
        (True, False): {"lost"},
        (False, True): {"new"},
    }
    for r, kind in enumerate(relations.kind):
        n_old, n_new = relations.before.count[r], relations.after.count[r]
        if n_old and n_new:
            several = {
                (False, False): "kept",
                (False, True): "split",
                (True, False): "merged",
                (True, True): "rearranged",
            }
            assert kind == several[bool(n_old > 1), bool(n_new > 1)]
        else:
            assert kind in names[bool(n_old), bool(n_new)]


@settings(max_examples=50)
@given(land_use(), land_use())
def test_no_ground_is_lost_or_counted_twice(old_owner, new_owner):
    """Over all relations, areas before and after add up to the layers', and so do their differences."""
    old_cells, old = parcels(old_owner)
    new_cells, new = parcels(new_owner)
    if not old or not new:
        return
    rows = compared(surveyed(old), surveyed(new))
    n_old, n_new = sum(map(len, old_cells)), sum(map(len, new_cells))
    assert sum(row["area_before_m2"] for row in rows) == pytest.approx(n_old)
    assert sum(row["area_after_m2"] for row in rows) == pytest.approx(n_new)
    assert sum(row["area_m2_before"] or 0 for row in rows) == pytest.approx(n_old)
    assert sum(row["area_m2_after"] or 0 for row in rows) == pytest.approx(n_new)
    kept_or_cut = sum(row["area_m2_difference"] or 0 for row in rows)
    lost = sum(row["area_before_m2"] for row in rows if row["relation"] == "lost")
    new_ground = sum(row["area_after_m2"] for row in rows if row["relation"] == "new")
    assert kept_or_cut - lost + new_ground == pytest.approx(n_new - n_old)
    for row in rows:
        old_set = set().union(*(old_cells[int(i) - 1] for i in (row["before_rows"] or "").split(", ") if i))
        new_set = set().union(*(new_cells[int(i) - 1] for i in (row["after_rows"] or "").split(", ") if i))
        assert row["area_shared_m2"] == pytest.approx(len(old_set & new_set))
        assert row["shared_over_union"] == pytest.approx(len(old_set & new_set) / len(old_set | new_set))


@settings(max_examples=20)
@given(st.lists(strategies.polygons(), min_size=1, max_size=4), st.lists(strategies.stars(), min_size=1, max_size=4))
def test_overlaps_agree_with_one_pair_at_a_time(before, after):
    left, right, shared = overlaps(objects(*before), objects(*after))
    found = {(int(i), int(j)): area for i, j, area in zip(left, right, shared, strict=True)}
    for (i, a), (j, b) in product(enumerate(before), enumerate(after)):
        assert found.get((i, j), 0.0) == pytest.approx(a.intersection(b).area, abs=1e-6)


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


def test_a_moved_polygon_is_followed_where_less_is_asked_for():
    old, new = objects(box(0, 0, 10, 10)), objects(box(6, 0, 16, 10))
    assert pair_by_overlap(old, new).kind.tolist() == [Relation.LOST, Relation.NEW]
    assert pair_by_overlap(old, new, min_share=0.3).kind.tolist() == [Relation.KEPT]


def test_slivers_between_neighbours_tie_nothing():
    old, new = objects(box(0, 0, 10, 10), box(10, 0, 20, 10)), objects(box(0, 0, 10.3, 10), box(10.3, 0, 20, 10))
    assert pair_by_overlap(old, new).kind.tolist() == [Relation.KEPT, Relation.KEPT]


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


# Pairs by key


def by_key(before, after, key="id", **options):
    square = box(0, 0, 1, 1)
    old, new = (Survey(pa.table(table), objects(*[square] * len(table[key]))) for table in (before, after))
    relations = pair_by_key(old.table, new.table, key)
    return compare(old, new, relations, CompareOptions(key=key, **options)).to_pylist()


def test_keys_pair_rows():
    rows = by_key({"id": ["c", "a", "b"], "depth": [1.0, 2.0, 4.0]}, {"id": ["b", "x", "a"], "depth": [5.0, 6.0, None]})
    assert [(row["relation"], row["id"], row["before_rows"], row["after_rows"]) for row in rows] == [
        ("lost", "c", "1", None),
        ("kept", "a", "2", "3"),
        ("kept", "b", "3", "1"),
        ("new", "x", None, "2"),
    ]
    assert [row["depth_difference"] for row in rows] == [None, None, 1.0, None]
    assert [row["depth_ratio"] for row in rows] == [None, None, 1.25, None]


@pytest.mark.parametrize(
    ("before", "after"),
    [
        (pa.array([1, 2], pa.int32()), pa.array([2, 3], pa.int64())),
        (pa.array([1, 2], pa.int64()), pa.array([2.0, 3.0])),
        (pa.array(["1", "2"]), pa.array(["2", "3"], pa.large_string())),
        (pa.array(["1", "2"]).dictionary_encode(), pa.chunked_array([["2"], ["3"]])),
        (pa.array([1, 2], pa.date32()), pa.array([2, 3], pa.date32())),
    ],
)
def test_keys_of_one_kind_pair_whatever_their_type(before, after):
    old, new = pa.table({"id": before}), pa.table({"id": after})
    assert [str(kind) for kind in pair_by_key(old, new, "id").kind] == ["lost", "kept", "new"]
    survey = [Survey(table, objects(box(0, 0, 1, 1), box(2, 0, 3, 1))) for table in (old, new)]
    result = compare(*survey, pair_by_key(old, new, "id"), CompareOptions(key="id"))
    assert [str(value).removesuffix(".0") for value in result["id"].to_pylist()] == [
        str(value).removesuffix(".0") for value in (before[0].as_py(), before[1].as_py(), after[1].as_py())
    ]


@pytest.mark.parametrize(
    ("before", "after", "key", "message"),
    [
        ({"id": [1]}, {"id": [1]}, "idd", r"by \(survey before\): column 'idd' is not in the layer; did you mean id\?"),
        ({"id": [1]}, {"no": [1]}, "id", r"by \(survey after\): column 'id' is not in the layer; there are: no"),
        (
            {"id": [1, None]},
            {"id": [1]},
            "id",
            r"column 'id' is empty in 1 of 2 rows of the survey before \(row 2\); fill",
        ),
        ({"id": [1]}, {"id": [float("nan")]}, "id", "column 'id' is empty in 1 of 1 rows of the survey after"),
        (
            {"id": [1]},
            {"id": [1, 2, 3, 4, 5, 6, 7] * 2},
            "id",
            r"7 values of column 'id' repeat in the survey after \(1, 2, 3, 4, 5, \.\.\.\); take a column",
        ),
        ({"id": ["a", "a"]}, {"id": ["a"]}, "id", r"1 values of column 'id' repeat in the survey before \(a\)"),
        ({"id": [1]}, {"id": ["1"]}, "id", "column 'id' holds int64 before and string after, which are never equal"),
    ],
)
def test_keys_that_cannot_pair(before, after, key, message):
    with pytest.raises(OptionError, match=message):
        pair_by_key(pa.table(before), pa.table(after), key)


# Numbers


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
