"""Group the features of a layer by their shape."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np

from geoshape.acting.opened import ActOptions, Written, open_for, output_batch
from geoshape.acting.wanted import whole_schema
from geoshape.columns import Column, Kind
from geoshape.decide.group import GroupOptions, Groups, group
from geoshape.decide.tabular import Rows, numbers, require_columns
from geoshape.layers.plan import OutputPlan
from geoshape.layers.spool import Spool
from geoshape.layers.write import OutputBatch
from geoshape.options import Source, Target
from geoshape.rings import FloatArray

_GROUP = "group"

GROUP_COLUMNS = (
    Column(
        "group", "group", Kind.COUNT, "1", 1.0, None, "number of the group of alike shapes, 1 the largest", "", _GROUP
    ),
    Column(
        "group_distance",
        "grp_dist",
        Kind.NUMBER,
        "1",
        0.0,
        None,
        "distance from the group's centre, in robust standard deviations",
        "",
        _GROUP,
    ),
    Column(
        "is_prototype", "is_proto", Kind.COUNT, "1", 0.0, 1.0, "1 for the row nearest to its group's centre", "", _GROUP
    ),
    Column("group_note", "grp_note", Kind.TEXT, "", None, None, "why the feature has no group", "", _GROUP),
)


@dataclass(frozen=True)
class GroupDescription:
    """What is typical of a group.

    Attributes
    ----------
    number : int
        From 1, by falling size.
    size : int
        Rows.
    prototype_row : int
        Row of the layer, from 1, that is nearest to the centre.
    typical : dict of str to float
        Median of each column.
    set_apart_by : tuple of (str, float)
        Columns that set the group apart, the strongest first, with robust standard deviations above or below the rest.
    """

    number: int
    size: int
    prototype_row: int
    typical: dict[str, float]
    set_apart_by: tuple[tuple[str, float], ...]


@dataclass(frozen=True, kw_only=True)
class GroupSummary:
    """What grouping found in a layer.

    Attributes
    ----------
    written : Written
    grouped : int
        Rows that have a group.
    groups : tuple of GroupDescription
    silhouettes : dict of int to float
        Mean silhouette of each number of groups that was tried.
    variance_explained : float
        Share of the variance that lies between groups.
    notes : tuple of str
        Columns that took no part, and those whose logarithms were taken.
    """

    written: Written
    grouped: int
    groups: tuple[GroupDescription, ...]
    silhouettes: dict[int, float]
    variance_explained: float
    notes: tuple[str, ...]


def group_file(
    source: str | Path | Source, target: str | Path | Target, options: GroupOptions, *, how: ActOptions | None = None
) -> GroupSummary:
    """Group the features of a layer by their shape, and write it with the groups.

    Parameters
    ----------
    source, target : str, Path, or Source and Target
    options : GroupOptions
        Columns to go by, number of groups, seed.
    how : ActOptions, optional

    Returns
    -------
    GroupSummary

    Raises
    ------
    OptionError
        A column is not there or holds no numbers; too few rows have values, or nothing sets them apart.
    ReadError, GroundError, WriteError
        As for `measure_file`.

    Notes
    -----
    Rows are kept aside in the system's temporary folder until the groups are known.
    """
    how = how or ActOptions()
    target = target if isinstance(target, Target) else Target(path=target)
    opened = open_for(source, how, options.columns)
    require_columns(options.columns, whole_schema(opened.info.schema, options.columns), "columns")
    plan = opened.plan(target, GROUP_COLUMNS)
    with opened.spooled(opened.batches()) as spool:
        values = matrix(spool.read_columns(list(dict.fromkeys(options.columns))), options.columns)
        groups = group(values, options)
        result = group_values(groups, values, options.columns)
        written = opened.write(plan, _grouped(spool, result, plan), _GROUP, asdict(options))
    return GroupSummary(
        written=written,
        grouped=int(groups.size.sum()),
        groups=described(groups),
        silhouettes=groups.silhouettes,
        variance_explained=groups.variance_explained,
        notes=notes_of(groups),
    )


def matrix(rows: Rows, columns: Sequence[str]) -> FloatArray:
    """Take columns side by side as numbers.

    Returns
    -------
    (n_rows, n_columns) float64
    """
    return np.column_stack([numbers(rows, name) for name in columns])


def group_values(groups: Groups, values: FloatArray, columns: Sequence[str]) -> dict[str, Any]:
    """Give the columns of the result: truth as 1 and 0, and why a row has no group."""
    has_none = np.isnan(groups.group)
    first_null = np.isnan(values).argmax(axis=1)
    note = np.full(len(values), None, dtype=object)
    for row in np.flatnonzero(has_none).tolist():
        note[row] = f"no group, as {columns[first_null[row]]} has no usable value"
    return {
        "group": groups.group,
        "group_distance": groups.distance,
        "is_prototype": np.where(has_none, np.nan, groups.is_prototype.astype(np.float64)),
        "group_note": note,
    }


def _grouped(spool: Spool, result: dict[str, Any], plan: OutputPlan) -> Iterator[OutputBatch]:
    decided = plan.columns[-len(GROUP_COLUMNS) :]
    for batch in spool.batches():
        rows = slice(batch.first_row, batch.first_row + batch.n_rows)
        values = {column.name: array[rows] for column, array in zip(decided, result.values(), strict=True)}
        yield output_batch(batch, decided, values, plan)


def described(groups: Groups) -> tuple[GroupDescription, ...]:
    """Describe each group."""
    prototypes = np.flatnonzero(groups.is_prototype)
    row_of = dict(zip(groups.group[prototypes].astype(int).tolist(), (prototypes + 1).tolist(), strict=True))
    return tuple(
        GroupDescription(
            number=number,
            size=int(groups.size[number - 1]),
            prototype_row=row_of[number],
            typical=dict(zip(groups.columns, groups.typical[number - 1].tolist(), strict=True)),
            set_apart_by=tuple(groups.set_apart_by(number)),
        )
        for number in range(1, groups.count + 1)
    )


def notes_of(groups: Groups) -> tuple[str, ...]:
    """Say which columns took no part, and whose logarithms were taken."""
    notes = []
    if groups.left_out:
        notes.append(f"without any differences, and so left out: {', '.join(groups.left_out)}")
    if groups.logged:
        notes.append(f"taken as logarithms, for their long upper tails: {', '.join(groups.logged)}")
    return tuple(notes)
