"""Polygons without area, features without rings, and coordinates of any size: null or right, never merely plausible."""

import numpy as np
import pytest
from shapely import MultiPolygon, Polygon, affinity

from geoshape.formulas import arclength, axes, calipers, compactness, fourier, hulls, moments
from geoshape.options import MeasureOptions, Spectrum
from geoshape.rings import RingBatch
from tests import shapes
from tests.formulas.plane import assert_same, batch_of, central_of, columns_of, columns_of_batch, row_of

EXACT = MeasureOptions(spectrum=Spectrum.EXACT)


def one_ring(points):
    """A batch of one ring as it is, without the clean-up that shapely's polygons go through."""
    x, y = (np.array(values, dtype=float) for values in zip(*points, strict=True))
    return RingBatch(
        x=x,
        y=y,
        ring_start=np.array([0, len(x)]),
        ring_part=np.array([0]),
        ring_is_hole=np.array([False]),
        part_feature=np.array([0]),
        n_features=1,
        origin=np.zeros((1, 2)),
    )


def scale_free(row):
    return [name for name in row if not name.endswith(("_m", "_m2"))]


FLAT = [(0, 0), (2, 0), (5, 0), (1, 0)]


@pytest.mark.parametrize("options", [MeasureOptions(), EXACT, MeasureOptions(log_moments=True)])
class TestNoFeatures:
    def test_an_empty_batch_has_every_column_and_no_rows(self, options):
        columns = columns_of(options=options)
        assert set(columns) == set(columns_of(shapes.QUAD.polygon, options=options))
        assert all(value.shape == (0,) for value in columns.values())

    def test_features_without_rings_are_null(self, options):
        columns = columns_of(None, Polygon(), MultiPolygon(), options=options)
        for name, value in columns.items():
            assert value.shape == (3,), name
            assert np.isnan(value).all(), name

    def test_one_without_rings_leaves_the_others_alone(self, options):
        columns = columns_of(shapes.QUAD.polygon, None, shapes.L_SHAPE.polygon, options=options)
        for at, polygon in ((0, shapes.QUAD.polygon), (2, shapes.L_SHAPE.polygon)):
            row = {name: float(value[at]) for name, value in columns.items()}
            assert_same(row_of(polygon, options), row, relative=1e-13)
        assert all(np.isnan(value[1]) for value in columns.values())


class TestNoArea:
    def test_moments_and_what_follows_are_null(self):
        batch = one_ring(FLAT)
        raw = moments.raw_moments(batch)
        assert raw[0, 0] == 0
        central = moments.central_moments(raw)
        assert np.isnan(central).all()
        eta = moments.normalised_moments(central)
        assert np.isnan(moments.hu_invariants(eta)).all()
        assert np.isnan(moments.affine_invariants(eta)).all()
        found = axes.principal_axes(central)
        for value in (found.major_m, found.minor_m, found.ratio, found.azimuth_deg, found.strength):
            assert np.isnan(value).all()
        assert np.isnan(compactness.inertia_compactness(central)).all()

    def test_the_outline_is_still_walked(self):
        batch = one_ring(FLAT)
        assert batch.sum_rings(arclength.edge_lengths(batch)).tolist() == [10.0]
        points = arclength.resample(batch, 10)[0]
        assert points == pytest.approx([0, 1, 2, 3, 4, 5, 4, 3, 2, 1])

    def test_columns_of_a_line_are_null_or_finite(self):
        columns = columns_of_batch(one_ring(FLAT))
        for name in ("area_m2", "polsby_popper", "reock", "hu_1", "affine_1", "axis_ratio", "axis_azimuth_deg"):
            assert np.isnan(columns[name]).all(), name
        assert columns["feret_max_m"] == pytest.approx(5)
        assert not any(np.isinf(value).any() for value in columns.values())

    def test_a_ring_of_one_point_repeated(self):
        batch = one_ring([(3, 4)] * 4)
        assert arclength.resample(batch, 16).tolist() == [[3 + 4j] * 16]
        assert np.isnan(fourier.exact_coefficients(batch, 4)).all()
        columns = fourier.spectrum_columns(fourier.sampled_coefficients(arclength.resample(batch, 16), 7), 4)
        assert all(np.isnan(value).all() for value in columns.values())
        hull = hulls.convex_hulls(batch)
        calipers.smallest_circle(hull)
        calipers.calipers(hull)

    def test_ratios_of_nothing(self):
        zero, one, null = np.zeros(1), np.ones(1), np.full(1, np.nan)
        for ratio in (compactness.polsby_popper, compactness.convexity, compactness.rectangularity, compactness.reock):
            assert np.isnan(ratio(one, zero)).all()
            assert np.isnan(ratio(null, one)).all()
            assert np.isnan(ratio(one, null)).all()


