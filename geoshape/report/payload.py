"""What the page's script works on: values, outlines and spectra of the shapes drawn, statistics of all."""

from __future__ import annotations

from typing import Any

import numpy as np

from geoshape.columns import BIAS_SUFFIX, ERROR_SUFFIX, Column, Kind
from geoshape.report.colours import CLASSES, INK, NULL_FILL, OTHER, RAMP, SEAL
from geoshape.report.data import ATTRIBUTE, ERROR, View
from geoshape.report.encoding import extents, packed, packed_complex, packed_rings, simplified
from geoshape.report.methods import family_title
from geoshape.report.placing import CloseUps, MapPlane
from geoshape.report.plates import map_column
from geoshape.report.sampling import Sample
from geoshape.report.sentences import status_counts
from geoshape.report.statistics import histogram, is_logarithmic, quantiles
from geoshape.report.wording import formula_text, plain_name, unit_text
from geoshape.rings import FloatArray, IntArray

MAP_VERTICES = 150_000
CLOSE_VERTICES = 150_000
HULL_VERTICES = 60_000

POINTS_AT_ALL = 300_000
"""Points at equal arc length that a page carries; with many shapes every second, fourth ... of them."""

MAX_TEXT = 120
"""Characters of a text that the table shows."""

SHOWN_AT_FIRST = (
    "shape_status",
    "group",
    "flag_reasons",
    "area_m2",
    "polsby_popper",
    "axis_ratio",
    "axis_azimuth_deg",
    "convexity",
    "fd_departure",
    "perimeter_m",
)
MAX_SHOWN = 9
"""Columns that fit on a screen; attributes take two of them."""


def page_data(view: View, sample: Sample, shapes: CloseUps, plane: MapPlane, first_row: int | None) -> dict[str, Any]:
    """Gather what the page's script needs, ready for JSON.

    Parameters
    ----------
    view : View
    sample : Sample
    shapes : CloseUps
    plane : MapPlane
    first_row : int or None
        Row of the table that is shown closely at first.

    Returns
    -------
    dict
        Numbers are base64 of little-endian arrays; see `encoding`.
    """
    rows = sample.rows
    first = 0 if first_row is None else int(np.searchsorted(rows, first_row))
    return {
        "count": len(rows),
        "allRows": view.data.n_rows,
        "first": first,
        "rows": packed(rows, "<i4"),
        "labels": [_cut(view.label(int(row))) for row in rows],
        "note": _notes(view, rows),
        "prefix": view.prefix,
        "mapColumn": map_column(view),
        "pair": _pair(view),
        "shown": _shown(view),
        "fields": [_field(view, field, rows) for field in view.fields],
        "families": {family: family_title(family) for family in dict.fromkeys(f.family for f in view.fields)},
        "colours": {
            "ramp": RAMP,
            "classes": CLASSES,
            "other": OTHER,
            "null": NULL_FILL,
            "ink": INK,
            "seal": SEAL,
        },
        "map": _map(plane),
        "close": _close(shapes),
    }


def _field(view: View, field: Column, rows: IntArray) -> dict[str, Any]:
    described: dict[str, Any] = {
        "name": field.name,
        "title": plain_name(field, view.prefix),
        "unit": unit_text(field.unit),
        "kind": str(field.kind),
        "meaning": formula_text(field.meaning),
        "source": field.source,
        "family": field.family,
        "classes": view.levels(field.name) if field.name in view.classes else None,
    }
    for key, suffix in (("error", ERROR_SUFFIX), ("bias", BIAS_SUFFIX)):
        if field.name + suffix in view.by_name:
            described[key] = field.name + suffix
    if field.kind is Kind.TEXT:
        described["texts"] = [None if text is None else _cut(text) for text in view.texts(field.name, rows)]
        return described
    values = view.numbers(field.name)
    counted = histogram(values, is_log=is_logarithmic(values, field), is_whole=field.kind is Kind.COUNT)
    described |= {
        "log": counted.is_log,
        "decimals": None if counted.is_log else _decimals(values),
        "values": packed(values[rows], "<f8"),
        "quantiles": packed(quantiles(values), "<f8"),
        "bins": {"start": counted.start, "step": counted.step, "counts": counted.counts.tolist()},
    }
    if field.family not in {ERROR, ATTRIBUTE}:
        described["ends"] = [_on_page(found, rows) for found in view.ends(field.name)]
    return described


