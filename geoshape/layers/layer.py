"""What is known of a layer before and while it is read."""

from __future__ import annotations

from dataclasses import dataclass, field

import pyarrow as pa

from geoshape.layers.wkb import GeometryType

Bounds = tuple[float, float, float, float]


@dataclass(frozen=True)
class LayerSummary:
    """One layer of a file.

    Attributes
    ----------
    name : str
        Name to choose it by.
    geometry_type : str or None
        Such as ``"MultiPolygon"`` or ``"Polygon Z"``; ``"Unknown"`` where rows may be of any type; None for a
        table without geometries.
    row_count : int or None
        Number of rows; None where counting would mean reading the layer.
    """

    name: str
    geometry_type: str | None
    row_count: int | None

    @property
    def may_hold_polygons(self) -> bool:
        """Whether polygons are possible."""
        return self.geometry_type is not None and GeometryType.parse(self.geometry_type).may_be_areal


@dataclass(frozen=True)
class LayerInfo:
    """An opened layer: all that is needed to read it, in this process or another.

    Attributes
    ----------
    path : str
        As the user gave it.
    source : str
        Data set behind the path, as it is opened: a file in an archive, for instance.
    layer : str
        Name of the layer.
    driver : str
        GDAL's name of the format; ``"Parquet"`` for GeoParquet, which pyarrow reads.
    crs_wkt : str or None
        Coordinate reference system as WKT 2; None where it is unknown.
    geometry_type : str
        Such as ``"MultiPolygon"`` or ``"Polygon Z"``; ``"Unknown"`` where rows may be of any type.
    has_z, has_m : bool or None
        Whether there are heights and measures; None where only the rows can tell.
    geometry_name : str
        Name of the geometry column in the file; empty where the format has no name for it.
    fid_column : str
        Name of the feature id column in the file; empty where there is none. Feature ids are not read: the order
        of rows is what counts.
    row_count : int or None
        Rows that will be read; None where `where` or `bbox` choose, or counting would mean reading.
    bounds : (x_min, y_min, x_max, y_max) or None
        Extent of the whole layer in its CRS; None where having it would mean reading.
    schema : pyarrow.Schema
        Attributes in their order, without the geometry. Integers with nulls are integers.
    layer_names : tuple of str
        All layers of the file.
    where : str or None
        SQL condition on the attributes.
    bbox : (x_min, y_min, x_max, y_max) or None
        Only rows whose geometry has a point in common with it.
    warnings : tuple of str
        What the driver complained of while opening.
    rows_per_read : int
        Rows to ask the driver for at once, from the file's size.
    """

    path: str
    source: str
    layer: str
    driver: str
    crs_wkt: str | None
    geometry_type: str
    has_z: bool | None
    has_m: bool | None
    geometry_name: str
    fid_column: str
    row_count: int | None
    bounds: Bounds | None
    schema: pa.Schema
    layer_names: tuple[str, ...] = ()
    where: str | None = None
    bbox: Bounds | None = None
    warnings: tuple[str, ...] = field(default=(), compare=False)
    rows_per_read: int = 1024


@dataclass(frozen=True, eq=False)
class LayerBatch:
    """Rows that follow one another in a layer.

    Attributes
    ----------
    attributes : pyarrow.RecordBatch
        In the layer's schema. Where that has no field, the batch says 0 rows; `n_rows` is right.
    geometry : pyarrow.BinaryArray, (n_rows,)
        Well-known binary as read, with height and measure; null where the geometry is missing.
    first_row : int
        Number of the first row among those read, from 0.
    """

    attributes: pa.RecordBatch
    geometry: pa.BinaryArray
    first_row: int

    @property
    def n_rows(self) -> int:
        """Number of rows."""
        return len(self.geometry)
