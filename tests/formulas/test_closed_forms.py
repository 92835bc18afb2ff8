"""Shapes whose columns are known exactly: METHODS.md, section 4."""

from math import isclose, pi, sqrt

import numpy as np
import pytest

from geoshape.formulas import compactness
from geoshape.options import MeasureOptions
from tests import shapes
from tests.formulas.plane import angle_between, columns_of, row_of


def cases():
    for shape in shapes.SHAPES:
        for column, value in shape.columns.items():
            yield pytest.param(shape, column, float(value), id=f"{shape.name} {column}")


@pytest.fixture(scope="module")
def measured():
    rows = columns_of(*(shape.polygon for shape in shapes.SHAPES))
    return {shape.name: {name: values[i] for name, values in rows.items()} for i, shape in enumerate(shapes.SHAPES)}


@pytest.mark.parametrize(("shape", "column", "value"), list(cases()))
def test_column_is_exact(measured, shape, column, value):
    rounding = 0.0 if value else 1e-16
    assert measured[shape.name][column] == pytest.approx(value, rel=1e-12, abs=rounding)


@pytest.mark.parametrize(
    ("shape", "column", "printed"),
    [pytest.param(*case, id=f"{case[0].name} {case[1]}") for case in shapes.PUBLISHED],
)
def test_formula_agrees_with_the_printed_digits(shape, column, printed):
    assert round(float(shape.columns[column]), 6) == printed


@pytest.mark.parametrize("shape", shapes.CHIRAL, ids=lambda shape: shape.name)
def test_mirror_image_turns_the_sign_of_hu_7_alone(shape):
    row = row_of(shape.mirrored.polygon)
    for column, value in shape.columns.items():
        if not column.startswith(("hu_", "affine_")):
            continue
        expected = -float(value) if column == "hu_7" else float(value)
        assert row[column] == pytest.approx(expected, rel=1e-12, abs=1e-16 if expected == 0 else 0.0), column
    assert row["hu_7"] > 0


@pytest.mark.parametrize(
    ("shape", "azimuth", "elongation"), [pytest.param(*case, id=case[0].name) for case in shapes.AXES]
)
def test_axes(measured, shape, azimuth, elongation):
    row = measured[shape.name]
    assert angle_between(row["axis_azimuth_deg"], azimuth) < 1e-9
    assert row["axis_ratio"] == pytest.approx(1 / elongation, rel=1e-9)
    assert row["major_axis_m"] / row["minor_axis_m"] == pytest.approx(elongation, rel=1e-9)


@pytest.mark.parametrize(
    ("ring", "limits"), [pytest.param(ring, limits, id=name) for name, ring, limits in shapes.LIMITS]
)
def test_ratios_converge_to_those_of_the_curve(ring, limits):
    """The inscribed polygon of n corners is off by O(1 / n^2)."""
    coarse, fine = (row_of(shapes.Shape("", [[ring(n)]]).polygon) for n in (200, 4000))
    for column, value in limits.items():
        assert fine[column] == pytest.approx(value, rel=3e-6), column
        assert abs(fine[column] - value) <= abs(coarse[column] - value) / 50 + 1e-12, column


def test_ellipse_of_two_to_one_by_its_complete_integral():
    # Perimeter 4 a E(e) with a = 2 and e^2 = 3/4, E(e) by mpmath.
    mpmath = pytest.importorskip("mpmath")
    perimeter = 8 * float(mpmath.ellipe(0.75))
    assert 4 * pi * (2 * pi) / perimeter**2 == pytest.approx(0.841165, abs=5e-7)
    row = row_of(shapes.Shape("", [[shapes.ellipse(2, 20_000)]]).polygon)
    assert row["perimeter_m"] == pytest.approx(perimeter, rel=2e-8)


