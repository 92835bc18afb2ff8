"""GeoParquet as others write it: encodings, CRS, covering, filters, faults."""

import json
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pyproj
import pytest
import shapely
from pyogrio.raw import read_arrow

from geoshape.errors import ReadError
from geoshape.layers.filters import Filter, meets_box
from geoshape.layers.plan import plan_output
from geoshape.layers.read import list_layers, open_layer, read_batches
from geoshape.layers.write import OutputBatch, write_batches
from tests.layers import samples


@pytest.fixture(scope="module")
def counties() -> gpd.GeoDataFrame:
    return gpd.read_file(samples.COUNTIES)


def rows_of(path: Path, **filters: Any) -> tuple[pa.Table, Any]:
    info = open_layer(path, **filters)
    batches = list(read_batches(info))
    table = pa.Table.from_batches([batch.attributes for batch in batches], schema=info.schema)
    values = [value for batch in batches for value in batch.geometry.to_pylist()]
    return table, shapely.from_wkb(values)


@pytest.mark.parametrize("encoding", ["WKB", "geoarrow"])
@pytest.mark.parametrize("covering", [False, True])
def test_files_of_geopandas(tmp_path: Path, counties: gpd.GeoDataFrame, encoding: str, covering: bool) -> None:
    path = tmp_path / "a.parquet"
    counties.to_parquet(path, geometry_encoding=encoding, write_covering_bbox=covering, row_group_size=30)
    info = open_layer(path)
    assert (info.driver, info.layer, info.row_count, info.geometry_name) == ("Parquet", "a", 198, "geometry")
    assert info.schema.names == [name for name in counties.columns if name != "geometry"]
    assert info.bounds == tuple(counties.total_bounds)
    assert pyproj.CRS(info.crs_wkt) == "EPSG:4269"
    table, shapes = rows_of(path)
    assert table.to_pydict() == counties.drop(columns="geometry").to_dict("list")
    assert shapely.equals(shapes, counties.geometry.to_numpy()).all()
    assert list_layers(path)[0].geometry_type == info.geometry_type == "MultiPolygon"


def native(tmp_path: Path, shapes: list[str | None], name: str) -> Path:
    path = tmp_path / "native.parquet"
    frame = gpd.GeoDataFrame(geometry=[None if s is None else shapely.from_wkt(s) for s in shapes], crs="EPSG:32632")
    frame["row"] = range(len(shapes))
    frame.to_parquet(path, geometry_encoding="geoarrow")
    geo = json.loads(pq.read_metadata(path).metadata[b"geo"])
    assert geo["columns"]["geometry"]["encoding"] == name
    return path


@pytest.mark.parametrize("shape", [samples.POLYGON, samples.MULTI])
def test_native_encodings(tmp_path: Path, shape: str) -> None:
    name = "polygon" if shape == samples.POLYGON else "multipolygon"
    path = native(tmp_path, [None, shape, None, shape, shape], name)
    _, shapes = rows_of(path)
    assert [s is None for s in shapes] == [True, False, True, False, False]
    assert shapely.equals_exact(shapes[[1, 3, 4]], shapely.from_wkt(shape)).all()


def test_native_encoding_with_heights(tmp_path: Path) -> None:
    path = native(tmp_path, [samples.POLYGON_Z], "polygon")
    assert open_layer(path).geometry_type == "Polygon Z"
    _, shapes = rows_of(path)
    assert shapely.get_coordinates(shapes, include_z=True)[:, 2].tolist() == [5, 6, 7, 5]


WHERE = [
    "STATEFP = '08' AND ALAND > 5000000000",
    "NAME LIKE 'B%' OR NAME IN ('Douglas', 'Kit Carson')",
    "AWATER < 1000000 AND NOT (STATEFP = '20')",
    '"NAME" IS NULL',
    "CAST(COUNTYFP AS integer) BETWEEN 1 AND 9",
]


@pytest.mark.parametrize("where", WHERE)
def test_where_gives_the_rows_that_gdal_gives(tmp_path: Path, counties: gpd.GeoDataFrame, where: str) -> None:
    path = tmp_path / "a.parquet"
    counties.to_parquet(path)
    shp = tmp_path / "a.shp"
    counties.to_file(shp)
    table, shapes = rows_of(path, where=where)
    # A shapefile is filtered by GDAL's own dialect.
    _, expected = read_arrow(shp, where=where)
    assert table.column("GEOID").to_pylist() == expected.column("GEOID").to_pylist()
    assert len(shapes) == table.num_rows


