"""Summarise a layer by classes."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import pyarrow as pa

from geoshape.acting.opened import ActOptions, open_for
from geoshape.acting.wanted import whole_schema
from geoshape.decide.known import STATUS
from geoshape.decide.summarise import AREA, Summary, SummaryOptions, summarise
from geoshape.decide.tabular import require_columns
from geoshape.options import Source

SUMMARY_COLUMNS = (
    "area_m2",
    "perimeter_m",
    "polsby_popper",
    "convexity",
    "axis_ratio",
    "axis_azimuth_deg",
)
"""What is summarised where nothing else is asked for: size, compactness, notches, length and direction."""


@dataclass(frozen=True, kw_only=True, eq=False)
class FileSummary:
    """Statistics of a layer.

    Attributes
    ----------
    summary : Summary
    rows : int
        Rows read.
    measured : tuple of str
        Columns that were measured on the way.
    ground : str or None
        Ground on which they were; None where nothing was measured.
    warnings : tuple of str
        What a reader of the numbers should know.
    """

    summary: Summary
    rows: int
    measured: tuple[str, ...]
    ground: str | None
    warnings: tuple[str, ...]


def settled(options: SummaryOptions | None) -> tuple[SummaryOptions, tuple[str, ...]]:
    """Settle which columns are summarised, and which are needed for that.

    Parameters
    ----------
    options : SummaryOptions or None

    Returns
    -------
    options : SummaryOptions
        With its columns named.
    wanted : tuple of str
        Columns and weights, and what says why rows are null.
    """
    options = options or SummaryOptions()
    directions = (*options.axial, *options.bearings)
    columns = options.columns or (() if directions else SUMMARY_COLUMNS)
    options = replace(options, columns=columns)
    return options, tuple(dict.fromkeys((*columns, *directions, options.weights or AREA)))


def summarise_file(
    source: str | Path | Source, options: SummaryOptions | None = None, *, how: ActOptions | None = None
) -> FileSummary:
    """Summarise columns of a layer by class.

    Parameters
    ----------
    source : str, Path or Source
    options : SummaryOptions, optional
        Columns, classes, weights and quantiles. Without columns size, compactness, elongation and direction are
        summarised; without weights means are weighted by area.
    how : ActOptions, optional

    Returns
    -------
    FileSummary

    Raises
    ------
    OptionError
        A column is not there (the nearest name is suggested) or holds no numbers, or a weight is negative.
    ReadError, GroundError
        As for `measure_file`.
    """
    how = how or ActOptions()
    options, wanted = settled(options)
    opened = open_for(source, how, wanted)
    possible = whole_schema(opened.info.schema, wanted)
    require_columns(options.by, opened.info.schema, "by")
    for option in ("columns", "axial", "bearings"):
        require_columns(getattr(options, option), possible, option)
    require_columns([options.weights] if options.weights else [], possible, "weights")
    names = [name for name in dict.fromkeys((*options.by, *wanted, STATUS)) if name in opened.schema.names]
    schema = pa.schema([opened.schema.field(name) for name in names])
    batches = [batch.attributes.select(names) for batch in opened.batches()]
    summary = summarise(pa.Table.from_batches(batches, schema), options)
    return FileSummary(
        summary=summary,
        rows=sum(batch.num_rows for batch in batches),
        measured=tuple(column.name for column in opened.missing if column.name in wanted),
        ground=opened.ground.label if opened.ground else None,
        warnings=(*opened.info.warnings, *(opened.ground.warnings if opened.ground else ())),
    )
