"""Choose the shapes that a page draws and lists: all flagged, all extremes, the typical, and a seeded rest."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.columns import Kind
from geoshape.report.data import ATTRIBUTE, ERROR, View
from geoshape.report.statistics import ENDS
from geoshape.report.wording import count_text, whole_text
from geoshape.rings import BoolArray, IntArray

GROWTH = 1.5
"""How far the choice may grow beyond the rows asked for, so that it holds all flagged shapes."""

REST_SHARE = 0.1
"""Share of the rows asked for that is left to chance in any case."""


@dataclass(frozen=True, eq=False)
class Sample:
    """Rows that the page draws and lists.

    Attributes
    ----------
    rows : (m,) int64
        Rows of the table, ascending.
    n_rows : int
        Rows of the table in all.
    n_flagged, n_flagged_kept : int
        Flagged rows in all, and among the chosen.
    n_extreme : int
        Rows chosen because they are at an end or in the middle of a column.
    statement : str
        What was chosen, in a sentence.
    """

    rows: IntArray
    n_rows: int
    n_flagged: int
    n_flagged_kept: int
    n_extreme: int
    statement: str

    @property
    def is_whole(self) -> bool:
        """Whether every row is there."""
        return len(self.rows) == self.n_rows


def is_flagged(view: View) -> BoolArray | None:
    """(n,) whether each shape is flagged; None where the layer has no flags."""
    name = view.named("flag")
    if name is None:
        return None
    if view.by_name[name].kind is Kind.TEXT:
        return np.array([text not in {None, "", "no"} for text in view.texts(name)], dtype=np.bool_)
    return np.nan_to_num(view.numbers(name)) > 0


def choose_rows(view: View) -> Sample:
    """Choose about ``options.max_rows`` rows; up to half as many again where flagged shapes ask for it.

    Parameters
    ----------
    view : View

    Returns
    -------
    Sample
        All rows where they fit. Else the extremes and the middle of every measured column and the prototypes of
        groups, the flagged rows (those with the highest score where not all fit), and a seeded random rest.
    """
    n, most = view.data.n_rows, view.options.max_rows
    flagged = is_flagged(view)
    n_flagged = 0 if flagged is None else int(np.count_nonzero(flagged))
    if n <= most:
        return Sample(
            np.arange(n), n, n_flagged, n_flagged, 0, f"All {count_text(n, 'row')} are on the map and listed."
        )
    extremes = _extremes(view)[:most]
    chosen = np.zeros(n, dtype=np.bool_)
    chosen[extremes] = True
    if flagged is not None:
        room = int((GROWTH - REST_SHARE) * most) - len(extremes)
        chosen[_most_flagged(view, flagged & ~chosen, room)] = True
    rest = np.flatnonzero(~chosen)
    left = max(most - int(np.count_nonzero(chosen)), min(int(REST_SHARE * most), len(rest)))
    generator = np.random.default_rng(view.options.seed)
    chosen[generator.choice(rest, size=left, replace=False)] = True
    kept = 0 if flagged is None else int(np.count_nonzero(flagged & chosen))
    rows = np.flatnonzero(chosen)
    return Sample(
        rows, n, n_flagged, kept, len(extremes), _statement(view, len(rows), len(extremes), (kept, n_flagged))
    )


def _extremes(view: View) -> IntArray:
    """Take extremes round by round over the columns, so that a small sample holds the foremost of each."""
    columns = [field for field in view.numeric if field.family not in {ERROR, ATTRIBUTE}]
    picks = []
    for field in columns:
        lowest, typical, highest = view.ends(field.name)
        picks += [lowest, highest[::-1], typical]
    ranked = np.full((len(picks), ENDS), -1, dtype=np.int64)
    for place, rows in enumerate(picks):
        ranked[place, : len(rows)] = rows
    ordered = ranked.T.ravel()
    prototypes = _prototypes(view)
    together = np.concatenate((prototypes, ordered[ordered >= 0]))
    _, first = np.unique(together, return_index=True)
    return np.asarray(together[np.sort(first)])


def _prototypes(view: View) -> IntArray:
    name = view.named("is_prototype")
    if name is None:
        return np.zeros(0, dtype=np.int64)
    if view.by_name[name].kind is Kind.TEXT:
        return np.flatnonzero(np.array([text == "yes" for text in view.texts(name)], dtype=np.bool_))
    return np.flatnonzero(np.nan_to_num(view.numbers(name)) > 0)


def _most_flagged(view: View, flagged: BoolArray, most: int) -> IntArray:
    rows = np.flatnonzero(flagged)
    score = view.bare("flag_score")
    if score is None:
        return rows[: max(most, 0)]
    return rows[np.argsort(-np.nan_to_num(score[rows], nan=-np.inf), kind="stable")][: max(most, 0)]


def _statement(view: View, chosen: int, extremes: int, flagged: tuple[int, int]) -> str:
    kept, of = flagged
    parts = [f"the extremes and the middle of every column ({whole_text(extremes)})"]
    if of:
        which = f"all {whole_text(of)} flagged" if kept == of else f"{whole_text(kept)} of the {whole_text(of)} flagged"
        parts.insert(0, which)
    return (
        f"The map, the table and the scatter show {whole_text(chosen)} of {count_text(view.data.n_rows, 'row')}: "
        f"{', '.join(parts)} and a random rest (seed {view.options.seed}). Statistics are of all rows."
    )
