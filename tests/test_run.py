"""From file to file: the same numbers as the frame route, in order, whatever the jobs; and runs that end badly."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import pyogrio
import pytest
import shapely
from shapely import MultiPolygon, Polygon, box

import geoshape
from geoshape import MeasureOptions, Source, Target, columns_for, measure_file
from geoshape.errors import GeometryError, GroundError, LayerChoiceError, OptionError, ReadError, WriteError
from geoshape.layers.lineage import read_lineage

DATA = Path(__file__).parent / "data"
SAMPLES = Path(__file__).parent.parent / "sample_layers"
COUNTIES = DATA / "us_census_areas" / "cb_2016_us_county_500k_CO_KS_UT.gpkg"


def numbers(layer, options=None):
    names = [column.name for column in columns_for(options or MeasureOptions()) if column.kind != "text"]
    return layer[names].astype(float).to_numpy()


@pytest.mark.parametrize("name", ["lakes.gpkg", "patches.geojson", "parcels.gpkg"])
@pytest.mark.parametrize("options", [MeasureOptions(), MeasureOptions(ground="layer", parts="split", spectrum="exact")])
def test_the_file_route_gives_the_numbers_of_the_frame_route(name, options, tmp_path):
    summary = measure_file(SAMPLES / name, tmp_path / "out.gpkg", options=options)
    by_file = gpd.read_file(tmp_path / "out.gpkg")
    by_frame = geoshape.measure(gpd.read_file(SAMPLES / name), options=options)
    assert len(by_file) == len(by_frame) == summary.rows
    np.testing.assert_array_equal(numbers(by_file, options), numbers(by_frame, options))
    for column in ("shape_status", "shape_note"):
        assert by_file[column].fillna("").tolist() == by_frame[column].fillna("").tolist()
    assert by_file.columns.drop("geometry").tolist() == by_frame.columns.drop("geometry").tolist()


def test_jobs_change_neither_order_nor_numbers(tmp_path, monkeypatch):
    monkeypatch.setattr("geoshape.layers.read.MAX_VERTICES", 3_000)
    outputs = []
    for jobs in (1, 2):
        summary = measure_file(Source(path=COUNTIES), tmp_path / f"{jobs}.gpkg", jobs=jobs)
        assert summary.by_status == {"ok": 198}
        outputs.append(gpd.read_file(tmp_path / f"{jobs}.gpkg"))
    assert outputs[0].GEOID.tolist() == gpd.read_file(COUNTIES).GEOID.tolist()
    pd.testing.assert_frame_equal(pd.DataFrame(outputs[0]), pd.DataFrame(outputs[1]))


def test_the_source_geometry_passes_untouched(tmp_path):
    measure_file(SAMPLES / "parcels.gpkg", tmp_path / "out.gpkg")
    before, after = (
        pyogrio.read_dataframe(p).geometry.values for p in (SAMPLES / "parcels.gpkg", tmp_path / "out.gpkg")
    )
    before, after = np.asarray(before), np.asarray(after)
    assert (shapely.is_missing(before) == shapely.is_missing(after)).all()
    assert (shapely.equals_identical(before, after) | shapely.is_missing(before)).all()


def test_filters_choose_rows(tmp_path):
    source = Source(path=SAMPLES / "patches.geojson", where="habitat = 'heath'")
    summary = measure_file(source, tmp_path / "heath.gpkg")
    expected = (gpd.read_file(SAMPLES / "patches.geojson").habitat == "heath").sum()
    assert summary.rows == expected
    west, south, east, north = gpd.read_file(SAMPLES / "lakes.gpkg").geometry[0].bounds
    near = measure_file(Source(path=SAMPLES / "lakes.gpkg", bbox=(west, south, east, north)), tmp_path / "near.gpkg")
    assert 1 <= near.rows < 41


def test_the_layer_ground_finds_the_extent_of_filtered_rows(tmp_path):
    source = Source(path=SAMPLES / "patches.geojson", where="habitat = 'heath'")
    summary = measure_file(source, tmp_path / "heath.gpkg", options=MeasureOptions(ground="layer"))
    assert "Lambert Azimuthal Equal Area" in summary.ground or "Albers" in summary.ground
    assert summary.largest_distortion_deg < 0.01


def test_lineage_tells_how_the_numbers_were_made(tmp_path):
    options = MeasureOptions(families=("axes", "extent"), prefix="m_")
    measure_file(SAMPLES / "parcels.gpkg", Target(path=tmp_path / "o.gpkg", layer="lots"), options=options)
    lineage = read_lineage(tmp_path / "o.gpkg", "lots")
    assert lineage["options"]["families"] == ["extent", "axes"]
    assert lineage["rows_by_status"] == {"ok": 305, "repaired": 1, "missing": 1, "empty": 1}
    assert lineage["input"] == "parcels.gpkg"
    assert lineage["versions"]["geoshape"] == geoshape.__version__
    assert "SWEREF99" in lineage["crs"]


def test_an_assumed_crs_is_written_to_the_output(tmp_path):
    options = MeasureOptions(assume_crs="EPSG:4326", families=("extent",))
    measure_file(DATA / "mexico_states" / "mexicojoin.shp", tmp_path / "o.gpkg", options=options)
    assert gpd.read_file(tmp_path / "o.gpkg").crs.to_epsg() == 4326


def test_a_layer_without_rows(tmp_path):
    empty = gpd.GeoDataFrame({"site": pd.Series([], dtype="int64")}, geometry=gpd.GeoSeries([], crs="EPSG:32632"))
    pyogrio.write_dataframe(empty, tmp_path / "empty.gpkg", geometry_type="Polygon")
    summary = measure_file(tmp_path / "empty.gpkg", tmp_path / "o.gpkg")
    result = pyogrio.read_info(tmp_path / "o.gpkg")
    assert summary.rows == result["features"] == 0
    assert list(result["fields"]) == ["site", *(column.name for column in columns_for(MeasureOptions()))]


def test_curves_and_unreadable_rows_are_told_from_missing_ones(tmp_path):
    wkt = tmp_path / "curves.csv"
    wkt.write_text(
        'id,WKT\n1,"CURVEPOLYGON(CIRCULARSTRING(0 0,1 1,2 0,1 -1,0 0))"\n2,"POLYGON((0 0,1 0,1 1,0 0))"\n3,\n'
    )
    options = MeasureOptions(ground="plane", families=("extent",))
    summary = measure_file(wkt, tmp_path / "o.gpkg", options=options)
    assert summary.by_status == {"not_polygon": 1, "ok": 1, "missing": 1}


class TestRunsThatStop:
    """Each with a line that says what, why and what to do; what was there before stays as it was."""

    @pytest.fixture
    def target(self, tmp_path):
        path = tmp_path / "old.gpkg"
        path.write_bytes(b"what was there before")
        yield Target(path=path, overwrite=True)
        assert path.read_bytes() == b"what was there before"
        assert [entry.name for entry in tmp_path.iterdir() if entry.name.startswith(".geoshape")] == []

    def test_missing_file(self, target):
        with pytest.raises(ReadError, match="there is no such file"):
            measure_file("nowhere.gpkg", target)

    def test_no_layer(self, target, tmp_path):
        (tmp_path / "letter.gpkg").write_text("Dear Sir or Madam")
        with pytest.raises(ReadError, match=r"letter\.gpkg"):
            measure_file(tmp_path / "letter.gpkg", target)

    def test_truncated_file(self, target, tmp_path):
        whole = (SAMPLES / "lakes.gpkg").read_bytes()
        (tmp_path / "cut.gpkg").write_bytes(whole[: len(whole) // 3])
        with pytest.raises(ReadError, match=r"cut\.gpkg"):
            measure_file(tmp_path / "cut.gpkg", target)

    def test_several_layers(self, target, tmp_path):
        two = tmp_path / "two.gpkg"
        for name in ("upper", "lower"):
            gpd.read_file(SAMPLES / "lakes.gpkg").to_file(two, layer=name)
        with pytest.raises(LayerChoiceError, match=r"--layer from: upper .*lower"):
            measure_file(two, target)

    def test_invalid_row(self, target):
        with pytest.raises(GeometryError, match=r"row \d+ is invalid: self-intersection"):
            measure_file(SAMPLES / "parcels.gpkg", target, options=MeasureOptions(invalid="stop"))

    def test_no_crs(self, target):
        with pytest.raises(GroundError, match="--assume-crs"):
            measure_file(DATA / "mexico_states" / "mexicojoin.shp", target)

    def test_unequal_area(self, target):
        with pytest.raises(GroundError, match=r"is not equal-area: its areal scale over the layer is 0\.999"):
            measure_file(SAMPLES / "lakes.gpkg", target, options=MeasureOptions(ground="EPSG:32633"))

    def test_no_jobs(self, target):
        with pytest.raises(OptionError, match="jobs = 0"):
            measure_file(SAMPLES / "lakes.gpkg", target, jobs=0)

    def test_interruption(self, target, monkeypatch):
        def interrupted(*_):
            raise KeyboardInterrupt

        with pytest.raises(KeyboardInterrupt):
            measure_file(SAMPLES / "lakes.gpkg", target, progress=interrupted)

    def test_input_equals_output(self, tmp_path):
        path = tmp_path / "lakes.gpkg"
        path.write_bytes((SAMPLES / "lakes.gpkg").read_bytes())
        with pytest.raises(WriteError, match="is the input as well"):
            measure_file(path, Target(path=path, overwrite=True))

    def test_output_exists(self, tmp_path):
        (tmp_path / "o.gpkg").write_text("x")
        with pytest.raises(WriteError, match="exists already; use --overwrite"):
            measure_file(SAMPLES / "lakes.gpkg", tmp_path / "o.gpkg")


@pytest.mark.slow
@pytest.mark.parametrize("sign", [signal.SIGKILL, signal.SIGINT])
def test_a_run_that_is_killed_leaves_the_old_output_and_no_workers(sign, tmp_path):
    rough = [Polygon(shapely.get_coordinates(shapely.Point(x, 0).buffer(0.4, quad_segs=200))) for x in range(4_000)]
    source, target = tmp_path / "many.gpkg", tmp_path / "o.gpkg"
    gpd.GeoDataFrame(geometry=rough, crs="EPSG:3035").to_file(source)
    target.write_bytes(b"old")
    command = [sys.executable, "-m", "geoshape", "measure", str(source), str(target), "--overwrite", "--jobs", "2",
               "--samples", "16384"]  # fmt: skip
    # A shell that starts the tests in the background has them ignore interrupts, and their children with them.
    hearing = (
        "import os, signal, sys; signal.signal(signal.SIGINT, signal.SIG_DFL); "
        "os.execv(sys.executable, [sys.executable, *sys.argv[1:]])"
    )
    command = [sys.executable, "-c", hearing, *command[1:]]
    run = subprocess.Popen(command, stderr=subprocess.PIPE, start_new_session=True)
    deadline = time.monotonic() + 60
    while not list(tmp_path.glob(".geoshape-*")) and time.monotonic() < deadline and run.poll() is None:
        time.sleep(0.02)
    time.sleep(0.3)
    (os.killpg if sign is signal.SIGINT else os.kill)(run.pid, sign)
    _, complaint = run.communicate(timeout=60)
    assert run.returncode != 0
    assert target.read_bytes() == b"old"
    deadline = time.monotonic() + 30
    while _session_members(run.pid) and time.monotonic() < deadline:
        time.sleep(0.1)
    assert _session_members(run.pid) == []
    if sign is signal.SIGINT:
        assert run.returncode == 1
        assert b"interrupted" in complaint
        assert b"Traceback" not in complaint
        assert list(tmp_path.glob(".geoshape-*")) == []
    else:
        measure_file(SAMPLES / "lakes.gpkg", Target(path=target, overwrite=True))
        assert list(tmp_path.glob(".geoshape-*")) == []


def _session_members(session):
    members = []
    for stat in Path("/proc").glob("[0-9]*/stat"):
        try:
            fields = stat.read_text().rpartition(")")[2].split()
        except OSError:
            continue
        if int(fields[3]) == session and fields[0] != "Z":
            members.append(int(stat.parent.name))
    return members


def test_parts_on_file_are_single(tmp_path):
    two = MultiPolygon([box(0, 0, 1, 1), box(3, 0, 4, 1)])
    gpd.GeoDataFrame({"site": [5]}, geometry=[two], crs="EPSG:3035").to_file(tmp_path / "two.gpkg")
    measure_file(tmp_path / "two.gpkg", tmp_path / "o.gpkg", options=MeasureOptions(parts="split"))
    parts = gpd.read_file(tmp_path / "o.gpkg")
    assert parts.geom_type.tolist() == ["Polygon", "Polygon"]
    assert parts.site.tolist() == [5, 5]
    assert parts.part_number.tolist() == [1, 2]
