"""Statistics by class against scipy, numpy, pandas and examples by hand."""

import csv
import io
import json

import numpy as np
import pandas as pd
import pyarrow as pa
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from geoshape.decide.group_statistics import group_statistics, weighted_means
from geoshape.decide.known import is_additive, is_axial, is_size, known_column
from geoshape.decide.summarise import SummaryOptions, summarise
from geoshape.decide.summary_text import number_text, to_csv, to_json, to_markdown
from geoshape.errors import OptionError

PATCHES = pa.table(
    {
        "habitat": ["fen", "fen", "moor", None, "fen", "fen"],
        "shape_status": ["ok", "repaired", "ok", "ok", "missing", "empty"],
        "area_m2": [100.0, 300.0, 50.0, 10.0, None, None],
        "convexity": [0.5, 0.9, 0.8, 0.7, None, None],
        "hole_count": pa.array([1, 3, 0, 0, None, None]),
        "axis_azimuth_deg": [170.0, 10.0, None, 45.0, None, None],
    }
)


def entry(summary, column, scope="all", **classes):
    """The only row of a summary for a column and a class."""
    wanted = {"column": column, "scope": scope, **classes}
    found = [row for row in summary.statistics.to_pylist() if wanted.items() <= row.items()]
    assert len(found) == 1, found
    return found[0]


def values_of(row, *names):
    return [row[name] for name in names]


# By hand


def test_columns_without_any_value():
    row = entry(summarise(pa.table({"void": pa.nulls(2)}), SummaryOptions(columns=("void",))), "void")
    assert values_of(row, "count", "nulls", "mean") == [0, 2, None]


def test_a_status_that_is_no_text_tells_nothing():
    rows = pa.table({"shape_status": [1, 2], "area_m2": [None, 2.0]})
    assert entry(summarise(rows), "area_m2")["nulls_other"] == 1


def test_numbers_by_hand():
    summary = summarise(PATCHES, SummaryOptions(by=("habitat",)))
    fen = entry(summary, "area_m2", "class", habitat="fen")
    assert values_of(fen, "rows", "count", "nulls", "sum", "mean", "min", "max") == [
        4,
        2,
        2,
        400.0,
        200.0,
        100.0,
        300.0,
    ]
    # (100 * 100 + 300 * 300) / 400; sqrt((100^2 + 100^2) / 1); sd / 200; 100 + 0.05 * 200 and so on.
    assert fen["weighted_mean"] == 250.0
    assert values_of(fen, "sd", "cv") == pytest.approx([np.sqrt(20_000), np.sqrt(0.5)])
    assert values_of(fen, "q05", "q25", "q50", "q75", "q95") == pytest.approx([110, 150, 200, 250, 290])
    assert fen["unit"] == "m2"
    convexity = entry(summary, "convexity", "class", habitat="fen")
    assert convexity["sum"] is None
    assert convexity["weighted_mean"] == pytest.approx((0.5 * 100 + 0.9 * 300) / 400)
    everything = entry(summary, "area_m2")
    assert values_of(everything, "rows", "count", "sum", "habitat") == [6, 4, 460.0, None]
    assert entry(summary, "hole_count")["sum"] == 4.0


def test_nulls_by_status():
    summary = summarise(PATCHES, SummaryOptions(by=("habitat",)))
    fen = entry(summary, "area_m2", "class", habitat="fen")
    assert values_of(fen, "nulls_missing", "nulls_empty", "nulls_other") == [1, 1, 0]
    # The azimuth of the moor is null though its shape was measured: it has no preferred direction.
    moor = entry(summary, "axis_azimuth_deg", "class", habitat="moor")
    assert values_of(moor, "nulls", "nulls_missing", "nulls_empty", "nulls_other") == [1, 0, 0, 1]
    assert "nulls_collapsed" not in summary.statistics.column_names


def test_azimuths_have_no_arithmetic_mean():
    summary = summarise(PATCHES, SummaryOptions(by=("habitat",)))
    fen = entry(summary, "axis_azimuth_deg", "class", habitat="fen")
    assert fen["mean_direction_deg"] == 0.0
    assert fen["resultant_length"] == pytest.approx(np.cos(np.radians(20)))
    assert fen["rayleigh_p"] is None
    assert values_of(fen, "sum", "mean", "weighted_mean", "sd", "cv", "min", "q50", "max") == [None] * 8
    assert entry(summary, "area_m2")["mean_direction_deg"] is None


