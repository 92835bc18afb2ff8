"""``geoshape report`` and ``geoshape measure --report``."""

import json
from pathlib import Path

import geopandas as gpd
import pytest

SAMPLES = Path(__file__).parents[2] / "sample_layers"


def test_a_page_is_written_and_said(geoshape, tmp_path):
    ran = geoshape("report", SAMPLES / "lakes.gpkg", tmp_path / "page.html", "--title", "Our <lakes>")
    page = (tmp_path / "page.html").read_text()
    assert ran.code == 0
    assert ran.out == ""
    assert "columns measured on the way" in ran.err
    assert "Our &lt;lakes&gt;" in page
    assert all(name in page for name in gpd.read_file(SAMPLES / "lakes.gpkg").name.head(3))


def test_measured_columns_and_their_lineage_are_taken_as_they_are(geoshape, tmp_path):
    geoshape("measure", SAMPLES / "lakes.gpkg", tmp_path / "o.gpkg", "--ground", "layer", "--prefix", "s_", "-q")
    ran = geoshape("report", tmp_path / "o.gpkg", tmp_path / "page.html", "--json")
    record = json.loads(ran.out)
    lakes = gpd.read_file(tmp_path / "o.gpkg")
    assert record["rows"] == len(lakes)
    assert "layer: " in (tmp_path / "page.html").read_text()


def test_measure_writes_a_report_beside_its_output(geoshape, tmp_path):
    ran = geoshape("measure", SAMPLES / "parcels.gpkg", tmp_path / "o.gpkg", "--report", tmp_path / "page.html")
    assert ran.code == 0
    assert "page.html" in ran.err
    assert "<html" in (tmp_path / "page.html").read_text()[:300]


def test_figures_come_as_svg_and_png(geoshape, tmp_path):
    ran = geoshape("report", SAMPLES / "lakes.gpkg", "--figures", tmp_path / "figures")
    kinds = {path.suffix for path in (tmp_path / "figures").iterdir()}
    assert ran.code == 0
    assert kinds == {".svg", ".png"}


@pytest.mark.parametrize(
    ("arguments", "code", "complaint"),
    [
        ((SAMPLES / "lakes.gpkg",), 2, "name a page to write"),
        ((SAMPLES / "lakes.gpkg", "page.txt"), 1, "ends in .html"),
        ((SAMPLES / "lakes.gpkg", "no/folder/page.html"), 1, "does not exist; make it first"),
        (("nowhere.gpkg", "page.html"), 1, "there is no such file"),
        ((SAMPLES / "lakes.gpkg", "page.html", "--by", "habitat"), 2, "habitat"),
    ],
)
def test_what_cannot_be_is_said_in_a_line(geoshape, arguments, code, complaint, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    ran = geoshape("report", *arguments)
    assert ran.code == code
    assert complaint in ran.err
    assert list(tmp_path.iterdir()) == []


def test_a_page_that_is_there_stays_without_overwrite(geoshape, tmp_path):
    page = tmp_path / "page.html"
    page.write_text("old")
    assert geoshape("report", SAMPLES / "lakes.gpkg", page).code == 1
    assert geoshape("measure", SAMPLES / "lakes.gpkg", tmp_path / "o.gpkg", "--report", page).code == 1
    assert page.read_text() == "old"
    assert not (tmp_path / "o.gpkg").exists()
    assert geoshape("report", SAMPLES / "lakes.gpkg", page, "--overwrite").code == 0
    assert page.read_text() != "old"


def test_a_table_without_outlines_has_no_report(geoshape, tmp_path):
    ran = geoshape("measure", SAMPLES / "lakes.gpkg", tmp_path / "o.csv", "--report", tmp_path / "page.html")
    assert ran.code == 2
    assert "CSV holds none" in ran.err