def test_where_on_every_type(tmp_path: Path) -> None:
    path = tmp_path / "a.parquet"
    plan = plan_output(path, samples.content("Unknown", None))
    write_batches(plan, [samples.batch(plan)])
    for where, expected in [
        ("is_wet = 1", [0, 3]),
        ("count IS NULL", [1]),
        ("big = 9007199254740993", [0]),
        ("ratio < 0", [2]),
        ("day = '2024/02/29'", [0]),
        ("moment > '2024/01/01 00:00:00'", [0]),
        ("name = ''", [3]),
        ("name LIKE '%klein%'", [2]),
        ("part_count IN (1, 2) AND shape_status <> 'ok'", [3]),
    ]:
        table, _ = rows_of(path, where=where)
        names = samples.ATTRIBUTES["name"].take(pa.array(expected, pa.int64())).to_pylist()
        assert table.column("name").to_pylist() == names, where


@pytest.mark.parametrize(
    ("where", "reason"),
    [
        ("foo = 1", '"foo" not recognised as an available field'),
        ("NAME >", "SQL Expression Parsing Error: syntax error, unexpected end of string"),
        # A batch of rows knows nothing of these, and would answer all the same.
        ("fid < 3", "GeoParquet has no fid"),
        ("NAME = 'FID' AND OGR_GEOM_AREA > 1", "GeoParquet has no OGR_GEOM_AREA"),
    ],
)
def test_bad_where(tmp_path: Path, counties: gpd.GeoDataFrame, where: str, reason: str) -> None:
    path = tmp_path / "a.parquet"
    counties[["NAME", "geometry"]].to_parquet(path)
    with pytest.raises(ReadError) as caught:
        open_layer(path, where=where)
    assert str(caught.value) == f"{path}: --where {where!r} cannot be used ({reason}); the layer's columns are: NAME"


def test_where_on_rare_types(tmp_path: Path) -> None:
    columns = {
        "fid": pa.array([7, 8]),
        "lasting": pa.array([5, None], pa.duration("ms")),
        "exact": pa.array([1, 2], pa.decimal128(9, 2)),
        "nested": pa.array([{"a": 1}, None]),
        "list": pa.array([[1], None]),
        "raw": pa.array([b"x", None]),
        "whole": pa.array([1, 2], pa.uint64()),
        "geometry": samples.wkb(samples.POLYGON, None),
    }
    path = with_geo(tmp_path / "a.parquet", geo_of(), pa.table(columns))
    for where in ("fid = 8 AND exact = 2", "whole > 1 AND nested IS NULL", "list IS NULL", "NOT (raw IS NOT NULL)"):
        assert rows_of(path, where=where)[0].column("fid").to_pylist() == [8], where


def test_where_without_columns(tmp_path: Path) -> None:
    table = pa.table({"geometry": samples.wkb(samples.POLYGON, None)})
    path = with_geo(tmp_path / "a.parquet", geo_of(), table)
    with pytest.raises(ReadError, match=r"cannot be used \(.*\); the layer's columns are: none$"):
        open_layer(path, where="a = 1")
    assert len(rows_of(path, where="1 = 1")[1]) == 2
    assert len(rows_of(path, where="1 = 0")[1]) == 0


def test_filter_of_no_rows() -> None:
    assert Filter("x = 1").keeps(pa.record_batch({"x": pa.array([], pa.int64())}), 0).tolist() == []


@pytest.mark.parametrize("covering", [False, True])
def test_bbox(tmp_path: Path, counties: gpd.GeoDataFrame, covering: bool) -> None:
    path = tmp_path / "a.parquet"
    counties.to_parquet(path, write_covering_bbox=covering, row_group_size=20)
    bbox = (-110, 37, -108, 39)
    table, _ = rows_of(path, bbox=bbox)
    meets = counties.intersects(shapely.box(*bbox))
    assert table.column("GEOID").to_pylist() == counties.GEOID[meets].tolist()
    with_where, _ = rows_of(path, bbox=bbox, where="STATEFP = '08'")
    assert with_where.column("GEOID").to_pylist() == counties.GEOID[meets & (counties.STATEFP == "08")].tolist()


