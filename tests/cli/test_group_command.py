"""``geoshape group``: two planted kinds are told apart; what cannot be grouped is refused or null with its reason."""

import json

import geopandas as gpd
import numpy as np
import pytest
from shapely import box

from tests.cli.layers import at, strips_and_squares, write


def test_planted_kinds_are_recovered(geoshape, tmp_path):
    source = strips_and_squares(tmp_path / "a.gpkg")
    ran = geoshape("group", source, tmp_path / "o.gpkg")
    assert (ran.code, ran.out) == (0, "")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.kind.tolist() == gpd.read_file(source).kind.tolist()
    assert result.groupby("kind").group.nunique().tolist() == [1, 1]
    assert result.group.nunique() == 2
    assert result.groupby("group").is_prototype.sum().tolist() == [1, 1]
    assert result.loc[result.is_prototype == 1, "group_distance"].max() <= result.group_distance.median()
    assert "into 2 groups" in ran.err
    assert "high" in ran.err


def test_order_of_rows_plays_no_part(geoshape, tmp_path):
    frame = gpd.read_file(strips_and_squares(tmp_path / "a.gpkg"))
    frame["number"] = range(len(frame))
    frame.sample(frac=1.0, random_state=1).to_file(tmp_path / "b.gpkg")
    frame.to_file(tmp_path / "a.gpkg")
    results = []
    for name in "ab":
        geoshape("group", tmp_path / f"{name}.gpkg", tmp_path / f"{name}_o.gpkg", "--count", "4", "-q")
        results.append(gpd.read_file(tmp_path / f"{name}_o.gpkg").sort_values("number").group.tolist())
    assert results[0] == results[1]


def test_columns_families_and_seed(geoshape, tmp_path):
    source = strips_and_squares(tmp_path / "a.gpkg")
    ran = geoshape(
        "group", source, tmp_path / "o.gpkg", "--families", "axes,extent", "--count", "3", "--seed", "5", "--json"
    )
    told = json.loads(ran.out)
    assert len(told["groups"]) == 3
    assert "axis_azimuth_deg" not in told["groups"][0]["typical"]
    assert "major_axis_m" in told["groups"][0]["typical"]
    assert sum(group["size"] for group in told["groups"]) == told["grouped"] == 24
    assert any("left out" in note for note in told["notes"])
    row = told["groups"][0]["prototype_row"] - 1
    assert gpd.read_file(tmp_path / "o.gpkg").is_prototype[row] == 1


def test_null_rows_have_no_group_and_a_reason(geoshape, tmp_path):
    frame = gpd.read_file(strips_and_squares(tmp_path / "a.gpkg"))
    frame.loc[3, "geometry"] = None
    frame.to_file(tmp_path / "b.gpkg")
    geoshape("group", tmp_path / "b.gpkg", tmp_path / "o.gpkg", "--columns", "axis_ratio", "--count", "2", "-q")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert np.isnan(result.group[3])
    assert np.isnan(result.is_prototype[3])
    assert result.group_note[3] == "no group, as axis_ratio has no usable value"
    assert result.group.notna().sum() == 23


def boxes(n, **columns):
    return {"geometries": [at(box(0, 0, 1, 1 + i)) for i in range(n)], **columns}


BAD = [
    (boxes(5), ("--columns", "reockk"), "did you mean reock?"),
    (boxes(5, name=list("abcde")), ("--columns", "name"), "holds"),
    (boxes(5), ("--columns", "axis_azimuth_deg"), "run in a circle"),
    (boxes(5), ("--columns", "reock,reock"), "more than once"),
    (boxes(5), ("--columns", "reock", "--families", "axes"), "exclude each other"),
    (boxes(5), ("--families", "axis"), "separated by commas"),
    (boxes(5), ("--count", "0"), "count = 0"),
    (boxes(5), ("--count", "1"), "count = 1"),
    (boxes(5), ("--columns", "reock", "--count", "9"), "cannot be made of 5 different rows"),
    (boxes(1), (), "grouping needs 3"),
    (boxes(0), (), "grouping needs 3"),
    (boxes(4, depth=[np.nan] * 4), ("--columns", "depth"), "0 of 4 rows"),
    (boxes(4, depth=[7.0] * 4), ("--columns", "depth"), "have the same value in all 4 rows"),
]


@pytest.mark.parametrize("case", BAD, ids=lambda case: case[-1])
def test_what_cannot_be_grouped(geoshape, tmp_path, case):
    content, arguments, complaint = case
    source = write(tmp_path / "a.gpkg", **content)
    ran = geoshape("group", source, tmp_path / "o.gpkg", *arguments)
    assert ran.code == 2
    assert complaint in ran.err
    assert not (tmp_path / "o.gpkg").exists()
