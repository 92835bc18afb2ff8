"""The page in Chromium, without a network: what a reader does, and what happens then."""

import math
import re

import numpy as np
import pytest

from geoshape.report import ReportOptions, build_report
from geoshape.report.data import View
from tests.report import made
from tests.report.conftest import Opened

A4_PIXELS = 680
"""Width of a printed line: 180 mm at 96 to the inch."""

ON_MAP = """(shape) => {
  const map = Bokeh.documents[0].get_model_by_name("map");
  const view = Bokeh.index.get_one_by_id(map.id);
  const { cx, cy } = Bokeh.documents[0].get_model_by_name("shapes").data;
  const box = view.canvas_view.el.getBoundingClientRect();
  return [box.left + view.frame.x_scale.compute(cx[shape]), box.top + view.frame.y_scale.compute(cy[shape])];
}"""


def chosen_rows(opened):
    return opened.do("[...document.querySelectorAll('#shapes-table tr.chosen')].map(row => Number(row.dataset.row))")


def number_of(text):
    """Read a number as the page writes it."""
    plain = text.replace("\u2212", "-").replace("\u202f", "")
    return float(re.match(r"\s*(-?[0-9.]+(?:e-?[0-9]+)?)", plain)[1])


def column(name):
    return made.decided().table.column(name).to_pandas().to_numpy(dtype=float)


@pytest.fixture
def page(opened):
    """The page with nothing selected, and the settings that it opens with."""
    opened.do(
        """() => {
          document.getElementById("clear-choice").disabled = false;
          document.getElementById("clear-choice").click();
          for (const [id, value] of [["table-search", ""], ["table-columns", "main"]]) {
            document.getElementById(id).value = value;
            document.getElementById(id).dispatchEvent(new Event(id === "table-search" ? "input" : "change"));
          }
        }"""
    )
    return opened


def test_opens_without_complaint_and_without_a_request(browser, decided_page):
    opened = Opened(browser, decided_page, viewport={"width": 1000, "height": 800})
    opened.page.wait_for_timeout(200)
    assert opened.complaints == []
    assert [url for url in opened.requests if not url.startswith(("file:", "data:"))] == []
    assert opened.page.title() == "The shapes of lakes"
    opened.close()


def test_selecting_on_the_map_selects_the_row_and_shows_the_shape(page):
    areas = column("area_m2")
    # The largest lake may have an island where the middle of its box is: take one that is nearly a circle.
    shape = int(np.argmax(np.where(column("polsby_popper") > 0.5, areas, 0)))
    page.page.locator(".map .canvas").scroll_into_view_if_needed()
    page.page.mouse.click(*page.do(ON_MAP, shape))
    page.page.wait_for_function("document.querySelectorAll('#shapes-table tr.chosen').length === 1")
    assert chosen_rows(page) == [shape]
    label = View(made.decided(), ReportOptions()).label(shape)
    assert page.text("#closeup-name") == label
    assert page.text("#chosen-text") == f"Selected: {label}."
    assert page.do("document.querySelector('#closeup-drawing .layer.outline path').getAttribute('d').length") > 100


def test_selecting_a_row_selects_on_the_map_and_shows_the_shape(page):
    row = page.page.locator("#shapes-table tbody tr").nth(3)
    row.click()
    shape = int(row.get_attribute("data-row"))
    assert page.do("Bokeh.documents[0].get_model_by_name('shapes').selected.indices") == [shape]
    assert page.text("#closeup-name") == View(made.decided(), ReportOptions()).label(shape)
    assert sum(page.do("Bokeh.documents[0].get_model_by_name('chosen_bars').data.top")) == 1


def test_rows_can_be_selected_with_the_keyboard(page):
    pick = page.page.locator("#shapes-table tbody .pick").nth(1)
    shape = pick.locator("xpath=ancestor::tr").get_attribute("data-row")
    pick.focus()
    page.page.keyboard.press("Enter")
    page.page.wait_for_timeout(100)
    assert chosen_rows(page) == [int(shape)]
    # Focus stays where it was, though the row was drawn anew.
    assert page.do("document.activeElement.closest('tr').dataset.row") == shape


