"""The text of a rule as a tree, each leaf with its place in the text.

The text is CQL2 (OGC 21-065r2, Common Query Language). It is parsed into the standard's JSON, which does not tell where
things stood; the leaves of the tree follow in the order of the text, so that reading the text once more for names
and quoted strings gives each leaf its place.
"""

from __future__ import annotations

import datetime as dt
import math
import re
from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass, field

import cql2

from geoshape.errors import OptionError

MAX_NESTING = 250
"""Signs, brackets and NOTs in one rule; more would exhaust the stack of the parser, which ends the process."""

MAX_EXACT = 2**53
"""From here on not every integer is a float64."""


@dataclass(frozen=True)
class Property:
    """A column, at an offset of the text; ``is_quoted`` where its name stands in double quotes."""

    name: str
    at: int
    is_quoted: bool = False


@dataclass(frozen=True)
class Literal:
    """A value, at an offset of the text where that is known."""

    value: bool | int | float | str | dt.date | dt.datetime
    at: int | None


@dataclass(frozen=True)
class Operation:
    """An operator, in lower case, and what it is applied to; the list after IN is unrolled into ``args``."""

    name: str
    args: tuple[Expression, ...]

    @property
    def at(self) -> int | None:
        """Offset of the first leaf whose place is known."""
        return next((arg.at for arg in self.args if arg.at is not None), None)


Expression = Property | Literal | Operation

_TOKEN = re.compile(
    r"""(?P<text>'(?:[^']|'')*')
      | (?P<quoted>"(?:[^"]|"")*")
      | (?P<number>\d+(?:\.\d*)?(?:[eE][+-]?\d+)?)
      | (?P<name>[^\W\d][\w.:]*)
      | (?P<sign>[-+*/%^<>=(])""",
    re.VERBOSE,
)
_KEYWORDS = frozenset({"and", "or", "not", "is", "null", "like", "between", "in", "div", "true", "false"})
_NESTING_WORDS = frozenset({"not", "div"})
ARITHMETIC = frozenset({"+", "-", "*", "/", "%", "^", "div"})
FUNCTIONS = frozenset({"casei", "accenti"})
_PREDICATES = frozenset({"and", "or", "not", "is null", "=", "<>", "<", "<=", ">", ">=", "between", "in", "like"})
_CALL = re.compile(r"\s*\(")
_WHERE = re.compile(r"--> (\d+):(\d+)")
_DATE = re.compile(r"\d{4}-\d\d-\d\d")
_TIMESTAMP = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(?:\.\d+)?Z")


def parse(text: str) -> Expression:
    """Read a condition in CQL2 text.

    Parameters
    ----------
    text : str

    Returns
    -------
    Property, Literal or Operation

    Raises
    ------
    OptionError
        The text breaks the grammar, nests too deeply, or holds a value that is none; the message says where.

    Examples
    --------
    >>> parse("area_m2 > 500")
    Operation(name='>', args=(Property(name='area_m2', at=0, is_quoted=False), Literal(value=500.0, at=None)))
    """
    if not text.strip():
        raise OptionError("there is no condition; write one such as: axis_ratio < 0.2")
    tokens = _tokens(text)
    try:
        tree = cql2.parse_text(text).to_json()
    except cql2.ParseError as error:
        raise OptionError(_unreadable(text, str(error))) from None
    return _Reader(text, tokens).expression(tree)


def place(text: str, at: int | None) -> str:
    r"""Name a place in a text, counted from 1, for a message.

    Parameters
    ----------
    text : str
    at : int or None
        Offset; None where it is not known.

    Returns
    -------
    str

    Examples
    --------
    >>> place("a > 1", 4), place("a > 1 AND\nb < 2", 12), place("1 = 1", None)
    ('at character 5', 'at line 2, character 3', 'in the condition')
    """
    if at is None:
        return "in the condition"
    line = text.count("\n", 0, at) + 1
    character = at - text.rfind("\n", 0, at)
    return f"at character {character}" if "\n" not in text.strip() else f"at line {line}, character {character}"


def leaves(expression: Expression) -> Iterator[Property | Literal]:
    """List the columns and values of an expression in the order of the text.

    Parameters
    ----------
    expression : Property, Literal or Operation

    Yields
    ------
    Property or Literal
    """
    pending = [expression]
    while pending:
        node = pending.pop()
        if isinstance(node, Operation):
            pending.extend(reversed(node.args))
        else:
            yield node


@dataclass
class _Tokens:
    """What stands in the text, in its order: columns, quoted strings, and integers too large for a float."""

    names: deque[Property] = field(default_factory=deque)
    strings: deque[tuple[str, int]] = field(default_factory=deque)
    integers: deque[tuple[int, int]] = field(default_factory=deque)


