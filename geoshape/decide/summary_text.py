"""A summary as text: Markdown for readers, CSV and JSON for machines."""

from __future__ import annotations

import csv
import io
import json
from collections.abc import Mapping, Sequence

from geoshape.decide.summarise import OTHER, SCOPE_ALL, Summary, Variable

NULL_CLASS = "(none)"
ALL_ROWS = "(all)"

_TITLES = {
    "count": "count",
    "nulls": "null",
    "sum": "sum",
    "mean": "mean",
    "weighted_mean": "weighted mean",
    "sd": "sd",
    "cv": "cv",
    "min": "min",
    "max": "max",
    "mean_direction_deg": "mean direction",
    "resultant_length": "resultant length",
    "rayleigh_p": "Rayleigh p",
}

Record = Mapping[str, object]


def to_csv(summary: Summary) -> str:
    """Write a summary as CSV, a line for each column and class.

    Parameters
    ----------
    summary : Summary

    Returns
    -------
    str
        RFC 4180 with line feeds; null is empty, numbers have all their digits.
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    names = summary.statistics.column_names
    writer.writerow(names)
    writer.writerows([record[name] for name in names] for record in summary.statistics.to_pylist())
    return text.getvalue()


def to_json(summary: Summary) -> str:
    """Write a summary as JSON.

    Parameters
    ----------
    summary : Summary

    Returns
    -------
    str
        An object with ``by``, ``weights`` and ``statistics``: an array with an object for each column and class. What
        does not apply is null; dates are ISO 8601 text.
    """
    document = {"by": summary.by, "weights": summary.weights, "statistics": summary.statistics.to_pylist()}
    return json.dumps(document, ensure_ascii=False, indent=2, allow_nan=False, default=str) + "\n"


def to_markdown(summary: Summary, *, digits: int = 4) -> str:
    """Write a summary as Markdown, a table for each column with a line for each class.

    Parameters
    ----------
    summary : Summary
    digits : int
        Significant digits; whole numbers keep all of theirs.

    Returns
    -------
    str
        Classes without a value are shown as ``(none)``, all rows together as ``(all)``; what does not apply is left
        out, what is null is empty.
    """
    records = summary.statistics.to_pylist()
    size = len(records) // len(summary.variables)
    sections = []
    for index, variable in enumerate(summary.variables):
        sections.append(_section(variable, records[index * size : (index + 1) * size], summary, digits))
    return "\n".join(sections)


def _section(variable: Variable, records: Sequence[Record], summary: Summary, digits: int) -> str:
    unit = f" ({variable.unit})" if variable.unit and variable.unit != "1" else ""
    shown = shown_fields(variable, summary)
    titles = [*(summary.by or ("",)), *(_title(field, summary) for field in shown)]
    numeric = len(titles) - max(len(summary.by), 1)
    lines = [
        f"### {_escaped(variable.name)}{unit}",
        "",
        _line(map(_escaped, titles)),
        _line(["---"] * (len(titles) - numeric) + ["---:"] * numeric),
    ]
    for record in records:
        cells = [_nulls(record) if field == "nulls" else number_text(record[field], digits) for field in shown]
        lines.append(_line([*map(_escaped, class_texts(record, summary)), *cells]))
    return "\n".join(lines) + "\n"


def shown_fields(variable: Variable, summary: Summary) -> list[str]:
    """List the fields that apply to a column, in the order of the summary.

    Parameters
    ----------
    variable : Variable
    summary : Summary

    Returns
    -------
    list of str
        Without those that name the column and the class, and without nulls by status.
    """
    if variable.period_deg is not None:
        return ["count", "nulls", "mean_direction_deg", "resultant_length", "rayleigh_p"]
    total = ["sum"] if variable.is_additive else []
    weighted = ["weighted_mean"] if summary.weights is not None else []
    return ["count", "nulls", *total, "mean", *weighted, "sd", "cv", "min", *summary.quantiles, "max"]


def class_texts(record: Record, summary: Summary) -> list[str]:
    """Name the class of a row of a summary.

    Parameters
    ----------
    record : mapping
        Row of the statistics.
    summary : Summary

    Returns
    -------
    list of str
        A text for each class column; one where there are none.
    """
    if record["scope"] == SCOPE_ALL:
        return [ALL_ROWS, *[""] * (len(summary.by) - 1)]
    return [NULL_CLASS if record[name] is None else str(record[name]) for name in summary.by]


def number_text(value: object, digits: int) -> str:
    """Write a number for a reader.

    Parameters
    ----------
    value : float, int or None
    digits : int
        Significant digits; what stands before the point is never cut.

    Returns
    -------
    str
        Empty for null.

    Examples
    --------
    >>> [number_text(value, 4) for value in (123456.7, 0.123456, 12.0, 3e-9, None)]
    ['123457', '0.1235', '12', '3e-09', '']
    """
    if not isinstance(value, int | float):
        return ""
    whole = f"{value:.0f}"
    return whole if len(whole.lstrip("-")) >= digits and abs(value) < 1e15 else f"{value:.{digits}g}"


def _nulls(record: Record) -> str:
    """Count nulls, with their reasons if anything is known of these."""
    by_reason = {name.removeprefix("nulls_"): count for name, count in record.items() if name.startswith("nulls_")}
    known = [f"{count} {name}" for name, count in by_reason.items() if count]
    text = number_text(record["nulls"], 1)
    return text if not known or known == [f"{text} {OTHER}"] else f"{text} ({', '.join(known)})"


def _title(field: str, summary: Summary) -> str:
    if field in summary.quantiles:
        return field[1:].removeprefix("0" * (field[1:2] == "0")).replace("_", ".") + " %"
    return _TITLES[field]


def _escaped(text: str) -> str:
    return " ".join(text.replace("\\", "\\\\").replace("|", "\\|").split())


def _line(cells: Sequence[str] | map[str]) -> str:
    return "| " + " | ".join(cells) + " |"
