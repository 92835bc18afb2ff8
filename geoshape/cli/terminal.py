"""What a person sees on the terminal: consoles, progress, plain words for numbers."""

from __future__ import annotations

import os
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

import click
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

PLAIN_LINE_SECONDS = 10.0

PIPED_WIDTH = 200
"""Columns for a table that goes into a file or a pipe, where no terminal tells its width."""

ProgressCallback = Callable[[int, int | None], None]


def _wants_color() -> bool | None:
    context = click.get_current_context(silent=True)
    if os.environ.get("NO_COLOR") or (context is not None and context.color is False):
        return True
    return None


def output_console() -> Console:
    """Make a console for results, on standard output."""
    width = None if sys.stdout.isatty() else PIPED_WIDTH
    return Console(no_color=_wants_color(), highlight=False, width=width, soft_wrap=False)


def message_console() -> Console:
    """Make a console for everything that is no result, on standard error."""
    return Console(stderr=True, no_color=_wants_color(), highlight=False)


@contextmanager
def progress_of(what: str, *, quiet: bool) -> Iterator[ProgressCallback | None]:
    """Show how far a run is: a bar on a terminal, a plain line now and then elsewhere, nothing when quiet."""
    if quiet:
        yield None
        return
    console = message_console()
    if not console.is_terminal:
        yield _plain_lines(what)
        return
    columns = (
        TextColumn("{task.description}"),
        BarColumn(),
        MofNCompleteColumn(),
        TextColumn("{task.fields[rate]}"),
        TimeRemainingColumn(),
    )
    with Progress(*columns, console=console, transient=True) as progress:
        task = progress.add_task(what, total=None, rate="")
        begin = time.monotonic()

        def show(done: int, total: int | None) -> None:
            seconds = max(time.monotonic() - begin, 1e-3)
            progress.update(task, completed=done, total=total, rate=f"{done / seconds:,.0f} rows/s")

        yield show


def _plain_lines(what: str) -> ProgressCallback:
    begin = time.monotonic()
    last = begin

    def show(done: int, total: int | None) -> None:
        nonlocal last
        now = time.monotonic()
        if now - last < PLAIN_LINE_SECONDS:
            return
        last = now
        rate = done / (now - begin)
        left = f" of {total:,}, {duration((total - done) / rate)} left" if total and rate else ""
        click.echo(f"{what}: {done:,}{left} ({rate:,.0f} rows/s)", err=True)

    return show


def duration(seconds: float) -> str:
    """Say a time span.

    Examples
    --------
    >>> duration(0.042), duration(12.3), duration(125), duration(7300)
    ('0.04 s', '12.3 s', '2 min 5 s', '2 h 1 min')
    """
    if seconds < 1:
        return f"{seconds:.2f} s"
    if seconds < 60:
        return f"{seconds:.1f} s"
    minutes, rest = divmod(round(seconds), 60)
    if minutes < 60:
        return f"{minutes} min {rest} s"
    return f"{minutes // 60} h {minutes % 60} min"
