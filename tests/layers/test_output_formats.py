"""Every format is written and opened again by other means: types, nulls, names, CRS, order, geometry, lineage."""

import csv
import json
import sqlite3
import warnings
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pyogrio
import pyproj
import pytest
import shapely
from pyogrio.raw import read_arrow

from geoshape.errors import GroundWarning
from geoshape.layers.lineage import read_lineage
from geoshape.layers.read import open_layer, read_batches
from geoshape.layers.write import OutputBatch, OutputResult, plan_output, write_batches
from tests.layers import samples

UTM = pyproj.CRS("EPSG:32632").to_wkt()
WGS84 = pyproj.CRS("EPSG:4326").to_wkt()
SUFFIXES = (".gpkg", ".parquet", ".fgb", ".shp", ".geojson", ".geojsonl", ".csv")
WITH_GEOMETRY = SUFFIXES[:-1]


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


PLAIN = {
    "name": pa.string(),
    "count": pa.int32(),
    "big": pa.int64(),
    "ratio": pa.float64(),
    "is_wet": pa.bool_(),
    "day": pa.date32(),
    "moment": pa.timestamp("ms", "UTC"),
    "shape_status": pa.string(),
    "shape_note": pa.string(),
    "area_m2": pa.float64(),
    "part_count": pa.int64(),
    "fd_p02": pa.float64(),
}
# What a format cannot tell: FlatGeobuf has no days, GeoJSON guesses whole numbers by their size, dBase has no times.
TYPES = {
    ".gpkg": PLAIN,
    ".parquet": PLAIN,
    ".fgb": PLAIN | {"day": pa.timestamp("ms"), "moment": pa.timestamp("ms")},
    ".geojson": PLAIN | {"part_count": pa.int32()},
    ".geojsonl": PLAIN | {"part_count": pa.int32()},
    ".shp": {
        "name": pa.string(),
        # 2 147 483 647 has ten digits, and ten digits may be more than 32 bits.
        "count": pa.int64(),
        "big": pa.int64(),
        "ratio": pa.float64(),
        "is_wet": pa.bool_(),
        "day": pa.date32(),
        "moment": pa.string(),
        "shp_status": pa.string(),
        "shp_note": pa.string(),
        "area_m2": pa.float64(),
        "n_parts": pa.int64(),
        "fd_p02": pa.float64(),
    },
    ".csv": dict.fromkeys(PLAIN, pa.string()),
}


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_names_and_types(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    result = write_sample(path)
    assert (result.path, result.rows) == (str(path), 5)
    table, _ = reopen(path)
    assert dict(zip(table.column_names, [field.type for field in table.schema], strict=True)) == TYPES[suffix]


@pytest.mark.parametrize("suffix", SUFFIXES[:-1])
def test_values_and_nulls(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    write_sample(path)
    table, _ = reopen(path)
    found = table.rename_columns(list(PLAIN)).to_pydict()
    expected = {name: array.to_pylist() for name, array in samples.ATTRIBUTES.items()} | samples.EXPECTED_MEASURES
    for name in ("count", "big", "ratio", "is_wet", *samples.EXPECTED_MEASURES):
        assert found[name] == expected[name], name
    # dBase cannot tell an empty text from none.
    texts = [text or None for text in expected["name"]] if suffix == ".shp" else expected["name"]
    assert found["name"] == texts
    days = [None if day is None else str(day)[:10] for day in found["day"]]
    assert days == ["2024-02-29", None, "1900-01-01", None, "2000-01-01"]
    assert str(found["moment"][0])[:19].replace("T", " ") == "2024-02-29 12:30:15"
    assert found["moment"][1:] == [None] * 4


def test_csv_text(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    write_sample(path)
    with path.open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0]) == list(PLAIN)
    assert [row["name"] for row in rows] == ["Ost-See", "", 'Weiher, "klein"', "", "Éire\nÜ"]
    assert [float(row["ratio"] or "nan") for row in rows][2:] == [-1.5e300, 1e-12, 0.1]
    assert [float(row["area_m2"] or "nan") for row in rows][:4:3] == [1.5, 1.2345678901234567e-18]
    assert [row["area_m2"] for row in rows][1::3] == ["", ""]
    assert [row["part_count"] for row in rows] == ["1", "", "2", "1", "0"]
    # An empty text is quoted, a null is not there.
    assert path.read_text(encoding="utf-8").splitlines()[4].startswith('"",4,')


def test_csv_on_standard_output(capsysbinary: pytest.CaptureFixture[bytes]) -> None:
    plan = plan_output("-", samples.plain_content())
    result = write_batches(plan, [samples.numbered(samples.POLYGON, None)], samples.lineage)
    assert (result.path, result.rows, result.extra_files) == ("-", 2, ())
    assert capsysbinary.readouterr().out == b'"row"\n0\n1\n'


@pytest.mark.parametrize("suffix", WITH_GEOMETRY)
def test_geometry_and_order(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    plan = plan_output(path, samples.plain_content("Unknown", WGS84))
    # Far apart and back again: an index that sorts would show.
    shapes = [shapely.box(x, y, x + 1, y + 1) for x, y in [(100, 50), (-100, -50), (0, 0), (101, 51), (-99, -49)]]
    texts = [None, *(shape.wkt for shape in shapes), samples.MULTI]
    write_batches(plan, [samples.numbered(*texts[:3]), samples.numbered(*texts[3:], first=3)])
    table, geometry = reopen(path)
    assert geometry is not None
    assert table.column("row").to_pylist() == list(range(7))
    assert geometry[0] is None
    found = shapely.from_wkb(geometry[1:])
    expected = shapely.from_wkt(texts[1:])
    assert shapely.equals(found, expected).all()
    # No coordinate has moved by a digit, whatever ring comes first.
    assert (shapely.bounds(found) == shapely.bounds(expected)).all()


@pytest.mark.parametrize("suffix", WITH_GEOMETRY)
def test_empty_geometry_keeps_its_row(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    plan = plan_output(path, samples.plain_content("Polygon", WGS84))
    result = write_batches(plan, [samples.numbered(samples.EMPTY, samples.POLYGON, samples.EMPTY)])
    lost = (f"empty geometries are null in {plan.format.name} (2 rows)",) if suffix in {".fgb", ".shp"} else ()
    assert result.warnings == lost
    table, geometry = reopen(path)
    assert geometry is not None
    assert table.column("row").to_pylist() == [0, 1, 2]
    assert [value is None or shapely.from_wkb(value).is_empty for value in geometry] == [True, False, True]


@pytest.mark.parametrize("suffix", [".gpkg", ".parquet"])
def test_bytes_pass_through(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    plan = plan_output(path, samples.plain_content("Unknown", UTM))
    given = [samples.POLYGON, samples.MULTI, samples.POLYGON_Z, samples.POLYGON_M, samples.POLYGON_ZM, samples.EMPTY]
    batch = samples.numbered(*given, None)
    write_batches(plan, [batch])
    info = open_layer(path)
    kept = [value for rows in read_batches(info) for value in rows.geometry.to_pylist()]
    assert kept == batch.geometry.to_pylist()


@pytest.mark.parametrize("suffix", [".gpkg", ".parquet", ".fgb", ".shp"])
@pytest.mark.parametrize("crs", ["EPSG:32632", "EPSG:2154", "ESRI:102008"])
def test_crs(tmp_path: Path, suffix: str, crs: str) -> None:
    path = tmp_path / f"out{suffix}"
    write_sample(path, pyproj.CRS(crs).to_wkt())
    if suffix == ".parquet":
        geo = json.loads(pq.read_metadata(path).metadata[b"geo"])
        found = pyproj.CRS.from_json_dict(geo["columns"]["geometry"]["crs"])
    else:
        found = pyproj.CRS(pyogrio.read_info(path)["crs"])
    named = pyproj.CRS(crs)
    assert found.equals(named, ignore_axis_order=True) or found.to_authority() == named.to_authority()


@pytest.mark.parametrize("suffix", [".gpkg", ".parquet", ".fgb", ".shp"])
def test_no_crs_stays_none(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    write_sample(path, None)
    assert open_layer(path).crs_wkt is None


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_no_rows(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    plan = plan_output(path, samples.content("MultiPolygon", WGS84))
    assert write_batches(plan, []).rows == 0
    if suffix in {".geojson", ".geojsonl"}:
        # Without rows these have no place for columns.
        assert pyogrio.read_info(path)["features"] == 0 if suffix == ".geojson" else path.read_bytes() == b""
        return
    table, _ = reopen(path)
    assert table.num_rows == 0
    assert table.column_names == list(TYPES[suffix])


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_lineage(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    result = write_sample(path)
    found = read_lineage(path)
    assert found is not None
    assert found["options"] == {"ground": "centred", "samples": 256}
    assert found["rows_by_status"] == {"ok": 5}
    assert set(found["versions"]) >= {"geoshape", "shapely", "GEOS", "GDAL", "PROJ", "numpy"}
    beside = tmp_path / f"out{suffix}.lineage.json"
    assert beside.exists() == (suffix not in {".gpkg", ".parquet"})
    assert (str(beside) in result.extra_files) == beside.exists()


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


@pytest.mark.parametrize("suffix", [".geojson", ".geojsonl"])
def test_geojson_is_wgs84_with_rings_by_the_right_hand(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    clockwise = "POLYGON ((500000 0, 500000 100000, 600000 100000, 600000 0, 500000 0))"
    plan = plan_output(path, samples.plain_content("Polygon", UTM))
    expected = "geometries are transformed from WGS 84 / UTM zone 32N to longitude and latitude"
    assert plan.warnings == (f"{plan.format.name} means WGS 84: {expected}",)
    write_batches(plan, [samples.numbered(clockwise, None)])
    text = path.read_text(encoding="utf-8")
    features = json.loads(text)["features"] if suffix == ".geojson" else [json.loads(t) for t in text.splitlines()]
    assert "crs" not in text
    assert features[1]["geometry"] is None
    shape = shapely.geometry.shape(features[0]["geometry"])
    assert shape.exterior.is_ccw
    # The western corners lie on the central meridian of zone 32, 9 degrees east; the others by PROJ.
    to_degrees = pyproj.Transformer.from_crs("EPSG:32632", "OGC:CRS84", always_xy=True)
    corners = [to_degrees.transform(*corner) for corner in [(600000, 0), (600000, 100000), (500000, 100000)]]
    east, north = max(corner[0] for corner in corners), max(corner[1] for corner in corners)
    assert shape.bounds == pytest.approx((9.0, 0.0, east, north), abs=1e-9)


def test_geojson_nulls_what_json_cannot_say(tmp_path: Path) -> None:
    path = tmp_path / "out.geojson"
    rows = pa.record_batch({"x": pa.array([float("nan"), float("inf"), 1.0, None])})
    plan = plan_output(path, samples.LayerContent(rows.schema, (), WGS84, "Polygon"))
    bad = shapely.to_wkb(shapely.polygons([[0, 0], [1, 0], [float("inf"), 1], [0, 0]]))
    good = samples.wkb(samples.POLYGON)[0].as_py()
    result = write_batches(plan, [OutputBatch(rows, pa.array([good, good, bad, None], pa.binary()))])
    features = json.loads(path.read_text())["features"]
    assert [feature["properties"] for feature in features] == [{"x": None}, {"x": None}, {"x": 1.0}, {"x": None}]
    assert [feature["geometry"] is None for feature in features] == [False, False, True, True]
    assert result.warnings == (
        "x: infinite values, which GeoJSON cannot hold, are null (1 row)",
        "geometries with coordinates that are not finite are null in GeoJSON (1 row)",
    )


def test_geojson_without_crs_warns(tmp_path: Path) -> None:
    plan = plan_output(tmp_path / "out.geojson", samples.plain_content("Polygon", None))
    assert plan.warnings == ("GeoJSON means WGS 84, but the layer has no CRS: coordinates are written as they are",)
    write_batches(plan, [samples.numbered("POLYGON ((1000 0, 2000 0, 2000 1000, 1000 0))")])
    _, geometry = reopen(tmp_path / "out.geojson")
    assert geometry is not None
    assert shapely.from_wkb(geometry[0]).bounds == (1000, 0, 2000, 1000)


@pytest.mark.parametrize("name", ["EPSG:4326", "OGC:CRS84", "EPSG:4979"])
def test_wgs84_is_not_transformed(tmp_path: Path, name: str) -> None:
    plan = plan_output(tmp_path / "out.geojson", samples.plain_content("Polygon", pyproj.CRS(name).to_wkt()))
    assert plan.warnings == ()


def test_shapefile_parts(tmp_path: Path) -> None:
    path = tmp_path / "out.shp"
    write_sample(path, UTM)
    assert {file.suffix for file in tmp_path.iterdir()} == {".shp", ".shx", ".dbf", ".prj", ".cpg", ".csv", ".json"}
    assert (tmp_path / "out.cpg").read_text().strip() == "UTF-8"
    with (tmp_path / "out.columns.csv").open(encoding="utf-8", newline="") as file:
        rows = {row["name"]: row for row in csv.DictReader(file)}
    assert rows["part_count"] == {
        "name": "part_count",
        "short_name": "n_parts",
        "unit": "1",
        "meaning": "parts, as read",
        "source": "",
    }
    assert rows["name"]["short_name"] == "name"


def dbf_fields(path: Path) -> dict[str, tuple[str, int, int]]:
    """Read a dBase header by hand."""
    data = path.read_bytes()
    header = int.from_bytes(data[8:10], "little")
    fields = {}
    for at in range(32, header - 1, 32):
        field = data[at : at + 32]
        fields[field[:11].rstrip(b"\0").decode()] = (chr(field[11]), field[16], field[17])
    return fields


def test_shapefile_numbers_are_declared_numbers(tmp_path: Path) -> None:
    path = tmp_path / "out.shp"
    write_sample(path)
    fields = dbf_fields(path.with_suffix(".dbf"))
    assert fields["area_m2"] == fields["ratio"] == ("F", 24, 15)
    assert fields["count"][0] == fields["n_parts"][0] == "N"
    assert fields["is_wet"][0] == "L"
    assert pyogrio.read_info(path)["ogr_types"][3] == "OFTReal"


def test_shapefile_cuts_long_text_and_says_so(tmp_path: Path) -> None:
    path = tmp_path / "out.shp"
    rows = pa.record_batch({"text": pa.array(["é" * 200, "x" * 254, None]), "raw": pa.array([b"\1" * 200, b"", None])})
    plan = plan_output(path, samples.LayerContent(rows.schema, (), UTM, "Polygon"))
    result = write_batches(plan, [OutputBatch(rows, samples.wkb(None, None, None))])
    table, _ = reopen(path)
    assert table.column("text").to_pylist() == ["é" * 127, "x" * 254, None]
    assert result.warnings == (
        "text: text longer than 254 bytes is cut (1 row)",
        "raw: text longer than 254 bytes is cut (1 row)",
    )


def test_shapefile_nulls_infinities(tmp_path: Path) -> None:
    path = tmp_path / "out.shp"
    rows = pa.record_batch({"x": pa.array([float("inf"), float("nan"), None, 2.0])})
    plan = plan_output(path, samples.LayerContent(rows.schema, (), UTM, "Polygon"))
    result = write_batches(plan, [OutputBatch(rows, samples.wkb(*[samples.POLYGON] * 4))])
    table, _ = reopen(path)
    assert table.column("x").to_pylist() == [None, None, None, 2.0]
    assert result.warnings == ("x: infinite values, which Shapefile cannot hold, are null (1 row)",)


def test_shapefile_of_polygons_nulls_other_geometries(tmp_path: Path) -> None:
    path = tmp_path / "out.shp"
    plan = plan_output(path, samples.plain_content("Unknown", UTM))
    result = write_batches(plan, [samples.numbered(samples.POLYGON, "POINT (1 2)", "LINESTRING (0 0, 1 1)")])
    table, geometry = reopen(path)
    assert geometry is not None
    assert table.column("row").to_pylist() == [0, 1, 2]
    assert [value is None for value in geometry] == [False, True, True]
    assert result.warnings == ("geometries that are no Polygon are null in Shapefile (2 rows)",)


DIMENSIONS = [
    (samples.POLYGON_Z, "Polygon Z", "Polygon Z"),
    (samples.POLYGON_M, "Polygon M", "Polygon M"),
    (samples.POLYGON_ZM, "Polygon ZM", "Polygon ZM"),
    (samples.POLYGON_Z, "Unknown", "Polygon Z"),
    (samples.POLYGON_ZM, "Unknown", "Polygon ZM"),
]


@pytest.mark.parametrize("suffix", [".gpkg", ".parquet", ".shp"])
@pytest.mark.parametrize(("text", "declared", "kept"), DIMENSIONS)
def test_heights_and_measures_are_kept(tmp_path: Path, suffix: str, text: str, declared: str, kept: str) -> None:
    path = tmp_path / f"out{suffix}"
    plan = plan_output(path, samples.plain_content(declared, UTM))
    result = write_batches(plan, [samples.numbered(text)])
    info = open_layer(path)
    # A GeoPackage of any type says nothing of dimensions, and GeoParquet 1.1 has no name for measures.
    if not (declared == "Unknown" and suffix == ".gpkg") and not ("M" in kept and suffix == ".parquet"):
        assert info.geometry_type.removeprefix("Multi") == kept
    (rows,) = read_batches(info)
    assert samples.wkt(rows.geometry) == samples.wkt(samples.wkb(text))
    assert result.warnings == ()


@pytest.mark.parametrize("declared", ["Polygon Z", "Unknown"])
def test_flatgeobuf_keeps_heights(tmp_path: Path, declared: str) -> None:
    path = tmp_path / "out.fgb"
    plan = plan_output(path, samples.plain_content(declared, UTM))
    write_batches(plan, [samples.numbered(samples.POLYGON_Z, samples.POLYGON, None)])
    assert pyogrio.read_info(path)["geometry_type"] == "MultiPolygon Z"
    _, geometry = reopen(path)
    assert geometry is not None
    shapes = shapely.from_wkb(geometry)
    assert shapely.get_coordinates(shapes[0], include_z=True)[:, 2].tolist() == [5, 6, 7, 5]
    assert shapes[2] is None


def test_flatgeobuf_leaves_measures_out(tmp_path: Path) -> None:
    path = tmp_path / "out.fgb"
    plan = plan_output(path, samples.plain_content("Polygon ZM", UTM))
    assert plan.warnings == ("FlatGeobuf has no room for measures (M); they are left out",)
    write_batches(plan, [samples.numbered(samples.POLYGON_ZM)])
    _, geometry = reopen(path)
    assert geometry is not None
    assert shapely.get_coordinates(shapely.from_wkb(geometry[0]), include_z=True)[:, 2].tolist() == [5, 6, 7, 5]


def test_flatgeobuf_without_heights_says_what_it_drops(tmp_path: Path) -> None:
    path = tmp_path / "out.fgb"
    plan = plan_output(path, samples.plain_content("Polygon", UTM))
    result = write_batches(plan, [samples.numbered(samples.POLYGON, samples.POLYGON_Z)])
    assert result.warnings == ("heights are left out, as the FlatGeobuf layer has none (1 row)",)


def test_flatgeobuf_of_mixed_geometries(tmp_path: Path) -> None:
    path = tmp_path / "out.fgb"
    plan = plan_output(path, samples.plain_content("Unknown", UTM))
    write_batches(plan, [samples.numbered(samples.POLYGON, "POINT (1 2)", samples.MULTI, None)])
    _, geometry = reopen(path)
    assert geometry is not None
    kinds = [None if value is None else shapely.from_wkb(value).geom_type for value in geometry]
    assert kinds == ["Polygon", "Point", "MultiPolygon", None]


EXOTIC = {
    "whole": pa.array([2**63 + 5, 7], pa.uint64()),
    "small": pa.array([255, None], pa.uint8()),
    "half": pa.array([1.5, None], pa.float16()),
    "exact": pa.array([1, None], pa.decimal128(9, 2)),
    "list": pa.array([[1, 2], None], pa.list_(pa.int32())),
    "nested": pa.array([{"a": [1], "b": "x"}, None], pa.struct([("a", pa.list_(pa.int8())), ("b", pa.string())])),
    "raw": pa.array([b"\x00\xff", None], pa.binary()),
    "nothing": pa.nulls(2),
    "lasting": pa.array([1500, None], pa.duration("ms")),
    "clock": pa.array([3_723_000_000, None], pa.time64("us")),
}


@pytest.mark.parametrize("suffix", SUFFIXES)
def test_rare_types_become_what_the_format_has(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"out{suffix}"
    rows = pa.RecordBatch.from_pydict(EXOTIC)
    plan = plan_output(path, samples.LayerContent(rows.schema, (), WGS84, "Polygon"))
    result = write_batches(plan, [OutputBatch(rows, samples.wkb(samples.POLYGON, samples.POLYGON))])
    table, _ = reopen(path)
    if suffix == ".parquet":
        assert table.drop_columns(["half"]).to_pydict() == rows.drop_columns(["half"]).to_pydict()
        return
    first, second = table.to_pylist()
    assert result.warnings == (f"whole: values above 2^63, which {plan.format.name} cannot hold, are null (1 row)",)
    assert str(first["whole"] or "") == ""
    assert str(second["whole"]) == "7"
    assert float(first["half"]) == 1.5
    assert float(first["exact"]) == 1.0
    assert json.loads(first["nested"]) == {"a": [1], "b": "x"}
    listed = first["list"] if isinstance(first["list"], list) else json.loads(first["list"])
    assert listed == [1, 2]
    assert str(first["clock"])[:8] == "01:02:03"
    assert first["raw"] in {b"\x00\xff", "00ff", "00FF"}
    assert not any(second[name] for name in ("small", "exact", "nested", "raw", "nothing", "lasting", "clock"))


def test_json_stays_json_in_geopackage(tmp_path: Path) -> None:
    source = tmp_path / "in.geojson"
    feature = {"type": "Feature", "properties": {"tags": {"a": [1, None]}}, "geometry": None}
    source.write_text(json.dumps({"type": "FeatureCollection", "features": [feature]}))
    info = open_layer(source)
    plan = plan_output(tmp_path / "out.gpkg", samples.LayerContent.like(info, ()), sources=[info])
    write_batches(plan, (OutputBatch(rows.attributes, rows.geometry) for rows in read_batches(info)))
    found = pyogrio.read_info(tmp_path / "out.gpkg")
    assert (found["ogr_types"], found["ogr_subtypes"]) == (["OFTString"], ["OFSTJSON"])


def test_real_layer_through_every_format(tmp_path: Path) -> None:
    info = open_layer(samples.COUNTIES)
    before = pa.Table.from_batches([rows.attributes for rows in read_batches(info)])
    shapes = shapely.from_wkb([value for rows in read_batches(info) for value in rows.geometry.to_pylist()])
    for suffix in (".gpkg", ".parquet", ".fgb", ".shp"):
        path = tmp_path / f"counties{suffix}"
        plan = plan_output(path, samples.LayerContent.like(info, ()), sources=[info])
        write_batches(plan, (OutputBatch(rows.attributes, rows.geometry) for rows in read_batches(info)))
        table, geometry = reopen(path)
        assert table.to_pydict() == before.to_pydict(), suffix
        assert geometry is not None
        assert shapely.equals(shapely.from_wkb(geometry), shapes).all(), suffix
        assert open_layer(path).crs_wkt is not None


@pytest.mark.parametrize("suffix", [".gpkg", ".parquet"])
def test_warnings_of_the_producer_come_through(tmp_path: Path, suffix: str) -> None:
    plan = plan_output(tmp_path / f"a{suffix}", samples.plain_content("Polygon", UTM))

    def batches() -> Iterator[OutputBatch]:
        for i in range(3):
            warnings.warn("bends a little", GroundWarning, stacklevel=1)
            warnings.warn("all is nothing", RuntimeWarning, stacklevel=1)
            yield samples.numbered(samples.POLYGON, first=i)

    with pytest.warns() as said:
        result = write_batches(plan, batches())
    assert {(item.category, str(item.message)) for item in said} == {
        (GroundWarning, "bends a little"),
        (RuntimeWarning, "all is nothing"),
    }
    assert result.warnings == ()


def test_what_the_driver_complains_of_is_in_the_result(tmp_path: Path) -> None:
    plan = plan_output(tmp_path / "a.gpkg", samples.plain_content("Polygon", UTM))
    result = write_batches(plan, [samples.numbered(samples.MULTI, samples.MULTI)])
    (text,) = result.warnings
    assert text.startswith("A geometry of type MULTIPOLYGON is inserted into layer a of geometry type POLYGON")


def test_flatgeobuf_of_nothing_known(tmp_path: Path) -> None:
    path = tmp_path / "a.fgb"
    write_batches(plan_output(path, samples.plain_content("Unknown", UTM)), [])
    assert pyogrio.read_info(path)["geometry_type"] == "Unknown"
    write_batches(plan_output(path, samples.plain_content("MultiPolygon Z", UTM), overwrite=True), [])
    assert pyogrio.read_info(path)["geometry_type"] == "MultiPolygon Z"


def test_whole_numbers_without_sign_that_fit(tmp_path: Path) -> None:
    rows = pa.record_batch({"n": pa.array([2**63 - 1, None], pa.uint64()), "b": pa.array([{"x": b"\1"}, None])})
    plan = plan_output(tmp_path / "a.gpkg", samples.LayerContent(rows.schema, (), UTM, "Polygon"))
    result = write_batches(plan, [OutputBatch(rows, samples.wkb(None, None))])
    table, _ = reopen(tmp_path / "a.gpkg")
    assert table.column("n").to_pylist() == [2**63 - 1, None]
    assert json.loads(str(table.column("b")[0])) == {"x": "01"}
    assert result.warnings == ()


def test_heights_that_are_no_number_do_not_count(tmp_path: Path) -> None:
    path = tmp_path / "a.parquet"
    plan = plan_output(path, samples.plain_content("Polygon Z", UTM))
    shape = shapely.polygons([[0.0, 0.0, np.nan], [1.0, 0.0, np.nan], [1.0, 1.0, np.nan], [0.0, 0.0, np.nan]])
    rows = pa.record_batch({"row": pa.array([0], pa.int64())})
    write_batches(plan, [OutputBatch(rows, pa.array([shapely.to_wkb(shape)], pa.binary()))])
    geo = json.loads(pq.read_metadata(path).metadata[b"geo"])
    assert geo["columns"]["geometry"]["bbox"] == [0.0, 0.0, 1.0, 1.0]


def test_files_beside_are_named_as_the_output_is(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("sub").mkdir()
    for target in ("a.shp", "sub/a.shp"):
        plan = plan_output(target, samples.plain_content())
        result = write_batches(plan, [], samples.lineage)
        assert result.extra_files == (f"{target}.lineage.json", target.replace(".shp", ".columns.csv"))
    Path("link.fgb").symlink_to("sub/real.fgb")
    result = write_batches(plan_output("link.fgb", samples.plain_content()), [], samples.lineage)
    assert result.extra_files == (str(tmp_path / "sub" / "real.fgb.lineage.json"),)
    assert Path("sub/real.fgb").exists()