def test_rayleigh_from_five_axes_on():
    rows = pa.table({"axis_azim": [10.0, 12.0, 9.0, 11.0, 10.0]})
    row = entry(summarise(rows), "axis_azim")
    assert row["mean_direction_deg"] == pytest.approx(10.4, abs=0.001)
    assert 0 < row["rayleigh_p"] < 0.01


def test_bearings_and_axes_that_are_the_users_own():
    rows = pa.table({"wind_deg": [350.0, 10.0], "ridge_deg": [170.0, 10.0], "area_m2": [1.0, 1.0]})
    summary = summarise(rows, SummaryOptions(columns=("area_m2",), axial=("ridge_deg",), bearings=("wind_deg",)))
    assert [variable.name for variable in summary.variables] == ["area_m2", "ridge_deg", "wind_deg"]
    assert entry(summary, "wind_deg")["mean_direction_deg"] == 0.0
    assert entry(summary, "wind_deg")["resultant_length"] == pytest.approx(np.cos(np.radians(10)))
    assert entry(summary, "ridge_deg")["resultant_length"] == pytest.approx(np.cos(np.radians(20)))


def test_rows_without_a_class_stand_for_themselves():
    summary = summarise(PATCHES, SummaryOptions(by=("habitat",), columns=("area_m2",)))
    rows = summary.statistics.select(["scope", "habitat", "sum"]).to_pylist()
    assert rows == [
        {"scope": "class", "habitat": "fen", "sum": 400.0},
        {"scope": "class", "habitat": "moor", "sum": 50.0},
        {"scope": "class", "habitat": None, "sum": 10.0},
        {"scope": "all", "habitat": None, "sum": 460.0},
    ]


def test_weights_leave_out_what_is_null():
    rows = pa.table({"depth": [1.0, 5.0, 100.0, None], "weight": [1.0, 3.0, None, 9.0]})
    summary = summarise(rows, SummaryOptions(columns=("depth",), weights="weight"))
    assert entry(summary, "depth")["weighted_mean"] == 4.0
    assert summary.weights == "weight"
    nothing = pa.table({"depth": [1.0, 5.0], "weight": [0.0, 0.0]})
    found = summarise(nothing, SummaryOptions(columns=("depth",), weights="weight"))
    assert entry(found, "depth")["weighted_mean"] is None


def test_a_layer_without_area_has_no_weighted_mean():
    summary = summarise(pa.table({"depth": [1.0, 5.0]}))
    assert summary.weights is None
    assert entry(summary, "depth")["weighted_mean"] is None


@pytest.mark.parametrize(("name", "weights"), [("shp_area_m2", "shp_area_m2"), ("area_m2", "area_m2")])
def test_area_is_found_behind_a_prefix(name, weights):
    rows = pa.table({"core_area_m2": [1.0, 1.0], name: [1.0, 3.0], "reock": [0.1, 0.5]})
    if name != "area_m2":
        rows = rows.drop_columns("core_area_m2")
    assert summarise(rows).weights == weights


# Degenerate input


def test_one_row():
    row = entry(summarise(PATCHES.slice(0, 1)), "area_m2")
    assert values_of(row, "count", "sum", "mean", "min", "q50", "max") == [1, 100.0, 100.0, 100.0, 100.0, 100.0]
    assert values_of(row, "sd", "cv") == [None, None]


def test_all_null():
    rows = pa.table({"zone": ["a", "a"], "area_m2": pa.nulls(2, pa.float64()), "reock": [np.nan, np.inf]})
    summary = summarise(rows, SummaryOptions(by=("zone",)))
    for column in ("area_m2", "reock"):
        row = entry(summary, column, "class", zone="a")
        assert values_of(row, "rows", "count", "nulls", "nulls_other") == [2, 0, 2, 2]
        assert values_of(row, "sum", "mean", "weighted_mean", "sd", "min", "q05", "max") == [None] * 7


