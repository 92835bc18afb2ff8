"""GeoPackage and GeoParquet: tables, metadata, row groups."""

import json
import sqlite3
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pyogrio
import pytest
import shapely

from geoshape.layers.read import open_layer, read_batches
from geoshape.layers.write import OutputBatch, plan_output, write_batches
from tests.layers import samples
from tests.layers.opened import UTM, reopen, write_sample


def test_geopackage_tables(tmp_path: Path) -> None:
    path = tmp_path / "out.gpkg"
    write_sample(path, UTM, "MultiPolygon")
    with sqlite3.connect(path) as connection:
        one = connection.execute
        assert one("PRAGMA integrity_check").fetchall() == [("ok",)]
        assert one("PRAGMA foreign_key_check").fetchall() == []
        assert one("SELECT geometry_type_name, srs_id, z, m FROM gpkg_geometry_columns").fetchall() == [
            ("MULTIPOLYGON", 32632, 0, 0)
        ]
        assert one("SELECT min_x, max_y FROM gpkg_contents").fetchall() == [(0.0, 6.0)]
        assert one("SELECT count(*) FROM gpkg_extensions WHERE extension_name = 'gpkg_rtree_index'").fetchone() == (1,)
        comments = dict(one("SELECT column_name, description FROM gpkg_data_columns").fetchall())
        assert comments["area_m2"] == "area, holes excluded [m2]"
        md = one(
            "SELECT m.md_scope, m.mime_type, r.reference_scope, r.table_name FROM gpkg_metadata m "
            "JOIN gpkg_metadata_reference r ON r.md_file_id = m.id"
        ).fetchall()
        assert md == [("dataset", "application/json", "table", "out")]
        extensions = one("SELECT table_name, scope FROM gpkg_extensions WHERE extension_name = 'gpkg_metadata'")
        assert sorted(extensions.fetchall()) == [
            ("gpkg_metadata", "read-write"),
            ("gpkg_metadata_reference", "read-write"),
        ]
        # One row in five has no geometry and one is empty: three are in the index.
        assert one("SELECT count(*) FROM rtree_out_geom").fetchone() == (3,)
    connection.close()


def test_geopackage_of_multipolygons_holds_no_polygon(tmp_path: Path) -> None:
    path = tmp_path / "out.gpkg"
    result = write_sample(path, UTM, "MultiPolygon")
    _, geometry = reopen(path)
    assert geometry is not None
    kinds = {shapely.from_wkb(value).geom_type for value in geometry if value is not None}
    assert kinds == {"MultiPolygon"}
    assert result.warnings == ()


def test_geopackage_keeps_attributes_called_as_its_own_columns(tmp_path: Path) -> None:
    path = tmp_path / "out.gpkg"
    rows = pa.record_batch({"fid": pa.array([7, 7]), "Geom": pa.array(["a", "b"]), "row": pa.array([0, 1])})
    content = samples.LayerContent(rows.schema, (), UTM, "Polygon")
    plan = plan_output(path, content)
    write_batches(plan, [OutputBatch(rows, samples.wkb(samples.POLYGON, None))])
    info = pyogrio.read_info(path)
    assert list(info["fields"]) == ["fid", "Geom", "row"]
    assert (info["fid_column"], info["geometry_name"]) == ("fid_1", "geom_1")
    table, _ = reopen(path)
    assert table.column("fid").to_pylist() == [7, 7]


