"""``geoshape flag``: what it writes, what it says, and how it stops."""

import json
from pathlib import Path

import geopandas as gpd
import numpy as np
import pytest
from shapely import box

from geoshape.layers.lineage import read_lineage
from tests.cli.layers import at, lots, write

SAMPLES = Path(__file__).parents[2] / "sample_layers"


def test_rules_in_one_pass(geoshape, tmp_path):
    source = lots(tmp_path / "a.gpkg")
    ran = geoshape(
        "flag", source, tmp_path / "o.gpkg",
        "--rule", "narrow: axis_ratio < 0.2", "--rule", "large housing: zone = 'R' AND area_m2 > 300",
    )  # fmt: skip
    assert (ran.code, ran.out) == (0, "")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.lot.tolist() == ["a", "b", "c", "d", "e"]
    assert result.flag.tolist() == [1, 1, 0, 0, 0]
    assert result.flag_reasons.tolist()[:2] == ["large housing", "narrow; large housing"]
    assert result.flag_reasons[2:].isna().all()
    assert result.shape_status.tolist() == ["ok", "ok", "ok", "missing", "empty"]
    assert result.area_m2[:3].round(3).tolist() == [400.0, 400.0, 10_000.0]
    assert "2 of 5 rows" in ran.err
    assert [line.split() for line in ran.err.splitlines() if line.startswith("narrow")] == [["narrow", "1", "2"]]


def test_measured_columns_are_used_as_they_are(geoshape, tmp_path):
    source = write(tmp_path / "a.gpkg", [at(box(0, 0, 1, 1))], area_m2=[77.0])
    assert geoshape("flag", source, tmp_path / "o.gpkg", "--rule", "odd: area_m2 = 77", "-q").err == ""
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert list(result.columns) == ["area_m2", "flag", "flag_reasons", "geometry"]
    assert result.flag.tolist() == [1]


def test_own_columns_need_no_crs(geoshape, tmp_path):
    source = tmp_path / "a.parquet"
    gpd.GeoDataFrame({"depth": [3]}, geometry=[box(0, 0, 1, 1)]).to_parquet(source)
    assert geoshape("flag", source, tmp_path / "o.gpkg", "--rule", "deep: depth > 2").code == 0
    ran = geoshape("flag", source, tmp_path / "p.gpkg", "--rule", "round: reock > 0.2")
    assert ran.code == 1
    assert "--assume-crs" in ran.err


def test_prefix_and_lineage(geoshape, tmp_path):
    source = lots(tmp_path / "a.gpkg")
    ran = geoshape("flag", source, tmp_path / "o.gpkg", "--rule", "n: axis_ratio < 0.2", "--prefix", "q_", "--json")
    told = json.loads(ran.out)
    assert told["columns"][-3:] == ["q_axis_ratio", "q_flag", "q_flag_reasons"]
    assert told["counts"] == [{"name": "n", "message": "", "n_flagged": 1, "n_unknown": 2}]
    lineage = read_lineage(tmp_path / "o.gpkg")
    assert lineage["command"] == "flag"
    assert lineage["options"]["rules"][0]["rule"] == "axis_ratio < 0.2"
    assert lineage["rows_by_status"] == {"ok": 3, "missing": 1, "empty": 1}


def test_many_processes_keep_the_order(geoshape, tmp_path):
    shapes = [at(box(0, 0, 10, 1 + i % 7), 20 * i) for i in range(3_000)]
    write(tmp_path / "a.gpkg", shapes, number=range(3_000))
    rule = ("--rule", "low: axis_ratio < 0.35")
    for jobs in ("1", "2"):
        assert geoshape("flag", tmp_path / "a.gpkg", tmp_path / f"{jobs}.gpkg", *rule, "--jobs", jobs, "-q").code == 0
    one, two = (gpd.read_file(tmp_path / f"{jobs}.gpkg") for jobs in ("1", "2"))
    assert one.drop(columns="geometry").equals(two.drop(columns="geometry"))
    assert one.flag.tolist() == [int((1 + i % 7) / 10 < 0.35) for i in range(3_000)]


def test_rules_that_ship_run_on_the_parcels(geoshape, tmp_path):
    rules = SAMPLES / "parcel_rules.toml"
    ran = geoshape("flag", SAMPLES / "parcels.gpkg", tmp_path / "o.gpkg", "--rules", rules, "--json")
    counts = {count["name"]: count["n_flagged"] for count in json.loads(ran.out)["counts"]}
    assert all(counts.values()), counts
    assert "starting points" in rules.read_text()
    assert "licensed practice" in rules.read_text()


