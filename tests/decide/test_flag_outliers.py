"""Robust distances against scikit-learn's estimator, planted outliers, and normal samples without any."""

import pickle

import numpy as np
import pyarrow as pa
import pytest
from scipy import stats
from sklearn.covariance import EmpiricalCovariance, MinCovDet

from geoshape.decide.outliers import DEFAULT_COLUMNS, UnusualOptions, fit_unusual, score_unusual
from geoshape.decide.robust import consistency_factor, distance_limit, fit_ordinary
from geoshape.errors import OptionError

NAMES = tuple("abcdefgh")


def mixed(n_rows, n_columns, seed):
    """Normal rows whose columns go together and differ in scale by a million."""
    rng = np.random.default_rng(seed)
    mixing = rng.normal(size=(n_columns, n_columns)) * 10.0 ** rng.integers(-3, 4, n_columns)
    return rng.normal(size=(n_rows, n_columns)) @ mixing


def fitted(values, level=0.999, seed=0):
    return fit_ordinary(values, NAMES[: values.shape[1]], level=level, seed=seed)


def table_of(values, **more):
    return pa.table({name: values[:, index] for index, name in enumerate(NAMES[: values.shape[1]])} | more)


# scikit-learn


def test_distances_are_those_of_scikit_learn():
    # Rows within a ball and outliers far from it: both reweightings keep the whole ball, and so must agree to rounding.
    rng = np.random.default_rng(5)
    directions = rng.normal(size=(300, 3))
    ball = directions / np.linalg.norm(directions, axis=1, keepdims=True) * rng.uniform(0, 1, (300, 1)) ** (1 / 3)
    values = np.concatenate([ball, rng.normal(50, 1, (30, 3))]) @ np.array([[2.0, 0, 0], [1, 1, 0], [0, 3, 0.1]])
    expected = MinCovDet(random_state=0, support_fraction=0.75).fit(values)
    assert expected.support_.tolist() == [True] * 300 + [False] * 30
    np.testing.assert_allclose(fitted(values).distances(values), expected.mahalanobis(values), rtol=1e-8)


@pytest.mark.parametrize("seed", range(4))
def test_rows_are_added_to_the_subset_of_scikit_learn(seed):
    """Step by step, with scikit-learn's subset of least determinant and its classical estimator."""
    values = mixed(60, 2, seed)
    values = values / values.std(axis=0)
    subset = MinCovDet(random_state=0, support_fraction=0.75).fit(values).raw_support_
    share, limit = 0.75, stats.chi2.ppf(0.975, 2)
    while True:
        distances = EmpiricalCovariance().fit(values[subset]).mahalanobis(values) / consistency_factor(2, share)
        grown = subset | (distances < limit)
        if (grown == subset).all():
            break
        subset, share, limit = grown, 0.975, distance_limit(0.975, 2, int(grown.sum()))
    np.testing.assert_allclose(fitted(values).distances(values), distances, rtol=1e-8)


def test_large_samples_come_near_scikit_learn():
    values = mixed(1400, 3, seed=7)
    expected = MinCovDet(random_state=0, support_fraction=0.75).fit(values).mahalanobis(values)
    np.testing.assert_allclose(fitted(values).distances(values), expected, rtol=0.05, atol=0.05)


@pytest.mark.parametrize("share", [0.5, 0.75, 0.975])
@pytest.mark.parametrize("n_columns", [1, 2, 8])
def test_consistency_factor_by_simulation(n_columns, share):
    """The innermost share of normal rows, its variance stretched by the factor, has variance 1."""
    rows = np.random.default_rng(8).normal(size=(200_000, n_columns))
    inner = rows[np.argsort((rows**2).sum(axis=1))[: int(share * len(rows))]]
    assert consistency_factor(n_columns, share) * inner.var() == pytest.approx(1, abs=0.01)


def test_consistency_factor_of_everything():
    assert consistency_factor(3, 1.0) == 1.0


@pytest.mark.parametrize(("n_columns", "level"), [(1, 0.975), (3, 0.999)])
def test_limit_tends_to_chi_square(n_columns, level):
    assert distance_limit(level, n_columns, 10**7) == pytest.approx(stats.chi2.ppf(level, n_columns), rel=1e-5)
    assert distance_limit(level, n_columns, 30) > distance_limit(level, n_columns, 300)


