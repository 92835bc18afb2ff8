"""Rules that flag features: a name, a condition in CQL2 text, and what to tell the reader."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable
from dataclasses import dataclass, field

import pyarrow as pa

from geoshape.decide.cql import evaluate
from geoshape.decide.cql_check import check
from geoshape.decide.syntax import Expression, Property, leaves, parse
from geoshape.decide.tabular import Rows
from geoshape.errors import OptionError

UNUSUAL = "unusual"
"""Reason of features that are flagged by their score, and so no name for a rule."""

SEPARATOR = "; "
"""Stands between the names of rules in the reasons of a feature."""

_NAMED = re.compile(r"\s*(?P<name>\w[\w .-]*?)\s*:(?P<condition>.*)", re.DOTALL)
_KEYS = ("name", "rule", "message")


@dataclass(frozen=True)
class Rule:
    """A condition with a name.

    Attributes
    ----------
    name : str
        Reason that flagged features are given.
    condition : str
        CQL2 text over columns of the layer; a feature is flagged where it is true, not where it is unknown.
    message : str
        Sentence for the reader; may be empty.

    Raises
    ------
    OptionError
        The condition cannot be read, or the name cannot be used; the message says where.

    Examples
    --------
    >>> Rule("narrow", "axis_ratio < 0.2 AND area_m2 > 500").required_columns
    ('axis_ratio', 'area_m2')
    """

    name: str
    condition: str
    message: str = ""
    expression: Expression = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        if not self.name.strip():
            raise OptionError("a rule has no name; give one that says what it finds, such as narrow")
        if SEPARATOR.strip() in self.name or "\n" in self.name:
            raise OptionError(f"rule {self.name!r}: a name takes no semicolon and no line break; give it a short name")
        if self.name.casefold() == UNUSUAL:
            raise OptionError(f"rule {self.name!r}: the name is kept for features of an unusual score; give it another")
        try:
            object.__setattr__(self, "expression", parse(self.condition))
        except OptionError as error:
            raise OptionError(f"rule {self.name!r}, {error}") from None

    @property
    def required_columns(self) -> tuple[str, ...]:
        """Columns that the condition needs, in the order of the text."""
        names = (leaf.name for leaf in leaves(self.expression) if isinstance(leaf, Property))
        return tuple(dict.fromkeys(names))

    def check(self, schema: pa.Schema) -> None:
        """Refuse the rule where the columns of a table cannot answer it.

        Parameters
        ----------
        schema : pyarrow.Schema
            Columns of the table.

        Raises
        ------
        OptionError
            A column is not there or of a type that the condition cannot use.
        """
        try:
            check(self.expression, schema, self.condition)
        except OptionError as error:
            raise OptionError(f"rule {self.name!r}, {error}") from None

    def evaluate(self, rows: Rows) -> pa.BooleanArray:
        """Evaluate the rule on rows of a table whose columns were checked.

        Parameters
        ----------
        rows : pyarrow.Table or pyarrow.RecordBatch

        Returns
        -------
        (n_rows,) pyarrow.BooleanArray
            Null where the answer is unknown, because a value is null.
        """
        return evaluate(self.expression, rows)


def parse_rule(text: str) -> Rule:
    """Read a rule written in one line.

    Parameters
    ----------
    text : str
        ``name: condition``. Without a name the condition itself is the name. A column whose name holds a colon
        stands in double quotes.

    Returns
    -------
    Rule

    Raises
    ------
    OptionError
        The condition cannot be read, or the name cannot be used.

    Examples
    --------
    >>> rule = parse_rule("narrow: axis_ratio < 0.2")
    >>> rule.name, rule.condition
    ('narrow', 'axis_ratio < 0.2')
    >>> parse_rule("axis_ratio < 0.2").name
    'axis_ratio < 0.2'
    """
    named = _NAMED.fullmatch(text)
    if named:
        return Rule(named["name"], named["condition"].strip())
    condition = text.strip()
    if SEPARATOR.strip() in condition or "\n" in condition:
        raise OptionError(f"rule {condition!r} needs a name, as its text cannot be one; write name: condition")
    return Rule(condition or "without name", condition)


def parse_rules_toml(text: str | bytes) -> tuple[Rule, ...]:
    """Read rules from the text of a TOML file.

    Parameters
    ----------
    text : str or bytes
        A ``[[rule]]`` table for each rule, with ``name``, ``rule`` (the condition) and, if wanted, ``message``.
        Bytes are UTF-8.

    Returns
    -------
    tuple of Rule
        In the order of the text.

    Raises
    ------
    OptionError
        The text is no TOML or not UTF-8, a key is missing, unknown or of the wrong type, a name is repeated, or a rule
        cannot be read.

    Examples
    --------
    >>> rules = parse_rules_toml('''
    ... [[rule]]
    ... name = "narrow"
    ... rule = "axis_ratio < 0.2"
    ... message = "Long and thin: check whether it is a road verge."
    ... ''')
    >>> [rule.name for rule in rules]
    ['narrow']
    """
    document = _document(text)
    unknown = [key for key in document if key != "rule"]
    if unknown:
        raise OptionError(f"rules: key {unknown[0]!r} is not known; each rule is a table that starts with [[rule]]")
    tables = document.get("rule", [])
    if not isinstance(tables, list) or not tables or not all(isinstance(table, dict) for table in tables):
        raise OptionError("rules: there is no rule; start each with a line [[rule]], then name = and rule =")
    rules = tuple(_from_table(table, number) for number, table in enumerate(tables, start=1))
    refuse_repeated(rules)
    return rules


def refuse_repeated(rules: Iterable[Rule]) -> None:
    """Refuse rules of which two have the same name, whatever its case.

    Parameters
    ----------
    rules : iterable of Rule

    Raises
    ------
    OptionError
        A name is repeated.
    """
    seen: set[str] = set()
    for rule in rules:
        if rule.name.casefold() in seen:
            raise OptionError(f"rule {rule.name!r} is there twice; give each rule a name of its own")
        seen.add(rule.name.casefold())


def _document(text: str | bytes) -> dict[str, object]:
    try:
        return tomllib.loads(text.decode("utf-8-sig") if isinstance(text, bytes) else text)
    except UnicodeDecodeError as error:
        raise OptionError(f"rules: byte {error.start + 1} is not UTF-8; save the file as UTF-8") from None
    except tomllib.TOMLDecodeError as error:
        raise OptionError(f"rules: the text is no TOML: {error}") from None


def _from_table(table: dict[str, object], number: int) -> Rule:
    label = f"rule {table['name']!r}" if isinstance(table.get("name"), str) else f"rule {number} of the file"
    for key, value in table.items():
        if key not in _KEYS:
            raise OptionError(f"{label}: key {key!r} is not known; a rule has {', '.join(_KEYS)}")
        if not isinstance(value, str):
            raise OptionError(f"{label}: {key} = {value!r} is no text; put it in quotes")
    for key in _KEYS[:2]:
        if key not in table:
            raise OptionError(f"{label}: key {key!r} is missing; a rule needs a name and a rule")
    return Rule(str(table["name"]), str(table["rule"]), str(table.get("message", "")))
