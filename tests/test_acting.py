"""Decisions from file to file: formats, streams, what is measured again, what stops them."""

import geopandas as gpd
import numpy as np
import pytest
from shapely import box

from geoshape import (
    ActOptions,
    GroupOptions,
    MatchOptions,
    MeasureOptions,
    RedrawOptions,
    Source,
    Target,
    TemplateSource,
    flag_file,
    group_file,
    match_file,
    measure_file,
    parse_rule,
    redraw_file,
    summarise_file,
)
from geoshape.acting.laid import lay
from geoshape.acting.opened import open_for
from geoshape.errors import GeometryError, WriteError
from geoshape.geometry import read_wkb
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.place import open_ground
from geoshape.layers.read import open_layer, read_batches
from geoshape.layers.spool import Spool
from geoshape.measuring import measure_geometries
from tests.cli.layers import at, bolt, lots, write

FORMATS = ["gpkg", "parquet", "fgb", "shp", "geojson", "geojsonl", "csv"]


@pytest.mark.parametrize("extension", FORMATS)
def test_every_format_takes_every_decision(tmp_path, extension):
    source = write(tmp_path / "a.gpkg", [at(bolt(1 + 0.1 * i, 20 * i)) for i in range(6)], name=list("abcdef"))
    templates = TemplateSource(source=Source(path=source, where="name = 'a'"))
    runs = {
        "flag": lambda target: flag_file(source, target, [parse_rule("n: axis_ratio < 0.9")]).written,
        "match": lambda target: match_file(source, target, templates).written,
        "group": lambda target: group_file(source, target, GroupOptions(columns=("area_m2",), count=2)).written,
        "redraw": lambda target: redraw_file(source, target).written,
    }
    for name, run in runs.items():
        written = run(tmp_path / f"{name}.{extension}")
        assert written.rows == 6, name
        result = gpd.read_file(written.output) if extension != "parquet" else gpd.read_parquet(written.output)
        assert result.name.tolist() == list("abcdef"), name


def test_a_measured_layer_is_not_measured_again(tmp_path):
    measure_file(lots(tmp_path / "a.gpkg"), tmp_path / "m.gpkg")
    written = flag_file(tmp_path / "m.gpkg", tmp_path / "o.gpkg", [parse_rule("n: axis_ratio < 0.2")]).written
    assert (written.measured, written.ground) == ((), None)
    assert written.columns == ("flag", "flag_reasons")
    assert written.by_status == {"ok": 3, "missing": 1, "empty": 1}
    whole = gpd.read_file(tmp_path / "m.gpkg")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.drop(columns=["flag", "flag_reasons"]).equals(whole)


def test_outlines_are_laid_as_a_measurement_lays_them(tmp_path):
    """The record columns of every reference and made-up fault agree with those of `measure`."""
    bow = at(box(0, 0, 1, 1)).__class__([(0, 0), (10, 10), (10, 0), (0, 10)])
    far = box(1e9, 1e9, 1e9 + 5, 1e9 + 5)
    shapes = [at(bolt()), None, bow, box(0, 0, 0, 5), far, at(box(0, 0, 9, 9).difference(box(1, 1, 2, 2)))]
    gpd.GeoDataFrame(geometry=shapes, crs="EPSG:3035").to_parquet(tmp_path / "a.parquet")
    for path in (tmp_path / "a.parquet", "tests/data/world_geodesic_area/world.gpkg"):
        for options in (MeasureOptions(families=("extent",)), MeasureOptions(holes="fill", families=("extent",))):
            info = open_layer(path)
            values = [value for batch in read_batches(info) for value in batch.geometry.to_pylist()]
            geometries, unreadable = read_wkb(values)
            ground = open_ground(plan_ground(open_for(path, ActOptions()).crs, None, options))
            laid = lay(geometries, unreadable, ground, options)
            measured = measure_geometries(geometries, ground, options, unreadable=unreadable).values
            record = laid.record()
            assert record["shape_status"] == measured["shape_status"].tolist()
            assert record["shape_note"] == measured["shape_note"].tolist()
            np.testing.assert_array_equal(record["ground_distortion"], measured["ground_distortion"])
            area = laid.placed.batch.sum_ring_values(laid.placed.batch.ring_signed_area)
            np.testing.assert_allclose(area, np.nan_to_num(measured["area_m2"]), rtol=1e-12)


