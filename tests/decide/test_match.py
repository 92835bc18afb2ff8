"""Outlines laid upon templates: copies are found, distances are a metric, and a slow search agrees."""

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from shapely import affinity

from geoshape.decide.match import Likeness, MatchOptions, Mirror, fit_pairs, make_templates, match_outlines, rank
from geoshape.decide.outlines import Outlines, prepare, prepare_coefficients, prepare_rings
from geoshape.errors import GeometryError, OptionError
from geoshape.formulas.arclength import resample
from geoshape.geometry import ring_batch
from tests import shapes, strategies

HOOK = shapely.Polygon([(0, 0), (40, 0), (40, 10), (12, 14), (10, 30), (3, 33), (0, 20)])
"""No symmetry, so turn and mirror image are told."""

# Two polygons of 14 unit steps whose steps have the same autocorrelation, hence the same amplitudes |Z_k|; found by
# going through all closed paths of that length on the square lattice. Neither turns or mirrors into the other.
STEPS = {0: (1, 0), 1: (0, 1), 2: (-1, 0), 3: (0, -1)}
SAME_AMPLITUDES = ("00001121232233", "00010122122333")


def lattice_ring(steps):
    ring, x, y = [], 0, 0
    for step in steps:
        ring.append((x, y))
        dx, dy = STEPS[int(step)]
        x, y = x + dx, y + dy
    assert (x, y) == (0, 0)
    return ring


def outlines_of(*polygons):
    return prepare_rings(ring_batch(np.array(polygons, dtype=object)))


def restarted(polygon, first):
    ring = list(polygon.exterior.coords)[:-1]
    return shapely.Polygon(ring[first:] + ring[:first])


def matched(feature, *templates, **options):
    names = [f"t{i}" for i in range(len(templates))]
    columns = match_outlines(
        outlines_of(feature), make_templates(names, outlines_of(*templates)), MatchOptions(**options)
    )
    return {name: values[0] for name, values in columns.items()}


def distance(a, b, **options):
    return fit_pairs(outlines_of(a), outlines_of(b), MatchOptions(**options)).distance[0]


def walked(polygon, n):
    """Points at equal arc length, by walking the outline edge by edge."""
    line = polygon.exterior if shapely.is_ccw(polygon.exterior) else polygon.exterior.reverse()
    points = shapely.line_interpolate_point(line, np.arange(n) / n, normalized=True)
    return shapely.get_x(points) + 1j * shapely.get_y(points)


def slow_distance(a, b, *, n=2048, keep_direction=False):
    """Smallest distance over all shifts by whole samples, each with its best turn, from the points themselves."""
    p, q = walked(a, n), walked(b, n)
    p, q = p - p.mean(), q - q.mean()
    p, q = p / np.linalg.norm(p), q / np.linalg.norm(q)
    best = np.inf
    for shift in range(n):
        moved = np.roll(q, shift)
        inner = np.vdot(moved, p)
        turn = 1.0 if keep_direction else inner / abs(inner)
        best = min(best, np.linalg.norm(p - turn * moved))
    return best


# Copies


@settings(max_examples=60)
@given(strategies.stars(), st.integers(-179, 180), st.floats(1e-3, 1e4), strategies.shifts(), st.integers(0, 4))
def test_turned_scaled_shifted_restarted_copies_are_found(polygon, azimuth_deg, scale, shift, first):
    copy = affinity.scale(polygon, scale, scale, origin=(0, 0))
    copy = affinity.rotate(copy, -azimuth_deg, origin=(0, 0))
    # A shift of the size of the shape: far away the coordinates themselves lose the digits.
    copy = affinity.translate(restarted(copy, first), shift[0] * scale / 1e4, shift[1] * scale / 1e4)
    row = matched(copy, polygon)
    assert row["match_distance"] < 1e-6
    assert row["match_scale"] == pytest.approx(scale, rel=1e-9)
    # Another turn may do as well only for a shape that this difference turns into itself.
    difference = (row["match_turn_deg"] - azimuth_deg + 180) % 360 - 180
    assert (
        abs(difference) < 1e-5 or distance(affinity.rotate(polygon, -difference), polygon, keep_direction=True) < 1e-5
    )
    assert row["match_mirrored"] is False


@pytest.mark.parametrize("azimuth_deg", [0, 30, -90, 135, 180, -179])
def test_turn_is_clockwise_like_azimuths(azimuth_deg):
    """A hook whose arm points east (azimuth 90) points to 90 + turn afterwards."""
    row = matched(affinity.rotate(HOOK, -azimuth_deg), HOOK)
    assert row["match_turn_deg"] == pytest.approx(azimuth_deg, abs=1e-7)


