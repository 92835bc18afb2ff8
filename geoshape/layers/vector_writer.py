"""Layers that GDAL writes, fed by a stream of Arrow batches."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pyarrow as pa
from pyogrio.raw import write_arrow

from geoshape.layers.complaints import quiet
from geoshape.layers.formats import FLATGEOBUF, GEOPACKAGE, SHAPEFILE
from geoshape.layers.names import free_name
from geoshape.layers.plan import OutputPlan
from geoshape.layers.rfc7946 import LongitudeLatitude
from geoshape.layers.shapefile import shape_type
from geoshape.layers.wkb import GeometryType

Rows = tuple[list[pa.Array], pa.BinaryArray]

# Said of what is meant, or counted and said better elsewhere.
_EXPECTED = (
    "'crs' was not provided",
    "has been truncated to 254 characters",
    "Setting the M=2 hint",
    "Setting the Z=2 hint",
    "No SRS set on layer",
)


def write_vector(
    path: Path, plan: OutputPlan, schema: pa.Schema, kind: GeometryType, rows: Iterator[Rows]
) -> tuple[str, ...]:
    """Write a layer through GDAL.

    Parameters
    ----------
    path : Path
        File to write; a GeoPackage that is there keeps its other layers.
    plan : OutputPlan
    schema : pyarrow.Schema
        Attributes as stored.
    kind : GeometryType
        Of the layer.
    rows : iterator of (list of pyarrow.Array, pyarrow.BinaryArray)

    Returns
    -------
    tuple of str
        What GDAL complained of.

    Raises
    ------
    RuntimeError, OSError, ValueError
        GDAL cannot write it, or `rows` raised something.
    """
    geometry_name = free_name("geometry", schema.names)
    stored = pa.schema([*schema, pa.field(geometry_name, pa.binary())])
    batches = (pa.RecordBatch.from_arrays([*arrays, geometry], schema=stored) for arrays, geometry in rows)
    with quiet() as texts:
        write_arrow(
            pa.RecordBatchReader.from_batches(stored, batches),
            path,
            layer=plan.layer,
            driver=plan.format.driver,
            geometry_name=geometry_name,
            geometry_type=str(GeometryType(kind.base, kind.has_z)),
            # GeoJSON has one CRS, which is not to be named.
            crs=None if plan.format.is_rfc7946 else plan.crs_wkt,
            encoding="UTF-8" if plan.format is SHAPEFILE else None,
            layer_options=_layer_options(plan, kind),
        )
    return tuple(dict.fromkeys(text for text in texts if not any(known in text for known in _EXPECTED)))


def _layer_options(plan: OutputPlan, kind: GeometryType) -> dict[str, Any]:
    names = plan.written_names
    if plan.format is GEOPACKAGE:
        own_names = {"FID": free_name("fid", names), "GEOMETRY_NAME": free_name("geom", names)}
        # Overwriting takes the place of a layer whose name differs in case only, too.
        return own_names | {"SPATIAL_INDEX": "YES", "OVERWRITE": "YES"}
    if plan.format is FLATGEOBUF:
        # Its index would sort the rows, and refuse those without geometry.
        return {"SPATIAL_INDEX": "NO"}
    if plan.format is SHAPEFILE:
        return {"SHPT": shape_type(kind)}
    return {"COORDINATE_PRECISION": str(LongitudeLatitude(plan.crs_wkt).decimals)}
