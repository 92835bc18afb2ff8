"""Which polygons of two surveys belong together: cells counted one by one agree, and keys are held to their word."""

from itertools import product

import numpy as np
import pyarrow as pa
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import box

from geoshape.decide.compare import CompareOptions, Survey, compare
from geoshape.decide.pairing import Relation, overlaps, pair_by_key, pair_by_overlap
from geoshape.errors import OptionError
from tests import strategies
from tests.decide.test_compare import by_key, compared, objects, surveyed

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


def test_a_moved_polygon_is_followed_where_less_is_asked_for():
    old, new = objects(box(0, 0, 10, 10)), objects(box(6, 0, 16, 10))
    assert pair_by_overlap(old, new).kind.tolist() == [Relation.LOST, Relation.NEW]
    assert pair_by_overlap(old, new, min_share=0.3).kind.tolist() == [Relation.KEPT]


def test_slivers_between_neighbours_tie_nothing():
    old, new = objects(box(0, 0, 10, 10), box(10, 0, 20, 10)), objects(box(0, 0, 10.3, 10), box(10.3, 0, 20, 10))
    assert pair_by_overlap(old, new).kind.tolist() == [Relation.KEPT, Relation.KEPT]


# Pairs by key


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