# Normal samples and planted outliers


@pytest.mark.parametrize(
    ("n_rows", "n_columns", "repeats", "low", "high"),
    [
        # Below a hundred rows the estimate leaves some good rows out, and the rate is above the nominal one.
        (30, 1, 100, (0.020, 0.04), (0.0005, 0.005)),
        (30, 3, 100, (0.020, 0.04), (0.0005, 0.005)),
        (80, 8, 50, (0.020, 0.04), (0.0005, 0.005)),
        (100, 2, 100, (0.023, 0.03), (0.0010, 0.002)),
        (400, 8, 25, (0.023, 0.03), (0.0010, 0.002)),
        (2000, 3, 10, (0.023, 0.03), (0.0010, 0.002)),
    ],
)
def test_normal_samples_are_flagged_at_their_rate(n_rows, n_columns, repeats, low, high):
    """Rates beyond the 97.5 % and the 99.9 % limit lie between bounds, but for what the binomial law allows."""
    tried = n_rows * repeats
    for level, (least, greatest) in ((0.975, low), (0.999, high)):
        flagged = 0
        for seed in range(repeats):
            values = mixed(n_rows, n_columns, seed)
            ordinary = fitted(values, level)
            flagged += int((ordinary.distances(values) > ordinary.limit).sum())
        assert stats.binom.ppf(0.001, tried, least) <= flagged <= stats.binom.ppf(0.999, tried, greatest)


@pytest.mark.parametrize(("n_rows", "n_columns", "share"), [(60, 2, 0.2), (200, 4, 0.2), (1000, 8, 0.15)])
def test_planted_outliers_are_found(n_rows, n_columns, share):
    """A cluster that would hide itself from mean and covariance of all rows."""
    values = np.random.default_rng(9).normal(size=(n_rows, n_columns))
    planted = int(share * n_rows)
    values[:planted] = 0.3 * values[:planted] + 10 / np.sqrt(n_columns)
    ordinary = fitted(values)
    is_unusual = ordinary.distances(values) > ordinary.limit
    assert is_unusual[:planted].all()
    assert is_unusual[planted:].mean() < 0.02
    hidden = EmpiricalCovariance().fit(values).mahalanobis(values)
    assert not (hidden[:planted] > stats.chi2.ppf(0.999, n_columns)).any()


def test_scale_and_mixing_change_nothing():
    values = mixed(300, 3, seed=10)
    turned = values @ np.array([[3.0, 1, 0], [0, 2, 5], [1, 0, 1e3]]) + 1e6
    np.testing.assert_allclose(fitted(turned).distances(turned), fitted(values).distances(values), rtol=1e-5)


def test_order_of_rows_changes_nothing():
    values = mixed(500, 4, seed=11)
    order = np.random.default_rng(0).permutation(500)
    np.testing.assert_allclose(fitted(values[order]).distances(values), fitted(values).distances(values), rtol=1e-9)


def test_large_layers_take_bounded_time():
    values = mixed(100_000, 8, seed=12)
    ordinary = fitted(values, level=0.975)
    assert ordinary.n_rows == len(values)
    rate = (ordinary.distances(values) > ordinary.limit).mean()
    assert rate == pytest.approx(0.025, abs=0.002)


# Columns that cannot be used


@pytest.mark.parametrize(
    ("column", "reason"),
    [
        (np.full(100, 0.1), "c left out, as three quarters of its values are the same"),
        (
            np.where(np.arange(100) < 76, 1.0, np.arange(100)),
            "c left out, as three quarters of its values are the same",
        ),
        (1.0 + np.arange(100) * 1e-15, "c left out, as three quarters of its values are the same"),
        (np.full(100, np.nan), "c left out, as it has no values"),
    ],
)
def test_constant_and_empty_columns_are_left_out(column, reason):
    values = np.column_stack([mixed(100, 2, seed=13), column])
    ordinary = fitted(values)
    assert (ordinary.used, ordinary.dropped, ordinary.reason) == ((0, 1), (reason,), "")
    np.testing.assert_array_equal(ordinary.distances(values), fitted(values[:, :2]).distances(values[:, :2]))


