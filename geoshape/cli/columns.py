"""``geoshape columns``: the data dictionary."""

from __future__ import annotations

import json

import click

from geoshape.cli.choices import families_option
from geoshape.columns import Column, columns_for
from geoshape.options import Family, MeasureOptions


@click.command("columns")
@families_option
@click.option("--harmonics", type=int, default=8, show_default=True, help="Highest harmonic with its own columns.")
@click.option("--log-moments", is_flag=True, help="List the signed logarithms of the Hu invariants as well.")
@click.option("--prefix", default="", help="Put this before every name.")
@click.option("--json", "as_json", is_flag=True, help="Write JSON.")
@click.option("--markdown", "as_markdown", is_flag=True, help="Write a Markdown table.")
def command(
    families: tuple[Family, ...], harmonics: int, prefix: str, *, log_moments: bool, as_json: bool, as_markdown: bool
) -> None:
    """List the columns that `measure` writes: name, short name for shapefiles, unit, range, meaning and source."""
    if as_json and as_markdown:
        raise click.UsageError("--json and --markdown exclude each other")
    options = MeasureOptions(
        families=families,
        harmonics=harmonics,
        samples=max(256, 2 * harmonics + 2),
        log_moments=log_moments,
        prefix=prefix,
    )
    columns = columns_for(options)
    if as_json:
        click.echo(json.dumps([_record(column) for column in columns], indent=2))
    elif as_markdown:
        click.echo(markdown_table(columns))
    else:
        _print_table(columns)


def _record(column: Column) -> dict[str, str | float | None]:
    return {
        "name": column.name,
        "short_name": column.short_name,
        "family": column.family,
        "kind": str(column.kind),
        "unit": column.unit,
        "low": column.low,
        "high": column.high,
        "meaning": column.meaning,
        "source": column.source,
    }


def bounds_text(column: Column) -> str:
    """Say the range of a column in a few signs.

    Examples
    --------
    >>> from geoshape.columns import columns_for
    >>> [bounds_text(column) for column in columns_for(MeasureOptions(families=("axes",)))][-2:]
    ['0 ... 180', '0 ... 1']
    """
    if column.low is None and column.high is None:
        return ""
    if column.high is None:
        return f">= {column.low:g}"
    return f"{column.low:g} ... {column.high:g}"


def markdown_table(columns: tuple[Column, ...]) -> str:
    """Write columns as a Markdown table."""
    rows = ["| column | short name | unit | range | meaning | source |", "| --- | --- | --- | --- | --- | --- |"]
    for column in columns:
        cells = (
            f"`{column.name}`",
            f"`{column.short_name}`",
            column.unit,
            bounds_text(column),
            column.meaning,
            column.source,
        )
        rows.append("| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |")
    return "\n".join(rows)


def _print_table(columns: tuple[Column, ...]) -> None:
    from rich.table import Table

    from geoshape.cli.terminal import output_console

    console = output_console()
    table = Table(box=None, pad_edge=False, header_style="bold")
    for heading, wraps in (("column", False), ("short", False), ("unit", False), ("range", False), ("meaning", True)):
        table.add_column(heading, no_wrap=not wraps, overflow="fold")
    family = ""
    for column in columns:
        if column.family != family:
            family = column.family
            table.add_row(f"[bold]{family}[/bold]")
        table.add_row(f"  {column.name}", column.short_name, column.unit, bounds_text(column), column.meaning)
    console.print(table)
