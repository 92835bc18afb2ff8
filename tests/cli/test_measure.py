"""``geoshape measure``: what it writes, what it says, and how it stops."""

import csv
import io
import json
import os
import zipfile
from pathlib import Path

import geopandas as gpd
import pandas as pd
import pyogrio
import pytest
from shapely import box

from geoshape import MeasureOptions, columns_for

SAMPLES = Path(__file__).parents[2] / "sample_layers"
DATA = Path(__file__).parents[1] / "data"
NAMES = [column.name for column in columns_for(MeasureOptions())]


def test_the_main_job(geoshape, tmp_path):
    ran = geoshape("measure", SAMPLES / "parcels.gpkg", tmp_path / "o.gpkg")
    assert ran.code == 0
    assert ran.out == ""
    result = gpd.read_file(tmp_path / "o.gpkg")
    source = gpd.read_file(SAMPLES / "parcels.gpkg")
    assert len(result) == len(source)
    assert [name for name in result.columns if name in NAMES] == NAMES
    for word in (f"of {len(source)} rows", "1 repaired", "1 missing", "1 empty", "centred", "deg at most", "o.gpkg"):
        assert word in ran.err, word


def test_csv_to_stdout(geoshape):
    ran = geoshape("measure", SAMPLES / "lakes.gpkg", "-", "--families", "compactness")
    rows = list(csv.DictReader(io.StringIO(ran.out)))
    assert ran.code == 0
    assert len(rows) == len(gpd.read_file(SAMPLES / "lakes.gpkg"))
    assert 0.0 < float(rows[0]["polsby_popper"]) < 1.0
    assert "geom" not in rows[0]


def test_json_summary(geoshape, tmp_path):
    ran = geoshape("measure", SAMPLES / "lakes.gpkg", tmp_path / "o.parquet", "--json", "--prefix", "m_")
    summary = json.loads(ran.out)
    assert ran.err == ""
    assert summary["by_status"] == {"ok": summary["rows"]}
    assert summary["columns"] == ["m_" + name for name in NAMES]
    assert summary["output"].endswith("o.parquet")


def test_quiet_says_nothing(geoshape, tmp_path):
    ran = geoshape("measure", SAMPLES / "lakes.gpkg", tmp_path / "o.fgb", "-q")
    assert (ran.code, ran.out, ran.err) == (0, "", "")


def test_verbose_names_the_columns(geoshape, tmp_path):
    ran = geoshape("measure", SAMPLES / "lakes.gpkg", tmp_path / "o.gpkg", "-v", "--no-color")
    assert "fd_harmonics_95" in ran.err
    assert "\x1b[" not in ran.err


def test_every_option_reaches_the_run(geoshape, tmp_path):
    ran = geoshape(
        "measure", SAMPLES / "patches.geojson", tmp_path / "o.gpkg", "--where", "habitat = 'heath'",
        "--ground", "EPSG:6933", "--edges", "plane", "--families", "spectrum,extent", "--samples", "64",
        "--harmonics", "3", "--spectrum", "exact", "--parts", "split", "--holes", "fill", "--invalid", "null",
        "--log-moments", "--prefix", "q_", "--jobs", "1", "--output-layer", "heath", "--json",
    )  # fmt: skip
    assert ran.code == 0, ran.err
    result = gpd.read_file(tmp_path / "o.gpkg", layer="heath")
    assert set(result.habitat) == {"heath"}
    assert [name for name in result.columns if name.startswith("q_fd_p")] == ["q_fd_p02", "q_fd_p03"]
    assert result.q_part_number.notna().all()
    assert "Cylindrical" in json.loads(ran.out)["ground"]


@pytest.mark.parametrize("inner", [False, True])
def test_a_zip_is_looked_into(geoshape, tmp_path, inner):
    archive = tmp_path / "states.zip"
    with zipfile.ZipFile(archive, "w") as packed:
        for part in (DATA / "wilderness_co_ut").glob("coutwildrnp.*"):
            packed.write(part, part.name)
    source = f"/vsizip/{archive}/coutwildrnp.shp" if inner else archive
    assert geoshape("measure", source, tmp_path / "o.gpkg", "-q").code == 0
    assert pyogrio.read_info(tmp_path / "o.gpkg")["features"] == 67


