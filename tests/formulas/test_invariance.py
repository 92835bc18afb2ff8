"""What must not change a column, and what must change it in a known way: METHODS.md, section 2."""

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from shapely import MultiPolygon, Polygon, affinity

from geoshape.options import MeasureOptions, Spectrum
from tests import naive, shapes, strategies
from tests.formulas.plane import DIRECTIONS, assert_same, columns_of, row_of

EXACT = MeasureOptions(spectrum=Spectrum.EXACT)
LENGTHS = ["perimeter_m", "outline_m", "edge_mean_m", "feret_max_m", "feret_min_m", "major_axis_m", "minor_axis_m"]
SAMPLED_SLACK = 3e-4
"""How much columns of 256 samples depend on the first vertex; see test_spectrum for what they converge to."""


def rebuilt(polygon, change):
    """The polygon with each of its rings changed."""
    pieces = [Polygon(change(part[0]), [change(ring) for ring in part[1:]]) for part in naive.parts_of(polygon)]
    return pieces[0] if len(pieces) == 1 else MultiPolygon(pieces)


def without(row, *names):
    return {name: value for name, value in row.items() if name not in names}


def not_spectrum(row):
    return {name: value for name, value in row.items() if not name.startswith("fd_")}


examples = settings(max_examples=20)


@given(strategies.polygons(), st.integers(1, 17))
@example(shapes.RING.polygon, 1)
@examples
def test_first_vertex(polygon, step):
    other = rebuilt(polygon, lambda ring: ring[step % len(ring) :] + ring[: step % len(ring)])
    assert_same(row_of(polygon, EXACT), row_of(other, EXACT))


@given(strategies.polygons())
@example(shapes.RING.polygon)
@examples
def test_direction_of_rings(polygon):
    other = rebuilt(polygon, lambda ring: [ring[0], *reversed(ring[1:])])
    assert_same(row_of(polygon, EXACT), row_of(other, EXACT))
    assert_same(row_of(polygon), row_of(other))


@given(strategies.polygons(), st.sampled_from((2, 4, 8)))
@example(shapes.SQUARE.polygon, 4)
@examples
def test_inserted_vertices(polygon, n):
    """Of all columns only the mean edge length asks how many vertices there are."""

    def finer(ring):
        return [
            (a[0] + (b[0] - a[0]) * i / n, a[1] + (b[1] - a[1]) * i / n) for a, b in naive.edges(ring) for i in range(n)
        ]

    row, other = row_of(polygon, EXACT), row_of(rebuilt(polygon, finer), EXACT)
    assert other["edge_mean_m"] == pytest.approx(row["edge_mean_m"] / n, rel=1e-9)
    assert_same(without(row, "edge_mean_m"), without(other, "edge_mean_m"))
    sampled, sampled_other = row_of(polygon), row_of(rebuilt(polygon, finer))
    assert_same(without(sampled, "edge_mean_m"), without(sampled_other, "edge_mean_m"))


@given(strategies.polygons(), strategies.shifts())
@example(shapes.TRIANGLE.polygon, (5_000_000, 5_000_000))
@example(shapes.SQUARE.polygon, (-5_000_000, 4_999_999))
@examples
def test_shift(polygon, shift):
    moved = affinity.translate(polygon, *shift)
    assert_same(row_of(polygon), row_of(moved), relative=1e-11)


@given(strategies.polygons(), strategies.angles_deg())
@example(shapes.L_SHAPE.polygon, 90)
@example(shapes.TWO_SQUARES.polygon, 45)
@examples
def test_turn(polygon, angle):
    row, other = row_of(polygon), row_of(affinity.rotate(polygon, angle, origin=(0, 0)))
    for name in DIRECTIONS:
        other[name] = (other[name] + angle) % 180.0
    if row["axis_strength"] < 1e-5:
        row, other = without(row, "axis_azimuth_deg"), without(other, "axis_azimuth_deg")
    # Of several longest spans another may have the smallest azimuth after the turn.
    if len(naive.feret_max_azimuths(naive.hull(naive.parts_of(polygon)), 1e-8)) > 1:
        row, other = without(row, "feret_max_azimuth_deg"), without(other, "feret_max_azimuth_deg")
    assert_same(row, other)


@given(strategies.polygons(), st.sampled_from((2.0**-30, 1e-3, 0.37, 1000.0, 2.0**20)))
@examples
def test_scale(polygon, factor):
    row, other = row_of(polygon), row_of(affinity.scale(polygon, factor, factor, origin=(0, 0)))
    for name in LENGTHS:
        other[name] /= factor
    other["area_m2"] /= factor**2
    assert_same(row, other)


@given(strategies.polygons())
@example(shapes.QUAD.polygon)
@example(shapes.TRIANGLE.polygon)
@examples
def test_mirror(polygon):
    """East for west: hu_7 changes its sign, azimuths turn to their negative, nothing else changes."""
    row, other = row_of(polygon, EXACT), row_of(affinity.scale(polygon, xfact=-1, origin=(0, 0)), EXACT)
    other["hu_7"] = -other["hu_7"]
    other["axis_azimuth_deg"] = -other["axis_azimuth_deg"] % 180.0
    if len(naive.feret_max_azimuths(naive.hull(naive.parts_of(polygon)), 1e-8)) > 1:
        row = without(row, "feret_max_azimuth_deg")
    else:
        other["feret_max_azimuth_deg"] = -other["feret_max_azimuth_deg"] % 180.0
    assert_same(row, other)


@given(strategies.polygons(), st.permutations(range(3)))
@examples
def test_order_of_parts_and_holes(polygon, order):
    parts = naive.parts_of(polygon)
    shuffled = [parts[i] for i in order if i < len(parts)]
    pieces = [Polygon(part[0], part[:0:-1]) for part in shuffled]
    other = pieces[0] if len(pieces) == 1 else MultiPolygon(pieces)
    # Of equally large parts the first gives the outline.
    areas = [Polygon(part[0], part[1:]).area for part in parts]
    is_tied = sum(area == max(areas) for area in areas) > 1
    row, again = row_of(polygon), row_of(other)
    assert_same(*((not_spectrum(row), not_spectrum(again)) if is_tied else (row, again)))


@given(st.lists(st.one_of(st.none(), strategies.polygons()), max_size=6))
@settings(max_examples=20)
def test_a_batch_is_its_features_one_by_one(polygons):
    together = columns_of(*polygons)
    for at, polygon in enumerate(polygons):
        row = {name: float(values[at]) for name, values in together.items()}
        if polygon is None:
            assert np.isnan(list(row.values())).all()
        else:
            assert_same(row_of(polygon), row, relative=1e-12)


@given(strategies.polygons(), st.integers(1, 17))
@settings(max_examples=20)
def test_first_vertex_with_samples(polygon, step):
    """256 samples stand elsewhere on the outline when it begins elsewhere: amplitudes change in the fourth digit."""
    other = rebuilt(polygon, lambda ring: ring[step % len(ring) :] + ring[: step % len(ring)])
    row, again = row_of(polygon), row_of(other)
    assert_same(not_spectrum(row), not_spectrum(again))
    for name in row:
        if name.startswith(("fd_p", "fd_n", "fd_departure")):
            assert abs(row[name] - again[name]) <= SAMPLED_SLACK, name
