"""Flagged shapes: how many for which reason, the foremost as outlines, and a list."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from geoshape.decide.rules import SEPARATOR
from geoshape.report.data import View
from geoshape.report.sampling import is_flagged
from geoshape.report.sheet import Sheet, SheetRow
from geoshape.report.wording import NULL, number_text
from geoshape.rings import IntArray

DRAWN = 18
LISTED = 200


@dataclass(frozen=True)
class Reason:
    """A reason, the rule behind it as far as the lineage tells, and how many shapes it found."""

    name: str
    rule: str
    count: int


@dataclass(frozen=True)
class FlaggedShape:
    """A flagged shape; ``index`` is its place among the shapes drawn, None where it is not drawn."""

    index: int | None
    label: str
    reasons: str
    score: str


@dataclass(frozen=True)
class FlagList:
    """What the page says of flags.

    Attributes
    ----------
    reasons : tuple of Reason
        Most shapes first.
    drawn : SheetRow
        The foremost as outlines.
    rows : tuple of FlaggedShape
        By falling score, at most 200.
    left : int
        Flagged shapes that are not listed.
    has_score : bool
    """

    reasons: tuple[Reason, ...]
    drawn: SheetRow
    rows: tuple[FlaggedShape, ...]
    left: int
    has_score: bool


def flag_list(view: View, sheet: Sheet) -> FlagList | None:
    """List the flagged shapes; None where none is."""
    flagged = is_flagged(view)
    if flagged is None or not flagged.any():
        return None
    rows = np.flatnonzero(flagged)
    score = view.bare("flag_score")
    if score is not None:
        rows = rows[np.argsort(-np.nan_to_num(score[rows], nan=-np.inf), kind="stable")]
    reasons = _reasons(view, rows)
    place = {int(row): index for index, row in enumerate(sheet.rows)}
    listed = tuple(
        FlaggedShape(
            place.get(int(row)),
            view.label(int(row)),
            reason,
            NULL if score is None else number_text(float(score[row]), 3),
        )
        for row, reason in zip(rows[:LISTED], reasons, strict=False)
    )
    drawn = sheet.of_flagged(rows[:DRAWN], reasons[:DRAWN])
    return FlagList(_counted(view, reasons), drawn, listed, len(rows) - len(listed), score is not None)


def _reasons(view: View, rows: IntArray) -> list[str]:
    name = view.named("flag_reasons")
    return [""] * len(rows) if name is None else [text or "" for text in view.texts(name, rows)]


def _counted(view: View, reasons: list[str]) -> tuple[Reason, ...]:
    counts = Counter(name.strip() for text in reasons for name in text.split(SEPARATOR.strip()) if name.strip())
    rules = _rules(view.data.lineage.get("options") or {})
    return tuple(Reason(name, rules.get(name, ""), count) for name, count in counts.most_common())


def _rules(options: Mapping[str, Any]) -> dict[str, str]:
    """Take the rules from the lineage: their conditions, with the sentence that goes with them."""
    found = {}
    for rule in options.get("rules") or ():
        parts = [str(rule[part]) for part in ("rule", "message") if rule.get(part)]
        found[str(rule.get("name"))] = ": ".join(parts)
    if options.get("unusual"):
        columns = ", ".join(options["unusual"].get("columns") or ())
        found["unusual"] = f"unlike the rest by {columns}" if columns else "unlike the rest"
    return found
