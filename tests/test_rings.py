"""Operations on rings against loops over lists."""

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from shapely import MultiPolygon, Polygon

from geoshape.geometry import ring_batch
from geoshape.rings import RingBatch, oriented, outlines, recentred, without_repeats
from tests import naive, shapes, strategies


def batch_from(features):
    """Lay out features, each a list of parts, each a list of rings, with no clean-up."""
    x, y, start, ring_part, is_hole, part_feature = [], [], [0], [], [], []
    for feature, parts in enumerate(features):
        for part in parts:
            for number, ring in enumerate(part):
                x += [float(point[0]) for point in ring]
                y += [float(point[1]) for point in ring]
                start.append(len(x))
                ring_part.append(len(part_feature))
                is_hole.append(number > 0)
            part_feature.append(feature)
    return RingBatch(
        x=np.array(x, dtype=float),
        y=np.array(y, dtype=float),
        ring_start=np.array(start, dtype=np.int64),
        ring_part=np.array(ring_part, dtype=np.int64),
        ring_is_hole=np.array(is_hole, dtype=bool),
        part_feature=np.array(part_feature, dtype=np.int64),
        n_features=len(features),
        origin=np.zeros((len(features), 2)),
    )


def rings_of(batch):
    """Take a batch apart again: (feature, part, is_hole, points) of each ring."""
    found = []
    for ring in range(batch.n_rings):
        run = slice(batch.ring_start[ring], batch.ring_start[ring + 1])
        points = list(zip(batch.x[run].tolist(), batch.y[run].tolist(), strict=True))
        part = int(batch.ring_part[ring])
        found.append((int(batch.part_feature[part]), part, bool(batch.ring_is_hole[ring]), points))
    return found


points = st.tuples(st.integers(-3, 3), st.integers(-3, 3))
any_ring = st.lists(points, min_size=1, max_size=7)
any_part = st.lists(any_ring, min_size=1, max_size=3)
any_features = st.lists(st.lists(any_part, max_size=3), max_size=4)
"""Rings of any points, repeated or not; the first feature, the last one or all may be without rings."""

solid = st.lists(
    st.one_of(st.none(), strategies.polygons()).map(lambda p: [] if p is None else naive.parts_of(p)), max_size=4
)

EMPTY = [[], [[]], [[], [], []]]


class TestLayout:
    @given(any_features)
    @settings(max_examples=40)
    def test_counts_and_owners(self, features):
        batch = batch_from(features)
        rings = [(f, ring) for f, parts in enumerate(features) for part in parts for ring in part]
        assert batch.n_rings == len(rings)
        assert batch.n_parts == sum(map(len, features))
        assert batch.n_vertices == sum(len(ring) for _, ring in rings)
        assert batch.ring_size.tolist() == [len(ring) for _, ring in rings]
        assert batch.ring_feature.tolist() == [feature for feature, _ in rings]
        assert batch.vertex_feature.tolist() == [feature for feature, ring in rings for _ in ring]
        assert batch.vertex_ring.tolist() == [i for i, (_, ring) in enumerate(rings) for _ in ring]

    @given(any_features)
    @settings(max_examples=40)
    def test_following_vertices(self, features):
        batch = batch_from(features)
        following = [p for parts in features for part in parts for ring in part for p in [*ring[1:], ring[0]]]
        assert batch.next_x.tolist() == [x for x, _ in following]
        assert batch.next_y.tolist() == [y for _, y in following]

    @given(any_features)
    @settings(max_examples=40)
    def test_sums(self, features):
        batch = batch_from(features)
        values = np.arange(batch.n_vertices, dtype=float) ** 2
        by_ring, by_feature, at = [], [0.0] * len(features), 0
        for feature, parts in enumerate(features):
            for part in parts:
                for ring in part:
                    total = float(sum(values[at : at + len(ring)]))
                    by_ring.append(total)
                    by_feature[feature] += total
                    at += len(ring)
        assert batch.sum_rings(values).tolist() == by_ring
        assert batch.sum_ring_values(np.array(by_ring)).tolist() == by_feature
        assert batch.sum_features(values).tolist() == by_feature
        assert batch.sum_features(values).dtype == np.float64

    @pytest.mark.parametrize("features", EMPTY)
    def test_no_rings(self, features):
        batch = batch_from(features)
        assert batch.n_rings == batch.n_vertices == 0
        assert batch.sum_rings(np.zeros(0)).shape == (0,)
        assert batch.sum_features(np.zeros(0)).tolist() == [0.0] * len(features)
        assert batch.ring_signed_area.shape == (0,)
        assert batch.next_x.shape == (0,)
        assert batch.planar_centroid.shape == (len(features), 2)
        for other in (oriented(batch), without_repeats(batch), outlines(batch)):
            assert (other.n_rings, other.n_features) == (0, len(features))
        moved = recentred(batch, np.ones((len(features), 2)))
        assert moved.origin.tolist() == [[1.0, 1.0]] * len(features)


