"""What a report is made from: checks at the border, and how columns are described."""

import datetime as dt
from dataclasses import asdict, replace

import numpy as np
import pyarrow as pa
import pytest

from geoshape.columns import Kind
from geoshape.errors import OptionError
from geoshape.options import MeasureOptions
from geoshape.report import ReportData, ReportOptions
from geoshape.report.data import ATTRIBUTE, ERROR, View
from tests.report import made


def view_of(columns, **options):
    return View(made.table_of(columns), ReportOptions(**options))


def test_table_and_geometry_must_be_of_one_length():
    with pytest.raises(OptionError, match="the table has 2 rows and the geometry 1; give one for each row"):
        ReportData(pa.table({"a": [1, 2]}), pa.array([None], pa.binary()), None, {}, ())


def test_columns_must_be_in_the_table():
    with pytest.raises(OptionError, match="the table has no column value; name only columns that it holds"):
        ReportData(pa.table({"a": [1]}), pa.array([None], pa.binary()), None, {}, (made.NUMBER,))


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"max_rows": 0}, "max_rows = 0 cannot be used; give a number from 1 to 20000"),
        ({"max_rows": 20_001}, "max_rows = 20001 cannot be used"),
        ({"harmonics": 1}, "harmonics = 1 cannot be used; give a number from 2 to 64"),
        ({"seed": -1}, "seed = -1 cannot be used; give 0 or more"),
    ],
)
def test_options_out_of_range(options, message):
    with pytest.raises(OptionError, match=message):
        ReportOptions(**options)


@pytest.mark.parametrize("name", ["label_column", "class_column", "map_column"])
def test_named_columns_must_be_there(name):
    with pytest.raises(OptionError, match=f"{name} = 'x' is no column of the layer; it has: a, b"):
        view_of({"a": [1], "b": [2]}, **{name: "x"})


@pytest.mark.parametrize(
    "geometry",
    [pa.array([b"1", None, b"3"]), pa.chunked_array([[b"1"], [None, b"3"]]), np.array([b"1", None, b"3"], object)],
)
def test_wkb_is_taken_by_row(geometry):
    data = ReportData(pa.table({"a": [1, 2, 3]}), geometry, None, {}, ())
    assert data.wkb(np.array([2, 1])).tolist() == [b"3", None]


def test_kinds_families_and_units_of_all_columns():
    fields = View(made.decided(), ReportOptions()).by_name
    assert fields["area_m2"].unit == "m2"
    assert fields["lake_id"].family == ATTRIBUTE
    assert fields["elevation_m"].kind is Kind.NUMBER
    assert fields["survey_year"].kind is Kind.COUNT
    assert fields["polsby_popper_se"].family == ERROR
    assert fields["polsby_popper_se"].meaning == "standard error of polsby_popper"
    assert fields["polsby_popper_bias"].meaning == "mean shift of polsby_popper"
    assert fields["flag"].family == fields["flag_reasons"].family == "flag"
    assert fields["group"].family == fields["is_prototype"].family == "group"


def test_a_column_that_only_ends_like_an_error_is_an_attribute():
    assert view_of({"house_se": [1.0]}).by_name["house_se"].family == ATTRIBUTE


def test_whole_numbers_beyond_float64_stay_text():
    view = view_of({"key": [2**60 + 1], "small": [2**52]})
    assert view.by_name["key"].kind is Kind.TEXT
    assert view.texts("key") == [str(2**60 + 1)]
    assert view.by_name["small"].kind is Kind.COUNT


def test_null_and_infinity_are_nan():
    numbers = view_of({"value": [1.5, None, float("inf")]}).numbers("value")
    np.testing.assert_array_equal(numbers, [1.5, np.nan, np.nan])


def test_texts_of_all_types():
    day = dt.date(2026, 3, 9)
    view = view_of({"a": [True, None], "b": [day, day], "c": [b"123", None], "d": [[1, 2], None], "e": [2.0, 0.5]})
    assert view.texts("a") == ["yes", None]
    assert view.texts("b") == ["2026-03-09"] * 2
    assert view.texts("c") == ["3 bytes", None]
    assert view.texts("d") == ["[1, 2]", None]
    assert view.texts("e") == ["2", "0.5"]
    assert view.texts("e", np.array([1])) == ["0.5"]


def test_classes_are_columns_of_few_texts():
    n = 40
    view = view_of(
        {
            "one": ["a"] * n,
            "two": ["a", "b"] * (n // 2),
            "many": [str(i) for i in range(n)],
            "thirteen": [f"{i % 13:02d}" for i in range(n)],
            "lists": [[1], [2]] * (n // 2),
            "shape_note": ["a", "b"] * (n // 2),
            "number": [1, 2] * (n // 2),
            "shape_status": ["ok", "empty"] * (n // 2),
            "group": [10, 9] * (n // 2),
        }
    )
    assert view.classes == ("two", "group", "shape_status")
    assert view.levels("group") == ["9", "10"]


@pytest.mark.parametrize(
    ("columns", "label"),
    [
        ({"name": ["Long water"], "id": ["7"]}, "Long water"),
        ({"name": [None], "id": ["7"]}, "row 1"),
        ({"id": ["7"]}, "id 7"),
        ({"patch_id": [7]}, "patch 7"),
        ({"Parcel_ID": ["12-3"]}, "12-3"),
        ({"cover": ["wood"]}, "row 1"),
        ({"area_m2": [1.0]}, "row 1"),
    ],
)
def test_shapes_are_called_by_the_column_that_names_them(columns, label):
    assert view_of(columns).label(0) == label


def test_a_label_column_can_be_named():
    assert view_of({"name": ["a"], "code": ["b"]}, label_column="code").label(0) == "b"


def test_prefix_comes_from_the_columns():
    options = MeasureOptions(prefix="m_")
    view = View(made.report_data(made.squares(2), options), ReportOptions())
    assert view.prefix == "m_"
    assert view.named("area_m2") == "m_area_m2"
    assert view.named("nothing") is None
    np.testing.assert_allclose(view.bare("area_m2"), 100.0, rtol=1e-2)


def test_options_of_the_measurement_come_from_the_lineage_even_below_a_decision():
    options = asdict(MeasureOptions(samples=64, ground="EPSG:6933"))
    data = made.table_of({"a": [1]}, lineage={"options": {"rules": [], "measure": options}})
    assert View(data, ReportOptions()).measure_options.samples == 64
    assert View(data, ReportOptions()).measure_options.ground == "EPSG:6933"


@pytest.mark.parametrize("options", [None, {}, {"samples": "many"}, {"samples": 3}, {"something": 1}])
def test_a_lineage_that_tells_nothing_gives_the_defaults(options):
    data = made.table_of({"a": [1]}, lineage={"options": options})
    assert View(data, ReportOptions()).measure_options == MeasureOptions()


def test_numeric_fields_begin_with_measured_ones():
    names = [field.name for field in View(made.decided(), ReportOptions()).numeric]
    assert names.index("area_m2") < names.index("polsby_popper_se") < names.index("group") < names.index("survey_year")


def test_frozen():
    with pytest.raises(AttributeError):
        replace(ReportOptions()).title = "x"