def test_several_rows_with_control(page):
    rows = page.page.locator("#shapes-table tbody tr")
    shapes = [int(rows.nth(place).get_attribute("data-row")) for place in (0, 2)]
    rows.nth(0).click()
    rows.nth(2).click(modifiers=["Control"])
    assert chosen_rows(page) == shapes
    assert page.text("#chosen-text") == "2 shapes selected."
    page.page.locator("#table-only").check()
    assert page.page.locator("#shapes-table tbody tr").count() == 2
    page.page.locator("#table-only").uncheck()


def test_a_bar_of_the_histogram_selects_its_shapes(page):
    page.do("document.getElementById('histogram-column').value = 'axis_ratio'")
    page.do("document.getElementById('histogram-column').dispatchEvent(new Event('change'))")
    page.do("Bokeh.documents[0].get_model_by_name('bars').selected.indices = [0]")
    page.page.wait_for_function("document.querySelectorAll('#shapes-table tr.chosen').length > 0")
    bars = page.do("(d => [d.left[0], d.right[0], d.top[0]])(Bokeh.documents[0].get_model_by_name('bars').data)")
    ratio = column("axis_ratio")
    expected = np.flatnonzero((ratio >= bars[0]) & (ratio < bars[1]))
    assert sorted(page.do("Bokeh.documents[0].get_model_by_name('shapes').selected.indices")) == expected.tolist()
    assert bars[2] == len(expected)


@pytest.mark.parametrize("name", ["area_m2", "axis_ratio"])
def test_sorting_both_ways(page, name):
    title = {"area_m2": "area", "axis_ratio": "axis ratio"}[name]
    head = page.page.locator("#shapes-table thead button", has_text=re.compile(rf"^{title}"))
    order = np.argsort(column(name), kind="stable")
    head.click()
    shown = page.do("[...document.querySelectorAll('#shapes-table tbody tr')].map(row => Number(row.dataset.row))")
    assert shown == order[: len(shown)].tolist()
    assert page.page.locator("th[aria-sort=ascending]").inner_text().startswith(title)
    head.click()
    shown = page.do("[...document.querySelectorAll('#shapes-table tbody tr')].map(row => Number(row.dataset.row))")
    assert shown == order[::-1][: len(shown)].tolist()
    assert page.page.locator("th[aria-sort=descending]").count() == 1


def test_what_has_no_value_comes_last(page):
    page.page.locator("#table-columns").select_option("flag")
    page.page.locator("#shapes-table thead button", has_text="flag score").click()
    first = page.page.locator("#shapes-table tbody tr").first.locator("td").last
    assert number_of(first.inner_text()) == pytest.approx(np.nanmin(column("flag_score")), rel=1e-3)


def test_finding_and_turning_pages(page):
    n = made.decided().n_rows
    page.page.locator("#shapes-table thead button").first.click()
    assert page.text("#table-place") == f"1\u201315 of {n}"
    page.page.locator("#table-after").click()
    assert page.text("#table-place") == f"16\u201330 of {n}"
    page.page.locator("#table-search").fill("<b>bold")
    assert page.page.locator("#shapes-table tbody tr").count() == 1
    page.page.locator("#table-search").fill("nothing is called so")
    assert page.text("#table-place") == "no row"
    page.page.locator("#table-search").fill("")


def test_the_slider_redraws(page):
    page.page.locator("#shapes-table tbody tr").nth(5).click()
    page.page.locator("#harmonics").fill("2")
    before = page.do("document.getElementById('rebuilt-path').getAttribute('d')")
    far = number_of(page.text("#harmonics-text").partition(":")[2].partition("m off")[0])
    page.page.locator("#harmonics").fill("12")
    after = page.do("document.getElementById('rebuilt-path').getAttribute('d')")
    near = number_of(page.text("#harmonics-text").partition(":")[2].partition("m off")[0])
    assert before != after
    assert 0 < near < far
    assert page.do("document.querySelectorAll('#spectrum rect.beyond').length") == 2 * 4