def test_geoparquet_metadata(tmp_path: Path) -> None:
    path = tmp_path / "out.parquet"
    plan = plan_output(path, samples.plain_content("Unknown", UTM))
    write_batches(plan, [samples.numbered(samples.POLYGON, samples.POLYGON_Z, None), samples.numbered(samples.MULTI)])
    metadata = pq.read_metadata(path)
    geo = json.loads(metadata.metadata[b"geo"])
    assert (geo["version"], geo["primary_column"]) == ("1.1.0", "geometry")
    column = geo["columns"]["geometry"]
    assert column["encoding"] == "WKB"
    assert column["geometry_types"] == ["MultiPolygon", "Polygon", "Polygon Z"]
    assert column["bbox"] == [0.0, 0.0, 5.0, 6.0, 6.0, 7.0]
    assert column["covering"] == {"bbox": {side: ["bbox", side] for side in ("xmin", "ymin", "xmax", "ymax")}}
    table = pq.read_table(path)
    assert table.column("bbox").to_pylist()[2:] == [None, {"xmin": 0.0, "ymin": 0.0, "xmax": 6.0, "ymax": 6.0}]
    assert metadata.row_group(0).column(1).compression == "ZSTD"


def test_geoparquet_row_groups(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("geoshape.layers.parquet_writer._GROUP_ROWS", 4)
    path = tmp_path / "out.parquet"
    plan = plan_output(path, samples.plain_content("Polygon", UTM))
    write_batches(plan, [samples.numbered(*[samples.POLYGON] * 3, first=3 * i) for i in range(5)])
    metadata = pq.read_metadata(path)
    assert [metadata.row_group(i).num_rows for i in range(metadata.num_row_groups)] == [6, 6, 3]
    assert pq.read_table(path).column("row").to_pylist() == list(range(15))


def test_geoparquet_turns_extended_wkb_into_iso(tmp_path: Path) -> None:
    path = tmp_path / "out.parquet"
    shape = shapely.from_wkt(samples.POLYGON_Z)
    extended = shapely.to_wkb(shape, output_dimension=3, flavor="extended")
    rows = pa.record_batch({"row": pa.array([0], pa.int64())})
    plan = plan_output(path, samples.plain_content("Polygon Z", UTM))
    write_batches(plan, [OutputBatch(rows, pa.array([extended], pa.binary()))])
    stored = pq.read_table(path).column("geometry").to_pylist()[0]
    assert stored == shapely.to_wkb(shape, output_dimension=3, flavor="iso") != extended


def test_geoparquet_opens_in_geopandas(tmp_path: Path) -> None:
    geopandas = pytest.importorskip("geopandas")
    path = tmp_path / "out.parquet"
    write_sample(path, UTM)
    frame = geopandas.read_parquet(path, bbox=(-1, -1, 0.5, 0.5))
    assert frame.crs == "EPSG:32632"
    assert frame["name"].tolist() == ["Ost-See", 'Weiher, "klein"', ""]


def test_json_stays_json_in_geopackage(tmp_path: Path) -> None:
    source = tmp_path / "in.geojson"
    feature = {"type": "Feature", "properties": {"tags": {"a": [1, None]}}, "geometry": None}
    source.write_text(json.dumps({"type": "FeatureCollection", "features": [feature]}))
    info = open_layer(source)
    plan = plan_output(tmp_path / "out.gpkg", samples.LayerContent.like(info, ()), sources=[info])
    write_batches(plan, (OutputBatch(rows.attributes, rows.geometry) for rows in read_batches(info)))
    found = pyogrio.read_info(tmp_path / "out.gpkg")
    assert (found["ogr_types"], found["ogr_subtypes"]) == (["OFTString"], ["OFSTJSON"])


def test_heights_that_are_no_number_do_not_count(tmp_path: Path) -> None:
    path = tmp_path / "a.parquet"
    plan = plan_output(path, samples.plain_content("Polygon Z", UTM))
    shape = shapely.polygons([[0.0, 0.0, np.nan], [1.0, 0.0, np.nan], [1.0, 1.0, np.nan], [0.0, 0.0, np.nan]])
    rows = pa.record_batch({"row": pa.array([0], pa.int64())})
    write_batches(plan, [OutputBatch(rows, pa.array([shapely.to_wkb(shape)], pa.binary()))])
    geo = json.loads(pq.read_metadata(path).metadata[b"geo"])
    assert geo["columns"]["geometry"]["bbox"] == [0.0, 0.0, 1.0, 1.0]
