"""Match the outlines of a layer to templates."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyproj

from geoshape.acting.laid import lay
from geoshape.acting.opened import (
    ActOptions,
    Opened,
    Written,
    bounds_of,
    open_for,
    output_batch,
    with_columns,
)
from geoshape.columns import Column, Kind
from geoshape.decide.match import Likeness, MatchOptions, Templates, make_templates, match_outlines, rank
from geoshape.decide.outlines import Outlines
from geoshape.decide.tabular import require_columns, whole
from geoshape.errors import OptionError
from geoshape.geometry import read_wkb
from geoshape.ground.equal_area import GroundPlan, plan_ground
from geoshape.ground.place import open_ground
from geoshape.layers.layer import LayerBatch
from geoshape.layers.plan import OutputPlan
from geoshape.layers.read import open_layer, read_batches
from geoshape.layers.spool import Spool
from geoshape.layers.tables import column_fields
from geoshape.layers.write import OutputBatch
from geoshape.options import GROUND_PLANE, MeasureOptions, Source, Target
from geoshape.rings import FloatArray
from geoshape.task import Sent

_KUHL = "Kuhl & Giardina 1982, Computer Graphics and Image Processing 18"
_MATCH = "match"

MATCH_COLUMNS = (
    Column(
        "match_template", "mtch_templ", Kind.TEXT, "", None, None, "template that the outline is most like", "", _MATCH
    ),
    Column(
        "match_distance",
        "mtch_dist",
        Kind.NUMBER,
        "1",
        0.0,
        None,
        "0 for the same shape, at most sqrt(2) where size is free: sqrt(2 - 2 rho) at the best turn and first point",
        _KUHL,
        _MATCH,
    ),
    Column(
        "match_turn_deg",
        "mtch_turn",
        Kind.NUMBER,
        "deg",
        -180.0,
        180.0,
        "clockwise turn that lays the template on the outline",
        "",
        _MATCH,
    ),
    Column(
        "match_scale",
        "mtch_scale",
        Kind.NUMBER,
        "1",
        0.0,
        None,
        "size of the outline over that of the template",
        "",
        _MATCH,
    ),
    Column(
        "match_mirrored",
        "mtch_mirr",
        Kind.COUNT,
        "1",
        0.0,
        1.0,
        "1 where the template's mirror image fits better",
        "",
        _MATCH,
    ),
    Column(
        "match_rank",
        "mtch_rank",
        Kind.COUNT,
        "1",
        1.0,
        None,
        "rank in the layer by distance, 1 the most alike",
        "",
        _MATCH,
    ),
)

CLOSEST_LISTED = 5


@dataclass(frozen=True, kw_only=True)
class TemplateSource:
    """Where templates come from.

    Attributes
    ----------
    source : Source
        A layer whose polygons are the templates.
    names : str or None
        Column with their names; row numbers, from 1, where left out.
    """

    source: Source
    names: str | None = None


@dataclass(frozen=True)
class TemplateCount:
    """What one template was found to be nearest to.

    Attributes
    ----------
    name : str
    n_nearest : int
        Rows that are most like this template.
    least_distance, median_distance : float or None
        Over those rows; None where there are none.
    """

    name: str
    n_nearest: int
    least_distance: float | None
    median_distance: float | None


@dataclass(frozen=True, kw_only=True)
class MatchSummary:
    """What matching found in a layer.

    Attributes
    ----------
    written : Written
    matched : int
        Rows with an outline.
    templates : tuple of TemplateCount
    notes : tuple of str
    """

    written: Written
    matched: int
    templates: tuple[TemplateCount, ...]
    notes: tuple[str, ...]


def read_templates(templates: TemplateSource) -> tuple[Templates, tuple[str, ...]]:
    """Read templates, each on equal-area ground about its own centre.

    Parameters
    ----------
    templates : TemplateSource

    Returns
    -------
    templates : Templates
    notes : tuple of str
        That the file has no CRS, where it has none: its coordinates are then taken as they are.

    Raises
    ------
    ReadError, LayerChoiceError
        The layer cannot be read.
    OptionError
        There is no template, the column of names is not there, or a name is null or repeats.
    GeometryError
        A template has no ring or no area.
    """
    source = templates.source
    info = open_layer(source.path, layer=source.layer, where=source.where, bbox=source.bbox)
    batches = list(read_batches(info))
    values = [value for batch in batches for value in batch.geometry.to_pylist()]
    table = pa.Table.from_batches([batch.attributes for batch in batches], info.schema)
    names = template_names(table, templates.names, len(values))
    crs = pyproj.CRS(info.crs_wkt) if info.crs_wkt else None
    notes = () if crs else (f"{source.path} has no CRS: templates are taken from its coordinates as they are",)
    options = MeasureOptions() if crs else MeasureOptions(ground=GROUND_PLANE)
    geometries, unreadable = read_wkb(values)
    ground = open_ground(plan_ground(crs, bounds_of([geometries]), options))
    return make_templates(names, lay(geometries, unreadable, ground, options).outlines()), notes


def template_names(table: pa.Table, column: str | None, n_rows: int) -> list[str]:
    """Take the names of templates from a column, or number them from 1 where none is named.

    Raises
    ------
    OptionError
        The column is not there, or a name is null or empty.
    """
    if column is None:
        return [str(row) for row in range(1, n_rows + 1)]
    require_columns([column], table.schema, "template names")
    names = whole(table, column).to_pylist()
    for row, name in enumerate(names, start=1):
        if name is None or not str(name).strip():
            raise OptionError(f"template names: column {column!r} is empty in row {row}; fill it, or leave out names")
    return [str(name) for name in names]


def match_file(
    source: str | Path | Source,
    target: str | Path | Target,
    templates: TemplateSource | Templates,
    *,
    options: MatchOptions | None = None,
    how: ActOptions | None = None,
) -> MatchSummary:
    """Find for each outline of a layer the template that it is most like, and write the layer with the finding.

    Parameters
    ----------
    source, target : str, Path, or Source and Target
    templates : TemplateSource or Templates
    options : MatchOptions, optional
        What counts as alike.
    how : ActOptions, optional

    Returns
    -------
    MatchSummary

    Raises
    ------
    OptionError, GeometryError
        A template cannot be used.
    ReadError, GroundError, WriteError
        As for `measure_file`.

    Notes
    -----
    The outline of a feature is the exterior of its largest part, on equal-area ground with true north up. Rows are
    kept aside in the system's temporary folder until the ranks are known.
    """
    how, options = how or ActOptions(), options or MatchOptions()
    target = target if isinstance(target, Target) else Target(path=target)
    opened = open_for(source, how, needs_ground=True)
    found, notes = (templates, ()) if isinstance(templates, Templates) else read_templates(templates)
    columns = [c for c in MATCH_COLUMNS if options.by is Likeness.OUTLINE or c.name not in _OUTLINE_ONLY]
    plan = opened.plan(target, columns)
    schema = pa.schema([*opened.schema, *column_fields(columns[:-1])])
    added = (*opened.missing, *columns[:-1])
    with opened.spooled(_matched(opened, added, schema, found, options), schema) as spool:
        table = spool.read_columns(["match_template", "match_distance"])
        distance = table.column("match_distance").to_numpy()
        written = opened.write(
            plan, _ranked(spool, rank(distance), plan), _MATCH, _lineage_options(templates, found, options)
        )
    return MatchSummary(
        written=written,
        matched=int(np.isfinite(distance).sum()),
        templates=count_templates(found.names, table.column("match_template").to_numpy(), distance),
        notes=notes,
    )


_OUTLINE_ONLY = frozenset({"match_turn_deg", "match_mirrored"})


def _lineage_options(templates: TemplateSource | Templates, found: Templates, options: MatchOptions) -> dict[str, Any]:
    told: dict[str, Any] = {"templates": list(found.names), **asdict(options)}
    if isinstance(templates, TemplateSource):
        told["template_file"] = Path(str(templates.source.path)).name
    return told


def _matched(
    opened: Opened, added: Sequence[Column], schema: pa.Schema, templates: Templates, options: MatchOptions
) -> Iterator[LayerBatch]:
    settings = (opened.ground, opened.how.measure, templates, options)
    for batch, values in opened.answers(prepare_matches, settings):
        whole_batch = with_columns(batch, added, values, schema)
        opened.count(whole_batch)
        yield whole_batch


def prepare_matches(
    settings: tuple[GroundPlan, MeasureOptions, Templates, MatchOptions],
) -> Callable[[Sent], dict[str, Any]]:
    """Open the ground once in a process, and match a batch's outlines at every call."""
    plan, measure, templates, options = settings
    ground = open_ground(plan)

    def work(sent: Sent) -> dict[str, Any]:
        values, first_row = sent
        laid = lay(*read_wkb(values), ground, measure, first_row=first_row)
        return {**laid.record(), **match_values(laid.outlines(), templates, options)}

    return work


def match_values(outlines: Outlines, templates: Templates, options: MatchOptions) -> dict[str, Any]:
    """Match outlines; give the columns of the result but the rank, with truth as 1 and 0."""
    values: dict[str, Any] = dict(match_outlines(outlines, templates, options))
    mirrored = values["match_mirrored"]
    values["match_mirrored"] = np.array([np.nan if value is None else float(value) for value in mirrored])
    return values


def _ranked(spool: Spool, ranks: FloatArray, plan: OutputPlan) -> Iterator[OutputBatch]:
    last = plan.columns[-1]
    for batch in spool.batches():
        rows = slice(batch.first_row, batch.first_row + batch.n_rows)
        yield output_batch(batch, [last], {last.name: ranks[rows]}, plan)


def count_templates(
    names: Sequence[str], template: np.ndarray[Any, np.dtype[np.object_]], distance: FloatArray
) -> tuple[TemplateCount, ...]:
    """Count the rows that are nearest to each template, and say how near they are."""
    counts = []
    for name in names:
        own = distance[template == name]
        known = len(own) > 0
        counts.append(
            TemplateCount(name, len(own), float(own.min()) if known else None, float(np.median(own)) if known else None)
        )
    return tuple(counts)
