"""Which rows a page shows."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geoshape.report import ReportOptions
from geoshape.report.data import View
from geoshape.report.sampling import choose_rows, is_flagged
from geoshape.report.statistics import ends_and_middle
from tests.report import made


def view_of(columns, **options):
    return View(made.table_of(columns), ReportOptions(**options))


def test_all_rows_where_they_fit():
    sample = choose_rows(view_of({"area_m2": [3.0, 1.0, 2.0]}, max_rows=3))
    assert sample.rows.tolist() == [0, 1, 2]
    assert sample.is_whole
    assert sample.statement == "All 3 rows are on the map and listed."


def test_none_at_all():
    sample = choose_rows(view_of({"area_m2": np.zeros(0)}))
    assert len(sample.rows) == 0
    assert sample.is_whole


def test_flagged_extremes_and_a_seeded_rest():
    data = made.many(20_000)
    view = View(data, ReportOptions(max_rows=800))
    sample = choose_rows(view)
    rows = set(sample.rows.tolist())
    flagged = np.flatnonzero(data.table.column("flag").to_numpy())
    assert set(flagged.tolist()) <= rows
    for field in view.numeric:
        for kind in view.ends(field.name):
            assert set(kind.tolist()) <= rows, field.name
    assert np.all(np.diff(sample.rows) > 0)
    assert sample.n_flagged == sample.n_flagged_kept == len(flagged)
    assert f"all {len(flagged)} flagged" in sample.statement
    assert "(seed 0). Statistics are of all rows." in sample.statement
    again = choose_rows(View(data, ReportOptions(max_rows=800)))
    other = choose_rows(View(data, ReportOptions(max_rows=800, seed=1)))
    np.testing.assert_array_equal(again.rows, sample.rows)
    assert set(other.rows.tolist()) != rows


def test_the_choice_grows_for_flags_but_not_without_end():
    random = np.random.default_rng(0)
    columns = {"area_m2": random.random(5000), "flag": np.ones(5000, int), "flag_score": np.arange(5000.0)}
    sample = choose_rows(view_of(columns, max_rows=100))
    assert len(sample.rows) <= 150
    assert 100 < sample.n_flagged_kept < 5000
    assert {4990, 4999} <= set(sample.rows.tolist())
    assert f"{sample.n_flagged_kept} of the 5\u202f000 flagged" in sample.statement


@pytest.mark.parametrize("kind", [bool, int])
def test_prototypes_are_kept(kind):
    columns = {"area_m2": np.random.default_rng(1).random(3000), "is_prototype": (np.arange(3000) == 1234).astype(kind)}
    assert 1234 in choose_rows(view_of(columns, max_rows=50)).rows


@pytest.mark.parametrize(
    ("values", "expected"),
    [
        ([True, False, None], [True, False, False]),
        ([1, 0, None], [True, False, False]),
        (["yes", "no", ""], [True, False, False]),
        ([None, "narrow", None], [False, True, False]),
    ],
)
def test_flags_of_any_type(values, expected):
    assert is_flagged(view_of({"flag": values})).tolist() == expected


def test_no_flags():
    assert is_flagged(view_of({"a": [1]})) is None


@given(st.lists(st.one_of(st.floats(-1e6, 1e6), st.just(float("nan"))), max_size=30), st.integers(1, 5))
@settings(max_examples=100)
def test_ends_are_the_ends(values, count):
    values = np.array(values, dtype=float)
    lowest, typical, highest = ends_and_middle(values, count)
    chosen = np.concatenate((lowest, typical, highest))
    known = values[~np.isnan(values)]
    assert len(np.unique(chosen)) == len(chosen)
    assert not np.isnan(values[chosen]).any()
    assert len(lowest) == min(count, max(len(known) // 3, 1), len(known))
    if len(known):
        assert values[lowest[0]] == known.min()
        assert values[chosen].max() == known.max()
    if len(typical):
        assert np.abs(np.median(known) - values[typical]).min() <= np.diff(np.sort(known), prepend=known.min()).max()
