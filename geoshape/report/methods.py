"""How the numbers were made: facts, formulas, a paragraph to paste, cautions, and the data dictionary."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from itertools import groupby
from typing import Any

import numpy as np

from geoshape.columns import RECORD, Column, Kind
from geoshape.report.data import ATTRIBUTE, ERROR, View
from geoshape.report.placing import layer_crs
from geoshape.report.sentences import status_counts
from geoshape.report.wording import (
    NULL,
    count_text,
    date_text,
    formula_text,
    length_text,
    number_text,
    share_text,
    unit_text,
    whole_text,
)

NOTABLE_DISTORTION_DEG = 1.0
SMALLEST_TOLD_DEG = 0.001
"""Deformation below which the figure would only distract."""

ROUGH_VERTICES = 12
"""Vertices below which an outline says little about its spectrum."""

ROUND_STRENGTH = 0.1
"""Axis strength below which a direction means little."""

FAMILY_TITLES = {
    RECORD: "Record",
    "extent": "Extent",
    "compactness": "Compactness (circle = 1)",
    "axes": "Principal axes",
    "moments": "Moment invariants",
    "spectrum": "Spectrum of the outline",
    ERROR: "Errors of position",
    "flag": "Flags",
    "group": "Groups",
    "match": "Match to a template",
    ATTRIBUTE: "Attributes of the layer",
}


@dataclass(frozen=True)
class Fact:
    """A term and what is to be said of it."""

    term: str
    text: str


@dataclass(frozen=True)
class Formula:
    """A column's definition and where it was published."""

    name: str
    meaning: str
    source: str


@dataclass(frozen=True)
class Entry:
    """A line of the data dictionary."""

    name: str
    short_name: str
    kind: str
    unit: str
    bounds: str
    meaning: str
    nulls: str
    span: str


def family_title(family: str) -> str:
    """Name a family of columns for a heading."""
    return FAMILY_TITLES.get(family, family.replace("_", " ").capitalize())


def crs_text(view: View) -> str:
    """Name the layer's CRS with its code."""
    crs = layer_crs(view)
    if crs is None:
        return "none: the coordinates were taken as they are"
    code = crs.to_json_dict().get("id") or {}
    return f"{crs.name} ({code['authority']}:{code['code']})" if code else str(crs.name)


def facts(view: View) -> tuple[Fact, ...]:
    """Say from what and how the numbers were made."""
    lineage = view.data.lineage
    found = [
        Fact("Input", _joined((lineage.get("input"), lineage.get("layer") and f"layer {lineage['layer']}"))),
        Fact("Rows", _rows_text(view)),
        Fact("CRS", crs_text(view)),
        Fact("Ground", str(lineage.get("ground") or "not recorded")),
        Fact("Largest angular deformation", _distortion_text(view)),
        Fact("Options", _options_text(lineage.get("options") or {})),
        Fact("Measured", _when_text(view)),
        Fact("Versions", ", ".join(f"{name} {version}" for name, version in (lineage.get("versions") or {}).items())),
    ]
    return tuple(fact for fact in found if fact.text)


def _joined(parts: Iterable[Any]) -> str:
    return ", ".join(str(part) for part in parts if part)


def _rows_text(view: View) -> str:
    counts = [f"{whole_text(entry.count)} {entry.status.replace('_', ' ')}" for entry in status_counts(view)]
    return f"{whole_text(view.data.n_rows)}{': ' if counts else ''}{', '.join(counts)}"


def _distortion_text(view: View) -> str:
    distortion = view.bare("ground_distortion")
    if distortion is None or np.isnan(distortion).all():
        return "not known"
    row = int(np.nanargmax(distortion))
    above = int(np.count_nonzero(distortion > NOTABLE_DISTORTION_DEG))
    text = f"{_degrees_text(float(distortion[row]))}, in {view.label(row)}"
    return f"{text}; above 1\u00b0 in {count_text(above, 'shape')}" if above else text


def _options_text(options: Mapping[str, Any]) -> str:
    return "; ".join(
        f"{str(name).replace('_', ' ')}: {_option_text(value)}"
        for name, value in options.items()
        if value not in (None, "", False, [], {})
    )


def _option_text(value: object) -> str:
    if isinstance(value, Mapping):
        return f"({_options_text(value)})"
    if isinstance(value, list | tuple):
        return ", ".join(_option_text(item) for item in value)
    return "yes" if value is True else str(value)