def test_an_arm_turned_from_east_to_south_has_turned_by_90():
    arm = shapely.Polygon([(0, 0), (10, 0), (10, 1), (1, 1), (1, 3), (0, 3)])
    south = shapely.Polygon([(y, -x) for x, y in arm.exterior.coords])
    assert matched(south, arm)["match_turn_deg"] == pytest.approx(90)


@pytest.mark.parametrize("n", [3, 4, 6, 12])
def test_symmetric_shapes_turn_as_little_as_they_can(n):
    polygon = shapely.Polygon(shapes.regular(n))
    for turn in (0.3 * 360 / n, -0.3 * 360 / n):
        assert matched(affinity.rotate(polygon, -turn, origin=(0, 0)), polygon)["match_turn_deg"] == pytest.approx(turn)


def test_a_circle_lies_on_itself():
    circle = shapely.Point(0, 0).buffer(10, quad_segs=64)
    row = matched(affinity.scale(circle, 3, 3), circle)
    assert row["match_distance"] < 1e-6
    assert row["match_scale"] == pytest.approx(3)
    assert abs(row["match_turn_deg"]) < 3


def test_sampled_outlines_find_copies_too():
    points = resample(ring_batch([HOOK, affinity.rotate(HOOK, 50)]), 256)
    outlines = prepare(points)
    assert outlines.highest == 64
    assert fit_pairs(outlines.take([1]), outlines.take([0]), MatchOptions()).distance[0] < 1e-12
    restarted_points = resample(ring_batch([restarted(HOOK, 3)]), 256)
    # Samples at other places of the same outline.
    assert 1e-9 < fit_pairs(prepare(restarted_points), outlines.take([0]), MatchOptions()).distance[0] < 1e-3
    exact = distance(restarted(HOOK, 3), HOOK)
    assert exact < 1e-12


def test_few_samples_have_few_harmonics():
    outlines = prepare(resample(ring_batch([HOOK, affinity.rotate(HOOK, 50)]), 16))
    assert outlines.highest == 7
    assert fit_pairs(outlines.take([1]), outlines.take([0]), MatchOptions()).distance[0] < 1e-12


# Mirror, direction, size


def test_mirror_images_are_found_only_where_asked_for():
    mirrored = affinity.scale(affinity.rotate(HOOK, 25), -2, 2, origin=(0, 0))
    assert matched(mirrored, HOOK)["match_distance"] > 0.1
    for mirror in ("yes", "only"):
        row = matched(mirrored, HOOK, mirror=mirror)
        assert row["match_distance"] < 1e-6
        assert row["match_mirrored"] is True
        # Turned by 25 counter-clockwise before it was mirrored: by 25 clockwise after.
        assert row["match_turn_deg"] == pytest.approx(25)
        assert row["match_scale"] == pytest.approx(2)
    assert matched(HOOK, HOOK, mirror="only")["match_distance"] > 0.1
    plain = matched(HOOK, HOOK, mirror="yes")
    assert (plain["match_mirrored"], plain["match_distance"] < 1e-12) == (False, True)


def test_shapes_that_are_their_own_mirror_images_count_as_not_mirrored():
    square = shapely.box(0, 0, 1, 1)
    assert matched(affinity.rotate(square, 20), square, mirror="yes")["match_mirrored"] is False
    assert matched(square, square, mirror="only")["match_distance"] < 1e-12


def test_direction_matters_where_it_is_kept():
    turned = affinity.rotate(HOOK, 70)
    row = matched(turned, HOOK, keep_direction=True)
    assert row["match_distance"] == pytest.approx(slow_distance(turned, HOOK, keep_direction=True), abs=2e-3)
    assert row["match_distance"] > 0.5
    assert row["match_turn_deg"] == 0
    moved = affinity.translate(affinity.scale(HOOK, 4, 4), 9, 9)
    assert matched(moved, HOOK, keep_direction=True)["match_distance"] < 1e-6


def test_size_matters_where_it_is_kept():
    """A copy r times as large is |r - 1| template sizes away, whichever way it is turned."""
    for scale in (0.5, 1.0, 3.0):
        copy = affinity.rotate(affinity.scale(HOOK, scale, scale), 40)
        row = matched(copy, HOOK, keep_size=True)
        assert row["match_distance"] == pytest.approx(abs(scale - 1), abs=1e-9)
        assert row["match_scale"] == pytest.approx(scale)
        by_spectrum = matched(copy, HOOK, keep_size=True, by="spectrum")
        assert by_spectrum["match_distance"] == pytest.approx(abs(scale - 1), abs=1e-9)


