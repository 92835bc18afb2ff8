"""Layers are opened and read as other means read them, in batches of bounded size."""

import gzip
import json
import pickle
import sqlite3
import zipfile
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pyarrow as pa
import pyogrio
import pyproj
import pytest
import shapely
from pyogrio.raw import read_arrow, write_arrow

from geoshape.errors import GeoshapeError, GeoshapeWarning, LayerChoiceError, OptionError, ReadError
from geoshape.layers import vector_reader
from geoshape.layers.crs import crs_wkt
from geoshape.layers.plan import plan_output
from geoshape.layers.read import LayerInfo, LayerSummary, list_layers, open_layer, read_batches
from geoshape.layers.sources import archive_of
from geoshape.layers.write import write_batches
from tests.layers import samples

REAL = [samples.WORLD, samples.COUNTIES, samples.WILDERNESS, samples.MEXICO]


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


@pytest.mark.parametrize("path", REAL, ids=lambda path: path.stem)
@pytest.mark.parametrize("max_vertices", [1, 5000, 150_000])
def test_real_layers(path: Path, max_vertices: int) -> None:
    info = open_layer(path)
    table, geometry = table_of(info, max_vertices)
    _, expected = read_arrow(path)
    assert table.to_pydict() == expected.drop_columns([expected.column_names[-1]]).to_pydict()
    assert geometry == expected.column(expected.num_columns - 1).to_pylist()
    described = pyogrio.read_info(path)
    assert info.row_count == described["features"] == table.num_rows
    assert info.bounds == described["total_bounds"]
    assert info.layer_names == (info.layer,) == (path.stem,)
    assert (info.has_z, info.has_m) == (False, False)


def test_text_in_another_encoding() -> None:
    table, _ = table_of(open_layer(samples.MEXICO))
    # The name stands in ISO 8859-1 in the file.
    assert "Michoacan de Ocampo" in table.column("NAME").to_pylist()


def test_batches_are_bounded_by_vertices() -> None:
    for batch in read_batches(open_layer(samples.COUNTIES), max_vertices=2000):
        vertices = shapely.get_num_coordinates(shapely.from_wkb(batch.geometry.to_pylist())).sum()
        assert batch.n_rows == 1 or vertices <= 2000


def test_info_goes_to_other_processes() -> None:
    info = open_layer(samples.WORLD, where="pop > 1e9", bbox=(-180, -90, 180, 90))
    copy = pickle.loads(pickle.dumps(info))
    assert copy == info
    assert table_of(copy) == table_of(info)


def test_listed_layers(tmp_path: Path) -> None:
    path = make(tmp_path / "a.gpkg", layer="lakes")
    make(path, "POINT (1 2)", None, layer="wells")
    write_arrow(pa.table({"x": pa.array([1, 2, 3])}), path, layer="notes", driver="GPKG", append=True)
    assert list_layers(path) == (
        LayerSummary("lakes", "Unknown", 1),
        LayerSummary("wells", "Unknown", 2),
        LayerSummary("notes", None, None),
    )


def points_and_polygons(path: Path) -> Path:
    square = shapely.to_wkb(shapely.box(0, 0, 1, 1))
    for name, kind, shape in [
        ("wells", "Point", "POINT (1 2)"),
        ("lakes", "Polygon", None),
        ("ponds", "Polygon", None),
    ]:
        wkb = square if shape is None else shapely.to_wkb(shapely.from_wkt(shape))
        table = pa.table({"g": pa.array([wkb], pa.binary())})
        write_arrow(table, path, layer=name, driver="GPKG", geometry_name="g", geometry_type=kind, crs="EPSG:32632")
    return path


