"""``geoshape match``: turned, scaled and mirrored copies are found; templates that cannot be used are refused."""

import json

import geopandas as gpd
import numpy as np
import pytest
import shapely
from shapely import box

from tests.cli.layers import at, bolt, write


@pytest.fixture
def shapes(tmp_path):
    copies = [at(bolt(3.0, 40.0), 100), at(bolt(2.0, 0.0, mirrored=True), 200), at(box(0, 0, 7, 7), 300), None]
    return write(tmp_path / "shapes.gpkg", copies, label=["turned", "mirrored", "square", "none"])


@pytest.fixture
def templates(tmp_path):
    return write(tmp_path / "templates.gpkg", [at(box(0, 0, 1, 1)), at(bolt())], kind=["square", "bolt"])


def test_copies_are_found_with_their_turn_and_scale(geoshape, tmp_path, shapes, templates):
    ran = geoshape("match", shapes, tmp_path / "o.gpkg", "--template", templates, "--template-name", "kind")
    assert (ran.code, ran.out) == (0, "")
    result = gpd.read_file(tmp_path / "o.gpkg").set_index("label")
    assert result.match_template[:3].tolist() == ["bolt", "bolt", "square"]
    assert result.match_distance["turned"] < 1e-6
    # Turned by 40 degrees counter-clockwise; the tool counts clockwise, as azimuths do, and from true north, which
    # turns by tan(52 degrees) / 6371 km, or 0.00115 degrees, from the template to the copy 100 m east of it.
    assert result.match_turn_deg["turned"] == pytest.approx(-40.0 + 0.00115, abs=1e-4)
    assert result.match_scale["turned"] == pytest.approx(3.0, rel=1e-6)
    assert result.match_distance["mirrored"] > 0.1
    assert result.match_rank["turned"] < result.match_rank["mirrored"]
    assert np.isnan(result.match_rank["none"])
    assert result.shape_status["none"] == "missing"
    assert "3 of 4 rows" in ran.err


@pytest.mark.parametrize(("mirror", "mirrored"), [("yes", {"turned": 0, "mirrored": 1}), ("only", {"mirrored": 1})])
def test_mirror_images(geoshape, tmp_path, shapes, templates, mirror, mirrored):
    where = ("--template-where", "kind = 'bolt'")
    geoshape("match", shapes, tmp_path / "o.gpkg", "--template", templates, *where, "--mirror", mirror, "-q")
    result = gpd.read_file(tmp_path / "o.gpkg").set_index("label")
    for label, value in mirrored.items():
        assert result.match_mirrored[label] == value
        assert result.match_distance[label] < 1e-6


def test_direction_and_size_may_matter(geoshape, tmp_path, shapes, templates):
    for name, option in (("direction", "--keep-direction"), ("size", "--keep-size"), ("free", "-v")):
        assert geoshape("match", shapes, tmp_path / f"{name}.gpkg", "--template", templates, option).code == 0
    direction, size, free = (gpd.read_file(tmp_path / f"{name}.gpkg") for name in ("direction", "size", "free"))
    assert direction.match_distance[0] > 0.1 > free.match_distance[0]
    assert direction.match_turn_deg[0] == 0.0
    assert size.match_distance[0] == pytest.approx(2.0, rel=1e-6)
    assert free.match_template.tolist()[:3] == ["2", "2", "1"]


def test_the_grid_of_a_crs_does_not_turn_shapes(geoshape, tmp_path, templates):
    """North of EPSG:32633, 3 degrees off its meridian, differs from true north by sin(latitude) * 3 degrees."""
    world = gpd.GeoDataFrame(geometry=[bolt(90.0)], crs="+proj=laea +lat_0=60 +lon_0=18").to_crs(32633)
    world.to_file(tmp_path / "a.gpkg")
    for ground in ("centred", "layer", "plane"):
        geoshape(
            "match", tmp_path / "a.gpkg", tmp_path / "o.gpkg", "--template", templates, "--ground", ground,
            "--overwrite", "-q",
        )  # fmt: skip
        turn = gpd.read_file(tmp_path / "o.gpkg").match_turn_deg[0]
        assert turn == pytest.approx(0.0, abs=0.01), ground


