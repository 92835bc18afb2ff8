"""Layers written and opened again for a look, by the package and by other means."""

import warnings
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pyogrio
import pyproj
from pyogrio.raw import read_arrow

from geoshape.layers.read import LayerInfo, read_batches
from geoshape.layers.write import OutputResult, plan_output, write_batches
from tests.layers import samples

UTM = pyproj.CRS("EPSG:32632").to_wkt()
WGS84 = pyproj.CRS("EPSG:4326").to_wkt()
SUFFIXES = (".gpkg", ".parquet", ".fgb", ".shp", ".geojson", ".geojsonl", ".csv")


def table_of(info: LayerInfo, max_vertices: int = 150_000) -> tuple[pa.Table, list[bytes | None]]:
    batches = list(read_batches(info, max_vertices=max_vertices))
    assert [batch.first_row for batch in batches] == [
        sum(batch.n_rows for batch in batches[:i]) for i in range(len(batches))
    ]
    table = pa.Table.from_batches([batch.attributes for batch in batches], schema=info.schema)
    return table, [value for batch in batches for value in batch.geometry.to_pylist()]


def make(path: Path, *geometries: str | None, layer: str | None = None, crs: str | None = None) -> Path:
    content = samples.plain_content("Unknown", crs)
    plan = plan_output(path, content, output_layer=layer, overwrite=True)
    write_batches(plan, [samples.numbered(*(geometries or [samples.POLYGON]))])
    return path


def write_sample(path: Path, crs: str | None = WGS84, geometry_type: str = "Unknown") -> OutputResult:
    plan = plan_output(path, samples.content(geometry_type, crs))
    return write_batches(plan, [samples.batch(plan)], samples.lineage)


def reopen(path: Path) -> tuple[pa.Table, list[bytes | None] | None]:
    """Read attributes and geometries without the package's reader."""
    if path.suffix == ".parquet":
        table = pq.read_table(path)
        return table.drop_columns(["geometry", "bbox"]), table.column("geometry").to_pylist()
    if path.suffix == ".csv":
        return read_arrow(path)[1], None
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Measured")
        _, _, geometry, _ = pyogrio.raw.read(path)
        return read_arrow(path, read_geometry=False)[1], list(geometry)
