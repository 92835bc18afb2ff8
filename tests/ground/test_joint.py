"""One plane for two layers: the same places whatever the CRS, shifts of datum as PROJ knows them, what is refused."""

import numpy as np
import pyproj
import pytest
import shapely
from shapely import box

from geoshape.errors import GroundError
from geoshape.geometry import ring_batch
from geoshape.ground import joint
from geoshape.ground.joint import on_plane, plan_joint_ground
from geoshape.ground.place import open_ground
from geoshape.options import MeasureOptions

UTM = pyproj.CRS("EPSG:32633")
LONLAT = pyproj.CRS("EPSG:4326")
PLACE = (500_000.0, 5_500_000.0, 500_800.0, 5_500_500.0)


def corners(plan, geometries):
    batch = ring_batch(np.asarray(geometries, dtype=object))
    ground = open_ground(plan)
    placed = ground.place(batch, np.zeros(batch.n_features, dtype=np.int64))
    found = on_plane(placed, plan)
    return np.column_stack((found.x, found.y)) + found.origin[found.vertex_feature]


@pytest.mark.parametrize("ground", ["centred", "layer", "EPSG:3035"])
def test_one_place_in_two_crss(ground):
    to_lonlat = pyproj.Transformer.from_crs(UTM, LONLAT, always_xy=True)
    shape = box(*PLACE)
    turned = shapely.transform(shape, lambda points: np.column_stack(to_lonlat.transform(*points.T)))
    options = MeasureOptions(ground=ground, edges="plane")
    plan = plan_joint_ground((UTM, LONLAT), (PLACE, turned.bounds), options)
    assert plan.shift is None
    np.testing.assert_allclose(corners(plan.first, [shape]), corners(plan.second, [turned]), atol=1e-6)
    assert shapely.Polygon(corners(plan.first, [shape])).area == pytest.approx(
        800 * 500 / 0.9996**2, rel=1e-6
    )  # EPSG:32633 is drawn at 0.9996 on its meridian


def test_places_are_those_of_proj():
    plan = plan_joint_ground((UTM, UTM), (PLACE, PLACE), MeasureOptions(ground="EPSG:3035", edges="plane"))
    x, y = pyproj.Transformer.from_crs(UTM, "EPSG:3035", always_xy=True).transform(*PLACE[:2])
    gap = np.hypot(*(corners(plan.first, [box(*PLACE)]) - (x, y)).T).min()
    assert gap < 1e-6


def test_a_shift_of_datum_is_made():
    """From ED50 to WGS 84, which lie some 150 m apart in Europe."""
    old = pyproj.CRS("EPSG:23033")
    plan = plan_joint_ground((UTM, old), (PLACE, PLACE), MeasureOptions())
    moved = plan.shifted(np.array([box(*PLACE)], dtype=object))[0]
    distance = moved.centroid.distance(box(*PLACE).centroid)
    assert 50.0 < distance < 300.0
    assert plan.second is plan.first


def test_a_rough_shift_is_named():
    unknown = pyproj.CRS("+proj=longlat +ellps=bessel +no_defs")
    plan = plan_joint_ground((UTM, unknown), (PLACE, (14.9, 49.6, 15.1, 49.7)), MeasureOptions())
    assert "only a ballpark shift" in plan.warnings[-1]


class _Group:
    """What PROJ says where the best way needs a grid that is not there."""

    best_available = False

    def __init__(self, accuracy):
        grid = type("Grid", (), {"short_name": "fine.tif"})
        self.unavailable_operations = [type("Operation", (), {"grids": [grid]})]
        self.transformers = [type("Way", (), {"description": "a shift", "accuracy": accuracy})]


@pytest.mark.parametrize(("accuracy", "words"), [(5.0, "within 5 m"), (-1.0, "not known")])
def test_a_missing_grid_is_named(monkeypatch, accuracy, words):
    monkeypatch.setattr(joint, "TransformerGroup", lambda *_, **__: _Group(accuracy))
    plan = plan_joint_ground((UTM, pyproj.CRS("EPSG:23033")), (PLACE, PLACE), MeasureOptions())
    assert words in plan.warnings[-1]
    assert "fine.tif" in plan.warnings[-1]


def test_coordinates_as_they_are():
    plane = MeasureOptions(ground="plane")
    plan = plan_joint_ground((None, None), (PLACE, PLACE), plane)
    np.testing.assert_allclose(corners(plan.first, [box(*PLACE)]).min(axis=0), PLACE[:2])
    feet = pyproj.CRS("EPSG:2263")
    plan = plan_joint_ground((feet, feet), ((0.0, 0.0, 100.0, 100.0),) * 2, plane)
    assert corners(plan.first, [box(0, 0, 100, 100)]).max() == pytest.approx(100 * 1200 / 3937)
    with pytest.raises(GroundError, match="do not compare as they are"):
        plan_joint_ground((UTM, feet), (PLACE, PLACE), plane)


@pytest.mark.parametrize(("pair", "side"), [((None, UTM), "before"), ((UTM, None), "after")])
def test_a_layer_without_a_crs_has_no_place(pair, side):
    with pytest.raises(GroundError, match=f"the layer {side} has no CRS"):
        plan_joint_ground(pair, (PLACE, PLACE), MeasureOptions())


def test_layers_without_an_extent():
    plan = plan_joint_ground((UTM, LONLAT), (PLACE, None), MeasureOptions())
    assert plan.first.target_wkt
    empty = plan_joint_ground((UTM, UTM), (None, None), MeasureOptions())
    assert empty.first.target_wkt


def test_two_globes_have_no_plane_in_common():
    moon = pyproj.CRS("IAU_2015:30100")
    with pytest.raises(GroundError, match="PROJ knows no way"):
        plan_joint_ground((UTM, moon), (PLACE, None), MeasureOptions())
