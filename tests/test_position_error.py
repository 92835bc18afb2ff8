"""Standard errors by simulation: analytic values, coverage of the truth, repeatability."""

import numpy as np
import pytest
import shapely

from geoshape.columns import columns_for
from geoshape.errors import OptionError
from geoshape.formulas.digitising import PositionError, disturbed, mixed
from geoshape.geometry import ring_batch
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.place import open_ground
from geoshape.measuring import measure_geometries
from geoshape.options import MeasureOptions
from tests import shapes


def measure(polygons, first_row=0, **chosen):
    options = MeasureOptions(ground="plane", assume_crs="EPSG:32632", **chosen)
    ground = open_ground(plan_ground(None, None, options))
    return measure_geometries(np.array(polygons, dtype=object), ground, options, first_row=first_row).values


def bay(radius=100.0, n=60):
    """An outline with three bays."""
    angle = 2 * np.pi * np.arange(n) / n
    r = radius * (1 + 0.2 * np.cos(3 * angle) + 0.1 * np.sin(2 * angle))
    return shapely.Polygon(np.column_stack((r * np.cos(angle), r * np.sin(angle))))


def digitised(polygon, n, sigma_m, length_m):
    """Copies of an outline with errors of their own, drawn from keys that no measurement uses."""
    batch = ring_batch(np.array([polygon] * n), local_origin=False)
    key = mixed(np.full(n, 987_654_321, dtype=np.uint64), np.arange(n))
    moved = disturbed(batch, PositionError(sigma_m, np.full(n, length_m)), key)
    points = np.column_stack((moved.x, moved.y))
    return [shapely.Polygon(ring) for ring in np.split(points, moved.ring_start[1:-1])]


@pytest.mark.parametrize(
    "polygon",
    [shapely.Polygon(shapes.regular(40, 50.0)), shapely.box(0, 0, 30, 80), bay()],
    ids=["circle", "box", "bay"],
)
def test_area_of_independent_errors(polygon):
    """Chrisman & Yandell 1988, Surveying and Mapping 48: sd(A) = (sigma / 2) sqrt(sum |p_(i+1) - p_(i-1)|^2)."""
    points = np.asarray(polygon.exterior.coords)[:-1]
    chords = np.roll(points, -1, axis=0) - np.roll(points, 1, axis=0)
    expected = 0.5 * 0.2 * np.sqrt((chords**2).sum())
    runs = 4000
    values = measure([polygon], families=("extent",), position_error_m=0.2, error_length_m=0, error_runs=runs)
    assert values["area_m2_se"][0] == pytest.approx(expected, rel=4 / np.sqrt(2 * runs))


def test_a_shape_that_moves_as_a_whole_keeps_its_numbers():
    values = measure([shapely.box(0, 0, 30, 80)], position_error_m=5.0, error_length_m=1e9)
    for name in ("area_m2", "perimeter_m", "convexity", "axis_ratio", "axis_azimuth_deg", "fd_entropy"):
        assert values[f"{name}_se"] == pytest.approx(0, abs=1e-5 * max(1.0, values[name][0])), name


def test_independent_errors_lengthen_an_outline():
    """To second order each edge of length d grows by sigma^2 / d, since its ends are off by sigma across it each."""
    polygon = shapely.Polygon(shapes.regular(60, 100.0))
    values = measure([polygon], position_error_m=0.5, error_length_m=0, error_runs=2000)
    edge = 200 * np.sin(np.pi / 60)
    assert values["perimeter_m_bias"][0] == pytest.approx(60 * 0.25 / edge, rel=0.1)


NAMES = ("area_m2", "perimeter_m", "polsby_popper", "axis_ratio", "major_axis_m", "inertia_compactness")


def coverage(sigma_m, length_m):
    """Share of 1 000 digitised copies that hold the truth within two standard errors, the bias taken off."""
    truth = bay()
    chosen = {"families": ("extent", "compactness", "axes")}
    true = measure([truth], **chosen)
    copies = digitised(truth, 1000, sigma_m, length_m)
    values = measure(copies, position_error_m=sigma_m, error_length_m=length_m, **chosen)
    held = {}
    for name in NAMES:
        value = values[name] - values.get(f"{name}_bias", 0.0)
        held[name] = np.mean(np.abs(value - true[name]) <= 2 * values[f"{name}_se"])
    return held


