"""Arguments and options that the deciding commands share, and how their summaries begin and end."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import click

from geoshape.cli.choices import Manner, assume_crs_option, bundle, prefix_option
from geoshape.options import GROUND_CENTRED, Invalid, MeasureOptions, Target

if TYPE_CHECKING:
    from rich.console import Console
    from rich.table import Table

    from geoshape.acting.opened import ActOptions, Written

STDOUT = "-"

MAX_WARNINGS = 5

measure_first_options = bundle(
    "measure",
    lambda values: MeasureOptions(**values),
    click.option(
        "--ground",
        default=GROUND_CENTRED,
        show_default=True,
        metavar="centred|layer|plane|CRS",
        help="Where shapes are measured, as far as INPUT does not have the columns yet.",
    ),
    assume_crs_option,
    click.option(
        "--invalid",
        type=click.Choice([str(member) for member in Invalid]),
        default=str(Invalid.REPAIR),
        show_default=True,
        help="Invalid geometries are repaired for measuring, get nulls, or stop the run.",
    ),
    prefix_option,
)


class ColumnList(click.ParamType[tuple[str, ...]]):
    """Names of columns, separated by commas."""

    name = "list"

    def convert(self, value: str, param: click.Parameter | None, ctx: click.Context | None) -> tuple[str, ...]:
        """Turn text into names."""
        names = tuple(word.strip() for word in value.split(",") if word.strip())
        if not names:
            self.fail(f"{value!r} names no column", param, ctx)
        return names


columns_option = click.option(
    "--columns", type=ColumnList(), metavar="NAME,NAME", default=None, help="Columns to go by, separated by commas."
)


def refuse_two_results(target: Target, manner: Manner) -> None:
    """Refuse a summary as JSON and a table as CSV on the same standard output."""
    if manner.as_json and str(target.path) == STDOUT:
        raise click.UsageError("--json and OUTPUT - both write to standard output; choose one")


@contextmanager
def acting(measure: MeasureOptions, manner: Manner, what: str) -> Iterator[ActOptions]:
    """Show progress while a command acts, and say how it is to work."""
    from geoshape.acting.opened import ActOptions
    from geoshape.cli.terminal import progress_of
    from geoshape.pool import keep_freed_memory

    keep_freed_memory()
    with progress_of(what, quiet=manner.quiet or manner.as_json) as progress:
        yield ActOptions(measure=measure, jobs=manner.jobs, progress=progress)


def tell(summary: Any, manner: Manner, lines: Sequence[tuple[str, str]], tables: Sequence[Table] = ()) -> None:
    """Say what a command did: as JSON on standard output, or in words on standard error.

    Parameters
    ----------
    summary : dataclass
        With a field ``written``.
    manner : Manner
    lines : sequence of (str, str)
        Label and text of what was decided, for the head of the summary.
    tables : sequence of rich.table.Table
        Shown between the two.
    """
    if manner.as_json:
        click.echo(json.dumps(record_of(summary), indent=2, ensure_ascii=False, default=str, allow_nan=False))
    elif not manner.quiet:
        from geoshape.cli.terminal import message_console

        console = message_console()
        ending = _written_lines(summary.written, verbose=manner.verbose)
        if not tables:
            console.print(_labelled([*lines, *ending]))
        else:
            console.print(_labelled(lines))
            for table in tables:
                console.print()
                console.print(table)
            console.print()
            console.print(_labelled(ending))
        _print_notes(console, (*getattr(summary, "notes", ()), *summary.written.warnings), verbose=manner.verbose)


def record_of(summary: Any) -> dict[str, Any]:
    """Give a summary as one flat record for JSON; NaN is null."""
    record = asdict(summary)
    written = record.pop("written")
    return {name: _without_nan(value) for name, value in {**record, **written}.items()}


def _without_nan(value: Any) -> Any:
    if isinstance(value, dict):
        return {str(key): _without_nan(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_without_nan(item) for item in value]
    return None if isinstance(value, float) and math.isnan(value) else value


def _labelled(lines: Sequence[tuple[str, str]]) -> Table:
    from rich.markup import escape
    from rich.table import Table

    table = Table(box=None, show_header=False, pad_edge=False, padding=(0, 2, 0, 0))
    table.add_column(style="bold", no_wrap=True, min_width=10)
    table.add_column(overflow="fold")
    for label, text in lines:
        table.add_row(escape(label), escape(text))
    return table


def _written_lines(written: Written, *, verbose: bool) -> list[tuple[str, str]]:
    from geoshape.cli.terminal import duration

    lines = _status_line(written)
    if written.ground:
        lines.append(("ground", written.ground))
    if written.measured:
        shown = ", ".join(written.measured)
        lines.append(("measured", shown if verbose or len(shown) < 120 else f"{len(written.measured)} columns"))
    lines.append(("columns", f"{len(written.columns)} new" + (f": {', '.join(written.columns)}" if verbose else "")))
    lines.append(("time", duration(written.seconds)))
    lines.append(("output", written.output))
    lines += [("", path) for path in written.extra_files]
    return lines


def _print_notes(console: Console, notes: Sequence[str], *, verbose: bool) -> None:
    from rich.markup import escape

    shown = notes if verbose else notes[:MAX_WARNINGS]
    for text in shown:
        console.print(f"[yellow]note[/yellow]  {escape(text)}")
    if len(shown) < len(notes):
        console.print(f"and {len(notes) - len(shown)} more notes; -v shows them all")


def _status_line(written: Written) -> list[tuple[str, str]]:
    """Say how many rows are null for which reason, where not all are in order."""
    if set(written.by_status) <= {"ok"}:
        return []
    return [("status", ", ".join(f"{count:,} {status}" for status, count in written.by_status.items()))]


def plain_table(headings: Sequence[tuple[str, bool]]) -> Table:
    """Begin a table; of each column its heading, and whether it holds numbers."""
    from rich.table import Table

    table = Table(box=None, pad_edge=False, header_style="bold", padding=(0, 3, 0, 0))
    for heading, is_number in headings:
        table.add_column(heading, justify="right" if is_number else "left", overflow="fold")
    return table