def test_choice_of_layer(tmp_path: Path) -> None:
    path = points_and_polygons(tmp_path / "a.gpkg")
    with pytest.raises(LayerChoiceError) as caught:
        open_layer(path)
    assert str(caught.value) == (
        f"{path}: several layers and none named; choose with --layer from: lakes (Polygon), ponds (Polygon)"
    )
    assert open_layer(path, layer="ponds").layer == "ponds"
    assert open_layer(path, layer="wells").geometry_type == "Point"
    with pytest.raises(LayerChoiceError) as caught:
        open_layer(path, layer="Ponds")
    assert str(caught.value) == (
        f"{path}: there is no layer 'Ponds'; choose with --layer from: wells (Point), lakes (Polygon), ponds (Polygon)"
    )


def test_the_only_layer_of_polygons_is_chosen(tmp_path: Path) -> None:
    path = points_and_polygons(tmp_path / "a.gpkg")
    with sqlite3.connect(path) as connection:
        connection.execute("PRAGMA foreign_keys = OFF")
        connection.execute("DELETE FROM gpkg_geometry_columns WHERE table_name = 'ponds'")
        connection.execute("UPDATE gpkg_contents SET data_type = 'attributes' WHERE table_name = 'ponds'")
    connection.close()
    info = open_layer(path)
    assert (info.layer, info.layer_names) == ("lakes", ("wells", "lakes", "ponds"))


@pytest.mark.filterwarnings("ignore:'crs' was not provided")
def test_crs_that_says_there_is_none(tmp_path: Path) -> None:
    path = tmp_path / "a.gpkg"
    table = pa.table({"g": pa.array([shapely.to_wkb(shapely.box(0, 0, 1, 1))], pa.binary())})
    write_arrow(table, path, driver="GPKG", geometry_name="g", geometry_type="Polygon")
    for srs_id in (-1, 0, 99999):
        with sqlite3.connect(path) as connection:
            known = connection.execute("SELECT 1 FROM gpkg_spatial_ref_sys WHERE srs_id = ?", (srs_id,)).fetchone()
            if known:
                connection.execute("UPDATE gpkg_contents SET srs_id = ?", (srs_id,))
                connection.execute("UPDATE gpkg_geometry_columns SET srs_id = ?", (srs_id,))
        connection.close()
        assert open_layer(path).crs_wkt is None


def test_where_as_the_driver_takes_it() -> None:
    for path, where in [
        (samples.WORLD, "continent = 'Europe' AND pop > 1e7 -- the large ones"),
        (samples.WORLD, "name_long LIKE 'f%' OR pop IS NULL"),
        (samples.WILDERNESS, "STATE = 'CO' AND AREA > 0.01"),
    ]:
        info = open_layer(path, where=where)
        table, geometry = table_of(info)
        _, expected = read_arrow(path, where=where)
        assert 0 < table.num_rows == expected.num_rows == len(geometry)
        assert table.column(1).to_pylist() == expected.column(1).to_pylist()
        assert info.row_count is None


def test_bbox_meets_geometries() -> None:
    bbox = (-110, 37, -108, 39)
    table, geometry = table_of(open_layer(samples.COUNTIES, bbox=bbox))
    every, shapes = table_of(open_layer(samples.COUNTIES))
    meets = shapely.intersects(shapely.from_wkb(shapes), shapely.box(*bbox))
    assert table.column("GEOID").to_pylist() == [
        value for value, is_met in zip(every.column("GEOID").to_pylist(), meets, strict=True) if is_met
    ]
    assert 0 < len(geometry) < len(shapes)


def test_a_crs_without_a_name_is_one(tmp_path: Path) -> None:
    crs = pyproj.CRS("+proj=laea +lat_0=10 +lon_0=20")
    assert crs.name == "unknown"
    for suffix in (".gpkg", ".parquet", ".fgb", ".shp"):
        info = open_layer(make(tmp_path / f"a{suffix}", crs=crs.to_wkt()))
        assert info.crs_wkt is not None
        operation = pyproj.CRS(info.crs_wkt).coordinate_operation
        assert [parameter.value for parameter in operation.params][:2] == [10, 20]


