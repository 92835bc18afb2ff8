"""``geoshape redraw``: outlines as their first harmonics draw them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from geoshape.cli.act_choices import acting, measure_first_options, refuse_two_results, tell
from geoshape.cli.choices import Manner, bundle, manner_options, source_options, target_options
from geoshape.options import MeasureOptions, Source, Target

if TYPE_CHECKING:
    from geoshape.acting.redrawing import RedrawSummary
    from geoshape.decide.redraw import RedrawOptions


def _options(values: dict[str, Any]) -> RedrawOptions:
    from geoshape.decide.redraw import RedrawOptions

    return RedrawOptions(**values)


redraw_options = bundle(
    "drawing",
    _options,
    click.option(
        "--harmonics", type=int, default=8, show_default=True, help="Harmonics that are kept; 1 draws an ellipse."
    ),
    click.option("--points", type=int, default=None, help="Points of each ring; 16 for each harmonic if left out."),
    click.option("--all-parts", is_flag=True, help="Redraw every part, not only the largest."),
    click.option("--holes", is_flag=True, help="Redraw holes too."),
)


@click.command("redraw")
@source_options
@target_options
@redraw_options
@measure_first_options
@manner_options
def command(source: Source, target: Target, drawing: RedrawOptions, measure: MeasureOptions, manner: Manner) -> None:
    """Redraw the outlines of INPUT from their first harmonics, and write the layer to OUTPUT in its own CRS.

    Shows what a spectrum says of a shape. New columns: redraw_area_m2, redraw_area_error (relative), and redraw_note
    where the redrawn outline crosses itself.
    """
    refuse_two_results(target, manner)
    from geoshape.acting.redrawing import redraw_file

    with acting(measure, manner, "redrawn") as how:
        summary = redraw_file(source, target, options=drawing, how=how)
    tell(summary, manner, _head(summary, drawing))


def _head(summary: RedrawSummary, drawing: RedrawOptions) -> list[tuple[str, str]]:
    kept = f"{drawing.harmonics} harmonic{'s' if drawing.harmonics > 1 else ''}"
    lines = [("redrawn", f"{summary.redrawn:,} of {summary.written.rows:,} rows from {kept}")]
    if summary.median_area_error is not None and summary.largest_area_error is not None:
        median, largest = (100.0 * error for error in (summary.median_area_error, summary.largest_area_error))
        lines.append(("area error", f"{median:.2g} % in the median, {largest:.2g} % at most"))
    if summary.with_notes:
        lines.append(("faults", f"{summary.with_notes:,} rows; see redraw_note"))
    return lines
