"""``geoshape inspect``: look at a layer before it is measured."""

from __future__ import annotations

import json
import shlex
import shutil
import sys
import textwrap
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING

import click

from geoshape.cli.choices import assume_crs_option, json_option, no_color_option, source_options
from geoshape.options import Source

if TYPE_CHECKING:
    from geoshape.inspection import CrsVerdict, Findings, Inspection
    from geoshape.layers.layer import LayerInfo

LABEL_WIDTH = 11

TRUE_AREA = 1e-4
"""How far areas may be from true ones and still be called so in a line of words."""


@click.command("inspect")
@source_options
@assume_crs_option
@json_option
@no_color_option
def command(source: Source, assume_crs: str | None, *, as_json: bool) -> None:
    """Look at INPUT: its layers and CRS, what is invalid, empty or doubled, how finely it was drawn.

    Ends with the `measure` line to run.
    """
    from geoshape.inspection import inspect_file

    seen = inspect_file(source, assume_crs=assume_crs)
    if as_json:
        click.echo(json.dumps(_record(seen), indent=2, default=str))
        return
    for label, text in _lines(seen, source):
        for i, line in enumerate(_wrapped(label, text)):
            head = label if i == 0 else ""
            click.echo(f"{click.style(f'{head:<{LABEL_WIDTH}}', bold=bool(head))} {line}")


def _wrapped(label: str, text: str) -> list[str]:
    """Break a line for the terminal; never the line that is there to be copied, nor what goes into a pipe."""
    if label == "next" or not sys.stdout.isatty():
        return [text]
    width = shutil.get_terminal_size().columns - LABEL_WIDTH - 1
    return textwrap.wrap(text, max(width, 20)) or [""]


def _record(seen: Inspection) -> dict[str, object]:
    record: dict[str, object] = {"path": seen.path, "layers": [asdict(layer) for layer in seen.layers]}
    if seen.info is not None and seen.crs is not None and seen.findings is not None:
        record |= {
            "layer": seen.info.layer,
            "format": seen.info.driver,
            "geometry_type": seen.info.geometry_type,
            "attributes": {field.name: str(field.type) for field in seen.info.schema},
            "bounds": seen.info.bounds,
            "crs": asdict(seen.crs),
            **asdict(seen.findings),
        }
    return record


def _lines(seen: Inspection, source: Source) -> list[tuple[str, str]]:
    lines = [("file", seen.path)]
    for i, layer in enumerate(seen.layers):
        count = "" if layer.row_count is None else f", {layer.row_count:,} rows"
        lines.append(("layers" if i == 0 else "", f"{layer.name} ({layer.geometry_type or 'no geometry'}{count})"))
    if seen.info is None or seen.crs is None or seen.findings is None:
        lines.append(("next", "several layers: look at one with --layer NAME"))
        return lines
    lines += _what_it_is(seen.info, seen.crs, seen.findings)
    lines += _what_is_wrong(seen.findings)
    lines += _how_it_was_drawn(seen.findings, "m" if seen.crs.name else "units")
    lines.append(("next", _measure_line(seen, source)))
    return lines


def _what_it_is(info: LayerInfo, crs: CrsVerdict, findings: Findings) -> list[tuple[str, str]]:
    parts = f"{findings.parts:,} parts ({findings.multipart_rows:,} rows with several)"
    holes = f"{findings.holes:,} holes in {findings.holed_rows:,} rows"
    return [
        ("layer", f"{info.layer}, {info.driver}, {findings.rows:,} rows, {len(info.schema)} attributes"),
        ("crs", crs.name or "none: say which with --assume-crs, or measure with --ground plane"),
        *([("areas", _areas(crs))] if crs.name else []),
        ("shapes", f"{parts}, {holes}, {findings.vertices:,} vertices"),
    ]


def _areas(crs: CrsVerdict) -> str:
    remedy = "measure puts each shape on equal-area ground"
    if crs.is_geographic:
        return f"wrong in these coordinates, which count in {crs.unit}s; {remedy}"
    if crs.areal_scale is None:
        return f"not known in these coordinates; {remedy}"
    low, high = crs.areal_scale
    if max(abs(low - 1.0), abs(high - 1.0)) <= TRUE_AREA:
        return f"true in these coordinates to {100.0 * TRUE_AREA:g} %"
    return f"drawn at {100.0 * low:.2f} to {100.0 * high:.2f} % of their true size; {remedy}"


def _what_is_wrong(findings: Findings) -> list[tuple[str, str]]:
    faults = [
        (findings.by_status.get("repaired", 0), "to be repaired for measuring" + _reasons(findings)),
        (findings.by_status.get("missing", 0), "without a geometry"),
        (findings.by_status.get("empty", 0), "with an empty geometry"),
        (findings.by_status.get("not_polygon", 0), "that hold no polygon"),
        (findings.by_status.get("collapsed", 0), "with too few points"),
        (findings.by_status.get("invalid", 0), "with coordinates that cannot be used"),
        (findings.duplicate_rows, "whose outline has been there before"),
        (findings.staircase_rows, "that follow the edges of pixels: their perimeter is about 4/pi too long"),
    ]
    texts = [f"{count:,} {'row' if count == 1 else 'rows'} {what}" for count, what in faults if count]
    return [("faults" if i == 0 else "", text) for i, text in enumerate(texts or ["none found"])]


def _reasons(findings: Findings) -> str:
    return f" ({', '.join(f'{count:,} {reason}' for reason, count in findings.reasons.items())})"


def _how_it_was_drawn(findings: Findings, unit: str) -> list[tuple[str, str]]:
    spacing = findings.spacing
    if spacing is None:
        return []
    low, middle, high = (_figure(value) for value in (spacing.fine, spacing.middle, spacing.coarse))
    return [("vertices", f"{middle} {unit} apart in the median, {low} to {high} {unit} for nine edges in ten")]


def _figure(value: float) -> str:
    """Say a length with three digits that count, without an exponent where it is not tiny."""
    return f"{value:,.0f}" if value >= 100 else f"{value:.3g}"


def _measure_line(seen: Inspection, source: Source) -> str:
    path = Path(str(source.path))
    target = path.with_name(f"{path.name.split('.')[0]}_shape.gpkg").name
    words = ["geoshape", "measure", str(source.path), target]
    if len(seen.layers) > 1 and seen.info is not None:
        words += ["--layer", seen.info.layer]
    if source.where is not None:
        words += ["--where", source.where]
    if source.bbox is not None:
        words += ["--bbox", *(f"{value:g}" for value in source.bbox)]
    line = shlex.join(words)
    return line if seen.crs is not None and seen.crs.name else f"{line} --assume-crs EPSG:..."
