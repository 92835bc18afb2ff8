"""Sentences say what the columns hold."""

import numpy as np
import pytest

from geoshape.report import ReportOptions
from geoshape.report.data import View
from geoshape.report.sentences import (
    direction_sentence,
    findings,
    flag_sentence,
    opening,
    prevailing,
    status_counts,
)
from tests.report import made


def view_of(columns, lineage=None):
    return View(made.table_of(columns, lineage=lineage), ReportOptions())


def test_opening_counts_and_sums():
    columns = {"shape_status": ["ok", "repaired", "missing"], "area_m2": [20_000.0, 60_000.0, None]}
    text = opening(view_of(columns, {"input": "a.gpkg", "layer": "ponds"}))
    assert text == (
        "The layer ponds of a.gpkg has 3 rows; 2 of them could be measured. "
        "Together the shapes cover 8 ha, half of them less than 4 ha each."
    )


def test_opening_without_anything():
    assert opening(view_of({"a": np.zeros(0)})) == "The layer has 0 rows."
    assert opening(view_of({"shape_status": ["ok"]})) == "The layer has 1 row; all of them could be measured."


def test_status_counts():
    counts = status_counts(view_of({"shape_status": ["ok", "ok", "empty", None]}))
    assert [(one.status, one.count, one.share, one.is_measured) for one in counts] == [
        ("ok", 2, "50 %", True),
        ("empty", 1, "25 %", False),
        ("unknown", 1, "25 %", False),
    ]


def test_three_shapes_stand_out():
    columns = {
        "name": ["a", "b", "c", "d"],
        "polsby_popper": [0.25, 0.64, 0.5, None],
        "axis_ratio": [0.5, 0.125, 0.9, None],
        "fd_harmonics_95": [3, 7, 7, None],
        "fd_entropy": [1.0, 1.0, 2.0, None],
    }
    compact, elongated, complicated = findings(view_of(columns))
    assert (compact.label, elongated.label, complicated.label) == ("a", "b", "c")
    assert (compact.row, elongated.row, complicated.row) == (0, 1, 2)
    assert "2 times as long as that of a circle of the same area" in compact.text
    assert "Polsby\u2013Popper 0.25; the layer\u2019s median is 0.5" in compact.text
    assert "Its long axis is 8 times its short one (axis ratio 0.12" in elongated.text
    assert "It takes 7 pairs of harmonics" in complicated.text


def test_findings_make_do_with_what_is_there():
    assert findings(view_of({"a": [1.0]})) == ()
    assert findings(view_of({"polsby_popper": [None, None], "axis_ratio": [float("nan"), None]})) == ()
    [indented] = findings(view_of({"convexity": [0.5, 0.8]}))
    assert (indented.title, indented.label) == ("Most indented", "row 1")
    assert "It fills 50 % of its convex hull; the layer\u2019s median is 65 %." in indented.text


@pytest.mark.parametrize(
    ("flags", "text"),
    [
        ([0, 0], "None of the 2 shapes is flagged."),
        ([1, 0, 0, 0], "1 shape of 4 is flagged (25 %)."),
        ([1, 1, 1, 0], "3 shapes of 4 are flagged (75 %)."),
    ],
)
def test_share_flagged(flags, text):
    assert flag_sentence(view_of({"flag": flags})) == text


def test_layers_without_flags_or_azimuths_say_nothing_of_them():
    assert flag_sentence(view_of({"a": [1]})) is None
    assert direction_sentence(view_of({"a": [1]})) is None
    assert direction_sentence(view_of({"axis_azimuth_deg": [10.0, 20.0]})) is None


def test_a_direction_that_prevails():
    view = view_of({"axis_azimuth_deg": [40.0, 50.0] * 20})
    assert direction_sentence(view) == (
        "The long axes prefer one direction: north-east\u2013south-west, 45\u00b0 on average "
        "(Rayleigh test on doubled angles, R = 0.98, n = 40, p < 0.001)."
    )
    result = prevailing(view)
    # Doubled, the angles lie 10 degrees to either side of their mean.
    assert result.length == pytest.approx(np.cos(np.radians(10.0)))


def test_directions_about_north_do_not_average_to_east():
    assert "north\u2013south, 0\u00b0 on average" in direction_sentence(
        view_of({"axis_azimuth_deg": [5.0, 175.0] * 10})
    )


def test_no_direction_that_prevails():
    azimuths = [0.0, 90.0, 45.0, 135.0, 10.0, 100.0]
    assert direction_sentence(view_of({"axis_azimuth_deg": azimuths})) == (
        "The long axes prefer no direction (Rayleigh test on doubled angles, R = 0.00, n = 6, p = 1)."
    )
