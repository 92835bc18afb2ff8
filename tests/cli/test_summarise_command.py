"""``geoshape summarise``: hand-worked numbers in every form, and what cannot be summarised."""

import csv
import io
import json

import geopandas as gpd
import numpy as np
import pytest
from shapely import box

from tests.cli.layers import at, write


@pytest.fixture
def patches(tmp_path):
    shapes = [at(box(0, 0, 10, 10)), at(box(0, 0, 10, 30), 50), at(box(0, 0, 20, 10), 90), None]
    kinds = ["fen", "fen", "heath", "fen"]
    return write(tmp_path / "p.gpkg", shapes, kind=kinds, zone=[1, 2, 1, 1], depth=[1.0, 3.0, 2.0, 5.0])


def rows_of(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_csv_by_class(geoshape, patches):
    ran = geoshape("summarise", patches, "--by", "kind", "--columns", "area_m2,depth", "--csv")
    assert (ran.code, ran.err) == (0, "")
    rows = rows_of(ran.out)
    assert [(row["column"], row["kind"], row["count"]) for row in rows] == [
        ("area_m2", "fen", "2"), ("area_m2", "heath", "1"), ("area_m2", "", "3"),
        ("depth", "fen", "3"), ("depth", "heath", "1"), ("depth", "", "4"),
    ]  # fmt: skip
    assert float(rows[0]["sum"]) == pytest.approx(400.0, rel=1e-6)
    assert float(rows[0]["sd"]) == pytest.approx(np.std([100.0, 300.0], ddof=1), rel=1e-6)
    # Depths 1 and 3 on 100 and 300 m2; the row without a polygon has no weight.
    assert float(rows[3]["weighted_mean"]) == pytest.approx((1 * 100 + 3 * 300) / 400, rel=1e-6)
    assert rows[0]["nulls_missing"] == "1"


def test_directions_have_a_mean_axis(geoshape, patches):
    rows = rows_of(geoshape("summarise", patches, "--columns", "axis_azimuth_deg", "--csv").out)
    # One strip to the north and one to the east cancel out; the square has no axis.
    assert rows[0]["count"] == "2"
    assert float(rows[0]["resultant_length"]) == pytest.approx(0.0, abs=1e-4)
    assert rows[0]["mean"] == ""


def test_own_bearings_weights_and_quantiles(geoshape, tmp_path):
    source = write(tmp_path / "a.gpkg", [at(box(0, 0, 1, 1))] * 3, wind=[350.0, 10.0, 0.0], w=[1, 1, 2], v=[1, 2, 4])
    rows = rows_of(
        geoshape(
            "summarise", source, "--columns", "v", "--bearings", "wind", "--weights", "w", "--quantiles", "0.5", "--csv"
        ).out
    )
    assert [row["column"] for row in rows] == ["v", "wind"]
    assert float(rows[0]["weighted_mean"]) == pytest.approx((1 + 2 + 8) / 4)
    assert float(rows[0]["q50"]) == 2.0
    assert abs((float(rows[1]["mean_direction_deg"]) + 180) % 360 - 180) == pytest.approx(0.0, abs=1e-9)


def test_table_markdown_and_json(geoshape, patches):
    table = geoshape("summarise", patches, "--by", "kind", "--by", "zone", "-v")
    assert "area_m2 [m2]" in table.out
    assert "axis_azimuth_deg [deg]" in table.out
    assert "(all)" in table.out
    assert "measured area_m2" in table.err
    markdown = geoshape("summarise", patches, "--by", "kind", "--columns", "area_m2", "--markdown").out
    assert "| fen | 2 | 1 (1 missing) | 400 | 200 |" in markdown
    document = json.loads(geoshape("summarise", patches, "--by", "kind", "--json").out)
    assert document["by"] == ["kind"]
    assert {record["column"] for record in document["statistics"]} >= {"area_m2", "convexity"}


def test_a_narrow_terminal_leaves_columns_out_and_says_so(geoshape, patches, monkeypatch):
    monkeypatch.setattr("geoshape.cli.terminal.PIPED_WIDTH", 60)
    ran = geoshape("summarise", patches, "--by", "kind", "--columns", "area_m2")
    assert max(map(len, ran.out.splitlines())) <= 60
    assert "left out for want of width: 5 %" in ran.err


WRONG = [
    (("--by", "knd"), "did you mean kind?"),
    (("--columns", "area"), "did you mean area_m2?"),
    (("--columns", "kind"), "not numbers"),
    (("--weights", "dept"), "did you mean depth?"),
    (("--quantiles", "1.5"), "quantiles: 1.5"),
    (("--quantiles", "half"), "give shares"),
    (("--by", "kind", "--by", "kind"), "named twice"),
    (("--csv", "--json"), "exclude each other"),
]


@pytest.mark.parametrize(("arguments", "complaint"), WRONG)
def test_wrong_use(geoshape, patches, arguments, complaint):
    ran = geoshape("summarise", patches, *arguments)
    assert (ran.code, ran.out) == (2, "")
    assert complaint in ran.err


def test_one_row_and_no_value(geoshape, tmp_path):
    source = tmp_path / "a.parquet"
    gpd.GeoDataFrame({"v": [1.5]}, geometry=[None], crs="EPSG:3035").to_parquet(source)
    rows = rows_of(geoshape("summarise", source, "--columns", "v,area_m2", "--csv").out)
    assert (rows[0]["mean"], rows[0]["sd"]) == ("1.5", "")
    assert (rows[1]["count"], rows[1]["mean"], rows[1]["nulls_missing"]) == ("0", "", "1")
