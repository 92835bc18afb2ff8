"""Put the page together: one HTML file that opens offline."""

from __future__ import annotations

from dataclasses import dataclass, replace
from importlib.resources import files
from typing import Any

import jinja2
import numpy as np

import geoshape
from geoshape.columns import Kind
from geoshape.report import methods, plates, sentences
from geoshape.report.data import ReportData, ReportOptions, View
from geoshape.report.flags import flag_list
from geoshape.report.linked import linked_figures
from geoshape.report.payload import page_data
from geoshape.report.placing import CloseUps, MapPlane, place_close_ups, place_on_map
from geoshape.report.sampling import Sample, choose_rows, is_flagged
from geoshape.report.sheet import Sheet, Tile, small_paths
from geoshape.report.wording import NULL, count_text, date_text, number_text, plain_name, unit_text, whole_text
from geoshape.rings import IntArray

MAX_PAGE_BYTES = 15_000_000
"""A page must open in a moment; a larger one is made again with fewer shapes."""

FINDING_HALF = 360
"""Half the side of the large outlines, in the units of their drawing."""

WIDE_RATIO = 1.5
"""Width over height from which the map takes the whole width of the page."""

PRINTED_ROWS = 100
PRINTED_COLUMNS = 7

SCRIPTS = ("values", "selection", "figures", "table", "closeup", "sheet")
STYLES = ("screen", "print")

LAYERS = (
    ("outline", "outline", True),
    ("hull", "convex hull", True),
    ("circle", "smallest circle", True),
    ("rectangle", "smallest rectangle", False),
    ("axes", "principal axes", True),
    ("points", "arc-length points", False),
    ("rebuilt", "rebuilt outline", True),
)
"""What the close-up draws: name, words, and whether it is drawn at first."""


