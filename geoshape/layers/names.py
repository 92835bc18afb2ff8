"""Names of columns: clashes found before anything is read, short names for formats that allow no long ones."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from geoshape.columns import SHORT_NAME_LENGTH, Column
from geoshape.errors import ColumnNameError

RESERVED = frozenset({"fid", "ogc_fid", "geom", "geometry", "wkb_geometry"})
"""Names that no new column may have, in any format: drivers use them for ids and geometries."""


def check_new_names(existing: Sequence[str], columns: Sequence[Column]) -> None:
    """Check that new columns clash neither with attributes nor with reserved names, whatever their case.

    Parameters
    ----------
    existing : sequence of str
        Attributes that pass through.
    columns : sequence of Column
        Columns to be added.

    Raises
    ------
    ColumnNameError
        Some do; the message names them all.

    Examples
    --------
    >>> from geoshape.columns import columns_for
    >>> from geoshape.options import MeasureOptions
    >>> check_new_names(["Name", "AREA_M2"], columns_for(MeasureOptions(prefix="gs_")))
    """
    taken = {name.casefold(): name for name in existing}
    clashes = [taken[column.name.casefold()] for column in columns if column.name.casefold() in taken]
    if clashes:
        raise ColumnNameError(
            f"{_listed(clashes)} would be written twice: the layer has {_them(clashes)} already; "
            "give new columns a --prefix"
        )
    reserved = [column.name for column in columns if column.name.casefold() in RESERVED]
    if reserved:
        raise ColumnNameError(f"{_listed(reserved)}: reserved for ids and geometries; give new columns a --prefix")


def check_case(existing: Sequence[str], format_name: str) -> None:
    """Check that no two attributes differ in case only, for a format that takes them for one.

    Parameters
    ----------
    existing : sequence of str
    format_name : str

    Raises
    ------
    ColumnNameError
        Some do.
    """
    seen: dict[bytes, str] = {}
    for name in existing:
        # Databases ignore the case of ASCII letters only, as bytes do.
        other = seen.setdefault(name.encode().lower(), name)
        if other is not name:
            raise ColumnNameError(
                f"columns {other!r} and {name!r} are one to {format_name}, which ignores case; "
                "write .parquet or .fgb, or rename one"
            )


def _listed(names: Iterable[str]) -> str:
    return ", ".join(repr(name) for name in names)


def _them(names: Sequence[str]) -> str:
    return "it" if len(names) == 1 else "them"


def free_name(wanted: str, taken: Iterable[str]) -> str:
    """Give a name that is not taken, whatever the case: the wanted one or one with a number behind.

    Examples
    --------
    >>> free_name("geom", ["Geom", "name"])
    'geom_1'
    """
    folded = {name.casefold() for name in taken}
    name, number = wanted, 0
    while name.casefold() in folded:
        number += 1
        name = f"{wanted}_{number}"
    return name


def short_names(existing: Sequence[str], columns: Sequence[Column]) -> dict[str, str]:
    """Give every column a name of at most ten bytes, all different whatever their case.

    Attributes that are short enough keep their names; the others are cut, and numbered where the cut makes them
    alike. New columns have the registry's short names, numbered where those are taken.

    Parameters
    ----------
    existing : sequence of str
    columns : sequence of Column

    Returns
    -------
    dict of str to str
        Short names by full names, in order.

    Examples
    --------
    >>> short_names(["name", "population_2010", "population_2020"], [])
    {'name': 'name', 'population_2010': 'population', 'population_2020': 'populati_1'}
    """
    taken: set[str] = set()
    result: dict[str, str] = {}
    for name in existing:
        if len(name.encode()) <= SHORT_NAME_LENGTH and name.casefold() not in taken:
            result[name] = name
            taken.add(name.casefold())
    wanted = [(name, name) for name in existing if name not in result]
    wanted += [(column.name, column.short_name) for column in columns]
    for name, short in wanted:
        result[name] = _unlike(short, taken)
        taken.add(result[name].casefold())
    return {name: result[name] for name in [*existing, *(column.name for column in columns)]}


def _unlike(wanted: str, taken: set[str]) -> str:
    short, number = _cut(wanted, SHORT_NAME_LENGTH), 0
    while short.casefold() in taken:
        number += 1
        ending = f"_{number}"
        short = _cut(wanted, SHORT_NAME_LENGTH - len(ending)) + ending
    return short


def _cut(name: str, length: int) -> str:
    return name.encode()[:length].decode(errors="ignore")