def _when_text(view: View) -> str:
    lineage = view.data.lineage
    day = date_text(lineage.get("started"))
    if day is None:
        return ""
    seconds = lineage.get("seconds")
    return f"{day}, in {number_text(float(seconds), 2)} s" if isinstance(seconds, int | float) else day


def formulas(view: View) -> tuple[tuple[str, tuple[Formula, ...]], ...]:
    """List the definitions of the measured columns by family, amplitudes of one kind in one line."""
    columns = [field for field in map(view.by_name.__getitem__, _measured_names(view)) if field.family != ERROR]
    named = [
        (family_title(family), tuple(_formulas_of(members, view.prefix)))
        for family, members in groupby(columns, key=lambda column: column.family)
        if family != RECORD
    ]
    return tuple((title, found) for title, found in named if found)


def _measured_names(view: View) -> list[str]:
    return [column.name for column in view.data.columns]


def _formulas_of(columns: Iterable[Column], prefix: str) -> Iterable[Formula]:
    amplitudes = []
    for column in columns:
        bare = column.name.removeprefix(prefix)
        if bare[:4] in {"fd_p", "fd_n"} and bare[4:].isdigit():
            amplitudes.append(column)
        else:
            yield Formula(column.name, formula_text(column.meaning), column.source)
    if amplitudes:
        meaning = "amplitude |Zk| / |Z+1| of harmonic k of the outline's spectrum; p for k > 0, n for k < 0"
        yield Formula(f"{amplitudes[0].name} \u2026 {amplitudes[-1].name}", meaning, amplitudes[0].source)


def paragraph(view: View) -> str:
    """Write what a report or an appendix should say of the method, ready to paste."""
    lineage, options = view.data.lineage, view.measure_options
    versions = lineage.get("versions") or {}
    tool = f"geoshape {versions['geoshape']}" if "geoshape" in versions else "geoshape"
    others = _joined(f"{name} {versions[name]}" for name in ("shapely", "GEOS", "PROJ") if name in versions)
    layer = f" of the layer {lineage['layer']}" if lineage.get("layer") else ""
    source = f" ({lineage['input']}, {crs_text(view)})" if lineage.get("input") else ""
    day = date_text(lineage.get("started"))
    what = f"The shapes of {count_text(view.data.n_rows, 'polygon')}{layer}{source} were measured with {tool}"
    text = [
        f"{what}{f' ({others})' if others else ''}{f' on {day}' if day else ''}.",
        _ground_sentence(lineage.get("ground")),
        _deformation_sentence(view),
        "Areas exclude holes; perimeters include them; azimuths run clockwise from true north.",
    ]
    if any(column.family == "spectrum" for column in view.data.columns):
        how = "in closed form" if options.spectrum == "exact" else f"from {options.samples} points at equal arc length"
        text.append(f"Fourier descriptors describe the exterior of the largest part of each shape, {how}.")
    text += [_error_sentence(view), _status_sentence(view)]
    sources = dict.fromkeys(
        source.strip() for column in view.data.columns for source in column.source.split(";") if source.strip()
    )
    if sources:
        text.append(f"Definitions: {'; '.join(sources)}.")
    return " ".join(sentence for sentence in text if sentence)


def _ground_sentence(ground: object) -> str:
    if not ground:
        return ""
    kind, _, how = str(ground).rstrip(".").partition(": ")
    return f"Ground: {kind} ({how})." if how else f"Ground: {kind}."


def _deformation_sentence(view: View) -> str:
    distortion = view.bare("ground_distortion")
    if distortion is None or np.isnan(distortion).all():
        return ""
    largest = float(np.nanmax(distortion))
    return f"Angular deformation on it is {'' if largest < SMALLEST_TOLD_DEG else 'at most '}{_degrees_text(largest)}."


def _degrees_text(angle_deg: float) -> str:
    if angle_deg < SMALLEST_TOLD_DEG:
        return f"under {number_text(SMALLEST_TOLD_DEG)}\u00b0"
    return f"{number_text(angle_deg, 3)}\u00b0"


def _error_sentence(view: View) -> str:
    options = view.measure_options
    if options.position_error_m is None or not any(field.family == ERROR for field in view.fields):
        return ""
    error = f"{number_text(options.position_error_m)} m"
    return (
        f"Standard errors are of {options.error_runs} runs in which vertices were moved by a position error of {error}."
    )


