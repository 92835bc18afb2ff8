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


def plane(ellipsoid, centre, longitude, latitude):
    points = np.atleast_1d(longitude).astype(float), np.atleast_1d(latitude).astype(float)
    centres = Centres.at(np.radians(np.array([centre[1]])), ellipsoid)
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


@pytest.mark.parametrize(
    ("centre", "point"),
    [
        ((10.0, 89.9999), (50.0, 89.99)),
        ((10.0, 89.0), (-170.0, 89.9)),
        ((0.0, 45.0), (0.001, 45.001)),
        ((0.0, -90.0), (33.0, -88.0)),
    ],
)
def test_keeps_its_digits_near_the_pole_and_near_the_centre(centre, point):
    """Snyder's formulas with 50 digits: PROJ itself loses metres next to the pole."""
    with mpmath.workdps(50):
        a, e2 = mpmath.mpf(WGS84.semi_major_m), mpmath.mpf(WGS84.eccentricity_squared)
        e = mpmath.sqrt(e2)

        def q(latitude):
            s = mpmath.sin(latitude)
            return (1 - e2) * (s / (1 - e2 * s**2) + mpmath.atanh(e * s) / e)

        phi1, phi = mpmath.radians(centre[1]), mpmath.radians(point[1])
        turn = mpmath.radians(point[0] - centre[0])
        qp = q(mpmath.pi / 2)
        radius = a * mpmath.sqrt(qp / 2)
        beta1, beta = mpmath.asin(q(phi1) / qp), mpmath.asin(q(phi) / qp)
        stretch = mpmath.mpf(1)
        if abs(centre[1]) < 90.0:
            m1 = mpmath.cos(phi1) / mpmath.sqrt(1 - e2 * mpmath.sin(phi1) ** 2)
            stretch = a * m1 / (radius * mpmath.cos(beta1))
        b = radius * mpmath.sqrt(
            2 / (1 + mpmath.sin(beta1) * mpmath.sin(beta) + mpmath.cos(beta1) * mpmath.cos(beta) * mpmath.cos(turn))
        )
        x = b * stretch * mpmath.cos(beta) * mpmath.sin(turn)
        y = (
            b
            / stretch
            * (mpmath.cos(beta1) * mpmath.sin(beta) - mpmath.sin(beta1) * mpmath.cos(beta) * mpmath.cos(turn))
        )
    got = plane(WGS84, centre, *point)
    assert got[0][0] == pytest.approx(float(x), abs=2e-8)
    assert got[1][0] == pytest.approx(float(y), abs=2e-8)


@pytest.mark.parametrize("ellipsoid", [WGS84, SPHERE])
def test_latitude_goes_to_the_authalic_sphere_and_back(ellipsoid):
    latitude = np.radians(np.array([-90.0, -89.9999, -45.0, -1e-9, 0.0, 30.0, 60.0, 89.0, 90.0]))
    np.testing.assert_allclose(
        ellipsoid.geographic_latitude(*ellipsoid.authalic(latitude)), latitude, rtol=0, atol=2e-11
    )


def test_the_whole_ellipsoid_has_its_published_area():
    # Karney 2013, J. Geodesy 87: WGS 84, 510 065 621 724 088.5 m2.
    assert 4.0 * np.pi * WGS84.authalic_radius_m**2 == pytest.approx(510_065_621_724_088.5, rel=1e-15)


def test_distortion_is_that_of_proj():
    proj = pyproj.Proj(proj="laea", lat_0=50, lon_0=10, R=6371007.0)
    lon, lat = np.array([10.0, 12.0, 20.0, 60.0]), np.array([50.0, 51.0, 55.0, 10.0])
    x, y = proj(lon, lat)
    expected = proj.get_factors(lon, lat).angular_distortion
    np.testing.assert_allclose(distortion_deg(np.hypot(x, y), 6371007.0), expected, rtol=1e-5, atol=1e-6)
