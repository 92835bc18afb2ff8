"""Decisions on frames: the same columns and numbers as the file routes, under the frame's own index."""

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely
from shapely import box

import geoshape
from geoshape import (
    ActOptions,
    CompareOptions,
    CompareSources,
    GroupOptions,
    MatchOptions,
    MeasureOptions,
    RedrawOptions,
    Source,
    SummaryOptions,
    TemplateSource,
    UnusualOptions,
)
from geoshape.errors import ColumnNameError, GroundError, GroundWarning, OptionError
from tests.cli.layers import at, bolt, strips_and_squares


@pytest.fixture
def layer(tmp_path):
    frame = gpd.read_file(strips_and_squares(tmp_path / "a.gpkg"))
    frame["depth"] = np.random.default_rng(5).normal(10.0, 1.0, len(frame))
    frame.loc[4, "geometry"] = None
    frame.to_parquet(tmp_path / "a.parquet")
    return frame


def same(frame, path):
    """Hold a frame against a file: names, order and values; nulls alike."""
    stored = gpd.read_parquet(path)
    assert list(frame.columns[frame.columns != "geometry"]) == list(stored.columns[stored.columns != "geometry"])
    for name in stored.columns.drop("geometry"):
        left, right = frame[name], stored[name]
        assert left.isna().tolist() == right.isna().tolist(), name
        if pd.api.types.is_numeric_dtype(right):
            np.testing.assert_allclose(
                left.astype(float).to_numpy(), right.astype(float).to_numpy(), rtol=1e-9, atol=1e-9, err_msg=name
            )
        else:
            assert left.dropna().tolist() == right.dropna().tolist(), name


def test_flag(layer, tmp_path):
    rules = ["narrow: axis_ratio < 0.2", "deep: depth > 10"]
    unusual = UnusualOptions(columns=("depth",), within="kind")
    frame = geoshape.flag(layer, rules, unusual=unusual)
    read = [geoshape.parse_rule(rule) for rule in rules]
    geoshape.flag_file(tmp_path / "a.parquet", tmp_path / "o.parquet", read, unusual=unusual)
    same(frame, tmp_path / "o.parquet")
    assert frame.flag.dtype == "Int64"


def test_match(layer, tmp_path):
    templates = gpd.GeoDataFrame({"n": ["bolt", "box"]}, geometry=[at(bolt()), at(box(0, 0, 5, 5))], crs="EPSG:3035")
    templates.to_parquet(tmp_path / "t.parquet")
    source = TemplateSource(source=Source(path=tmp_path / "t.parquet"), names="n")
    for options in (MatchOptions(), MatchOptions(by="spectrum"), MatchOptions(mirror="yes", keep_size=True)):
        frame = geoshape.match(layer, templates, names="n", options=options)
        target = geoshape.Target(path=tmp_path / "o.parquet", overwrite=True)
        geoshape.match_file(tmp_path / "a.parquet", target, source, options=options)
        same(frame, tmp_path / "o.parquet")


def test_group(layer, tmp_path):
    options = GroupOptions(columns=("axis_ratio", "reock"), count=2)
    frame = geoshape.group(layer, options)
    geoshape.group_file(tmp_path / "a.parquet", tmp_path / "o.parquet", options)
    same(frame, tmp_path / "o.parquet")


def test_compare(layer, tmp_path):
    after = layer.iloc[2:].copy()
    after["geometry"] = after.geometry.scale(1.1, 1.0)
    after = after.to_crs(4258)
    after.to_parquet(tmp_path / "b.parquet")
    frame = geoshape.compare(layer, after)
    sources = CompareSources(before=Source(path=tmp_path / "a.parquet"), after=Source(path=tmp_path / "b.parquet"))
    geoshape.compare_files(sources, tmp_path / "o.parquet")
    same(frame, tmp_path / "o.parquet")
    stored = gpd.read_parquet(tmp_path / "o.parquet")
    assert frame.crs == stored.crs
    assert frame.geometry.isna().tolist() == stored.geometry.isna().tolist()
    assert shapely.equals_exact(frame.geometry.dropna().values, stored.geometry.dropna().values, 1e-12).all()


def test_compare_by_key():
    shapes = [at(box(0, 0, 1, 1)), at(box(5, 0, 6, 1))]
    before = gpd.GeoDataFrame({"id": [1, 2]}, geometry=shapes, crs="EPSG:3035")
    found = geoshape.compare(before, before.iloc[:1], options=CompareOptions(key="id"))
    assert found.relation.tolist() == ["kept", "lost"]
    assert found.id.tolist() == [1, 2]


