"""What a condition yields, and what is wrong with it, found from the columns' types before anything is evaluated."""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Callable
from enum import StrEnum

import pyarrow as pa

from geoshape.decide.syntax import ARITHMETIC, FUNCTIONS, Expression, Literal, Operation, Property, leaves, place
from geoshape.decide.tabular import suggestion
from geoshape.errors import OptionError


class ValueKind(StrEnum):
    """What an expression yields."""

    TRUTH = "a truth value"
    NUMBER = "a number"
    TEXT = "text"
    DATE = "a date"
    TIMESTAMP = "a timestamp"
    ANY = "empty"


_LONE_ESCAPE = re.compile(r"(?<!\\)(\\\\)*\\\Z")
_ORDERED = frozenset({ValueKind.NUMBER, ValueKind.TEXT, ValueKind.DATE, ValueKind.TIMESTAMP})
_ORDERINGS = frozenset({"<", "<=", ">", ">=", "between"})
_ARROW_KINDS: tuple[tuple[Callable[[pa.DataType], bool], ValueKind], ...] = (
    (pa.types.is_boolean, ValueKind.TRUTH),
    (pa.types.is_integer, ValueKind.NUMBER),
    (pa.types.is_floating, ValueKind.NUMBER),
    (pa.types.is_decimal, ValueKind.NUMBER),
    (pa.types.is_string, ValueKind.TEXT),
    (pa.types.is_large_string, ValueKind.TEXT),
    (pa.types.is_string_view, ValueKind.TEXT),
    (pa.types.is_date, ValueKind.DATE),
    (pa.types.is_timestamp, ValueKind.TIMESTAMP),
    (pa.types.is_null, ValueKind.ANY),
)


def check(expression: Expression, schema: pa.Schema, text: str) -> None:
    """Refuse a condition that the columns of a table cannot answer, before anything is evaluated.

    Parameters
    ----------
    expression : Property, Literal or Operation
    schema : pyarrow.Schema
        Columns of the table.
    text : str
        What the expression was read from, for places in messages.

    Raises
    ------
    OptionError
        A column is not there (the nearest name is suggested), holds what conditions cannot use, or is compared with
        another type; the whole yields no truth value; or no column takes part.
    """
    if not any(isinstance(leaf, Property) for leaf in leaves(expression)):
        raise OptionError(
            "the condition names no column; put text in single quotes, names of columns in none or double"
        )
    kind = _Checker(schema, text).kind(expression)
    if kind not in {ValueKind.TRUTH, ValueKind.ANY}:
        raise OptionError(f"the condition yields {kind}, neither true nor false; compare it with a value")


