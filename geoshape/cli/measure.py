"""``geoshape measure``: the main job."""

from __future__ import annotations

import json
from dataclasses import asdict

import click

from geoshape.cli.choices import Manner, manner_options, measure_options, source_options, target_options
from geoshape.options import MeasureOptions, Source, Target

STDOUT = "-"


@click.command("measure")
@source_options
@target_options
@measure_options
@click.option("--report", "page", metavar="PAGE.html", help="Write a report on the result, too.")
@manner_options
def command(source: Source, target: Target, options: MeasureOptions, page: str | None, manner: Manner) -> None:
    """Measure every polygon of INPUT and write the layer with its new columns to OUTPUT.

    The extension of OUTPUT decides the format; - writes the table as CSV to standard output. Every row is kept: what
    cannot be measured is null, and shape_status and shape_note say why. `geoshape columns` lists the new columns.
    """
    if manner.as_json and str(target.path) == STDOUT:
        raise click.UsageError("--json and OUTPUT - both write to standard output; choose one")
    if page is not None:
        _check_report(page, target)
    from geoshape.cli.terminal import progress_of
    from geoshape.pool import keep_freed_memory
    from geoshape.run import measure_file

    keep_freed_memory()
    with progress_of("measured", quiet=manner.quiet or manner.as_json) as progress:
        summary = measure_file(source, target, options=options, jobs=manner.jobs, progress=progress)
    if manner.as_json:
        click.echo(json.dumps(asdict(summary), indent=2))
    elif not manner.quiet:
        from geoshape.cli.summary import print_summary

        print_summary(summary, verbose=manner.verbose)
    if page is not None:
        from geoshape.acting.reporting import report_file

        report_file(Source(path=target.path, layer=target.layer), Target(path=page, overwrite=target.overwrite))
        if not (manner.quiet or manner.as_json):
            click.echo(f"{'report':<11} {page}", err=True)


def _check_report(page: str, target: Target) -> None:
    """Refuse a report that could not be written, before anything is measured."""
    if str(target.path) == STDOUT or str(target.path).lower().endswith(".csv"):
        raise click.UsageError("--report draws outlines, and CSV holds none; write another format")
    from geoshape.acting.reporting import page_path

    page_path(Target(path=page, overwrite=target.overwrite))