@pytest.mark.parametrize("noise", [0.0, 1e-7])
def test_columns_that_repeat_others_are_left_out(noise):
    values = mixed(200, 2, seed=14) / 1e3
    scaled = values / values.std(axis=0)
    repeat = scaled @ [2.0, -3.0] + noise * np.random.default_rng(0).normal(size=200)
    values = np.column_stack([values, repeat])
    ordinary = fitted(values)
    assert ordinary.used == (0, 1)
    assert ordinary.dropped == ("c left out, as the others tell it already",)


def test_columns_that_repeat_others_in_most_rows_are_left_out():
    values = np.random.default_rng(15).normal(size=(200, 3))
    values[:170, 2] = values[:170, 0] + 2 * values[:170, 1]
    assert fitted(values).dropped == ("c left out, as the others tell it already",)


def test_nothing_varies():
    ordinary = fitted(np.ones((50, 2)))
    assert ordinary.reason == "no score, as no column is left to judge by"
    assert len(ordinary.dropped) == 2
    assert np.isnan(ordinary.distances(np.ones((3, 2)))).all()


@pytest.mark.parametrize(
    ("n_rows", "n_columns", "reason"),
    [
        (0, 2, "no score, as 0 complete rows are fewer than the 30 that 2 columns need"),
        (1, 1, "no score, as 1 complete row is fewer than the 30 that 1 column needs"),
        (29, 1, "no score, as 29 complete rows are fewer than the 30 that 1 column needs"),
        (79, 8, "no score, as 79 complete rows are fewer than the 80 that 8 columns need"),
    ],
)
def test_too_few_rows(n_rows, n_columns, reason):
    assert fitted(mixed(n_rows, n_columns, seed=16)).reason == reason


def test_as_many_rows_as_needed():
    assert fitted(mixed(80, 8, seed=16)).reason == ""


# Classes, nulls, and columns of tables


def zones():
    """Two zones of opposite habits, one too small, and rows without a zone."""
    rng = np.random.default_rng(21)
    means = np.repeat([0.2, 0.8, 0.5, 0.5], [100, 100, 3, 60])
    zone = np.repeat(["fen", "moor", "bog", None], [100, 100, 3, 60])
    values = means[:, None] + rng.normal(0, 0.01, (263, 2))
    values[0] = 0.8  # ordinary on the moor, not in the fen
    return table_of(values, zone=pa.array(zone.tolist()))


def test_each_class_by_its_own():
    rows = zones()
    fit = fit_unusual(rows, UnusualOptions(columns=("a", "b"), within="zone", level=0.9999))
    assert list(fit.classes) == ["bog", "fen", "moor", None]
    scores = score_unusual(rows, fit)
    assert np.flatnonzero(scores.is_unusual).tolist() == [0]
    reason = "no score, as 3 complete rows are fewer than the 30 that 2 columns need"
    assert scores.note[200:203] == [reason] * 3
    assert np.isnan(scores.score[200:203]).all()
    assert [note for i, note in enumerate(scores.note) if not 200 <= i < 203] == [None] * 260
    assert fit.notes == (f"zone bog: {reason}",)
    together = score_unusual(rows, fit_unusual(rows, UnusualOptions(columns=("a", "b"), level=0.9999)))
    assert not together.is_unusual[0]


def test_class_scores_are_those_of_the_class_alone():
    rows = zones()
    scores = score_unusual(rows, fit_unusual(rows, UnusualOptions(columns=("a", "b"), within="zone")))
    alone = rows.slice(100, 100)
    expected = score_unusual(alone, fit_unusual(alone, UnusualOptions(columns=("a", "b"))))
    np.testing.assert_array_equal(scores.score[100:200], expected.score)


def test_rows_without_a_class_are_named():
    rows = zones().slice(255)
    assert fit_unusual(rows, UnusualOptions(columns=("a",), within="zone")).notes == (
        "zone null: no score, as 8 complete rows are fewer than the 30 that 1 column needs",
    )


def test_a_class_that_was_not_fitted():
    fit = fit_unusual(zones(), UnusualOptions(columns=("a",), within="zone"))
    scores = score_unusual(pa.table({"a": [0.5], "zone": ["heath"]}), fit)
    assert scores.note == ["no score, as zone heath is in no row that was fitted"]
    assert not scores.is_unusual.any()