class TestAreas:
    @given(any_features)
    @settings(max_examples=25)
    def test_signed_area(self, features):
        found = batch_from(features).ring_signed_area
        expected = [float(naive.signed_area(ring)) for parts in features for part in parts for ring in part]
        assert found.tolist() == pytest.approx(expected, abs=1e-12)

    def test_signed_area_far_away(self):
        far = [(5e9 + x, -5e9 + y) for x, y in shapes.L_RING]
        assert batch_from([[[far]]]).ring_signed_area.tolist() == [3.0]

    @given(solid)
    @settings(max_examples=25)
    def test_planar_centroid(self, features):
        found = oriented(batch_from(features)).planar_centroid
        for at, parts in enumerate(features):
            expected = [float(value) for value in naive.centroid(parts)] if parts else [0.0, 0.0]
            assert found[at] == pytest.approx(expected, abs=1e-10)

    def test_planar_centroid_without_area_is_the_mean_of_vertices(self):
        assert batch_from([[[[(0, 0), (3, 0), (6, 3)][::-1], [(0, 0), (3, 0), (6, 3)]]]]).planar_centroid.tolist() == [
            [3.0, 1.0]
        ]
        assert batch_from([[[[(0, 0), (1, 0), (5, 0)]]]]).planar_centroid.tolist() == [[2.0, 0.0]]


class TestOriented:
    @given(solid)
    @settings(max_examples=30)
    def test_exteriors_run_counter_clockwise_and_holes_clockwise(self, features):
        batch = oriented(batch_from(features))
        assert ((batch.ring_signed_area > 0) != batch.ring_is_hole).all()

    @given(solid)
    @settings(max_examples=30)
    def test_rings_keep_their_first_vertex_and_their_points(self, features):
        batch = batch_from(features)
        for before, after in zip(rings_of(batch), rings_of(oriented(batch)), strict=True):
            assert before[:3] == after[:3]
            assert before[3][0] == after[3][0]
            assert after[3] in (before[3], [before[3][0], *reversed(before[3][1:])])

    @given(solid)
    @settings(max_examples=20)
    def test_twice_is_once(self, features):
        once = oriented(batch_from(features))
        assert oriented(once) is once


def compressed(ring):
    """Drop a vertex that equals the one kept before it, and the last ones that equal the first."""
    kept = [ring[0]]
    for point in ring[1:]:
        if point != kept[-1]:
            kept.append(point)
    while len(kept) > 1 and kept[-1] == kept[0]:
        kept.pop()
    return kept


class TestWithoutRepeats:
    @given(any_features)
    @example([[[[(0, 0), (1, 0), (1, 1), (0, 0), (0, 0), (0, 0)]]]])
    @example([[[[(0, 0), (0, 0), (1, 0), (1, 0), (1, 1), (0, 0)]]]])
    @settings(max_examples=150)
    def test_is_the_loop(self, features):
        expected = []
        part_number = 0
        for feature, parts in enumerate(features):
            for part in parts:
                rings = [compressed(ring) for ring in part]
                for number, ring in enumerate(rings):
                    if len(rings[0]) >= 3 and len(ring) >= 3:
                        expected.append((feature, part_number, number > 0, [(float(x), float(y)) for x, y in ring]))
                part_number += 1
        batch = without_repeats(batch_from(features))
        assert rings_of(batch) == expected
        assert batch.n_features == len(features)
        assert batch.ring_start[0] == 0
        assert batch.ring_start[-1] == batch.n_vertices

    def test_nothing_repeated_is_the_same_batch(self):
        batch = batch_from([[[shapes.L_RING]]])
        assert without_repeats(batch) is batch


