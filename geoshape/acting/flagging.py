"""Flag the features of a layer: rules in one pass, an unusual score in two."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import asdict, dataclass, replace
from pathlib import Path

import pyarrow as pa

from geoshape.acting.opened import ActOptions, Opened, Written, open_for, output_batch
from geoshape.acting.wanted import SHAPE_COLUMNS, whole_schema
from geoshape.decide.flag import FLAG_COLUMNS, FlagResult, RuleCount, check_rules, flag_batch, total
from geoshape.decide.outliers import UnusualFit, UnusualOptions, fit_unusual
from geoshape.decide.rules import Rule, parse_rules_toml
from geoshape.decide.tabular import require_columns
from geoshape.errors import OptionError, ReadError
from geoshape.layers.layer import LayerBatch
from geoshape.layers.plan import OutputPlan
from geoshape.layers.write import OutputBatch
from geoshape.options import Source, Target


@dataclass(frozen=True, kw_only=True)
class FlagSummary:
    """What flagging found in a layer.

    Attributes
    ----------
    written : Written
    flagged : int
        Rows that anything found.
    counts : tuple of RuleCount
        By rule, the score last.
    notes : tuple of str
        Columns that the score leaves out and classes without a score, with reasons.
    """

    written: Written
    flagged: int
    counts: tuple[RuleCount, ...]
    notes: tuple[str, ...]


def read_rules(path: str | Path) -> tuple[Rule, ...]:
    """Read rules from a TOML file.

    Parameters
    ----------
    path : str or Path

    Returns
    -------
    tuple of Rule

    Raises
    ------
    ReadError
        The file cannot be read.
    OptionError
        It holds no rules, or one that cannot be used; the message names the file.
    """
    try:
        text = Path(path).read_bytes()
    except OSError as error:
        raise ReadError(f"{path}: cannot be read ({error.strerror}); name a TOML file of rules") from None
    try:
        return parse_rules_toml(text)
    except OptionError as error:
        raise OptionError(f"{path}: {error}") from None


def columns_to_flag_by(
    rules: Sequence[Rule], unusual: UnusualOptions | None
) -> tuple[UnusualOptions | None, tuple[str, ...]]:
    """Settle what an unusual score is made of, and which columns rules and score need.

    Parameters
    ----------
    rules : sequence of Rule
    unusual : UnusualOptions or None

    Returns
    -------
    unusual : UnusualOptions or None
        With its columns named.
    columns : tuple of str
        The class column is not among them: it is never measured.
    """
    names = [name for rule in rules for name in rule.required_columns]
    if unusual is not None:
        unusual = replace(unusual, columns=unusual.columns or SHAPE_COLUMNS)
        names += unusual.columns
    return unusual, tuple(dict.fromkeys(names))


def flag_file(
    source: str | Path | Source,
    target: str | Path | Target,
    rules: Sequence[Rule] = (),
    *,
    unusual: UnusualOptions | None = None,
    how: ActOptions | None = None,
) -> FlagSummary:
    """Flag the features of a layer by rules, by an unusual score, or by both, and write it with the flags.

    Parameters
    ----------
    source, target : str, Path, or Source and Target
    rules : sequence of Rule
    unusual : UnusualOptions, optional
        No score where left out.
    how : ActOptions, optional

    Returns
    -------
    FlagSummary

    Raises
    ------
    OptionError
        There is neither rule nor score, or the columns cannot answer them.
    ReadError, GroundError, WriteError
        As for `measure_file`.

    Notes
    -----
    Rules alone take one pass over the layer. A score needs two: rows are kept aside in the system's temporary folder.
    """
    how = how or ActOptions()
    target = target if isinstance(target, Target) else Target(path=target)
    unusual, wanted = columns_to_flag_by(rules, unusual)
    opened = open_for(source, how, wanted)
    possible = whole_schema(opened.info.schema, wanted)
    check_rules(rules, possible, has_score=unusual is not None)
    if unusual is not None:
        require_columns(unusual.columns, possible, "columns")
        require_columns([unusual.within] if unusual.within else [], opened.info.schema, "within")
    plan = opened.plan(target, FLAG_COLUMNS if unusual is not None else FLAG_COLUMNS[:2])
    flagger = _Flagger(opened, plan, rules)
    options = {
        "rules": [{"name": rule.name, "rule": rule.condition, "message": rule.message} for rule in rules],
        "unusual": None if unusual is None else asdict(unusual),
    }
    if unusual is None:
        written = opened.write(plan, flagger.flagged(opened.batches(), None), "flag", options)
        return flagger.summary(written, None)
    with opened.spooled(opened.batches()) as spool:
        used = list(dict.fromkeys((*unusual.columns, *([unusual.within] if unusual.within else []))))
        fit = fit_unusual(spool.read_columns(used), unusual)
        written = opened.write(plan, flagger.flagged(spool.batches(), fit), "flag", options)
    return flagger.summary(written, fit)


class _Flagger:
    """Flags batches and adds up what it finds."""

    def __init__(self, opened: Opened, plan: OutputPlan, rules: Sequence[Rule]) -> None:
        self._decided = plan.columns[len(opened.missing) :]
        self._plan = plan
        self._rules = rules
        self._found: list[FlagResult] = []

    def flagged(self, batches: Iterable[LayerBatch], fit: UnusualFit | None) -> Iterator[OutputBatch]:
        for batch in batches:
            found = flag_batch(batch.attributes, self._rules, fit)
            yield output_batch(batch, self._decided, self._values(found), self._plan)
            # What was found is kept as counts only.
            self._found.append(FlagResult(pa.table({}), found.counts, found.n_flagged))

    def _values(self, found: FlagResult) -> dict[str, object]:
        arrays = (column.combine_chunks() for column in found.columns.columns)
        return {
            column.name: values.cast(pa.int64()).to_numpy(zero_copy_only=False)
            if pa.types.is_boolean(values.type)
            else values.to_numpy(zero_copy_only=False)
            for column, values in zip(self._decided, arrays, strict=True)
        }

    def summary(self, written: Written, fit: UnusualFit | None) -> FlagSummary:
        return FlagSummary(
            written=written,
            flagged=sum(found.n_flagged for found in self._found),
            counts=total(self._found),
            notes=() if fit is None else fit.notes,
        )
