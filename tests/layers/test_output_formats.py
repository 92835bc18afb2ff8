"""Every format is written and opened again by other means: types, nulls, names, CRS, order, geometry, lineage."""

import json
import warnings
from collections.abc import Iterator
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pyogrio
import pyproj
import pytest
import shapely

from geoshape.errors import GroundWarning
from geoshape.layers.lineage import read_lineage
from geoshape.layers.read import open_layer, read_batches
from geoshape.layers.write import OutputBatch, plan_output, write_batches
from tests.layers import samples
from tests.layers.opened import SUFFIXES, UTM, WGS84, reopen, write_sample

WITH_GEOMETRY = SUFFIXES[:-1]


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


def test_whole_numbers_without_sign_that_fit(tmp_path: Path) -> None:
    rows = pa.record_batch({"n": pa.array([2**63 - 1, None], pa.uint64()), "b": pa.array([{"x": b"\1"}, None])})
    plan = plan_output(tmp_path / "a.gpkg", samples.LayerContent(rows.schema, (), UTM, "Polygon"))
    result = write_batches(plan, [OutputBatch(rows, samples.wkb(None, None))])
    table, _ = reopen(tmp_path / "a.gpkg")
    assert table.column("n").to_pylist() == [2**63 - 1, None]
    assert json.loads(str(table.column("b")[0])) == {"x": "01"}
    assert result.warnings == ()


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