class TestRepeats:
    def test_repeated_vertices(self):
        ring = [point for point in shapes.L_RING for _ in range(3)]
        assert_same(row_of(shapes.L_SHAPE.polygon), row_of(Polygon(ring)), relative=1e-14)

    def test_nearly_repeated_vertices(self):
        """Edges of 1e-9 m beside ones of a metre."""
        ring = [(x + d, y) for x, y in shapes.L_RING for d in (0.0, 1e-9)]
        row, other = row_of(shapes.L_SHAPE.polygon, EXACT), row_of(Polygon(ring), EXACT)
        for name in set(row) - {"edge_mean_m", "hu_7", "feret_max_azimuth_deg"}:
            assert other[name] == pytest.approx(row[name], rel=1e-7, abs=1e-7), name

    def test_vertices_in_line(self):
        ring = [(0, 0), (1, 0), (2, 0), (2, 1), (1.5, 1), (1, 1), (1, 2), (0, 2), (0, 1.75)]
        row, other = row_of(shapes.L_SHAPE.polygon, EXACT), row_of(Polygon(ring), EXACT)
        del row["edge_mean_m"], other["edge_mean_m"]
        assert_same(row, other, relative=1e-12)

    def test_a_spike_has_length_but_no_area(self):
        spiked = one_ring([(0, 0), (2, 0), (5, 0), (2, 0), (2, 2), (0, 2)])
        columns = columns_of_batch(spiked)
        assert columns["area_m2"] == pytest.approx(4)
        assert columns["perimeter_m"] == pytest.approx(14)


class TestSizes:
    @pytest.mark.parametrize("shape", [shapes.QUAD, shapes.L_SHAPE, shapes.RING], ids=lambda shape: shape.name)
    @pytest.mark.parametrize("factor", [1e-30, 1e-9, 1e-3, 1e3, 1e9, 1e30], ids=str)
    def test_scale_free_columns_do_not_care(self, shape, factor):
        """Eighth powers of lengths, the largest that are taken, are within the range of float64 for all of these."""
        row, other = row_of(shape.polygon), row_of(affinity.scale(shape.polygon, factor, factor, origin=(0, 0)))
        assert_same(row, other, names=scale_free(row))

    def test_a_square_millimetre(self):
        """An area of 1e-6 m2 at a place of the size of projected coordinates."""
        corner = (500_000.0, 5_000_000.0)
        grain = 2.0**-10
        ring = [(corner[0] + x * grain, corner[1] + y * grain) for x, y in shapes.L_RING]
        row = row_of(Polygon(ring))
        assert row["area_m2"] == 3 * grain**2
        assert row["area_m2"] == pytest.approx(3e-6, rel=0.05)
        assert_same(row_of(shapes.L_SHAPE.polygon), row, names=scale_free(row))

    @pytest.mark.parametrize("far", [1e9, -1e9])
    def test_coordinates_of_a_thousand_million(self, far):
        """The spacing of float64 there is 1.2e-7, so the corners are exact and so are the columns."""
        moved = affinity.translate(shapes.QUAD.polygon, far, -far)
        assert_same(row_of(shapes.QUAD.polygon), row_of(moved), relative=1e-13)

    def test_eta_30_of_a_square_far_away(self):
        square = affinity.translate(Polygon(shapes.rectangle(100, 100)), 5e6, 5e6)
        eta = moments.normalised_moments(central_of(square))[0]
        third = eta[[moments.ORDERS.index(order) for order in ((3, 0), (2, 1), (1, 2), (0, 3))]]
        assert np.abs(third).max() < 1e-16

    def test_a_polygon_with_a_hole_that_leaves_almost_nothing(self):
        """A frame 1e-6 wide round a hole."""
        width = 2.0**-20
        frame = Polygon(
            shapes.rectangle(1, 1), [[(width, width), (width, 1 - width), (1 - width, 1 - width), (1 - width, width)]]
        )
        row = row_of(frame)
        assert row["area_m2"] == pytest.approx(4 * width - 4 * width**2, rel=1e-9)
        # Second moment of the unit square less that of the hole, over the area: 1/6 - (1 - 2w)^4 / 6.
        inner = 1 - 2 * width
        assert row["hu_1"] == pytest.approx((1 - inner**4) / 6 / (1 - inner**2) ** 2, rel=1e-9)

    def test_local_origin_is_the_middle_of_the_box(self):
        batch = batch_of(affinity.translate(Polygon(shapes.rectangle(4, 2)), 1e6, 2e6))
        assert batch.origin.tolist() == [[1_000_002.0, 2_000_001.0]]
