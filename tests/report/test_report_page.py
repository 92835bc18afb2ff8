"""The page as a document, read without a browser."""

import base64
import json
from dataclasses import replace
from html.parser import HTMLParser
from itertools import pairwise

import numpy as np
import pyarrow as pa
import pytest

from geoshape.options import MeasureOptions
from geoshape.report import ReportData, ReportOptions, build_report, page
from tests.report import made

VOID = {"meta", "link", "input", "br", "img", "path", "circle", "line", "rect", "stop"}


class Document(HTMLParser):
    """Elements of a page with their attributes and text."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.elements, self.open = [], []
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        element = {"tag": tag, "text": "", **dict(attributes)}
        self.elements.append(element)
        if tag not in VOID:
            self.open.append(element)

    def handle_startendtag(self, tag, attributes):
        self.elements.append({"tag": tag, "text": "", **dict(attributes)})

    def handle_endtag(self, tag):
        if tag in VOID:
            return
        assert self.open.pop()["tag"] == tag, tag

    def handle_data(self, data):
        for element in self.open:
            element["text"] += data

    def all(self, *tags):
        return [element for element in self.elements if element["tag"] in tags]

    def by_id(self, name):
        [found] = [element for element in self.elements if element.get("id") == name]
        return found


def data_of(document):
    return json.loads(document.by_id("page-data")["text"])


@pytest.fixture(scope="module")
def decided():
    return Document(build_report(made.decided(), ReportOptions(class_column="lake <i>type</i>")))


@pytest.fixture(scope="module")
def parcels():
    return Document(build_report(made.sample("parcels.gpkg")))


def test_every_element_is_closed_where_it_was_opened(decided):
    assert decided.open == []


def test_headings_go_down_step_by_step(decided):
    levels = [int(element["tag"][1]) for element in decided.all("h1", "h2", "h3", "h4")]
    assert levels.count(1) == 1
    assert levels[0] == 1
    assert all(following <= level + 1 for level, following in pairwise(levels))


def test_ids_are_there_once_and_references_lead_somewhere(decided):
    ids = [element["id"] for element in decided.elements if "id" in element]
    assert len(ids) == len(set(ids))
    for element in decided.elements:
        for name in ("for", "aria-labelledby", "aria-describedby"):
            for target in element.get(name, "").split():
                assert target in ids, target
        if element.get("href", "").startswith("#"):
            assert element["href"][1:] in ids


def test_contents_name_every_section(decided):
    anchors = [element["href"][1:] for element in decided.all("a") if element["href"] != "#main"]
    assert anchors == [element["id"] for element in decided.all("section")]
    assert {"groups", "flags", "classes"} <= set(anchors)


def test_sections_without_a_subject_are_left_out(parcels):
    anchors = [element["id"] for element in parcels.all("section")]
    assert "groups" not in anchors
    assert "flags" not in anchors


def test_controls_have_labels(decided):
    labelled = {element["for"] for element in decided.all("label") if "for" in element}
    inside = 0
    for control in decided.all("select", "input"):
        if control["id"] not in labelled:
            inside += 1
    # All others stand inside their label: a select or an input to each.
    assert inside == len([element for element in decided.all("label") if "for" not in element])
    for button in decided.all("button"):
        assert button["text"].strip()


def test_pictures_have_names_or_are_left_out_for_readers(decided):
    for picture in decided.all("svg"):
        named = picture.get("aria-label") or picture.get("aria-labelledby")
        assert named or picture.get("aria-hidden") == "true"


def test_tables_have_captions_and_heads(decided):
    tables = decided.all("table")
    assert len(tables) == len(decided.all("caption"))
    assert all(element.get("scope") in {"col", "row"} for element in decided.all("th"))


def test_language_viewport_and_skip_link(decided):
    assert decided.all("html")[0]["lang"] == "en"
    assert [element for element in decided.all("meta") if element.get("name") == "viewport"]
    assert decided.all("a")[0]["href"] == "#main"
    assert len(decided.all("main")) == len(decided.all("header")) == len(decided.all("footer")) == 1


def test_nothing_is_fetched(decided):
    assert not decided.all("img", "iframe", "object", "embed")
    assert all("src" not in element for element in decided.all("script"))
    assert [element["href"] for element in decided.all("link")] == ["data:,"]
    ours = "".join(element["text"] for element in decided.all("style"))
    assert "url(" not in ours
    assert "@import" not in ours


def test_markup_in_values_is_text(decided):
    text = build_report(made.decided())
    for piece in ("<img src=x", "<b>bold</b>", "<i>odd</i>", "<i>type</i>", "<b>narrow</b>"):
        assert piece not in text
    assert "&lt;img src=x onerror=" in text
    assert made.MARKUP in data_of(decided)["labels"]
    assert "By lake <i>type</i>" in [element["text"] for element in decided.all("h3")]


def test_markup_in_title_and_lineage_is_text():
    lineage = {name: f"<u>{name}</u>" for name in ("input", "layer", "ground", "command")}
    lineage |= {
        "warnings": ["<u>warning</u>"],
        "versions": {"<u>tool</u>": "<u>1</u>"},
        "options": {"<u>a</u>": "<u>b</u>"},
    }
    data = replace(made.sample("lakes.gpkg"), lineage=lineage)
    text = build_report(data, ReportOptions(title="<u>title</u>"))
    assert "<u>" not in text
    assert Document(text).all("h1")[0]["text"] == "<u>title</u>"


def test_numbers_on_the_page_are_those_of_the_columns(parcels):
    data = made.sample("parcels.gpkg")
    fields = {field["name"]: field for field in data_of(parcels)["fields"]}
    assert list(fields) == data.table.column_names
    for column in data.columns:
        if column.name in {"shape_status", "shape_note"}:
            assert fields[column.name]["texts"] == data.table.column(column.name).to_pylist()
            continue
        packed = np.frombuffer(base64.b64decode(fields[column.name]["values"]), "<f8")
        expected = data.table.column(column.name).to_pandas().to_numpy(dtype=float)
        np.testing.assert_array_equal(packed, expected)


def column_is_wide(data, name):
    return len(data.table.column(name).unique()) > 10


def test_statistics_are_of_all_rows_where_a_page_shows_some():
    data = made.many(20_000)
    document = Document(build_report(data, ReportOptions(max_rows=800)))
    shown = data_of(document)
    assert shown["count"] <= 1200
    assert shown["allRows"] == 20_000
    fields = {field["name"]: field for field in shown["fields"]}
    assert sum(fields["area_m2"]["bins"]["counts"]) == 20_000
    quantiles = np.frombuffer(base64.b64decode(fields["reock"]["quantiles"]), "<f8")
    expected = np.quantile(data.table.column("reock").to_numpy(), np.linspace(0, 1, 101))
    np.testing.assert_allclose(quantiles, expected)
    assert "Statistics are of all rows." in document.by_id("map")["text"]
    for field in data.columns:
        ends = fields[field.name].get("ends")
        if ends and column_is_wide(data, field.name):
            assert [len(kind) for kind in ends] == [3, 3, 3]


@pytest.mark.slow
def test_a_large_page_stays_under_15_megabytes():
    text = build_report(made.many(50_000))
    assert 1_500_000 < len(text.encode()) < 15_000_000


def test_a_page_that_grows_too_large_is_made_with_fewer_rows(monkeypatch):
    whole = len(build_report(made.many(2000), ReportOptions(max_rows=2000)).encode())
    monkeypatch.setattr(page, "MAX_PAGE_BYTES", whole - 500_000)
    text = build_report(made.many(2000), ReportOptions(max_rows=2000))
    assert len(text.encode()) <= whole - 500_000
    assert data_of(Document(text))["count"] < 2000


def test_a_page_that_cannot_shrink_further_is_given_as_it_is(monkeypatch):
    monkeypatch.setattr(page, "MAX_PAGE_BYTES", 10)
    assert data_of(Document(build_report(made.many(30), ReportOptions(max_rows=3))))["count"] <= 2


@pytest.mark.parametrize(
    "data",
    [
        ReportData(pa.table({"name": pa.array([], pa.string())}), pa.array([], pa.binary()), None, {}, ()),
        ReportData(pa.table({"name": ["a", None]}), pa.array([None, None], pa.binary()), "EPSG:4326", {}, ()),
        made.table_of({"shape_status": ["missing"], "area_m2": [None], "axis_azimuth_deg": [None]}),
        made.table_of({"area_m2": [5.0], "shape_note": ["a note"]}),
    ],
)
def test_layers_with_next_to_nothing_make_a_page(data):
    document = Document(build_report(data))
    assert document.open == []
    assert document.all("h1")[0]["text"] == "The shapes of a layer"


def test_some_families_alone_make_a_page():
    for family in ("extent", "axes", "spectrum", "moments"):
        data = made.report_data(made.squares(4), MeasureOptions(families=(family,), prefix="p_"))
        assert Document(build_report(data)).open == []


def test_the_column_that_colours_the_map_can_be_chosen():
    document = Document(build_report(made.sample("lakes.gpkg"), ReportOptions(map_column="basin")))
    assert data_of(document)["mapColumn"] == "basin"
    legend = [element["text"] for element in document.all("span") if element.get("class") == "paper-key"]
    assert legend == ["lower", "upper"]


def test_long_texts_are_cut():
    data = made.with_column(made.sample("lakes.gpkg"), "remark", ["x" * 500] * made.sample("lakes.gpkg").n_rows)
    fields = {field["name"]: field for field in data_of(Document(build_report(data)))["fields"]}
    assert fields["remark"]["texts"][0] == "x" * 119 + "\u2026"


def test_flags_are_listed_with_their_rules(decided):
    cells = [element["text"] for element in decided.all("td", "th")]
    assert "axis_ratio < 0.35: too <b>narrow</b>" in cells
    assert "narrow; <i>odd</i>; unusual" in cells
    assert "unlike the rest by axis_ratio, reock" in cells


def test_groups_begin_with_their_prototype(decided):
    places = [element["class"] for element in decided.all("li") if element.get("class", "").startswith("tile")]
    assert places.count("tile prototype") == 2
    assert places.index("tile prototype") < places.index("tile member")


def test_errors_stand_by_their_columns(decided):
    fields = {field["name"]: field for field in data_of(decided)["fields"]}
    assert fields["polsby_popper"]["error"] == "polsby_popper_se"
    assert fields["polsby_popper"]["bias"] == "polsby_popper_bias"
    assert "error" not in fields["reock"]