def test_the_rebuilt_outline_comes_close_to_the_outline(page):
    """The drawn harmonics stay as far from the drawn points as the page says."""
    page.page.locator("#layer-points").check()
    page.page.locator("#harmonics").fill("16")
    told = number_of(page.text("#harmonics-text").partition(":")[2].partition("m off")[0])
    # 360 steps and 256 points meet where both are at the same arc length: at every eighth of the outline.
    distance, bar = page.do(
        """() => {
          const numbers = (text) => text.slice(1, -1).split("L").map((pair) => pair.split(",").map(Number));
          const path = numbers(document.getElementById("rebuilt-path").getAttribute("d"));
          const points = [...document.querySelectorAll("#closeup-drawing .points circle")]
            .map((one) => [Number(one.getAttribute("cx")), Number(one.getAttribute("cy"))]);
          const squares = [0, 1, 2, 3, 4, 5, 6, 7].map((i) => {
            const [a, b] = [path[i * path.length / 8], points[i * points.length / 8]];
            return (a[0] - b[0]) ** 2 + (a[1] - b[1]) ** 2;
          });
          const bar = document.querySelector("#closeup-drawing .scale-bar");
          return [Math.sqrt(squares.reduce((a, b) => a + b) / 8),
                  [Number(bar.querySelector("path").getAttribute("d").match(/h([0-9.]+)/)[1]), bar.textContent]];
        }"""
    )
    length = number_of(bar[1]) * (1000 if bar[1].endswith("km") else 1)
    assert distance * length / bar[0] < 4 * told + 2 * length / bar[0]


def test_layers_of_the_drawing_can_be_hidden(page):
    box = page.page.locator("#layer-hull")
    box.uncheck()
    assert not page.page.locator("#closeup-drawing .layer.hull").is_visible()
    box.check()
    assert page.page.locator("#closeup-drawing .layer.hull").is_visible()


def test_numbers_shown_closely_are_those_of_the_columns(page):
    data = made.decided()
    for place in (0, 7):
        row = page.page.locator("#shapes-table tbody tr").nth(place)
        row.click()
        shape = int(row.get_attribute("data-row"))
        shown = page.do(
            """() => Object.fromEntries([...document.querySelectorAll('#closeup-numbers td')]
                 .map((cell) => [cell.dataset.column, [cell.dataset.value, cell.textContent]]))"""
        )
        assert set(shown) == set(data.table.column_names) - {"polsby_popper_se", "polsby_popper_bias"}
        for name in (column.name for column in data.columns):
            value, text = shown[name]
            expected = data.table.column(name)[shape].as_py()
            if expected is None or isinstance(expected, str):
                assert text == (expected or "\u2013")
                continue
            assert float(value) == expected, name
            assert math.isclose(number_of(text), expected, rel_tol=6e-5, abs_tol=0), name
        assert " \u00b1\u00a00.0" in shown["polsby_popper"][1]
        assert shown["polsby_popper"][1].endswith("shift\u00a0\u22120.025")


def test_a_name_full_of_markup_is_text_everywhere(page):
    page.page.locator("#table-search").fill("<img")
    page.page.locator("#shapes-table tbody tr").first.click()
    page.page.locator("#table-search").fill("")
    assert page.text("#closeup-name") == made.MARKUP
    assert page.do("document.querySelectorAll('main img, main b, main i').length") == 0
    assert page.page.title() == "The shapes of lakes"
    assert page.page.locator(".findings .label").first.inner_text() == made.MARKUP


