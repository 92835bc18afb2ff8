"""Which columns a decision wants, which of them the registry can measure, and what they are called in the output."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import replace

import pyarrow as pa

from geoshape.columns import RECORD, SHORT_NAME_LENGTH, Column, Kind, columns_for
from geoshape.decide.known import is_axial
from geoshape.decide.outliers import DEFAULT_COLUMNS
from geoshape.layers.tables import column_fields
from geoshape.options import Family, MeasureOptions

SHAPE_COLUMNS = DEFAULT_COLUMNS
"""What tells the shape of a feature, whatever its size and direction, where nothing else is asked for."""

_AMPLITUDE = re.compile(r"fd_[pn](\d{2,4})")


def highest_harmonic(names: Iterable[str], least: int) -> int:
    """Tell how many harmonics must be measured to have these columns.

    Examples
    --------
    >>> highest_harmonic(["fd_n12", "fd_departure"], 8)
    12
    """
    return max([least, *(int(found[1]) for name in names if (found := _AMPLITUDE.fullmatch(name)))])


def registry(wanted: Iterable[str] = ()) -> dict[str, Column]:
    """Give the columns that can be measured, by name; harmonics as far as the wanted ones go.

    Examples
    --------
    >>> "fd_n12" in registry(), "fd_n12" in registry(["fd_p20"]), "hu_2_log" in registry()
    (False, True, True)
    """
    highest = highest_harmonic(wanted, MeasureOptions().harmonics)
    options = MeasureOptions(harmonics=highest, samples=max(256, 2 * highest + 2), log_moments=True)
    return {column.name: column for column in columns_for(options)}


def missing_columns(wanted: Sequence[str], existing: Sequence[str], *, with_record: bool = False) -> tuple[Column, ...]:
    """List the wanted columns that must be measured, in the registry's order.

    Parameters
    ----------
    wanted : sequence of str
        Names without prefix.
    existing : sequence of str
        Columns that the layer has.
    with_record : bool
        Whether something is measured in any case, so that the columns which say what became of a row are wanted.

    Returns
    -------
    tuple of Column
        Where something is measured, with the columns that say what became of each row, unless the layer has them.

    Examples
    --------
    >>> [column.name for column in missing_columns(["axis_ratio", "zone"], ["zone", "ground_distortion"])]
    ['shape_status', 'shape_note', 'axis_ratio']
    """
    known = registry(wanted)
    there = set(existing)
    measured = {name for name in wanted if name in known and name not in there}
    if not measured and not with_record:
        return ()
    return tuple(c for c in known.values() if c.name not in there and (c.name in measured or c.family == RECORD))


def whole_schema(attributes: pa.Schema, wanted: Sequence[str]) -> pa.Schema:
    """Describe all columns that a condition may name: the layer's own, and all that could be measured."""
    there = set(attributes.names)
    return pa.schema([*attributes, *column_fields([c for c in registry(wanted).values() if c.name not in there])])


def columns_of_families(families: Iterable[Family]) -> tuple[str, ...]:
    """Name the columns of families by which shapes can be told apart: numbers and counts, but no directions.

    Parameters
    ----------
    families : iterable of Family or str

    Returns
    -------
    tuple of str

    Raises
    ------
    OptionError
        A family is not known, or there is none.

    Examples
    --------
    >>> columns_of_families(["axes"])
    ('major_axis_m', 'minor_axis_m', 'axis_ratio', 'axis_strength')
    """
    columns = columns_for(MeasureOptions(families=tuple(families)))
    return tuple(c.name for c in columns if c.family != RECORD and c.kind is not Kind.TEXT and not is_axial(c))


def prefixed(columns: Iterable[Column], prefix: str) -> tuple[Column, ...]:
    """Put a prefix before names; short names are cut, and told apart by the writer where that makes them alike."""
    if not prefix:
        return tuple(columns)
    return tuple(
        replace(c, name=prefix + c.name, short_name=(prefix + c.short_name)[:SHORT_NAME_LENGTH]) for c in columns
    )