def test_size_decides_between_templates_of_one_shape():
    small, large = HOOK, affinity.scale(HOOK, 5, 5)
    assert matched(affinity.rotate(large, 10), small, large, keep_size=True)["match_template"] == "t1"
    assert matched(affinity.rotate(large, 10), small, large)["match_template"] == "t0"


# Against the slow search


@settings(max_examples=25)
@given(strategies.stars(), strategies.stars(), st.booleans())
def test_distance_agrees_with_a_slow_search(a, b, keep_direction):
    fast = distance(a, b, keep_direction=keep_direction)
    # The search steps by 1/2048 of the outline and sees every harmonic.
    assert fast == pytest.approx(slow_distance(a, b, keep_direction=keep_direction), abs=4e-3)


@pytest.mark.parametrize("keep_direction", [False, True])
@pytest.mark.parametrize("highest", [1, 7, 20])
def test_no_shift_is_better_for_outlines_rougher_than_polygons(keep_direction, highest):
    """Amplitudes that fall with 1 / k, as of outlines with jumps in them."""
    rng = np.random.default_rng(5)
    orders = np.arange(-highest, highest + 1)
    noise = rng.normal(size=(2, 200, len(orders))) + 1j * rng.normal(size=(2, 200, len(orders)))
    left, right = (prepare_coefficients(z / np.maximum(np.abs(orders), 1)) for z in noise)
    found = fit_pairs(left, right, MatchOptions(keep_direction=keep_direction)).distance
    c = (left.coefficients * right.coefficients.conj()) @ np.exp(-2j * np.pi * np.outer(orders, np.arange(4096) / 4096))
    best = (c.real if keep_direction else np.abs(c)).max(axis=1)
    slow = np.sqrt(2 - 2 * best)
    assert np.all(found <= slow + 1e-9)
    assert np.all(found >= slow - 1e-4)


def test_known_distance_of_ellipses():
    """Outlines that are ellipses by their coefficients: rho = Z_1 Z'_1 + Z_-1 Z'_-1, at turn and shift 0."""
    a, b = np.deg2rad(10), np.deg2rad(35)
    coefficients = np.array([[np.sin(t), 0, np.cos(t)] for t in (a, b)], dtype=complex)
    outlines = prepare_coefficients(coefficients)
    fits = fit_pairs(outlines.take([0]), outlines.take([1]), MatchOptions())
    assert fits.distance[0] == pytest.approx(np.sqrt(2 - 2 * np.cos(b - a)), abs=1e-12)
    assert fits.turn_deg[0] == pytest.approx(0, abs=1e-9)


# A metric


@settings(max_examples=60)
@given(strategies.stars(), strategies.stars(), strategies.stars(), st.booleans())
def test_distance_is_a_metric(a, b, c, keep_direction):
    outlines = outlines_of(a, b, c)
    options = MatchOptions(keep_direction=keep_direction)
    ab, bc, ac, ba = fit_pairs(outlines.take([0, 1, 0, 1]), outlines.take([1, 2, 2, 0]), options).distance
    assert ab == pytest.approx(ba, abs=1e-9)
    assert ac <= ab + bc + 1e-9
    assert 0 <= ab <= np.sqrt(2)


@given(strategies.stars(), strategies.stars())
def test_amplitudes_are_never_farther_apart_than_outlines(a, b):
    assert distance(a, b, by="spectrum") <= distance(a, b) + 1e-12


# What the phase is for


def test_outlines_of_the_same_spectrum_are_told_apart_by_match_alone():
    first, second = (shapely.Polygon(lattice_ring(steps)) for steps in SAME_AMPLITUDES)
    assert first.is_valid
    assert second.is_valid
    amplitudes = np.abs(outlines_of(first, second).coefficients)
    np.testing.assert_allclose(amplitudes[0], amplitudes[1], atol=1e-14)
    assert matched(first, second, by="spectrum")["match_distance"] < 1e-12
    for mirror in ("no", "yes"):
        row = matched(first, second, mirror=mirror)
        assert row["match_distance"] > 0.1
    assert row["match_distance"] == pytest.approx(
        min(slow_distance(first, second), slow_distance(first, affinity.scale(second, -1, 1))), abs=4e-3
    )


def test_spectrum_tells_neither_turn_nor_mirror_image():
    row = matched(affinity.rotate(HOOK, 20), HOOK, by=Likeness.SPECTRUM)
    assert row["match_distance"] < 1e-12
    assert np.isnan(row["match_turn_deg"])
    assert row["match_mirrored"] is None


# Templates


