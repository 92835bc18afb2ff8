"""Statistics of columns by class: sums, means, spread, quantiles, and mean directions of azimuths."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
import pyarrow as pa

from geoshape.columns import MEASURED, RECORD
from geoshape.decide.circular import AXIAL_PERIOD_DEG, FULL_PERIOD_DEG, mean_directions
from geoshape.decide.group_statistics import group_statistics, weighted_means
from geoshape.decide.known import STATUS, is_additive, is_axial, known_column
from geoshape.decide.tabular import Classes, Rows, classes_of, is_numeric, numbers, require_columns, whole
from geoshape.errors import OptionError
from geoshape.rings import BoolArray, FloatArray, IntArray

DEFAULT_QUANTILES = (0.05, 0.25, 0.5, 0.75, 0.95)
AREA = "area_m2"

SCOPE_CLASS = "class"
SCOPE_ALL = "all"

OTHER = "other"
"""Reason of a null that the feature's status does not tell."""

_HEAD = ("column", "unit", "scope")
_COUNTS = ("rows", "count", "nulls")
_LOCATION = ("sum", "mean", "weighted_mean", "sd", "cv", "min")
_DIRECTION = ("mean_direction_deg", "resultant_length", "rayleigh_p")
_RESERVED = frozenset({*_HEAD, *_COUNTS, *_LOCATION, *_DIRECTION, "max"})

Fields: TypeAlias = dict[str, FloatArray]


@dataclass(frozen=True, kw_only=True)
class SummaryOptions:
    """What is summarised, and by which classes.

    Attributes
    ----------
    by : tuple of str
        Class columns; none summarises all rows together. Rows without a class are a class of their own.
    columns : tuple of str
        Columns of numbers or truth values; the measured ones where left out, or all numbers if there are none.
    weights : str or None
        Column that weights the weighted mean; the area where left out, if the table has it.
    quantiles : tuple of float
        Shares from 0 to 1, put in ascending order.
    axial : tuple of str
        Columns of directions without sense, in degrees, besides the azimuths that geoshape measures.
    bearings : tuple of str
        Columns of directions that have a sense, in degrees.

    Raises
    ------
    OptionError
        A quantile is outside its range, or a column is named twice or both an axis and a bearing.
    """

    by: tuple[str, ...] = ()
    columns: tuple[str, ...] = ()
    weights: str | None = None
    quantiles: tuple[float, ...] = DEFAULT_QUANTILES
    axial: tuple[str, ...] = ()
    bearings: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        for share in self.quantiles:
            if not 0.0 <= share <= 1.0:
                raise OptionError(f"quantiles: {share} cannot be used; give shares from 0 to 1, such as 0.25")
        object.__setattr__(self, "quantiles", tuple(sorted(set(self.quantiles))))
        for option, names in (("by", self.by), ("columns", self.columns), ("axial", self.axial + self.bearings)):
            repeated = [name for name in names if names.count(name) > 1]
            if repeated:
                raise OptionError(f"{option}: {repeated[0]!r} is named twice; name each column once")


@dataclass(frozen=True)
class Variable:
    """A column that is summarised.

    Attributes
    ----------
    name : str
    unit : str
        Unit as the registry has it, ``"1"`` for a pure number; empty where it is not known.
    is_additive : bool
        Whether its sum means something. Of columns that geoshape does not know this is taken for granted.
    period_deg : float or None
        180 for axes, 360 for bearings, None for numbers.
    """

    name: str
    unit: str
    is_additive: bool
    period_deg: float | None


@dataclass(frozen=True, eq=False)
class Summary:
    """Statistics of columns by class.

    Attributes
    ----------
    statistics : pyarrow.Table
        A row for each column and class, and one for each column over all rows, last. Fields: ``column``, ``unit``,
        ``scope`` ("class" or "all"), the class columns, ``rows``, ``count`` (values), ``nulls``,
        ``nulls_<status>`` for each status that has nulls, ``sum``, ``mean``, ``weighted_mean``, ``sd`` (n - 1), ``cv``
        (sd / mean, where the mean is positive), ``min``, the quantiles (``q05`` ...; linear interpolation), ``max``,
        ``mean_direction_deg``, ``resultant_length`` and ``rayleigh_p``. What does not apply is null.
    by : tuple of str
        Fields that hold the class; ``class_`` stands before a class column's name that another field has.
    variables : tuple of Variable
        Columns summarised, in order.
    weights : str or None
        Column that weighted the means.
    quantiles : tuple of str
        Fields that hold the quantiles.
    """

    statistics: pa.Table
    by: tuple[str, ...]
    variables: tuple[Variable, ...]
    weights: str | None
    quantiles: tuple[str, ...]