def test_unusual_features_in_two_passes(geoshape, tmp_path):
    rng = np.random.default_rng(7)
    depth, ph = rng.normal(10.0, 1.0, 200), rng.normal(7.0, 0.3, 200)
    depth[150], ph[150], ph[151] = 10.0, 12.0, np.nan
    source = write(tmp_path / "a.gpkg", [at(box(0, 0, 1, 1))] * 200, depth=depth, ph=ph)
    columns = ("--unusual", "--columns", "depth,ph")
    ran = geoshape("flag", source, tmp_path / "o.gpkg", *columns, "--cut", "0.9999")
    assert ran.code == 0, ran.err
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.flag.to_numpy().nonzero()[0].tolist() == [150]
    assert result.flag_reasons[150] == "unusual"
    assert result.flag_score.idxmax() == 150
    assert np.isnan(result.flag_score[151])
    assert "no usable value" in result.flag_note[151]
    assert "area_m2" not in result
    small = geoshape("flag", source, tmp_path / "s.gpkg", *columns, "--where", "fid <= 5", "--json")
    assert "no score" in json.loads(small.out)["notes"][0]


def test_classes_are_judged_by_their_own(geoshape, tmp_path):
    rng = np.random.default_rng(7)
    low = [at(box(0, 0, 10, 2 + rng.uniform(-0.5, 0.5)), 40 * i) for i in range(60)]
    high = [at(box(0, 0, 10, 9 + rng.uniform(-0.5, 0.5)), 40 * i, 90) for i in range(59)]
    source = write(tmp_path / "a.gpkg", [*low, *high, low[0]], kind=["low"] * 60 + ["high"] * 60)
    options = ("--unusual", "--columns", "axis_ratio", "--within", "kind", "-q")
    assert geoshape("flag", source, tmp_path / "o.gpkg", *options).code == 0
    assert gpd.read_file(tmp_path / "o.gpkg").flag[119] == 1


def test_long_notes_are_cut_and_shown_when_asked_for(geoshape, tmp_path):
    source = write(tmp_path / "a.gpkg", [at(box(0, 0, 1, 1))] * 9, kind=list("abcdefghi"))
    options = ("--unusual", "--columns", "axis_ratio", "--within", "kind")
    assert "and 4 more notes" in geoshape("flag", source, tmp_path / "o.gpkg", *options).err
    assert "kind i" in geoshape("flag", source, tmp_path / "p.gpkg", *options, "-v").err


WRONG = [
    ((), "there is nothing to flag by"),
    (("--rule", "a: axis_ration < 1"), "did you mean axis_ratio?"),
    (("--rule", "a: zone < 1"), "zone"),
    (("--rule", "a: area_m2 <"), "ends too early"),
    (("--rule", "a: lot = 'a'", "--rule", "A: lot = 'b'"), "is there twice"),
    (("--within", "zone", "--rule", "a: lot = 'a'"), "add --unusual"),
    (("--unusual", "--within", "zon"), "did you mean zone?"),
    (("--unusual", "--columns", "reocks"), "did you mean reock?"),
    (("--unusual", "--columns", ","), "names no column"),
    (("--unusual", "--cut", "2"), "level = 2.0"),
]


@pytest.mark.parametrize(("arguments", "complaint"), WRONG)
def test_wrong_use(geoshape, tmp_path, arguments, complaint):
    ran = geoshape("flag", lots(tmp_path / "a.gpkg"), tmp_path / "o.gpkg", *arguments)
    assert ran.code == 2
    assert complaint in ran.err
    assert not (tmp_path / "o.gpkg").exists()


def test_rule_files_that_cannot_be_used(geoshape, tmp_path):
    source = lots(tmp_path / "a.gpkg")
    (tmp_path / "r.toml").write_text("[[rule]]\nname = 'a'\n")
    ran = geoshape("flag", source, tmp_path / "o.gpkg", "--rules", tmp_path / "r.toml")
    assert (ran.code, "r.toml: rule 'a': key 'rule' is missing" in ran.err) == (2, True)
    ran = geoshape("flag", source, tmp_path / "o.gpkg", "--rules", tmp_path / "none.toml")
    assert (ran.code, "none.toml: cannot be read" in ran.err) == (1, True)


def test_flags_twice_ask_for_a_prefix(geoshape, tmp_path):
    geoshape("flag", lots(tmp_path / "a.gpkg"), tmp_path / "o.gpkg", "--rule", "lot: lot = 'a'", "-q")
    ran = geoshape("flag", tmp_path / "o.gpkg", tmp_path / "p.gpkg", "--rule", "lot: lot = 'a'")
    assert (ran.code, "--prefix" in ran.err) == (1, True)


def test_two_results_on_one_output(geoshape, tmp_path):
    ran = geoshape("flag", lots(tmp_path / "a.gpkg"), "-", "--rule", "lot: lot = 'a'", "--json")
    assert (ran.code, "choose one" in ran.err) == (2, True)