def test_summarise(layer, tmp_path):
    options = SummaryOptions(by=("kind",), columns=("area_m2", "axis_azimuth_deg", "depth"))
    frame = geoshape.summarise(layer, options)
    found = geoshape.summarise_file(tmp_path / "a.parquet", options)
    stored = found.summary.statistics.to_pandas()
    assert list(frame.columns) == list(stored.columns)
    assert frame["count"].tolist() == stored["count"].tolist()
    np.testing.assert_allclose(frame["mean"].to_numpy(), stored["mean"].to_numpy(), rtol=1e-9)
    assert found.measured == ("area_m2", "axis_azimuth_deg")


def test_redraw(layer, tmp_path):
    for options in (RedrawOptions(harmonics=5), RedrawOptions(harmonics=3, all_parts=True, holes=True)):
        frame = geoshape.redraw(layer, options=options)
        target = geoshape.Target(path=tmp_path / "o.parquet", overwrite=True)
        geoshape.redraw_file(tmp_path / "a.parquet", target, options=options)
        same(frame, tmp_path / "o.parquet")
        stored = gpd.read_parquet(tmp_path / "o.parquet")
        assert shapely.equals_exact(frame.geometry.dropna().values, stored.geometry.dropna().values, 1e-6).all()
        assert frame.geometry[4] is None


@pytest.mark.parametrize("index", [[7, 7, 3], ["a", "b", "c"]])
def test_an_index_of_any_kind_is_kept(index):
    shapes = [at(box(0, 0, 1, 1)), at(box(0, 0, 9, 1)), at(box(0, 0, 1, 3))]
    layer = gpd.GeoDataFrame({"v": [1, 2, 3]}, geometry=shapes, crs="EPSG:3035", index=index)
    frame = geoshape.flag(layer, ["narrow: axis_ratio < 0.2"], measuring=MeasureOptions(prefix="q_"))
    assert frame.index.tolist() == index
    assert frame.q_flag.tolist() == [0, 1, 0]
    assert frame.crs == layer.crs
    assert layer.columns.tolist() == ["v", "geometry"]


def test_bad_frames_are_refused():
    shapes = [at(box(0, 0, 1, 1))]
    layer = gpd.GeoDataFrame({"Flag": [1]}, geometry=shapes, crs="EPSG:3035")
    with pytest.raises(ColumnNameError, match="choose a prefix"):
        geoshape.flag(layer, ["a: axis_ratio < 1"])
    with pytest.raises(OptionError, match=r"did you mean Flag\?"):
        geoshape.flag(layer, ["a: flagg = 1"])
    with pytest.raises(OptionError, match=r"did you mean reock\?"):
        geoshape.group(layer, GroupOptions(columns=("reok",)))
    with pytest.raises(OptionError, match=r"did you mean area_m2\?"):
        geoshape.summarise(layer, SummaryOptions(columns=("area_m",)))
    with pytest.raises(GroundError, match="no CRS"):
        geoshape.compare(layer, layer.set_crs(None, allow_override=True))
    with pytest.raises(OptionError, match="nothing to flag by"):
        geoshape.flag(layer)


def test_what_the_ground_warns_of_is_warned():
    layer = gpd.GeoDataFrame(geometry=[box(600_000, 5_000_000, 600_100, 5_000_100)], crs="EPSG:32632")
    with pytest.warns(GroundWarning, match="true area"):
        geoshape.redraw(layer, measuring=MeasureOptions(ground="plane"))


def test_options_of_acting_are_checked():
    with pytest.raises(OptionError, match="jobs = 0"):
        ActOptions(jobs=0)
    with pytest.raises(OptionError, match="measure the layer so first"):
        ActOptions(measure=MeasureOptions(parts="split"))


def test_columns_without_a_family_of_their_own():
    """What says what became of a row, logarithms and high harmonics are measured as well."""
    layer = gpd.GeoDataFrame(geometry=[at(bolt())], crs="EPSG:3035")
    frame = geoshape.flag(
        layer, ["a: ground_distortion < 1 AND shape_status = 'ok'", "b: hu_2_log < 0 AND fd_p20 >= 0"]
    )
    assert frame.flag_reasons.tolist() == ["a; b"]
    assert {"hu_2_log", "fd_p20"} <= set(frame.columns)
    whole = geoshape.measure(layer, options=MeasureOptions(log_moments=True, harmonics=20))
    assert frame.fd_p20[0] == whole.fd_p20[0]
