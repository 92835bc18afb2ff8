"""``geoshape flag``: features that a rule finds, or whose shape is unlike the rest."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from geoshape.cli.act_choices import (
    acting,
    columns_option,
    measure_first_options,
    plain_table,
    refuse_two_results,
    tell,
)
from geoshape.cli.choices import Manner, bundle, manner_options, source_options, target_options
from geoshape.options import MeasureOptions, Source, Target

if TYPE_CHECKING:
    from rich.table import Table

    from geoshape.acting.flagging import FlagSummary
    from geoshape.decide.outliers import UnusualOptions
    from geoshape.decide.rules import Rule


def _rules(values: dict[str, tuple[str, ...]]) -> tuple[Rule, ...]:
    from geoshape.acting.flagging import read_rules
    from geoshape.decide.rules import parse_rule

    from_files = (rule for path in values["rules_path"] for rule in read_rules(path))
    return (*from_files, *(parse_rule(text) for text in values["rule"]))


def _unusual(values: dict[str, object]) -> UnusualOptions | None:
    columns, within, cut, seed = (values[name] for name in ("columns", "within", "cut", "seed"))
    if not values["unusual"]:
        if columns is not None or within is not None:
            raise click.UsageError("--columns and --within belong to the score; add --unusual")
        return None
    from geoshape.decide.outliers import UnusualOptions

    return UnusualOptions(columns=columns or (), within=within, level=cut, seed=seed)  # type: ignore[arg-type]


rules_options = bundle(
    "rules",
    _rules,
    click.option(
        "--rule",
        multiple=True,
        metavar="'NAME: CONDITION'",
        help="A condition in CQL2 text over any columns, such as 'narrow: axis_ratio < 0.2'. May be repeated.",
    ),
    click.option(
        "--rules",
        "rules_path",
        multiple=True,
        metavar="FILE.toml",
        help="A file of rules: [[rule]] tables with name, rule and message. May be repeated.",
    ),
)

unusual_options = bundle(
    "unusual",
    _unusual,
    click.option("--unusual", is_flag=True, help="Flag shapes unlike the rest, by a robust distance."),
    columns_option,
    click.option("--within", metavar="COLUMN", help="Judge each class of this column by its own."),
    click.option(
        "--cut",
        type=float,
        default=0.999,
        show_default=True,
        help="Share of ordinary features that the score must not flag.",
    ),
    click.option("--seed", type=int, default=0, show_default=True, help="Starts the search for ordinary features."),
)


@click.command("flag")
@source_options
@target_options
@rules_options
@unusual_options
@measure_first_options
@manner_options
def command(
    source: Source,
    target: Target,
    rules: tuple[Rule, ...],
    unusual: UnusualOptions | None,
    measure: MeasureOptions,
    manner: Manner,
) -> None:
    """Flag features of INPUT by rules, by an unusual shape, or by both, and write the layer to OUTPUT.

    New columns: flag (1 or 0) and flag_reasons; with --unusual also flag_score, and flag_note where there is none.
    Columns that a rule names and INPUT does not have are measured first. A feature whose values are null is not
    flagged, but counted as undecided.
    """
    refuse_two_results(target, manner)
    from geoshape.acting.flagging import flag_file

    with acting(measure, manner, "flagged") as how:
        summary = flag_file(source, target, rules, unusual=unusual, how=how)
    head = f"{summary.flagged:,} of {summary.written.rows:,} rows"
    tell(summary, manner, [("flagged", head)], [] if manner.quiet or manner.as_json else [_table(summary)])


def _table(summary: FlagSummary) -> Table:
    from rich.markup import escape

    with_messages = any(count.message for count in summary.counts)
    table = plain_table(
        [("rule", False), ("flagged", True), ("undecided", True), *([("message", False)] if with_messages else [])]
    )
    for count in summary.counts:
        cells = [escape(count.name), f"{count.n_flagged:,}", f"{count.n_unknown:,}"]
        table.add_row(*cells, *([escape(count.message)] if with_messages else []))
    return table
