"""Arc length, resampling and Fourier descriptors."""

import cmath
from itertools import pairwise
from math import pi, sin

import mpmath
import numpy as np
import pytest
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st
from shapely import Polygon, affinity

from geoshape.formulas import arclength, fourier
from geoshape.options import Family, MeasureOptions, Spectrum
from geoshape.rings import outlines
from tests import naive, shapes, strategies
from tests.formulas.plane import batch_of, columns_of, row_of

SPECTRUM_ONLY = (Family.SPECTRUM,)
HIGHEST = 32


def outline_of(*polygons):
    return outlines(batch_of(*polygons, local_origin=False))


def vertices(rings, at=0):
    run = slice(rings.ring_start[at], rings.ring_start[at + 1])
    return list(zip(rings.x[run].tolist(), rings.y[run].tolist(), strict=True))


def sampled(polygon, n=256, highest=HIGHEST):
    return fourier.sampled_coefficients(arclength.resample(outline_of(polygon), n), highest)[0]


def exact(polygon, highest=HIGHEST):
    return fourier.exact_coefficients(outline_of(polygon), highest)[0]


def at(coefficients, k):
    return coefficients[len(coefficients) // 2 + k]


class TestResample:
    @given(strategies.polygons(), st.sampled_from((16, 37, 256)))
    @settings(max_examples=20)
    def test_walks_the_outline(self, polygon, n):
        rings = outline_of(polygon)
        points = arclength.resample(rings, n)[0]
        assert np.abs(points - naive.resample(vertices(rings), n)).max() <= 1e-12 * rings.sum_rings(
            arclength.edge_lengths(rings)
        ).max() + 1e-12 * max(abs(c) for c in polygon.bounds)

    @given(st.lists(strategies.polygons(), min_size=2, max_size=5))
    @settings(max_examples=20)
    def test_a_batch_is_its_features_one_by_one(self, polygons):
        together = arclength.resample(outline_of(*polygons), 64)
        alone = [arclength.resample(outline_of(polygon), 64)[0] for polygon in polygons]
        assert np.abs(together - np.array(alone)).max() <= 1e-10

    def test_a_huge_ring_before_a_small_one_takes_no_digits(self):
        huge, small = Polygon(shapes.regular(1000, 1e7)), Polygon(shapes.regular(7, 1e-3))
        together = arclength.resample(outline_of(huge, small), 64)[1]
        assert np.abs(together - arclength.resample(outline_of(small), 64)[0]).max() <= 1e-15

    def test_first_point_is_the_first_vertex_and_corners_are_met(self):
        rings = outline_of(Polygon([(0, 0), (4, 0), (4, 4), (0, 4)]))
        points = arclength.resample(rings, 16)[0]
        assert points[0] == complex(*vertices(rings)[0])
        assert points[::4].tolist() == [complex(*corner) for corner in vertices(rings)]

    def test_repeated_vertices_do_not_matter(self):
        plain = [(0, 0), (3, 0), (3, 1), (0, 1)]
        doubled = [point for point in plain for _ in range(3)]
        assert np.array_equal(
            arclength.resample(outline_of(Polygon(plain)), 64), arclength.resample(outline_of(Polygon(doubled)), 64)
        )

    def test_more_vertices_than_points(self):
        rings = outline_of(Polygon(shapes.koch(4)))
        assert rings.n_vertices == 768
        points = arclength.resample(rings, 16)[0]
        assert np.abs(points - naive.resample(vertices(rings), 16)).max() <= 1e-12


class TestCoefficients:
    @given(strategies.stars())
    @settings(max_examples=20)
    def test_sampled_is_the_definition(self, polygon):
        points = arclength.resample(outline_of(polygon), 64)
        found = fourier.sampled_coefficients(points, 31)[0]
        for k in (-31, -8, -1, 0, 1, 2, 31):
            assert abs(at(found, k) - naive.dft(points[0].tolist(), k)) <= 1e-12 * 100

    @given(strategies.stars())
    @settings(max_examples=15)
    def test_exact_is_the_integral(self, polygon):
        rings = outline_of(polygon)
        found = fourier.exact_coefficients(rings, HIGHEST)[0]
        for k in (-32, -7, -2, -1, 0, 1, 2, 3, 32):
            assert abs(at(found, k) - naive.fourier_coefficient(vertices(rings), k)) <= 1e-12 * abs(at(found, 1)) * 10

    @pytest.mark.parametrize("k", [-5, -1, 0, 1, 2])
    def test_integral_in_multiple_precision(self, k):
        """The quad's series by adaptive quadrature with 30 digits."""
        rings = outline_of(shapes.QUAD.polygon)
        ring = vertices(rings)
        with mpmath.workdps(30):
            corners = [mpmath.mpc(*corner) for corner in [*ring, ring[0]]]
            length = [abs(b - a) for a, b in pairwise(corners)]
            total, start, value = sum(length), mpmath.mpf(0), mpmath.mpc(0)
            for (a, b), edge in zip(pairwise(corners), length, strict=True):
                value += mpmath.quad(
                    lambda s, a=a, b=b, edge=edge, start=start: (
                        (a + (b - a) * s / edge) * mpmath.expjpi(-2 * k * (start + s) / total)
                    ),
                    [0, edge],
                )
                start += edge
            expected = complex(value / total)
        assert abs(at(fourier.exact_coefficients(rings, 8)[0], k) - expected) <= 1e-14

    @pytest.mark.parametrize("n", [3, 4, 5, 6, 8, 12])
    def test_exact_spectrum_of_regular_polygons(self, n):
        found = exact(Polygon(shapes.regular(n)))
        first = (n * sin(pi / n) / pi) ** 2
        assert abs(at(found, 1)) == pytest.approx(first, rel=1e-13)
        for k in range(-HIGHEST, HIGHEST + 1):
            expected = 1 / k**2 if k % n == 1 % n and k else 0
            assert abs(at(found, k)) / first == pytest.approx(expected, rel=1e-11, abs=1e-14), k

    @pytest.mark.parametrize(("n", "printed"), [(3, 0.683917990), (4, 0.810569469), (6, 0.911890653)])
    def test_first_amplitude_of_regular_polygons(self, n, printed):
        assert abs(at(exact(Polygon(shapes.regular(n))), 1)) == pytest.approx(printed, abs=5e-10)

    @pytest.mark.parametrize(("n", "samples"), [(3, 48), (4, 256), (5, 80), (6, 96), (8, 256)])
    def test_sampled_spectrum_of_regular_polygons(self, n, samples):
        found = sampled(Polygon(shapes.regular(n)), samples, samples // 2 - 1)
        for k in range(-samples // 2 + 1, samples // 2):
            expected = sin(pi / samples) ** 2 / sin(pi * k / samples) ** 2 if k % n == 1 else 0
            assert abs(at(found, k)) / abs(at(found, 1)) == pytest.approx(expected, rel=1e-11, abs=1e-13), k

    @given(strategies.stars())
    @settings(max_examples=15)
    def test_area_is_pi_times_the_sum_of_k_c_squared(self, polygon):
        highest = 4000
        found = exact(polygon, highest)
        k = np.arange(-highest, highest + 1)
        # Coefficients fall as 1 / k^2, so what lies beyond is of the order of 1 / highest^2.
        assert pi * (k * np.abs(found) ** 2).sum() == pytest.approx(polygon.area, rel=1e-5)

    def test_area_of_a_regular_polygon_by_the_whole_series(self):
        n = 6
        k = 1 + n * np.arange(-200_000, 200_001)
        first = (n * sin(pi / n) / pi) ** 2
        assert pi * (k * (first / k.astype(float) ** 2) ** 2).sum() == pytest.approx(n * sin(2 * pi / n) / 2, rel=1e-12)
        assert abs(at(exact(Polygon(shapes.regular(n))), 1)) == pytest.approx(first, rel=1e-13)

    @given(strategies.stars())
    @settings(max_examples=20)
    def test_sampled_is_close_to_exact_and_converges(self, polygon):
        true = exact(polygon)
        size = abs(at(true, 1))
        errors = [np.abs(np.abs(sampled(polygon, n)) - np.abs(true))[np.arange(65) != 32].max() for n in (256, 4096)]
        low = slice(HIGHEST - 8, HIGHEST + 9)
        low_error = np.abs(np.abs(sampled(polygon)[low]) - np.abs(true[low]))[np.arange(17) != 8].max()
        assert low_error <= 1e-4 * size
        assert errors[0] <= 1e-3 * size
        assert errors[1] <= errors[0] / 16 + 1e-12 * size

    @given(strategies.stars())
    @settings(max_examples=20)
    def test_reversing_swaps_k_and_minus_k(self, polygon):
        rings = outline_of(polygon)
        index = np.concatenate(([0], np.arange(rings.n_vertices - 1, 0, -1)))
        backwards = rings.take_vertices(index, rings.ring_size)
        there, back = (fourier.exact_coefficients(batch, HIGHEST)[0] for batch in (rings, backwards))
        assert np.abs(there[::-1] - back).max() <= 1e-11 * abs(at(there, 1))
        points, points_back = (arclength.resample(batch, 256) for batch in (rings, backwards))
        there, back = (fourier.sampled_coefficients(p, HIGHEST)[0] for p in (points, points_back))
        assert np.abs(there[::-1] - back).max() <= 1e-11 * abs(at(there, 1))

    @given(strategies.stars(), strategies.angles_deg())
    @settings(max_examples=20)
    def test_turning_turns_only_phases(self, polygon, angle):
        c = exact(polygon)
        other = exact(affinity.rotate(polygon, angle, origin=(0, 0)))
        assert np.abs(other - c * cmath.exp(1j * pi * angle / 180)).max() <= 1e-11 * abs(at(c, 1))

    @given(strategies.stars(), st.integers(1, 20))
    @settings(max_examples=20)
    def test_first_vertex_turns_only_phases(self, polygon, step):
        rings = outline_of(polygon)
        step %= rings.n_vertices
        moved = rings.take_vertices(np.roll(np.arange(rings.n_vertices), -step), rings.ring_size)
        c, other = (fourier.exact_coefficients(batch, HIGHEST)[0] for batch in (rings, moved))
        length = arclength.edge_lengths(rings)
        k = np.arange(-HIGHEST, HIGHEST + 1)
        phase = np.exp(2j * pi * k * length[:step].sum() / length.sum())
        assert np.abs(other - c * phase).max() <= 1e-11 * abs(at(c, 1))

    @given(strategies.stars())
    @settings(max_examples=20)
    def test_reflection_conjugates(self, polygon):
        """The mirror image of the walk has the conjugate of c_-k for its c_k."""
        rings = outline_of(polygon)
        mirrored = rings.moved(rings.x, -rings.y, rings.origin)
        c, other = (fourier.exact_coefficients(batch, HIGHEST)[0] for batch in (rings, mirrored))
        assert np.abs(other - c.conj()[::-1]).max() <= 1e-11 * abs(at(c, 1))

    @given(strategies.polygons())
    @settings(max_examples=20)
    def test_reflection_keeps_amplitudes(self, polygon):
        exactly = MeasureOptions(spectrum=Spectrum.EXACT)
        row = row_of(polygon, exactly, SPECTRUM_ONLY)
        other = row_of(affinity.scale(polygon, xfact=-1, origin=(0, 0)), exactly, SPECTRUM_ONLY)
        assert other == pytest.approx(row, rel=1e-9, abs=1e-12)

    @given(strategies.stars(), st.integers(1, 12))
    @settings(max_examples=20)
    @example(Polygon(shapes.rectangle(2, 1)), 3)
    def test_coefficients_of_kuhl_and_giardina(self, polygon, n):
        rings = outline_of(polygon)
        a, b, c, d = naive.elliptic_coefficients(vertices(rings), n)
        found = fourier.exact_coefficients(rings, 12)[0]
        size = abs(at(found, 1))
        assert abs(at(found, n) - complex(a + d, c - b) / 2) <= 1e-12 * size
        assert abs(at(found, -n) - complex(a - d, c + b) / 2) <= 1e-12 * size

    @pytest.mark.parametrize(
        ("n", "printed"),
        [
            (1, (-0.91189065, 0.52648031, -0.30396355, -0.52648031)),
            (2, (0, 0, 0, 0)),
            (3, (0, 0, -0.13509491, 0)),
        ],
    )
    def test_rectangle_of_kuhl_and_giardina(self, n, printed):
        ring = shapes.rectangle(2, 1)
        assert naive.elliptic_coefficients(ring, n) == pytest.approx(printed, abs=5e-9)
        rings = outline_of(Polygon(ring))
        assert vertices(rings) == ring
        found = fourier.exact_coefficients(rings, 4)[0]
        plus, minus = at(found, n), at(found, -n)
        a, d = (plus + minus).real, (plus - minus).real
        c, b = (plus + minus).imag, (minus - plus).imag
        assert (a, b, c, d) == pytest.approx(printed, abs=5e-9)

    @given(strategies.stars(), st.integers(1, 30))
    @settings(max_examples=20)
    def test_exact_does_not_depend_on_the_first_vertex_or_on_inserted_ones(self, polygon, step):
        exactly = MeasureOptions(spectrum=Spectrum.EXACT)
        corners = list(polygon.exterior.coords)[:-1]
        step %= len(corners)
        rotated = corners[step:] + corners[:step]
        finer = [p for a, b in naive.edges(corners) for p in (a, ((a[0] + b[0]) / 2, (a[1] + b[1]) / 2))]
        row = row_of(polygon, exactly, SPECTRUM_ONLY)
        for ring in (rotated, finer):
            assert row_of(Polygon(ring), exactly, SPECTRUM_ONLY) == pytest.approx(row, rel=1e-10, abs=1e-12)

    @given(strategies.stars(), st.integers(1, 30))
    @settings(max_examples=20)
    def test_sampled_depends_on_the_first_vertex_only_a_little(self, polygon, step):
        corners = list(polygon.exterior.coords)[:-1]
        step %= len(corners)
        one, other = (
            columns_of(polygon, families=SPECTRUM_ONLY),
            columns_of(Polygon(corners[step:] + corners[:step]), families=SPECTRUM_ONLY),
        )
        for name in one:
            if name.startswith(("fd_p", "fd_n")):
                assert abs(one[name][0] - other[name][0]) <= 2e-4, name


class TestColumns:
    @given(strategies.polygons())
    @settings(max_examples=6)
    def test_exact_columns(self, polygon):
        options = MeasureOptions(spectrum=Spectrum.EXACT, harmonics=12)
        ring = vertices(outline_of(polygon))
        expected = naive.spectrum(lambda k: naive.fourier_coefficient(ring, k), 12)
        found = row_of(polygon, options, SPECTRUM_ONLY)
        assert set(found) == set(expected)
        assume(expected["fd_departure"] > 1e-6)
        assert found == pytest.approx(expected, rel=1e-9, abs=1e-12)

    @given(strategies.polygons())
    @settings(max_examples=6)
    def test_sampled_columns(self, polygon):
        ring = vertices(outline_of(polygon))
        points = naive.resample(ring, 128)
        expected = naive.spectrum(lambda k: naive.dft(points, k), 8)
        found = row_of(polygon, MeasureOptions(samples=128), SPECTRUM_ONLY)
        assert found == pytest.approx(expected, rel=1e-9, abs=1e-12)

    def test_of_a_square(self):
        """Only k = 1 + 4 m: -3, 5, -7, 9 ...; amplitudes 1 / k^2."""
        row = row_of(shapes.SQUARE.polygon, MeasureOptions(spectrum=Spectrum.EXACT), SPECTRUM_ONLY)
        assert row["fd_n03"] == pytest.approx(1 / 9, rel=1e-12)
        assert row["fd_p05"] == pytest.approx(1 / 25, rel=1e-12)
        assert row["fd_n07"] == pytest.approx(1 / 49, rel=1e-12)
        assert row["fd_n01"] == pytest.approx(0, abs=1e-14)
        orders = [k for k in range(-32, 33) if k % 4 == 1 and k != 1]
        powers = np.array([k**-4.0 for k in orders])
        assert row["fd_departure"] == pytest.approx(powers.sum() ** 0.5, rel=1e-12)
        shares = powers / powers.sum()
        assert row["fd_entropy"] == pytest.approx(-(shares * np.log2(shares)).sum(), rel=1e-10)
        # k^2 |Z_k|^2 is 1, 1/9, 1/25 ... for pairs 1, 3, 5 ...: 0.95 of their sum to 31 is reached at 7.
        bend = np.array([1 / k**2 for k in range(1, 32, 2)])
        expected = range(1, 32, 2)[int(np.argmax(np.cumsum(bend) >= 0.95 * bend.sum()))]
        assert row["fd_harmonics_95"] == expected

    def test_of_a_circle(self):
        row = row_of(Polygon(shapes.regular(256)), families=SPECTRUM_ONLY)
        assert row["fd_departure"] < 1e-12
        assert np.isnan(row["fd_entropy"])
        assert row["fd_harmonics_95"] == 1

    @pytest.mark.parametrize("harmonics", [2, 8, 40, 127])
    def test_names(self, harmonics):
        found = row_of(shapes.QUAD.polygon, MeasureOptions(harmonics=harmonics), SPECTRUM_ONLY)
        expected = [f"fd_p{k:02d}" for k in range(2, harmonics + 1)] + [f"fd_n{k:02d}" for k in range(1, harmonics + 1)]
        assert list(found) == [*expected, "fd_departure", "fd_entropy", "fd_harmonics_95"]
        assert not np.isnan(list(found.values())).any()

    def test_sums_do_not_depend_on_the_number_of_columns_or_samples(self):
        few, many, fine = (
            row_of(shapes.QUAD.polygon, options, SPECTRUM_ONLY)
            for options in (MeasureOptions(), MeasureOptions(harmonics=100), MeasureOptions(samples=4096))
        )
        for name in ("fd_departure", "fd_entropy", "fd_harmonics_95"):
            assert few[name] == many[name]
            assert few[name] == pytest.approx(fine[name], rel=1e-3)

    def test_exact_sums_do_not_depend_on_the_number_of_samples(self):
        """The closed form has no samples: few of them must not cut its sums short."""
        few, many = (
            row_of(shapes.QUAD.polygon, MeasureOptions(spectrum=Spectrum.EXACT, samples=n, harmonics=4), SPECTRUM_ONLY)
            for n in (16, 256)
        )
        assert few == many

    def test_outline_is_the_exterior_of_the_largest_part(self):
        small = affinity.translate(Polygon(shapes.rectangle(1, 1)), 100, 0)
        large = Polygon(shapes.rectangle(40, 10), [shapes.turned(shapes.rectangle(2, 2), 0)[::-1]])
        alone = row_of(Polygon(shapes.rectangle(40, 10)), families=SPECTRUM_ONLY)
        for both in (small.union(large), large.union(small)):
            assert row_of(both, families=SPECTRUM_ONLY) == pytest.approx(alone, rel=1e-3)

    def test_figure_of_eight_has_no_size(self):
        """Equal loops walked in opposite directions have no first harmonic to divide by."""
        coefficients = np.zeros((2, 65), dtype=complex)
        coefficients[0, 32 + 2], coefficients[1, 32 + 1] = 1.0, 1.0
        columns = fourier.spectrum_columns(coefficients, 4)
        assert all(np.isnan(value[0]) for value in columns.values())
        assert columns["fd_p02"][1] == 0