def _tokens(text: str) -> _Tokens:
    found = _Tokens()
    nesting = 0
    for match in _TOKEN.finditer(text):
        token, at = match.group(), match.start()
        match match.lastgroup:
            case "text":
                found.strings.append((token[1:-1].replace("''", "'"), at))
            case "quoted":
                found.names.append(Property(token[1:-1].replace('""', '"'), at, is_quoted=True))
            case "number" if token.isdigit() and int(token) >= MAX_EXACT:
                found.integers.append((int(token), at))
            case "name" if token.lower() not in _KEYWORDS and not _CALL.match(text, match.end()):
                found.names.append(Property(token, at))
            case "sign":
                nesting += 1
            case _:
                nesting += token.lower() in _NESTING_WORDS
    if nesting > MAX_NESTING:
        raise OptionError(
            f"the condition has {nesting} operators and brackets, more than {MAX_NESTING}; "
            "use IN for long lists, or write several rules"
        )
    return found


class _Reader:
    """Turns the standard's JSON into a tree with places."""

    def __init__(self, text: str, tokens: _Tokens) -> None:
        self._text = text
        self._tokens = tokens

    def expression(self, node: object) -> Expression:
        match node:
            case {"op": str(name), "args": list(args)}:
                return self._operation(name, args)
            case {"property": str(name)}:
                return self._property(name)
            case {"date": value}:
                return self._instant("DATE", value, _DATE, "DATE('2024-05-31')")
            case {"timestamp": value}:
                return self._instant("TIMESTAMP", value, _TIMESTAMP, "TIMESTAMP('2024-05-31T12:00:00Z')")
            case bool() | float() | int() | str():
                return self._literal(node)
            case None:
                raise OptionError("NULL is no value to compare with; write: column IS NULL")
            case list():
                raise OptionError("a list can only stand after IN; write: column IN (1, 2)")
        raise OptionError("geometries and intervals cannot be used in rules; compare columns with values")

    def _operation(self, name: str, args: list[object]) -> Operation:
        name = "is null" if name == "isNull" else name.lower()
        if name == "in" and len(args) == 2 and isinstance(args[1], list):
            args = [args[0], *args[1]]
        if name in FUNCTIONS and len(args) != 1:
            raise self._error(name, f"{name.upper()} takes one text, not {len(args)}")
        if name not in _PREDICATES | ARITHMETIC | FUNCTIONS:
            raise self._error(name, f"there is no function {name}; conditions have CASEI, ACCENTI, DATE and TIMESTAMP")
        return Operation(name, tuple(self.expression(arg) for arg in args))

    def _error(self, word: str, message: str) -> OptionError:
        at = self._text.lower().find(word)
        return OptionError(f"{place(self._text, at if at >= 0 else None)}: {message}")

    def _property(self, name: str) -> Property:
        names = self._tokens.names
        if names and names[0].name == name:
            return names.popleft()
        # A name that is a keyword as well: its place is that of its first appearance.
        return Property(name, max(self._text.find(name), 0))

    def _literal(self, value: bool | float | str) -> Literal:  # noqa: FBT001 - a truth value is one of the literals
        if isinstance(value, str):
            return Literal(value, self._string_place(value))
        if isinstance(value, bool):
            return Literal(value, None)
        if not math.isfinite(value):
            raise OptionError("a number in the condition is too large; the largest is about 1.8e308")
        return self._large(value) if abs(value) >= MAX_EXACT else Literal(value, None)

    def _large(self, value: float) -> Literal:
        """Give back the digits that a long integer, such as an identifier, loses as a float."""
        for integer, at in self._tokens.integers:
            if float(integer) == abs(value):
                self._tokens.integers.remove((integer, at))
                return Literal(integer if value > 0 else -integer, at)
        return Literal(value, None)

    def _string_place(self, value: str) -> int | None:
        strings = self._tokens.strings
        return strings.popleft()[1] if strings and strings[0][0] == value else None

    def _instant(self, kind: str, value: object, pattern: re.Pattern[str], example: str) -> Literal:
        # The parser rewrites times to UTC, so that their text is no longer that of the rule.
        at = self._tokens.strings.popleft()[1] if self._tokens.strings else None
        if isinstance(value, str) and pattern.fullmatch(value):
            try:
                moment = dt.datetime.fromisoformat(value)
            except ValueError:
                pass
            else:
                return Literal(moment.date() if kind == "DATE" else moment, at)
        raise OptionError(f"{place(self._text, at)}: {kind} of {value!r} is no such moment; write it as {example}")


def _unreadable(text: str, message: str) -> str:
    found = _WHERE.search(message)
    if not found:
        return f"the condition cannot be read: {' '.join(message.split())}"
    line, character = int(found[1]), int(found[2])
    starts = [0, *(match.end() for match in re.finditer("\n", text))]
    at = starts[line - 1] + character - 1
    rest = text[at:].strip()
    if not rest:
        return f"{place(text, at)}: the condition ends too early; a value or a closing bracket is missing"
    shown = rest.split("\n")[0][:20]
    hint = (
        "write = for equality"
        if text[at - 1 : at + 1] == "=="
        else "see the grammar of CQL2 text, such as a < 1 AND b = 'x'"
    )
    return f"{place(text, at)}: {shown!r} does not fit here; {hint}"