def test_a_wide_layer_is_told_of_its_distortion(geoshape, tmp_path):
    world = DATA / "world_geodesic_area" / "world.gpkg"
    ran = geoshape("measure", world, tmp_path / "o.gpkg", "--families", "extent")
    assert "above 1 deg in" in ran.err


STOPS = [
    (("nowhere.gpkg", "o.gpkg"), "there is no such file"),
    ((DATA / "mexico_states" / "mexicojoin.shp", "o.gpkg"), "--assume-crs"),
    ((SAMPLES / "lakes.gpkg", "o.xyz"), "o.xyz"),
    ((SAMPLES / "lakes.gpkg", "no/such/folder/o.gpkg"), "does not exist; make it first"),
    ((SAMPLES / "lakes.gpkg", "o.gpkg", "--ground", "EPSG:3857"), "is not equal-area"),
    ((SAMPLES / "lakes.gpkg", "o.gpkg", "--layer", "ponds"), "there is no layer 'ponds'"),
    ((SAMPLES / "lakes.gpkg", "o.gpkg", "--where", "depth >"), "--where"),
    ((SAMPLES / "lakes.gpkg", "o.gpkg", "--assume-crs", "EPSG:4326"), "the layer is in WGS 84 / UTM zone 33N"),
    ((SAMPLES / "parcels.gpkg", "o.gpkg", "--invalid", "stop"), "is invalid: self-intersection"),
]


@pytest.mark.parametrize(("arguments", "complaint"), STOPS)
def test_a_run_that_cannot_be_stops_with_one_line(geoshape, arguments, complaint, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    ran = geoshape("measure", *arguments)
    assert ran.code == 1
    assert complaint in ran.err
    assert ran.err.startswith("geoshape: ")
    assert len(ran.err.strip().splitlines()) == 1
    assert list(tmp_path.iterdir()) == []


def test_clashing_names_stop_whatever_their_case(geoshape, tmp_path):
    gpd.GeoDataFrame({"Area_M2": [1.0]}, geometry=[box(0, 0, 1, 1)], crs="EPSG:3035").to_file(tmp_path / "a.gpkg")
    ran = geoshape("measure", tmp_path / "a.gpkg", tmp_path / "o.gpkg")
    assert ran.code == 1
    assert "--prefix" in ran.err
    assert geoshape("measure", tmp_path / "a.gpkg", tmp_path / "o.gpkg", "--prefix", "s_").code == 0


def test_too_many_columns_for_a_shapefile_stop(geoshape, tmp_path):
    wide = pd.DataFrame({f"c{i}": [i] for i in range(210)})
    gpd.GeoDataFrame(wide, geometry=[box(0, 0, 1, 1)], crs="EPSG:3035").to_file(tmp_path / "wide.gpkg")
    ran = geoshape("measure", tmp_path / "wide.gpkg", tmp_path / "o.shp")
    assert ran.code == 1
    assert "255" in ran.err


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write anywhere")
def test_a_folder_without_rights_stops(geoshape, tmp_path):
    closed = tmp_path / "closed"
    closed.mkdir(mode=0o500)
    ran = geoshape("measure", SAMPLES / "lakes.gpkg", closed / "o.gpkg")
    assert ran.code == 1
    assert "nothing can be written" in ran.err


def test_an_interrupt_is_one_line(geoshape, tmp_path, monkeypatch):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    monkeypatch.setattr("geoshape.run.write_batches", interrupted)
    ran = geoshape("measure", SAMPLES / "lakes.gpkg", tmp_path / "o.gpkg")
    assert (ran.code, ran.err.strip()) == (1, "geoshape: interrupted; nothing was written")
