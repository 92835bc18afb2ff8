"""Features that a rule finds, or whose shape is unlike the rest."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pyarrow as pa

from geoshape.columns import Column, Kind
from geoshape.decide.outliers import Scores, UnusualFit, UnusualOptions, fit_unusual, score_unusual
from geoshape.decide.rules import SEPARATOR, UNUSUAL, Rule, refuse_repeated
from geoshape.decide.tabular import Rows
from geoshape.errors import OptionError
from geoshape.rings import BoolArray

FLAG_COLUMNS = (
    Column("flag", "flag", Kind.COUNT, "1", 0.0, 1.0, "1 where a rule or the score finds the feature", "", "flag"),
    Column("flag_reasons", "flag_why", Kind.TEXT, "", None, None, "names of the rules that find it", "", "flag"),
    Column(
        "flag_score",
        "flag_score",
        Kind.NUMBER,
        "1",
        0.0,
        None,
        "squared robust distance from the ordinary features of its class",
        "Rousseeuw & Van Driessen 1999, Technometrics 41; Cerioli 2010, J. American Statistical Association 105",
        "flag",
    ),
    Column("flag_note", "flag_note", Kind.TEXT, "", None, None, "why the feature has no score", "", "flag"),
)
"""What flagging adds to a table; the last two only where a score is asked for."""


@dataclass(frozen=True)
class RuleCount:
    """What a rule found.

    Attributes
    ----------
    name : str
        Name of the rule, or ``"unusual"`` for the score.
    message : str
        The rule's sentence for the reader; may be empty.
    n_flagged : int
        Rows that it finds.
    n_unknown : int
        Rows that it cannot decide, because values are null; they are not flagged.
    """

    name: str
    message: str
    n_flagged: int
    n_unknown: int


@dataclass(frozen=True, eq=False)
class FlagResult:
    """What flagging found in a table or a batch of it.

    Attributes
    ----------
    columns : pyarrow.Table
        ``flag`` (bool), ``flag_reasons`` (text, null where nothing was found) and, where a score was asked for,
        ``flag_score`` (float64) and ``flag_note`` (text).
    counts : tuple of RuleCount
        In the order of the rules, the score last.
    n_flagged : int
        Rows that anything found.
    notes : tuple of str
        Columns that the score leaves out and classes without a score, with reasons.
    """

    columns: pa.Table
    counts: tuple[RuleCount, ...]
    n_flagged: int
    notes: tuple[str, ...] = ()


def flag(rows: Rows, rules: Sequence[Rule] = (), *, unusual: UnusualOptions | None = None) -> FlagResult:
    """Flag features by rules, by an unusual score, or by both.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
        Measured columns and any others.
    rules : sequence of Rule
        A feature is flagged where the condition of one is true; not where it is unknown.
    unusual : UnusualOptions, optional
        Columns, classes and level of the score; no score where left out.

    Returns
    -------
    FlagResult
        Rows in the order of the table.

    Raises
    ------
    OptionError
        There is neither rule nor score, a name is repeated, or the columns cannot answer a rule or the score.

    Examples
    --------
    >>> from geoshape.decide.rules import parse_rule
    >>> parcels = pa.table({"axis_ratio": [0.1, 0.9, None], "area_m2": [900.0, 80.0, 700.0]})
    >>> found = flag(parcels, [parse_rule("narrow: axis_ratio < 0.2"), parse_rule("large: area_m2 > 500")])
    >>> found.columns["flag_reasons"].to_pylist()
    ['narrow; large', None, 'large']
    >>> [(count.name, count.n_flagged, count.n_unknown) for count in found.counts]
    [('narrow', 1, 1), ('large', 2, 0)]
    """
    check_rules(rules, rows.schema, has_score=unusual is not None)
    fit = None if unusual is None else fit_unusual(rows, unusual)
    return flag_batch(rows, rules, fit)


def check_rules(rules: Sequence[Rule], schema: pa.Schema, *, has_score: bool = False) -> None:
    """Refuse rules that the columns of a table cannot answer, before rows are read.

    Parameters
    ----------
    rules : sequence of Rule
    schema : pyarrow.Schema
        Columns of the table, measured ones included.
    has_score : bool
        Whether a score is asked for as well.

    Raises
    ------
    OptionError
        There is neither rule nor score, a name is repeated, or the columns cannot answer a rule.
    """
    if not rules and not has_score:
        raise OptionError(
            "there is nothing to flag by; give a rule such as 'narrow: axis_ratio < 0.2', or ask for a score"
        )
    refuse_repeated(rules)
    for rule in rules:
        rule.check(schema)


def flag_batch(rows: Rows, rules: Sequence[Rule], fit: UnusualFit | None = None) -> FlagResult:
    """Flag a batch by rules that were checked and a score that was fitted.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
        Some rows of the table.
    rules : sequence of Rule
    fit : UnusualFit, optional
        What is ordinary in the whole table.

    Returns
    -------
    FlagResult
        Counts are those of the batch; `total` adds them up.
    """
    names, found, counts = [], [], []
    for rule in rules:
        answer = rule.evaluate(rows)
        names.append(rule.name)
        found.append(answer.fill_null(False).to_numpy(zero_copy_only=False))  # noqa: FBT003 - pyarrow's signature
        counts.append(RuleCount(rule.name, rule.message, int(found[-1].sum()), answer.null_count))
    scores = None if fit is None else score_unusual(rows, fit)
    if scores is not None:
        names.append(UNUSUAL)
        found.append(scores.is_unusual)
        counts.append(RuleCount(UNUSUAL, "", int(scores.is_unusual.sum()), int(np.isnan(scores.score).sum())))
    matrix = np.array(found, dtype=np.bool_).reshape(len(found), rows.num_rows)
    is_flagged = matrix.any(axis=0)
    columns = {"flag": pa.array(is_flagged), "flag_reasons": _reasons(matrix, names)}
    notes = () if fit is None else fit.notes
    return FlagResult(pa.table(columns | _score_columns(scores)), tuple(counts), int(is_flagged.sum()), notes)


def total(batches: Sequence[FlagResult]) -> tuple[RuleCount, ...]:
    """Add up the counts of batches of one table, flagged by the same rules.

    Parameters
    ----------
    batches : sequence of FlagResult

    Returns
    -------
    tuple of RuleCount
    """
    return tuple(
        RuleCount(same[0].name, same[0].message, sum(c.n_flagged for c in same), sum(c.n_unknown for c in same))
        for same in zip(*(batch.counts for batch in batches), strict=True)
    )


def _reasons(found: BoolArray, names: list[str]) -> pa.StringArray:
    """Join the names of what found each row; few combinations occur, so that each is joined once."""
    combinations, which = np.unique(found, axis=1, return_inverse=True)
    texts = [SEPARATOR.join(name for name, hit in zip(names, column, strict=True) if hit) for column in combinations.T]
    return pa.array([text or None for text in texts], pa.string()).take(pa.array(which.reshape(-1)))


def _score_columns(scores: Scores | None) -> dict[str, pa.Array]:
    if scores is None:
        return {}
    score = pa.array(scores.score, mask=np.isnan(scores.score))
    return {"flag_score": score, "flag_note": pa.array(scores.note, pa.string())}
