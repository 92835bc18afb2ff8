"""``geoshape compare``: what became of each polygon between two surveys."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from geoshape.cli.act_choices import (
    ColumnList,
    acting,
    columns_option,
    measure_first_options,
    plain_table,
    refuse_two_results,
    tell,
)
from geoshape.cli.choices import Manner, bundle, manner_options, target_options
from geoshape.options import MeasureOptions, Source, Target

if TYPE_CHECKING:
    from rich.table import Table

    from geoshape.acting.comparing import CompareSources, CompareSummary
    from geoshape.decide.compare import CompareOptions

OVERLAP = "overlap"


def _sources(values: dict[str, Any]) -> CompareSources:
    from geoshape.acting.comparing import CompareSources

    before, after = (
        Source(path=values[f"{side}_path"], layer=values[f"{side}_layer"], where=values[f"{side}_where"])
        for side in ("before", "after")
    )
    by = None if values["by"] == OVERLAP else values["by"]
    return CompareSources(before=before, after=after, by=by, min_share=values["min_share"])


def _options(values: dict[str, Any]) -> CompareOptions:
    from geoshape.decide.compare import CompareOptions
    from geoshape.decide.match import MatchOptions

    outline = MatchOptions(keep_direction=values["keep_direction"], keep_size=values["keep_size"])
    return CompareOptions(columns=values["columns"] or (), sums=values["sums"] or (), outline=outline)


surveys_options = bundle(
    "sources",
    _sources,
    click.argument("before_path", metavar="BEFORE"),
    click.argument("after_path", metavar="AFTER"),
    click.option("--before-layer", metavar="NAME", help="Layer of BEFORE, where the file holds several."),
    click.option("--after-layer", metavar="NAME", help="Layer of AFTER, where the file holds several."),
    click.option("--before-where", metavar="SQL", help="Read only rows of BEFORE that meet this condition."),
    click.option("--after-where", metavar="SQL", help="Read only rows of AFTER that meet this condition."),
    click.option(
        "--by",
        default=OVERLAP,
        show_default=True,
        metavar="overlap|COLUMN",
        help="Pair polygons that cover the same ground, or rows with the same value in a column of both.",
    ),
    click.option(
        "--min-share",
        type=float,
        default=0.5,
        show_default=True,
        help="Least share of the smaller polygon that two must have in common to belong together.",
    ),
)

compare_options = bundle(
    "comparison",
    _options,
    columns_option,
    click.option(
        "--sums",
        type=ColumnList(),
        default=None,
        metavar="NAME,NAME",
        help="Own columns that add up when polygons are taken together, such as inhabitants.",
    ),
    click.option("--keep-direction", is_flag=True, help="Outlines that turned count as different."),
    click.option("--keep-size", is_flag=True, help="Outlines that grew count as different."),
)


@click.command("compare")
@surveys_options
@target_options
@compare_options
@measure_first_options
@manner_options
def command(
    sources: CompareSources,
    target: Target,
    comparison: CompareOptions,
    measure: MeasureOptions,
    manner: Manner,
) -> None:
    """Compare the surveys BEFORE and AFTER, and write a row for each relation between their polygons to OUTPUT.

    relation says what became of the polygons: kept, split, merged, rearranged, lost or new. Of each column its value
    before and after, difference and ratio; where both surveys have its standard error, NAME_se, also NAME_changed.
    """
    refuse_two_results(target, manner)
    from geoshape.acting.comparing import compare_files

    with acting(measure, manner, "read") as how:
        summary = compare_files(sources, target, comparison, how=how)
    tables = [] if manner.quiet or manner.as_json else [_table(summary)]
    tell(summary, manner, _head(summary), tables)


def _head(summary: CompareSummary) -> list[tuple[str, str]]:
    head = f"{summary.rows_before:,} rows before and {summary.rows_after:,} after, paired by {summary.paired_by}"
    lines = [("compared", head), ("plane", summary.plane)]
    if summary.changed:
        lines.append(("changed", ", ".join(f"{name} in {count:,}" for name, count in summary.changed.items())))
    return lines


def _table(summary: CompareSummary) -> Table:
    from geoshape.decide.summary_text import number_text

    table = plain_table(
        [
            ("relation", False),
            ("count", True),
            ("rows before", True),
            ("rows after", True),
            ("area before [m2]", True),
            ("after [m2]", True),
            ("shared [m2]", True),
        ]
    )
    for found in summary.relations:
        areas = (found.area_before_m2, found.area_after_m2, found.area_shared_m2)
        counts = (found.n_relations, found.n_before, found.n_after)
        table.add_row(found.relation, *(f"{n:,}" for n in counts), *(number_text(area, 4) for area in areas))
    return table
