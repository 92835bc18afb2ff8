"""The centred plane against published examples, PROJ, and arithmetic with many digits."""

import mpmath
import numpy as np
import pyproj
import pytest

from geoshape.ground.plane import Centres, Ellipsoid, distortion_deg, project

WGS84 = Ellipsoid(6378137.0, 0.0066943799901413165)
CLARKE_1866 = Ellipsoid(6378206.4, 0.00676866)
INTERNATIONAL = Ellipsoid(6378388.0, 0.00672267)
GRS80 = Ellipsoid(6378137.0, 0.006694380022900788)
SPHERE = Ellipsoid(6371007.0, 0.0)
SATURN = Ellipsoid(60_268_000.0, 0.1863)


def plane(ellipsoid, centre, longitude, latitude):
    points = np.atleast_1d(longitude).astype(float), np.atleast_1d(latitude).astype(float)
    centres = Centres.at(np.array([centre[1]]), ellipsoid)
    feature = np.zeros(len(points[0]), dtype=np.int64)
    return project(points, np.array([centre], dtype=float), feature, centres, ellipsoid)


class TestPublishedExamples:
    """Snyder 1987, USGS Professional Paper 1395, Appendix A (values from memory), and IOGP Guidance Note 7-2."""

    def test_oblique(self):
        x, y = plane(CLARKE_1866, (-100.0, 40.0), -110.0, 30.0)
        assert x[0] == pytest.approx(-965_932.1, abs=0.05)
        assert y[0] == pytest.approx(-1_056_814.9, abs=0.05)

    def test_polar(self):
        x, y = plane(INTERNATIONAL, (-100.0, 90.0), 5.0, 80.0)
        assert x[0] == pytest.approx(1_077_459.7, abs=0.05)
        assert y[0] == pytest.approx(288_704.5, abs=0.05)

    def test_european_grid(self):
        # Method 9820: EPSG:3035, false origin 4 321 000 m E, 3 210 000 m N, centre 52 N 10 E.
        x, y = plane(GRS80, (10.0, 52.0), 5.0, 50.0)
        assert x[0] + 4_321_000.0 == pytest.approx(3_962_799.45, abs=0.005)
        assert y[0] + 3_210_000.0 == pytest.approx(2_999_718.85, abs=0.005)


@pytest.mark.parametrize("ellipsoid", [WGS84, CLARKE_1866, SPHERE])
@pytest.mark.parametrize("latitude", [-85.0, -60.0, -0.5, 0.0, 5.0, 45.0, 84.0])
def test_agrees_with_proj_within_three_degrees(ellipsoid, latitude):
    rng = np.random.default_rng(7)
    lon, lat = 12.0 + rng.uniform(-3, 3, 400), latitude + rng.uniform(-3, 3, 400)
    minor = ellipsoid.semi_major_m * np.sqrt(1.0 - ellipsoid.eccentricity_squared)
    proj = pyproj.Proj(proj="laea", lat_0=latitude, lon_0=12.0, a=ellipsoid.semi_major_m, b=minor)
    np.testing.assert_allclose(plane(ellipsoid, (12.0, latitude), lon, lat), proj(lon, lat), rtol=0, atol=3e-7)


def exact(ellipsoid, latitude_deg, turn_deg, rise_deg):
    """Snyder's formulas 3-11, 3-12 and 24-17 to 24-20 with 50 digits: PROJ itself loses metres next to the pole."""
    with mpmath.workdps(50):
        a, e2 = mpmath.mpf(ellipsoid.semi_major_m), mpmath.mpf(ellipsoid.eccentricity_squared)
        e = mpmath.sqrt(e2)

        def q(latitude):
            s = mpmath.sin(latitude)
            return (1 - e2) * (s / (1 - e2 * s**2) + mpmath.atanh(e * s) / e) if e else 2 * s

        phi1 = mpmath.radians(mpmath.mpf(latitude_deg))
        phi = phi1 + mpmath.radians(mpmath.mpf(rise_deg))
        turn = mpmath.radians(mpmath.mpf(turn_deg))
        qp = q(mpmath.pi / 2)
        radius = a * mpmath.sqrt(qp / 2)
        beta1, beta = mpmath.asin(q(phi1) / qp), mpmath.asin(q(phi) / qp)
        m1 = mpmath.cos(phi1) / mpmath.sqrt(1 - e2 * mpmath.sin(phi1) ** 2)
        stretch = a * m1 / (radius * mpmath.cos(beta1))
        cosine = mpmath.cos(beta) * mpmath.cos(turn)
        b = radius * mpmath.sqrt(2 / (1 + mpmath.sin(beta1) * mpmath.sin(beta) + mpmath.cos(beta1) * cosine))
        x = b * stretch * mpmath.cos(beta) * mpmath.sin(turn)
        y = b / stretch * (mpmath.cos(beta1) * mpmath.sin(beta) - mpmath.sin(beta1) * cosine)
        return x, y