def test_no_rows():
    summary = summarise(PATCHES.slice(0, 0), SummaryOptions(by=("habitat",)))
    assert {row["scope"] for row in summary.statistics.to_pylist()} == {"all"}
    assert entry(summary, "area_m2")["count"] == 0
    assert summary.by == ("habitat",)
    assert summarise(PATCHES.slice(0, 0)).by == ()


def test_constant_columns_have_no_spread():
    row = entry(summarise(pa.table({"reock": [0.1] * 7})), "reock")
    assert values_of(row, "mean", "sd", "cv") == [0.1, 0.0, 0.0]


@pytest.mark.parametrize("values", [[-1.0, -3.0], [-1.0, 1.0]])
def test_no_variation_about_a_mean_that_is_not_positive(values):
    assert entry(summarise(pa.table({"level": values})), "level")["cv"] is None


def test_class_columns_of_any_kind():
    rows = pa.table(
        {
            "year": pa.array([2024, 2023, None, 2024]),
            "is_old": [True, False, True, None],
            "grade": [1.5, np.nan, None, 1.5],
            "kind": pa.array(["b", "a", "b", "a"]).dictionary_encode(),
            "void": pa.nulls(4),
            "area_m2": [1.0, 2.0, 3.0, 4.0],
        }
    )

    def classes(name):
        table = summarise(rows, SummaryOptions(by=(name,), columns=("area_m2",))).statistics
        return [(row[name], row["sum"]) for row in table.to_pylist() if row["scope"] == "class"]

    assert classes("year") == [(2023, 2.0), (2024, 5.0), (None, 3.0)]
    assert classes("is_old") == [(False, 2.0), (True, 4.0), (None, 4.0)]
    assert classes("grade") == [(1.5, 5.0), (None, 5.0)]
    assert classes("kind") == [("a", 6.0), ("b", 4.0)]
    assert classes("void") == [(None, 10.0)]


def test_two_class_columns():
    rows = pa.table({"zone": ["a", "a", "b", "a"], "year": [1, 2, 1, 1], "area_m2": [1.0, 2.0, 3.0, 4.0]})
    summary = summarise(rows, SummaryOptions(by=("zone", "year"), columns=("area_m2",)))
    found = [values_of(row, "zone", "year", "sum") for row in summary.statistics.to_pylist()]
    assert found == [["a", 1, 5.0], ["a", 2, 2.0], ["b", 1, 3.0], [None, None, 10.0]]


def test_class_columns_with_the_name_of_a_field():
    rows = pa.table({"unit": ["x"], "nulls_a": ["y"], "q50": ["z"], "area_m2": [1.0]})
    summary = summarise(rows, SummaryOptions(by=("unit", "nulls_a", "q50")))
    assert summary.by == ("class_unit", "class_nulls_a", "class_q50")
    assert entry(summary, "area_m2", "class", class_unit="x", class_nulls_a="y", class_q50="z")["unit"] == "m2"


def test_batches_and_chunks():
    chunked = pa.concat_tables([PATCHES.slice(0, 2), PATCHES.slice(2)])
    expected = summarise(PATCHES, SummaryOptions(by=("habitat",))).statistics
    assert summarise(chunked, SummaryOptions(by=("habitat",))).statistics == expected
    assert summarise(PATCHES.to_batches()[0], SummaryOptions(by=("habitat",))).statistics == expected


def test_truth_values_have_shares():
    row = entry(summarise(pa.table({"flag": [True, False, None, True]})), "flag")
    assert values_of(row, "count", "sum") == [3, 2.0]
    assert row["mean"] == pytest.approx(2 / 3)


# Columns


def test_default_columns_are_the_measured_ones():
    rows = PATCHES.append_column("depth", pa.array([1.0] * 6)).append_column("ground_distortion", pa.array([0.0] * 6))
    names = [variable.name for variable in summarise(rows).variables]
    assert names == ["area_m2", "convexity", "hole_count", "axis_azimuth_deg"]