def test_colours_follow_the_column(page):
    page.page.locator("#map-column").select_option("lake <i>type</i>")
    fills = page.do("Bokeh.documents[0].get_model_by_name('shapes').data.fill")
    types = made.decided().table.column("lake <i>type</i>").to_pylist()
    assert len(set(zip(fills, types, strict=True))) == len(set(types)) == len(set(fills))
    assert page.page.locator("#map-legend li").count() == len(set(types))
    page.page.locator("#map-column").select_option("area_m2")
    assert "area, m\u00b2" in page.text("#map-legend")
    assert "logarithmic" in page.text("#map-legend")
    page.page.locator("#map-spread").select_option("rank")
    assert "equal steps of rank" in page.text("#map-legend")
    page.page.locator("#map-spread").select_option("value")
    assert page.page.locator("#histogram-column").input_value() == "area_m2"


def test_shapes_without_a_value_are_hatched(browser, tmp_path):
    path = tmp_path / "parcels.html"
    path.write_text(build_report(made.sample("parcels.gpkg")), encoding="utf-8")
    opened = Opened(browser, path, viewport={"width": 1200, "height": 800})
    unknown = opened.do("Bokeh.documents[0].get_model_by_name('unknown').view.filter.indices")
    areas = made.sample("parcels.gpkg").table.column("area_m2").to_pandas().to_numpy(dtype=float)
    assert unknown == np.flatnonzero(np.isnan(areas)).tolist()
    assert "no value" in opened.text("#map-legend")
    opened.do("(shape) => document.querySelector('#shape-after').click()")
    opened.page.locator("#table-search").fill(View(made.sample("parcels.gpkg"), ReportOptions()).label(unknown[0]))
    opened.page.locator("#shapes-table tbody tr").first.click()
    assert opened.page.locator("#closeup-missing").is_visible()
    assert opened.text("#closeup-missing").startswith("Nothing to draw: ")
    assert opened.complaints == []
    opened.close()


def test_small_outlines_lead_to_the_shape(page):
    tile = page.page.locator("#range .tile button").nth(4)
    label = tile.locator(".label").inner_text()
    tile.click()
    assert page.text("#closeup-name") == label
    assert page.do("document.activeElement.id") == "closeup-name"


def test_any_column_has_a_contact_sheet(page):
    page.page.locator("#sheet-column").select_option("reock")
    captions = page.page.locator("#sheet-any .value").all_inner_texts()
    reock = np.sort(column("reock"))
    assert [number_of(text) for text in captions[:3]] == pytest.approx(reock[:3], abs=1e-3)
    assert [number_of(text) for text in captions[-3:]] == pytest.approx(reock[-3:], abs=1e-3)


def test_one_scale_makes_small_shapes_small(page):
    page.page.locator("#one-scale").check()
    scales = page.do(
        """() => [...document.querySelectorAll('#range .sheet')][0].querySelectorAll('path').values()
             .map((path) => new DOMMatrix(getComputedStyle(path).transform).a).toArray()"""
    )
    assert max(scales) == 1
    assert min(scales) < 0.2
    page.page.locator("#one-size").check()


def test_the_map_keeps_its_aspect(page):
    for width in (1440, 800):
        page.page.set_viewport_size({"width": width, "height": 900})
        page.page.wait_for_timeout(300)
        x, y = page.do(
            """() => {
              const map = Bokeh.documents[0].get_model_by_name("map");
              return [(map.x_range.end - map.x_range.start) / map.inner_width,
                      (map.y_range.end - map.y_range.start) / map.inner_height];
            }"""
        )
        assert x == pytest.approx(y, rel=0.01)
    page.page.set_viewport_size({"width": 1440, "height": 900})


def test_under_a_finger_the_figures_scroll_with_the_page(browser, decided_page):
    opened = Opened(browser, decided_page, viewport={"width": 390, "height": 800}, has_touch=True, is_mobile=True)
    active = opened.do(
        """() => Bokeh.documents[0].get_model_by_name("map").toolbar.tools
             .filter((tool) => tool.active && tool.event_types.includes("pan")).length"""
    )
    assert active == 0
    opened.close()