def test_by_spectrum(geoshape, tmp_path, shapes, templates):
    ran = geoshape("match", shapes, tmp_path / "o.gpkg", "--template", templates, "--by", "spectrum", "--json")
    result = gpd.read_file(tmp_path / "o.gpkg")
    assert "match_turn_deg" not in result
    # Amplitudes of a mirror image are the same in the opposite order of harmonics, and those of a copy the same.
    assert result.match_distance[0] < 1e-6
    assert [count["name"] for count in json.loads(ran.out)["templates"]] == ["1", "2"]


def test_templates_without_a_crs_are_taken_as_they_are(geoshape, tmp_path, shapes):
    gpd.GeoDataFrame(geometry=[bolt()]).to_parquet(tmp_path / "plain.parquet")
    ran = geoshape("match", shapes, tmp_path / "o.gpkg", "--template", tmp_path / "plain.parquet")
    assert "has no CRS" in " ".join(ran.err.split())
    assert gpd.read_file(tmp_path / "o.gpkg").match_distance[0] < 1e-5


def test_many_templates_are_listed_in_part(geoshape, tmp_path, shapes):
    bank = write(tmp_path / "bank.gpkg", [at(box(0, 0, 1, 1 + i)) for i in range(15)])
    assert "and 3 more" in geoshape("match", shapes, tmp_path / "o.gpkg", "--template", bank).err


BAD = [
    ({"geometries": []}, (), 2, "0 templates were given"),
    ({"geometries": [None]}, (), 1, "has no ring"),
    ({"geometries": [shapely.LineString([(0, 0), (1, 1)])]}, (), 1, "has no ring"),
    ({"geometries": [at(box(0, 0, 1, 1))], "kind": ["a"]}, ("--template-name", "kin"), 2, "did you mean kind?"),
    ({"geometries": [at(box(0, 0, 1, 1))], "kind": [None]}, ("--template-name", "kind"), 2, "is empty in row 1"),
    ({"geometries": [at(box(0, 0, 1, 1))] * 2, "kind": ["a", "a"]}, ("--template-name", "kind"), 2, "more than once"),
    ({"geometries": [at(box(0, 0, 1, 1))]}, ("--by", "spectrum", "--mirror", "yes"), 2, "amplitudes"),
]


@pytest.mark.parametrize("case", BAD, ids=lambda case: case[-1])
def test_templates_that_cannot_be_used(geoshape, tmp_path, shapes, case):
    content, arguments, code, complaint = case
    columns = {name: values for name, values in content.items() if name != "geometries"}
    frame = gpd.GeoDataFrame(columns, geometry=content["geometries"], crs="EPSG:3035")
    frame.to_parquet(tmp_path / "t.parquet")
    ran = geoshape("match", shapes, tmp_path / "o.gpkg", "--template", tmp_path / "t.parquet", *arguments)
    assert ran.code == code, ran.err
    assert complaint in ran.err
    assert not (tmp_path / "o.gpkg").exists()


def test_a_template_must_be_named(geoshape, tmp_path, shapes):
    assert geoshape("match", shapes, tmp_path / "o.gpkg").code == 2


def test_rows_without_any_outline(geoshape, tmp_path, templates):
    gpd.GeoDataFrame(geometry=[None, None], crs="EPSG:3035").to_parquet(tmp_path / "a.parquet")
    ran = geoshape("match", tmp_path / "a.parquet", tmp_path / "o.parquet", "--template", templates)
    assert ran.code == 0, ran.err
    result = gpd.read_parquet(tmp_path / "o.parquet")
    assert result.match_template.isna().all()
    assert result.match_rank.isna().all()
    assert result.shape_status.tolist() == ["missing"] * 2
