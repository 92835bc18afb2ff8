"""What cannot be read, and what is said of it."""

import sqlite3
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from geoshape.errors import GeoshapeError, ReadError
from geoshape.layers import vector_reader
from geoshape.layers.crs import crs_wkt
from geoshape.layers.read import list_layers, open_layer, read_batches
from tests.layers import samples
from tests.layers.opened import make, table_of
from tests.layers.test_archives_and_texts import parts, zipped


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


def test_crs_that_nobody_understands() -> None:
    with pytest.raises(ReadError, match=r"^a.gpkg: its CRS is not understood \(.*\); write the file anew$"):
        crs_wkt("a.gpkg", "EPSG:999999")
