"""Figures that need no script: directions and box plots on the page, and the map and histograms that are printed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.columns import Column
from geoshape.report.colours import CLASSES, OTHER, RAMP, ramp_colours
from geoshape.report.data import View
from geoshape.report.encoding import simplified
from geoshape.report.placing import MapPlane
from geoshape.report.sentences import prevailing
from geoshape.report.sheet import KEY_COLUMNS, path_of
from geoshape.report.statistics import (
    ROSE_BINS,
    Box,
    Histogram,
    box,
    histogram,
    is_logarithmic,
    is_one_value,
    log_ticks,
    nice_ticks,
    rose_counts,
)
from geoshape.report.wording import bar_text, number_text, plain_name, tick_text, unit_text
from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch

MAP_WIDTH = 1000.0
"""Width of the printed map in the units of its drawing."""

MAP_MAX_HEIGHT = 1150.0

PRINTED_VERTICES = 40_000


@dataclass(frozen=True)
class Tick:
    """A mark on an axis: where, in the units of its drawing, and what it says."""

    at: float
    text: str


@dataclass(frozen=True)
class Axis:
    """A horizontal axis.

    Attributes
    ----------
    name, title, unit, meaning : str
    is_log : bool
    ticks : tuple of Tick
    """

    name: str
    title: str
    unit: str
    meaning: str
    is_log: bool
    ticks: tuple[Tick, ...]


@dataclass(frozen=True, eq=False)
class Scale:
    """Leads from values to places between 0 and ``width``."""

    low: float
    high: float
    is_log: bool
    width: float

    def place(self, values: FloatArray) -> FloatArray:
        """Place values; NaN stays NaN."""
        low, high = (np.log10(self.low), np.log10(self.high)) if self.is_log else (self.low, self.high)
        along = np.log10(values) if self.is_log else values
        span = high - low
        return np.asarray(np.full(np.shape(values), 0.5) if span <= 0 else (along - low) / span) * self.width

    def ticks(self) -> tuple[Tick, ...]:
        """Choose ticks."""
        values = log_ticks(self.low, self.high) if self.is_log else nice_ticks(self.low, self.high, 5)
        places = self.place(np.array(values, dtype=np.float64))
        return tuple(Tick(round(float(at), 1), tick_text(value)) for at, value in zip(places, values, strict=True))


def scale_of(values: FloatArray, field: Column, width: float) -> Scale | None:
    """Make the scale that holds all values; None where none is known."""
    if np.isnan(values).all():
        return None
    is_log = is_logarithmic(values, field)
    low, high = float(np.nanmin(values)), float(np.nanmax(values))
    if is_one_value(low, high):
        low, high = low - 0.5 * max(abs(low), 1.0), high + 0.5 * max(abs(high), 1.0)
        is_log = False
    return Scale(low, high, is_log, width)


def axis_of(field: Column, prefix: str, scale: Scale) -> Axis:
    """Describe the axis of a column."""
    title = plain_name(field, prefix)
    return Axis(field.name, title, unit_text(field.unit), field.meaning, scale.is_log, scale.ticks())


@dataclass(frozen=True)
class Rose:
    """Axial directions as sectors.

    Attributes
    ----------
    sectors : tuple of (path, count, azimuth)
        Both halves of each sector as one path in a drawing of -100 ... 100, north up.
    rings : tuple of Tick
        Radii of round counts.
    mean_x, mean_y : float
        End of the mean axis in the drawing; 0 where none prevails.
    count : int
        Shapes with a direction.
    """

    sectors: tuple[tuple[str, int, float], ...]
    rings: tuple[Tick, ...]
    mean_x: float
    mean_y: float
    count: int


def rose(view: View) -> Rose | None:
    """Draw the directions of the long axes; None without them. Areas of sectors are as counts."""
    azimuth = view.bare("axis_azimuth_deg")
    if azimuth is None or np.isnan(azimuth).all():
        return None
    counts = rose_counts(azimuth)
    most = float(counts.max())
    width = 180.0 / ROSE_BINS
    sectors = tuple(
        (_sector(i * width, width, 100.0 * float(np.sqrt(count / most))), int(count), i * width)
        for i, count in enumerate(counts)
        if count
    )
    rings = tuple(
        Tick(round(100.0 * float(np.sqrt(value / most)), 1), number_text(value))
        for value in nice_ticks(0.0, most, 4)
        if value > 0 and value == int(value)
    )
    result = prevailing(view)
    mean_x = mean_y = 0.0
    if result is not None and result.is_clear:
        angle = np.radians(result.mean_deg)
        mean_x, mean_y = round(106.0 * float(np.sin(angle)), 1), round(-106.0 * float(np.cos(angle)), 1)
    return Rose(sectors, rings, mean_x, mean_y, int(counts.sum()))


def _sector(azimuth_deg: float, width_deg: float, radius: float) -> str:
    pieces = []
    for turn in (0.0, 180.0):
        first, last = np.radians([azimuth_deg + turn - width_deg / 2.0, azimuth_deg + turn + width_deg / 2.0])
        x0, y0, x1, y1 = (radius * value for value in (np.sin(first), -np.cos(first), np.sin(last), -np.cos(last)))
        pieces.append(f"M0,0L{x0:.1f},{y0:.1f}A{radius:.1f},{radius:.1f},0,0,1,{x1:.1f},{y1:.1f}z")
    return "".join(pieces)


BOX_WIDTH = 300.0
MAX_BOX_COLUMNS = 6


@dataclass(frozen=True)
class DrawnBox:
    """A box in the units of its drawing, and in words."""

    level: str
    count: int
    low: float
    lower: float
    median: float
    upper: float
    high: float
    outliers: tuple[float, ...]
    text: str


@dataclass(frozen=True)
class BoxPlot:
    """Box plots of one column, a box for each class."""

    axis: Axis
    boxes: tuple[DrawnBox, ...]


def class_column(view: View) -> str | None:
    """Choose the column whose values are the classes; None where there is none."""
    if view.options.class_column is not None:
        return view.options.class_column
    return view.classes[0] if view.classes else None


def box_plots(view: View) -> tuple[BoxPlot, ...]:
    """Draw box plots of the key columns by class; empty without classes."""
    name = class_column(view)
    if name is None:
        return ()
    texts = np.array(view.texts(name), dtype=object)
    levels = list(dict.fromkeys(text for text in texts.tolist() if text is not None))
    levels = sorted(levels, key=lambda level: -int(np.count_nonzero(texts == level)))[:12]
    masks = [(level, np.asarray(texts == level)) for level in levels]
    names = [name for name in (view.named(bare) for bare in KEY_COLUMNS) if name]
    found = (_box_plot(view, name, masks) for name in names[:MAX_BOX_COLUMNS])
    return tuple(plot for plot in found if plot is not None)


def _box_plot(view: View, name: str, masks: list[tuple[str, BoolArray]]) -> BoxPlot | None:
    field, values = view.by_name[name], view.numbers(name)
    scale = scale_of(values, field, BOX_WIDTH)
    if scale is None:
        return None
    boxes = tuple(_drawn(box(level, values[mask]), scale) for level, mask in masks)
    return BoxPlot(axis_of(field, view.prefix, scale), boxes)


def _drawn(one: Box, scale: Scale) -> DrawnBox:
    marks = np.array([one.low, one.lower, one.median, one.upper, one.high])
    low, lower, median, upper, high = np.round(scale.place(marks), 1).tolist()
    text = f"{one.level}: {one.count} shapes"
    if one.count:
        spoken = [number_text(value, 3) for value in (one.median, one.lower, one.upper)]
        text += f", median {spoken[0]}, half of them between {spoken[1]} and {spoken[2]}"
    outliers = tuple(np.round(scale.place(one.outliers), 1).tolist())
    return DrawnBox(one.level, one.count, low, lower, median, upper, high, outliers, text)


@dataclass(frozen=True)
class Bars:
    """A printed histogram: bars as (x, width, height) in a drawing of 300 by 100."""

    axis: Axis
    bars: tuple[tuple[float, float, float], ...]
    most: int


def printed_histograms(view: View) -> tuple[Bars, ...]:
    """Draw the histograms of the key columns."""
    names = [name for name in (view.named(bare) for bare in KEY_COLUMNS) if name]
    found = (_bars(view.by_name[name], view.numbers(name), view.prefix) for name in names[:MAX_BOX_COLUMNS])
    return tuple(bars for bars in found if bars is not None)


def _bars(field: Column, values: FloatArray, prefix: str) -> Bars | None:
    scale = scale_of(values, field, BOX_WIDTH)
    if scale is None:
        return None
    counted: Histogram = histogram(values, is_log=scale.is_log)
    most = int(counted.counts.max())
    step = BOX_WIDTH / len(counted.counts)
    bars = tuple(
        (round(i * step, 1), round(step, 1), round(100.0 * float(count) / most, 1))
        for i, count in enumerate(counted.counts)
        if count
    )
    return Bars(axis_of(field, prefix, scale), bars, most)


@dataclass(frozen=True)
class Legend:
    """What the colours of the printed map mean.

    Attributes
    ----------
    axis : Axis or None
        Of the ramp, 300 wide; None for classes.
    stops : tuple of str
        Colours along the ramp.
    classes : tuple of (str, str)
        Class and colour.
    has_null : bool
    """

    axis: Axis | None
    stops: tuple[str, ...]
    classes: tuple[tuple[str, str], ...]
    has_null: bool


@dataclass(frozen=True)
class PrintedMap:
    """The map for paper.

    Attributes
    ----------
    width, height : float
    patches : tuple of (path, colour)
        Colour is empty for null.
    bar : float
        Length of the scale bar in the drawing.
    bar_text, title : str
    is_north_up : bool
    legend : Legend
    """

    width: float
    height: float
    patches: tuple[tuple[str, str], ...]
    bar: float
    bar_text: str
    title: str
    is_north_up: bool
    legend: Legend


def map_column(view: View) -> str | None:
    """Choose the column that colours the map at first."""
    if view.options.map_column is not None:
        return view.options.map_column
    for bare in ("group", "polsby_popper", "axis_ratio", "fd_departure", "area_m2"):
        name = view.named(bare)
        if name is not None and (bare != "group" or name in view.classes):
            return name
    return view.numeric[0].name if view.numeric else (view.classes[0] if view.classes else None)


def printed_map(view: View, plane: MapPlane, rows: IntArray) -> PrintedMap | None:
    """Draw the map for paper; None where no shape can be drawn."""
    batch = plane.outline
    if not batch.n_rings:
        return None
    x, y = batch.x + batch.origin[batch.vertex_feature, 0], batch.y + batch.origin[batch.vertex_feature, 1]
    west, north = float(x.min()), float(y.max())
    span_x, span_y = max(float(np.ptp(x)), 1e-9), max(float(np.ptp(y)), 1e-9)
    factor = min(MAP_WIDTH / span_x, MAP_MAX_HEIGHT / span_y)
    batch = simplified(batch, max(span_x, span_y), PRINTED_VERTICES)
    origin = batch.origin[batch.vertex_feature]
    corners = np.column_stack(((batch.x + origin[:, 0] - west) * factor, (north - batch.y - origin[:, 1]) * factor))
    paths = _map_paths(batch, corners)
    colours, legend, title = _coloured(view, rows)
    bar_m = nice_ticks(0.0, 0.3 * MAP_WIDTH / factor, 3)[-1]
    return PrintedMap(
        width=round(span_x * factor, 1),
        height=round(span_y * factor, 1),
        patches=tuple((path, colour or "") for path, colour in zip(paths, colours, strict=True) if path),
        bar=round(bar_m * factor, 1),
        bar_text=bar_text(bar_m, plane.unit),
        title=title,
        is_north_up=plane.is_north_up,
        legend=legend,
    )


def _map_paths(batch: RingBatch, corners: FloatArray) -> list[str]:
    paths = [""] * batch.n_features
    for ring, feature in enumerate(batch.ring_feature.tolist()):
        own = corners[batch.ring_start[ring] : batch.ring_start[ring + 1]]
        # What is too small to have a shape on paper still has a place.
        speck = "" if paths[feature] else f"M{own[0, 0]:.0f},{own[0, 1]:.0f}h2v2h-2z"
        paths[feature] += path_of(own, 0.5) or speck
    return paths


def _coloured(view: View, rows: IntArray) -> tuple[list[str | None], Legend, str]:
    name = map_column(view)
    if name is None:
        return [None] * len(rows), Legend(None, (), (), has_null=True), "outlines"
    field = view.by_name[name]
    title = plain_name(field, view.prefix)
    if name in view.classes:
        palette = class_colours(view.levels(name))
        texts = view.texts(name, rows)
        legend = Legend(None, (), tuple(palette.items()), has_null=None in texts)
        return [None if text is None else palette.get(text, OTHER) for text in texts], legend, title
    values = view.numbers(name)
    scale = scale_of(values, field, BOX_WIDTH)
    if scale is None:
        return [None] * len(rows), Legend(None, (), (), has_null=True), title
    colours = ramp_colours(scale.place(values[rows]), 0.0, BOX_WIDTH).tolist()
    legend = Legend(axis_of(field, view.prefix, scale), RAMP[::15], (), has_null=None in colours)
    return colours, legend, title


def class_colours(levels: list[str]) -> dict[str, str]:
    """Give classes their colours; those beyond the palette share one."""
    return {level: CLASSES[i] if i < len(CLASSES) else OTHER for i, level in enumerate(levels)}