def _decimals(values: FloatArray) -> int | None:
    """Choose decimals that suit a whole column; None where it spans too much, or nothing."""
    largest = float(np.nanmax(np.abs(values))) if not np.isnan(values).all() else 0.0
    if not largest > 1e-3:
        return None
    return max(3 - int(np.floor(np.log10(largest))), 0)


def _on_page(chosen: IntArray, rows: IntArray) -> list[int]:
    kept = chosen[np.isin(chosen, rows)]
    return [int(at) for at in np.searchsorted(rows, kept)]


def _cut(text: str) -> str:
    return text if len(text) <= MAX_TEXT else text[: MAX_TEXT - 1] + "\u2026"


def _notes(view: View, rows: IntArray) -> list[str | None]:
    name = view.named("shape_note")
    return [None] * len(rows) if name is None else view.texts(name, rows)


def _pair(view: View) -> list[str]:
    """Choose the columns of the first scatter."""
    names = [view.named(bare) for bare in ("polsby_popper", "axis_ratio", "convexity", "fd_departure", "area_m2")]
    known = [name for name in names if name] + [field.name for field in view.numeric]
    return list(dict.fromkeys(known))[:2]


def _shown(view: View) -> list[str]:
    attributes = [field.name for field in view.fields if field.family == ATTRIBUTE and field.name != view.label_field]
    measured = [name for name in (view.named(bare) for bare in SHOWN_AT_FIRST) if name]
    if all(entry.is_measured for entry in status_counts(view)):
        measured = [name for name in measured if name != view.named("shape_status")]
    names = [*attributes[:2], *measured][:MAX_SHOWN]
    return [field.name for field in view.fields if field.name in names]


def _map(plane: MapPlane) -> dict[str, Any]:
    extent = float(extents_together(plane))
    outline = simplified(plane.outline, extent, MAP_VERTICES)
    return {"unit": plane.unit, "outline": packed_rings(outline)}


def extents_together(plane: MapPlane) -> float:
    """Give the longer side of the box round all shapes of a map; 0 without any."""
    batch = plane.outline
    if not batch.n_rings:
        return 0.0
    origin = batch.origin[batch.vertex_feature]
    return float(max(np.ptp(batch.x + origin[:, 0]), np.ptp(batch.y + origin[:, 1])))


def _close(shapes: CloseUps) -> dict[str, Any]:
    count = max(len(shapes.points), 1)
    step = 1
    while shapes.points.shape[1] // step * count > POINTS_AT_ALL and shapes.points.shape[1] // step > 32:
        step *= 2
    return {
        "outline": packed_rings(simplified(shapes.outline, np.inf, CLOSE_VERTICES)),
        "hull": packed_rings(simplified(shapes.hull, np.inf, HULL_VERTICES)),
        "rectangle": packed_rings(shapes.rectangle),
        "circle": packed(shapes.circle, "<f4"),
        "ellipse": packed(shapes.ellipse, "<f4"),
        "points": _packed_points(shapes, step),
        "samples": shapes.points.shape[1],
        "harmonics": shapes.coefficients.shape[1] // 2,
        "coefficients": packed_complex(shapes.coefficients),
        "beyond": packed(shapes.beyond, "<f4"),
    }


def _packed_points(shapes: CloseUps, step: int) -> dict[str, Any]:
    """Pack points as whole steps of a 32 767th of the shape's extent."""
    points = shapes.points[:, ::step]
    unit = np.maximum(extents(shapes.outline) / 32_767.0, np.finfo(np.float64).tiny)
    scaled = np.nan_to_num(points / unit[:, None])
    pairs = np.rint(np.stack((scaled.real, scaled.imag), axis=-1))
    return {"each": points.shape[1], "step": packed(unit, "<f8"), "xy": packed(pairs, "<i2")}
