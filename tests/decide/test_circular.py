"""Mean directions against a published example, scipy, exact probabilities and simulation."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, special, stats

from geoshape.decide.circular import mean_directions, rayleigh_p

# Stops of a roulette wheel: Mardia & Jupp, Directional Statistics (2000), Example 1.1; mean direction 51 degrees, mean
# resultant length 0.711 (data and results from memory, confirmed by their definition).
ROULETTE = [43, 45, 52, 61, 75, 88, 88, 279, 357]


def one(angles, period=180.0):
    found = mean_directions(np.array(angles, dtype=float), np.zeros(len(angles), dtype=np.int64), 1, period_deg=period)
    return found.mean_deg[0], found.resultant_length[0], found.rayleigh_p[0]


def test_roulette():
    mean, length, p = one(ROULETTE, period=360.0)
    assert round(mean) == 51
    assert round(length, 3) == 0.711
    assert p == pytest.approx(0.007, abs=0.001)


def test_halved_angles_of_axes_are_the_same_example():
    mean, length, p = one([angle / 2 for angle in ROULETTE])
    whole = one(ROULETTE, period=360.0)
    assert (2 * mean, length, p) == pytest.approx(whole)


@pytest.mark.parametrize(
    ("axes", "mean", "length"),
    [
        ([30], 30, 1),
        ([1, 179], 0, np.cos(np.radians(2))),
        ([179, 3], 1, np.cos(np.radians(4))),
        ([10, 190], 10, 1),
        ([0, 45], 22.5, np.sqrt(0.5)),
        ([0, 0, 90], 0, 1 / 3),
        ([0, 60, 120], np.nan, 0),
        ([0, 90], np.nan, 0),
        ([180, 0], 0, 1),
        ([np.nan, 20], 20, 1),
        ([np.nan], np.nan, np.nan),
        ([], np.nan, np.nan),
    ],
)
def test_axes_by_hand(axes, mean, length):
    found_mean, found_length, p = one(axes)
    assert found_mean == pytest.approx(mean, nan_ok=True)
    assert found_length == pytest.approx(length, nan_ok=True, abs=1e-12)
    assert np.isnan(p)


def test_mean_never_reaches_the_period():
    mean, _, _ = one([180 - 1e-13, 180 - 1e-13])
    assert mean == 0.0


@settings(derandomize=True, deadline=None, max_examples=100)
@given(st.lists(st.floats(0, 179.999), min_size=1, max_size=30), st.sampled_from([180.0, 360.0]))
def test_scipy_agrees(angles, period):
    mean, length, _ = one(angles, period)
    if length < 1e-6:
        return
    expected = stats.circmean(angles, high=period, low=0)
    assert (mean - expected + period / 2) % period - period / 2 == pytest.approx(0, abs=1e-7)
    variance = stats.circvar(angles, high=period, low=0)
    assert 1 - length == pytest.approx(variance, abs=1e-12)


@settings(derandomize=True, deadline=None, max_examples=50)
@given(st.lists(st.tuples(st.floats(0, 180), st.integers(0, 3)), max_size=30), st.floats(-400, 400))
def test_groups_and_turns(rows, turn_deg):
    """Each group is that of its rows alone, and turning all axes turns the means."""
    angles = np.array([angle for angle, _ in rows])
    code = np.array([group for _, group in rows], dtype=np.int64)
    found = mean_directions(angles, code, 4)
    turned = mean_directions(angles + turn_deg, code, 4)
    for group in range(4):
        mean, length, p = one(angles[code == group])
        assert found.resultant_length[group] == pytest.approx(length, nan_ok=True)
        assert turned.resultant_length[group] == pytest.approx(length, nan_ok=True, abs=1e-9)
        assert found.rayleigh_p[group] == pytest.approx(p, nan_ok=True)
        if length > 1e-3:
            assert (turned.mean_deg[group] - mean - turn_deg + 90) % 180 - 90 == pytest.approx(0, abs=1e-6)


def exact_p(n, length):
    """Kluyver's integral for the length of a walk of n steps: 1 - R times the integral of J1(Ru) J0(u)^n."""
    r = n * length
    inner, _ = integrate.quad(lambda u: special.j1(r * u) * special.j0(u) ** n, 0, 300, limit=2000)
    return 1 - r * inner


@pytest.mark.parametrize(("n", "error"), [(5, 0.006), (6, 0.003), (8, 0.001), (10, 5e-4), (20, 2e-4), (50, 2e-5)])
@pytest.mark.parametrize("root_of_statistic", [0.5, 1.0, 1.5, 2.0, 2.5])
def test_rayleigh_against_exact_probabilities(n, error, root_of_statistic):
    length = min(root_of_statistic / np.sqrt(n), 0.97)
    found = rayleigh_p(np.array([float(n)]), np.array([length]))[0]
    assert found == pytest.approx(exact_p(n, length), abs=error)


def test_rayleigh_rejects_at_its_rate():
    rng = np.random.default_rng(1)
    code = np.repeat(np.arange(20_000), 12)
    found = mean_directions(rng.uniform(0, 180, len(code)), code, 20_000)
    for level in (0.01, 0.05, 0.5):
        rejected = (found.rayleigh_p < level).sum()
        low, high = stats.binom.ppf([0.0005, 0.9995], 20_000, level)
        assert low <= rejected <= high


def test_rayleigh_of_many_and_of_few():
    assert rayleigh_p(np.array([2e6]), np.array([0.0]))[0] == 1.0
    assert rayleigh_p(np.array([2e6]), np.array([0.002]))[0] == pytest.approx(np.exp(-8), rel=1e-4)
    assert rayleigh_p(np.array([2e6]), np.array([1.0]))[0] == 0.0
    assert np.isnan(rayleigh_p(np.array([4.0, 0.0]), np.array([0.5, np.nan]))).all()


def test_preferred_axes_are_recovered():
    rng = np.random.default_rng(2)
    axes = np.degrees(rng.vonmises(np.radians(2 * 170), 2.0, 5000)) / 2 % 180
    mean, length, p = one(axes)
    assert mean == pytest.approx(170, abs=1)
    assert length == pytest.approx(special.i1(2) / special.i0(2), abs=0.02)
    assert p < 1e-100
