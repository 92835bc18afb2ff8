"""The linked figures of the page: map, histogram and scatter over one source, filled in by the page's script."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from bokeh.document import Document
from bokeh.embed import components
from bokeh.events import DocumentReady
from bokeh.models import (
    BoxSelectTool,
    BoxZoomTool,
    CDSView,
    ColumnDataSource,
    CustomJS,
    CustomJSTicker,
    CustomJSTickFormatter,
    HoverTool,
    IndexFilter,
    LassoSelectTool,
    MultiPolygons,
    PanTool,
    Plot,
    Quad,
    Range1d,
    ResetTool,
    Scatter,
    TapTool,
    WheelZoomTool,
    ZoomInTool,
    ZoomOutTool,
)
from bokeh.models.annotations.dimensional import Metric
from bokeh.models.annotations.legends import ScaleBar
from bokeh.models.renderers import DataRenderer, GlyphRenderer
from bokeh.models.text import PlainText
from bokeh.plotting import figure
from bokeh.resources import Resources

from geoshape.report.colours import INK, PAPER, QUIET, RULE, SEAL
from geoshape.report.placing import MapPlane

FONT = "Gill Sans, Gill Sans MT, Calibri, Noto Sans, DejaVu Sans, sans-serif"

_FILL_SHAPES = ("xs", "ys", "cx", "cy", "fill", "px", "py", "label", "value")


@dataclass(frozen=True)
class LinkedFigures:
    """What the template needs of the linked figures.

    Attributes
    ----------
    library : str
        BokehJS itself, as script.
    script : str
        The figures, as a script element.
    map, histogram, scatter : str
        The elements that they are drawn in.
    """

    library: str
    script: str
    map: str
    histogram: str
    scatter: str


def linked_figures(plane: MapPlane) -> LinkedFigures:
    """Make the figures, empty; the page's script puts in outlines and values.

    Parameters
    ----------
    plane : MapPlane
        Says the unit of the scale bar.

    Returns
    -------
    LinkedFigures
    """
    shapes = ColumnDataSource({name: [] for name in _FILL_SHAPES}, name="shapes")
    bars = ColumnDataSource({name: [] for name in ("left", "right", "top")}, name="bars")
    chosen_bars = ColumnDataSource({name: [] for name in ("left", "right", "top")}, name="chosen_bars")
    shapes.selected.js_on_change("indices", CustomJS(code="window.geoshapeReport.onFigures(cb_obj.indices)"))
    bars.selected.js_on_change("indices", CustomJS(code="window.geoshapeReport.onBars(cb_obj.indices)"))
    the_map = _map(shapes, plane)
    the_histogram = _histogram(bars, chosen_bars)
    the_scatter = _scatter(shapes)
    document = Document()
    for plot in (the_map, the_histogram, the_scatter):
        document.add_root(plot)
    models = {
        "shapes": shapes,
        "bars": bars,
        "chosenBars": chosen_bars,
        "map": the_map,
        "histogram": the_histogram,
        "scatter": the_scatter,
        "known": the_map.select_one({"name": "known", "type": GlyphRenderer}),
        "unknown": the_map.select_one({"name": "unknown", "type": GlyphRenderer}),
        "dots": the_map.select_one({"name": "dots", "type": GlyphRenderer}),
    }
    document.js_on_event(DocumentReady, CustomJS(args=models, code=_START))
    script, (map_div, histogram_div, scatter_div) = components((the_map, the_histogram, the_scatter))
    library = Resources(mode="inline", components=["bokeh"]).js_raw
    return LinkedFigures("\n".join(library), script, map_div, histogram_div, scatter_div)


_START = "window.geoshapeReport.onReady({shapes, bars, chosenBars, map, histogram, scatter, known, unknown, dots})"


def _styled(**settings: Any) -> Plot:
    plot = figure(
        sizing_mode="stretch_both",
        toolbar_location="above",
        background_fill_color=PAPER,
        border_fill_color=PAPER,
        outline_line_color=None,
        lod_threshold=None,
        **settings,
    )
    plot.toolbar.logo = None
    plot.toolbar.autohide = False
    plot.grid.grid_line_color = RULE
    return plot


def _map(shapes: ColumnDataSource, plane: MapPlane) -> Plot:
    plot = _styled(
        name="map",
        x_range=Range1d(start=0, end=1),
        y_range=Range1d(start=0, end=1),
        tools="",
        x_axis_type=None,
        y_axis_type=None,
    )
    plot.grid.visible = False
    # A pattern for each shape would take a canvas for each: shapes without a value are a renderer of their own.
    renderers: list[DataRenderer] = []
    for name, hatch in (("known", "blank"), ("unknown", "right_diagonal_line")):
        look: dict[str, Any] = {"xs": "xs", "ys": "ys", "fill_color": "fill", "hatch_pattern": hatch}
        look |= {"hatch_color": QUIET, "hatch_weight": 1, "hatch_scale": 7}
        glyph = MultiPolygons(**look, line_color=INK, line_width=0.5, line_alpha=0.75)
        chosen = MultiPolygons(**look, line_color=SEAL, line_width=3)
        faded = MultiPolygons(
            **look, line_color=INK, line_width=0.5, line_alpha=0.35, fill_alpha=0.35, hatch_alpha=0.35
        )
        view = CDSView(filter=IndexFilter(indices=[]))
        renderers.append(
            plot.add_glyph(shapes, glyph, view=view, selection_glyph=chosen, nonselection_glyph=faded, name=name)
        )
    renderers.append(_dots(plot, shapes))
    tap, pan, box = TapTool(renderers=renderers), PanTool(), BoxSelectTool(renderers=renderers)
    hover = HoverTool(renderers=renderers, tooltips=[("", "@label"), ("", "@value")], visible=False)
    plot.add_tools(
        pan,
        box,
        LassoSelectTool(renderers=renderers),
        BoxZoomTool(match_aspect=True),
        WheelZoomTool(),
        ZoomInTool(),
        ZoomOutTool(),
        tap,
        ResetTool(),
        hover,
    )
    plot.toolbar.active_drag = box
    plot.toolbar.active_scroll = None
    plot.toolbar.active_tap = tap
    plot.add_layout(_scale_bar(plot, plane))
    return plot


def _dots(plot: Plot, shapes: ColumnDataSource) -> GlyphRenderer[Any]:
    """Show the shapes that are too small for a colour, for as long as the view leaves them so."""
    dot: dict[str, Any] = {"x": "cx", "y": "cy", "fill_color": "fill"}
    return plot.add_glyph(
        shapes,
        Scatter(**dot, size=5, line_color=None),
        view=CDSView(filter=IndexFilter(indices=[])),
        selection_glyph=Scatter(**dot, size=11, line_color=SEAL, line_width=3),
        nonselection_glyph=Scatter(**dot, size=5, line_color=None, fill_alpha=0.4),
        name="dots",
    )


def _scale_bar(plot: Plot, plane: MapPlane) -> ScaleBar:
    settings: dict[str, Any] = (
        {"dimensional": Metric(base_unit="m", include=["mm", "m", "km"])}
        if plane.unit == "m"
        else {"label": "@{value} units"}
    )
    return ScaleBar(
        range=plot.x_range,
        unit="m",
        location="bottom_left",
        background_fill_color=PAPER,
        background_fill_alpha=0.85,
        border_line_color=None,
        bar_line_color=INK,
        bar_line_width=2,
        bar_length=0.16,
        margin=4,
        padding=6,
        label_text_color=INK,
        label_text_font=FONT,
        label_text_font_size="13px",
        **settings,
    )


def _axes(plot: Plot) -> None:
    axes: Any = plot.axis
    for axis in axes:
        side = "x" if axis in plot.below else "y"
        axis.axis_label = PlainText(text="")
        axis.axis_label_text_font = FONT
        axis.axis_label_text_font_size = "13px"
        axis.axis_label_text_font_style = "normal"
        axis.axis_label_text_color = INK
        axis.major_label_text_font = FONT
        axis.major_label_text_font_size = "12px"
        axis.major_label_text_color = INK
        axis.axis_line_color = QUIET
        axis.major_tick_line_color = QUIET
        axis.minor_tick_line_color = None
        code = f"return window.geoshapeReport.ticks('{plot.name}', '{side}', cb_data.range)"
        axis.ticker = CustomJSTicker(major_code=code)
        axis.formatter = CustomJSTickFormatter(
            code=f"return window.geoshapeReport.tickText('{plot.name}', '{side}', tick)"
        )


def _histogram(bars: ColumnDataSource, chosen_bars: ColumnDataSource) -> Plot:
    plot = _styled(name="histogram", tools="", x_range=Range1d(start=0, end=1), y_range=Range1d(start=0, end=1))
    place: dict[str, Any] = {"left": "left", "right": "right", "top": "top", "bottom": 0}
    glyph = Quad(**place, fill_color="#a9bdb6", line_color=PAPER, line_width=1)
    renderer = plot.add_glyph(bars, glyph, selection_glyph=glyph, nonselection_glyph=glyph)
    over = Quad(**place, fill_color=SEAL, line_color=PAPER, line_width=1)
    plot.add_glyph(chosen_bars, over, selection_glyph=over, nonselection_glyph=over)
    tap, box = TapTool(renderers=[renderer]), BoxSelectTool(renderers=[renderer], dimensions="width")
    plot.add_tools(box, tap, ResetTool())
    plot.toolbar.active_drag, plot.toolbar.active_tap = box, tap
    plot.xgrid.visible = False
    _axes(plot)
    return plot


def _scatter(shapes: ColumnDataSource) -> Plot:
    plot = _styled(name="scatter", tools="", x_range=Range1d(start=0, end=1), y_range=Range1d(start=0, end=1))
    look: dict[str, Any] = {"x": "px", "y": "py", "fill_color": "fill"}
    glyph = Scatter(**look, size=8, line_color=INK, line_width=0.5, line_alpha=0.75)
    chosen = Scatter(**look, size=13, line_color=SEAL, line_width=3)
    faded = Scatter(**look, size=8, fill_alpha=0.35, line_alpha=0.2, line_color=INK)
    renderer = plot.add_glyph(shapes, glyph, selection_glyph=chosen, nonselection_glyph=faded)
    tap, box = TapTool(renderers=[renderer]), BoxSelectTool(renderers=[renderer])
    hover = HoverTool(renderers=[renderer], tooltips=[("", "@label"), ("", "@value")], visible=False)
    plot.add_tools(box, LassoSelectTool(renderers=[renderer]), tap, ResetTool(), hover)
    plot.toolbar.active_drag, plot.toolbar.active_tap = box, tap
    _axes(plot)
    return plot
