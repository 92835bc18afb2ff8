"""The words that end a measurement."""

from __future__ import annotations

from rich.markup import escape
from rich.padding import Padding
from rich.table import Table

from geoshape.cli.terminal import duration, message_console
from geoshape.columns import MEASURED
from geoshape.run import NOTABLE_DISTORTION_DEG, RunSummary

MAX_WARNINGS = 5


def print_summary(summary: RunSummary, *, verbose: bool) -> None:
    """Say on standard error what was measured, on which ground, and where it went.

    Parameters
    ----------
    summary : RunSummary
    verbose : bool
        Show every warning and the names of the new columns.
    """
    console = message_console()
    measured = sum(count for status, count in summary.by_status.items() if status in MEASURED)
    table = Table(box=None, show_header=False, pad_edge=False, padding=(0, 2, 0, 0))
    table.add_column(style="bold", no_wrap=True)
    table.add_column(overflow="fold")
    table.add_row("measured", f"{measured:,} of {summary.rows:,} rows{_by_status(summary)}")
    table.add_row("ground", escape(summary.ground))
    table.add_row("distortion", _distortion(summary))
    table.add_row("columns", f"{len(summary.columns)} new; geoshape columns tells what they mean")
    if verbose:
        table.add_row("", ", ".join(summary.columns))
    table.add_row("time", _time(summary))
    table.add_row("output", escape(summary.output))
    for extra in summary.extra_files:
        table.add_row("", escape(extra))
    console.print(table)
    shown = summary.warnings if verbose else summary.warnings[:MAX_WARNINGS]
    for text in shown:
        console.print(Padding(f"[yellow]note[/yellow]  {escape(text)}", (0, 0, 0, 0)))
    if len(shown) < len(summary.warnings):
        console.print(f"and {len(summary.warnings) - len(shown)} more notes; -v shows them all")


def _by_status(summary: RunSummary) -> str:
    others = {status: count for status, count in summary.by_status.items() if status != "ok" and count}
    if not others:
        return ""
    return " (" + ", ".join(f"{count:,} {status}" for status, count in others.items()) + ")"


def _distortion(summary: RunSummary) -> str:
    if summary.largest_distortion_deg is None:
        return "not known without a CRS"
    text = f"{summary.largest_distortion_deg:.2g} deg at most"
    if summary.distorted_rows:
        text += f"; above {NOTABLE_DISTORTION_DEG:g} deg in {summary.distorted_rows:,} rows (see ground_distortion)"
    return text


def _time(summary: RunSummary) -> str:
    rate = f", {summary.rows / summary.seconds:,.0f} rows/s" if summary.seconds > 1 else ""
    return duration(summary.seconds) + rate
