"""Compare two surveys of the same ground."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyproj
import shapely

from geoshape.acting.laid import lay
from geoshape.acting.opened import ActOptions, Opened, Written, bounds_of, open_for, plan_for
from geoshape.acting.wanted import prefixed, whole_schema
from geoshape.columns import Column, Kind
from geoshape.decide.compare import ERROR_SUFFIX, CompareOptions, Survey, compare, unions
from geoshape.decide.pairing import Members, Relations, mended, pair_by_key, pair_by_overlap
from geoshape.decide.redraw import polygons_of
from geoshape.decide.tabular import require_columns
from geoshape.geometry import ObjectArray, read_wkb
from geoshape.ground.joint import JointPlan, on_plane, plan_joint_ground
from geoshape.ground.place import Placed, open_ground
from geoshape.layers.plan import LayerContent, OutputPlan
from geoshape.layers.write import OutputBatch
from geoshape.options import MeasureOptions, Source, Target
from geoshape.rings import FloatArray

_COMPARE = "compare"

OVERLAP = "overlap"

COMPARED_COLUMNS = ("area_m2", "perimeter_m", "perimeter_ratio", "axis_ratio")
"""What is compared where nothing else is asked for."""


def _number(name: str, short: str, unit: str, low: float | None, high: float | None, meaning: str) -> Column:
    return Column(name, short, Kind.NUMBER, unit, low, high, meaning, "", _COMPARE)


def _count(name: str, short: str, meaning: str) -> Column:
    return Column(name, short, Kind.COUNT, "1", 0.0, None, meaning, "", _COMPARE)


def _text(name: str, short: str, meaning: str) -> Column:
    return Column(name, short, Kind.TEXT, "", None, None, meaning, "", _COMPARE)


RELATION_COLUMNS = (
    _text("relation", "relation", "what became of the polygons: kept, split, merged, rearranged, lost, new, unplaced"),
    _text("before_rows", "bef_rows", "rows of the survey before, from 1"),
    _count("before_count", "bef_count", "number of rows before"),
    _text("after_rows", "aft_rows", "rows of the survey after, from 1"),
    _count("after_count", "aft_count", "number of rows after"),
    _number("area_before_m2", "area_bef", "m2", 0.0, None, "ground covered before"),
    _number("area_after_m2", "area_aft", "m2", 0.0, None, "ground covered after"),
    _number("area_shared_m2", "area_share", "m2", 0.0, None, "ground covered in both surveys"),
    _number("shared_over_union", "shared_uni", "1", 0.0, 1.0, "shared area over that of both together"),
    _number("shift_m", "shift_m", "m", 0.0, None, "how far the centroid moved"),
    _number("shift_bearing_deg", "shift_bear", "deg", 0.0, 360.0, "where to it moved, clockwise from true north"),
    _number("outline_distance", "outl_dist", "1", 0.0, None, "how unlike the outlines are at their best turn"),
)

_CHANGE_ENDINGS = (
    ("_before", "_b", "{} before"),
    ("_after", "_a", "{} after"),
    ("_difference", "_d", "{} after less before"),
    ("_ratio", "_r", "{} after over before"),
)


@dataclass(frozen=True)
class RelationCount:
    """How often a relation was found.

    Attributes
    ----------
    relation : str
    n_relations, n_before, n_after : int
        Relations of this kind, and the rows of each survey in them.
    area_before_m2, area_after_m2, area_shared_m2 : float
        Sums over them; a row without a polygon adds nothing.
    """

    relation: str
    n_relations: int
    n_before: int
    n_after: int
    area_before_m2: float
    area_after_m2: float
    area_shared_m2: float


@dataclass(frozen=True, kw_only=True)
class CompareSummary:
    """What a comparison found.

    Attributes
    ----------
    written : Written
    rows_before, rows_after : int
    paired_by : str
        Key column, or ``"overlap"``.
    plane : str
        The plane on which polygons were laid upon each other, in a line.
    relations : tuple of RelationCount
    changed : dict of str to int
        Relations whose change exceeds its error, by column; only columns with errors in both surveys.
    """

    written: Written
    rows_before: int
    rows_after: int
    paired_by: str
    plane: str
    relations: tuple[RelationCount, ...]
    changed: dict[str, int]


@dataclass(frozen=True, kw_only=True)
class CompareSources:
    """The two surveys and how their rows are paired.

    Attributes
    ----------
    before, after : Source
    by : str or None
        Key column that both have; by overlap where left out.
    min_share : float
        Least share of the smaller polygon that two must have in common to belong together, by overlap.
    """

    before: Source
    after: Source
    by: str | None = None
    min_share: float = 0.5


def compare_files(
    sources: CompareSources,
    target: str | Path | Target,
    options: CompareOptions | None = None,
    *,
    how: ActOptions | None = None,
) -> CompareSummary:
    """Compare two surveys of the same ground, and write a row for each relation between them.

    Parameters
    ----------
    sources : CompareSources
    target : str, Path or Target
        In the CRS of the survey after; geometries are those after, and those before where nothing is left.
    options : CompareOptions, optional
        Columns to compare; area, perimeter, shoreline development and elongation where left out.
    how : ActOptions, optional

    Returns
    -------
    CompareSummary

    Raises
    ------
    OptionError
        A column is not there on both sides, or the key is missing, null or repeated.
    GroundError
        A survey has no CRS, or the two cannot be brought onto one plane.
    ReadError, WriteError
        As for `measure_file`.

    Notes
    -----
    Both layers are held in memory, as any polygon may lie upon any other.
    """
    how = how or ActOptions()
    target = target if isinstance(target, Target) else Target(path=target)
    options = replace(options or CompareOptions(), key=sources.by)
    options = replace(options, columns=options.columns or COMPARED_COLUMNS)
    wanted = tuple(dict.fromkeys((*options.columns, *options.sums)))
    before, after = (_open(source, how, wanted, options, side) for source, side in _sides(sources))
    columns = _columns(before.schema, after.schema, wanted)
    key = _key_field(before, after, options.key)
    content = LayerContent(pa.schema(key), columns, after.crs_wkt, "MultiPolygon")
    plan = _planned(target, content, (before, after), how.measure.prefix)
    sides = _read(before), _read(after)
    joint = plan_joint_ground(
        (before.crs, after.crs), (bounds_of([sides[0].geometries]), bounds_of([sides[1].geometries])), how.measure
    )
    table, relations = compared(sides, joint, options, sources.min_share, how.measure)
    geometries = shown_geometries(sides, relations, (before.crs, after.crs))
    told = _lineage_options(sources, options, joint)
    written = after.write(plan, [_batch(table, geometries, plan)], _COMPARE, told, joint.warnings)
    return CompareSummary(
        written=written,
        rows_before=sides[0].table.num_rows,
        rows_after=sides[1].table.num_rows,
        paired_by=sources.by or OVERLAP,
        plane=joint.first.label,
        relations=count_relations(table),
        changed=count_changes(table, wanted),
    )


def _sides(sources: CompareSources) -> tuple[tuple[Source, str], tuple[Source, str]]:
    return (sources.before, "before"), (sources.after, "after")


def _open(source: Source, how: ActOptions, wanted: Sequence[str], options: CompareOptions, side: str) -> Opened:
    opened = open_for(source, how, wanted)
    require_columns(wanted, whole_schema(opened.info.schema, wanted), f"columns (survey {side})")
    require_columns([options.key] if options.key else [], opened.info.schema, f"by (survey {side})")
    return opened


def _columns(before: pa.Schema, after: pa.Schema, wanted: Sequence[str]) -> tuple[Column, ...]:
    columns = list(RELATION_COLUMNS)
    for name in wanted:
        columns += [
            _number(f"{name}{ending}", f"{name[:8]}{short}", "", None, None, meaning.format(name))
            for ending, short, meaning in _CHANGE_ENDINGS
        ]
        error = f"{name}{ERROR_SUFFIX}"
        if error in before.names and error in after.names:
            columns.append(
                _count(f"{name}_changed", f"{name[:8]}_c", f"1 where {name} changed by more than 2 standard errors")
            )
    return tuple(columns)


def _key_field(before: Opened, after: Opened, key: str | None) -> list[pa.Field]:
    if key is None:
        return []
    kinds = [opened.info.schema.field(key).type for opened in (before, after)]
    if kinds[0] == kinds[1]:
        return [pa.field(key, kinds[0])]
    return [
        pa.field(key, pa.string() if pa.types.is_string(kinds[0]) or pa.types.is_string(kinds[1]) else pa.float64())
    ]


def _planned(target: Target, content: LayerContent, sides: tuple[Opened, Opened], prefix: str) -> OutputPlan:
    content = replace(content, columns=prefixed(content.columns, prefix))
    return plan_for(target, content, tuple(opened.info for opened in sides))


@dataclass(frozen=True, eq=False)
class Side:
    """One survey as read.

    Attributes
    ----------
    table : pyarrow.Table
        Attributes and measured columns.
    geometries : (n,) object
        As read.
    unreadable : dict of int to str
        Rows that held something which is no geometry.
    """

    table: pa.Table
    geometries: ObjectArray
    unreadable: dict[int, str]


def _read(opened: Opened) -> Side:
    batches = list(opened.batches())
    table = pa.Table.from_batches([batch.attributes for batch in batches], opened.schema)
    geometries, unreadable = read_wkb([value for batch in batches for value in batch.geometry.to_pylist()])
    return Side(table, geometries, unreadable)


def compared(
    sides: tuple[Side, Side], joint: JointPlan, options: CompareOptions, min_share: float, measure: MeasureOptions
) -> tuple[pa.Table, Relations]:
    """Lay two surveys upon each other, pair their rows and compare them.

    Parameters
    ----------
    sides : (Side, Side)
        Before and after, with the columns that are compared.
    joint : JointPlan
    options : CompareOptions
        With its columns named; rows are paired by its key, by overlap where it has none.
    min_share : float
    measure : MeasureOptions

    Returns
    -------
    table : pyarrow.Table
        From `decide.compare.compare`, with bearings from true north.
    relations : Relations
    """
    before, after = sides
    first, polygons_before = _on_plane(before, before.geometries, joint, measure, is_second=False)
    _, polygons_after = _on_plane(after, joint.shifted(after.geometries), joint, measure, is_second=True)
    surveys = Survey(before.table, polygons_before), Survey(after.table, polygons_after)
    if options.key is None:
        relations = pair_by_overlap(polygons_before, polygons_after, min_share=min_share)
    else:
        relations = pair_by_key(before.table, after.table, options.key)
    table = compare(*surveys, relations, options)
    return _from_true_north(table, first.convergence_deg, relations.before), relations


def _on_plane(
    side: Side, geometries: ObjectArray, joint: JointPlan, measure: MeasureOptions, *, is_second: bool
) -> tuple[Placed, ObjectArray]:
    plan = joint.second if is_second else joint.first
    laid = lay(geometries, side.unreadable, open_ground(plan), measure)
    return laid.placed, polygons_of(on_plane(laid.placed, plan))


def _from_true_north(table: pa.Table, convergence_deg: FloatArray, before: Members) -> pa.Table:
    """Turn bearings on the plane into bearings from true north, where the polygon was before."""
    at = table.column_names.index("shift_bearing_deg")
    bearing = table.column(at).to_numpy()
    row = before.first()
    turn = np.where(row >= 0, np.append(convergence_deg, 0.0)[row], 0.0)
    turned = (bearing + turn) % 360.0
    return table.set_column(at, "shift_bearing_deg", pa.array(turned, pa.float64(), mask=~np.isfinite(turned)))


def shown_geometries(
    sides: tuple[Side, Side], relations: Relations, crs: tuple[pyproj.CRS | None, pyproj.CRS | None]
) -> ObjectArray:
    """Give each relation its geometry after, or the one before where nothing is left, in the CRS after.

    Returns
    -------
    (n_relations,) object of MultiPolygon or None
    """
    old, new = (_polygons_only(side.geometries) for side in sides)
    if crs[0] is not None and crs[1] is not None and not crs[0].equals(crs[1], ignore_axis_order=True):
        to_after = pyproj.Transformer.from_crs(crs[0], crs[1], always_xy=True)
        old = shapely.transform(old, lambda points: np.column_stack(to_after.transform(*points.T)))
    shown = unions(mended(new), relations.after)
    gone = np.flatnonzero(shapely.is_missing(shown))
    shown[gone] = unions(mended(old), relations.before)[gone]
    parts, owner = shapely.get_parts(shown, return_index=True)
    polygonal = shapely.get_type_id(parts) == shapely.GeometryType.POLYGON
    whole = np.full(len(shown), None, dtype=object)
    has_parts = np.unique(owner[polygonal])
    shapely.multipolygons(parts[polygonal], indices=owner[polygonal], out=whole)
    whole[~np.isin(np.arange(len(whole)), has_parts)] = None
    return whole


def _polygons_only(geometries: ObjectArray) -> ObjectArray:
    flat = np.asarray(shapely.force_2d(geometries), dtype=object)
    is_areal = np.isin(shapely.get_type_id(flat), (shapely.GeometryType.POLYGON, shapely.GeometryType.MULTIPOLYGON))
    is_finite = np.isfinite(shapely.bounds(flat)).all(axis=1)
    flat[~(is_areal & is_finite)] = None
    return flat


def _batch(table: pa.Table, geometries: ObjectArray, plan: OutputPlan) -> OutputBatch:
    n_keys = len(plan.schema) - len(plan.columns)
    names = [name for name in table.column_names if name != table.column_names[0]]
    ordered = [*names[:n_keys], table.column_names[0], *names[n_keys:]]
    arrays = [
        table.column(name).combine_chunks().cast(field.type) for name, field in zip(ordered, plan.schema, strict=True)
    ]
    return OutputBatch(
        pa.RecordBatch.from_arrays(arrays, schema=plan.schema), pa.array(shapely.to_wkb(geometries), pa.binary())
    )


def _lineage_options(sources: CompareSources, options: CompareOptions, joint: JointPlan) -> dict[str, Any]:
    return {
        **asdict(options),
        "before": Path(str(sources.before.path)).name,
        "before_layer": sources.before.layer,
        "paired_by": sources.by or OVERLAP,
        "min_share": sources.min_share,
        "plane": joint.first.label,
    }


def count_relations(table: pa.Table) -> tuple[RelationCount, ...]:
    """Count relations by kind, in the order of how often they were found."""
    kind = np.array(table.column("relation").to_pylist(), dtype=object)
    numbers = {
        name: np.nan_to_num(table.column(name).cast(pa.float64()).to_numpy())
        for name in ("before_count", "after_count", "area_before_m2", "area_after_m2", "area_shared_m2")
    }
    counts = []
    for name, n in Counter(kind.tolist()).most_common():
        sums = [values[kind == name].sum() for values in numbers.values()]
        counts.append(RelationCount(name, n, int(sums[0]), int(sums[1]), *(float(value) for value in sums[2:])))
    return tuple(counts)


def count_changes(table: pa.Table, wanted: Sequence[str]) -> dict[str, int]:
    """Count the relations whose change exceeds its error, by column."""
    changed = {name: f"{name}_changed" for name in wanted if f"{name}_changed" in table.column_names}
    return {name: table.column(column).to_pylist().count(True) for name, column in changed.items()}