def test_numbers_where_nothing_was_measured():
    rows = pa.table({"zone": [1, 2], "depth": [1.0, 2.0], "name": ["a", "b"]})
    assert [variable.name for variable in summarise(rows, SummaryOptions(by=("zone",))).variables] == ["depth"]


@pytest.mark.parametrize(
    ("name", "unit", "axial", "size", "additive"),
    [
        ("area_m2", "m2", False, True, True),
        ("n_parts", "1", False, False, True),
        ("new_perimeter_m", "m", False, True, True),
        ("edge_mean", "m", False, True, False),
        ("fd_harmonics_95", "1", False, False, False),
        ("feret_azim", "deg", True, False, False),
        ("old_axis_azimuth_deg", "deg", True, False, False),
        ("ground_distortion", "deg", False, False, False),
        ("fd_n31", "1", False, False, False),
        ("x_fd_p120", "1", False, False, False),
    ],
)
def test_columns_of_the_registry(name, unit, axial, size, additive):
    column = known_column(name)
    assert (column.unit, is_axial(column), is_size(column), is_additive(column)) == (unit, axial, size, additive)


@pytest.mark.parametrize("name", ["depth", "area", "wind_azimuth_deg", "fd_p2", "fd_p02x", "narea_m2"])
def test_columns_that_the_registry_does_not_know(name):
    assert known_column(name) is None


# Against other libraries

VALUES = st.lists(
    st.tuples(st.one_of(st.none(), st.floats(-1e6, 1e6)), st.floats(0, 100), st.integers(0, 3)), max_size=40
)


@settings(derandomize=True, deadline=None, max_examples=100)
@given(VALUES)
def test_pandas_and_numpy_agree(rows):
    values = np.array([np.nan if value is None else value for value, _, _ in rows])
    weights = np.array([weight for _, weight, _ in rows])
    code = np.array([group for _, _, group in rows], dtype=np.int64)
    shares = (0.0, 0.1, 0.25, 0.5, 0.9, 1.0)
    found = group_statistics(values, code, 4, shares)
    weighted = weighted_means(values, weights, code, 4)
    groups = pd.Series(values, dtype=float).groupby(code)
    for group in range(4):
        own, of = values[code == group], weights[code == group]
        own, of = own[~np.isnan(own)], of[~np.isnan(own)]
        assert found.count[group] == len(own)
        if not len(own):
            assert np.isnan(found.mean[group])
            assert np.isnan(found.quantiles[:, group]).all()
            continue
        assert found.total[group] == pytest.approx(groups.sum()[group], rel=1e-9, abs=1e-6)
        assert found.mean[group] == pytest.approx(groups.mean()[group], rel=1e-9, abs=1e-6)
        assert found.sd[group] == pytest.approx(groups.std()[group], rel=1e-9, abs=1e-6, nan_ok=True)
        assert (found.low[group], found.high[group]) == (own.min(), own.max())
        np.testing.assert_allclose(found.quantiles[:, group], np.quantile(own, shares), rtol=1e-9, atol=1e-6)
        if of.sum() > 0:
            assert weighted[group] == pytest.approx(np.average(own, weights=of), rel=1e-9, abs=1e-6)


def test_scipy_agrees():
    values = np.random.default_rng(1).lognormal(5, 1, 500)
    row = entry(summarise(pa.table({"area_m2": values})), "area_m2")
    described = stats.describe(values, ddof=1)
    assert row["count"] == described.nobs
    assert (row["min"], row["max"]) == described.minmax
    assert row["mean"] == pytest.approx(described.mean, rel=1e-12)
    assert row["sd"] ** 2 == pytest.approx(described.variance, rel=1e-12)
    assert row["cv"] == pytest.approx(stats.variation(values, ddof=1), rel=1e-12)
    expected = stats.mstats.mquantiles(values, [0.05, 0.25, 0.5, 0.75, 0.95], alphap=1, betap=1)
    assert values_of(row, "q05", "q25", "q50", "q75", "q95") == pytest.approx(expected.tolist(), rel=1e-12)
    axes = np.random.default_rng(2).uniform(0, 60, 500)
    direction = entry(summarise(pa.table({"axis_azimuth_deg": axes})), "axis_azimuth_deg")
    assert direction["mean_direction_deg"] == pytest.approx(stats.circmean(axes, high=180), rel=1e-9)