@settings(max_examples=20)
@given(st.lists(strategies.stars(), min_size=2, max_size=7), strategies.stars(), st.sampled_from(Mirror))
def test_the_nearest_template_is_found_without_laying_all_on(templates, feature, mirror):
    """Ruling templates out by their low harmonics must not lose the nearest one."""
    singly = [matched(feature, template, mirror=mirror) for template in templates]
    together = matched(feature, *templates, mirror=mirror)
    least = min(row["match_distance"] for row in singly)
    assert together["match_distance"] == pytest.approx(least, abs=2e-9)
    chosen = singly[int(together["match_template"][1:])]
    assert together["match_turn_deg"] == pytest.approx(chosen["match_turn_deg"], abs=1e-6)
    assert together["match_mirrored"] == chosen["match_mirrored"]


def test_equal_templates_go_to_the_first():
    assert matched(HOOK, affinity.rotate(HOOK, 5), HOOK)["match_template"] == "t0"


def test_features_without_outline_are_null():
    features = outlines_of(None, HOOK, shapely.Polygon(), shapely.box(0, 0, 1, 1))
    columns = match_outlines(features, make_templates(["hook"], outlines_of(HOOK)), MatchOptions())
    assert columns["match_template"].tolist() == [None, "hook", None, "hook"]
    assert columns["match_mirrored"].tolist() == [None, False, None, False]
    for name in ("match_distance", "match_turn_deg", "match_scale"):
        assert np.isnan(columns[name]).tolist() == [True, False, True, False]


def test_no_features_give_no_rows():
    nothing = Outlines(np.zeros((0, 129), dtype=complex), np.zeros(0))
    columns = match_outlines(
        nothing, make_templates(["hook", "box"], outlines_of(HOOK, shapely.box(0, 0, 1, 1))), MatchOptions()
    )
    assert {len(values) for values in columns.values()} == {0}


def test_the_outline_of_a_multipart_feature_is_its_largest_part():
    islands = shapely.MultiPolygon([shapely.box(900, 900, 901, 901), HOOK])
    assert matched(islands, HOOK)["match_distance"] < 1e-12


def test_many_features_fill_several_blocks():
    rng = np.random.default_rng(3)
    turns = rng.uniform(-180, 180, 1300)
    features = [affinity.rotate(HOOK, -turn) for turn in turns]
    columns = match_outlines(
        outlines_of(*features),
        make_templates(["box", "hook"], outlines_of(shapely.box(0, 0, 2, 1), HOOK)),
        MatchOptions(),
    )
    assert set(columns["match_template"]) == {"hook"}
    np.testing.assert_allclose(columns["match_turn_deg"], turns, atol=1e-6)


# Rank


def test_rank_counts_from_the_most_alike_over_the_layer():
    assert rank(np.array([])).tolist() == []
    assert np.isnan(rank(np.array([np.nan]))).all()
    np.testing.assert_array_equal(rank(np.array([0.5, 0.2, np.nan, 0.5, 0.9, 0.0])), [3, 2, np.nan, 3, 5, 1])


# Errors


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"mirror": "maybe"}, "mirror = 'maybe' is not known; use one of: no, yes, only"),
        ({"by": "area"}, "by = 'area' is not known; use one of: outline, spectrum"),
        ({"by": "spectrum", "mirror": "yes"}, "mirror = 'yes' says nothing to amplitudes"),
        ({"by": "spectrum", "keep_direction": True}, "keep_direction says nothing to amplitudes"),
    ],
)
def test_options_that_cannot_be_used(options, message):
    with pytest.raises(OptionError, match=message):
        MatchOptions(**options)


@pytest.mark.parametrize(
    ("names", "polygons", "error", "message"),
    [
        ([], [], OptionError, "0 templates were given"),
        (["a", "b", "a"], [HOOK, HOOK, HOOK], OptionError, "template name 'a' is there more than once"),
        (["a", "b"], [HOOK, None], GeometryError, "the template 'b' has no ring"),
        (["a", "b"], [HOOK, shapely.Polygon()], GeometryError, "the template 'b' has no ring"),
        (["flat"], [shapely.Polygon([(0, 0), (10, 0), (20, 0)])], GeometryError, "'flat' encloses no area"),
        (
            ["spike"],
            [shapely.Polygon([(0, 0), (9, 9), (0, 0)])],
            GeometryError,
            "'spike' (encloses no area|has no ring)",
        ),
    ],
)
def test_templates_that_cannot_be_used(names, polygons, error, message):
    with pytest.raises(error, match=message):
        make_templates(names, outlines_of(*polygons))


def test_outlines_and_templates_must_have_as_many_harmonics():
    templates = make_templates(["hook"], outlines_of(HOOK))
    few = prepare_rings(ring_batch([HOOK]), highest=8)
    with pytest.raises(OptionError, match="outlines have 8 harmonics and templates 64; prepare both with as many"):
        match_outlines(few, templates, MatchOptions())