def summarise(rows: Rows, options: SummaryOptions | None = None) -> Summary:
    """Summarise columns of a table by class.

    Parameters
    ----------
    rows : pyarrow.Table or pyarrow.RecordBatch
        Measured columns and any others. NaN and infinity count as null.
    options : SummaryOptions, optional
        Columns, classes, weights and quantiles; the measured columns over all rows where left out.

    Returns
    -------
    Summary
        Azimuths have a mean direction with its resultant length and Rayleigh test, and no arithmetic mean.

    Raises
    ------
    OptionError
        A column is not there (the nearest name is suggested), holds no numbers, or a weight is negative; or there is
        no column to summarise.

    Examples
    --------
    >>> patches = pa.table({"habitat": ["fen", "fen", None], "area_m2": [100.0, 300.0, 50.0]})
    >>> found = summarise(patches, SummaryOptions(by=("habitat",), quantiles=(0.5,)))
    >>> found.statistics.select(["habitat", "scope", "count", "sum", "weighted_mean"]).to_pylist()[0]
    {'habitat': 'fen', 'scope': 'class', 'count': 2, 'sum': 400.0, 'weighted_mean': 250.0}
    """
    options = options or SummaryOptions()
    variables = _variables(rows, options)
    weights_name = _weights_name(rows, options)
    classes = classes_of(rows, options.by, "by")
    everything = _Grouping(np.zeros(rows.num_rows, dtype=np.int64), 1)
    task = _Task(
        groupings=(_Grouping(classes.code, len(classes.values)), everything) if options.by else (everything,),
        weights=None if weights_name is None else _weights(rows, weights_name),
        reasons=_reasons_of_nulls(rows),
        shares=options.quantiles,
    )
    parts = [_statistics_of(numbers(rows, variable.name), variable, task) for variable in variables]
    table = _table(parts, variables, _class_fields(rows, options, classes), task)
    quantiles = tuple(quantile_name(share) for share in options.quantiles)
    by = tuple(table.column_names[len(_HEAD) : len(_HEAD) + len(options.by)])
    return Summary(table, by, variables, weights_name, quantiles)


def quantile_name(share: float) -> str:
    """Name the field of a quantile.

    Examples
    --------
    >>> quantile_name(0.05), quantile_name(0.5), quantile_name(0.975)
    ('q05', 'q50', 'q97_5')
    """
    percent = f"{100 * share:.10g}"
    return "q" + ("0" if share < 0.1 else "") + percent.replace(".", "_")


def _variables(rows: Rows, options: SummaryOptions) -> tuple[Variable, ...]:
    directions = (*options.axial, *options.bearings)
    require_columns(options.columns, rows.schema, "columns")
    require_columns(options.axial, rows.schema, "axial")
    require_columns(options.bearings, rows.schema, "bearings")
    names = options.columns or _default_columns(rows, options.by)
    names = (*names, *(name for name in directions if name not in names))
    if not names:
        raise OptionError("columns: the layer has no columns of numbers; measure it first")
    return tuple(_variable(name, options) for name in names)


def _default_columns(rows: Rows, by: Sequence[str]) -> tuple[str, ...]:
    numeric = [field.name for field in rows.schema if is_numeric(field.type) and field.name not in by]
    known = [(name, known_column(name)) for name in numeric]
    measured = tuple(name for name, column in known if column and column.family != RECORD)
    return measured or tuple(numeric)


def _variable(name: str, options: SummaryOptions) -> Variable:
    known = known_column(name)
    if name in options.bearings:
        return Variable(name, "deg", is_additive=False, period_deg=FULL_PERIOD_DEG)
    if name in options.axial or (known and is_axial(known)):
        return Variable(name, "deg", is_additive=False, period_deg=AXIAL_PERIOD_DEG)
    if known is None:
        return Variable(name, "", is_additive=True, period_deg=None)
    return Variable(name, known.unit, is_additive=is_additive(known), period_deg=None)


def _weights_name(rows: Rows, options: SummaryOptions) -> str | None:
    if options.weights is not None:
        require_columns([options.weights], rows.schema, "weights")
        return options.weights
    areas = [name for name in rows.schema.names if (known := known_column(name)) and known.name == AREA]
    return AREA if AREA in areas else next(iter(areas), None)


def _weights(rows: Rows, name: str) -> FloatArray:
    weights = numbers(rows, name)
    negative = np.flatnonzero(weights < 0)
    if len(negative):
        raise OptionError(
            f"weights: {name} is {weights[negative[0]]:g} in row {negative[0]}; weights cannot be negative"
        )
    return weights


@dataclass(frozen=True, eq=False)
class _Reasons:
    """Why a row's numbers are null, if they are."""

    names: tuple[str, ...]
    code: IntArray


@dataclass(frozen=True, eq=False)
class _Grouping:
    """The group of each row."""

    code: IntArray
    n_groups: int


@dataclass(frozen=True, eq=False)
class _Task:
    """What the statistics of all columns share."""

    groupings: tuple[_Grouping, ...]
    weights: FloatArray | None
    reasons: _Reasons
    shares: tuple[float, ...]


