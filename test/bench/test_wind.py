"""The Dryden wind, held to the formulas of MIL-F-8785C and to its own spectra."""

from itertools import pairwise
import math

from bench_rigs import BAY_HEAD, exact_bench, run
import numpy as np
import pytest
from scipy.integrate import quad
from scipy.signal import welch

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.wind import Dryden, FOOT_M, low_altitude, Wind

KNOT_M_S = 1852.0 / 3600.0


@pytest.mark.parametrize(('feet', 'length_m', 'sigma_m_s'), [
    (50.0, 94.728, 1.41882), (20.0, 43.766, 1.48865), (1000.0, 304.8, 0.77167)])
def test_scale_and_intensity(feet, length_m, sigma_m_s):
    # MIL-F-8785C (1980) section 3.7 at 15 knots: L = h / (0.177 + 0.000823 h)^1.2 in feet, sigma =
    # 0.1 W / (0.177 + 0.000823 h)^0.4; at 1000 ft L = 1000 ft and sigma is the vertical one.
    dryden = low_altitude(feet * FOOT_M, 15.0 * KNOT_M_S)
    assert dryden.length_m == pytest.approx(length_m, rel=2e-5)
    assert dryden.sigma_m_s == pytest.approx(sigma_m_s, rel=2e-5)


def test_below_ten_feet_it_is_as_at_ten():
    low, ten = low_altitude(2.0, 3.0), low_altitude(10.0 * FOOT_M, 3.0)
    assert (low.length_m, low.sigma_m_s) == (ten.length_m, ten.sigma_m_s)


def test_mean_wind_is_the_given_one_at_twenty_feet_and_less_below():
    assert low_altitude(20.0 * FOOT_M, 3.0).mean_m_s == pytest.approx(3.0)
    # Logarithmic profile over 0.15 ft: ln(8.79 / 0.15) / ln(20 / 0.15).
    assert low_altitude(2.68, 3.0).mean_m_s == pytest.approx(
        3.0 * math.log(2.68 / 0.3048 / 0.15) / math.log(20.0 / 0.15))


STEP_S = 0.01
DRYDEN = Dryden(mean_m_s=10.0, length_m=20.0, sigma_m_s=2.0)


@pytest.fixture(scope='module')
def wind() -> np.ndarray:
    """Turbulence along and across the wind, a million steps: 5000 times the wind's own memory."""
    source = Wind(DRYDEN, STEP_S, np.random.default_rng(0))
    rows = np.array([source.velocity_map() for _ in range(1_000_000)])
    along = source.along_map
    across = np.array((-along[1], along[0]))
    return np.column_stack((rows @ along - DRYDEN.mean_m_s, rows @ across))


def test_spectra_integrate_to_the_variance():
    # One-sided over the spatial frequency, MIL-F-8785C.
    for spectrum in (along_spectrum, across_spectrum):
        assert quad(lambda x, s=spectrum: s(x / 20.0) / 20.0, 0, np.inf)[0] == pytest.approx(4.0)


def along_spectrum(k):
    length, sigma = DRYDEN.length_m, DRYDEN.sigma_m_s
    return sigma ** 2 * 2 * length / np.pi / (1 + (length * k) ** 2)


def across_spectrum(k):
    length, sigma = DRYDEN.length_m, DRYDEN.sigma_m_s
    return sigma ** 2 * length / np.pi * (1 + 3 * (length * k) ** 2) / (1 + (length * k) ** 2) ** 2


def test_variance(wind):
    # Independent draws there are T V / 2L; five of sigma's standard errors.
    independent = len(wind) * STEP_S * DRYDEN.mean_m_s / (2 * DRYDEN.length_m)
    allowed = 5.0 / math.sqrt(2.0 * independent)
    np.testing.assert_allclose(wind.std(axis=0), 2.0, rtol=allowed)
    assert np.all(np.abs(wind.mean(axis=0)) < 5.0 * 2.0 / math.sqrt(independent))
    assert abs(np.corrcoef(wind.T)[0, 1]) < 5.0 / math.sqrt(independent)


