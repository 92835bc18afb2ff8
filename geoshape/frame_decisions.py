"""Decisions on a GeoDataFrame: the twins of the file routes, with the same columns."""

from __future__ import annotations

import warnings
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pyarrow as pa

from geoshape.acting.comparing import COMPARED_COLUMNS, Side, compared, shown_geometries
from geoshape.acting.flagging import columns_to_flag_by
from geoshape.acting.grouping import GROUP_COLUMNS, group_values, matrix
from geoshape.acting.laid import Laid, lay
from geoshape.acting.matching import MATCH_COLUMNS, match_values, template_names
from geoshape.acting.opened import bounds_of
from geoshape.acting.redrawing import REDRAW_COLUMNS, redraw_laid
from geoshape.acting.summarising import settled
from geoshape.acting.wanted import highest_harmonic, missing_columns, whole_schema
from geoshape.columns import Column, Kind
from geoshape.decide import compare as comparing
from geoshape.decide import flag as flagging
from geoshape.decide import group as grouping
from geoshape.decide import summarise as summarising
from geoshape.decide.known import STATUS
from geoshape.decide.match import Likeness, MatchOptions, make_templates, rank
from geoshape.decide.outliers import UnusualOptions, fit_unusual
from geoshape.decide.redraw import RedrawOptions
from geoshape.decide.rules import Rule, parse_rule
from geoshape.decide.tabular import require_columns
from geoshape.errors import ColumnNameError, GroundWarning
from geoshape.frames import measure
from geoshape.geometry import ObjectArray
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.inverse import WayBack
from geoshape.ground.joint import plan_joint_ground
from geoshape.ground.layer_crs import resolve_crs
from geoshape.ground.place import Ground, open_ground
from geoshape.options import GROUND_PLANE, Family, MeasureOptions


def flag(
    layer: gpd.GeoDataFrame,
    rules: Sequence[Rule | str] = (),
    *,
    unusual: UnusualOptions | None = None,
    measuring: MeasureOptions | None = None,
) -> gpd.GeoDataFrame:
    """Flag features by rules, by an unusual score, or by both.

    Parameters
    ----------
    layer : GeoDataFrame
    rules : sequence of Rule or str
        Text is ``name: condition``, the condition in CQL2 text.
    unusual : UnusualOptions, optional
        No score where left out.
    measuring : MeasureOptions, optional
        How columns are measured that the layer does not have; ``prefix`` goes before every new column.

    Returns
    -------
    GeoDataFrame
        The layer with the columns measured on the way, ``flag`` (1 or 0), ``flag_reasons`` and, with a score,
        ``flag_score`` and ``flag_note``.

    Raises
    ------
    OptionError
        There is neither rule nor score, or the columns cannot answer them.
    ColumnNameError
        The layer already has a column of a new column's name.

    Examples
    --------
    >>> import shapely
    >>> boxes = shapely.box([0, 100], 0, [60, 120], [4, 20])
    >>> lots = gpd.GeoDataFrame({"zone": ["R1", "R2"]}, geometry=boxes, crs="EPSG:3035")
    >>> flag(lots, ["narrow: axis_ratio < 0.2 AND zone = 'R1'"]).flag_reasons.tolist()
    ['narrow', <NA>]
    """
    read = tuple(parse_rule(rule) if isinstance(rule, str) else rule for rule in rules)
    unusual, wanted = columns_to_flag_by(read, unusual)
    measuring = measuring or MeasureOptions()
    whole, missing = _with_missing(layer, wanted, measuring)
    within = (unusual.within,) if unusual is not None and unusual.within else ()
    table = _table(whole, [name for name in (*wanted, *within) if name in whole.columns])
    flagging.check_rules(read, _known(whole, table, wanted), has_score=unusual is not None)
    fit = None if unusual is None else fit_unusual(table, unusual)
    found = flagging.flag_batch(table, read, fit)
    values = {name: found.columns.column(name).to_numpy() for name in found.columns.column_names}
    decided = flagging.FLAG_COLUMNS[: len(values)]
    return _added(layer, whole, missing, decided, values, measuring)


