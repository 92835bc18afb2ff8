"""The benchmark's plain script does the same work: OpenCV, numpy and shapely give our numbers, one by one."""

import geopandas as gpd
import numpy as np
import pytest

import geoshape
from tests.benchmarks import plain_script, workload

# OpenCV takes contours in single precision; the rest is double.
SINGLE, DOUBLE = 2e-5, 1e-8
TOLERANCE = (
    dict.fromkeys(
        ("area_m2", "perimeter_m", "outline_m", "polsby_popper", "perimeter_ratio", "reock", "convexity"), DOUBLE
    )
    | {"rectangularity": 1e-6}
    | dict.fromkeys(("part_count", "hole_count", "vertex_count", "fd_harmonics_95"), 0.0)
    | dict.fromkeys(("hu_1", "hu_2", "hu_3", "hu_4", "affine_1", "ellipticity", "inertia_compactness"), SINGLE)
    | dict.fromkeys(("major_axis_m", "minor_axis_m", "axis_ratio"), SINGLE)
    | dict.fromkeys((f"fd_p{k:02d}" for k in range(2, 9)), DOUBLE)
    | dict.fromkeys((f"fd_n{k:02d}" for k in range(1, 9)), DOUBLE)
    | dict.fromkeys(("fd_departure", "fd_entropy"), DOUBLE)
)


@pytest.fixture(scope="module")
def both():
    shapes = workload.polygons(np.random.default_rng(workload.SEED), 400)
    layer = gpd.GeoDataFrame(geometry=shapes, crs=workload.GEOGRAPHIC)
    plain = [plain_script.measure(shape) for shape in layer.to_crs(plain_script.EQUAL_AREA).geometry]
    options = geoshape.MeasureOptions(ground=plain_script.EQUAL_AREA, edges="plane")
    return gpd.GeoDataFrame(plain), geoshape.measure(layer, options=options)


def test_the_workload_is_as_described(both):
    ours = both[1]
    assert set(ours.shape_status) == {"ok"}
    assert 70 < ours.vertex_count.mean() < 80
    assert 0.05 < (ours.hole_count > 0).mean() < 0.15
    assert 0.01 < (ours.part_count > 1).mean() < 0.06


@pytest.mark.parametrize("column", TOLERANCE)
def test_numbers_agree(both, column):
    plain, ours = (frame[column].to_numpy(float) for frame in both)
    scale = np.maximum(np.abs(ours), 1e-2 * np.median(np.abs(ours)))
    assert (np.abs(plain - ours) <= TOLERANCE[column] * scale).all()


def test_directions_agree(both):
    plain, ours = (frame.axis_azimuth_deg.to_numpy() for frame in both)
    # Ours is from true north: the grid's turn, up to 18 degrees here, is the same for both only without it.
    turn = (plain - ours + 90.0) % 180.0 - 90.0
    assert np.abs(turn).max() < 20.0
    east = both[1].geometry.representative_point().x.to_numpy() > 10.0
    assert np.median(turn[east]) * np.median(turn[~east]) < 0.0


def test_the_same_seed_makes_the_same_polygons():
    one, other = (workload.polygons(np.random.default_rng(7), 50) for _ in range(2))
    assert (one == other).all()


def test_a_workload_is_made_once(tmp_path):
    small = workload.Workload(tmp_path, 30, "EPSG:3035")
    path = workload.make(small)
    before = path.stat().st_mtime_ns
    assert workload.make(small).stat().st_mtime_ns == before
    layer = gpd.read_file(path)
    assert len(layer) == 30
    assert layer.crs.to_epsg() == 3035
    assert layer.is_valid.all()
    assert [entry.name for entry in tmp_path.iterdir()] == [path.name]


def test_a_full_disk_stops_before_anything_is_made(tmp_path):
    huge = workload.Workload(tmp_path, 10**12)
    with pytest.raises(SystemExit, match=r"GB free, .* GB needed for 1,000,000,000,000 polygons; name another folder"):
        workload.need_space(tmp_path, [huge])
