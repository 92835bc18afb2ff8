"""Conditions in CQL2 text over the columns of a table, with the standard's three-valued logic.

A comparison with null is neither true nor false but unknown, and AND, OR and NOT carry the unknown on (OGC 21-065r2,
Common Query Language). Where the standard leaves a choice:

- NaN and infinity count as null, and so does what has no finite result, such as a division by zero.
- ``div`` cuts toward zero, and ``%`` has the sign of the dividend, so that ``a = (a div b) * b + a % b``.
- BETWEEN compares text and dates as well as numbers; both ends belong to it.
- A timestamp column without time zone is in UTC. A date is compared with dates, a timestamp with timestamps.
- Text is ordered by code point. CASEI folds case by Unicode's full folding; ACCENTI leaves out combining marks.
"""

from __future__ import annotations

import datetime as dt
import operator
import re
import unicodedata
from collections.abc import Callable
from functools import reduce
from typing import TypeAlias

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from geoshape.decide.syntax import MAX_EXACT, Expression, Literal, Property
from geoshape.decide.tabular import Rows, whole

_COMPARISONS: dict[str, Callable[..., pa.Array | pa.Scalar]] = {
    "=": pc.equal,
    "<>": pc.not_equal,
    "<": pc.less,
    "<=": pc.less_equal,
    ">": pc.greater,
    ">=": pc.greater_equal,
}
_ARITHMETIC: dict[str, Callable[..., object]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": np.divide,
    "^": np.power,
    "%": np.fmod,
    "div": lambda a, b: np.trunc(np.divide(a, b)),
}
_UTC = pa.timestamp("us", "UTC")

Values: TypeAlias = pa.Array | pa.Scalar


def evaluate(expression: Expression, rows: Rows) -> pa.BooleanArray:
    """Evaluate a condition that was checked against the columns.

    Parameters
    ----------
    expression : Property, Literal or Operation
    rows : pyarrow.Table or pyarrow.RecordBatch

    Returns
    -------
    (n_rows,) pyarrow.BooleanArray
        Null where the answer is unknown.

    Examples
    --------
    >>> from geoshape.decide.syntax import parse
    >>> lakes = pa.table({"depth_m": [3, None, None], "zone": ["b", "b", "a"]})
    >>> evaluate(parse("depth_m > 2 OR zone = 'a'"), lakes).to_pylist()
    [True, None, True]
    """
    result = _truth(_Evaluator(rows).values(expression))
    # Without a column there is one answer for all rows.
    return pa.repeat(result, rows.num_rows) if isinstance(result, pa.Scalar) else result


class _Evaluator:
    """Computes the values of an expression; each column is taken from the table once."""

    def __init__(self, rows: Rows) -> None:
        self._rows = rows
        self._columns: dict[str, pa.Array] = {}

    def values(self, node: Expression) -> Values:
        if isinstance(node, Property):
            return self._column(node.name)
        if isinstance(node, Literal):
            return _scalar(node.value)
        args = [self.values(arg) for arg in node.args]
        return _apply(node.name, args)

    def _column(self, name: str) -> pa.Array:
        if name not in self._columns:
            self._columns[name] = _comparable(whole(self._rows, name))
        return self._columns[name]


def _apply(name: str, args: list[Values]) -> Values:
    if name in _ARITHMETIC:
        return _calculate(name, args[0], args[1])
    if name in _COMPARISONS:
        return _compare(name, args[0], args[1])
    return _OTHERS[name](args)


def _scalar(value: bool | float | str | dt.date) -> pa.Scalar:  # noqa: FBT001 - all that a literal may be
    if isinstance(value, dt.datetime):
        return pa.scalar(value, _UTC)
    if isinstance(value, str):
        return pa.scalar(value, pa.large_string())
    if isinstance(value, int) and abs(value) >= 2**63:
        return pa.scalar(float(value))
    return pa.scalar(value)


def _comparable(column: pa.Array) -> pa.Array:
    """Bring a column to the one type that its kind is compared in."""
    kind, types = column.type, pa.types
    if types.is_floating(kind):
        column = column.cast(pa.float64())
        return pc.if_else(pc.is_finite(column), column, pa.scalar(None, pa.float64()))
    if types.is_decimal(kind) or types.is_uint64(kind):
        return column.cast(pa.float64(), safe=False)
    if types.is_integer(kind):
        return column.cast(pa.int64())
    if types.is_date(kind):
        return column.cast(pa.date32())
    if types.is_timestamp(kind):
        return column.cast(_UTC, safe=False)
    is_text = types.is_string(kind) or types.is_string_view(kind)
    return column.cast(pa.large_string()) if is_text else column