SLANTED = [
    # An envelope that meets the box, a geometry that does not; one that touches it; one in it; one round it.
    ("POLYGON ((0 0, 10 0, 10 1, 1 1, 1 10, 0 10, 0 0))", False),
    ("POLYGON ((6 6, 8 6, 8 8, 6 6))", True),
    ("POLYGON ((5.2 5.2, 5.8 5.2, 5.8 5.8, 5.2 5.2))", True),
    ("POLYGON ((0 0, 20 0, 20 20, 0 20, 0 0))", True),
    ("POLYGON ((0 0, 20 0, 20 20, 0 20, 0 0), (1 1, 1 19, 19 19, 19 1, 1 1))", False),
    ("POLYGON ((5.5 5, 9 9, 5.5 9, 9 5, 5.5 5))", True),
    (None, False),
    (samples.EMPTY, False),
]


@pytest.mark.parametrize("suffix", [".parquet", ".gpkg", ".fgb", ".shp", ".geojson"])
def test_bbox_means_the_same_in_every_format(tmp_path: Path, suffix: str) -> None:
    path = tmp_path / f"a{suffix}"
    plan = plan_output(path, samples.plain_content("Polygon", pyproj.CRS("EPSG:4326").to_wkt()))
    write_batches(plan, [samples.numbered(*[text for text, _ in SLANTED])])
    table, _ = rows_of(path, bbox=(5, 5, 6, 6))
    assert table.column("row").to_pylist() == [i for i, (_, meets) in enumerate(SLANTED) if meets]