def match(
    layer: gpd.GeoDataFrame,
    templates: gpd.GeoDataFrame,
    *,
    names: str | None = None,
    options: MatchOptions | None = None,
    measuring: MeasureOptions | None = None,
) -> gpd.GeoDataFrame:
    """Find for each outline the template that it is most like.

    Parameters
    ----------
    layer, templates : GeoDataFrame
    names : str, optional
        Column of `templates` with their names; row numbers, from 1, where left out.
    options : MatchOptions, optional
        What counts as alike.
    measuring : MeasureOptions, optional
        Ground, repair and prefix.

    Returns
    -------
    GeoDataFrame
        The layer with ``match_template``, ``match_distance``, ``match_turn_deg``, ``match_scale``,
        ``match_mirrored`` and ``match_rank``.

    Raises
    ------
    OptionError, GeometryError
        A template cannot be used.

    Examples
    --------
    >>> import shapely
    >>> shapes = gpd.GeoDataFrame(geometry=shapely.box([0, 9], 0, [2, 14], [2, 1]), crs="EPSG:3035")
    >>> kinds = gpd.GeoDataFrame({"kind": ["square", "strip"]}, geometry=shapes.geometry, crs="EPSG:3035")
    >>> match(shapes, kinds, names="kind").match_template.tolist()
    ['square', 'strip']
    """
    options, measuring = options or MatchOptions(), measuring or MeasureOptions()
    own = MeasureOptions() if templates.crs is not None else MeasureOptions(ground=GROUND_PLANE)
    named = template_names(
        _table(templates, [names] if names is not None and names in templates.columns else []), names, len(templates)
    )
    models = make_templates(named, _laid(templates, own)[0].outlines())
    laid, _ = _laid(layer, measuring)
    values = {**laid.record(), **match_values(laid.outlines(), models, options)}
    values["match_rank"] = rank(values["match_distance"])
    bare = options.by is Likeness.SPECTRUM
    decided = [c for c in MATCH_COLUMNS if not (bare and c.name in {"match_turn_deg", "match_mirrored"})]
    missing = missing_columns((), list(map(str, layer.columns)), with_record=True)
    return _added(layer, layer, (), (*missing, *decided), values, measuring)


def group(
    layer: gpd.GeoDataFrame, options: grouping.GroupOptions, *, measuring: MeasureOptions | None = None
) -> gpd.GeoDataFrame:
    """Group features of alike shape.

    Parameters
    ----------
    layer : GeoDataFrame
    options : GroupOptions
        Columns to go by, number of groups, seed.
    measuring : MeasureOptions, optional
        How columns are measured that the layer does not have.

    Returns
    -------
    GeoDataFrame
        The layer with the columns measured on the way, ``group`` (from 1, the largest), ``group_distance``,
        ``is_prototype`` (1 or 0) and ``group_note``.

    Raises
    ------
    OptionError
        A column is not there or holds no numbers; too few rows have values, or nothing sets them apart.

    Examples
    --------
    >>> import shapely
    >>> shapes = shapely.box(0, 0, [1, 1.1, 9, 9.1, 9.2], 1)
    >>> layer = gpd.GeoDataFrame(geometry=shapes, crs="EPSG:3035")
    >>> group(layer, grouping.GroupOptions(columns=("axis_ratio",), count=2)).group.tolist()
    [2, 2, 1, 1, 1]
    """
    measuring = measuring or MeasureOptions()
    whole, missing = _with_missing(layer, options.columns, measuring)
    table = _table(whole, [name for name in options.columns if name in whole.columns])
    require_columns(options.columns, _known(whole, table, options.columns), "columns")
    values = matrix(table, options.columns)
    result = group_values(grouping.group(values, options), values, options.columns)
    return _added(layer, whole, missing, GROUP_COLUMNS, result, measuring)


