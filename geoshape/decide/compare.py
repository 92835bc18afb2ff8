"""Compare two surveys of the same ground: what became of each polygon, and whether its numbers changed."""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
import pyarrow as pa
import shapely
from numpy.typing import NDArray

from geoshape.decide.match import MatchOptions, fit_pairs
from geoshape.decide.outlines import prepare_rings
from geoshape.decide.pairing import Members, Relations, mended, shared_area
from geoshape.decide.tabular import is_numeric, numbers, require_columns, whole
from geoshape.errors import OptionError
from geoshape.geometry import ring_batch
from geoshape.rings import BoolArray, FloatArray, IntArray

ObjectArray = NDArray[np.object_]

CHANGE_STANDARD_ERRORS = 2.0
"""A number has changed when its difference exceeds this many standard errors of the difference."""

ERROR_SUFFIX = "_se"
AXIAL_SUFFIX = "_azimuth_deg"
"""Columns of directions without a sense: 179 and 1 degree are 2 degrees apart."""

SUM_SUFFIXES = ("_m2", "_count")
"""Columns that add up when polygons are taken together."""

NO_SHIFT_M = 1e-6
"""A centroid that moved by less has no bearing."""

BLOCK_OUTLINES = 2_000

GROUND_COLUMNS = (
    "relation",
    "before_rows",
    "before_count",
    "after_rows",
    "after_count",
    "area_before_m2",
    "area_after_m2",
    "area_shared_m2",
    "shared_over_union",
    "shift_m",
    "shift_bearing_deg",
    "outline_distance",
)
"""Columns of every comparison; those of the compared numbers follow."""


@dataclass(frozen=True, kw_only=True)
class CompareOptions:
    """What is compared.

    Attributes
    ----------
    columns : tuple of str
        Columns of numbers that both surveys have. Empty for all of them, standard errors and the key left out.
    sums : tuple of str
        Columns, besides areas (``_m2``) and counts (``_count``), that add up when polygons are taken together, such
        as inhabitants.
    key : str or None
        Column that rows were paired by; it is put into the result.
    outline : MatchOptions
        How the distance of outlines is taken.

    Raises
    ------
    OptionError
        Mirror images are asked for: a survey does not mirror the ground.
    """

    columns: tuple[str, ...] = ()
    sums: tuple[str, ...] = ()
    key: str | None = None
    outline: MatchOptions = field(default_factory=MatchOptions)

    def __post_init__(self) -> None:
        if self.outline.mirror != "no":
            raise OptionError(
                f"mirror = {str(self.outline.mirror)!r} cannot be used between surveys, which show the same ground; "
                "use mirror = 'no'"
            )


@dataclass(frozen=True, eq=False)
class Survey:
    """One of two surveys.

    Attributes
    ----------
    table : pyarrow.Table
        Attributes and measured columns, a row a polygon.
    polygons : (n_rows,) object of Polygon, MultiPolygon or None
        On an equal-area plane that both surveys share, in metres, y to grid north.
    """

    table: pa.Table
    polygons: ObjectArray