@pytest.mark.parametrize("length_m", [0.0, 12.0, 40.0])
@pytest.mark.slow
def test_truth_lies_within_two_standard_errors(length_m):
    held = coverage(0.1, length_m)
    assert all(0.93 <= share <= 0.97 for share in held.values()), held


@pytest.mark.parametrize("length_m", [0.0, 12.0])
@pytest.mark.slow
def test_errors_that_roughen_the_outline_are_not_taken_too_small(length_m):
    """Errors of a twelfth of an edge turn edges as much as the outline does.

    The copy is rougher than the truth, and so is what is simulated on it: standard errors of the perimeter get too
    wide, those of areas and moments do not.
    """
    held = coverage(1.0, length_m)
    assert all(share >= 0.93 for share in held.values()), held
    assert all(held[name] <= 0.97 for name in NAMES if name not in {"perimeter_m", "polsby_popper"}), held


def test_same_seed_same_numbers_in_any_batch():
    polygons = [bay(80 + 5 * i, 30 + i) for i in range(9)]
    chosen = {"position_error_m": 1.0, "error_runs": 8, "seed": 5}
    whole = measure(polygons, **chosen)
    halves = [measure(polygons[:4], **chosen), measure(polygons[4:], first_row=4, **chosen)]
    other = measure(polygons, **(chosen | {"seed": 6}))
    again = measure(polygons, **chosen)
    for name in whole:
        if name.endswith(("_se", "_bias")):
            joined = np.concatenate([half[name] for half in halves])
            # A running sum over the rings of a batch rounds its last digit by what stands before.
            assert joined == pytest.approx(whole[name], rel=1e-6, abs=1e-12), name
            assert np.array_equal(again[name], whole[name]), name
    assert not np.isclose(other["area_m2_se"], whole["area_m2_se"]).any()


def test_blocks_of_runs_do_not_matter(monkeypatch):
    chosen = {"position_error_m": 1.0, "error_runs": 10}
    whole = measure([bay()], **chosen)
    monkeypatch.setattr("geoshape.formulas.position_error.BLOCK_VERTICES", 130)
    small = measure([bay()], **chosen)
    assert small["area_m2_se"] == pytest.approx(whole["area_m2_se"], rel=1e-12)
    assert small["perimeter_m_bias"] == pytest.approx(whole["perimeter_m_bias"], rel=1e-9)


def test_direction_near_north_has_a_small_error():
    """Azimuths on both sides of 0 and 180 are near each other."""
    values = measure([shapely.box(0, 0, 20, 200)], position_error_m=1.0, error_length_m=0)
    assert 0.0 < values["axis_azimuth_deg_se"][0] < 2.0


def test_parts_have_errors_of_their_own():
    pair = shapely.MultiPolygon([shapely.box(0, 0, 10, 10), shapely.box(50, 0, 60, 10)])
    values = measure([pair], parts="split", position_error_m=0.5)
    assert values["area_m2_se"][0] != values["area_m2_se"][1]


def test_null_where_nothing_was_measured():
    values = measure([None, shapely.box(0, 0, 1, 1)], position_error_m=0.01)
    for name, column in values.items():
        if name.endswith(("_se", "_bias")):
            assert np.isnan(column[0]), name
    assert np.isfinite(values["area_m2_se"][1])


def test_columns_follow_their_family():
    names = [column.name for column in columns_for(MeasureOptions(position_error_m=1.0, families=("extent", "axes")))]
    first, second = names.index("area_m2_se"), names.index("major_axis_m")
    assert names.index("feret_min_m") < first < second < names.index("major_axis_m_se")
    assert "perimeter_m_bias" in names
    assert not {"part_count_se", "ground_distortion_se", "feret_max_azimuth_deg_bias"} & set(names)
    shorts = [column.short_name for column in columns_for(MeasureOptions(position_error_m=1.0, log_moments=True))]
    assert len(set(shorts)) == len(shorts)
    assert max(map(len, shorts)) <= 10


@pytest.mark.parametrize(
    ("chosen", "message"),
    [
        ({"position_error_m": 0.0}, "position_error_m = 0.0 is no error"),
        ({"position_error_m": float("nan")}, "position_error_m = nan is no error"),
        ({"error_length_m": -1.0}, "error_length_m = -1.0 is no length"),
        ({"error_runs": 1}, "error_runs = 1 cannot be used"),
        ({"seed": -1}, "seed = -1 cannot be used"),
    ],
)
def test_options_out_of_range(chosen, message):
    with pytest.raises(OptionError, match=message):
        MeasureOptions(**chosen)
