"""How the true rig differs from its file."""

from bench_rigs import BAY_HEAD, SEAM_HEAD, with_body
import numpy as np
import pytest
from scipy.stats import kstest

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.mismatch import draw_mismatch, Mismatch, MismatchSpread


@pytest.fixture(scope='module')
def drawn() -> list[Mismatch]:
    rng = np.random.default_rng(0)
    return [draw_mismatch(BAY_HEAD, rng) for _ in range(1500)]


def test_none_is_the_rig_itself():
    true = Mismatch.none(BAY_HEAD).applied_to(BAY_HEAD)
    assert true.body.mass_kg == BAY_HEAD.body.mass_kg
    np.testing.assert_allclose(true.body.inertia_kg_m2, BAY_HEAD.body.inertia_kg_m2, atol=1e-15)
    np.testing.assert_array_equal(true.rotors.curve_thrust_n, BAY_HEAD.rotors.curve_thrust_n)
    assert true.tether.stiffness_n_per_m == BAY_HEAD.tether.stiffness_n_per_m


def test_default_draws(drawn):
    assert all(m.mass_factor == pytest.approx(1.03) for m in drawn)
    assert all(m.stiffness_factor == pytest.approx(1.05) for m in drawn)
    assert all(m.lag_factor == pytest.approx(1.10) for m in drawn)
    centre = np.array([m.centre_offset_m for m in drawn])
    np.testing.assert_allclose(np.linalg.norm(centre, axis=1), 0.004, rtol=1e-12)
    # Archimedes: directions drawn evenly over a sphere have even components.
    for column in centre.T / 0.004:
        assert kstest(column, 'uniform', (-1.0, 2.0)).pvalue > 1e-4
    thrust = np.array([m.thrust_factor for m in drawn])
    inertia = np.array([m.inertia_factor for m in drawn])
    for factors in (thrust, inertia):
        # Sigma's own standard error is sigma / sqrt(2 n); cutting at three sigma takes 1.5 %.
        assert np.all(np.abs(factors.mean(axis=0) - 1.0) < 5 * 0.04 / np.sqrt(1500))
        assert np.all(np.abs(factors.std(axis=0) / 0.04 - 0.987) < 5 / np.sqrt(3000))
        assert np.abs(factors - 1.0).max() <= 0.12 + 1e-12
    # Each rotor for itself.
    assert np.abs(np.corrcoef(thrust.T) - np.eye(8)).max() < 5 / np.sqrt(1500)


def test_applied(drawn):
    true = drawn[0].applied_to(BAY_HEAD)
    assert true.body.mass_kg == pytest.approx(6.2 * 1.03)
    assert true.tether.stiffness_n_per_m == pytest.approx(74.0 * 1.05)
    np.testing.assert_allclose(true.rotors.time_constant_s, 0.044)
    np.testing.assert_allclose(true.rotors.curve_thrust_n[:, -1],
                               BAY_HEAD.rotors.curve_thrust_n[:, -1] * drawn[0].thrust_factor)
    # Principal moments, smallest first: y, x, z of this body.
    np.testing.assert_allclose(np.diag(true.body.inertia_kg_m2)[[1, 0, 2]],
                               (0.16, 0.17, 0.21) * drawn[0].inertia_factor)


def test_inertia_stays_such_as_a_body_can_have():
    # A plate: the largest moment is the sum of the others, where half of all draws are impossible.
    plate = with_body(BAY_HEAD, inertia_kg_m2=((0.1, 0, 0), (0, 0.2, 0), (0, 0, 0.3)))
    rng = np.random.default_rng(1)
    for _ in range(200):
        mismatch = draw_mismatch(plate, rng, MismatchSpread().scaled(5.0))
        moments = np.linalg.eigvalsh(mismatch.applied_to(plate).body.inertia_kg_m2)
        assert moments[0] > 0.0
        assert moments[2] <= moments[0] + moments[1] + 1e-12
    # The bench, MuJoCo's own check among it, takes such a body.
    Bench(plate, 1)


def test_spread_can_be_widened_and_narrowed():
    nothing = draw_mismatch(SEAM_HEAD, np.random.default_rng(2), MismatchSpread().scaled(0.0))
    assert nothing.mass_factor == 1.0
    np.testing.assert_array_equal(nothing.thrust_factor, 1.0)
    np.testing.assert_array_equal(nothing.centre_offset_m, 0.0)
    once = draw_mismatch(SEAM_HEAD, np.random.default_rng(2))
    twice = draw_mismatch(SEAM_HEAD, np.random.default_rng(2), MismatchSpread().scaled(2.0))
    np.testing.assert_allclose(twice.thrust_factor - 1.0, 2.0 * (once.thrust_factor - 1.0))
    np.testing.assert_allclose(twice.centre_offset_m, 2.0 * once.centre_offset_m)
    wide = draw_mismatch(SEAM_HEAD, np.random.default_rng(2), MismatchSpread(mass_sigma=0.05))
    assert wide.mass_factor != once.mass_factor
    np.testing.assert_array_equal(wide.thrust_factor, once.thrust_factor)


def test_bench_draws_from_its_seed():
    one, again, other = Bench(BAY_HEAD, 1), Bench(BAY_HEAD, 1), Bench(BAY_HEAD, 2)
    np.testing.assert_array_equal(one.mismatch.thrust_factor, again.mismatch.thrust_factor)
    assert np.all(one.mismatch.thrust_factor != other.mismatch.thrust_factor)
    assert one.true_rig.body.mass_kg == pytest.approx(6.2 * 1.03)
    assert one.rig is BAY_HEAD
