"""The sample layers: what they hold, that they fit each other, and that their script still makes them."""

import importlib
from pathlib import Path

import geopandas as gpd
import numpy as np
import pytest
import shapely

FOLDER = Path(__file__).parent.parent / "sample_layers"
NAMES = ("lakes.gpkg", "lakes_earlier.gpkg", "patches.geojson", "parcels.gpkg")
VALLEY = "EPSG:32633"
COLUMNS = {
    "lakes.gpkg": "lake_id name basin lake_type elevation_m max_depth_m survey_year",
    "patches.geojson": "patch_id habitat condition surveyed",
    "parcels.gpkg": "parcel_id zone land_use owner_type assessed_value",
}


@pytest.fixture(scope="module")
def layers():
    return {name: gpd.read_file(FOLDER / name) for name in NAMES}


@pytest.fixture(scope="module")
def lakes(layers):
    return layers["lakes.gpkg"].set_index("lake_id")


@pytest.fixture(scope="module")
def earlier(layers):
    return layers["lakes_earlier.gpkg"].set_index("lake_id")


def lots_that_are_lots(layers):
    """Parcels without the planted defects: valid, there, and each once."""
    parcels = layers["parcels.gpkg"]
    shapes = parcels.geometry.values
    sound = ~shapely.is_missing(shapes) & ~shapely.is_empty(shapes) & shapely.is_valid(shapes)
    return parcels[sound].drop_duplicates("parcel_id")


@pytest.mark.parametrize(
    ("name", "rows", "epsg"),
    list(zip(NAMES, (40, 40, 154, 308), (32633, 32633, 4326, 3006), strict=True)),
)
def test_rows_and_crs_are_those_of_the_readme(layers, name, rows, epsg):
    assert len(layers[name]) == rows
    assert layers[name].crs.to_epsg() == epsg
    line = next(line for line in (FOLDER / "README.md").read_text().splitlines() if line.startswith(f"| `{name}`"))
    assert f"| {rows} | EPSG:{epsg}" in line


@pytest.mark.parametrize("name", COLUMNS)
def test_columns_are_filled(layers, name):
    plain = layers[name].drop(columns="geometry")
    assert plain.columns.tolist() == COLUMNS[name].split()
    assert not plain.isna().any(axis=None)


def test_the_layers_are_small():
    assert sum((FOLDER / name).stat().st_size for name in NAMES) < 3_000_000


def test_lakes_have_islands_and_a_range_of_sizes_and_kinds(lakes):
    assert lakes.index.is_unique
    assert lakes.name.is_unique
    assert lakes.is_valid.all()
    assert (lakes.geom_type == "Polygon").all()
    assert lakes.lake_type.value_counts().to_dict() == {
        "tarn": 16,
        "kettle": 12,
        "oxbow": 6,
        "trough": 4,
        "reservoir": 2,
    }
    assert shapely.get_num_interior_rings(lakes.geometry.values).sum() >= 15
    assert 4_000 < lakes.area.min() < 10_000
    assert 20e6 < lakes.area.max() < 30e6


def test_kinds_of_lakes_differ_in_shape(lakes):
    compactness = (4 * np.pi * lakes.area / lakes.length**2).groupby(lakes.lake_type).median()
    assert compactness["kettle"] > 0.5 > compactness["tarn"] > compactness["oxbow"]
    rectangle = shapely.minimum_rotated_rectangle(lakes.geometry.values)
    corners = np.array([shapely.get_coordinates(box)[:3] for box in rectangle])
    sides = np.linalg.norm(np.diff(corners, axis=1), axis=2)
    slender = (lakes.lake_type == "trough").to_numpy()
    assert np.median(sides[slender].max(axis=1) / sides[slender].min(axis=1)) > 3.0


def test_lakes_lie_apart(lakes, earlier):
    for survey in (lakes, earlier):
        one, other = survey.sindex.query(survey.geometry, predicate="intersects")
        assert (one == other).all()


def test_surveys_differ_as_the_readme_says(lakes, earlier):
    assert earlier.is_valid.all()
    assert earlier.name.is_unique
    new, lost = lakes.index.difference(earlier.index), earlier.index.difference(lakes.index)
    # New: the part split off and the reservoir. Lost: the lake that was swallowed and the pond that was drained.
    assert sorted(lakes.lake_type[new]) == ["reservoir", "tarn"]
    assert sorted(earlier.lake_type[lost]) == ["kettle", "tarn"]
    both = lakes.index.intersection(earlier.index)
    assert (lakes.name[both] == earlier.name[both]).all()
    assert (lakes.lake_type[both] == earlier.lake_type[both]).all()
    assert (lakes.geometry[both].intersection(earlier.geometry[both]).area > 0.5 * earlier.area[both]).all()
    assert earlier.survey_year.max() < 1990 < lakes.survey_year.min()