def test_box_and_a_geometry_that_geos_refuses(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:
        raise shapely.GEOSException("TopologyException")

    monkeypatch.setattr(shapely, "intersects", refuse)
    wkb = samples.wkb("POLYGON ((0 0, 9 9, 0 9, 9 0, 0 0))", samples.POLYGON)
    assert meets_box(wkb, (3, 3, 4, 4)).tolist() == [True, False]


def test_bbox_skips_row_groups(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.parquet"
    frame = gpd.GeoDataFrame({"row": range(10)}, geometry=[shapely.box(i, 0, i + 0.5, 1) for i in range(10)])
    frame.to_parquet(path, write_covering_bbox=True, row_group_size=2)
    asked: list[list[int]] = []
    whole = pq.ParquetFile.iter_batches

    def spy(self: pq.ParquetFile, **options: Any) -> Any:
        asked.append(options["row_groups"])
        return whole(self, **options)

    monkeypatch.setattr(pq.ParquetFile, "iter_batches", spy)
    assert rows_of(path, bbox=(4.6, 0, 7.2, 1))[0].column("row").to_pylist() == [5, 6, 7]
    assert rows_of(path, bbox=(100, 0, 101, 1))[0].num_rows == 0
    assert rows_of(path)[0].num_rows == 10
    assert asked == [[2, 3], [], [0, 1, 2, 3, 4]]


def with_geo(path: Path, geo: Any, table: pa.Table | None = None) -> Path:
    if table is None:
        table = pa.table({"row": pa.array([1]), "geometry": samples.wkb(samples.POLYGON)})
    text = geo if isinstance(geo, str) else json.dumps(geo)
    pq.write_table(table.replace_schema_metadata({"geo": text} if geo is not None else {}), path)
    return path


def geo_of(**column: Any) -> dict[str, Any]:
    return {
        "version": "1.1.0",
        "primary_column": "geometry",
        "columns": {"geometry": {"encoding": "WKB", "geometry_types": [], **column}},
    }


def test_crs_left_out_null_and_given(tmp_path: Path) -> None:
    path = tmp_path / "a.parquet"
    assert pyproj.CRS(open_layer(with_geo(path, geo_of())).crs_wkt) == "OGC:CRS84"
    assert open_layer(with_geo(path, geo_of(crs=None))).crs_wkt is None
    utm = pyproj.CRS("EPSG:32632")
    assert pyproj.CRS(open_layer(with_geo(path, geo_of(crs=utm.to_json_dict()))).crs_wkt) == utm


def test_what_the_metadata_leaves_open(tmp_path: Path) -> None:
    info = open_layer(with_geo(tmp_path / "a.parquet", geo_of()))
    assert (info.geometry_type, info.has_z, info.has_m, info.bounds) == ("Unknown", None, None, None)
    info = open_layer(with_geo(tmp_path / "a.parquet", geo_of(bbox=[0, 1, 2, 3, 4, 5], geometry_types=["Polygon Z"])))
    assert (info.geometry_type, info.has_z, info.bounds) == ("Polygon Z", True, (0, 1, 3, 4))
    mixed = geo_of(geometry_types=["Polygon", "Point"])
    assert open_layer(with_geo(tmp_path / "a.parquet", mixed)).geometry_type == "Unknown"


def test_edges_that_are_not_straight_are_told(tmp_path: Path) -> None:
    info = open_layer(with_geo(tmp_path / "a.parquet", geo_of(edges="spherical")))
    assert info.warnings == ("the file says that edges are spherical; they are taken as straight in its coordinates",)


def test_types_become_plain(tmp_path: Path) -> None:
    table = pa.table(
        {
            "kind": pa.array(["a", "b", "a"]).dictionary_encode(),
            "long": pa.array(["x", None, "z"], pa.large_string()),
            "list": pa.array([[1], None, []], pa.large_list(pa.int16())),
            "whole": pa.array([1, None, 2**40], pa.int64()),
            "geometry": samples.wkb(samples.POLYGON, None, samples.EMPTY).cast(pa.large_binary()),
        }
    )
    info = open_layer(with_geo(tmp_path / "a.parquet", geo_of(), table))
    assert [str(kind) for kind in info.schema.types] == ["string", "string", "list<item: int16>", "int64"]
    (batch,) = read_batches(info)
    assert batch.attributes.to_pydict() == table.drop_columns(["geometry"]).to_pydict()
    assert batch.geometry.to_pylist() == table.column("geometry").to_pylist()


def test_layer_without_attributes(tmp_path: Path) -> None:
    table = pa.table({"geometry": samples.wkb(samples.POLYGON, None)})
    path = with_geo(tmp_path / "a.parquet", geo_of(), table)
    (batch,) = read_batches(open_layer(path))
    assert (batch.n_rows, batch.attributes.num_columns) == (2, 0)
    (batch,) = read_batches(open_layer(path, bbox=(0, 0, 1, 1)))
    assert batch.n_rows == 1


def test_file_without_a_telling_name(tmp_path: Path) -> None:
    path = with_geo(tmp_path / "download", geo_of())
    assert (open_layer(path).driver, open_layer(path).row_count) == ("Parquet", 1)


def failure(path: Path) -> str:
    with pytest.raises(ReadError) as caught:
        for _ in read_batches(open_layer(path)):
            pass
    text = str(caught.value)
    assert "\n" not in text
    return text.removeprefix(f"{path}: ")


def test_no_geometry_column(tmp_path: Path) -> None:
    path = with_geo(tmp_path / "a.parquet", None)
    assert failure(path) == ("has no geometry column (there is no 'geo' entry of GeoParquet); write it as GeoParquet")
    assert list_layers(path)[0].geometry_type is None


def test_metadata_that_is_none(tmp_path: Path) -> None:
    path = with_geo(tmp_path / "a.parquet", "no json")
    assert failure(path).startswith("its 'geo' entry is not GeoParquet's (JSONDecodeError")
    path = with_geo(tmp_path / "a.parquet", {"columns": {}})
    assert failure(path) == "its 'geo' entry is not GeoParquet's (KeyError('primary_column')); write the file anew"
    path = with_geo(tmp_path / "a.parquet", geo_of() | {"primary_column": "shape"})
    assert failure(path).startswith("its 'geo' entry is not GeoParquet's (KeyError('shape'))")
    path = with_geo(tmp_path / "a.parquet", geo_of(), pa.table({"row": [1]}))
    assert failure(path) == "its geometry column 'geometry' is missing; write the file anew"
    path = with_geo(tmp_path / "a.parquet", geo_of(encoding="linestring"))
    assert failure(path) == (
        "geometry encoding 'linestring' is not known (known: WKB, polygon, multipolygon); write it as WKB"
    )
    path = with_geo(tmp_path / "a.parquet", geo_of(crs={"type": "nonsense"}))
    assert failure(path).startswith("its CRS is not understood (")


def test_cut_off(tmp_path: Path) -> None:
    path = with_geo(tmp_path / "a.parquet", geo_of())
    path.write_bytes(path.read_bytes()[:-100])
    text = failure(path)
    assert text.startswith("cannot be read as Parquet (")
    assert text.endswith("); check that the file is whole")


def test_damage_found_while_reading(tmp_path: Path) -> None:
    path = tmp_path / "a.parquet"
    plan = plan_output(path, samples.plain_content("Polygon"))
    shapes = shapely.to_wkb(shapely.polygons(np.random.default_rng(1).random((2000, 20, 2))))
    rows = pa.record_batch({"row": pa.array(range(2000), pa.int64())})
    write_batches(plan, [OutputBatch(rows, pa.array(shapes, pa.binary()))])
    data = bytearray(path.read_bytes())
    data[len(data) // 2 : len(data) // 2 + 5000] = b"\xff" * 5000
    path.write_bytes(data)
    text = failure(path)
    assert text.startswith("cannot be read to its end (")
    assert text.endswith("); check that the file is whole")


def test_folders_and_archives(tmp_path: Path) -> None:
    folder = tmp_path / "a.parquet"
    folder.mkdir()
    assert failure(folder) == "is a folder; name one Parquet file"
    with pytest.raises(ReadError, match=r"GeoParquet is read from plain files only; unpack or fetch it first$"):
        open_layer("/vsizip/a.zip/a.parquet")


class Marked(pa.ExtensionType):  # type: ignore[misc]
    """Geometries as other libraries register them with Arrow."""

    def __init__(self) -> None:
        super().__init__(pa.binary(), "geoarrow.wkb")

    def __arrow_ext_serialize__(self) -> bytes:
        return b""

    @classmethod
    def __arrow_ext_deserialize__(cls, storage: pa.DataType, serialized: bytes) -> "Marked":
        return cls()


def test_geometries_of_a_registered_type(tmp_path: Path) -> None:
    wkb = samples.wkb(samples.POLYGON, None)
    table = pa.table({"geometry": pa.ExtensionArray.from_storage(Marked(), wkb), "row": [0, 1]})
    path = with_geo(tmp_path / "a.parquet", geo_of(), table)
    source = samples.WORLD
    pa.register_extension_type(Marked())
    try:
        (batch,) = read_batches(open_layer(path))
        (world,) = read_batches(open_layer(source))
    finally:
        pa.unregister_extension_type("geoarrow.wkb")
    assert batch.geometry.equals(wkb)
    assert (world.n_rows, world.geometry.type) == (177, pa.binary())


def test_native_encoding_without_stated_types(tmp_path: Path) -> None:
    path = native(tmp_path, [samples.MULTI], "multipolygon")
    geo = json.loads(pq.read_metadata(path).metadata[b"geo"])
    geo["columns"]["geometry"]["geometry_types"] = []
    with_geo(path, geo, pq.read_table(path))
    assert open_layer(path).geometry_type == "MultiPolygon"


def test_covering_without_statistics(tmp_path: Path) -> None:
    frame = gpd.GeoDataFrame({"row": range(4)}, geometry=[shapely.box(i, 0, i + 0.5, 1) for i in range(4)])
    path = tmp_path / "a.parquet"
    frame.to_parquet(path, write_covering_bbox=True, row_group_size=2, write_statistics=False)
    assert rows_of(path, bbox=(2.2, 0, 2.3, 1))[0].column("row").to_pylist() == [2]


def test_long_binary_becomes_plain(tmp_path: Path) -> None:
    table = pa.table({"code": pa.array([b"ab", None], pa.binary(2)), "geometry": samples.wkb(samples.POLYGON, None)})
    (batch,) = read_batches(open_layer(with_geo(tmp_path / "a.parquet", geo_of(), table)))
    assert batch.attributes.column(0).to_pylist() == [b"ab", None]
    assert batch.attributes.schema.field(0).type == pa.binary()