def compare(
    before: gpd.GeoDataFrame,
    after: gpd.GeoDataFrame,
    *,
    options: comparing.CompareOptions | None = None,
    min_share: float = 0.5,
    measuring: MeasureOptions | None = None,
) -> gpd.GeoDataFrame:
    """Compare two surveys of the same ground.

    Parameters
    ----------
    before, after : GeoDataFrame
    options : CompareOptions, optional
        Columns to compare; rows are paired by its ``key``, by overlap where it has none.
    min_share : float
        Least share of the smaller polygon that two must have in common to belong together, by overlap.
    measuring : MeasureOptions, optional

    Returns
    -------
    GeoDataFrame
        A row a relation, in the CRS after: see `decide.compare.compare`.

    Raises
    ------
    OptionError
        A column is not there on both sides, or the key is missing, null or repeated.
    GroundError
        A survey has no CRS, or the two cannot be brought onto one plane.

    Examples
    --------
    >>> import shapely
    >>> old = gpd.GeoDataFrame(geometry=[shapely.box(0, 0, 10, 10)], crs="EPSG:3035")
    >>> new = gpd.GeoDataFrame(geometry=shapely.box([0, 5], 0, [5, 10], 10), crs="EPSG:3035")
    >>> compare(old, new).relation.tolist()
    ['split']
    """
    measuring = measuring or MeasureOptions()
    options = options or comparing.CompareOptions()
    options = replace(options, columns=options.columns or COMPARED_COLUMNS)
    crs = (resolve_crs(before.crs, measuring), resolve_crs(after.crs, measuring))
    sides = _side(before, options, measuring, "before"), _side(after, options, measuring, "after")
    bounds = bounds_of([sides[0].geometries]), bounds_of([sides[1].geometries])
    joint = plan_joint_ground(crs, bounds, measuring)
    _warn(joint.warnings)
    table, relations = compared(sides, joint, options, min_share, measuring)
    frame = table.to_pandas()
    return gpd.GeoDataFrame(frame, geometry=list(shown_geometries(sides, relations, crs)), crs=crs[1])


def _side(layer: gpd.GeoDataFrame, options: comparing.CompareOptions, measuring: MeasureOptions, side: str) -> Side:
    wanted = tuple(dict.fromkeys((*options.columns, *options.sums)))
    whole, _ = _with_missing(layer, wanted, measuring)
    errors = [f"{name}{comparing.ERROR_SUFFIX}" for name in wanted]
    used = [name for name in (*wanted, *errors, options.key) if name is not None and name in whole.columns]
    table = _table(whole, list(dict.fromkeys(used)))
    require_columns(wanted, _known(whole, table, wanted), f"columns (survey {side})")
    return Side(table, _geometries(layer), {})


def summarise(
    layer: gpd.GeoDataFrame,
    options: summarising.SummaryOptions | None = None,
    *,
    measuring: MeasureOptions | None = None,
) -> pd.DataFrame:
    """Summarise columns of a layer by class.

    Parameters
    ----------
    layer : GeoDataFrame
    options : SummaryOptions, optional
        Columns, classes, weights and quantiles; size, compactness, elongation and direction where left out.
    measuring : MeasureOptions, optional
        How columns are measured that the layer does not have.

    Returns
    -------
    DataFrame
        A row for each column and class, and one for each column over all rows: see `decide.summarise.Summary`.

    Raises
    ------
    OptionError
        A column is not there (the nearest name is suggested) or holds no numbers, or a weight is negative.

    Examples
    --------
    >>> import shapely
    >>> layer = gpd.GeoDataFrame({"kind": ["a", "a", "b"]}, geometry=shapely.box(0, 0, [1, 2, 3], 1), crs="EPSG:3035")
    >>> found = summarise(layer, summarising.SummaryOptions(by=("kind",), columns=("area_m2",)))
    >>> found[["scope", "count", "sum"]].round(3).values.tolist()
    [['class', 2, 3.0], ['class', 1, 3.0], ['all', 3, 6.0]]
    """
    options, wanted = settled(options)
    whole, _ = _with_missing(layer, wanted, measuring or MeasureOptions())
    used = [name for name in (*options.by, *wanted, STATUS) if name in whole.columns]
    table = _table(whole, list(dict.fromkeys(used)))
    for names, option in ((options.by, "by"), (options.columns, "columns")):
        require_columns(names, _known(whole, table, names), option)
    statistics: pd.DataFrame = summarising.summarise(table, options).statistics.to_pandas()
    return statistics


def redraw(
    layer: gpd.GeoDataFrame, *, options: RedrawOptions | None = None, measuring: MeasureOptions | None = None
) -> gpd.GeoDataFrame:
    """Redraw outlines from their first harmonics, in the layer's CRS.

    Parameters
    ----------
    layer : GeoDataFrame
    options : RedrawOptions, optional
    measuring : MeasureOptions, optional
        Ground, repair and prefix.

    Returns
    -------
    GeoDataFrame
        The layer with redrawn outlines, None for a row that cannot be measured, and ``redraw_area_m2``,
        ``redraw_area_error`` and ``redraw_note``.

    Examples
    --------
    >>> import shapely
    >>> layer = gpd.GeoDataFrame(geometry=[shapely.box(0, 0, 2, 2)], crs="EPSG:3035")
    >>> redraw(layer, options=RedrawOptions(harmonics=1)).redraw_area_error.round(3).tolist()
    [0.03]
    """
    measuring = measuring or MeasureOptions()
    laid, ground = _laid(layer, measuring)
    columns, geometries = redraw_laid(laid, WayBack(ground.plan), options or RedrawOptions())
    missing = missing_columns((), list(map(str, layer.columns)), with_record=True)
    values = {**laid.record(), **columns}
    result = _added(layer, layer, (), (*missing, *REDRAW_COLUMNS), values, measuring)
    result[layer.geometry.name] = gpd.GeoSeries(list(geometries), index=result.index, crs=layer.crs)
    return result


