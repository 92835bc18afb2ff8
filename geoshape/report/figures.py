"""The figures for papers: SVG with text as text, and PNG, made with matplotlib."""

from __future__ import annotations

import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import PatchCollection
from matplotlib.colors import LogNorm, Normalize
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch, Rectangle
from matplotlib.path import Path as Outline
from matplotlib.ticker import FuncFormatter, MaxNLocator

from geoshape.report.colours import INK, KELP, NULL_FILL, QUIET, RAMP, RULE, SEAL
from geoshape.report.data import ReportData, ReportOptions, View
from geoshape.report.encoding import extents, simplified
from geoshape.report.placing import CloseUps, MapPlane, place_close_ups, place_on_map
from geoshape.report.plates import class_colours, class_column, map_column, scale_of
from geoshape.report.sampling import choose_rows
from geoshape.report.sentences import prevailing
from geoshape.report.sheet import KEY_COLUMNS, Sheet, SheetRow
from geoshape.report.statistics import ROSE_BINS, box, histogram, is_logarithmic, nice_ticks, rose_counts
from geoshape.report.wording import bar_text, number_text, plain_name, tick_text, unit_text
from geoshape.rings import RingBatch

WIDTH_IN = 7.1
"""Width of a figure: a page of two columns."""

PNG_DPI = 300
MAX_PANELS = 6
LABEL_ROOM = 0.46
"""Room for two lines below a small outline, relative to its side."""

DRAWN_VERTICES = 200_000

_LOOK: dict[Any, Any] = {
    "svg.fonttype": "none",
    "svg.hashsalt": "geoshape",
    "text.parse_math": False,
    "font.family": "sans-serif",
    "font.size": 8.0,
    "text.color": INK,
    "axes.labelcolor": INK,
    "axes.edgecolor": QUIET,
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "hatch.linewidth": 0.6,
    "figure.facecolor": "white",
}


def write_figures(data: ReportData, directory: str | Path, options: ReportOptions | None = None) -> list[Path]:
    """Write the figures of a report, each as SVG and as PNG.

    Parameters
    ----------
    data : ReportData
    directory : str or Path
        Made where it is missing; files of the same names are replaced.
    options : ReportOptions, optional

    Returns
    -------
    list of Path
        ``map``, ``distributions``, ``scatter``, ``sheet``, ``directions``, ``classes`` and ``groups``, as far as the
        layer has what they show.

    Raises
    ------
    OptionError
        A column named in the options is not there.
    OSError
        The directory cannot be written.
    """
    view = View(data, options or ReportOptions())
    folder = Path(directory)
    folder.mkdir(parents=True, exist_ok=True)
    written: list[Path] = []
    with _look():
        for name, figure in _figures(view):
            for suffix in ("svg", "png"):
                path = folder / f"{name}.{suffix}"
                metadata = {"Date": None} if suffix == "svg" else {"Software": None}
                figure.savefig(path, dpi=PNG_DPI, bbox_inches="tight", pad_inches=0.05, metadata=metadata)
                written.append(path)
    return written


@contextmanager
def _look() -> Iterator[None]:
    with mpl.rc_context(_LOOK), warnings.catch_warnings():
        # A name in a script that the font lacks shows as boxes in the PNG and right in the SVG.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        yield


def _figures(view: View) -> Iterator[tuple[str, Figure]]:
    rows = choose_rows(view).rows
    shapes = place_close_ups(view, rows)
    sheet = Sheet(view, rows, shapes)
    makers: tuple[tuple[str, Callable[[], Figure | None]], ...] = (
        ("map", lambda: _map(view, place_on_map(view, rows), rows)),
        ("distributions", lambda: _panels(view, _histogram)),
        ("scatter", lambda: _scatter(view)),
        ("sheet", lambda: _sheet(sheet.of_columns(), shapes)),
        ("directions", lambda: _directions(view)),
        ("classes", lambda: _panels(view, _boxes) if class_column(view) else None),
        ("groups", lambda: _sheet(sheet.of_groups(), shapes)),
    )
    for name, make in makers:
        figure = make()
        if figure is not None:
            yield name, figure


