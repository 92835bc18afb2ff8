"""GeoJSON and CSV."""

import csv
import json
from pathlib import Path

import pyarrow as pa
import pyproj
import pytest
import shapely

from geoshape.layers.write import OutputBatch, plan_output, write_batches
from tests.layers import samples
from tests.layers.opened import UTM, WGS84, reopen, write_sample
from tests.layers.test_output_formats import PLAIN


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
