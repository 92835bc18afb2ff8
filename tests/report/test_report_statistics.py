"""Statistics of the page against NumPy's and against counting by hand."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from geoshape.columns import Column, Kind
from geoshape.report.statistics import (
    MAX_BINS,
    MAX_OUTLIERS,
    box,
    histogram,
    is_logarithmic,
    log_ticks,
    nice_ticks,
    quantiles,
    rose_counts,
)

NUMBERS = st.lists(st.one_of(st.floats(1e-3, 1e6), st.just(float("nan"))), max_size=60).map(np.array)


@given(NUMBERS, st.booleans())
@settings(max_examples=100)
def test_histogram_counts_every_value_once(values, is_log):
    values = values.astype(float)
    counted = histogram(values, is_log=is_log)
    known = values[~np.isnan(values)]
    assert counted.counts.sum() == len(known)
    assert len(counted.counts) <= MAX_BINS
    assert len(counted.edges) == len(counted.counts) + 1
    if len(known):
        along = np.log10(known) if is_log else known
        slack = 1e-9 * max(abs(along).max(), 1.0)
        assert counted.edges[0] <= along.min() + slack
        assert counted.edges[-1] >= along.max() - slack


def test_histogram_as_numpy_counts():
    values = np.random.default_rng(0).normal(size=500)
    counted = histogram(values, is_log=False)
    expected, edges = np.histogram(values, bins=len(counted.counts))
    np.testing.assert_array_equal(counted.counts, expected)
    np.testing.assert_allclose(counted.edges, edges)


def test_a_few_whole_numbers_have_a_bin_each():
    counted = histogram(np.array([1.0, 1.0, 3.0, np.nan]), is_log=False, is_whole=True)
    assert counted.counts.tolist() == [2, 0, 1]
    assert (counted.start, counted.step) == (0.5, 1.0)


def test_one_value_stands_in_the_middle_of_its_bin():
    counted = histogram(np.array([5.0, 5.0]), is_log=False)
    assert counted.counts.tolist() == [2]
    assert counted.edges[0] < 5.0 < counted.edges[1]


@given(NUMBERS)
@settings(max_examples=100)
def test_boxes(values):
    values = values.astype(float)
    one = box("class", values)
    known = values[~np.isnan(values)]
    assert one.count == len(known)
    if not len(known):
        assert np.isnan(one.median)
        return
    assert (one.lower, one.median, one.upper) == tuple(np.percentile(known, (25, 50, 75)))
    reach = 1.5 * (one.upper - one.lower)
    beyond = known[(known < one.lower - reach) | (known > one.upper + reach)]
    assert len(one.outliers) == min(len(beyond), MAX_OUTLIERS)
    assert set(one.outliers) <= set(beyond)
    assert one.low in known
    assert one.high in known


def test_of_many_outliers_the_farthest_are_kept():
    values = np.concatenate((np.zeros(200), np.arange(1.0, 101.0)))
    assert box("class", np.concatenate((values, np.zeros(200)))).outliers.min() == 61.0


@given(st.lists(st.floats(0, 180, exclude_max=True), max_size=50))
@settings(max_examples=100)
def test_roses_count_by_hand(azimuths):
    counts = rose_counts(np.array(azimuths, dtype=float))
    naive = [0] * 18
    for azimuth in azimuths:
        naive[int(((azimuth + 5.0) % 180.0) // 10.0)] += 1
    assert counts.tolist() == naive


@given(st.floats(-1e9, 1e9), st.floats(1e-6, 1e9))
@settings(max_examples=200)
def test_ticks_are_few_round_and_inside(low, width):
    high = low + width
    if not high > low or width < 1e-9 * abs(low):
        return
    ticks = nice_ticks(low, high)
    slack = 1e-6 * width
    assert 1 <= len(ticks) <= 12
    assert all(low - slack <= tick <= high + slack for tick in ticks)
    assert ticks == sorted(ticks)


@pytest.mark.parametrize(("low", "high"), [(1.0, 1e7), (0.02, 0.9), (3.0, 7.0), (1e-9, 1e-3), (0.5, 60.0)])
def test_logarithmic_ticks_are_inside(low, high):
    ticks = log_ticks(low, high)
    assert 2 <= len(ticks) <= 8
    assert all(low <= tick <= high for tick in ticks)


@pytest.mark.parametrize(
    ("values", "unit", "expected"),
    [
        (np.geomspace(1.0, 1000.0, 50), "m2", True),
        ([1.0, 10.0], "m2", False),
        ([0.0, *np.geomspace(1.0, 1000.0, 50)], "m2", False),
        ([-1.0, 1000.0], "m2", False),
        (np.geomspace(0.01, 170.0, 50), "deg", False),
        ([5.0], "m2", False),
        ([np.nan, np.nan], "m2", False),
    ],
)
def test_wide_positive_columns_are_logarithmic(values, unit, expected):
    field = Column("x", "x", Kind.NUMBER, unit, None, None, "", "", "")
    assert is_logarithmic(np.array(values), field) is expected


def test_quantiles():
    np.testing.assert_allclose(quantiles(np.array([0.0, np.nan, 1.0])), np.linspace(0, 1, 101))
    assert np.isnan(quantiles(np.array([np.nan]))).all()
