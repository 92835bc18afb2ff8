"""``geoshape summarise``: statistics of a layer by class or zone."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from geoshape.cli.act_choices import ColumnList, acting, columns_option, measure_first_options
from geoshape.cli.choices import Manner, bundle, manner_options, source_options
from geoshape.options import MeasureOptions, Source

if TYPE_CHECKING:
    from rich.table import Table

    from geoshape.acting.summarising import FileSummary
    from geoshape.decide.summarise import Summary, SummaryOptions, Variable

DIGITS = 4
GAP = 2


def _options(values: dict[str, Any]) -> SummaryOptions:
    from geoshape.decide.summarise import DEFAULT_QUANTILES, SummaryOptions

    return SummaryOptions(
        by=values["by"],
        columns=values["columns"] or (),
        weights=values["weights"],
        quantiles=values["quantiles"] or DEFAULT_QUANTILES,
        axial=values["axial"] or (),
        bearings=values["bearings"] or (),
    )


class ShareList(click.ParamType[tuple[float, ...]]):
    """Shares from 0 to 1, separated by commas."""

    name = "list"

    def convert(self, value: str, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, ...]:
        """Turn text into numbers."""
        try:
            return tuple(float(word) for word in value.split(","))
        except ValueError:
            self.fail(f"{value!r}: give shares from 0 to 1, separated by commas, such as 0.1,0.5,0.9", param, ctx)


summary_options = bundle(
    "statistics",
    _options,
    click.option("--by", multiple=True, metavar="COLUMN", help="Class or zone column. May be repeated."),
    columns_option,
    click.option("--weights", metavar="COLUMN", help="Weights of the weighted mean; the area where left out."),
    click.option("--quantiles", type=ShareList(), default=None, metavar="SHARE,SHARE", help="Such as 0.1,0.5,0.9."),
    click.option(
        "--axial", type=ColumnList(), default=None, metavar="NAME,NAME", help="Own columns of axes, in degrees."
    ),
    click.option(
        "--bearings", type=ColumnList(), default=None, metavar="NAME,NAME", help="Own columns of bearings, in degrees."
    ),
)

form_options = bundle(
    "form",
    lambda values: next((form for form in ("csv", "markdown") if values[f"as_{form}"]), "table"),
    click.option("--csv", "as_csv", is_flag=True, help="Write CSV, a line for each column and class."),
    click.option("--markdown", "as_markdown", is_flag=True, help="Write Markdown, a table for each column."),
)


@click.command("summarise")
@source_options
@summary_options
@form_options
@measure_first_options
@manner_options
def command(source: Source, statistics: SummaryOptions, form: str, measure: MeasureOptions, manner: Manner) -> None:
    """Summarise columns of INPUT by class: counts, sums, means, spread, quantiles, mean directions.

    Columns that INPUT does not have are measured first. Without --columns: size, compactness, elongation, direction.
    """
    if manner.as_json and form != "table":
        raise click.UsageError(f"--json and --{form} exclude each other")
    from geoshape.acting.summarising import summarise_file
    from geoshape.decide.summary_text import to_csv, to_json, to_markdown

    writers = {"csv": to_csv, "markdown": to_markdown, "json": to_json}
    with acting(measure, manner, "read") as how:
        found = summarise_file(source, statistics, how=how)
    form = "json" if manner.as_json else form
    if form in writers:
        click.echo(writers[form](found.summary), nl=False)
    else:
        _print_tables(found.summary)
    if not manner.quiet and not manner.as_json:
        _print_notes(found, manner)


def _print_tables(summary: Summary) -> None:
    from geoshape.cli.terminal import output_console

    console = output_console()
    records = summary.statistics.to_pylist()
    size = len(records) // len(summary.variables)
    left_out: list[str] = []
    for index, variable in enumerate(summary.variables):
        if index:
            console.print()
        rows = _cells(variable, records[index * size : (index + 1) * size], summary)
        left_out += [name for name in _fit(rows, console.width) if name not in left_out]
        console.print(_table(variable, rows))
    if left_out:
        click.echo(
            f"left out for want of width: {', '.join(left_out)}; --csv, --json and --markdown have all", err=True
        )


def _cells(variable: Variable, records: list[dict[str, Any]], summary: Summary) -> list[list[str]]:
    """Write a heading and the rows of a column's table."""
    from geoshape.decide.summary_text import class_texts, number_text, shown_fields

    fields = shown_fields(variable, summary)
    rows = [[*(summary.by or ("",)), *(_heading(field, summary) for field in fields)]]
    rows.extend(
        [*class_texts(record, summary), *(number_text(record[field], DIGITS) for field in fields)] for record in records
    )
    return rows


def _heading(field: str, summary: Summary) -> str:
    if field in summary.quantiles:
        return f"{float(field[1:].replace('_', '.')):g} %"
    return _HEADINGS.get(field, field)


_HEADINGS = {
    "nulls": "null",
    "weighted_mean": "weighted",
    "mean_direction_deg": "direction",
    "resultant_length": "resultant",
    "rayleigh_p": "Rayleigh p",
}

_GIVEN_UP = (("5 %", "95 %"), ("25 %", "75 %"), ("cv",), ("weighted",))
"""What a narrow terminal leaves out, the first first."""


def _fit(rows: list[list[str]], width: int) -> list[str]:
    """Take columns out of a table until it fits; name those taken."""
    taken = []
    for headings in _GIVEN_UP:
        needed = sum(max(map(len, column)) + GAP for column in zip(*rows, strict=True))
        if needed <= width:
            break
        for heading in headings:
            if heading in rows[0]:
                at = rows[0].index(heading)
                for row in rows:
                    del row[at]
                taken.append(heading)
    return taken


def _table(variable: Variable, rows: list[list[str]]) -> Table:
    from rich.markup import escape
    from rich.table import Table

    unit = f" [{variable.unit}]" if variable.unit not in {"", "1"} else ""
    first_number = rows[0].index("count")
    table = Table(
        box=None,
        pad_edge=False,
        padding=(0, GAP, 0, 0),
        header_style="",
        title=escape(f"{variable.name}{unit}"),
        title_justify="left",
        title_style="bold",
    )
    for index, heading in enumerate(rows[0]):
        table.add_column(escape(heading), justify="right" if index >= first_number else "left", no_wrap=True)
    for row in rows[1:]:
        table.add_row(*map(escape, row))
    return table


def _print_notes(found: FileSummary, manner: Manner) -> None:
    if found.ground and manner.verbose:
        click.echo(f"measured {', '.join(found.measured)} on {found.ground}", err=True)
    for text in found.warnings:
        click.echo(f"note  {text}", err=True)