def compare(before: Survey, after: Survey, relations: Relations, options: CompareOptions) -> pa.Table:
    """Compare two surveys relation by relation.

    Parameters
    ----------
    before, after : Survey
    relations : Relations
        From `pair_by_key` or `pair_by_overlap`.
    options : CompareOptions

    Returns
    -------
    pyarrow.Table
        A row a relation:

        - ``relation`` (text), the key where there is one, ``before_rows`` and ``after_rows`` (row numbers from 1, as
          text, null for none), ``before_count`` and ``after_count``;
        - ``area_before_m2`` and ``area_after_m2``, the ground covered together, 0 where a side has no rows;
          ``area_shared_m2`` and ``shared_over_union`` (0 ... 1);
        - ``shift_m`` and ``shift_bearing_deg``, how far and where to the centroid moved, clockwise from grid north;
        - ``outline_distance``, how unlike the outlines of the two sides are (see `Fits`): of the largest part, of
          several polygons taken as one;
        - for each column ``_before``, ``_after``, ``_difference`` (after less before), ``_ratio`` (after over before)
          and, where both surveys have its standard error in ``<column>_se``, ``_changed``: whether the difference
          exceeds 2 standard errors, sqrt(se_before^2 + se_after^2) each.

        Areas and counts of several polygons are added up, with independent errors; a shape number of several polygons
        is null, as they have no shape in common. The difference of azimuths is the smaller angle, in (-90, 90]; they
        have no ratio. A number that a side does not have is null.

    Raises
    ------
    OptionError
        A column is not there on both sides, or holds no numbers; or the key has the name of a column of the result.

    Examples
    --------
    >>> from geoshape.decide.pairing import pair_by_key
    >>> old = Survey(pa.table({"id": [1], "area_m2": [4.0]}), shapely.box([0], 0, 2, 2))
    >>> new = Survey(pa.table({"id": [1], "area_m2": [6.0]}), shapely.box([0], 0, 3, 2))
    >>> table = compare(old, new, pair_by_key(old.table, new.table, "id"), CompareOptions(columns=("area_m2",)))
    >>> table["area_m2_ratio"].to_pylist(), table["shift_m"].to_pylist(), table["shift_bearing_deg"].to_pylist()
    ([1.5], [0.5], [90.0])
    """
    columns = _chosen(before.table, after.table, options)
    result = {"relation": pa.array([str(kind) for kind in relations.kind], pa.string())}
    if options.key is not None:
        if options.key in GROUND_COLUMNS:
            raise OptionError(f"the key {options.key!r} has the name of a column of the result; rename it")
        result[options.key] = _keys(before.table, after.table, relations, options.key)
    for name, members in (("before", relations.before), ("after", relations.after)):
        result[f"{name}_rows"] = pa.array(_row_lists(members), pa.string())
        result[f"{name}_count"] = pa.array(members.count, pa.int64())
    for name, values in _ground(before, after, relations, options.outline).items():
        result[name] = _nullable(values)
    for column in columns:
        result |= _column(before.table, after.table, relations, column, options)
    return pa.table(result)


def _chosen(before: pa.Table, after: pa.Table, options: CompareOptions) -> tuple[str, ...]:
    for table, side in ((before, "before"), (after, "after")):
        require_columns(options.columns, table.schema, f"columns (survey {side})")
        require_columns(options.sums, table.schema, f"sums (survey {side})")
    if options.columns:
        return tuple(dict.fromkeys((*options.columns, *options.sums)))
    return tuple(name for name in before.column_names if _is_compared(before, after, name, options.key))


def _is_compared(before: pa.Table, after: pa.Table, name: str, key: str | None) -> bool:
    if name == key or name.endswith(ERROR_SUFFIX):
        return False
    tables = (before, after)
    if any(len(table.schema.get_all_field_indices(name)) != 1 for table in tables):
        return False
    return all(
        is_numeric(table.schema.field(name).type) and not pa.types.is_boolean(table.schema.field(name).type)
        for table in tables
    )


def _keys(before: pa.Table, after: pa.Table, relations: Relations, key: str) -> pa.Array:
    """Take the key of each relation's first row, from the survey that has one."""
    old, new = whole(before, key), whole(after, key)
    if old.type != new.type:
        common = pa.float64() if is_numeric(old.type) else pa.large_string()
        old, new = old.cast(common), new.cast(common)
    first = relations.before.first()
    row = np.where(first >= 0, first, len(old) + relations.after.first())
    return pa.concat_arrays([old, new]).take(pa.array(row))


def _row_lists(members: Members) -> list[str | None]:
    rows = (members.row + 1).tolist()
    return [", ".join(map(str, rows[begin:end])) or None for begin, end in pairwise(members.start.tolist())]


def unions(polygons: ObjectArray, members: Members) -> ObjectArray:
    """Take the polygons of each relation together.

    Parameters
    ----------
    polygons : (n,) object of Polygon, MultiPolygon or None
    members : Members

    Returns
    -------
    (n_relations,) object
        A single polygon as it is; None where a relation has no row, or none with a polygon.
    """
    count = members.count
    together = np.full(len(count), None, dtype=object)
    single = np.flatnonzero(count == 1)
    together[single] = polygons[members.row[members.start[single]]]
    for relation in np.flatnonzero(count > 1).tolist():
        united = shapely.union_all(polygons[members.of(relation)])
        together[relation] = None if united.is_empty else united
    return together


