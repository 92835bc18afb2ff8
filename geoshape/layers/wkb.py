"""What the first bytes of well-known binary tell, read for a whole Arrow array at once and without parsing it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from geoshape.rings import BoolArray, IntArray

UNKNOWN = "Unknown"
POLYGON = "Polygon"
MULTI_POLYGON = "MultiPolygon"

# Codes of OGC 06-103r4, table 7, without the thousands that stand for Z and M.
TYPE_CODES = {
    UNKNOWN: 0,
    "Point": 1,
    "LineString": 2,
    POLYGON: 3,
    "MultiPoint": 4,
    "MultiLineString": 5,
    MULTI_POLYGON: 6,
    "GeometryCollection": 7,
}
_SIMPLE_OF_MULTI = {"MultiPoint": "Point", "MultiLineString": "LineString", MULTI_POLYGON: POLYGON}
_AREAL = frozenset(
    {
        UNKNOWN,
        POLYGON,
        MULTI_POLYGON,
        "GeometryCollection",
        "CurvePolygon",
        "MultiSurface",
        "Surface",
        "PolyhedralSurface",
        "TIN",
        "Triangle",
    }
)
_HEADER_BYTES = 5
_MULTI_HEADER_BYTES = 9
_COUNT_BYTES = 4
_LITTLE_ENDIAN = 1


@dataclass(frozen=True)
class GeometryType:
    """A layer's geometry type, with its dimensions.

    Attributes
    ----------
    base : str
        ``"Polygon"``, ``"MultiPolygon"`` ..., or ``"Unknown"`` where rows may be of any type.
    has_z, has_m : bool
        Whether coordinates have a height and a measure.
    """

    base: str
    has_z: bool = False
    has_m: bool = False

    @classmethod
    def parse(cls, name: str) -> GeometryType:
        """Take a name such as ``"Polygon"``, ``"MultiPolygon Z"`` or ``"2.5D Polygon"`` apart.

        Examples
        --------
        >>> GeometryType.parse("2.5D Polygon")
        GeometryType(base='Polygon', has_z=True, has_m=False)
        """
        base = name.removeprefix("2.5D ").removeprefix("Measured ").removeprefix("3D ")
        has_z = name.startswith(("2.5D ", "3D ", "Measured 3D "))
        has_m = name.startswith("Measured ")
        words = base.split()
        dimensions = words[-1] if len(words) > 1 and words[-1] in {"Z", "M", "ZM"} else ""
        base = " ".join(words[: len(words) - bool(dimensions)])
        base = UNKNOWN if base in {"", "Geometry"} else base
        return cls(base, has_z or "Z" in dimensions, has_m or "M" in dimensions)

    def __str__(self) -> str:
        dimensions = ("Z" if self.has_z else "") + ("M" if self.has_m else "")
        return f"{self.base} {dimensions}".rstrip()

    @property
    def may_be_areal(self) -> bool:
        """Whether rows of this type can be polygons."""
        return self.base in _AREAL

    @property
    def simple(self) -> str | None:
        """The type of one part, of a type whose geometries have several; else None."""
        return _SIMPLE_OF_MULTI.get(self.base)


@dataclass(frozen=True, eq=False)
class Headers:
    """What the headers of an array of WKB say.

    Attributes
    ----------
    is_known : (n,) bool
        Whether there is a geometry with a whole header.
    code : (n,) int64
        Type code without dimensions; 0 where there is none.
    has_z, has_m : (n,) bool
        Dimensions.
    byte_length : (n,) int64
        Length in bytes; 0 where there is none.
    is_swapped : (n,) bool
        Whether the bytes are big-endian.
    """

    is_known: BoolArray
    code: IntArray
    has_z: BoolArray
    has_m: BoolArray
    byte_length: IntArray
    is_swapped: BoolArray

    @property
    def is_empty(self) -> BoolArray:
        """(n,) whether there is a geometry without parts, rings or vertices; an empty point does not count."""
        is_short = self.byte_length == _MULTI_HEADER_BYTES
        return np.asarray(self.is_known & is_short & (self.code > TYPE_CODES["Point"]), dtype=np.bool_)

    @property
    def vertex_count(self) -> IntArray:
        """(n,) about how many vertices there are: bytes over bytes a vertex."""
        stride = 16 + 8 * self.has_z + 8 * self.has_m
        return np.maximum(self.byte_length - _MULTI_HEADER_BYTES, 0) // stride


def _bytes_and_offsets(geometry: pa.BinaryArray) -> tuple[NDArray[np.uint8], IntArray]:
    n = len(geometry)
    _, offset_buffer, data_buffer = geometry.buffers()
    if n == 0 or offset_buffer is None:
        return np.zeros(0, dtype=np.uint8), np.zeros(n + 1, dtype=np.int64)
    offsets = np.frombuffer(offset_buffer, dtype=np.int32)[geometry.offset : geometry.offset + n + 1]
    data = np.zeros(0, dtype=np.uint8) if data_buffer is None else np.frombuffer(data_buffer, dtype=np.uint8)
    return data, offsets.astype(np.int64)


def headers(geometry: pa.BinaryArray) -> Headers:
    """Read the header of every geometry.

    Parameters
    ----------
    geometry : pyarrow.BinaryArray, (n,)
        Well-known binary, ISO or with the flags of the extended form; nulls allowed.

    Returns
    -------
    Headers
    """
    data, offsets = _bytes_and_offsets(geometry)
    is_valid = np.asarray(geometry.is_valid().to_numpy(zero_copy_only=False), dtype=np.bool_)
    byte_length = np.where(is_valid, np.diff(offsets), 0)
    is_known = byte_length >= _HEADER_BYTES
    at = offsets[:-1][is_known]
    is_swapped = np.zeros(len(geometry), dtype=np.bool_)
    raw = np.zeros(len(geometry), dtype=np.int64)
    if len(at):
        word = data[at[:, np.newaxis] + np.arange(1, _HEADER_BYTES)].astype(np.int64)
        little = data[at] == _LITTLE_ENDIAN
        shift = np.where(little[:, np.newaxis], [0, 8, 16, 24], [24, 16, 8, 0])
        raw[is_known] = (word << shift).sum(axis=1)
        is_swapped[is_known] = ~little
    thousands = (raw & 0x0FFF_FFFF) // 1000
    has_z = ((raw & 0x8000_0000) != 0) | (thousands == 1) | (thousands == 3)
    has_m = ((raw & 0x4000_0000) != 0) | (thousands == 2) | (thousands == 3)
    return Headers(is_known, (raw & 0x0FFF_FFFF) % 1000, has_z, has_m, byte_length, is_swapped)


def vertex_counts(geometry: pa.BinaryArray) -> IntArray:
    """Estimate the number of vertices of each geometry from its length.

    Parameters
    ----------
    geometry : pyarrow.BinaryArray, (n,)

    Returns
    -------
    (n,) int64
        0 for null and empty; a little too high where there are many rings.

    Examples
    --------
    >>> import pyarrow as pa, shapely
    >>> vertex_counts(pa.array([shapely.to_wkb(shapely.box(0, 0, 1, 1)), None], pa.binary())).tolist()
    [5, 0]
    """
    return headers(geometry).vertex_count


def promoted(geometry: pa.BinaryArray, multi: str) -> pa.BinaryArray:
    """Put geometries of one part into the multi-part type; coordinates stay byte for byte as they are.

    Parameters
    ----------
    geometry : pyarrow.BinaryArray, (n,)
    multi : str
        ``"MultiPolygon"``, ``"MultiLineString"`` or ``"MultiPoint"``.

    Returns
    -------
    pyarrow.BinaryArray, (n,)
    """
    head = headers(geometry)
    simple = TYPE_CODES[_SIMPLE_OF_MULTI[multi]]
    is_simple = head.is_known & (head.code == simple)
    if not is_simple.any():
        return geometry
    kinds = np.stack([head.is_swapped, head.has_z, head.has_m], axis=1)[is_simple]
    for swapped, has_z, has_m in np.unique(kinds, axis=0):
        chosen = is_simple & (head.is_swapped == swapped) & (head.has_z == has_z) & (head.has_m == has_m)
        code = TYPE_CODES[multi] + 1000 * int(has_z) + 2000 * int(has_m)
        order: Literal["big", "little"] = "big" if swapped else "little"
        start = bytes([0 if swapped else _LITTLE_ENDIAN]) + code.to_bytes(4, order)
        prefix = start + (1).to_bytes(_COUNT_BYTES, order)
        joined = pc.binary_join_element_wise(pa.scalar(prefix, pa.binary()), geometry, pa.scalar(b"", pa.binary()))
        geometry = pc.if_else(pa.array(chosen & ~head.is_empty), joined, geometry)
        if head.is_empty.any():
            empty = pa.scalar(start + bytes(_COUNT_BYTES), pa.binary())
            geometry = pc.if_else(pa.array(chosen & head.is_empty), empty, geometry)
    return geometry