def test_correlation_along_falls_to_one_eth_at_the_scale(wind):
    lag = round(DRYDEN.length_m / DRYDEN.mean_m_s / STEP_S)
    along = wind[:, 0]
    independent = len(wind) * STEP_S * DRYDEN.mean_m_s / (2 * DRYDEN.length_m)
    assert (along[lag:] * along[:-lag]).mean() / 4.0 == pytest.approx(
        math.exp(-1.0), abs=5.0 / math.sqrt(independent))
    # Pole of the exact discretisation, e^(-V dt / L).
    ahead = along[1:] @ along[:-1] / (along[:-1] @ along[:-1])
    assert ahead == pytest.approx(math.exp(-0.005), abs=5 * 0.1 / math.sqrt(len(along)))


@pytest.mark.parametrize(('column', 'spectrum'), [(0, along_spectrum), (1, across_spectrum)])
def test_spectrum(wind, column, spectrum):
    frequency, density = welch(wind[:, column], 1.0 / STEP_S, nperseg=16384)
    # Well below half the sampling rate, above the lowest bins, in bands of averaged bins.
    edges = np.geomspace(0.02, 5.0, 8)
    for low, high in pairwise(edges):
        inside = (frequency >= low) & (frequency < high)
        theory = 2 * np.pi * spectrum(2 * np.pi * frequency / 10.0) / 10.0
        ratio = density[inside].sum() / theory[inside].sum()
        # A band holds some 120 half-overlapping segments times its bins.
        assert ratio == pytest.approx(1.0, abs=5.0 / math.sqrt(120 * inside.sum()) + 0.01)


def test_first_values_are_no_special_ones():
    first = [Wind(DRYDEN, STEP_S, np.random.default_rng(i)) for i in range(400)]
    rows = np.array([w.velocity_map() - DRYDEN.mean_m_s * w.along_map for w in first])
    assert rows.std() == pytest.approx(2.0, rel=5.0 / math.sqrt(2 * 800))
    headings = np.array([w.along_map for w in first])
    assert np.all(np.abs(headings.mean(axis=0)) < 5.0 * math.sqrt(0.5 / 400))


def test_slow_wind_over_short_steps_keeps_its_digits():
    # The across filter's second state gets the cube of step over memory: 1e-13 here.
    slow = Wind(low_altitude(2.68, 0.1), 0.0025, np.random.default_rng(0))
    rows = np.array([slow.velocity_map() for _ in range(2000)])
    assert np.all(np.isfinite(rows))
    assert np.abs(np.diff(rows, axis=0)).max() < 0.01


def test_a_standing_wind_pushes_the_platform_by_its_drag():
    bench = exact_bench(wind_m_s=8.0)
    places = []
    for i in range(15):
        run(bench, 1.0 * (i + 1))
        places.append(bench.truth().position_map_m - bench.equilibrium_map_m)
    drift = np.mean(places, axis=0)
    # 1/2 rho A v^2 = 2.1 N for the mean of 6.7 m/s, over m g / L = 16.4 N/m; the gusts' sigma of
    # 1.6 m/s, slower than the run is long, makes that up to twice as much or as little.
    assert 0.03 < np.hypot(drift[0], drift[1]) < 0.30


def test_drag_brings_a_moving_platform_to_the_speed_of_formula():
    # A push of 2 N along y with the tether cut: terminal speed sqrt(2 F / rho A) = 6.44 m/s is
    # neared as tanh; fall along z has its own area, so look early: initial deceleration instead.
    bench = Bench(BAY_HEAD, 0, exact_bench().mismatch)
    plant = bench._plant
    plant.set_tether(0.0, True)
    plant.qvel[:3] = plant.before[:3] = (0.0, 5.0, 0.0)
    plant.step()
    drag = 0.5 * 1.20411 * 0.08 * 25.0
    # 0.2 % of speed is lost over the step, and the fall's speed of 25 mm/s adds nothing.
    assert (plant.qvel[1] - 5.0) / 0.0025 == pytest.approx(-drag / 6.22, rel=1e-3)