def _new(height_in: float) -> Figure:
    figure = Figure(figsize=(WIDTH_IN, height_in), layout="constrained")
    FigureCanvasAgg(figure)
    return figure


def _axis_text(view: View, name: str) -> str:
    field = view.by_name[name]
    unit = unit_text(field.unit)
    title = plain_name(field, view.prefix)
    return f"{title} ({unit})" if unit else title


def _is_log(view: View, name: str) -> bool:
    return is_logarithmic(view.numbers(name), view.by_name[name])


_PLAIN = FuncFormatter(lambda value, _: tick_text(float(f"{value:.6g}")))


def _scaled(axes: Axes, side: str, *, is_log: bool) -> None:
    axis = axes.xaxis if side == "x" else axes.yaxis
    if is_log:
        (axes.set_xscale if side == "x" else axes.set_yscale)("log")
        axis.set_minor_formatter(FuncFormatter(lambda *_: ""))
    else:
        axis.set_major_locator(MaxNLocator(3))
    axis.set_major_formatter(_PLAIN)


def _outlines(batch: RingBatch, features: np.ndarray) -> list[PathPatch]:
    """Make a patch of each feature's rings, holes cut out."""
    start = np.searchsorted(batch.ring_feature, features)
    stop = np.searchsorted(batch.ring_feature, features, side="right")
    patches = []
    for feature, first, last in zip(features.tolist(), start.tolist(), stop.tolist(), strict=True):
        pieces, codes = [], []
        for ring in range(first, last):
            span = slice(batch.ring_start[ring], batch.ring_start[ring + 1])
            corners = np.column_stack((batch.x[span], batch.y[span])) + batch.origin[feature]
            pieces.append(np.vstack((corners, corners[:1])))
            codes += [Outline.MOVETO, *[Outline.LINETO] * (len(corners) - 1), Outline.CLOSEPOLY]
        if pieces:
            patches.append(PathPatch(Outline(np.vstack(pieces), codes)))
    return patches


def _map(view: View, plane: MapPlane, rows: np.ndarray) -> Figure | None:
    batch = plane.outline
    drawn = np.unique(batch.ring_feature)
    if not len(drawn):
        return None
    origin = batch.origin[batch.vertex_feature]
    x, y = batch.x + origin[:, 0], batch.y + origin[:, 1]
    span = max(float(np.ptp(x)), float(np.ptp(y)), 1e-9)
    height = WIDTH_IN * min(max(float(np.ptp(y)) / max(float(np.ptp(x)), 1e-9), 0.35), 1.2) + 0.6
    figure = _new(height)
    axes = figure.add_subplot()
    patches = _outlines(simplified(batch, span, DRAWN_VERTICES), drawn)
    collection = PatchCollection(patches, match_original=False, edgecolor=INK, linewidth=0.25)
    _coloured(view, rows[drawn], collection, axes)
    axes.add_collection(collection)
    axes.set_aspect("equal")
    axes.set_xlim(x.min() - 0.02 * span, x.max() + 0.02 * span)
    axes.set_ylim(y.min() - 0.1 * span, y.max() + 0.02 * span)
    axes.set_axis_off()
    _scale_bar(axes, plane, float(x.min()), float(y.min()) - 0.06 * span, span)
    if plane.is_north_up:
        axes.annotate(
            "N",
            (0.97, 0.085),
            (0.97, 0.005),
            "axes fraction",
            "axes fraction",
            {"arrowstyle": "-|>", "color": INK},
            ha="center",
        )
    return figure


