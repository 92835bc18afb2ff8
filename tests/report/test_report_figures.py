"""The figures for papers."""

import xml.etree.ElementTree as ET

import pytest

from geoshape.report import ReportData, ReportOptions, figures, write_figures
from tests.report import made

SVG = "{http://www.w3.org/2000/svg}"


@pytest.fixture(scope="module")
def written(tmp_path_factory):
    folder = tmp_path_factory.mktemp("figures") / "new"
    options = ReportOptions(map_column="polsby_popper", class_column="lake <i>type</i>")
    with pytest.MonkeyPatch.context() as patch:
        # As sharp as a paper asks for takes long.
        patch.setattr(figures, "PNG_DPI", 72)
        return folder, write_figures(made.decided(), folder, options)


def texts_of(path):
    return ["".join(element.itertext()).strip() for element in ET.parse(path).iter(f"{SVG}text")]


def test_each_figure_as_svg_and_as_png(written):
    folder, paths = written
    names = ("map", "distributions", "scatter", "sheet", "directions", "classes", "groups")
    assert paths == [folder / f"{name}.{suffix}" for name in names for suffix in ("svg", "png")]
    for path in paths:
        assert path.stat().st_size > 3000
        if path.suffix == ".png":
            assert path.read_bytes().startswith(b"\x89PNG")


def test_text_is_text_with_units(written):
    folder, _ = written
    assert "area (m\u00b2)" in texts_of(folder / "distributions.svg")
    assert "Polsby\u2013Popper" in texts_of(folder / "map.svg")
    assert "5 km" in texts_of(folder / "map.svg")
    assert {"N", "E", "S", "W"} <= set(texts_of(folder / "directions.svg"))


def test_markup_and_formulas_in_names_are_text(written):
    folder, _ = written
    assert any(made.MARKUP in text for text in texts_of(folder / "sheet.svg"))
    assert "lake <i>type</i>" in texts_of(folder / "scatter.svg")


def test_the_same_layer_gives_the_same_svg(tmp_path, monkeypatch):
    monkeypatch.setattr(figures, "PNG_DPI", 50)
    data = made.few()
    columns = tuple(column for column in data.columns if column.name in {"polsby_popper", "axis_azimuth_deg"})
    table = data.table.select(["name", "lake_type", *(column.name for column in columns)])
    data = ReportData(table, data.geometry, data.crs_wkt, {}, columns)
    for name in ("once", "again"):
        assert len(write_figures(data, tmp_path / name)) == 10
    for path in (tmp_path / "once").glob("*.svg"):
        assert path.read_text() == (tmp_path / "again" / path.name).read_text()


def test_classes_colour_the_map(tmp_path, monkeypatch):
    monkeypatch.setattr(figures, "PNG_DPI", 50)
    data = made.few()
    table = data.table.select(["name", "lake_type"])
    data = ReportData(table, data.geometry, data.crs_wkt, {}, ())
    paths = write_figures(data, tmp_path, ReportOptions(map_column="lake_type"))
    assert {path.stem for path in paths} == {"map"}
    assert {"lake type", *table.column("lake_type").to_pylist()} <= set(texts_of(tmp_path / "map.svg"))


def test_only_what_the_layer_has(tmp_path):
    paths = write_figures(made.table_of({"area_m2": [1.0, 1000.0, 3.0]}), tmp_path)
    assert [path.name for path in paths] == ["distributions.svg", "distributions.png"]
    assert write_figures(made.table_of({"a": ["x"]}), tmp_path) == []


def test_shapes_without_any_column(tmp_path):
    data = made.sample("lakes.gpkg")
    data = type(data)(
        data.table.select([]).append_column("name", data.table.column("name")), data.geometry, None, {}, ()
    )
    paths = write_figures(data, tmp_path)
    assert [path.name for path in paths] == ["map.svg", "map.png"]
