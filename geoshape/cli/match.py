"""``geoshape match``: which template an outline is most like, and how much."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from geoshape.cli.act_choices import acting, measure_first_options, plain_table, refuse_two_results, tell
from geoshape.cli.choices import Manner, bundle, manner_options, source_options, target_options
from geoshape.options import MeasureOptions, Source, Target

if TYPE_CHECKING:
    from rich.table import Table

    from geoshape.acting.matching import MatchSummary, TemplateSource
    from geoshape.decide.match import MatchOptions


def _templates(values: dict[str, Any]) -> TemplateSource:
    from geoshape.acting.matching import TemplateSource

    source = Source(path=values["template"], layer=values["template_layer"], where=values["template_where"])
    return TemplateSource(source=source, names=values["template_name"])


def _likeness(values: dict[str, Any]) -> MatchOptions:
    from geoshape.decide.match import MatchOptions

    return MatchOptions(**values)


MAX_TEMPLATES = 12
"""Templates listed in the summary, those of most features first; --json has them all."""

template_options = bundle(
    "templates",
    _templates,
    click.option("--template", required=True, metavar="FILE", help="A layer whose polygons are the templates."),
    click.option("--template-name", metavar="COLUMN", help="Column with their names; row numbers where left out."),
    click.option("--template-layer", metavar="NAME", help="Layer to take, where the file holds several."),
    click.option("--template-where", metavar="SQL", help="Take only the rows that meet this condition."),
)

likeness_options = bundle(
    "likeness",
    _likeness,
    click.option(
        "--mirror",
        type=click.Choice(["no", "yes", "only"]),
        default="no",
        show_default=True,
        help="Whether templates may be mirrored as well, or only so.",
    ),
    click.option("--keep-direction", is_flag=True, help="Do not turn templates: the direction of a shape matters."),
    click.option("--keep-size", is_flag=True, help="Do not scale templates: the size of a shape matters."),
    click.option(
        "--by",
        type=click.Choice(["outline", "spectrum"]),
        default="outline",
        show_default=True,
        help="Compare outlines, or only the amplitudes of their spectra, which different outlines may share.",
    ),
)


@click.command("match")
@source_options
@target_options
@template_options
@likeness_options
@measure_first_options
@manner_options
def command(
    source: Source,
    target: Target,
    templates: TemplateSource,
    likeness: MatchOptions,
    measure: MeasureOptions,
    manner: Manner,
) -> None:
    """Find for each outline of INPUT the template it is most like, and write the layer to OUTPUT.

    Templates are turned, scaled and started anew until they fit best. New columns: match_template, match_distance
    (0 for the same shape), match_turn_deg, match_scale, match_mirrored and match_rank.
    """
    refuse_two_results(target, manner)
    from geoshape.acting.matching import match_file

    with acting(measure, manner, "matched") as how:
        summary = match_file(source, target, templates, options=likeness, how=how)
    head = f"{summary.matched:,} of {summary.written.rows:,} rows"
    tell(summary, manner, [("matched", head)], [] if manner.quiet or manner.as_json else [_table(summary)])


def _table(summary: MatchSummary) -> Table:
    from rich.markup import escape

    table = plain_table(
        [("template", False), ("nearest to", True), ("least distance", True), ("median distance", True)]
    )
    by_size = sorted(summary.templates, key=lambda count: -count.n_nearest)
    for count in by_size[:MAX_TEMPLATES]:
        distances = (count.least_distance, count.median_distance)
        table.add_row(
            escape(count.name),
            f"{count.n_nearest:,}",
            *("" if value is None else f"{value:.4f}" for value in distances),
        )
    if len(by_size) > MAX_TEMPLATES:
        rest = by_size[MAX_TEMPLATES:]
        table.add_row(f"and {len(rest)} more", f"{sum(count.n_nearest for count in rest):,}", "", "")
    return table