def _reasons_of_nulls(rows: Rows) -> _Reasons:
    columns = [name for name in rows.schema.names if (known := known_column(name)) and known.name == STATUS]
    status = whole(rows, columns[0]) if columns else pa.nulls(rows.num_rows, pa.string())
    if not (pa.types.is_string(status.type) or pa.types.is_large_string(status.type)):
        status = pa.nulls(rows.num_rows, pa.string())
    encoded = status.fill_null(OTHER).dictionary_encode()
    reasons = [OTHER if text in MEASURED else text for text in encoded.dictionary.to_pylist()]
    names = (*sorted(set(reasons) - {OTHER}), OTHER)
    places = np.array([names.index(reason) for reason in reasons], dtype=np.int64)
    return _Reasons(names, places[encoded.indices.to_numpy()])


def _statistics_of(values: FloatArray, variable: Variable, task: _Task) -> Fields:
    """Statistics of a column: an entry for each class, and one for all rows."""
    parts = []
    for grouping in task.groupings:
        part = _null_fields(np.isnan(values), grouping, task.reasons)
        if variable.period_deg is not None:
            part |= _direction_fields(values, grouping, variable.period_deg)
        else:
            part |= _number_fields(values, grouping, task, is_additive_=variable.is_additive)
        parts.append(part)
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}


def _null_fields(is_null: BoolArray, grouping: _Grouping, reasons: _Reasons) -> Fields:
    code, n_groups, n_reasons = grouping.code, grouping.n_groups, len(reasons.names)
    size = np.bincount(code, minlength=n_groups)
    nulls = np.bincount(code[is_null], minlength=n_groups)
    cell = code[is_null] * n_reasons + reasons.code[is_null]
    by_reason = np.bincount(cell, minlength=n_groups * n_reasons).reshape(n_groups, n_reasons)
    fields = {"rows": size, "count": size - nulls, "nulls": nulls}
    fields |= {f"nulls_{name}": by_reason[:, index] for index, name in enumerate(reasons.names)}
    return {name: np.asarray(counts, dtype=np.float64) for name, counts in fields.items()}


def _number_fields(values: FloatArray, grouping: _Grouping, task: _Task, *, is_additive_: bool) -> Fields:
    found = group_statistics(values, grouping.code, grouping.n_groups, task.shares)
    fields = {"mean": found.mean, "sd": found.sd, "cv": found.cv, "min": found.low, "max": found.high}
    fields |= {quantile_name(share): row for share, row in zip(task.shares, found.quantiles, strict=True)}
    if is_additive_:
        fields["sum"] = found.total
    if task.weights is not None:
        fields["weighted_mean"] = weighted_means(values, task.weights, grouping.code, grouping.n_groups)
    return fields


def _direction_fields(values: FloatArray, grouping: _Grouping, period_deg: float) -> Fields:
    found = mean_directions(values, grouping.code, grouping.n_groups, period_deg=period_deg)
    return dict(zip(_DIRECTION, (found.mean_deg, found.resultant_length, found.rayleigh_p), strict=True))


def _class_fields(rows: Rows, options: SummaryOptions, classes: Classes) -> dict[str, pa.Array]:
    """Values of the classes, with a null behind them for all rows together."""
    taken = {*_RESERVED, *map(quantile_name, options.quantiles)}
    fields: dict[str, pa.Array] = {}
    for index, name in enumerate(options.by):
        kind = whole(rows, name).type
        field = name
        while field in {*taken, *fields} or field.startswith("nulls_"):
            field = f"class_{field}"
        fields[field] = pa.array([*(value[index] for value in classes.values), None], kind)
    return fields


def _table(parts: Sequence[Fields], variables: Sequence[Variable], by: dict[str, pa.Array], task: _Task) -> pa.Table:
    n_entries = sum(grouping.n_groups for grouping in task.groupings)
    scope = [SCOPE_CLASS] * (n_entries - 1) + [SCOPE_ALL]
    columns: dict[str, pa.Array | pa.ChunkedArray] = {
        "column": pa.array([variable.name for variable in variables for _ in scope], pa.string()),
        "unit": pa.array([variable.unit or None for variable in variables for _ in scope], pa.string()),
        "scope": pa.array(scope * len(variables), pa.string()),
    }
    columns |= {name: pa.chunked_array([values] * len(variables)) for name, values in by.items()}
    for field in _order(parts, task):
        missing = np.full(n_entries, np.nan)
        values = np.concatenate([part.get(field, missing) for part in parts])
        kind = pa.int64() if field in _COUNTS or field.startswith("nulls_") else pa.float64()
        columns[field] = pa.array(values, pa.float64(), mask=np.isnan(values)).cast(kind)
    return pa.table(columns)


def _order(parts: Sequence[Fields], task: _Task) -> list[str]:
    """Fields in their order; a status without nulls has none."""
    by_reason = [f"nulls_{name}" for name in task.reasons.names]
    with_nulls = [field for field in by_reason if any(part[field].any() for part in parts)]
    quantiles = [quantile_name(share) for share in task.shares]
    return [*_COUNTS, *with_nulls, *_LOCATION, *quantiles, "max", *_DIRECTION]
