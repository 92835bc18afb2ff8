"""``geoshape inspect`` and ``geoshape columns``."""

import json
import re
import shlex
from pathlib import Path

import geopandas as gpd
import numpy as np
import pytest
import shapely
from shapely import box

from geoshape import MeasureOptions, columns_for
from geoshape.cli.columns import markdown_table

SAMPLES = Path(__file__).parents[2] / "sample_layers"
DATA = Path(__file__).parents[1] / "data"
README = Path(__file__).parents[2] / "README.md"


class TestInspect:
    def test_counts_what_is_wrong_with_the_parcels(self, geoshape):
        ran = geoshape("inspect", SAMPLES / "parcels.gpkg")
        assert ran.code == 0
        for text in (
            "1 row to be repaired for measuring (1 self-intersection)",
            "1 row without a geometry",
            "1 row with an empty geometry",
            "1 row whose outline has been there before",
        ):
            assert text in ran.out

    def test_ends_with_a_line_that_runs(self, geoshape, tmp_path, monkeypatch):
        line = geoshape("inspect", SAMPLES / "lakes.gpkg").out.splitlines()[-1]
        words = shlex.split(line.removeprefix("next").strip())
        assert words[:2] == ["geoshape", "measure"]
        monkeypatch.chdir(tmp_path)
        assert geoshape(*words[1:]).code == 0
        assert (tmp_path / words[3]).exists()

    def test_json_holds_the_same(self, geoshape):
        seen = json.loads(geoshape("inspect", SAMPLES / "parcels.gpkg", "--json").out)
        layer = gpd.read_file(SAMPLES / "parcels.gpkg")
        assert seen["rows"] == len(layer)
        assert seen["by_status"]["repaired"] == 1
        assert seen["vertices"] == sum(
            shapely.get_num_coordinates(shape) - 1
            for shape in layer.geometry
            if shape is not None and not shape.is_empty
        )
        assert seen["crs"]["areal_scale"][0] == pytest.approx(0.9992, abs=2e-4)

    def test_spacing_is_in_metres(self, geoshape, tmp_path):
        lattice = shapely.segmentize(box(500_000, 5_000_000, 501_000, 5_001_000), 25.0)
        gpd.GeoDataFrame(geometry=[lattice], crs="EPSG:32632").to_file(tmp_path / "a.gpkg")
        spacing = json.loads(geoshape("inspect", tmp_path / "a.gpkg", "--json").out)["spacing"]
        assert spacing["middle"] == pytest.approx(25.0, rel=0.01)

    def test_pixels_are_recognised(self, geoshape, tmp_path):
        steps = shapely.union_all([box(i, i, i + 2, i + 3) for i in range(12)])
        gpd.GeoDataFrame(geometry=[steps], crs="EPSG:3035").to_file(tmp_path / "a.gpkg")
        assert "follow the edges of pixels" in geoshape("inspect", tmp_path / "a.gpkg").out

    def test_several_layers_are_listed(self, geoshape, tmp_path):
        for name in ("upper", "lower"):
            gpd.read_file(SAMPLES / "lakes.gpkg").to_file(tmp_path / "two.gpkg", layer=name)
        ran = geoshape("inspect", tmp_path / "two.gpkg")
        assert ran.code == 0
        assert "upper (Polygon, 41 rows)" in re.sub(r"\d+ rows", "41 rows", ran.out)
        assert "--layer NAME" in ran.out
        one = geoshape("inspect", tmp_path / "two.gpkg", "--layer", "lower", "--where", "basin = 'upper'")
        assert one.out.splitlines()[-1].endswith("--layer lower --where 'basin = '\"'\"'upper'\"'\"''")

    def test_no_crs_is_said(self, geoshape):
        out = geoshape("inspect", DATA / "mexico_states" / "mexicojoin.shp").out
        assert "none: say which with --assume-crs" in out
        assert out.rstrip().endswith("--assume-crs EPSG:...")
        known = geoshape("inspect", DATA / "mexico_states" / "mexicojoin.shp", "--assume-crs", "EPSG:4326").out
        assert "wrong in these coordinates, which count in degrees" in known

    def test_an_equal_area_crs_is_found_right(self, geoshape, tmp_path):
        gpd.read_file(SAMPLES / "lakes.gpkg").to_crs(3035).to_file(tmp_path / "a.gpkg")
        assert "true in these coordinates" in geoshape("inspect", tmp_path / "a.gpkg").out

    def test_missing_file(self, geoshape):
        ran = geoshape("inspect", "nowhere.gpkg")
        assert ran.code == 1
        assert "there is no such file" in ran.err


class TestColumns:
    def test_table_lists_every_column(self, geoshape):
        out = geoshape("columns").out
        for column in columns_for(MeasureOptions()):
            assert column.name in out

    def test_json_is_the_registry(self, geoshape):
        records = json.loads(geoshape("columns", "--json", "--log-moments", "--harmonics", "12").out)
        assert [record["name"] for record in records] == [
            column.name for column in columns_for(MeasureOptions(log_moments=True, harmonics=12))
        ]
        assert {"name", "short_name", "unit", "kind", "low", "high", "meaning", "source", "family"} == set(records[0])

    def test_markdown_has_a_row_a_column(self, geoshape):
        lines = geoshape("columns", "--markdown", "--families", "axes").out.splitlines()
        assert len(lines) == 2 + len(columns_for(MeasureOptions(families=("axes",))))
        assert len({line.count("|") - 2 * line.count("\\|") for line in lines}) == 1

    def test_readme_holds_the_table_of_the_registry(self):
        assert markdown_table(columns_for(MeasureOptions())) in README.read_text()


def test_values_keep_to_the_ranges_of_the_registry(tmp_path, geoshape):
    for name in ("lakes.gpkg", "patches.geojson", "parcels.gpkg"):
        geoshape("measure", SAMPLES / name, tmp_path / "o.gpkg", "--overwrite", "-q")
        layer = gpd.read_file(tmp_path / "o.gpkg")
        for column in columns_for(MeasureOptions()):
            if column.kind != "text":
                values = layer[column.name].astype(float)
                low, high = (
                    -np.inf if column.low is None else column.low,
                    np.inf if column.high is None else column.high,
                )
                assert ((values >= low) & (values <= high) | values.isna()).all(), (name, column.name)
