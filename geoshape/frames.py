"""Measure a GeoDataFrame: the twin of the file route, with the same columns."""

from __future__ import annotations

import warnings

import geopandas as gpd
import numpy as np
import pandas as pd
import shapely

from geoshape.columns import Column, Kind, columns_for
from geoshape.errors import ColumnNameError, GroundWarning
from geoshape.geometry import ObjectArray
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.layer_crs import resolve_crs
from geoshape.ground.place import Ground, open_ground
from geoshape.measuring import ColumnValues, Measured, measure_geometries
from geoshape.options import MeasureOptions

MAX_BATCH_VERTICES = 150_000


def measure(layer: gpd.GeoDataFrame, *, options: MeasureOptions | None = None) -> gpd.GeoDataFrame:
    """Measure every polygon of a layer.

    Parameters
    ----------
    layer : GeoDataFrame
        Polygons in any CRS; missing, empty and invalid geometries get nulls or repairs and a status.
    options : MeasureOptions, optional
        Ground, families and the rest; the defaults where left out.

    Returns
    -------
    GeoDataFrame
        The layer's rows in their order, its columns, and those that ``columns_for(options)`` lists. Null is NaN for
        numbers, and ``<NA>`` for counts and text. With ``parts="split"`` a row for each part, under the index of
        its feature.

    Raises
    ------
    GroundError
        The layer has no CRS, or the ground named is not equal-area.
    ColumnNameError
        The layer already has a column of a new column's name, whatever its case.
    GeometryError
        A geometry is invalid and the options say to stop there.

    Warns
    -----
    GroundWarning
        Numbers are computed, but the ground bends or scales them.

    Examples
    --------
    >>> import shapely
    >>> square = gpd.GeoDataFrame(geometry=[shapely.box(500000, 5000000, 500010, 5000010)], crs="EPSG:32632")
    >>> measure(square, options=MeasureOptions(families=("compactness",))).polsby_popper.round(4).item()
    0.7854
    """
    options = options or MeasureOptions()
    columns = columns_for(options)
    _refuse_clashes(layer, columns)
    geometries = np.asarray(layer.geometry.values, dtype=object)
    crs = resolve_crs(layer.crs, options)
    plan = plan_ground(crs, _bounds(geometries), options)
    for text in plan.warnings:
        warnings.warn(text, GroundWarning, stacklevel=2)
    ground = open_ground(plan)
    pieces = [
        (start, measure_geometries(geometries[start:stop], ground, options, first_row=start))
        for start, stop in _batches(geometries)
    ]
    return _joined(layer, columns, pieces, ground, options)


def _joined(
    layer: gpd.GeoDataFrame,
    columns: tuple[Column, ...],
    pieces: list[tuple[int, Measured]],
    ground: Ground,
    options: MeasureOptions,
) -> gpd.GeoDataFrame:
    if not pieces:
        pieces = [(0, measure_geometries(np.zeros(0, dtype=object), ground, options))]
    rows = np.concatenate([start + piece.row for start, piece in pieces])
    result = layer.iloc[rows].copy()
    if pieces[0][1].geometry is not None:
        result[layer.geometry.name] = gpd.GeoSeries(
            np.concatenate([piece.geometry for _, piece in pieces]), index=result.index, crs=layer.crs
        )
    values = {column.name: _series(column, [piece.values for _, piece in pieces]) for column in columns}
    measured = pd.DataFrame(values).set_axis(result.index)
    return gpd.GeoDataFrame(
        pd.concat([pd.DataFrame(result), measured], axis=1), geometry=layer.geometry.name, crs=layer.crs
    )


def _series(column: Column, pieces: list[ColumnValues]) -> pd.api.extensions.ExtensionArray | np.ndarray:
    value = np.concatenate([piece[column.name] for piece in pieces])
    match column.kind:
        case Kind.COUNT:
            return pd.array(value, dtype="Int64")
        case Kind.TEXT:
            return pd.array(value, dtype="string")
        case _:
            return value


def _refuse_clashes(layer: gpd.GeoDataFrame, columns: tuple[Column, ...]) -> None:
    taken = {str(name).casefold() for name in layer.columns}
    clashes = [column.name for column in columns if column.name.casefold() in taken]
    if clashes:
        raise ColumnNameError(
            f"the layer already has {', '.join(clashes)}; choose a prefix, such as MeasureOptions(prefix='m_')"
        )


def _bounds(geometries: ObjectArray) -> tuple[float, float, float, float] | None:
    finite = geometries[np.isfinite(shapely.bounds(geometries)).all(axis=1)]
    if not len(finite):
        return None
    west, south, east, north = shapely.total_bounds(finite).tolist()
    return west, south, east, north


def _batches(geometries: ObjectArray) -> list[tuple[int, int]]:
    """Cut rows into runs of at most `MAX_BATCH_VERTICES` vertices, or one row."""
    block = np.cumsum(shapely.get_num_coordinates(geometries)) // MAX_BATCH_VERTICES
    start = np.flatnonzero(np.diff(block, prepend=-1))
    return list(zip(start.tolist(), [*start[1:].tolist(), len(geometries)], strict=True)) if len(block) else []
