"""How the numbers were made, as the page tells it."""

from dataclasses import asdict

import geopandas as gpd
import numpy as np
import pytest
import shapely

from geoshape.columns import columns_for
from geoshape.options import MeasureOptions
from geoshape.report import ReportOptions
from geoshape.report.data import View
from geoshape.report.methods import cautions, crs_text, dictionary, facts, formulas, paragraph
from tests.report import made


@pytest.fixture(scope="module")
def parcels():
    return View(made.sample("parcels.gpkg"), ReportOptions())


def view_of(columns, lineage=None):
    return View(made.table_of(columns, lineage=lineage), ReportOptions())


def test_facts(parcels):
    told = {fact.term: fact.text for fact in facts(parcels)}
    assert told["Input"] == "parcels.gpkg, layer parcels"
    assert told["Rows"] == "308: 305 ok, 1 repaired, 1 empty, 1 missing"
    assert told["CRS"] == "SWEREF99 TM (EPSG:3006)"
    assert told["Measured"] == "9 March 2026, in 1.5 s"
    assert told["Largest angular deformation"].startswith("under 0.001\u00b0, in ")
    assert "samples: 256; harmonics: 8" in told["Options"]
    assert told["Versions"].startswith("geoshape ")


def test_facts_leave_out_what_is_not_known():
    told = {fact.term: fact.text for fact in facts(view_of({"a": [1]}))}
    assert told == {
        "Rows": "1",
        "CRS": "none: the coordinates were taken as they are",
        "Ground": "not recorded",
        "Largest angular deformation": "not known",
    }


def test_options_of_decisions_are_told():
    told = {fact.term: fact.text for fact in facts(View(made.decided(), ReportOptions()))}
    rule = "(name: narrow; rule: axis_ratio < 0.35; message: too <b>narrow</b>)"
    assert told["Options"].startswith(f"rules: {rule}; unusual: (columns: axis_ratio, reock); measure: (")


def test_large_deformations_are_told():
    view = view_of({"ground_distortion": [0.5, 2.25, None], "name": ["a", "b", "c"]})
    [text] = [fact.text for fact in facts(view) if fact.term == "Largest angular deformation"]
    assert text == "2.25\u00b0, in b; above 1\u00b0 in 1 shape"
    assert "Angular deformation on it is at most 2.25\u00b0." in paragraph(view)
    assert "1 shape (33 %) has such an extent that the ground bends it by over 1\u00b0." in cautions(view)


def test_every_source_is_in_the_paragraph(parcels):
    text = paragraph(parcels)
    assert text.startswith(
        "The shapes of 308 polygons of the layer parcels (parcels.gpkg, SWEREF99 TM (EPSG:3006)) were"
    )
    assert "on 9 March 2026" in text
    assert "Ground: centred (a plane for each shape)." in text
    assert "from 256 points at equal arc length" in text
    assert "1 invalid geometry had to be repaired; 2 rows could not be measured and have nulls." in text
    for column in columns_for(MeasureOptions()):
        for source in filter(None, column.source.split("; ")):
            assert source in text


def test_paragraph_of_an_exact_spectrum():
    options = MeasureOptions(spectrum="exact", families=("spectrum",))
    data = made.report_data(made.squares(2), options, ground="plane")
    text = paragraph(View(data, ReportOptions()))
    assert "Fourier descriptors describe the exterior of the largest part of each shape, in closed form." in text
    assert "Ground: plane." in text


def test_paragraph_without_spectrum_or_lineage():
    text = paragraph(view_of({"area_m2": [1.0]}))
    assert text == (
        "The shapes of 1 polygon were measured with geoshape. "
        "Areas exclude holes; perimeters include them; azimuths run clockwise from true north."
    )


def test_cautions_come_from_the_columns():
    columns = {
        "area_m2": [1.0, 1.0, None],
        "perimeter_m": [4.0, 4.0, None],
        "edge_mean_m": [1.0, 1.0, None],
        "part_count": [2, 1, None],
        "vertex_count": [4, 40, 0],
        "axis_strength": [0.05, 0.5, None],
        "axis_azimuth_deg": [1.0, 2.0, None],
    }
    told = cautions(view_of(columns, {"warnings": ("the CRS is old", "the CRS is old")}))
    scale = (
        "Perimeters, and the ratios built on them, grow with the detail of digitising. Compare only layers drawn at "
        "like scales; here nine in ten outlines have mean edges of 1 m to 1 m."
    )
    assert told == (
        "the CRS is old",
        scale,
        "1 shape (33 %) has several parts: spectra describe the largest part, all else every part.",
        "1 shape (33 %) has fewer than 12 vertices: spectra are of corners there.",
        "1 shape (33 %) has hardly a longer axis: azimuths mean little there.",
        "No digitising error was stated, so the numbers come without standard errors.",
        "The test of directions takes shapes as independent; neighbours seldom are.",
    )