def _coloured(view: View, rows: np.ndarray, collection: PatchCollection, axes: Axes) -> None:
    name = map_column(view)
    figure = axes.get_figure(root=True)
    if name is None or figure is None:
        collection.set_facecolor(KELP)
        return
    if name in view.classes:
        palette = class_colours(view.levels(name))
        colours = [palette.get(text, NULL_FILL) if text else NULL_FILL for text in view.texts(name, rows)]
        collection.set_facecolor(colours)
        keys = [Rectangle((0, 0), 1, 1, facecolor=colour, edgecolor=INK, linewidth=0.4) for colour in palette.values()]
        axes.legend(
            keys, list(palette), title=_axis_text(view, name), frameon=False, loc="upper left", bbox_to_anchor=(1, 1)
        )
        return
    values = view.numbers(name)
    scale = scale_of(values, view.by_name[name], 1.0)
    if scale is None:
        collection.set_facecolor(NULL_FILL)
        return
    norm: Normalize = (LogNorm if scale.is_log else Normalize)(scale.low, scale.high)
    cmap = mpl.colors.ListedColormap(list(RAMP)).with_extremes(bad=NULL_FILL)
    collection.set(array=np.ma.masked_invalid(values[rows]), cmap=cmap, norm=norm)
    bar = figure.colorbar(collection, ax=axes, orientation="horizontal", shrink=0.5, aspect=40, pad=0.02)
    bar.set_label(_axis_text(view, name))
    bar.ax.xaxis.set_major_formatter(_PLAIN)
    bar.outline.set_visible(False)


def _scale_bar(axes: Axes, plane: MapPlane, x: float, y: float, span: float) -> None:
    length = nice_ticks(0.0, 0.25 * span, 2)[-1]
    axes.plot([x, x + length], [y, y], color=INK, linewidth=1.2, solid_capstyle="butt")
    axes.text(x + length + 0.01 * span, y, bar_text(length, plane.unit), va="center")