def _status_sentence(view: View) -> str:
    counts = status_counts(view)
    repaired = sum(entry.count for entry in counts if entry.status == "repaired")
    lost = sum(entry.count for entry in counts if not entry.is_measured)
    parts = []
    if repaired:
        parts.append(f"{count_text(repaired, 'invalid geometry', 'invalid geometries')} had to be repaired")
    if lost:
        parts.append(f"{count_text(lost, 'row')} could not be measured and {'has' if lost == 1 else 'have'} nulls")
    text = "; ".join(parts)
    return f"{text}." if text else ""


def cautions(view: View) -> tuple[str, ...]:
    """Say how far to trust the numbers: what the run warned of, and what the columns themselves show."""
    found = [str(warning) for warning in view.data.lineage.get("warnings") or ()]
    found += [text for text in (_scale(view), *_counts(view), _errors(view), _limits(view)) if text]
    return tuple(dict.fromkeys(found))


def _scale(view: View) -> str:
    edge = view.bare("edge_mean_m")
    if view.bare("perimeter_m") is None and view.bare("polsby_popper") is None:
        return ""
    text = (
        "Perimeters, and the ratios built on them, grow with the detail of digitising. Compare only layers drawn at "
        "like scales"
    )
    if edge is None or np.isnan(edge).all():
        return f"{text}."
    low, high = np.nanquantile(edge, (0.05, 0.95)).tolist()
    return f"{text}; here nine in ten outlines have mean edges of {length_text(low)} to {length_text(high)}."


def _counts(view: View) -> Iterable[str]:
    """Warn where many enough shapes are of a kind that a column serves badly."""
    n = view.data.n_rows
    rules = (
        ("part_count", 1.0, np.inf, "several parts: spectra describe the largest part, all else every part"),
        ("vertex_count", -np.inf, float(ROUGH_VERTICES), "fewer than 12 vertices: spectra are of corners there"),
        ("axis_strength", -np.inf, ROUND_STRENGTH, "hardly a longer axis: azimuths mean little there"),
        (
            "ground_distortion",
            NOTABLE_DISTORTION_DEG,
            np.inf,
            "such an extent that the ground bends it by over 1\u00b0",
        ),
    )
    area = view.bare("area_m2")
    for name, above, below, text in rules:
        values = view.bare(name)
        if values is None:
            continue
        picked = (values > above) & (values < below)
        count = int(np.count_nonzero(picked if area is None else picked & ~np.isnan(area)))
        if count:
            yield f"{count_text(count, 'shape')} ({share_text(count, n)}) {'has' if count == 1 else 'have'} {text}."


def _errors(view: View) -> str:
    if any(field.family == ERROR for field in view.fields):
        return ""
    return "No digitising error was stated, so the numbers come without standard errors."


def _limits(view: View) -> str:
    if view.bare("axis_azimuth_deg") is None:
        return ""
    return "The test of directions takes shapes as independent; neighbours seldom are."


def dictionary(view: View) -> tuple[tuple[str, tuple[Entry, ...]], ...]:
    """Describe every column of the table, by family in the table's order."""
    families = dict.fromkeys(field.family for field in view.fields)
    ordered = sorted(families, key=lambda family: family == ATTRIBUTE)
    return tuple(
        (family_title(family), tuple(_entry(view, field) for field in view.fields if field.family == family))
        for family in ordered
    )


def _entry(view: View, field: Column) -> Entry:
    nulls = view.data.table.column(field.name).null_count
    span = ""
    if field.kind is not Kind.TEXT:
        values = view.numbers(field.name)
        nulls = int(np.count_nonzero(np.isnan(values)))
        if nulls < len(values):
            ends = np.nanquantile(values, (0.0, 0.5, 1.0)).tolist()
            is_own = field.family == ATTRIBUTE and field.kind is Kind.COUNT
            span = " \u00b7 ".join(f"{value:g}" if is_own else number_text(value, 4) for value in ends)
    return Entry(
        name=field.name,
        short_name=field.short_name if field.family != ATTRIBUTE else "",
        kind=str(field.kind),
        unit=unit_text(field.unit),
        bounds=_bounds_text(field),
        meaning="" if field.family == ATTRIBUTE else formula_text(field.meaning),
        nulls=whole_text(nulls) if nulls else "0",
        span=span or NULL,
    )


def _bounds_text(field: Column) -> str:
    if field.low is None and field.high is None:
        return ""
    low = "" if field.low is None else number_text(field.low)
    high = "" if field.high is None else number_text(field.high)
    if not high:
        return f"\u2265 {low}"
    return f"{low} \u2013 {high}" if low else f"\u2264 {high}"
