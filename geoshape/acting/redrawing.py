"""Redraw the outlines of a layer from their first harmonics."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import asdict, dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import shapely

from geoshape.acting.laid import Laid, lay
from geoshape.acting.opened import ActOptions, Opened, Written, open_for, with_columns
from geoshape.columns import Column, Kind
from geoshape.decide.redraw import RedrawOptions, polygons_of, redraw_rings
from geoshape.geometry import ObjectArray, read_wkb
from geoshape.ground.equal_area import GroundPlan
from geoshape.ground.inverse import WayBack
from geoshape.ground.place import open_ground
from geoshape.ground.seams import FRAME_LAYER
from geoshape.layers.plan import OutputPlan
from geoshape.layers.tables import column_fields
from geoshape.layers.write import OutputBatch
from geoshape.options import MeasureOptions, Source, Target
from geoshape.task import Sent

_REDRAW = "redraw"

_FOURIER = "Kuhl & Giardina 1982, Computer Graphics and Image Processing 18"

REDRAW_COLUMNS = (
    Column(
        "redraw_area_m2", "rdrw_area", Kind.NUMBER, "m2", 0.0, None, "area of the redrawn polygon", _FOURIER, _REDRAW
    ),
    Column(
        "redraw_area_error",
        "rdrw_error",
        Kind.NUMBER,
        "1",
        None,
        None,
        "area as redrawn over that of the same rings before, less 1",
        "",
        _REDRAW,
    ),
    Column(
        "redraw_note", "rdrw_note", Kind.TEXT, "", None, None, "what is wrong with the redrawn polygon", "", _REDRAW
    ),
)

ROUND_POLE = "the outline goes round a pole, and has no ring in longitude and latitude; use a polar CRS"
NO_WAY_BACK = "the redrawn outline leaves what the layer's CRS can hold"


@dataclass(frozen=True, kw_only=True)
class RedrawSummary:
    """What redrawing made of a layer.

    Attributes
    ----------
    written : Written
    redrawn : int
        Rows with a redrawn outline.
    with_notes : int
        Rows whose redrawn outline has something wrong.
    median_area_error, largest_area_error : float or None
        Of the absolute values of ``redraw_area_error``; None where nothing was redrawn.
    """

    written: Written
    redrawn: int
    with_notes: int
    median_area_error: float | None
    largest_area_error: float | None


def redraw_file(
    source: str | Path | Source,
    target: str | Path | Target,
    *,
    options: RedrawOptions | None = None,
    how: ActOptions | None = None,
) -> RedrawSummary:
    """Write a layer with its outlines redrawn from their first harmonics.

    Parameters
    ----------
    source, target : str, Path, or Source and Target
    options : RedrawOptions, optional
    how : ActOptions, optional

    Returns
    -------
    RedrawSummary

    Raises
    ------
    ReadError, GroundError, WriteError
        As for `measure_file`.

    Notes
    -----
    One pass over the layer. Outlines are redrawn on equal-area ground and brought back to the layer's CRS, without
    heights. A row that cannot be measured has no geometry; ``shape_note`` says why.
    """
    how, options = how or ActOptions(), options or RedrawOptions()
    target = target if isinstance(target, Target) else Target(path=target)
    opened = open_for(source, how, needs_ground=True)
    plan = opened.plan(target, REDRAW_COLUMNS, "MultiPolygon" if options.all_parts else "Polygon")
    tally = _Tally()
    written = opened.write(plan, _redrawn(opened, plan, options, tally), _REDRAW, asdict(options))
    errors = np.abs(np.concatenate([np.zeros(0), *tally.errors]))
    return RedrawSummary(
        written=written,
        redrawn=len(errors),
        with_notes=tally.with_notes,
        median_area_error=float(np.median(errors)) if len(errors) else None,
        largest_area_error=float(errors.max()) if len(errors) else None,
    )


@dataclass(eq=False)
class _Tally:
    errors: list[np.ndarray[Any, np.dtype[np.float64]]] = field(default_factory=list)
    with_notes: int = 0


def _redrawn(opened: Opened, plan: OutputPlan, options: RedrawOptions, tally: _Tally) -> Iterator[OutputBatch]:
    settings = (opened.ground, opened.how.measure, options)
    added = (*opened.missing, *REDRAW_COLUMNS)
    schema = pa.schema([*opened.schema, *column_fields(REDRAW_COLUMNS)])
    for batch, (values, wkb) in opened.answers(prepare_redrawing, settings):
        error = values["redraw_area_error"]
        tally.errors.append(error[np.isfinite(error)])
        tally.with_notes += sum(note is not None for note in values["redraw_note"])
        whole = with_columns(batch, added, values, schema)
        opened.count(whole)
        attributes = pa.RecordBatch.from_arrays(whole.attributes.columns, schema=plan.schema)
        yield OutputBatch(attributes, pa.array(wkb, pa.binary()))


def prepare_redrawing(
    settings: tuple[GroundPlan, MeasureOptions, RedrawOptions],
) -> Callable[[Sent], tuple[dict[str, Any], ObjectArray]]:
    """Open the ground once in a process, and redraw a batch's outlines at every call."""
    plan, measure, options = settings
    ground, way_back = open_ground(plan), WayBack(plan)

    def work(sent: Sent) -> tuple[dict[str, Any], ObjectArray]:
        values, first_row = sent
        laid = lay(*read_wkb(values), ground, measure, first_row=first_row)
        columns, geometries = redraw_laid(laid, way_back, options)
        return {**laid.record(), **columns}, np.asarray(shapely.to_wkb(geometries), dtype=object)

    return work


def redraw_laid(laid: Laid, way_back: WayBack, options: RedrawOptions) -> tuple[dict[str, Any], ObjectArray]:
    """Redraw outlines that were laid on the ground, and bring them back to the layer's coordinates.

    Returns
    -------
    columns : dict of str to (n,) array
    geometries : (n,) object of Polygon, MultiPolygon or None
        Polygons, or MultiPolygons where all parts are drawn.
    """
    drawn = redraw_rings(laid.placed.batch, options)
    x, y = way_back.coordinates(drawn.batch, laid.placed)
    lost = np.zeros(drawn.batch.n_features, dtype=np.bool_)
    lost[drawn.batch.vertex_feature[~(np.isfinite(x) & np.isfinite(y))]] = True
    round_pole = (laid.frames != FRAME_LAYER) & ~np.isnan(drawn.area_m2)
    keep = ~(lost | round_pole)
    origin = np.zeros_like(drawn.batch.origin)
    back = replace(drawn.batch, x=np.nan_to_num(x), y=np.nan_to_num(y), origin=origin)
    geometries = polygons_of(back.take_rings(keep[back.ring_feature]))
    if options.all_parts:
        single = shapely.get_type_id(geometries) == shapely.GeometryType.POLYGON
        geometries[single] = shapely.multipolygons(geometries[single][:, None])
    columns = drawn.columns()
    note = columns["redraw_note"].copy()
    note[round_pole] = ROUND_POLE
    note[lost & ~round_pole] = NO_WAY_BACK
    return {**columns, "redraw_note": note}, geometries