def _truth(values: Values) -> Values:
    return values.cast(pa.bool_()) if pa.types.is_null(values.type) else values


def _compare(name: str, left: Values, right: Values) -> Values:
    if pa.types.is_null(left.type):
        left = left.cast(right.type)
    if pa.types.is_null(right.type):
        right = right.cast(left.type)
    if pa.types.is_null(left.type):
        return left.cast(pa.bool_())
    if pa.types.is_integer(left.type) is not pa.types.is_integer(right.type):
        left, right = _as_floats(left), _as_floats(right)
    return _COMPARISONS[name](left, right)


def _among(values: Values, candidates: list[Values]) -> Values:
    """Compare with each candidate; values written out are looked up together, as there may be thousands of them."""
    listed, found = [], []
    for candidate in candidates:
        value = _listed(values, candidate)
        if value is None:
            found.append(_compare("=", values, candidate))
        else:
            listed.append(value)
    if listed:
        is_listed = pc.is_in(values, pa.array(listed, values.type))
        found.append(pc.if_else(pc.is_valid(values), is_listed, pa.scalar(None, pa.bool_())))
    return reduce(pc.or_kleene, found)


def _listed(values: Values, candidate: Values) -> object:
    """Value of a candidate that is written out and of the column's type; None for any other."""
    if not isinstance(candidate, pa.Scalar) or not isinstance(values, pa.Array):
        return None
    value = candidate.as_py()
    if pa.types.is_integer(values.type) and isinstance(value, float) and value.is_integer() and abs(value) < MAX_EXACT:
        return int(value)
    return value if candidate.type == values.type else None


def _as_floats(values: Values) -> Values:
    # An integer beyond 2^53 is rounded here; compared with an integer it stays as it is.
    return pc.cast(values, pa.float64(), safe=False)


def _calculate(name: str, left: Values, right: Values) -> Values:
    with np.errstate(all="ignore"):
        result = np.asarray(_ARITHMETIC[name](_as_numpy(left), _as_numpy(right)))
    if result.ndim == 0:
        return pa.scalar(float(result) if np.isfinite(result) else None, pa.float64())
    return pa.array(result, mask=~np.isfinite(result))


def _as_numpy(values: Values) -> object:
    values = _as_floats(values)
    if isinstance(values, pa.Scalar):
        return np.float64(np.nan if values.as_py() is None else values.as_py())
    return values.to_numpy(zero_copy_only=False)


def _as_regex(pattern: str) -> str:
    """Translate a pattern of LIKE: % any text, _ any character, a backslash takes the next character as it is.

    Arrow's own matcher takes an escaped backslash at the end of ``%...`` for two.
    """
    parts, rest = [], iter(pattern)
    for mark in rest:
        if mark == "%":
            parts.append(".*")
        elif mark == "_":
            parts.append(".")
        else:
            parts.append(re.escape(next(rest, mark) if mark == "\\" else mark))
    return rf"(?s)\A(?:{''.join(parts)})\z"


def _like(values: Values, pattern: Values) -> Values:
    if pa.types.is_null(values.type):
        return values.cast(pa.bool_())
    return pc.match_substring_regex(values, _as_regex(pattern.as_py()))


def _mapped(values: Values, change: Callable[[str], str]) -> Values:
    if isinstance(values, pa.Scalar):
        return pa.scalar(change(values.as_py()), pa.large_string())
    if pa.types.is_null(values.type):
        return values
    encoded = values.dictionary_encode()
    changed = pa.array([change(value) for value in encoded.dictionary.to_pylist()], pa.large_string())
    return changed.take(encoded.indices)


def _without_accents(text: str) -> str:
    decomposed = unicodedata.normalize("NFD", text)
    return unicodedata.normalize("NFC", "".join(mark for mark in decomposed if not unicodedata.combining(mark)))


def _between(args: list[Values]) -> Values:
    value, low, high = args
    return pc.and_kleene(_compare(">=", value, low), _compare("<=", value, high))


_OTHERS: dict[str, Callable[[list[Values]], Values]] = {
    "and": lambda args: reduce(pc.and_kleene, map(_truth, args)),
    "or": lambda args: reduce(pc.or_kleene, map(_truth, args)),
    "not": lambda args: pc.invert(_truth(args[0])),
    "is null": lambda args: pc.is_null(args[0]),
    "between": _between,
    "in": lambda args: _among(args[0], args[1:]),
    "like": lambda args: _like(args[0], args[1]),
    "casei": lambda args: _mapped(args[0], str.casefold),
    "accenti": lambda args: _mapped(args[0], _without_accents),
}