def test_what_the_crs_cannot_hold_is_null_with_its_reason(tmp_path):
    source = write(tmp_path / "a.gpkg", [box(1e9, 1e9, 1e9 + 5, 1e9 + 5), at(bolt())])
    redraw_file(source, tmp_path / "o.gpkg")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.shape_status.tolist() == ["invalid", "ok"]
    assert "outside what the layer's CRS can hold" in result.shape_note[0]


def test_progress_is_told(tmp_path):
    seen = []
    how = ActOptions(progress=lambda done, total: seen.append((done, total)))
    redraw_file(lots(tmp_path / "a.gpkg"), tmp_path / "o.gpkg", how=how)
    assert seen == [(5, 5)]


@pytest.mark.parametrize("jobs", [1, 2])
def test_workers_match_and_redraw_the_same(tmp_path, jobs):
    shapes = [at(bolt(1 + 0.01 * i, i), 30 * i) for i in range(400)]
    dense = [shape.segmentize(0.02) for shape in shapes]
    source = write(tmp_path / "a.gpkg", dense, number=range(400))
    templates = TemplateSource(source=Source(path=source, where="number = 0"))
    how = ActOptions(jobs=jobs)
    matched = match_file(source, tmp_path / "m.gpkg", templates, options=MatchOptions(), how=how)
    assert matched.templates[0].n_nearest == 400
    assert matched.templates[0].median_distance < 1e-4
    redrawn = redraw_file(source, tmp_path / "r.gpkg", options=RedrawOptions(harmonics=3), how=how)
    assert redrawn.redrawn == 400
    for name in ("m", "r"):
        assert gpd.read_file(tmp_path / f"{name}.gpkg").number.tolist() == list(range(400))


def test_a_layer_without_rows(tmp_path):
    source = write(tmp_path / "a.gpkg", [])
    assert flag_file(source, tmp_path / "f.gpkg", [parse_rule("n: axis_ratio < 0.2")]).flagged == 0
    drawn = redraw_file(source, tmp_path / "r.gpkg")
    assert (drawn.redrawn, drawn.median_area_error) == (0, None)
    assert summarise_file(source).rows == 0


def test_invalid_geometries_stop_where_that_is_asked_for(tmp_path):
    bow = box(0, 0, 1, 1).__class__([(0, 0), (10, 10), (10, 0), (0, 10)])
    source = write(tmp_path / "a.gpkg", [bow])
    how = ActOptions(measure=MeasureOptions(invalid="stop"))
    with pytest.raises(GeometryError, match="row 1 is invalid"):
        redraw_file(source, tmp_path / "o.gpkg", how=how)
    assert not (tmp_path / "o.gpkg").exists()


def test_nothing_is_left_of_a_run_that_fails(tmp_path, monkeypatch):
    monkeypatch.setenv("TMPDIR", str(tmp_path / "tmp"))
    (tmp_path / "tmp").mkdir()
    monkeypatch.setattr("tempfile.tempdir", None)
    source = lots(tmp_path / "a.gpkg")

    def full(*_):
        raise WriteError("the disk is full")

    monkeypatch.setattr(Spool, "write", full)
    with pytest.raises(WriteError, match="full"):
        group_file(source, tmp_path / "o.gpkg", GroupOptions(columns=("axis_ratio",)))
    assert list((tmp_path / "tmp").iterdir()) == []
    assert not (tmp_path / "o.gpkg").exists()


def test_the_extent_is_read_where_a_filter_asks_for_it(tmp_path):
    source = Source(path=lots(tmp_path / "a.gpkg"), where="zone = 'R'")
    how = ActOptions(measure=MeasureOptions(ground="layer"))
    written = flag_file(source, Target(path=tmp_path / "o.gpkg"), [parse_rule("n: axis_ratio < 0.2")], how=how).written
    assert written.ground.startswith("layer: ")
    assert written.rows == 2
    empty = Source(path=tmp_path / "a.gpkg", where="zone IS NULL")
    again = flag_file(empty, Target(path=tmp_path / "p.gpkg"), [parse_rule("n: lot = 'e'")], how=how)
    assert again.flagged == 1
