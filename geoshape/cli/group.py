"""``geoshape group``: classes of alike shapes, with the prototype of each."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from geoshape.cli.act_choices import (
    acting,
    columns_option,
    measure_first_options,
    plain_table,
    refuse_two_results,
    tell,
)
from geoshape.cli.choices import FamilyList, Manner, bundle, manner_options, source_options, target_options
from geoshape.options import MeasureOptions, Source, Target

if TYPE_CHECKING:
    from rich.table import Table

    from geoshape.acting.grouping import GroupSummary
    from geoshape.decide.group import GroupOptions


def _options(values: dict[str, Any]) -> GroupOptions:
    from geoshape.acting.wanted import SHAPE_COLUMNS, columns_of_families
    from geoshape.decide.group import GroupOptions

    columns, families = values["columns"], values["families"]
    if columns and families:
        raise click.UsageError("--columns and --families exclude each other; name columns, or families of them")
    chosen = columns_of_families(families) if families else columns or SHAPE_COLUMNS
    return GroupOptions(columns=chosen, count=values["count"], seed=values["seed"], logs=not values["no_logs"])


group_options = bundle(
    "grouping",
    _options,
    columns_option,
    click.option(
        "--families", type=FamilyList(), default=None, help="Go by all numbers of these families, but directions."
    ),
    click.option(
        "--count", type=int, default=None, help="Number of groups; the one of highest silhouette if left out."
    ),
    click.option("--seed", type=int, default=0, show_default=True, help="The same seed gives the same groups."),
    click.option("--no-logs", is_flag=True, help="Take long-tailed columns as they are, not as logarithms."),
)


@click.command("group")
@source_options
@target_options
@group_options
@measure_first_options
@manner_options
def command(
    source: Source,
    target: Target,
    grouping: GroupOptions,
    measure: MeasureOptions,
    manner: Manner,
) -> None:
    """Sort the features of INPUT into groups of alike shape, and write the layer to OUTPUT.

    New columns: group (1 the largest), group_distance from its centre, is_prototype (1 or 0), and group_note where
    there is no group. Without --columns or --families shapes are told apart whatever their size and direction.
    """
    refuse_two_results(target, manner)
    from geoshape.acting.grouping import group_file

    with acting(measure, manner, "grouped") as how:
        summary = group_file(source, target, grouping, how=how)
    tables = [] if manner.quiet or manner.as_json else [_table(summary)]
    tell(summary, manner, _head(summary), tables)


def _head(summary: GroupSummary) -> list[tuple[str, str]]:
    count = len(summary.groups)
    lines = [("grouped", f"{summary.grouped:,} of {summary.written.rows:,} rows into {count} groups")]
    share = f"{100.0 * summary.variance_explained:.0f} % of the variance lies between groups"
    if count in summary.silhouettes:
        share += f", mean silhouette {summary.silhouettes[count]:.2f}"
        if len(summary.silhouettes) > 1:
            least, most = min(summary.silhouettes), max(summary.silhouettes)
            share += f", the highest of {least} to {most} groups"
    return [*lines, ("how apart", share)]


def _table(summary: GroupSummary) -> Table:
    from geoshape.decide.summary_text import number_text

    table = plain_table([("group", True), ("rows", True), ("prototype", True), ("set apart by (median there)", False)])
    for group in summary.groups:
        reasons = (
            f"{name} {'high' if effect > 0 else 'low'} ({number_text(group.typical[name], 3)})"
            for name, effect in group.set_apart_by
        )
        table.add_row(str(group.number), f"{group.size:,}", f"row {group.prototype_row:,}", ", ".join(reasons))
    return table
