"""``geoshape report``: one page that opens anywhere, and figures for papers."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from geoshape.cli.act_choices import acting, measure_first_options
from geoshape.cli.choices import Manner, bundle, manner_options, source_options
from geoshape.options import MeasureOptions, Source, Target

if TYPE_CHECKING:
    from geoshape.acting.reporting import FileReport
    from geoshape.report import ReportOptions


def _options(values: dict[str, Any]) -> ReportOptions:
    from geoshape.report import ReportOptions

    return ReportOptions(
        title=values["title"],
        label_column=values["label"],
        class_column=values["by"],
        map_column=values["map_column"],
        max_rows=values["max_rows"],
    )


report_options = bundle(
    "options",
    _options,
    click.option("--title", help="Heading of the page; the layer's name where left out."),
    click.option("--label", metavar="COLUMN", help="Column that names the shapes."),
    click.option("--by", metavar="COLUMN", help="Column whose values are the classes of the box plots."),
    click.option("--map-column", metavar="COLUMN", help="Column that colours the map at first."),
    click.option(
        "--max-rows",
        type=int,
        default=3000,
        show_default=True,
        help="Shapes on the map and in the table; statistics are of all.",
    ),
)


@dataclass(frozen=True)
class Outlet:
    """What is to be written: a page, a folder of figures, or both."""

    page: Target | None
    figures: Path | None


def _outlet(values: dict[str, Any]) -> Outlet:
    page = None if values["page"] is None else Target(path=values["page"], overwrite=values["overwrite"])
    return Outlet(page, values["figures"])


outlet_options = bundle(
    "outlet",
    _outlet,
    click.argument("page", metavar="[OUTPUT.html]", required=False),
    click.option(
        "--figures", type=click.Path(path_type=Path), metavar="FOLDER", help="Write the figures as SVG and PNG."
    ),
    click.option("--overwrite", is_flag=True, help="Replace a page that is there."),
)


@click.command("report")
@source_options
@outlet_options
@report_options
@measure_first_options
@manner_options
def command(source: Source, outlet: Outlet, options: ReportOptions, measure: MeasureOptions, manner: Manner) -> None:
    """Report on INPUT in one self-contained page, OUTPUT.html, that opens offline in any browser.

    A layer that was measured is taken as it is; any other is measured first. With --figures the figures are written
    for papers, too.
    """
    if outlet.page is None and outlet.figures is None:
        raise click.UsageError("name a page to write, OUTPUT.html, or a folder with --figures")
    from geoshape.acting.reporting import report_file

    with acting(measure, manner, "read") as how:
        written = report_file(source, outlet.page, options=options, figures=outlet.figures, how=how)
    if manner.as_json:
        click.echo(json.dumps(asdict(written), indent=2))
    elif not manner.quiet:
        _tell(written)


def _tell(written: FileReport) -> None:
    from geoshape.cli.terminal import duration

    measured = f", {len(written.measured)} columns measured on the way" if written.measured else ""
    lines = [("report", f"{written.rows:,} rows{measured}")]
    if written.output is not None:
        lines.append(("output", f"{written.output} ({written.bytes / 1e6:.1f} MB)"))
    if written.figures:
        lines.append(("figures", f"{len(written.figures)} files in {Path(written.figures[0]).parent}"))
    lines += [("time", duration(written.seconds)), *(("note", text) for text in written.warnings)]
    for label, text in lines:
        click.echo(f"{click.style(f'{label:<11}', bold=True)} {text}", err=True)
