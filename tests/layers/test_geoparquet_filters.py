"""SQL conditions and boxes on GeoParquet give the rows that GDAL gives."""

from pathlib import Path
from typing import Any

import geopandas as gpd
import pyarrow as pa
import pyarrow.parquet as pq
import pyproj
import pytest
import shapely
from pyogrio.raw import read_arrow

from geoshape.errors import ReadError
from geoshape.layers.filters import Filter, meets_box
from geoshape.layers.plan import plan_output
from geoshape.layers.read import open_layer, read_batches
from geoshape.layers.write import write_batches
from tests.layers import samples
from tests.layers.test_geoparquet_reading import geo_of, with_geo


@pytest.fixture(scope="module")
def counties() -> gpd.GeoDataFrame:
    return gpd.read_file(samples.COUNTIES)


def rows_of(path: Path, **filters: Any) -> tuple[pa.Table, Any]:
    info = open_layer(path, **filters)
    batches = list(read_batches(info))
    table = pa.Table.from_batches([batch.attributes for batch in batches], schema=info.schema)
    values = [value for batch in batches for value in batch.geometry.to_pylist()]
    return table, shapely.from_wkb(values)


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


def test_covering_without_statistics(tmp_path: Path) -> None:
    frame = gpd.GeoDataFrame({"row": range(4)}, geometry=[shapely.box(i, 0, i + 0.5, 1) for i in range(4)])
    path = tmp_path / "a.parquet"
    frame.to_parquet(path, write_covering_bbox=True, row_group_size=2, write_statistics=False)
    assert rows_of(path, bbox=(2.2, 0, 2.3, 1))[0].column("row").to_pylist() == [2]