@pytest.mark.parametrize("ellipsoid", [WGS84, SPHERE, SATURN], ids=["WGS 84", "sphere", "Saturn"])
@pytest.mark.parametrize("latitude", [-89.999, -45.0, 0.0, 1e-7, 30.0, 89.0, 89.99999])
@pytest.mark.parametrize("size_m", [1e-3, 1e2, 1e5, 3e6])
def test_keeps_its_digits_at_every_size_and_latitude(ellipsoid, latitude, size_m):
    rng = np.random.default_rng(20)
    degree = np.radians(ellipsoid.semi_major_m)
    rise = rng.uniform(-1, 1, 4) * size_m / degree
    rise = rise[np.abs(latitude + rise) <= 90.0]
    turn = np.clip(rng.uniform(-1, 1, len(rise)) * size_m / degree / np.cos(np.radians(latitude)), -170, 170)
    centres = Centres.at(np.array([latitude]), ellipsoid)
    feature = np.zeros(len(rise), dtype=np.int64)
    got = project((turn, rise), np.zeros((1, 2)), feature, centres, ellipsoid)
    for i in range(len(rise)):
        x, y = exact(ellipsoid, latitude, turn[i], rise[i])
        assert float(mpmath.hypot(got[0][i] - x, got[1][i] - y) / mpmath.hypot(x, y)) < 5e-14


def test_a_corner_on_the_pole_is_where_it_is():
    # Wedge of 20 degrees that ends at the pole: its tip is the same point along both its sides.
    x, y = plane(WGS84, (10.0, 89.0), [0.0, 10.0, 20.0], [90.0, 90.0, 90.0])
    expected = exact(WGS84, 89.0, 0.0, 1.0)[1]
    np.testing.assert_allclose(x, 0.0, atol=1e-8)
    np.testing.assert_allclose(y, float(expected), rtol=1e-14)


def test_a_centre_on_the_pole_counts_longitudes_from_its_own():
    for sign in (1.0, -1.0):
        x, y = plane(WGS84, (0.0, 90.0 * sign), [0.0, 90.0, 180.0], [89.0 * sign] * 3)
        np.testing.assert_allclose(x / np.hypot(x, y), [0.0, 1.0, 0.0], atol=1e-14)
        np.testing.assert_allclose(sign * y / np.hypot(x, y), [-1.0, 0.0, 1.0], atol=1e-14)


def test_far_beyond_half_a_turn_longitudes_go_on():
    here = plane(WGS84, (0.0, 40.0), [-100.0], [50.0])
    np.testing.assert_allclose(plane(WGS84, (0.0, 40.0), [260.0], [50.0]), here, rtol=1e-12)


def test_opposite_to_the_centre_there_is_no_place():
    x, y = plane(SPHERE, (0.0, 0.0), [180.0], [0.0])
    assert not (np.isfinite(x[0]) and np.isfinite(y[0]))


@pytest.mark.parametrize("ellipsoid", [WGS84, SPHERE, SATURN])
def test_latitude_goes_to_the_authalic_sphere_and_back(ellipsoid):
    latitude = np.radians(np.array([-90.0, -89.9999, -45.0, -1e-9, 0.0, 30.0, 60.0, 89.0, 90.0]))
    back = ellipsoid.geographic_latitude(*ellipsoid.authalic(latitude))
    np.testing.assert_allclose(back, latitude, rtol=0, atol=5e-15)


def test_the_whole_ellipsoid_has_its_published_area():
    # Karney 2013, J. Geodesy 87: WGS 84, 510 065 621 724 088.5 m2.
    assert 4.0 * np.pi * WGS84.authalic_radius_m**2 == pytest.approx(510_065_621_724_088.5, rel=1e-15)


def test_distortion_is_that_of_proj():
    proj = pyproj.Proj(proj="laea", lat_0=50, lon_0=10, R=6371007.0)
    lon, lat = np.array([10.0, 12.0, 20.0, 60.0]), np.array([50.0, 51.0, 55.0, 10.0])
    x, y = proj(lon, lat)
    expected = proj.get_factors(lon, lat).angular_distortion
    np.testing.assert_allclose(distortion_deg(np.hypot(x, y), 6371007.0), expected, rtol=1e-5, atol=1e-6)


@pytest.mark.parametrize("latitude", [0.0, 50.0, 85.0])
@pytest.mark.parametrize("reach_deg", [1.0, 5.0, 25.0])
def test_distortion_on_the_ellipsoid_is_nearly_the_sphere_s(latitude, reach_deg):
    proj = pyproj.Proj(proj="laea", lat_0=latitude, lon_0=10, ellps="WGS84")
    rng = np.random.default_rng(3)
    lon = 10.0 + rng.uniform(-reach_deg, reach_deg, 300)
    lat = np.clip(latitude + rng.uniform(-reach_deg, reach_deg, 300), -89, 89)
    got = distortion_deg(np.hypot(*plane(WGS84, (10.0, latitude), lon, lat)), WGS84.authalic_radius_m)
    expected = np.asarray(proj.get_factors(lon, lat).angular_distortion)
    assert np.abs(got - expected).max() < 0.0024 * reach_deg
