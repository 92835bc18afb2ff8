"""Layers are opened and read as other means read them, in batches of bounded size."""

import pickle
import sqlite3
from pathlib import Path

import pyarrow as pa
import pyogrio
import pyproj
import pytest
import shapely
from pyogrio.raw import read_arrow, write_arrow

from geoshape.errors import GeoshapeWarning, LayerChoiceError, OptionError, ReadError
from geoshape.layers.plan import plan_output
from geoshape.layers.read import LayerSummary, list_layers, open_layer, read_batches
from geoshape.layers.write import write_batches
from tests.layers import samples
from tests.layers.opened import make, table_of

REAL = [samples.WORLD, samples.COUNTIES, samples.WILDERNESS, samples.MEXICO]


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
