"""What a report is made from: a measured table, its geometries, and where they come from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from geoshape.columns import BIAS_SUFFIX, ERROR_SUFFIX, RECORD, Column, Kind
from geoshape.decide.flag import FLAG_COLUMNS
from geoshape.errors import OptionError
from geoshape.options import MeasureOptions
from geoshape.report.statistics import ENDS, ends_and_middle
from geoshape.rings import FloatArray, IntArray

ObjectArray = NDArray[np.object_]

ATTRIBUTE = "attribute"
ERROR = "error"

MAX_CLASSES = 12
"""Different values up to which a text column counts as a classification."""

EXACT_INTEGER = 2**53
"""Whole numbers beyond this lose digits as float64 and stay text."""

MAX_ROWS = 20_000
MAX_HARMONICS = 64


@dataclass(frozen=True, eq=False)
class ReportData:
    """A measured layer.

    Attributes
    ----------
    table : pyarrow.Table
        Attributes and measured columns, one row a feature.
    geometry : pyarrow array or (n,) object
        WKB of each row in the layer's CRS; null where there is none.
    crs_wkt : str or None
        The layer's CRS; None where unknown.
    lineage : mapping
        Where the numbers come from, as `layers.lineage.Lineage` holds it; whatever is missing is left out of the page.
    columns : tuple of Column
        Registry entries of the measured columns, by the names they have in the table.

    Raises
    ------
    OptionError
        The table and the geometries differ in length, or the table lacks a column.
    """

    table: pa.Table
    geometry: pa.Array | pa.ChunkedArray | ObjectArray
    crs_wkt: str | None
    lineage: Mapping[str, Any]
    columns: tuple[Column, ...]

    def __post_init__(self) -> None:
        if len(self.table) != len(self.geometry):
            raise OptionError(
                f"the table has {len(self.table)} rows and the geometry {len(self.geometry)}; give one for each row"
            )
        missing = [column.name for column in self.columns if column.name not in self.table.column_names]
        if missing:
            raise OptionError(f"the table has no column {missing[0]}; name only columns that it holds")

    @property
    def n_rows(self) -> int:
        """Number of rows."""
        return len(self.table)

    def wkb(self, rows: IntArray) -> ObjectArray:
        """Take the WKB of some rows as (m,) object of bytes or None."""
        if isinstance(self.geometry, np.ndarray):
            return self.geometry[rows]
        chosen = self.geometry.take(pa.array(rows))
        values = np.empty(len(rows), dtype=object)
        values[:] = chosen.to_pylist()
        return values


@dataclass(frozen=True, kw_only=True)
class ReportOptions:
    """What the reader of a report may choose beforehand.

    Attributes
    ----------
    title : str or None
        Heading of the page; named after the layer where left out.
    label_column : str or None
        Column that names the shapes; found among the attributes where left out.
    class_column : str or None
        Column whose values are the classes of the box plots; found where left out.
    map_column : str or None
        Column that colours the map at first.
    max_rows : int
        Shapes drawn on the map and listed in the table, from 1 to 20 000; statistics use all rows in any case.
    seed : int
        Seed of the random part of that choice.
    harmonics : int
        Harmonics that an outline can be rebuilt from, from 2 to 64.

    Raises
    ------
    OptionError
        A value is outside its range.
    """

    title: str | None = None
    label_column: str | None = None
    class_column: str | None = None
    map_column: str | None = None
    max_rows: int = 3000
    seed: int = 0
    harmonics: int = 16

    def __post_init__(self) -> None:
        if not 1 <= self.max_rows <= MAX_ROWS:
            raise OptionError(f"max_rows = {self.max_rows} cannot be used; give a number from 1 to {MAX_ROWS}")
        if not 2 <= self.harmonics <= MAX_HARMONICS:
            raise OptionError(f"harmonics = {self.harmonics} cannot be used; give a number from 2 to {MAX_HARMONICS}")
        if self.seed < 0:
            raise OptionError(f"seed = {self.seed} cannot be used; give 0 or more")


DECISIONS = ("flag", "group", "match")
"""Families of columns that a decision has added."""

_DECIDED = {column.name: column for column in FLAG_COLUMNS} | {
    name: Column(name, name[:10], Kind.NUMBER, "1", None, None, meaning, "", "group")
    for name, meaning in (
        ("group", "number of the group of alike shapes"),
        ("group_distance", "distance from the group's centre"),
        ("group_note", "why the shape has no group"),
        ("is_prototype", "whether the shape is nearest to its group's centre"),
    )
}

_WHOLE_CLASSES = {"group", "flag", "is_prototype"}
"""Columns of whole numbers that are classes all the same."""

_REMARKS = {"shape_note", "flag_reasons", "flag_note", "group_note"}
"""Text columns that are no classes however few their values."""


@dataclass(frozen=True, eq=False)
class View:
    """The data as the parts of the page ask for it.

    Attributes
    ----------
    data : ReportData
    options : ReportOptions
    """

    data: ReportData
    options: ReportOptions

    def __post_init__(self) -> None:
        for name in ("label_column", "class_column", "map_column"):
            chosen = getattr(self.options, name)
            if chosen is not None and chosen not in self.by_name:
                raise OptionError(f"{name} = {chosen!r} is no column of the layer; it has: {', '.join(self.by_name)}")

    @cached_property
    def prefix(self) -> str:
        """What stands before the registry's names in this layer."""
        for column in self.data.columns:
            if column.family == RECORD and column.name.endswith("shape_status"):
                return column.name.removesuffix("shape_status")
        return str(self.measure_options.prefix)

    @cached_property
    def measure_options(self) -> MeasureOptions:
        """The options that the layer was measured with, as far as its lineage tells."""
        known = {name for name in MeasureOptions.__dataclass_fields__ if name != "families"}
        given = self.data.lineage.get("options") or {}
        given = given.get("measure") or given
        try:
            return MeasureOptions(**{name: value for name, value in given.items() if name in known})
        except (OptionError, TypeError):
            return MeasureOptions()

    @cached_property
    def fields(self) -> tuple[Column, ...]:
        """Every column of the table in its order, attributes and decisions described like measured ones."""
        measured = {column.name: column for column in self.data.columns}
        schema = self.data.table.schema
        return tuple(self._describe(name, schema.field(name).type, measured) for name in schema.names)

    def _describe(self, name: str, kind: pa.DataType, measured: Mapping[str, Column]) -> Column:
        base = measured.get(name.removesuffix(ERROR_SUFFIX).removesuffix(BIAS_SUFFIX))
        if base is not None and base.name != name:
            meaning = f"{'standard error' if name.endswith(ERROR_SUFFIX) else 'mean shift'} of {base.name}"
            return replace(measured.get(name, base), name=name, meaning=meaning, low=None, high=None, family=ERROR)
        if name in measured:
            return measured[name]
        holds = _kind_of(self.data.table.column(name), kind)
        decided = _DECIDED.get(name.removeprefix(self.prefix))
        if decided is not None:
            return replace(decided, name=name, kind=holds)
        return Column(name, name[:10], holds, "", None, None, "attribute of the layer", "", ATTRIBUTE)

    @cached_property
    def by_name(self) -> dict[str, Column]:
        """Fields by their names."""
        return {field.name: field for field in self.fields}

    @cached_property
    def numeric(self) -> tuple[Column, ...]:
        """Fields that hold numbers, measured ones first."""
        numbers = [field for field in self.fields if field.kind is not Kind.TEXT]
        return tuple(sorted(numbers, key=lambda field: _FAMILY_ORDER.get(field.family, 0)))

    def named(self, bare: str) -> str | None:
        """Give the name that a registry column has in this layer; None where it is not there."""
        name = self.prefix + bare
        return name if name in self.by_name else None

    def numbers(self, name: str) -> FloatArray:
        """(n,) float64 values of a column, NaN where null."""
        if name not in self._numbers:
            values = self.data.table.column(name)
            if pa.types.is_boolean(values.type):
                values = values.cast(pa.int8())
            values = values.cast(pa.float64(), safe=False).combine_chunks()
            floats = np.asarray(values.to_numpy(zero_copy_only=False), dtype=np.float64)
            self._numbers[name] = np.where(np.isfinite(floats), floats, np.nan)
        return self._numbers[name]

    @cached_property
    def _numbers(self) -> dict[str, FloatArray]:
        return {}

    def ends(self, name: str) -> tuple[IntArray, IntArray, IntArray]:
        """Rows with the lowest, the most typical and the highest values of a column."""
        if name not in self._ends:
            self._ends[name] = ends_and_middle(self.numbers(name), ENDS)
        return self._ends[name]

    @cached_property
    def _ends(self) -> dict[str, tuple[IntArray, IntArray, IntArray]]:
        return {}

    def texts(self, name: str, rows: IntArray | None = None) -> list[str | None]:
        """Values of a column as text, None where null; those of all rows are kept."""
        values = self.data.table.column(name)
        if rows is not None:
            return [_as_text(value) for value in values.take(pa.array(rows)).to_pylist()]
        if name not in self._texts:
            self._texts[name] = [_as_text(value) for value in values.to_pylist()]
        return self._texts[name]

    @cached_property
    def _texts(self) -> dict[str, list[str | None]]:
        return {}

    def bare(self, bare: str) -> FloatArray | None:
        """(n,) float64 values of a registry column; None where the layer lacks it."""
        name = self.named(bare)
        return None if name is None else self.numbers(name)

    @cached_property
    def classes(self) -> tuple[str, ...]:
        """Columns of 2 to 12 different texts or group numbers; attributes first, then groups, flags, and the status."""
        found = [field for field in self.fields if self._is_class(field)]
        return tuple(field.name for field in sorted(found, key=lambda field: _CLASS_ORDER.get(field.family, 3)))

    def _is_class(self, field: Column) -> bool:
        bare = field.name.removeprefix(self.prefix)
        if field.kind is not Kind.TEXT and bare not in _WHOLE_CLASSES:
            return False
        if bare in _REMARKS or pa.types.is_nested(self.data.table.schema.field(field.name).type):
            return False
        return 2 <= len(self.levels(field.name)) <= MAX_CLASSES

    def levels(self, name: str) -> list[str]:
        """Sort the different values of a column, as text; counting stops where they are too many for classes."""
        if name not in self._levels:
            counted = pc.value_counts(self.data.table.column(name).combine_chunks())
            values = counted.field("values").to_pylist() if len(counted) <= 4 * MAX_CLASSES else []
            # Numbers sort as numbers, text as text.
            values = sorted(
                (value for value in values if value is not None), key=lambda value: (str(type(value)), value)
            )
            self._levels[name] = [text for text in map(_as_text, values) if text is not None]
        return self._levels[name]

    @cached_property
    def _levels(self) -> dict[str, list[str]]:
        return {}

    @cached_property
    def label_field(self) -> str | None:
        """Column that names the shapes; None where rows are only numbered."""
        if self.options.label_column is not None:
            return self.options.label_column
        attributes = [field.name for field in self.fields if field.family == ATTRIBUTE]
        ranked = sorted(attributes, key=_label_rank)
        return ranked[0] if ranked and _label_rank(ranked[0]) < len(_LABEL_NAMES) else None

    def label(self, row: int) -> str:
        """Name a shape for people: what its label column holds, else its row.

        Examples
        --------
        >>> data = ReportData(pa.table({"id": ["7", None]}), pa.array([None, None], pa.binary()), None, {}, ())
        >>> View(data, ReportOptions()).label(0), View(data, ReportOptions()).label(1)
        ('id 7', 'row 2')
        """
        name = self.label_field
        text = None if name is None else _as_text(self.data.table.column(name)[row].as_py())
        if not text:
            return f"row {row + 1}"
        # A bare number says too little in a sentence.
        kind = str(name).removesuffix("_id").removesuffix("_").replace("_", " ")
        return f"{kind} {text}" if text.isdecimal() else text