def _panels(view: View, draw: Callable[[View, str, Axes], None]) -> Figure | None:
    names = [name for name in (view.named(bare) for bare in KEY_COLUMNS) if name]
    names = [name for name in names if not np.isnan(view.numbers(name)).all()][:MAX_PANELS]
    if not names:
        return None
    lines = -(-len(names) // 3)
    figure = _new(2.1 * lines)
    for place, name in enumerate(names, start=1):
        axes = figure.add_subplot(lines, 3, place)
        draw(view, name, axes)
        _scaled(axes, "x", is_log=_is_log(view, name))
        axes.set_xlabel(_axis_text(view, name))
    return figure


def _histogram(view: View, name: str, axes: Axes) -> None:
    counted = histogram(view.numbers(name), is_log=_is_log(view, name))
    edges = 10.0**counted.edges if counted.is_log else counted.edges
    axes.stairs(counted.counts, edges, fill=True, color="#8fb0a8")
    axes.set_ylabel("shapes")


def _boxes(view: View, name: str, axes: Axes) -> None:
    classes = class_column(view)
    texts = np.array(view.texts(str(classes)), dtype=object)
    levels = view.levels(str(classes)) or list(dict.fromkeys(text for text in texts.tolist() if text is not None))
    values = view.numbers(name)
    boxes = [box(level, values[texts == level]) for level in levels[:12]]
    stats = [
        {"label": f"{one.level} ({one.count})", "whislo": one.low, "q1": one.lower, "med": one.median, "q3": one.upper,
         "whishi": one.high, "fliers": one.outliers}
        for one in reversed(boxes)
        if one.count
    ]  # fmt: skip
    axes.bxp(
        stats,
        orientation="horizontal",
        patch_artist=True,
        widths=0.5,
        boxprops={"facecolor": "#8fb0a8", "linewidth": 0.6},
        medianprops={"color": INK, "linewidth": 1.4},
        whiskerprops={"linewidth": 0.6},
        capprops={"linewidth": 0.6},
        flierprops={"marker": "o", "markersize": 2, "markeredgewidth": 0.5, "markeredgecolor": INK},
    )


def _scatter(view: View) -> Figure | None:
    names = [name for name in (view.named(bare) for bare in ("polsby_popper", "axis_ratio", *KEY_COLUMNS)) if name]
    names = list(dict.fromkeys(names))[:2]
    if len(names) < 2:
        return None
    figure = _new(4.2)
    axes = figure.add_subplot()
    x, y = (view.numbers(name) for name in names)
    classes = class_column(view)
    if classes is None:
        axes.plot(x, y, ".", color=KELP, markersize=4, markeredgewidth=0)
    else:
        texts = np.array(view.texts(classes), dtype=object)
        for level, colour in class_colours(view.levels(classes)).items():
            mine = texts == level
            axes.plot(x[mine], y[mine], ".", color=colour, markersize=5, markeredgewidth=0, label=level)
        axes.legend(title=_axis_text(view, classes), frameon=False, loc="upper left", bbox_to_anchor=(1, 1))
    for side, name in zip("xy", names, strict=True):
        _scaled(axes, side, is_log=_is_log(view, name))
        (axes.set_xlabel if side == "x" else axes.set_ylabel)(_axis_text(view, name))
    axes.grid(color=RULE, linewidth=0.4)
    axes.set_axisbelow(True)
    return figure


def _directions(view: View) -> Figure | None:
    azimuth = view.bare("axis_azimuth_deg")
    if azimuth is None or np.isnan(azimuth).all():
        return None
    figure = Figure(figsize=(WIDTH_IN / 2, WIDTH_IN / 2), layout="constrained")
    FigureCanvasAgg(figure)
    axes: Any = figure.add_subplot(projection="polar")
    axes.set_theta_zero_location("N")
    axes.set_theta_direction(-1)
    counts = np.tile(rose_counts(azimuth), 2)
    middle = np.radians(np.arange(2 * ROSE_BINS) * 180.0 / ROSE_BINS)
    # Areas of sectors are as counts.
    axes.bar(middle, np.sqrt(counts), width=np.pi / ROSE_BINS, color="#8fb0a8", edgecolor="white", linewidth=0.5)
    rings = [value for value in nice_ticks(0.0, float(counts.max()), 3) if value > 0]
    axes.set_rticks(np.sqrt(rings), [number_text(value) for value in rings])
    axes.set_rlabel_position(135)
    axes.set_thetagrids([0, 90, 180, 270], ["N", "E", "S", "W"])
    axes.grid(color=RULE, linewidth=0.5)
    axes.spines["polar"].set_visible(False)
    result = prevailing(view)
    if result is not None and result.is_clear:
        reach = float(np.sqrt(counts.max()))
        for turn in (0.0, np.pi):
            axes.plot([0.0, np.radians(result.mean_deg) + turn], [0.0, reach], color=SEAL, linewidth=1.5)
    return figure


def _sheet(rows: tuple[SheetRow, ...], shapes: CloseUps) -> Figure | None:
    if not rows:
        return None
    columns = max(len(row.tiles) for row in rows)
    figure = _new(len(rows) * (WIDTH_IN / columns * (1.1 + LABEL_ROOM) + 0.2))
    outline = simplified(shapes.outline, np.inf, DRAWN_VERTICES)
    size = extents(outline)
    panels = figure.subfigures(len(rows), 1, squeeze=False)[:, 0]
    for row, panel in zip(rows, panels, strict=True):
        panel.suptitle(row.title, x=0.01, ha="left", fontsize=8.5)
        for place, tile in enumerate(row.tiles):
            axes = panel.add_subplot(1, columns, place + 1)
            _small(axes, _outlines(outline, np.array([tile.index])), float(size[tile.index]))
            axes.set_title(f"{tile.label}\n{tile.value}", fontsize=5.5, y=0.0, va="bottom", color=INK)
    return figure


def _small(axes: Axes, patches: list[PathPatch], size: float) -> None:
    axes.set_axis_off()
    axes.set_aspect("equal")
    for patch in patches:
        patch.set(facecolor=KELP, linewidth=0)
        axes.add_patch(patch)
        ends = patch.get_path().get_extents()
        x, y = 0.5 * (ends.x0 + ends.x1), 0.5 * (ends.y0 + ends.y1)
        axes.set_xlim(x - 0.53 * size, x + 0.53 * size)
        # The room below is for the label.
        axes.set_ylim(y - (0.55 + LABEL_ROOM) * size, y + 0.53 * size)
