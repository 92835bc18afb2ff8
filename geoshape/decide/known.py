"""Columns of the registry, recognised in tables by full name, by short name, or behind a prefix."""

from __future__ import annotations

import re
from dataclasses import replace
from functools import lru_cache

from geoshape.columns import Column, Kind, columns_for
from geoshape.options import MeasureOptions, Parts

STATUS = "shape_status"

_AMPLITUDE = re.compile(r"fd_[pn]\d{2,}")

AXIAL_RANGE = (0.0, 180.0)


@lru_cache(maxsize=1)
def _registry() -> tuple[dict[str, Column], dict[str, Column]]:
    columns = columns_for(MeasureOptions(parts=Parts.SPLIT, log_moments=True))
    return {column.name: column for column in columns}, {column.short_name: column for column in columns}


def known_column(name: str) -> Column | None:
    """Find what the registry says of a column of a table.

    Parameters
    ----------
    name : str
        Full name, short name as shapefiles have it, or a full name behind a prefix.

    Returns
    -------
    Column or None
        None where the registry does not know the column.

    Examples
    --------
    >>> known_column("axis_azim").name, known_column("old_area_m2").unit, known_column("depth")
    ('axis_azimuth_deg', 'm2', None)
    """
    full, short = _registry()
    column = full.get(name) or short.get(name)
    if column:
        return column
    amplitude = _AMPLITUDE.search(name)
    if amplitude and amplitude.end() == len(name):
        return replace(full["fd_p02"], name=amplitude.group(), short_name=amplitude.group(), meaning="amplitude")
    endings = [known for known in full if name.endswith(f"_{known}")]
    return full[max(endings, key=len)] if endings else None


def is_axial(column: Column) -> bool:
    """Tell whether a column holds directions without sense, in [0, 180) degrees.

    Parameters
    ----------
    column : Column

    Returns
    -------
    bool

    Examples
    --------
    >>> is_axial(known_column("axis_azimuth_deg")), is_axial(known_column("ground_distortion"))
    (True, False)
    """
    return column.unit == "deg" and column.name.endswith("azimuth_deg") and (column.low, column.high) == AXIAL_RANGE


def is_size(column: Column) -> bool:
    """Tell whether a column holds lengths or areas.

    Parameters
    ----------
    column : Column

    Returns
    -------
    bool
    """
    return column.unit in {"m", "m2"}


def is_additive(column: Column) -> bool:
    """Tell whether the sum over features means something: areas, boundary lengths and counts of things.

    Parameters
    ----------
    column : Column

    Returns
    -------
    bool

    Examples
    --------
    >>> [is_additive(known_column(name)) for name in ("area_m2", "perimeter_m", "vertex_count", "feret_max_m")]
    [True, True, True, False]
    """
    is_count = column.kind is Kind.COUNT and column.name.endswith("_count")
    return column.unit == "m2" or column.name in {"perimeter_m", "outline_m"} or is_count