def test_what_the_driver_complains_of_is_passed_on_once(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text('a,WKT\n1,"POLYGON ((0 0,1 0,1 1,0 0))"\n' + '2,"POLYGON ((0 0,1 0"\n' * 3000)
    info = open_layer(path)
    with pytest.warns(GeoshapeWarning) as said:
        _, geometry = table_of(info)
    assert [str(item.message) for item in said] == [f"{path}: Ignoring invalid WKT: POLYGON ((0 0,1 0"]
    assert sum(value is None for value in geometry) == 3000


@pytest.mark.parametrize("bbox", [(1, 0, 0, 1), (0, 1, 1, 0), (0, 0, 1, float("nan")), (0, 0, 1)])
def test_no_box(bbox: tuple[float, float, float, float]) -> None:
    with pytest.raises(OptionError, match=r"is no box; give x_min, y_min, x_max, y_max in the layer's CRS$"):
        open_layer(samples.WORLD, bbox=bbox)


BAD_WHERE = [
    (samples.WORLD, "foo = 1", "no such column: foo"),
    (samples.WORLD, "pop > ", "incomplete input"),
    (samples.WORLD, "pop = = 1", 'near "=": syntax error'),
    (samples.WILDERNESS, "foo = 1", '"foo" not recognised as an available field'),
    (samples.WILDERNESS, "AREA >", "SQL Expression Parsing Error: syntax error, unexpected end of string"),
]


@pytest.mark.parametrize(("path", "where", "reason"), BAD_WHERE)
def test_bad_where(path: Path, where: str, reason: str) -> None:
    with pytest.raises(ReadError) as caught:
        open_layer(path, where=where)
    columns = ", ".join(pyogrio.read_info(path)["fields"])
    assert str(caught.value) == (
        f"{path}: --where {where!r} cannot be used ({reason}); the layer's columns are: {columns}"
    )


def test_nulls_and_empties_keep_their_place(tmp_path: Path) -> None:
    geometries = [None, samples.POLYGON, samples.EMPTY, None, samples.MULTI, None]
    for suffix in (".gpkg", ".fgb", ".shp", ".geojson", ".parquet"):
        path = make(tmp_path / f"a{suffix}", *geometries)
        for where in (None, "row >= 0"):
            table, geometry = table_of(open_layer(path, where=where))
            assert table.column("row").to_pylist() == [0, 1, 2, 3, 4, 5]
            is_lost = [value is None or shapely.from_wkb(value).is_empty for value in geometry]
            assert is_lost == [True, False, True, True, False, True], suffix


def test_no_rows(tmp_path: Path) -> None:
    path = tmp_path / "a.gpkg"
    write_batches(plan_output(path, samples.content()), [])
    info = open_layer(path)
    assert list(read_batches(info)) == []
    assert (info.row_count, info.bounds) == (0, None)
    assert info.schema.names[:2] == ["name", "count"]


def test_layer_without_attributes(tmp_path: Path) -> None:
    path = tmp_path / "a.gpkg"
    table = pa.table({"g": samples.wkb(samples.POLYGON, None)})
    write_arrow(table, path, driver="GPKG", geometry_name="g", geometry_type="Polygon", crs="EPSG:4326")
    (batch,) = read_batches(open_layer(path))
    assert (batch.n_rows, batch.attributes.num_columns) == (2, 0)


def test_early_end_of_reading_closes_the_file(tmp_path: Path) -> None:
    path = make(tmp_path / "a.fgb", *[samples.POLYGON] * 10)
    batches = read_batches(open_layer(path), max_vertices=5)
    next(batches)
    batches.close()  # type: ignore[attr-defined]
    assert pyogrio.get_gdal_config_option("OGR_FLATGEOBUF_STREAM_BASE_IMPL") is None


@pytest.mark.parametrize(
    ("text", "kind", "dimensions"),
    [
        (samples.POLYGON, "Polygon", (False, False)),
        (samples.POLYGON_Z, "Polygon Z", (True, False)),
        (samples.POLYGON_M, "Polygon M", (False, True)),
        (samples.POLYGON_ZM, "Polygon ZM", (True, True)),
    ],
)
def test_dimensions(tmp_path: Path, text: str, kind: str, dimensions: tuple[bool, bool]) -> None:
    plan = plan_output(tmp_path / "a.shp", samples.plain_content(kind))
    write_batches(plan, [samples.numbered(text)])
    info = open_layer(tmp_path / "a.shp")
    assert (info.geometry_type, (info.has_z, info.has_m)) == (kind, dimensions)
    assert info.warnings == ()


def test_dimensions_nobody_told(tmp_path: Path) -> None:
    info = open_layer(make(tmp_path / "a.gpkg", samples.POLYGON_Z))
    assert (info.geometry_type, info.has_z, info.has_m) == ("Unknown", None, None)


# --- archives and other paths ---------------------------------------------------------------------------------------


def zipped(path: Path, *files: Path, folder: str = "") -> Path:
    with zipfile.ZipFile(path, "w") as archive:
        for file in files:
            archive.write(file, folder + file.name)
    return path


def parts(shapefile: Path) -> list[Path]:
    return sorted(shapefile.parent.glob(f"{shapefile.stem}.*"))


@pytest.mark.parametrize("name", ["a.zip", "A.ZIP", "coutwildrnp.shz"])
@pytest.mark.parametrize("folder", ["", "inner/folder/"])
def test_zipped_shapefile(tmp_path: Path, name: str, folder: str) -> None:
    path = zipped(tmp_path / name, *parts(samples.WILDERNESS), folder=folder)
    info = open_layer(path)
    assert (info.layer, info.row_count, info.path) == ("coutwildrnp", 67, str(path))
    assert table_of(info)[0] == table_of(open_layer(samples.WILDERNESS))[0]


def test_zipped_geopackage_beside_other_files(tmp_path: Path) -> None:
    path = zipped(tmp_path / "a.gpkg.zip", samples.WORLD, samples.WORLD.with_name("SOURCE.txt"))
    assert open_layer(path).row_count == 177
    assert open_layer(f"/vsizip/{path}/world.gpkg").row_count == 177


def test_several_layers_in_an_archive(tmp_path: Path) -> None:
    path = zipped(tmp_path / "a.zip", *parts(samples.WILDERNESS), *parts(samples.MEXICO))
    with pytest.raises(LayerChoiceError, match=r"from: coutwildrnp \(Polygon\), mexicojoin \(Polygon\)$"):
        open_layer(path)
    assert open_layer(path, layer="mexicojoin").row_count == 32


def test_layers_of_one_name_in_an_archive(tmp_path: Path) -> None:
    path = tmp_path / "a.zip"
    with zipfile.ZipFile(path, "w") as archive:
        for folder in ("x", "y", "__MACOSX"):
            for file in parts(samples.WILDERNESS):
                archive.write(file, f"{folder}/{file.name}")
    inner = [f"/vsizip/{{{path}}}/{folder}/coutwildrnp.shp" for folder in ("x", "y")]
    with pytest.raises(LayerChoiceError) as caught:
        open_layer(path, layer="coutwildrnp")
    assert str(caught.value) == (
        f"{path}: 2 layers are called 'coutwildrnp'; give the path of one: {inner[0]}, {inner[1]}"
    )
    assert open_layer(inner[1]).row_count == 67


def test_zipped_folder_of_a_file_geodatabase(tmp_path: Path) -> None:
    database = tmp_path / "a.gdb"
    table = pa.table({"row": pa.array([1, 2], pa.int32()), "g": samples.wkb(samples.MULTI, samples.MULTI)})
    write_arrow(table, database, driver="OpenFileGDB", geometry_name="g", geometry_type="MultiPolygon", crs="EPSG:4326")
    path = tmp_path / "a.zip"
    with zipfile.ZipFile(path, "w") as archive:
        for file in database.iterdir():
            archive.write(file, f"a.gdb/{file.name}")
    assert open_layer(path).row_count == open_layer(database).row_count == 2


def test_packed_geojson(tmp_path: Path) -> None:
    plain = make(tmp_path / "a.geojson", samples.POLYGON, samples.MULTI)
    packed = tmp_path / "a.geojson.gz"
    packed.write_bytes(gzip.compress(plain.read_bytes()))
    assert open_layer(packed).row_count == 2


def test_text_sequence(tmp_path: Path) -> None:
    for suffix in (".geojsonl", ".geojsons"):
        path = make(tmp_path / f"a{suffix}", samples.POLYGON, samples.MULTI, None)
        assert path.read_bytes().startswith(b"\x1e" if suffix == ".geojsons" else b"{")
        info = open_layer(path)
        assert (info.driver, table_of(info)[0].num_rows) == ("GeoJSONSeq", 3)


def test_csv_with_geometries_as_text(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text('row,WKT\n1,"POLYGON ((0 0,1 0,1 1,0 0))"\n2,\n', encoding="utf-8")
    info = open_layer(path)
    _, geometry = table_of(info)
    assert [value is None for value in geometry] == [False, True]
    assert info.crs_wkt is None


def test_csv_in_another_encoding(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_bytes('name,WKT\ncafé,"POLYGON ((0 0,1 0,1 1,0 0))"\nplain,\n'.encode("cp1252"))
    with pytest.warns(GeoshapeWarning, match="not UTF-8 was taken as Windows-1252"):
        table, _ = table_of(open_layer(path))
    assert table.column("name").to_pylist() == ["café", "plain"]


def test_json_lists_and_times_with_zones(tmp_path: Path) -> None:
    path = tmp_path / "a.geojson"
    properties = [
        {"list": [1, 2], "json": {"a": 1}, "time": "2020-01-01T00:00:00+01:00", "yes": True, "whole": 1},
        {"list": None, "json": None, "time": "2020-01-01T00:00:00-05:00", "yes": None, "whole": None},
    ]
    features = [{"type": "Feature", "properties": p, "geometry": None} for p in properties]
    path.write_text(json.dumps({"type": "FeatureCollection", "features": features}))
    info = open_layer(path)
    table, _ = table_of(info)
    assert {field.name: str(field.type) for field in info.schema} == {
        "list": "list<item: int32>",
        "json": "string",
        "time": "timestamp[ms, tz=UTC]",
        "yes": "bool",
        "whole": "int32",
    }
    assert [str(value) for value in table.column("time").to_pylist()] == [
        "2019-12-31 23:00:00+00:00",
        "2020-01-01 05:00:00+00:00",
    ]
    assert json.loads(table.column("json")[0].as_py()) == {"a": 1}
    assert table.column("whole").to_pylist() == [1, None]


# --- what cannot be read ---------------------------------------------------------------------------------------------


def cut(path: Path, source: Path, share: float = 0.5) -> Path:
    data = source.read_bytes()
    path.write_bytes(data[: int(len(data) * share)])
    return path


def read_all(path: Path | str, **filters: object) -> None:
    for _ in read_batches(open_layer(path, **filters)):  # type: ignore[arg-type]
        pass


def failure(path: Path | str, reading: Callable[[Path | str], object] = read_all) -> str:
    with pytest.raises(GeoshapeError) as caught:
        reading(path)
    assert isinstance(caught.value, ReadError)
    text = str(caught.value)
    assert "\n" not in text
    assert text.startswith(f"{path}: ")
    return text.removeprefix(f"{path}: ")


def test_missing(tmp_path: Path) -> None:
    assert failure(tmp_path / "no.gpkg") == "there is no such file; check the path"
    assert failure(tmp_path / "no" / "no.gpkg") == "there is no such file; check the path"
    assert failure("/vsizip/no.zip/no.shp") == "there is no such file; check the path"
    (tmp_path / "file").touch()
    assert failure(tmp_path / "file" / "a.gpkg") == "a part of the path is a file, not a folder; check the path"
    assert failure(str(tmp_path / ("x" * 300))) == "File name too long; check the path"


def test_address_that_does_not_answer() -> None:
    text = failure("http://127.0.0.1:1/a.gpkg")
    assert text.startswith("cannot be opened (")
    assert text.endswith("); check that the file is whole and not in use")


def test_without_rights(public_path: Path) -> None:
    closed = public_path / "closed"
    closed.mkdir()
    inner = make(closed / "a.gpkg")
    secret = make(public_path / "secret.gpkg")
    secret.chmod(0o000)
    closed.chmod(0o000)
    with samples.as_nobody():
        assert failure(inner) == "the folder may not be entered; ask for the right to read it"
        assert failure(secret) == "may not be read; ask for the right to read it"
        assert failure(closed) == "may not be read; ask for the right to read it"
    closed.chmod(0o755)


def test_no_layer(tmp_path: Path) -> None:
    path = tmp_path / "notes.txt"
    path.write_text("Dear diary\n")
    assert failure(path) == "no format that GDAL reads as a layer; check that the file is a vector layer"
    path = tmp_path / "empty.geojson"
    path.touch()
    assert failure(path) == "no format that GDAL reads as a layer; check that the file is a vector layer"
    assert failure(tmp_path) == "is a folder that GDAL does not take for a layer; name a file in it"


def test_no_geometry_column(tmp_path: Path) -> None:
    path = tmp_path / "a.csv"
    path.write_text("a,b\n1,2\n")
    assert failure(path) == "layer 'a' has no geometry column; name a layer that has one"


def test_no_layer_at_all(tmp_path: Path) -> None:
    path = tmp_path / "a.gpx"
    path.write_text('<gpx version="1.1" creator="hand" xmlns="http://www.topografix.com/GPX/1/1"></gpx>')
    assert [summary.name for summary in list_layers(path)][:1] == ["waypoints"]
    path = tmp_path / "a.vrt"
    path.write_text("<OGRVRTDataSource></OGRVRTDataSource>")
    assert failure(path) == "the file holds no layer; name a file that does"


def test_count_that_is_out_of_date(tmp_path: Path) -> None:
    path = make(tmp_path / "a.gpkg", samples.POLYGON, samples.POLYGON)
    with sqlite3.connect(path) as connection:
        connection.execute("UPDATE gpkg_ogr_contents SET feature_count = 7")
    connection.close()
    info = open_layer(path)
    assert info.row_count == 7
    assert table_of(info)[0].num_rows == 2


def test_cut_off(tmp_path: Path) -> None:
    text = failure(cut(tmp_path / "a.gpkg", samples.COUNTIES))
    assert text.startswith("cannot be opened (")
    assert "database disk image is malformed" in text
    whole = make(tmp_path / "whole.geojson", *[samples.POLYGON] * 50)
    text = failure(cut(tmp_path / "a.geojson", whole))
    assert text.startswith("cannot be opened (Failed to read GeoJSON data; At line")


def test_shapefile_cut_off(tmp_path: Path) -> None:
    for part in parts(samples.WILDERNESS):
        (tmp_path / part.name).write_bytes(part.read_bytes())
    path = cut(tmp_path / "coutwildrnp.shp", samples.WILDERNESS)
    size = samples.WILDERNESS.stat().st_size
    assert failure(path) == f"the file is cut off ({size // 2} of {size} bytes); fetch or copy it again"
    path.write_bytes(b"\0" * 10)
    assert failure(path) == "the file is cut off (10 of 100 bytes); fetch or copy it again"


@pytest.mark.parametrize("where", [None, "row >= 0"])
def test_flatgeobuf_cut_off(tmp_path: Path, where: str | None) -> None:
    whole = make(tmp_path / "whole.fgb", *[samples.POLYGON] * 50)
    path = cut(tmp_path / "a.fgb", whole)
    assert failure(path, lambda path: read_all(path, where=where)) == "the file is cut off; fetch or copy it again"
    read_all(whole, where=where)


def test_damage_found_while_reading(tmp_path: Path) -> None:
    path = make(tmp_path / "a.gpkg", *[samples.POLYGON] * 5000)
    data = bytearray(path.read_bytes())
    # Pages of the middle, where the rows are.
    middle = len(data) // 2 // 4096 * 4096
    data[middle : middle + 40_960] = b"\xff" * 40_960
    path.write_bytes(data)
    text = failure(path)
    assert text.startswith("layer 'a' cannot be read after row ")
    assert text.endswith("(database disk image is malformed); check that the file is whole")


def test_archives_without_layers(tmp_path: Path) -> None:
    path = zipped(tmp_path / "a.zip", samples.WORLD.with_name("SOURCE.txt"))
    text = failure(path)
    assert text.startswith("the archive holds no layer (looked for .csv, .fgb, .geojson")
    assert text.endswith("); unpack it and name the file")
    path.write_bytes(b"PK no archive")
    assert failure(path) == "the archive is damaged or none (File is not a zip file); fetch it again"


def test_stream_that_ends_before_its_time(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = make(tmp_path / "a.gpkg", *[samples.POLYGON] * 6)
    info = replace(open_layer(path), rows_per_read=2)
    whole = vector_reader._Reader.next_batch
    monkeypatch.setattr(
        vector_reader._Reader, "next_batch", lambda self, done: None if done == 4 else whole(self, done)
    )
    with pytest.raises(ReadError) as caught:
        list(read_batches(info))
    assert str(caught.value) == (
        f"{path}: layer 'a' cannot be read after row 4 (6 rows are there); check that the file is whole"
    )


def test_stream_that_breaks_off(tmp_path: Path) -> None:
    path = make(tmp_path / "a.gpkg", *[samples.POLYGON] * 5000)
    data = bytearray(path.read_bytes())
    middle = len(data) // 2 // 4096 * 4096
    data[middle : middle + 40_960] = b"\xff" * 40_960
    path.write_bytes(data)
    text = failure(path, lambda path: read_all(path, where="row >= 0"))
    assert text.startswith("layer 'a' cannot be read after row ")
    assert text.endswith("(database disk image is malformed); check that the file is whole")


def test_file_that_goes_away(tmp_path: Path) -> None:
    path = make(tmp_path / "a.gpkg")
    info = open_layer(path)
    path.unlink()
    with pytest.raises(ReadError, match=r"a.gpkg: cannot be opened \(.*No such file"):
        list(read_batches(info))


@pytest.mark.parametrize(
    ("path", "file"),
    [
        ("a/b.gpkg", "a/b.gpkg"),
        ("/vsizip/x.zip/a/b.shp", "x.zip"),
        ("/vsizip//data/x.zip/b.shp", "/data/x.zip"),
        ("/vsizip/{/data/x.odd}/b.shp", "/data/x.odd"),
        ("/vsizip/{/data/x.odd", "/data/x.odd"),
        ("/vsigzip//data/x.geojson.gz", "/data/x.geojson.gz"),
        ("/vsizip//vsicurl/https://example.org/x.zip/b.shp", "https://example.org/x.zip"),
        ("/vsi", ""),
    ],
)
def test_file_behind_a_path(path: str, file: str) -> None:
    assert archive_of(path) == file


def test_crs_that_nobody_understands() -> None:
    with pytest.raises(ReadError, match=r"^a.gpkg: its CRS is not understood \(.*\); write the file anew$"):
        crs_wkt("a.gpkg", "EPSG:999999")