def _ground(before: Survey, after: Survey, relations: Relations, outline: MatchOptions) -> dict[str, FloatArray]:
    old = unions(mended(before.polygons), relations.before)
    new = unions(mended(after.polygons), relations.after)
    area_old = np.where(relations.before.count == 0, 0.0, shapely.area(old))
    area_new = np.where(relations.after.count == 0, 0.0, shapely.area(new))
    every = np.arange(len(relations))
    # What only one survey has shares nothing; where a polygon is missing, nobody knows.
    one_sided = (area_old == 0) | (area_new == 0)
    shared = np.where(one_sided, 0.0, shared_area(old, new, every, every))
    shared[np.isnan(area_old) | np.isnan(area_new)] = np.nan
    united = area_old + area_new - shared
    over_union = np.divide(shared, united, out=np.full(len(relations), np.nan), where=united > 0)
    shift_m, bearing = _shift(old, new)
    return {
        "area_before_m2": area_old,
        "area_after_m2": area_new,
        "area_shared_m2": shared,
        "shared_over_union": np.minimum(over_union, 1.0),
        "shift_m": shift_m,
        "shift_bearing_deg": bearing,
        "outline_distance": _outline_distance(old, new, outline),
    }


def _shift(old: ObjectArray, new: ObjectArray) -> tuple[FloatArray, FloatArray]:
    start, end = shapely.centroid(old), shapely.centroid(new)
    dx, dy = shapely.get_x(end) - shapely.get_x(start), shapely.get_y(end) - shapely.get_y(start)
    shift = np.hypot(dx, dy)
    bearing = np.degrees(np.arctan2(dx, dy)) % 360.0
    return shift, np.where(shift > NO_SHIFT_M, bearing, np.nan)


def _outline_distance(old: ObjectArray, new: ObjectArray, options: MatchOptions) -> FloatArray:
    distance = np.full(len(old), np.nan)
    both = np.flatnonzero(~shapely.is_missing(old) & ~shapely.is_missing(new))
    for begin in range(0, len(both), BLOCK_OUTLINES):
        rows = both[begin : begin + BLOCK_OUTLINES]
        # The survey before is the model: where size is kept, distances are in units of its size.
        fits = fit_pairs(prepare_rings(ring_batch(new[rows])), prepare_rings(ring_batch(old[rows])), options)
        distance[rows] = fits.distance
    return distance


def _column(
    before: pa.Table, after: pa.Table, relations: Relations, column: str, options: CompareOptions
) -> dict[str, pa.Array]:
    adds_up = column in options.sums or column.endswith(SUM_SUFFIXES)
    old = _by_relation(numbers(before, column), relations.before, adds_up=adds_up)
    new = _by_relation(numbers(after, column), relations.after, adds_up=adds_up)
    difference = new - old
    if column.endswith(AXIAL_SUFFIX):
        difference = 90.0 - (90.0 - difference) % 180.0
        ratio = np.full_like(old, np.nan)
    else:
        ratio = np.divide(new, old, out=np.full_like(old, np.nan), where=old != 0)
    result = {
        f"{column}_before": _nullable(old),
        f"{column}_after": _nullable(new),
        f"{column}_difference": _nullable(difference),
        f"{column}_ratio": _nullable(ratio),
    }
    error = column + ERROR_SUFFIX
    if error in before.column_names and error in after.column_names:
        variance = sum(
            _by_relation(numbers(table, error) ** 2, members, adds_up=adds_up)
            for table, members in ((before, relations.before), (after, relations.after))
        )
        result[f"{column}_changed"] = _changed(difference, np.sqrt(variance))
    return result


def _changed(difference: FloatArray, standard_error: FloatArray) -> pa.Array:
    unknown: BoolArray = np.asarray(np.isnan(difference) | np.isnan(standard_error))
    with np.errstate(invalid="ignore"):
        changed = np.abs(difference) > CHANGE_STANDARD_ERRORS * standard_error
    return pa.array(changed, pa.bool_(), mask=unknown)


def _by_relation(values: FloatArray, members: Members, *, adds_up: bool) -> FloatArray:
    """Give each relation the value of its row, or the sum of its rows; NaN for what has none, or has no sum."""
    count = members.count
    relation: IntArray = np.repeat(np.arange(len(count)), count)
    total = np.bincount(relation, weights=values[members.row], minlength=len(count))
    known = (count > 0) if adds_up else (count == 1)
    return np.where(known, total, np.nan)


def _nullable(values: FloatArray) -> pa.Array:
    return pa.array(values, pa.float64(), mask=~np.isfinite(values))