def build_report(data: ReportData, options: ReportOptions | None = None) -> str:
    """Write the report of a measured layer as one HTML page.

    Parameters
    ----------
    data : ReportData
    options : ReportOptions, optional

    Returns
    -------
    str
        The page. It needs no other file and no network. With more rows than ``options.max_rows``, or a page beyond
        15 MB, map and table show a stated choice of rows; statistics are of all rows in any case.

    Raises
    ------
    OptionError
        A column named in the options is not there.

    Examples
    --------
    >>> import pyarrow as pa
    >>> table = pa.table({"name": ["<b>pond</b>"]})
    >>> page = build_report(ReportData(table, pa.array([None], pa.binary()), None, {}, ()))
    >>> "<b>pond</b>" in page
    False
    """
    options = options or ReportOptions()
    while True:
        page = _page(View(data, options))
        if len(page.encode()) <= MAX_PAGE_BYTES or options.max_rows == 1:
            return page
        shown = min(options.max_rows, data.n_rows)
        options = replace(options, max_rows=max(2 * shown // 3, 1))


def _page(view: View) -> str:
    sample = choose_rows(view)
    shapes = place_close_ups(view, sample.rows)
    plane = place_on_map(view, sample.rows)
    sheet = Sheet(view, sample.rows, shapes)
    found = sentences.findings(view)
    classes = plates.class_column(view)
    content: dict[str, Any] = {
        "version": geoshape.__version__,
        "title": _title(view),
        "day": date_text(view.data.lineage.get("started")),
        "opening": sentences.opening(view),
        "findings": [(finding, _tile(finding, sample.rows, shapes)) for finding in found],
        "sentences": [text for text in (sentences.flag_sentence(view), sentences.direction_sentence(view)) if text],
        "statuses": sentences.status_counts(view),
        "sample": sample,
        "plane": plane,
        "is_wide": _is_wide(plane),
        "linked": linked_figures(plane),
        "layers": LAYERS,
        "sheet": sheet.of_columns(),
        "has_any_row": bool(view.data.columns) and len(sample.rows) > 0,
        "rose": plates.rose(view),
        "direction": sentences.direction_sentence(view),
        "boxes": plates.box_plots(view),
        "class_title": plain_name(view.by_name[classes], view.prefix) if classes else "",
        "groups": sheet.of_groups(),
        "flags": flag_list(view, sheet),
        "flag_sentence": sentences.flag_sentence(view),
        "facts": methods.facts(view),
        "paragraph": methods.paragraph(view),
        "cautions": methods.cautions(view),
        "formulas": methods.formulas(view),
        "dictionary": methods.dictionary(view),
        "printed_map": plates.printed_map(view, plane, sample.rows),
        "bars": plates.printed_histograms(view),
        "paper_table": _paper_table(view, sample, found),
        "page_data": page_data(view, sample, shapes, plane, found[0].row if found else None),
        "style": "\n".join(_asset(f"{name}.css") for name in STYLES),
        "script": "\n".join(_asset(f"script/{name}.js") for name in SCRIPTS),
    }
    content["contents"] = _contents(content)
    return _environment().get_template("page.html").render(content)


def _environment() -> jinja2.Environment:
    environment = jinja2.Environment(
        loader=jinja2.PackageLoader("geoshape.report"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["whole"] = whole_text
    # Columns and families keep their order.
    environment.policies["json.dumps_kwargs"] = {"sort_keys": False, "separators": (",", ":")}
    return environment


def _asset(name: str) -> str:
    return files("geoshape.report").joinpath("templates", *name.split("/")).read_text(encoding="utf-8")


def _title(view: View) -> str:
    if view.options.title:
        return view.options.title
    name = view.data.lineage.get("layer") or view.data.lineage.get("input")
    return f"The shapes of {name}" if name else "The shapes of a layer"


def _is_wide(plane: MapPlane) -> bool:
    batch = plane.outline
    if not batch.n_rings:
        return False
    origin = batch.origin[batch.vertex_feature]
    return bool(np.ptp(batch.x + origin[:, 0]) > WIDE_RATIO * np.ptp(batch.y + origin[:, 1]))


def _contents(content: dict[str, Any]) -> list[tuple[str, str]]:
    sections = [
        ("findings", "What stands out", True),
        ("map", "The layer", True),
        ("closeup", "One shape, closely", True),
        ("range", "From end to end", True),
        (
            "classes",
            "Directions and classes" if content["boxes"] else "Directions",
            content["rose"] or content["boxes"],
        ),
        ("groups", "Groups", content["groups"]),
        ("flags", "Flags", content["flags"]),
        ("method", "How the numbers were made", True),
        ("dictionary", "Data dictionary", True),
    ]
    return [(anchor, text) for anchor, text, is_there in sections if is_there]


def _tile(finding: sentences.Finding, rows: IntArray, shapes: CloseUps) -> Tile:
    index = int(np.searchsorted(rows, finding.row))
    path = small_paths(shapes.outline, np.array([index]), FINDING_HALF)[0]
    return Tile(index, finding.label, "", path, 1.0, "")


@dataclass(frozen=True)
class _PaperTable:
    caption: str
    heads: tuple[tuple[str, bool], ...]
    rows: tuple[tuple[str, tuple[str, ...]], ...]


def _paper_table(view: View, sample: Sample, found: tuple[sentences.Finding, ...]) -> _PaperTable:
    """Choose the rows that are printed: all of a small layer, else what stands out and what is flagged first."""
    rows = sample.rows
    caption = f"All {count_text(len(rows), 'shape')}"
    if len(rows) > PRINTED_ROWS or not sample.is_whole:
        flagged = is_flagged(view)
        first = [finding.row for finding in found]
        first += [] if flagged is None else np.flatnonzero(flagged)[:PRINTED_ROWS].tolist()
        first += rows[np.unique(np.linspace(0, len(rows) - 1, PRINTED_ROWS).astype(np.int64))].tolist()
        rows = np.sort(np.array(list(dict.fromkeys(first))[:PRINTED_ROWS], dtype=np.int64))
        caption = (
            f"{whole_text(len(rows))} of {count_text(view.data.n_rows, 'shape')}: what stands out, and an even rest"
        )
    names = (
        "shape_status",
        "area_m2",
        "perimeter_m",
        "polsby_popper",
        "axis_ratio",
        "axis_azimuth_deg",
        "fd_departure",
    )
    known = [view.by_name[name] for name in (view.named(bare) for bare in names) if name][:PRINTED_COLUMNS]
    heads = tuple(
        (
            f"{plain_name(field, view.prefix)}{f', {unit_text(field.unit)}' if unit_text(field.unit) else ''}",
            field.kind is not Kind.TEXT,
        )
        for field in known
    )
    cells = []
    for field in known:
        if field.kind is Kind.TEXT:
            cells.append([text or NULL for text in view.texts(field.name, rows)])
        else:
            cells.append([number_text(float(value)) for value in view.numbers(field.name)[rows]])
    labels = [view.label(int(row)) for row in rows]
    return _PaperTable(caption, heads, tuple(zip(labels, zip(*cells, strict=True), strict=True)) if cells else ())
