"""Layers in archives and in files of text."""

import gzip
import json
import zipfile
from pathlib import Path

import pyarrow as pa
import pytest
from pyogrio.raw import write_arrow

from geoshape.errors import GeoshapeWarning, LayerChoiceError
from geoshape.layers.read import open_layer
from geoshape.layers.sources import archive_of
from tests.layers import samples
from tests.layers.opened import make, table_of


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