@pytest.mark.parametrize("n", [3, 4, 5, 6, 7, 12, 101])
def test_regular_polygon(n):
    row = row_of(shapes.Shape("", [[shapes.regular(n)]]).polygon)
    tangent = np.tan(pi / n)
    assert row["area_m2"] == pytest.approx(n * np.sin(2 * pi / n) / 2, rel=1e-13)
    assert row["perimeter_m"] == pytest.approx(2 * n * np.sin(pi / n), rel=1e-13)
    assert row["polsby_popper"] == pytest.approx(pi / (n * tangent), rel=1e-13)
    assert row["reock"] == pytest.approx(n * np.sin(2 * pi / n) / (2 * pi), rel=1e-12)
    assert row["feret_max_m"] == pytest.approx(2 if n % 2 == 0 else 2 * np.cos(pi / (2 * n)), rel=1e-13)
    # An even polygon is narrowest between two sides, an odd one between a side and a corner.
    assert row["feret_min_m"] == pytest.approx((2 if n % 2 == 0 else 1) * np.cos(pi / n) + n % 2, rel=1e-13)
    assert np.isnan(row["axis_azimuth_deg"])
    assert row["axis_strength"] < 1e-12
    assert row["axis_ratio"] == pytest.approx(1, rel=1e-12)


@pytest.mark.parametrize("level", [0, 1, 2, 3, 4])
def test_snowflake_of_koch(level):
    row = row_of(shapes.Shape("", [[shapes.koch(level)]]).polygon)
    assert row["area_m2"] == pytest.approx(float(shapes.koch_area(level)), rel=1e-13)
    assert row["perimeter_m"] == pytest.approx(shapes.koch_perimeter(level), rel=1e-13)
    assert row["reock"] == pytest.approx(float(shapes.koch_area(level)) / pi, rel=1e-12)
    # From the first level on the hull is the hexagon of the six outer corners.
    hull = 3 * sqrt(3) / 2 if level else 3 * sqrt(3) / 4
    assert row["convexity"] == pytest.approx(float(shapes.koch_area(level)) / hull, rel=1e-12)


def raster_disk(radius):
    """Outline of the pixels whose centres lie in a disk: its perimeter is that of the bounding square."""
    shapely = pytest.importorskip("shapely")
    rows = np.arange(-radius, radius) + 0.5
    half = np.floor(np.sqrt(radius**2 - rows**2) + 0.5)
    return shapely.union_all(shapely.box(-half, rows - 0.5, half, rows + 0.5))


def test_rasterised_disk_tends_to_pi_squared_over_16():
    values = [row_of(raster_disk(radius))["polsby_popper"] for radius in (20, 80, 320)]
    assert values[-1] == pytest.approx(pi**2 / 16, rel=2e-3)
    errors = [abs(value - pi**2 / 16) for value in values]
    assert errors[-1] < errors[0] / 4


def test_shoreline_development_of_the_worked_example():
    """A lake with 8.6 miles of shore and 510 acres has a shoreline development of 2.72.

    From memory, a worked example of lake-survey handbooks, recomputed here: 1 mile is 1609.344 m, 640 acres are one
    square mile.
    """
    shore_m, area_m2 = 8.6 * 1609.344, 510 / 640 * 1609.344**2
    ratio = compactness.perimeter_ratio(np.array([area_m2]), np.array([shore_m]))[0]
    assert round(ratio, 2) == 2.72
    assert isclose(ratio, 8.6 / (2 * sqrt(pi * 510 / 640)), rel_tol=1e-14)


@pytest.mark.parametrize("shape", shapes.SHAPES, ids=lambda shape: shape.name)
def test_identities(measured, shape):
    row = measured[shape.name]
    left, right = row["hu_3"] * row["hu_4"] ** 3, row["hu_5"] ** 2 + row["hu_7"] ** 2
    assert left == pytest.approx(right, rel=1e-12, abs=1e-60)
    assert row["hu_2"] == pytest.approx(row["hu_1"] ** 2 - 4 * row["affine_1"], rel=1e-12, abs=1e-16)
    assert row["inertia_compactness"] == pytest.approx(1 / (2 * pi * row["hu_1"]), rel=1e-13)
    assert row["perimeter_ratio"] == pytest.approx(row["polsby_popper"] ** -0.5, rel=1e-13)


def test_log_moments_keep_the_sign():
    row = row_of(shapes.TRIANGLE.polygon, MeasureOptions(log_moments=True))
    assert row["hu_7_log"] == pytest.approx(-np.log10(28 / 36905625), rel=1e-12)
    assert row["hu_1_log"] == pytest.approx(np.log10(25 / 108), rel=1e-13)