def _with_missing(
    layer: gpd.GeoDataFrame, wanted: Sequence[str], options: MeasureOptions
) -> tuple[gpd.GeoDataFrame, tuple[Column, ...]]:
    """Measure the wanted columns that the layer does not have, and put them behind its own, without prefix."""
    missing = missing_columns(wanted, list(map(str, layer.columns)))
    if not missing:
        return layer, ()
    families = tuple(Family(name) for name in dict.fromkeys(c.family for c in missing) if name in set(Family))
    plain = replace(
        options,
        prefix="",
        families=families or (Family.AXES,),
        harmonics=highest_harmonic((c.name for c in missing), options.harmonics),
        log_moments=any(c.name.endswith("_log") for c in missing),
    )
    measured = measure(gpd.GeoDataFrame(geometry=layer.geometry), options=plain)
    columns = measured[[column.name for column in missing]].set_axis(layer.index)
    return gpd.GeoDataFrame(pd.concat([layer, columns], axis=1), geometry=layer.geometry.name, crs=layer.crs), missing


def _added(
    layer: gpd.GeoDataFrame,
    whole: gpd.GeoDataFrame,
    missing: Sequence[Column],
    decided: Sequence[Column],
    values: Mapping[str, Any],
    options: MeasureOptions,
) -> gpd.GeoDataFrame:
    """Give the layer with the columns measured on the way and those decided, under their prefix."""
    columns = {options.prefix + column.name: whole[column.name] for column in missing}
    columns |= {options.prefix + c.name: pd.Series(_typed(c, values[c.name]), index=layer.index) for c in decided}
    taken = {str(name).casefold() for name in layer.columns}
    clashes = [name for name in columns if name.casefold() in taken]
    if clashes:
        raise ColumnNameError(
            f"the layer already has {', '.join(clashes)}; choose a prefix, such as MeasureOptions(prefix='m_')"
        )
    frame = pd.concat([layer, pd.DataFrame(columns, index=layer.index)], axis=1)
    return gpd.GeoDataFrame(frame, geometry=layer.geometry.name, crs=layer.crs)


def _typed(column: Column, values: Any) -> Any:
    match column.kind:
        case Kind.COUNT:
            return pd.array(np.asarray(values, dtype=np.float64), dtype="Int64")
        case Kind.TEXT:
            return pd.array(np.asarray(values, dtype=object), dtype="string")
        case _:
            return np.asarray(values, dtype=np.float64)


def _table(layer: gpd.GeoDataFrame, names: Sequence[str]) -> pa.Table:
    return pa.Table.from_pandas(pd.DataFrame(layer)[list(names)], preserve_index=False)


def _known(whole: gpd.GeoDataFrame, table: pa.Table, wanted: Sequence[str]) -> pa.Schema:
    """Describe the columns that may be asked for: those taken, all others of the layer, and what could be measured."""
    others = [
        name for name in map(str, whole.columns) if name not in table.column_names and name != whole.geometry.name
    ]
    return whole_schema(pa.schema([*table.schema, *(pa.field(name, pa.null()) for name in others)]), wanted)


def _geometries(layer: gpd.GeoDataFrame) -> ObjectArray:
    return np.asarray(layer.geometry.values, dtype=object)


def _laid(layer: gpd.GeoDataFrame, options: MeasureOptions) -> tuple[Laid, Ground]:
    geometries = _geometries(layer)
    plan = plan_ground(resolve_crs(layer.crs, options), bounds_of([geometries]), options)
    _warn(plan.warnings)
    ground = open_ground(plan)
    return lay(geometries, {}, ground, options), ground


def _warn(texts: Sequence[str]) -> None:
    for text in texts:
        warnings.warn(text, GroundWarning, stacklevel=3)
