"""What decisions take from a table: columns by name, numbers with NaN as null, classes."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from typing import TypeAlias

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from geoshape.errors import OptionError
from geoshape.rings import FloatArray, IntArray

Rows: TypeAlias = pa.Table | pa.RecordBatch

ClassValue: TypeAlias = object
"""What a class column may hold: text, a number, a truth value, a date; None where it is null."""

MAX_NAMES_LISTED = 12


def suggestion(name: str, available: Iterable[str]) -> str:
    """Say which of the available names comes nearest to a name that is not among them.

    Parameters
    ----------
    name : str
        What was asked for.
    available : iterable of str
        Names that can be had.

    Returns
    -------
    str
        End of a message: the nearest name, or all names where none is near and there are few.

    Examples
    --------
    >>> suggestion("axis_ration", ["area_m2", "axis_ratio"])
    'did you mean axis_ratio?'
    >>> suggestion("depth", ["area_m2", "axis_ratio"])
    'there are: area_m2, axis_ratio'
    """
    names = list(available)
    by_folded = {candidate.casefold(): candidate for candidate in reversed(names)}
    near = get_close_matches(name.casefold(), by_folded, n=1)
    if near:
        return f"did you mean {by_folded[near[0]]}?"
    if not names:
        return "there are no columns"
    listed = ", ".join(names[:MAX_NAMES_LISTED])
    return f"there are: {listed}" + (f" and {len(names) - MAX_NAMES_LISTED} more" * (len(names) > MAX_NAMES_LISTED))


def require_columns(names: Sequence[str], schema: pa.Schema, option: str) -> None:
    """Refuse names that the table does not have, or has twice.

    Parameters
    ----------
    names : sequence of str
        Columns asked for.
    schema : pyarrow.Schema
        Columns of the table.
    option : str
        Option that named them, for the message.

    Raises
    ------
    OptionError
        A name is not in the table, or stands for two of its columns.
    """
    for name in names:
        count = len(schema.get_all_field_indices(name))
        if count == 0:
            raise OptionError(f"{option}: column {name!r} is not in the layer; {suggestion(name, schema.names)}")
        if count > 1:
            raise OptionError(f"{option}: column {name!r} is there {count} times; rename all but one")


def is_numeric(kind: pa.DataType) -> bool:
    """Tell whether a column of this type holds numbers or truth values.

    Parameters
    ----------
    kind : pyarrow.DataType

    Returns
    -------
    bool
    """
    types = pa.types
    return bool(types.is_integer(kind) or types.is_floating(kind) or types.is_decimal(kind) or types.is_boolean(kind))


def numbers(rows: Rows, name: str) -> FloatArray:
    """Take a column as numbers.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
    name : str
        Column of numbers or truth values, or one without any value.

    Returns
    -------
    (n_rows,) float64
        NaN where the column is null or not finite.

    Raises
    ------
    OptionError
        The column holds something else.

    Examples
    --------
    >>> numbers(pa.table({"depth": pa.array([2, None, 5])}), "depth")
    array([ 2., nan,  5.])
    """
    column = whole(rows, name)
    if pa.types.is_null(column.type):
        return np.full(len(column), np.nan)
    if not is_numeric(column.type):
        raise OptionError(f"column {name!r} holds {column.type}, not numbers; choose a column of numbers")
    if pa.types.is_boolean(column.type):
        column = column.cast(pa.uint8())
    values = np.array(column.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False), dtype=np.float64)
    values[~np.isfinite(values)] = np.nan
    return values


def whole(rows: Rows, name: str) -> pa.Array:
    """Take a column as one array, without dictionary.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
    name : str

    Returns
    -------
    pyarrow.Array
    """
    column = rows.column(name)
    if isinstance(column, pa.ChunkedArray):
        column = pa.concat_arrays(column.chunks) if column.num_chunks else pa.array([], column.type)
    return column.dictionary_decode() if pa.types.is_dictionary(column.type) else column


@dataclass(frozen=True, eq=False)
class Classes:
    """Rows sorted into classes.

    Attributes
    ----------
    values : tuple of tuple
        Value of each class in each class column, in ascending order; None stands for null and comes last.
    code : (n_rows,) int64
        Class of each row.
    """

    values: tuple[tuple[ClassValue, ...], ...]
    code: IntArray


def classes_of(rows: Rows, names: Sequence[str], option: str) -> Classes:
    """Sort rows into classes by the values of columns; rows without a value are a class of their own.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
    names : sequence of str
        Class columns; none makes one class of all rows.
    option : str
        Option that named them, for messages.

    Returns
    -------
    Classes
        Only classes that have rows.

    Raises
    ------
    OptionError
        A column is not there, or its type cannot be sorted.

    Examples
    --------
    >>> classes = classes_of(pa.table({"zone": ["b", None, "a", "b"]}), ["zone"], "by")
    >>> classes.values, classes.code.tolist()
    ((('a',), ('b',), (None,)), [1, 2, 0, 1])
    """
    require_columns(names, rows.schema, option)
    if not names:
        return Classes(((),) if rows.num_rows else (), np.zeros(rows.num_rows, dtype=np.int64))
    levels, codes = zip(*(_levels(rows, name, option) for name in names), strict=True)
    distinct, code = np.unique(np.column_stack(codes), axis=0, return_inverse=True)
    values = tuple(tuple(level[i] for level, i in zip(levels, row, strict=True)) for row in distinct.tolist())
    return Classes(values, code.reshape(-1).astype(np.int64))


def _levels(rows: Rows, name: str, option: str) -> tuple[list[ClassValue], IntArray]:
    """Distinct values of a column in order, null last, and the place of each row's value among them."""
    column = whole(rows, name)
    if pa.types.is_floating(column.type):
        column = pc.if_else(pc.is_finite(column), column, pa.scalar(None, column.type))
    if pa.types.is_null(column.type):
        return [None], np.zeros(len(column), dtype=np.int64)
    try:
        encoded = column.dictionary_encode()
        order = pc.array_sort_indices(encoded.dictionary).to_numpy()
    except pa.ArrowNotImplementedError:
        reason = f"{option}: column {name!r} holds {column.type}, which has no classes"
        raise OptionError(f"{reason}; choose a column of text, numbers or dates") from None
    rank = np.empty(len(order) + 1, dtype=np.int64)
    rank[order] = np.arange(len(order))
    rank[-1] = len(order)  # where nulls, filled with -1, look
    places = encoded.indices.fill_null(-1).to_numpy(zero_copy_only=False)
    return [*encoded.dictionary.take(pa.array(order)).to_pylist(), None], rank[places]