def test_rows_with_nulls_have_no_score():
    values = mixed(50, 2, seed=18)
    values[3, 0], values[7, 1], values[8, 1] = np.nan, np.nan, np.inf
    scores = score_unusual(table_of(values), fit_unusual(table_of(values), UnusualOptions(columns=("a", "b"))))
    assert np.flatnonzero(np.isnan(scores.score)).tolist() == [3, 7, 8]
    assert [scores.note[i] for i in (3, 7, 8, 9)] == [
        "no score, as a has no usable value",
        "no score, as b has no usable value",
        "no score, as b has no usable value",
        None,
    ]


def test_sizes_enter_as_logarithms():
    rng = np.random.default_rng(19)
    log_area = rng.normal(8, 2, 200)
    rows = pa.table({"area_m2": np.exp(log_area)})
    scores = score_unusual(rows, fit_unusual(rows, UnusualOptions(columns=("area_m2",))))
    plain = fit_ordinary(log_area[:, None], ("a",), level=0.999, seed=0).distances(log_area[:, None])
    np.testing.assert_allclose(scores.score, plain, rtol=1e-9)
    flat = pa.table({"area_m2": [*np.exp(log_area), 0.0]})
    assert score_unusual(flat, fit_unusual(flat, UnusualOptions(columns=("area_m2",)))).note[-1] is not None


def test_default_columns_are_those_at_hand():
    values = mixed(60, 2, seed=20)
    rows = pa.table({"polsby_popper": values[:, 0], "depth": values[:, 1], "axis_ratio": values[:, 1]})
    fit = fit_unusual(rows, UnusualOptions())
    assert fit.columns == ("axis_ratio", "polsby_popper")
    assert set(fit.columns) <= set(DEFAULT_COLUMNS)


def test_a_peaked_middle_is_not_cut_off_bit_by_bit():
    """Three quarters of the rows stay in the estimate, whatever their distribution."""
    values = np.random.default_rng(22).standard_cauchy(size=(400, 2))
    fit = fit_unusual(table_of(values), UnusualOptions(columns=("a", "b")))
    ordinary = fit.classes[None]
    # The mean squared distance of the rows that the covariance is taken from is the number of columns.
    inner = np.sort(ordinary.distances(values))[:300]
    assert inner.mean() <= 2
    is_unusual = ordinary.distances(values) > ordinary.limit
    assert ordinary.n_unusual == is_unusual.sum() < 0.35 * 400
    found = f"all features: {is_unusual.sum()} of 400 lie beyond the limit, as the others are much alike"
    assert fit.notes == (f"{found}; look at the largest scores first, or judge by other columns",)


def test_fits_travel_between_processes():
    rows = zones()
    fit = fit_unusual(rows, UnusualOptions(columns=("a", "b"), within="zone"))
    again = score_unusual(rows, pickle.loads(pickle.dumps(fit)))
    np.testing.assert_array_equal(again.score, score_unusual(rows, fit).score)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"columns": ("aa",)}, "columns: column 'aa' is not in the layer; did you mean a?"),
        ({"within": "zones"}, "within: column 'zones' is not in the layer; did you mean zone?"),
        ({"columns": ("zone",)}, "column 'zone' holds string, not numbers; choose a column of numbers"),
        (
            {"columns": ("axis_azimuth_deg",)},
            "columns: 'axis_azimuth_deg' is a direction, which has no least and greatest",
        ),
        ({"within": "parts"}, "within: column 'parts' holds list"),
        ({}, "columns: none of the usual shape columns is in the layer; name columns to judge by"),
    ],
)
def test_refused_columns(options, message):
    rows = pa.table({"a": [1.0], "zone": ["x"], "axis_azimuth_deg": [1.0], "parts": [[1]]})
    if "within" in options:
        options = {"columns": ("a",), **options}
    with pytest.raises(OptionError) as caught:
        fit_unusual(rows, UnusualOptions(**options))
    assert str(caught.value).startswith(message)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"level": 1.0}, "level = 1.0 cannot be used; give a share between 0.5 and 1, such as 0.999"),
        ({"level": 0.5}, "level = 0.5 cannot be used"),
        ({"seed": -1}, "seed = -1 cannot be used; give a number from 0 to 4294967295"),
        ({"columns": ("b", "a", "b")}, "columns: 'b' is named twice; name each column once"),
    ],
)
def test_refused_options(options, message):
    with pytest.raises(OptionError) as caught:
        UnusualOptions(**options)
    assert str(caught.value).startswith(message)
