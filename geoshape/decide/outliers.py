"""Features that are unlike the rest of the layer, or of their class, in several columns at once.

Lengths and areas enter as logarithms, everything else as it is; how the distances are made stands in
`geoshape.decide.robust`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from geoshape.decide.known import is_axial, is_size, known_column
from geoshape.decide.robust import Ordinary, fit_ordinary
from geoshape.decide.tabular import Classes, ClassValue, Rows, classes_of, numbers, require_columns
from geoshape.errors import OptionError
from geoshape.rings import BoolArray, FloatArray, IntArray

DEFAULT_COLUMNS = ("axis_ratio", "convexity", "polsby_popper")
"""What makes a shape unusual where nothing else is said: stretch, dents and roughness, whatever size and place.

Few, as each column more needs ten rows more in every class, and as columns that are functions of one another for simple
shapes (all that measure compactness are, for rectangles) would make everything else unusual."""

MANY = 0.1
"""Share of unusual rows above which a note says that the limit means little."""


@dataclass(frozen=True, kw_only=True)
class UnusualOptions:
    """What is unusual, and among which features.

    Attributes
    ----------
    columns : tuple of str
        Columns of numbers to judge by; those of `DEFAULT_COLUMNS` that the table has where left out.
    within : str or None
        Class column; each class is judged by its own. Rows without a class are a class.
    level : float
        Share of ordinary features that are not to be flagged, between 0.5 and 1: of a thousand normal features, one is
        flagged at the default.
    seed : int
        Starts the search; the same seed and rows give the same result, whatever the order of the rows.

    Raises
    ------
    OptionError
        A value is outside its range, or a column is named twice.
    """

    columns: tuple[str, ...] = ()
    within: str | None = None
    level: float = 0.999
    seed: int = 0

    def __post_init__(self) -> None:
        if not 0.5 < self.level < 1.0:
            raise OptionError(f"level = {self.level} cannot be used; give a share between 0.5 and 1, such as 0.999")
        if not 0 <= self.seed < 2**32:
            raise OptionError(f"seed = {self.seed} cannot be used; give a number from 0 to {2**32 - 1}")
        repeated = {name for name in self.columns if self.columns.count(name) > 1}
        if repeated:
            raise OptionError(f"columns: {min(repeated)!r} is named twice; name each column once")


@dataclass(frozen=True, eq=False)
class UnusualFit:
    """What is ordinary in each class of a table.

    Attributes
    ----------
    columns : tuple of str
        Columns judged by.
    within : str or None
        Class column.
    level : float
        Share of ordinary features that are not flagged.
    classes : dict of Ordinary
        By value of the class column, None for rows without a class; a single one, of None, where there are no classes.
    """

    columns: tuple[str, ...]
    within: str | None
    level: float
    classes: dict[ClassValue, Ordinary]

    @property
    def notes(self) -> tuple[str, ...]:
        """Lines that say which columns were left out, which classes have no score, and where much is unusual."""
        return tuple(
            f"{self.label(value)}: {text}"
            for value, ordinary in self.classes.items()
            for text in (*ordinary.dropped, ordinary.reason, _much(ordinary))
            if text
        )

    def label(self, value: ClassValue) -> str:
        """Name a class in a message."""
        if self.within is None:
            return "all features"
        return f"{self.within} null" if value is None else f"{self.within} {value}"


@dataclass(frozen=True, eq=False)
class Scores:
    """How unusual each feature is.

    Attributes
    ----------
    score : (n_rows,) float64
        Squared robust distance; NaN where there is none.
    is_unusual : (n_rows,) bool
        Whether it exceeds the limit of the feature's class.
    note : (n_rows,) list of str or None
        Why there is no score; None where there is.
    """

    score: FloatArray
    is_unusual: BoolArray
    note: list[str | None]


def fit_unusual(rows: Rows, options: UnusualOptions) -> UnusualFit:
    """Find out what is ordinary in a table, class by class.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
        All rows; of its columns only the class column and those judged by are used.
    options : UnusualOptions

    Returns
    -------
    UnusualFit

    Raises
    ------
    OptionError
        A column is not there, holds no numbers or holds directions; or none is named and none of the default ones is
        there.
    """
    columns = _chosen(rows, options)
    values = _matrix(rows, columns)
    classes = _classes(rows, options.within)
    fits = {
        value: fit_ordinary(values[members], columns, level=options.level, seed=options.seed)
        for value, members in _members(classes)
    }
    return UnusualFit(columns, options.within, options.level, fits)


def score_unusual(rows: Rows, fit: UnusualFit) -> Scores:
    """Score rows by what is ordinary in their classes.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
        All rows of the table, or some of them.
    fit : UnusualFit

    Returns
    -------
    Scores
        A row has no score where a column used is null, or its class has none.

    Raises
    ------
    OptionError
        A column of the fit is not in the table.
    """
    require_columns(fit.columns, rows.schema, "columns")
    values = _matrix(rows, fit.columns)
    scores = Scores(np.full(len(values), np.nan), np.zeros(len(values), dtype=np.bool_), [None] * len(values))
    for value, members in _members(_classes(rows, fit.within)):
        ordinary = fit.classes.get(value)
        if ordinary is None:
            _explain(scores, members, [f"no score, as {fit.label(value)} is in no row that was fitted"] * len(members))
            continue
        distances = ordinary.distances(values[members])
        scores.score[members] = distances
        scores.is_unusual[members] = distances > ordinary.limit
        missing = members[np.isnan(distances)]
        _explain(scores, missing, _reasons(values[missing], fit.columns, ordinary))
    return scores


def _much(ordinary: Ordinary) -> str:
    if ordinary.n_unusual <= MANY * ordinary.n_rows:
        return ""
    found = f"{ordinary.n_unusual} of {ordinary.n_rows} lie beyond the limit, as the others are much alike"
    return f"{found}; look at the largest scores first, or judge by other columns"


def _explain(scores: Scores, members: IntArray, reasons: Sequence[str]) -> None:
    for member, reason in zip(members.tolist(), reasons, strict=True):
        scores.note[member] = reason


def _reasons(values: FloatArray, columns: tuple[str, ...], ordinary: Ordinary) -> list[str]:
    """Say why rows have no score."""
    if ordinary.reason:
        return [ordinary.reason] * len(values)
    names = [columns[index] for index in ordinary.used]
    first_null = np.isnan(values[:, list(ordinary.used)]).argmax(axis=1)
    return [f"no score, as {names[index]} has no usable value" for index in first_null]


def _chosen(rows: Rows, options: UnusualOptions) -> tuple[str, ...]:
    require_columns(options.columns, rows.schema, "columns")
    columns = options.columns or tuple(name for name in DEFAULT_COLUMNS if name in rows.schema.names)
    if not columns:
        raise OptionError("columns: none of the usual shape columns is in the layer; name columns to judge by")
    for name in columns:
        known = known_column(name)
        if known and is_axial(known):
            raise OptionError(f"columns: {name!r} is a direction, which has no least and greatest; leave it out")
    return columns


def _matrix(rows: Rows, columns: tuple[str, ...]) -> FloatArray:
    values = np.empty((rows.num_rows, len(columns)))
    for index, name in enumerate(columns):
        values[:, index] = numbers(rows, name)
        known = known_column(name)
        if known and is_size(known):
            positive = np.where(values[:, index] > 0, values[:, index], np.nan)
            values[:, index] = np.log(positive)
    return values


def _classes(rows: Rows, within: str | None) -> Classes:
    return classes_of(rows, [] if within is None else [within], "within")


def _members(classes: Classes) -> list[tuple[ClassValue, IntArray]]:
    """Rows of each class, with the class's value; None where there are no class columns."""
    order = np.argsort(classes.code, kind="stable")
    ends = np.cumsum(np.bincount(classes.code, minlength=len(classes.values)))
    values = [value[0] if value else None for value in classes.values]
    return list(zip(values, np.split(order, ends[:-1]), strict=True)) if values else []
