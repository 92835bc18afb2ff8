"""Layers that GDAL writes, fed by a stream of Arrow batches."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyproj
from pyogrio.raw import write_arrow

from geoshape.layers.formats import FLATGEOBUF, GEOJSON, GEOJSON_SEQ, GEOPACKAGE, SHAPEFILE
from geoshape.layers.names import free_name
from geoshape.layers.plan import OutputPlan, is_wgs84
from geoshape.layers.shapefile import shape_type
from geoshape.layers.vector_reader import quiet
from geoshape.layers.wkb import GeometryType

Rows = tuple[list[pa.Array], pa.BinaryArray]

# Decimals of a degree: nothing is lost where coordinates pass through; 10 are 0.01 mm where they are transformed.
_DECIMALS_KEPT = 15
_DECIMALS_TRANSFORMED = 10
# Said of what is meant, or counted and said better elsewhere.
_EXPECTED = (
    "'crs' was not provided",
    "has been truncated to 254 characters",
    "Setting the M=2 hint",
    "Setting the Z=2 hint",
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
            crs=plan.crs_wkt,
            encoding="UTF-8" if plan.format is SHAPEFILE else None,
            layer_options=_layer_options(plan, kind),
        )
    return tuple(dict.fromkeys(text for text in texts if not any(known in text for known in _EXPECTED)))


def _layer_options(plan: OutputPlan, kind: GeometryType) -> dict[str, Any]:
    names = plan.written_names
    if plan.format is GEOPACKAGE:
        return {"FID": free_name("fid", names), "GEOMETRY_NAME": free_name("geom", names), "SPATIAL_INDEX": "YES"}
    if plan.format is FLATGEOBUF:
        # Its index would sort the rows, and refuse those without geometry.
        return {"SPATIAL_INDEX": "NO"}
    if plan.format is SHAPEFILE:
        return {"SHPT": shape_type(kind)}
    passes = plan.crs_wkt is None or is_wgs84(pyproj.CRS.from_wkt(plan.crs_wkt))
    precision = {"COORDINATE_PRECISION": str(_DECIMALS_KEPT if passes else _DECIMALS_TRANSFORMED)}
    if plan.format is GEOJSON:
        return {"RFC7946": "YES", **precision}
    return precision if plan.format is GEOJSON_SEQ else {}
