"""The sample layers: what they hold, and that their script still makes them."""

import importlib.util
from pathlib import Path

import geopandas as gpd
import pytest
import shapely

FOLDER = Path(__file__).parent.parent / "sample_layers"


@pytest.fixture(scope="module")
def layers():
    return {name: gpd.read_file(FOLDER / name) for name in ("lakes.gpkg", "patches.geojson", "parcels.gpkg")}


@pytest.mark.parametrize(
    ("name", "low", "high", "crs"),
    [("lakes.gpkg", 35, 45, 32633), ("patches.geojson", 140, 160, 4326), ("parcels.gpkg", 290, 310, 3006)],
)
def test_sizes_and_crs(layers, name, low, high, crs):
    assert low <= len(layers[name]) <= high
    assert layers[name].crs.to_epsg() == crs


def test_lakes_have_islands_and_a_range_of_sizes(layers):
    lakes = layers["lakes.gpkg"].geometry
    assert lakes.is_valid.all()
    assert shapely.get_num_interior_rings(lakes.values).sum() >= 10
    assert lakes.area.min() < 1e4
    assert lakes.area.max() > 1e7


def test_patches_come_in_four_classes_and_do_not_overlap(layers):
    patches = layers["patches.geojson"]
    assert set(patches.habitat) == {"woodland", "wet meadow", "heath", "scrub"}
    assert patches.is_valid.all()
    assert (patches.geom_type == "MultiPolygon").any()
    flat = patches.to_crs(32633).geometry
    assert flat.area.sum() - shapely.union_all(flat.values).area < 1e-6 * flat.area.sum()


def test_parcels_hold_the_planted_defects_and_no_others(layers):
    shapes = layers["parcels.gpkg"].geometry.values
    missing, empty = shapely.is_missing(shapes), shapely.is_empty(shapes)
    assert (missing.sum(), empty.sum()) == (1, 1)
    whole = shapes[~missing & ~empty]
    assert (~shapely.is_valid(whole)).sum() == 1
    assert len(whole) - len(set(shapely.to_wkb(shapely.normalize(whole)))) == 1


def test_layers_lie_beside_each_other_on_the_globe(layers):
    lakes, patches, parcels = (layer.to_crs(32633).geometry for layer in layers.values())
    water = shapely.union_all(lakes.values)
    town = shapely.union_all(parcels[parcels.is_valid].values)
    assert water.intersection(town).area == 0.0
    assert water.intersection(shapely.union_all(patches.values)).area < 1.0
    assert water.distance(town) < 5_000.0


@pytest.mark.slow
def test_the_script_makes_these_layers(layers):
    spec = importlib.util.spec_from_file_location("make_sample_layers", FOLDER / "make_sample_layers.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    for name, made in module.make_all().items():
        kept = layers[name]
        plain = [column for column in made.columns if column not in {"geometry", "surveyed"}]
        assert (kept[plain].to_numpy() == made[plain].to_numpy()).all(), name
        same = shapely.equals_exact(
            kept.geometry.normalize().values,
            made.geometry.normalize().values,
            tolerance=2e-7 if "json" in name else 0.01,
        )
        assert (same | made.geometry.isna().to_numpy()).all(), name