def test_small_spread_far_from_zero_keeps_its_digits():
    values = 1e9 + np.array([0.0, 1.0, 2.0] * 1000)
    found = group_statistics(values, np.zeros(3000, dtype=np.int64), 1)
    assert found.sd[0] == pytest.approx(np.std([0, 1, 2] * 1000, ddof=1), rel=1e-9)
    assert found.mean[0] == 1e9 + 1


def test_order_of_rows_changes_nothing():
    order = [5, 2, 0, 4, 1, 3]
    options = SummaryOptions(by=("habitat",))
    assert summarise(PATCHES.take(order), options).statistics == summarise(PATCHES, options).statistics


# Refusals


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"by": ("habitats",)}, "by: column 'habitats' is not in the layer; did you mean habitat?"),
        ({"columns": ("area",)}, "columns: column 'area' is not in the layer; did you mean area_m2?"),
        ({"weights": "size"}, "weights: column 'size' is not in the layer; there are: habitat, shape_status, area_m2"),
        ({"axial": ("azimut",)}, "axial: column 'azimut' is not in the layer;"),
        ({"bearings": ("azimut",)}, "bearings: column 'azimut' is not in the layer;"),
        ({"columns": ("habitat",)}, "column 'habitat' holds string, not numbers; choose a column of numbers"),
        ({"weights": "habitat"}, "column 'habitat' holds string, not numbers; choose a column of numbers"),
    ],
)
def test_refused_columns(options, message):
    with pytest.raises(OptionError) as caught:
        summarise(PATCHES, SummaryOptions(**options))
    assert str(caught.value).startswith(message)


def test_columns_that_are_there_twice_are_refused():
    twice = pa.table([pa.array([1.0]), pa.array([2.0])], names=["depth", "depth"])
    with pytest.raises(OptionError, match="columns: column 'depth' is there 2 times; rename all but one"):
        summarise(twice, SummaryOptions(columns=("depth",)))


def test_a_layer_of_many_columns_is_not_listed_whole():
    rows = pa.table({f"column_{i}": [1.0] for i in range(20)})
    with pytest.raises(OptionError, match=r"there are: column_0, .*, column_11 and 8 more$"):
        summarise(rows, SummaryOptions(columns=("xyz",)))
    with pytest.raises(OptionError, match="column 'xyz' is not in the layer; there are no columns"):
        summarise(rows.select([]), SummaryOptions(columns=("xyz",)))


def test_negative_weights_are_refused():
    with pytest.raises(OptionError, match="weights: weight is -2 in row 1; weights cannot be negative"):
        summarise(pa.table({"depth": [1.0, 2.0], "weight": [1.0, -2.0]}), SummaryOptions(weights="weight"))


def test_layers_without_numbers_are_refused():
    with pytest.raises(OptionError, match="columns: the layer has no columns of numbers; measure it first"):
        summarise(pa.table({"name": ["a"]}))


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"quantiles": (0.5, 1.5)}, "quantiles: 1.5 cannot be used; give shares from 0 to 1, such as 0.25"),
        ({"quantiles": (float("nan"),)}, "quantiles: nan cannot be used"),
        ({"by": ("a", "a")}, "by: 'a' is named twice; name each column once"),
        ({"columns": ("a", "a")}, "columns: 'a' is named twice; name each column once"),
        ({"axial": ("a",), "bearings": ("a",)}, "axial: 'a' is named twice; name each column once"),
    ],
)
def test_refused_options(options, message):
    with pytest.raises(OptionError) as caught:
        SummaryOptions(**options)
    assert str(caught.value).startswith(message)


def test_quantiles_are_put_in_order():
    summary = summarise(PATCHES, SummaryOptions(quantiles=(0.975, 0.5, 0.5, 0.0)))
    assert summary.quantiles == ("q00", "q50", "q97_5")
    assert "q25" not in summary.statistics.column_names


# Text