def test_two_lakes_grew_together_and_one_fell_in_two(lakes, earlier):
    def met(shape, survey):
        share = survey.intersection(shape).area / survey.area
        return sorted(share[share > 0.5].index)

    grown = [lake for lake in lakes.index if len(met(lakes.geometry[lake], earlier)) > 1]
    fallen = [lake for lake in earlier.index if len(met(earlier.geometry[lake], lakes)) > 1]
    assert len(grown) == len(fallen) == 1
    parts = met(lakes.geometry[grown[0]], earlier)
    assert len(parts) == 2
    assert max(parts, key=earlier.area.get) == grown[0]
    halves = met(earlier.geometry[fallen[0]], lakes)
    assert len(halves) == 2
    assert max(halves, key=lakes.area.get) == fallen[0]


def test_the_earlier_survey_is_coarser(lakes, earlier):
    both = lakes.index.intersection(earlier.index)
    counts = [shapely.get_num_coordinates(survey.geometry[both].values).sum() for survey in (lakes, earlier)]
    assert counts[0] > 1.8 * counts[1]
    assert (lakes.elevation_m[both] - earlier.elevation_m[both]).round(1).nunique() > 5


def test_patches_come_in_four_classes_and_do_not_overlap(layers):
    patches = layers["patches.geojson"]
    assert patches.habitat.value_counts().to_dict() == {"woodland": 48, "heath": 36, "wet meadow": 36, "scrub": 34}
    assert patches.is_valid.all()
    assert (patches.geom_type == "MultiPolygon").sum() >= 10
    flat = patches.to_crs(VALLEY).geometry
    assert flat.area.min() > 900.0
    assert flat.area.sum() - shapely.union_all(flat.values).area < 1e-6 * flat.area.sum()


def test_classes_of_patches_differ_in_shape(layers):
    patches = layers["patches.geojson"].to_crs(VALLEY)
    filled = (patches.area / patches.convex_hull.area).groupby(patches.habitat).median()
    assert filled["woodland"] > 0.75 > filled["heath"] > filled["wet meadow"]
    compactness = (4 * np.pi * patches.area / patches.length**2).groupby(patches.habitat).median()
    assert compactness["woodland"] > 1.3 * compactness["heath"]
    assert compactness["woodland"] > 1.3 * compactness["scrub"]


def test_geojson_rings_turn_as_rfc_7946_says(layers):
    parts = shapely.get_parts(layers["patches.geojson"].geometry.values)
    assert shapely.is_ccw(shapely.get_exterior_ring(parts)).all()


def test_parcels_hold_the_planted_defects_and_no_others(layers):
    parcels = layers["parcels.gpkg"]
    shapes = parcels.geometry.values
    missing, empty = shapely.is_missing(shapes), shapely.is_empty(shapes)
    assert (missing.sum(), empty.sum()) == (1, 1)
    assert shapely.is_valid_reason(shapes[~missing & ~empty & ~shapely.is_valid(shapes)])[0].startswith("Self-inter")
    assert (~shapely.is_valid(shapes[~missing & ~empty])).sum() == 1
    again = np.flatnonzero(parcels.parcel_id.duplicated())
    assert len(again) == 1
    assert parcels.iloc[again[0]].equals(parcels.iloc[again[0] - 1])


def test_parcels_tile_their_blocks_and_leave_the_streets(layers):
    lots = lots_that_are_lots(layers)
    assert shapely.coverage_is_valid(lots.geometry.values)
    blocks = lots.dissolve(lots.parcel_id.str[:2])
    one, other = blocks.sindex.query(blocks.geometry, predicate="dwithin", distance=5.0)
    assert (one == other).all()


def test_parcels_come_in_odd_shapes_too(layers):
    shapes = lots_that_are_lots(layers).geometry
    width = 2.0 * shapes.area / shapes.length
    corners = shapely.get_num_coordinates(shapely.simplify(shapes.values, 0.05)) - 1
    assert (width < 1.5).sum() >= 3  # slivers
    assert (corners == 3).sum() >= 3  # triangles
    assert (shapes.area / shapes.convex_hull.area < 0.9).sum() >= 10  # flag lots and L-shapes


def test_layers_lie_beside_each_other_on_the_globe(layers):
    flat = [layers[name].to_crs(VALLEY).geometry for name in ("lakes.gpkg", "patches.geojson")]
    water, patches = (shapely.union_all(shapes.values) for shapes in flat)
    town = shapely.union_all(lots_that_are_lots(layers).to_crs(VALLEY).geometry.values)
    assert water.intersection(town).area == 0.0
    assert water.intersection(patches).area < 1.0
    assert patches.intersection(town).area == 0.0
    # The town is in the midst of the valley, among meadows.
    assert patches.distance(town) < 100.0
    assert shapely.box(*water.bounds).contains(town)


@pytest.mark.slow
def test_the_script_makes_these_layers(layers, monkeypatch):
    monkeypatch.syspath_prepend(str(FOLDER))
    for name, made in importlib.import_module("make_sample_layers").make_all().items():
        kept = layers[name]
        plain = [column for column in made.columns if column != "geometry"]
        assert kept[plain].astype(str).to_numpy().tolist() == made[plain].astype(str).to_numpy().tolist(), name
        tolerance = 2e-7 if name.endswith("geojson") else 0.02
        both = [frame.geometry.normalize().values for frame in (kept, made)]
        same = shapely.equals_exact(*both, tolerance=tolerance)
        assert (same | shapely.is_missing(both[1])).all(), name
        assert (shapely.is_missing(both[0]) == shapely.is_missing(both[1])).all(), name
