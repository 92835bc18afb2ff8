"""Geometries as a format can store them: its types and dimensions, byte for byte where it can."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import shapely

from geoshape.layers.dimensions import with_dimensions
from geoshape.layers.formats import FLATGEOBUF, GEOPACKAGE, SHAPEFILE, Format
from geoshape.layers.rfc7946 import LongitudeLatitude
from geoshape.layers.storage import Losses
from geoshape.layers.wkb import MULTI_POLYGON, POLYGON, TYPE_CODES, UNKNOWN, GeometryType, headers, promoted
from geoshape.rings import BoolArray

_ONE_TYPE = frozenset({FLATGEOBUF, SHAPEFILE})
_AREAL = frozenset({POLYGON, MULTI_POLYGON})


def written_type(kind: GeometryType, form: Format, first: pa.BinaryArray | None) -> GeometryType:
    """Settle the geometry type of the layer in the file.

    Parameters
    ----------
    kind : GeometryType
        Of the rows, as far as it is known.
    form : Format
    first : pyarrow.BinaryArray or None
        Geometries of the first batch, which tell the dimensions where the type is not known.

    Returns
    -------
    GeometryType
        FlatGeobuf and Shapefile have one type a file: polygons are multi-polygons there. Rows of a type that is not
        known are polygons to a shapefile.
    """
    if form is SHAPEFILE:
        kind = _with_dimensions(kind, first)
        return replace(kind, base=MULTI_POLYGON) if kind.base in {UNKNOWN, *_AREAL} else kind
    if form is FLATGEOBUF:
        kind = _with_dimensions(kind, first)
        areal_only = kind.base in _AREAL or (kind.base == UNKNOWN and _is_areal(first))
        return GeometryType(MULTI_POLYGON if areal_only else kind.base, kind.has_z)
    return kind


def _with_dimensions(kind: GeometryType, first: pa.BinaryArray | None) -> GeometryType:
    if kind.base != UNKNOWN or first is None:
        return kind
    head = headers(first)
    return replace(kind, has_z=kind.has_z or bool(head.has_z.any()), has_m=kind.has_m or bool(head.has_m.any()))


def _is_areal(first: pa.BinaryArray | None) -> bool:
    if first is None:
        return False
    head = headers(first)
    codes = head.code[head.is_known]
    return bool(len(codes) and np.isin(codes, [TYPE_CODES[base] for base in _AREAL]).all())


@dataclass(frozen=True)
class ShapeFit:
    """Makes geometries fit a layer's type.

    Attributes
    ----------
    form : Format
    kind : GeometryType
        From `written_type`.
    degrees : LongitudeLatitude or None
        For GeoJSON, what turns geometries into longitude and latitude.
    """

    form: Format
    kind: GeometryType
    degrees: LongitudeLatitude | None = None

    def fit(self, geometry: pa.BinaryArray, losses: Losses) -> pa.BinaryArray:
        """Turn geometries into what the layer can hold.

        Parameters
        ----------
        geometry : pyarrow.BinaryArray, (n,)
        losses : Counter
            Gets the number of geometries that cannot be held, by what became of them.

        Returns
        -------
        pyarrow.BinaryArray, (n,)
            Single parts in the multi-part type where the layer has that; null where the format cannot hold a
            geometry. All other bytes are as they were.
        """
        if self.degrees is not None:
            return self.degrees.fit(geometry, losses)
        if self.form in _ONE_TYPE:
            self._count_empty(geometry, losses)
        if self.kind.simple is not None and self.form in {GEOPACKAGE, FLATGEOBUF}:
            geometry = promoted(geometry, self.kind.base)
        if self.form in _ONE_TYPE and self.kind.base != UNKNOWN:
            geometry = self._of_one_type(geometry, losses)
        return self._of_one_dimension(geometry, losses) if self.form is FLATGEOBUF else geometry

    def _count_empty(self, geometry: pa.BinaryArray, losses: Losses) -> None:
        n_empty = int(np.count_nonzero(headers(geometry).is_empty))
        if n_empty:
            losses[f"empty geometries are null in {self.form.name}"] += n_empty

    def _of_one_type(self, geometry: pa.BinaryArray, losses: Losses) -> pa.BinaryArray:
        head = headers(geometry)
        bases = [self.kind.base, *([self.kind.simple] if self.kind.simple else [])]
        allowed = [TYPE_CODES[base] for base in bases if base in TYPE_CODES]
        other = head.is_known & ~np.isin(head.code, allowed)
        text = f"geometries that are no {self.kind.simple or self.kind.base} are null in {self.form.name}"
        return _nulled(geometry, other, text, losses)

    def _of_one_dimension(self, geometry: pa.BinaryArray, losses: Losses) -> pa.BinaryArray:
        head = headers(geometry)
        differs = head.is_known & ((head.has_z != self.kind.has_z) | head.has_m)
        if not differs.any():
            return geometry
        n_flattened = int(np.count_nonzero(head.has_z & (not self.kind.has_z)))
        if n_flattened:
            losses[f"heights are left out, as the {self.form.name} layer has none"] += n_flattened
        wkb = np.asarray(geometry.to_numpy(zero_copy_only=False), dtype=object)
        shapes = np.asarray(shapely.from_wkb(wkb[differs], on_invalid="ignore"), dtype=object)
        wkb[differs] = shapely.to_wkb(with_dimensions(shapes, has_z=self.kind.has_z), output_dimension=3, flavor="iso")
        return pa.array(wkb, pa.binary())


def _nulled(geometry: pa.BinaryArray, where: BoolArray, text: str, losses: Losses) -> pa.BinaryArray:
    n_lost = int(np.count_nonzero(where))
    if not n_lost:
        return geometry
    losses[text] += n_lost
    return pc.if_else(pa.array(where), pa.scalar(None, pa.binary()), geometry)