def test_csv_opens_again():
    summary = summarise(PATCHES, SummaryOptions(by=("habitat",)))
    rows = list(csv.DictReader(io.StringIO(to_csv(summary))))
    assert len(rows) == summary.statistics.num_rows == 16
    for row, expected in zip(rows, summary.statistics.to_pylist(), strict=True):
        assert row["habitat"] == (expected["habitat"] or "")
        assert row["mean"] == ("" if expected["mean"] is None else repr(expected["mean"]))
    assert to_csv(summary).endswith("\n")
    assert "\r" not in to_csv(summary)


def test_json_opens_again():
    rows = PATCHES.append_column("day", pa.array([None] * 5 + [19_000], pa.date32()))
    summary = summarise(rows, SummaryOptions(by=("habitat", "day")))
    document = json.loads(to_json(summary))
    assert document["by"] == ["habitat", "day"]
    assert document["weights"] == "area_m2"
    expected = summary.statistics.to_pylist()
    assert len(document["statistics"]) == len(expected)
    assert document["statistics"][0]["day"] == "2022-01-08"
    assert [row["mean"] for row in document["statistics"]] == [row["mean"] for row in expected]


def test_markdown():
    summary = summarise(
        PATCHES, SummaryOptions(by=("habitat",), columns=("area_m2", "axis_azimuth_deg"), quantiles=(0.5,))
    )
    assert to_markdown(summary) == (
        "### area_m2 (m2)\n\n"
        "| habitat | count | null | sum | mean | weighted mean | sd | cv | min | 50 % | max |\n"
        "| --- | ---: | ---: | ---: | ---: | ---: | ---: | ---: | ---: | ---: | ---: |\n"
        "| fen | 2 | 2 (1 empty, 1 missing) | 400 | 200 | 250 | 141.4 | 0.7071 | 100 | 200 | 300 |\n"
        "| moor | 1 | 0 | 50 | 50 | 50 |  |  | 50 | 50 | 50 |\n"
        "| (none) | 1 | 0 | 10 | 10 | 10 |  |  | 10 | 10 | 10 |\n"
        "| (all) | 4 | 2 (1 empty, 1 missing) | 460 | 115 | 223 | 128.7 | 1.119 | 10 | 75 | 300 |\n"
        "\n"
        "### axis_azimuth_deg (deg)\n\n"
        "| habitat | count | null | mean direction | resultant length | Rayleigh p |\n"
        "| --- | ---: | ---: | ---: | ---: | ---: |\n"
        "| fen | 2 | 2 (1 empty, 1 missing) | 0 | 0.9397 |  |\n"
        "| moor | 0 | 1 |  |  |  |\n"
        "| (none) | 1 | 0 | 45 | 1 |  |\n"
        "| (all) | 3 | 3 (1 empty, 1 missing, 1 other) | 14.01 | 0.7096 |  |\n"
    )


def test_markdown_without_classes_and_of_odd_names():
    rows = pa.table({"a|b": ["x|y\nz"], "depth": [2.5]})
    text = to_markdown(summarise(rows, SummaryOptions(by=("a|b",), quantiles=(0.05, 0.975))))
    assert "| a\\|b | count | null | sum | mean | sd | cv | min | 5 % | 97.5 % | max |" in text
    assert "| x\\|y z | 1 | 0 | 2.5 | 2.5 |  |  | 2.5 | 2.5 | 2.5 | 2.5 |" in text
    alone = to_markdown(summarise(rows.select(["depth"])))
    assert alone.startswith("### depth\n\n|  | count | null | sum |")


def test_two_class_columns_in_markdown():
    rows = pa.table({"zone": ["a"], "year": [2024], "depth": [2.5]})
    lines = to_markdown(summarise(rows, SummaryOptions(by=("zone", "year"), columns=("depth",)))).splitlines()
    assert [line[:18] for line in lines[2:]] == [
        "| zone | year | co",
        "| --- | --- | ---:",
        "| a | 2024 | 1 | 0",
        "| (all) |  | 1 | 0",
    ]


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, ""),
        (0, "0"),
        (12345678, "12345678"),
        (-12345.6, "-12346"),
        (999.96, "1000"),
        (1e20, "1e+20"),
        (0.5, "0.5"),
    ],
)
def test_numbers_for_readers(value, text):
    assert number_text(value, 4) == text
