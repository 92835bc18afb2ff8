"""``geoshape redraw``: outlines come back to where they were, in any CRS, with their area error."""

import json
from pathlib import Path

import geopandas as gpd
import numpy as np
import pytest
import shapely
from shapely import box

from tests.cli.layers import at, bolt, write

DATA = Path(__file__).parents[1] / "data"


def test_many_harmonics_redraw_the_outline(geoshape, tmp_path):
    source = write(tmp_path / "a.gpkg", [at(bolt(10.0)), None], name=["bolt", "none"])
    ran = geoshape("redraw", source, tmp_path / "o.gpkg", "--harmonics", "500")
    assert (ran.code, ran.out) == (0, "")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.name.tolist() == ["bolt", "none"]
    assert result.crs.to_epsg() == 3035
    off = result.geometry[0].symmetric_difference(at(bolt(10.0))).area / bolt(10.0).area
    assert off < 2e-3
    assert result.redraw_area_error[0] == pytest.approx(0.0, abs=1e-4)
    assert result.redraw_area_m2[0] == pytest.approx(result.geometry[0].area, rel=1e-6)
    assert result.geometry[1] is None
    assert result.shape_status.tolist() == ["ok", "missing"]
    assert "1 of 2 rows from 500 harmonics" in ran.err


def test_one_harmonic_is_an_ellipse(geoshape, tmp_path):
    source = write(tmp_path / "a.gpkg", [at(box(0, 0, 40, 10))])
    geoshape("redraw", source, tmp_path / "o.gpkg", "--harmonics", "1", "--points", "200", "-q")
    drawn = gpd.read_file(tmp_path / "o.gpkg").geometry[0]
    x, y = np.array(drawn.exterior.coords)[:-1].T
    x, y = x - x.mean(), y - y.mean()
    # Points of an ellipse about 0 satisfy a x^2 + b x y + c y^2 = 1.
    design = np.column_stack((x * x, x * y, y * y))
    _, residual, _, _ = np.linalg.lstsq(design, np.ones_like(x), rcond=None)
    assert residual[0] < 1e-12


@pytest.mark.parametrize("ground", ["centred", "layer", "plane"])
@pytest.mark.parametrize("crs", [32633, 2263, 3006])
def test_outlines_come_back_from_every_ground(geoshape, tmp_path, ground, crs):
    """EPSG:2263 counts in US survey feet, the axes of EPSG:3006 are north and east."""
    shape = bolt(300.0)
    place = {32633: (15.5, 61.0), 2263: (-74.0, 40.5), 3006: (15.2, 61.5)}[crs]
    frame = gpd.GeoDataFrame(geometry=[shape], crs=f"+proj=laea +lon_0={place[0]} +lat_0={place[1]}").to_crs(crs)
    frame.to_file(tmp_path / "a.gpkg")
    options = ("--harmonics", "400", "--ground", ground, "-q")
    assert geoshape("redraw", tmp_path / "a.gpkg", tmp_path / "o.gpkg", *options).code == 0
    drawn = gpd.read_file(tmp_path / "o.gpkg").geometry[0]
    assert drawn.symmetric_difference(frame.geometry[0]).area / frame.geometry[0].area < 2e-3


def test_parts_and_holes(geoshape, tmp_path):
    ring = box(0, 0, 30, 30).difference(box(10, 10, 20, 20))
    both = at(shapely.MultiPolygon([ring, box(50, 0, 60, 10)]))
    source = write(tmp_path / "a.gpkg", [both])
    for name, options in (("all", ("--all-parts", "--holes")), ("one", ())):
        ran = geoshape("redraw", source, tmp_path / f"{name}.gpkg", "--harmonics", "200", *options, "--json")
        assert json.loads(ran.out)["redrawn"] == 1
    every, one = (gpd.read_file(tmp_path / f"{name}.gpkg").geometry[0] for name in ("all", "one"))
    assert every.area == pytest.approx(900 - 100 + 100, rel=1e-3)
    assert (every.geom_type, len(every.geoms[0].interiors) + len(every.geoms[1].interiors)) == ("MultiPolygon", 1)
    assert one.area == pytest.approx(900, rel=1e-3)


def test_outlines_across_the_antimeridian_stay_whole(geoshape, tmp_path):
    halves = shapely.MultiPolygon([box(178, -18, 180, -16), box(-180, -18, -179, -16)])
    gpd.GeoDataFrame(geometry=[halves], crs=4326).to_file(tmp_path / "a.gpkg")
    geoshape("redraw", tmp_path / "a.gpkg", tmp_path / "o.gpkg", "--harmonics", "64", "-q")
    drawn = gpd.read_file(tmp_path / "o.gpkg").geometry[0]
    west, _, east, _ = drawn.bounds
    assert east - west == pytest.approx(3.0, abs=0.1)


def test_a_polygon_round_a_pole_says_why_it_has_none(geoshape, tmp_path):
    ring = shapely.Polygon([(longitude, -70.0) for longitude in range(-180, 180, 10)])
    gpd.GeoDataFrame(geometry=[ring], crs=4326).to_file(tmp_path / "a.gpkg")
    ran = geoshape("redraw", tmp_path / "a.gpkg", tmp_path / "o.gpkg")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert result.geometry[0] is None
    assert "goes round a pole" in result.redraw_note[0]
    assert "1 rows; see redraw_note" in ran.err


def test_crossing_outlines_are_noted(geoshape, tmp_path):
    teeth = [box(4 * i, 0, 4 * i + 2, 60) for i in range(12)]
    comb = shapely.union_all([box(0, 0, 46, 1), *teeth])
    geoshape("redraw", write(tmp_path / "a.gpkg", [at(comb)]), tmp_path / "o.gpkg", "--harmonics", "6", "-q")
    assert "crosses itself" in gpd.read_file(tmp_path / "o.gpkg").redraw_note[0]


@pytest.mark.parametrize(
    ("arguments", "complaint"),
    [
        (("--harmonics", "0"), "harmonics = 0"),
        (("--harmonics", "8", "--points", "9"), "points = 9 are too few"),
        (("--harmonics", "9999"), "harmonics = 9999"),
    ],
)
def test_wrong_use(geoshape, tmp_path, arguments, complaint):
    ran = geoshape("redraw", write(tmp_path / "a.gpkg", [at(bolt())]), tmp_path / "o.gpkg", *arguments)
    assert (ran.code, complaint in ran.err) == (2, True)


def test_real_coasts_keep_their_area(geoshape, tmp_path):
    ran = geoshape(
        "redraw", DATA / "world_geodesic_area" / "world.gpkg", tmp_path / "o.gpkg", "--harmonics", "64",
        "--all-parts", "--holes", "--json",
    )  # fmt: skip
    told = json.loads(ran.out)
    assert told["redrawn"] == 177
    assert told["median_area_error"] < 0.003