class _Checker:
    """Finds what an expression yields, and what is wrong with it."""

    def __init__(self, schema: pa.Schema, text: str) -> None:
        self._schema = schema
        self._text = text

    def kind(self, node: Expression) -> ValueKind:
        if isinstance(node, Property):
            return self._column(node)
        if isinstance(node, Literal):
            return _literal_kind(node.value)
        if node.name in ARITHMETIC:
            return self._all(node, ValueKind.NUMBER)
        if node.name in FUNCTIONS:
            return self._all(node, ValueKind.TEXT)
        self._predicate(node)
        return ValueKind.TRUTH

    def _predicate(self, node: Operation) -> None:
        match node.name:
            case "and" | "or" | "not":
                self._all(node, ValueKind.TRUTH)
            case "is null":
                self._is_null(node.args[0])
            case "like":
                self._like(node)
            case _:
                self._comparison(node)

    def _error(self, node: Expression, message: str) -> OptionError:
        return OptionError(f"{place(self._text, node.at)}: {message}")

    def _is_null(self, arg: Expression) -> None:
        if isinstance(arg, Property):
            self._field(arg)  # a column of any type may be null
        else:
            self.kind(arg)

    def _field(self, node: Property) -> pa.DataType:
        count = len(self._schema.get_all_field_indices(node.name))
        if count == 0:
            remedy = suggestion(node.name, self._schema.names)
            if node.is_quoted:
                remedy += f"; if it is text, write '{node.name}'"
            raise self._error(node, f"column {node.name!r} is not in the layer; {remedy}")
        if count > 1:
            raise self._error(node, f"column {node.name!r} is there {count} times; rename all but one")
        kind = self._schema.field(node.name).type
        return kind.value_type if pa.types.is_dictionary(kind) else kind

    def _column(self, node: Property) -> ValueKind:
        kind = self._field(node)
        for is_kind, value_kind in _ARROW_KINDS:
            if is_kind(kind):
                return value_kind
        raise self._error(node, f"column {node.name!r} holds {kind}, which conditions cannot compare; choose another")

    def _all(self, node: Operation, wanted: ValueKind) -> ValueKind:
        for arg in node.args:
            kind = self.kind(arg)
            if kind not in {wanted, ValueKind.ANY}:
                name = node.name.upper()
                raise self._error(arg, f"{name} takes {wanted}, and {self._shown(arg)} is {kind}{_hint(wanted, kind)}")
        return wanted

    def _like(self, node: Operation) -> None:
        self._all(node, ValueKind.TEXT)
        pattern = node.args[1]
        for leaf in leaves(pattern):
            if isinstance(leaf, Property):
                message = f"LIKE takes a pattern in quotes, and {self._shown(pattern)} is none; compare with ="
                raise self._error(pattern, message)
            if _LONE_ESCAPE.search(str(leaf.value)):
                raise self._error(pattern, "the pattern ends with a single backslash; write two for a backslash")

    def _comparison(self, node: Operation) -> None:
        first, kind = node.args[0], ValueKind.ANY
        for arg in node.args:
            other = self.kind(arg)
            if ValueKind.ANY not in {kind, other} and other is not kind:
                message = f"{self._shown(first)} is {kind} and {self._shown(arg)} is {other}; they cannot be compared"
                raise self._error(arg if first.at is None else first, message + _remedy(kind, other))
            if kind is ValueKind.ANY:
                first, kind = arg, other
        if node.name in _ORDERINGS and kind not in _ORDERED and kind is not ValueKind.ANY:
            raise self._error(first, f"{self._shown(first)} is {kind}, which has no order; compare it with = or <>")

    def _shown(self, node: Expression) -> str:
        match node:
            case Property():
                return node.name
            case Literal(value=str() | bool()):
                return repr(node.value)
            case Literal(value=float()):
                return f"{node.value:g}"
            case Literal():
                return str(node.value)
        return f"the result of {node.name.upper()}"


def _literal_kind(value: bool | float | str | dt.date) -> ValueKind:  # noqa: FBT001 - one of the values a literal has
    match value:
        case bool():
            return ValueKind.TRUTH
        case str():
            return ValueKind.TEXT
        case dt.datetime():
            return ValueKind.TIMESTAMP
        case dt.date():
            return ValueKind.DATE
    return ValueKind.NUMBER


def _hint(wanted: ValueKind, kind: ValueKind) -> str:
    return "; compare it with a value" if wanted is ValueKind.TRUTH else f"; use {wanted} instead of {kind}"


def _remedy(kind: ValueKind, other: ValueKind) -> str:
    pair = {kind, other}
    if pair == {ValueKind.TEXT, ValueKind.NUMBER}:
        return " (numbers take no quotes, text takes single ones)"
    if pair == {ValueKind.TRUTH, ValueKind.NUMBER}:
        return " (compare truth values with TRUE or FALSE, numbers with 1 or 0)"
    if pair == {ValueKind.TRUTH, ValueKind.TEXT}:
        return " (compare truth values with TRUE or FALSE, without quotes)"
    if pair == {ValueKind.DATE, ValueKind.TIMESTAMP}:
        return " (compare dates with DATE('2024-05-31'), timestamps with TIMESTAMP('2024-05-31T00:00:00Z'))"
    return " (dates that are text compare with text in the same form, such as '2024-05-31')"
