"""``geoshape compare``: known edits between two invented surveys are found, whatever their CRSs."""

import json

import geopandas as gpd
import numpy as np
import pytest
from shapely import box

from geoshape.layers.lineage import read_lineage
from tests.cli.layers import at


def squares(path, edits, crs="EPSG:3035", **columns):
    """Write squares and rectangles near each other, brought into another CRS where one is named."""
    frame = gpd.GeoDataFrame(columns, geometry=[None if e is None else at(box(*e)) for e in edits], crs="EPSG:3035")
    frame.to_crs(crs).to_file(path)
    return path


BEFORE = [(0, 0, 100, 100), (200, 0, 300, 100), (400, 0, 450, 100), (450, 0, 500, 100), (600, 0, 650, 50)]
# Kept and 10 m wider, split in two, two merged; the last is lost and another is new.
AFTER = [(0, 0, 110, 100), (200, 0, 250, 100), (250, 0, 300, 100), (400, 0, 500, 100), (800, 0, 820, 20)]


@pytest.fixture
def surveys(tmp_path):
    return (
        squares(tmp_path / "before.gpkg", BEFORE, key=["a", "b", "c", "d", "e"], people=[1, 2, 3, 4, 5]),
        squares(tmp_path / "after.gpkg", AFTER, key=["a", "b", "x", "c", "y"], people=[1, 1, 1, 7, 9]),
    )


def test_known_edits_by_overlap(geoshape, tmp_path, surveys):
    ran = geoshape("compare", *surveys, tmp_path / "o.gpkg", "--columns", "area_m2,people", "--sums", "people")
    assert (ran.code, ran.out) == (0, "")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.relation.tolist() == ["kept", "split", "merged", "lost", "new"]
    assert result.before_rows.tolist()[:4] == ["1", "2", "3, 4", "5"]
    assert result.after_rows.tolist()[:3] == ["1", "2, 3", "4"]
    assert result.area_m2_difference[:3].tolist() == pytest.approx([1_000.0, 0.0, 0.0], abs=1e-3)
    assert result.area_m2_ratio[0] == pytest.approx(1.1, rel=1e-6)
    assert result.shared_over_union[:3].tolist() == pytest.approx([10 / 11, 1.0, 1.0], rel=1e-6)
    assert result.shift_m[0] == pytest.approx(5.0, rel=1e-5)
    assert result.shift_bearing_deg[0] == pytest.approx(90.0, abs=0.01)
    assert result.people_after.tolist()[:3] == [1.0, 2.0, 7.0]
    # Area is conserved over relations: every row is in exactly one.
    assert result.area_before_m2.sum() == pytest.approx(sum((c - a) * (d - b) for a, b, c, d in BEFORE), rel=1e-6)
    assert result.area_after_m2.sum() == pytest.approx(sum((c - a) * (d - b) for a, b, c, d in AFTER), rel=1e-6)
    assert result.geometry.area.tolist()[:4] == pytest.approx([11_000.0, 10_000.0, 10_000.0, 2_500.0], rel=1e-6)
    assert "5 rows before and 5 after, paired by overlap" in ran.err


def test_by_a_key(geoshape, tmp_path, surveys):
    ran = geoshape("compare", *surveys, tmp_path / "o.gpkg", "--by", "key", "--json")
    result = gpd.read_file(tmp_path / "o.gpkg").set_index("key")
    assert result.relation.to_dict() == {
        "a": "kept", "b": "kept", "c": "kept", "d": "lost", "e": "lost", "x": "new", "y": "new"
    }  # fmt: skip
    told = json.loads(ran.out)
    assert told["paired_by"] == "key"
    assert {found["relation"]: found["n_relations"] for found in told["relations"]} == {"kept": 3, "lost": 2, "new": 2}
    lineage = read_lineage(tmp_path / "o.gpkg")
    assert (lineage["command"], lineage["options"]["before"], lineage["input"]) == (
        "compare",
        "before.gpkg",
        "after.gpkg",
    )


UNKNOWN_DATUM = "+proj=longlat +ellps=GRS80 +no_defs"


@pytest.mark.parametrize("crs", ["EPSG:25832", "EPSG:4258", "EPSG:4326", UNKNOWN_DATUM])
def test_another_crs_changes_nothing(geoshape, tmp_path, crs):
    """EPSG:4258 and EPSG:25832 share the datum of EPSG:3035; the others need a shift, here one that moves nothing."""
    before = squares(tmp_path / "before.gpkg", BEFORE, crs)
    after = squares(tmp_path / "after.gpkg", AFTER)
    ran = geoshape("compare", before, after, tmp_path / "o.gpkg")
    assert ran.code == 0, ran.err
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.crs.to_epsg() == 3035
    assert result.relation.tolist() == ["kept", "split", "merged", "lost", "new"]
    assert result.shared_over_union[:3].tolist() == pytest.approx([10 / 11, 1.0, 1.0], rel=2e-5)
    assert result.geometry.centroid.x[3] == pytest.approx(at(box(*BEFORE[4])).centroid.x, abs=1e-3)
    assert ("only a ballpark shift" in " ".join(ran.err.split())) == (crs == UNKNOWN_DATUM)


