"""Which polygons of two surveys belong together: by a key, or by the ground they share."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import shapely
from numpy.typing import NDArray
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from geoshape.decide.tabular import Rows, require_columns, whole
from geoshape.errors import OptionError
from geoshape.rings import BoolArray, FloatArray, IntArray

ObjectArray = NDArray[np.object_]

BLOCK_PAIRS = 20_000
"""Pairs of polygons that are laid upon each other at a time, so that memory does not grow with the layers."""

LISTED = 5


class Relation(StrEnum):
    """What became of polygons from one survey to the other."""

    KEPT = "kept"
    SPLIT = "split"
    MERGED = "merged"
    REARRANGED = "rearranged"
    LOST = "lost"
    NEW = "new"
    UNPLACED = "unplaced"


@dataclass(frozen=True, eq=False)
class Members:
    """Rows of one survey, sorted by the relation that they belong to.

    Attributes
    ----------
    row : (n,) int64
        Every row of the survey once.
    start : (n_relations + 1,) int64
        Where the rows of each relation begin in ``row``; a relation may have none.
    """

    row: IntArray
    start: IntArray

    @property
    def count(self) -> IntArray:
        """(n_relations,) number of rows in each relation."""
        return np.diff(self.start)

    def first(self) -> IntArray:
        """Return the first row of each relation, (n_relations,) int64; -1 where it has none."""
        padded = np.append(self.row, -1)
        return np.where(self.count > 0, padded[self.start[:-1]], -1)

    def of(self, relation: int) -> IntArray:
        """Return the rows of one relation, in ascending order."""
        return self.row[self.start[relation] : self.start[relation + 1]]


@dataclass(frozen=True, eq=False)
class Relations:
    """How the rows of two surveys belong together; each row is in exactly one relation.

    Relations stand in the order of their first row before; those without one come last, in the order of their first
    row after.

    Attributes
    ----------
    kind : (n_relations,) object of Relation
        ``kept`` one to one, ``split`` one to several, ``merged`` several to one, ``rearranged`` several to several,
        ``lost`` none after, ``new`` none before, ``unplaced`` a row without a polygon, which cannot be paired by
        overlap.
    before, after : Members
    """

    kind: ObjectArray
    before: Members
    after: Members

    def __len__(self) -> int:
        return len(self.kind)


def pair_by_key(before: Rows, after: Rows, key: str) -> Relations:
    """Pair rows that have the same value in a key column.

    Parameters
    ----------
    before, after : pyarrow.Table or pyarrow.RecordBatch
    key : str
        Column that both have, of one kind (text, numbers, dates), each value at most once on either side.

    Returns
    -------
    Relations
        ``kept``, ``lost`` and ``new``.

    Raises
    ------
    OptionError
        The key is missing on a side, is null in a row, repeats, or holds different kinds of values.

    Examples
    --------
    >>> relations = pair_by_key(pa.table({"id": [4, 7]}), pa.table({"id": [9, 4]}), "id")
    >>> [str(kind) for kind in relations.kind]
    ['kept', 'lost', 'new']
    """
    require_columns([key], before.schema, "by (survey before)")
    require_columns([key], after.schema, "by (survey after)")
    keys = _of_one_type(whole(before, key), whole(after, key), key)
    for values, side in zip(keys, ("before", "after"), strict=True):
        _check_key(values, key, side)
    there = np.asarray(pc.fill_null(pc.index_in(keys[0], value_set=keys[1]), -1).to_numpy(zero_copy_only=False))
    found = np.flatnonzero(there >= 0)
    return _related(len(keys[0]), len(keys[1]), found, there[found].astype(np.int64))


def _of_one_type(before: pa.Array, after: pa.Array, key: str) -> tuple[pa.Array, pa.Array]:
    """Bring both keys to one type without changing what they say."""
    types = pa.types
    for same_kind, common in (
        (types.is_integer, pa.int64()),
        (lambda kind: types.is_integer(kind) or types.is_floating(kind), pa.float64()),
        (lambda kind: types.is_string(kind) or types.is_large_string(kind), pa.large_string()),
    ):
        if same_kind(before.type) and same_kind(after.type):
            return before.cast(common), after.cast(common)
    if before.type != after.type:
        raise OptionError(
            f"by: column {key!r} holds {before.type} before and {after.type} after, which are never equal; "
            "give both the same type"
        )
    return before, after


def _check_key(values: pa.Array, key: str, side: str) -> None:
    if pa.types.is_floating(values.type):
        values = pc.if_else(pc.is_nan(values), None, values)
    if values.null_count:
        rows = np.flatnonzero(values.is_null().to_numpy(zero_copy_only=False)) + 1
        raise OptionError(
            f"by: column {key!r} is empty in {len(rows)} of {len(values)} rows of the survey {side} "
            f"(row {_listed(rows.tolist())}); fill it, or pair by overlap"
        )
    counted = values.value_counts()
    repeated = counted.field("values").filter(pc.greater(counted.field("counts"), 1))
    if len(repeated):
        raise OptionError(
            f"by: {len(repeated)} values of column {key!r} repeat in the survey {side} "
            f"({_listed(repeated.to_pylist())}); take a column whose values are all different, or pair by overlap"
        )


def _listed(values: Sequence[object]) -> str:
    shown = ", ".join(str(value) for value in values[:LISTED])
    return f"{shown}, ..." if len(values) > LISTED else shown


def pair_by_overlap(before: ObjectArray, after: ObjectArray, *, min_share: float = 0.5) -> Relations:
    """Pair polygons that cover the same ground.

    Parameters
    ----------
    before, after : (n,), (m,) object of Polygon, MultiPolygon or None
        On one equal-area plane, in metres.
    min_share : float
        Two polygons belong together when they share at least this much of the smaller one's area, above 0 and at
        most 1. Lower values follow polygons that moved; too low a value ties neighbours whose common boundary was
        drawn differently.

    Returns
    -------
    Relations
        Polygons that are tied to each other, directly or through others, are one relation. Rows without a polygon
        are ``unplaced``.

    Raises
    ------
    OptionError
        ``min_share`` is out of its range.

    Examples
    --------
    >>> halves = shapely.box([0, 5], 0, [5, 10], 10)
    >>> relations = pair_by_overlap(np.array([shapely.box(0, 0, 10, 10)]), halves)
    >>> [str(kind) for kind in relations.kind], relations.after.of(0).tolist()
    (['split'], [0, 1])
    """
    if not 0.0 < min_share <= 1.0:
        raise OptionError(f"min_share = {min_share} cannot be used; give a share above 0 and at most 1")
    before, after = mended(before), mended(after)
    left, right, shared = overlaps(before, after)
    smaller = np.minimum(shapely.area(before)[left], shapely.area(after)[right])
    # Rounding must not untie what shares the least share exactly.
    tied = (shared > 0) & (shared >= min_share * smaller * (1.0 - 1e-9))
    relations = _related(len(before), len(after), left[tied], right[tied])
    return _with_unplaced(relations, _without_area(before), _without_area(after))


def overlaps(before: ObjectArray, after: ObjectArray) -> tuple[IntArray, IntArray, FloatArray]:
    """Measure what polygons of two layers share.

    Parameters
    ----------
    before, after : (n,), (m,) object of valid Polygon, MultiPolygon or None

    Returns
    -------
    before_row, after_row : (p,) int64
        Pairs that touch or overlap, sorted by the one before, then the one after.
    shared_m2 : (p,) float64
    """
    pairs = shapely.STRtree(after).query(before, predicate="intersects")
    order = np.lexsort((pairs[1], pairs[0]))
    left, right = pairs[0][order].astype(np.int64), pairs[1][order].astype(np.int64)
    return left, right, shared_area(before, after, left, right)


def shared_area(before: ObjectArray, after: ObjectArray, left: IntArray, right: IntArray) -> FloatArray:
    """Measure the ground that each pair of polygons shares, block by block; NaN where one is missing."""
    shared = np.full(len(left), np.nan)
    for begin in range(0, len(left), BLOCK_PAIRS):
        block = slice(begin, begin + BLOCK_PAIRS)
        shared[block] = shapely.area(shapely.intersection(before[left[block]], after[right[block]]))
    return shared


def mended(polygons: ObjectArray) -> ObjectArray:
    """Make polygons valid, so that they can be laid upon each other; None stands for what is missing or empty."""
    whole_ones = np.array(polygons, dtype=object)
    broken = ~shapely.is_valid(whole_ones) & ~shapely.is_missing(whole_ones)
    whole_ones[broken] = shapely.make_valid(whole_ones[broken], method="structure", keep_collapsed=False)
    whole_ones[shapely.is_empty(whole_ones)] = None
    return whole_ones


def _without_area(polygons: ObjectArray) -> BoolArray:
    return np.asarray(~(shapely.area(polygons) > 0))


def _related(n_before: int, n_after: int, left: IntArray, right: IntArray) -> Relations:
    """Make a relation of all rows that ties hold together."""
    n = n_before + n_after
    ties = coo_array((np.ones(len(left), dtype=np.int8), (left, n_before + right)), shape=(n, n))
    _, label = connected_components(ties, directed=False)
    # Number relations by their first row, those before first.
    _, first, group = np.unique(label, return_index=True, return_inverse=True)
    place = np.empty(len(first), dtype=np.int64)
    place[np.argsort(first)] = np.arange(len(first), dtype=np.int64)
    relation = place[group]
    before, after = (_members(side, len(first)) for side in (relation[:n_before], relation[n_before:]))
    return Relations(_kinds(before.count, after.count), before, after)


def _members(relation: IntArray, n_relations: int) -> Members:
    count = np.bincount(relation, minlength=n_relations)
    return Members(np.argsort(relation, kind="stable"), np.concatenate(([0], np.cumsum(count))))


def _kinds(n_before: IntArray, n_after: IntArray) -> ObjectArray:
    kind = np.full(len(n_before), Relation.REARRANGED, dtype=object)
    kind[(n_before == 1) & (n_after == 1)] = Relation.KEPT
    kind[(n_before == 1) & (n_after > 1)] = Relation.SPLIT
    kind[(n_before > 1) & (n_after == 1)] = Relation.MERGED
    kind[n_after == 0] = Relation.LOST
    kind[n_before == 0] = Relation.NEW
    return kind


def _with_unplaced(relations: Relations, before_lacks: BoolArray, after_lacks: BoolArray) -> Relations:
    """Say of single rows without a polygon that they have no place, rather than that they are lost or new."""
    kind = relations.kind.copy()
    sides: Iterable[tuple[Relation, Members, BoolArray]] = (
        (Relation.LOST, relations.before, before_lacks),
        (Relation.NEW, relations.after, after_lacks),
    )
    for single, members, lacks in sides:
        rows = np.flatnonzero(kind == single)
        kind[rows[lacks[members.first()[rows]]]] = Relation.UNPLACED
    return Relations(kind, relations.before, relations.after)