@pytest.mark.parametrize("width", [390, 768, 1440])
def test_no_page_is_wider_than_the_screen(page, width):
    page.page.set_viewport_size({"width": width, "height": 900})
    assert page.do("document.documentElement.scrollWidth") <= width
    # Nothing but frames that scroll by themselves reaches beyond the edge.
    beyond = page.do(
        """(width) => [...document.querySelectorAll('main *')]
             .filter((one) => !one.closest('.table-frame, .unseen') && one.getBoundingClientRect().right > width + 1)
             .map((one) => one.outerHTML.slice(0, 80))""",
        width,
    )
    assert beyond == []
    page.page.set_viewport_size({"width": 1440, "height": 900})


@pytest.fixture(scope="module")
def on_paper(browser, decided_page):
    """The page as wide as a printed line."""
    found = Opened(browser, decided_page, viewport={"width": A4_PIXELS, "height": 960})
    yield found
    found.close()


def test_prints_on_whole_pages(on_paper):
    sheet = on_paper.page.pdf(prefer_css_page_size=True)
    pages = len(re.findall(rb"/Type\s*/Page\b", sheet))
    sizes = {
        tuple(round(float(side)) for side in box.split()[2:]) for box in re.findall(rb"/MediaBox\s*\[([^\]]*)\]", sheet)
    }
    assert 5 <= pages <= 25
    assert sizes == {(595, 842)}
    assert on_paper.complaints == []


def test_print_has_still_figures_and_no_cut_tables(on_paper):
    on_paper.page.emulate_media(media="print")
    on_paper.do("window.dispatchEvent(new Event('beforeprint'))")
    assert not on_paper.page.locator(".linked").is_visible()
    assert on_paper.page.locator(".paper-map > svg").is_visible()
    assert on_paper.page.locator(".paper-table").is_visible()
    assert on_paper.do("document.documentElement.scrollWidth") <= A4_PIXELS
    assert on_paper.do("[...document.querySelectorAll('details')].every((one) => one.open)")
    cut = on_paper.do(
        """() => [...document.querySelectorAll('table')]
             .filter((one) => one.offsetParent && one.getBoundingClientRect().right > innerWidth + 1)
             .map((one) => one.caption?.textContent)"""
    )
    assert cut == []
    heads = on_paper.do("""() => [...document.querySelectorAll('thead')].map((one) => getComputedStyle(one).display)""")
    assert set(heads) == {"table-header-group"}
    on_paper.page.emulate_media(media="screen")


def test_without_script_the_still_figures_are_there(browser, decided_page):
    context = browser.new_context(offline=True, java_script_enabled=False)
    page = context.new_page()
    page.goto(decided_page.as_uri())
    assert page.locator(".paper-map > svg").is_visible()
    assert not page.locator(".linked").is_visible()
    context.close()


@pytest.mark.parametrize("width", [390, 1440])
def test_axe_finds_no_serious_violation(page, axe, width):
    page.page.set_viewport_size({"width": width, "height": 900})
    page.do(axe)
    found = page.do("axe.run(document, {resultTypes: ['violations']})")
    serious = [
        (one["id"], one["help"], [node["html"][:120] for node in one["nodes"]][:5])
        for one in found["violations"]
        if one["impact"] in {"serious", "critical"}
    ]
    assert serious == []
    assert len(found["passes"]) > 20
    page.page.set_viewport_size({"width": 1440, "height": 900})


@pytest.mark.slow
def test_a_large_layer_opens_in_a_moment(browser, tmp_path):
    path = tmp_path / "many.html"
    path.write_text(build_report(made.many(20_000)), encoding="utf-8")
    opened = Opened(browser, path, viewport={"width": 1440, "height": 900})
    # Figures stand within five seconds on a quiet machine; a renderer that slows down by ten would not be missed.
    assert opened.do("performance.now()") < 30_000
    dots = opened.do("Bokeh.documents[0].get_model_by_name('dots').view.filter.indices.length")
    assert dots == opened.do("Bokeh.documents[0].get_model_by_name('shapes').data.fill.length")
    assert opened.complaints == []
    opened.close()