def test_cautions_without_edges_and_with_errors():
    columns = {"perimeter_m": [4.0], "perimeter_m_se": [0.1]}
    [scale] = cautions(view_of(columns))
    assert scale.endswith("drawn at like scales.")


def test_every_column_is_in_the_dictionary():
    view = View(made.decided(), ReportOptions())
    listed = [entry.name for _, entries in dictionary(view) for entry in entries]
    assert sorted(listed) == sorted(view.data.table.column_names)
    assert dictionary(view)[-1][0] == "Attributes of the layer"


def test_dictionary_entries():
    view = View(
        made.with_column(
            made.table_of({"area_m2": [1.0, 2.0, None, 5.0], "year": [1999, 2001, 2026, None]}), "x", [None] * 4
        ),
        ReportOptions(),
    )
    entries = {entry.name: entry for _, found in dictionary(view) for entry in found}
    area = entries["area_m2"]
    assert (area.short_name, area.unit, area.bounds, area.nulls) == ("area_m2", "m\u00b2", "\u2265 0", "1")
    assert area.span == "1 \u00b7 2 \u00b7 5"
    assert entries["year"].span == "1999 \u00b7 2001 \u00b7 2026"
    assert entries["year"].short_name == ""
    assert (entries["x"].nulls, entries["x"].span) == ("4", "\u2013")


def test_bounds_of_every_kind():
    view = View(made.report_data(made.squares(3)), ReportOptions())
    bounds = {entry.name: entry.bounds for _, found in dictionary(view) for entry in found}
    assert bounds["reock"] == "0 \u2013 1"
    assert bounds["perimeter_ratio"] == "\u2265 1"
    assert bounds["hu_7"] == ""


def test_formulas_name_every_measured_column(parcels):
    told = dict(formulas(parcels))
    assert set(told) == {
        "Extent",
        "Compactness (circle = 1)",
        "Principal axes",
        "Moment invariants",
        "Spectrum of the outline",
    }
    names = [formula.name for found in told.values() for formula in found]
    amplitudes = [name for name in names if name.startswith("fd_p02")]
    assert amplitudes == ["fd_p02 \u2026 fd_n08"]
    measured = [column.name for column in columns_for(MeasureOptions()) if column.family != "record"]
    rest = [name for name in measured if not (name[:4] in {"fd_p", "fd_n"} and name[4:].isdigit())]
    assert set(rest) == set(names) - set(amplitudes)
    assert told["Compactness (circle = 1)"][0].meaning.startswith("4\u00a0\u03c0\u00a0A\u00a0/\u00a0P\u00b2")


def test_crs_without_a_code():
    crs = "+proj=laea +lat_0=10 +lon_0=20 +datum=WGS84 +units=m +type=crs"
    layer = gpd.GeoDataFrame(geometry=[shapely.box(0, 0, 10, 10)], crs=crs)
    assert crs_text(View(made.report_data(layer), ReportOptions())) == "unknown"


def test_lineage_of_a_split_layer_is_told():
    options = asdict(MeasureOptions(parts="split", log_moments=True))
    [text] = [fact.text for fact in facts(view_of({"a": [1]}, {"options": options})) if fact.term == "Options"]
    assert "parts: split" in text
    assert "log moments: yes" in text
    assert "prefix" not in text


def test_nothing_counts_without_values():
    assert cautions(view_of({"part_count": np.zeros(0)})) == (
        "No digitising error was stated, so the numbers come without standard errors.",
    )


@pytest.fixture(scope="module")
def disturbed():
    """Squares whose columns come with standard errors and mean shifts."""
    options = MeasureOptions(position_error_m=0.25, error_runs=8, families=("extent", "compactness"))
    return View(made.report_data(made.squares(3), options), ReportOptions())


def test_errors_of_position_are_a_family_of_their_own(disturbed):
    told = {title: [entry.name for entry in entries] for title, entries in dictionary(disturbed)}
    assert {"area_m2_se", "perimeter_m_bias"} <= set(told["Errors of position"])
    assert "area_m2_se" not in told["Extent"]
    listed = [formula.name for _, found in formulas(disturbed) for formula in found]
    assert "area_m2" in listed
    assert not [name for name in listed if name.endswith(("_se", "_bias"))]


def test_errors_of_position_are_in_the_paragraph(disturbed):
    expected = "Standard errors are of 8 runs in which vertices were moved by a position error of 0.25 m."
    assert expected in paragraph(disturbed)
    assert not [caution for caution in cautions(disturbed) if "No digitising error" in caution]
    assert expected not in paragraph(View(made.report_data(made.squares(3)), ReportOptions()))
