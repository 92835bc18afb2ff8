"""GeoParquet as others write it: encodings, CRS, covering, faults."""

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

from geoshape.errors import ReadError
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


def test_long_binary_becomes_plain(tmp_path: Path) -> None:
    table = pa.table({"code": pa.array([b"ab", None], pa.binary(2)), "geometry": samples.wkb(samples.POLYGON, None)})
    (batch,) = read_batches(open_layer(with_geo(tmp_path / "a.parquet", geo_of(), table)))
    assert batch.attributes.column(0).to_pylist() == [b"ab", None]
    assert batch.attributes.schema.field(0).type == pa.binary()
