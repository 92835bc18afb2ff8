"""What GDAL leaves to be done for a shapefile: numbers of full precision, and names that people can read."""

from __future__ import annotations

import csv
from collections.abc import Sequence
from pathlib import Path

from geoshape.layers.plan import OutputPlan
from geoshape.layers.wkb import MULTI_POLYGON, GeometryType

CROSSWALK_SUFFIX = ".columns.csv"

# dBase III header: 32 bytes, then 32 bytes a field with its type in byte 11 and its decimals in byte 17.
_HEADER_BYTES = 32
_TYPE_BYTE = 11
_DECIMALS_BYTE = 17
_DECIMALS = 15
_SHAPE_TYPES = {MULTI_POLYGON: "POLYGON", "MultiLineString": "ARC", "LineString": "ARC"}
_POINT_TYPES = {"Point": "POINT", "MultiPoint": "MULTIPOINT"}


def shape_type(kind: GeometryType) -> str:
    """Give a shapefile's name for a geometry type.

    Examples
    --------
    >>> shape_type(GeometryType("MultiPolygon", has_z=True))
    'POLYGONZ'
    """
    name = (_SHAPE_TYPES | _POINT_TYPES).get(kind.base, "POLYGON")
    return name + ("Z" if kind.has_z else "") + ("M" if kind.has_m else "")


def declare_numbers(dbf: Path, fields: Sequence[int]) -> None:
    """Declare text fields of a dBase table to be floating-point numbers.

    GDAL writes numbers with a fixed number of decimals, in which 1e-20 is 0 and 1e300 loses its end. Their text in
    full, with an exponent, is as good a number to every reader of dBase files once the field says so.

    Parameters
    ----------
    dbf : Path
    fields : sequence of int
        Positions of the fields, from 0.
    """
    with dbf.open("r+b") as file:
        for index in fields:
            begin = _HEADER_BYTES * (1 + index)
            file.seek(begin + _TYPE_BYTE)
            file.write(b"F")
            file.seek(begin + _DECIMALS_BYTE)
            file.write(bytes([_DECIMALS]))


def write_crosswalk(path: Path, plan: OutputPlan) -> None:
    """Write the table that says which short name stands for which column.

    Parameters
    ----------
    path : Path
    plan : OutputPlan
    """
    described = {column.name: column for column in plan.columns}
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(["name", "short_name", "unit", "meaning", "source"])
        for name, short in zip(plan.schema.names, plan.written_names, strict=True):
            column = described.get(name)
            rest = (
                ("", "attribute of the input", "") if column is None else (column.unit, column.meaning, column.source)
            )
            writer.writerow([name, short, *rest])