class TestOutlines:
    @given(solid)
    @settings(max_examples=30)
    def test_is_the_exterior_of_the_largest_part(self, features):
        batch = oriented(batch_from(features))
        expected = []
        part_number = 0
        for parts in features:
            areas = [naive.area([part]) for part in parts]
            if parts:
                winner = areas.index(max(areas))
                expected.append(part_number + winner)
            part_number += len(parts)
        found = outlines(batch)
        assert found.ring_part.tolist() == expected
        assert not found.ring_is_hole.any()
        assert np.bincount(found.ring_feature, minlength=len(features)).tolist() == [int(bool(p)) for p in features]

    def test_holes_count_and_the_first_of_equals_wins(self):
        square, far = shapes.rectangle(3, 3), [(x + 9, y) for x, y in shapes.rectangle(3, 3)]
        hole = [(x + 9, y) for x, y in shapes.HOLE]
        assert outlines(batch_from([[[square], [far]]])).ring_part.tolist() == [0]
        assert outlines(oriented(batch_from([[[far, hole], [square]]]))).ring_part.tolist() == [1]


class TestMoves:
    @given(any_features)
    @settings(max_examples=40)
    def test_recentred(self, features):
        batch = batch_from(features)
        shift = np.arange(2.0 * len(features)).reshape(-1, 2)
        moved = recentred(batch, shift)
        assert np.array_equal(moved.x + moved.origin[moved.vertex_feature, 0], batch.x)
        assert np.array_equal(moved.y + moved.origin[moved.vertex_feature, 1], batch.y)
        assert np.array_equal(moved.origin, shift)

    @given(any_features, st.integers(0, 2**12 - 1))
    @settings(max_examples=40)
    def test_take_rings(self, features, bits):
        batch = batch_from(features)
        keep = np.array([bool(bits >> (i % 12) & 1) for i in range(batch.n_rings)], dtype=bool)
        taken = batch.take_rings(keep)
        assert rings_of(taken) == [ring for ring, kept in zip(rings_of(batch), keep, strict=True) if kept]
        assert (taken.n_features, taken.n_parts) == (batch.n_features, batch.n_parts)

    def test_take_vertices(self):
        batch = batch_from([[[shapes.L_RING]], [[shapes.PLUS_RING]]])
        taken = batch.take_vertices(np.array([0, 1, 2, 6, 8, 10]), np.array([3, 3]))
        assert [ring[3] for ring in rings_of(taken)] == [shapes.L_RING[:3], shapes.PLUS_RING[0:6:2]]

    def test_moved_forgets_what_was_derived(self):
        """Cached sums and neighbours belong to the old coordinates."""
        batch = batch_from([[[shapes.L_RING]]])
        assert batch.ring_signed_area.tolist() == [3.0]
        assert batch.next_x[0] == 2
        larger = batch.moved(2 * batch.x, 2 * batch.y, batch.origin)
        assert larger.ring_signed_area.tolist() == [12.0]
        assert larger.next_x[0] == 4


@given(st.lists(st.one_of(st.none(), strategies.polygons()), max_size=4))
@settings(max_examples=25)
def test_batch_of_geometries_is_the_loop(polygons):
    array = np.empty(len(polygons), dtype=object)
    array[:] = polygons
    batch = ring_batch(array, local_origin=False)
    features = [[] if polygon is None else naive.parts_of(polygon) for polygon in polygons]
    assert rings_of(batch) == rings_of(oriented(batch_from(features)))
    assert np.array_equal(batch.origin, np.zeros((len(polygons), 2)))


def test_empty_parts_of_a_multipolygon_are_left_out():
    array = np.empty(2, dtype=object)
    array[:] = [MultiPolygon([Polygon(), Polygon(shapes.L_RING), Polygon()]), Polygon()]
    batch = ring_batch(array, local_origin=False)
    assert (batch.n_features, batch.n_rings, batch.n_parts) == (2, 1, 1)
    assert rings_of(batch)[0][3] == shapes.L_RING
