"""Shapefile and FlatGeobuf: what they cannot hold, and what becomes of it."""

import csv
from pathlib import Path

import pyarrow as pa
import pyogrio
import pytest
import shapely

from geoshape.layers.write import OutputBatch, plan_output, write_batches
from tests.layers import samples
from tests.layers.opened import UTM, reopen, write_sample


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


def test_flatgeobuf_of_nothing_known(tmp_path: Path) -> None:
    path = tmp_path / "a.fgb"
    write_batches(plan_output(path, samples.plain_content("Unknown", UTM)), [])
    assert pyogrio.read_info(path)["geometry_type"] == "Unknown"
    write_batches(plan_output(path, samples.plain_content("MultiPolygon Z", UTM), overwrite=True), [])
    assert pyogrio.read_info(path)["geometry_type"] == "MultiPolygon Z"