def test_changes_are_judged_by_their_errors(geoshape, tmp_path):
    rows = [(0, 0, 100, 100), (200, 0, 300, 100)]
    grown = [(0, 0, 110, 100), (200, 0, 310, 100)]
    before = squares(tmp_path / "before.gpkg", rows, area_m2_se=[200.0, 500.0])
    after = squares(tmp_path / "after.gpkg", grown, area_m2_se=[200.0, 500.0])
    ran = geoshape("compare", before, after, tmp_path / "o.gpkg", "--columns", "area_m2")
    # 1000 m2 more, against 2 sqrt(2) standard errors: 566 and 1414 m2.
    assert gpd.read_file(tmp_path / "o.gpkg").area_m2_changed.tolist() == [1, 0]
    assert "area_m2 in 1" in ran.err


def test_rows_without_a_polygon_have_no_place(geoshape, tmp_path):
    before = squares(tmp_path / "before.gpkg", [(0, 0, 10, 10), None])
    after = squares(tmp_path / "after.gpkg", [(0, 0, 10, 10)])
    assert geoshape("compare", before, after, tmp_path / "o.gpkg", "-q").code == 0
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.relation.tolist() == ["kept", "unplaced"]
    assert result.geometry.isna().tolist() == [False, True]


def test_plain_coordinates_and_options(geoshape, tmp_path):
    for name, width in (("before", 10), ("after", 12)):
        gpd.GeoDataFrame(geometry=[box(0, 0, width, 10)]).to_parquet(tmp_path / f"{name}.parquet")
    paths = [tmp_path / f"{name}.parquet" for name in ("before", "after")]
    ran = geoshape("compare", *paths, tmp_path / "o.parquet")
    assert (ran.code, "--assume-crs" in ran.err) == (1, True)
    ran = geoshape(
        "compare", *paths, tmp_path / "o.parquet", "--ground", "plane", "--keep-size", "--keep-direction", "-v",
        "--prefix", "c_",
    )  # fmt: skip
    assert ran.code == 0, ran.err
    result = gpd.read_parquet(tmp_path / "o.parquet")
    assert result.c_area_m2_difference.tolist() == [20.0]
    assert result.c_shared_over_union.tolist() == [pytest.approx(10 / 12)]
    assert result.c_outline_distance[0] > 0.05


def test_keys_of_two_types(geoshape, tmp_path):
    before = squares(tmp_path / "before.gpkg", [(0, 0, 10, 10)], key=[7])
    after = squares(tmp_path / "after.gpkg", [(0, 0, 10, 10)], key=[7.0])
    assert geoshape("compare", before, after, tmp_path / "o.gpkg", "--by", "key", "-q").code == 0
    assert gpd.read_file(tmp_path / "o.gpkg").key.tolist() == [7.0]
    text = squares(tmp_path / "text.gpkg", [(0, 0, 10, 10)], key=["7"])
    ran = geoshape("compare", before, text, tmp_path / "p.gpkg", "--by", "key")
    assert (ran.code, "never equal" in ran.err) == (2, True)


WRONG = [
    ({}, ("--by", "lot"), "did you mean"),
    ({"key": ["a", "a"]}, ("--by", "key"), "key"),
    ({"key": ["a", None]}, ("--by", "key"), "is empty in 1 of 2 rows"),
    ({}, ("--columns", "arae_m2"), "did you mean area_m2?"),
    ({}, ("--min-share", "0"), "min_share = 0.0"),
]


@pytest.mark.parametrize(("columns", "arguments", "complaint"), WRONG)
def test_wrong_use(geoshape, tmp_path, columns, arguments, complaint):
    columns = columns or {"lott": ["a", "b"]}
    rows = [(0, 0, 10, 10), (20, 0, 30, 10)]
    paths = [squares(tmp_path / f"{name}.gpkg", rows, **columns) for name in ("before", "after")]
    ran = geoshape("compare", *paths, tmp_path / "o.gpkg", *arguments)
    assert ran.code == 2
    assert complaint in ran.err
    assert not (tmp_path / "o.gpkg").exists()


def test_the_output_is_neither_survey(geoshape, surveys):
    ran = geoshape("compare", *surveys, surveys[0], "--overwrite")
    assert (ran.code, "is the input as well" in ran.err) == (1, True)


def test_a_layer_against_itself_has_not_changed(geoshape, tmp_path):
    rng = np.random.default_rng(3)
    rows = [(20 * i, 0, 20 * i + 5 + 10 * rng.random(), 10) for i in range(30)]
    path = squares(tmp_path / "a.gpkg", rows)
    geoshape("compare", path, path, tmp_path / "o.gpkg", "-q")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert set(result.relation) == {"kept"}
    assert result.shared_over_union.min() == pytest.approx(1.0, abs=1e-9)
    assert result.outline_distance.max() < 1e-9
    assert result.shift_m.max() == 0.0