_FAMILY_ORDER = {ERROR: 1, **dict.fromkeys(DECISIONS, 2), ATTRIBUTE: 3}

_CLASS_ORDER = {ATTRIBUTE: 0, "group": 1, "flag": 2}

_LABEL_NAMES = ("name", "label", "title", "_name", "name_", "_id", "id", "code", "key", "number")


def _label_rank(name: str) -> int:
    """Rank a column's name by how much it sounds like a name; the lower the better."""
    folded = name.casefold()
    for rank, sign in enumerate(_LABEL_NAMES):
        if (
            folded == sign
            or (sign.startswith("_") and folded.endswith(sign))
            or (sign.endswith("_") and folded.startswith(sign))
        ):
            return rank
    return len(_LABEL_NAMES)


def _kind_of(values: pa.ChunkedArray, kind: pa.DataType) -> Kind:
    if pa.types.is_integer(kind):
        ends = pc.min_max(values).as_py()
        reach = max(abs(ends["min"] or 0), abs(ends["max"] or 0))
        return Kind.COUNT if reach < EXACT_INTEGER else Kind.TEXT
    if pa.types.is_floating(kind) or pa.types.is_decimal(kind):
        return Kind.NUMBER
    return Kind.TEXT


def _as_text(value: object) -> str | None:
    if value is None:
        return None
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, bytes):
        return f"{len(value)} bytes"
    if isinstance(value, float) and value.is_integer():
        return str(int(value))
    return str(value)
