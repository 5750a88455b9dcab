"""The allocator in ticks: idling, bad demands, dead rotors, the unusable band, swaps."""

from allocator_ticks import TICK_S, Ticks
import numpy as np
import pytest

from suspended_ctrl.allocation import Allocation
from suspended_ctrl.allocation.pseudo_inverse import PseudoInverse
from suspended_ctrl.allocation.rotor_observer import RotorObserver
from suspended_ctrl.physics.rotor import lagged_speed
from suspended_ctrl.physics.values import RotorSample, Wrench
from suspended_ctrl.rig.file import load_rig


@pytest.fixture(name='rig', scope='module')
def _rig():
    return load_rig('bay_head')


class Constant:
    """A strategy that asks for the same thrusts in every tick."""

    def __init__(self, thrust, carrier=None):
        self.allocation = Allocation(np.asarray(thrust, float), carrier,
                                     None if carrier is None else np.zeros_like(carrier))

    def step(self, t, inputs):
        return self.allocation


def test_idle_is_least_speed(rig):
    ticks = Ticks(rig)
    for _ in range(100):
        out = ticks.step()
    # The tether carries all: rotors rest at their least speed. The tether's own settling model and
    # the equilibrium it was asked for differ by millinewtons on thrusts of 0.9 N.
    np.testing.assert_allclose(out.rotor_demand.speed_rad_s, rig.rotors.speed_min_rad_s, rtol=5e-3)
    assert out.diagnostics['fallbacks'] == 0


@pytest.mark.parametrize('allocator', ['pseudo_inverse', 'priority_qp', 'horizon_qp'])
def test_one_way_rotors_stay_in_their_range_while_live(rig, allocator):
    ticks = Ticks(rig, allocator)
    rng = np.random.default_rng(5)
    for k in range(200):
        if k % 10 == 0:
            force, torque = rng.normal(size=3) * 30, rng.normal(size=3) * 6
        speed = ticks.step(force, torque).rotor_demand.speed_rad_s
        assert (speed >= rig.rotors.speed_min_rad_s).all()
        assert (speed <= rig.rotors.speed_max_rad_s).all()


@pytest.mark.parametrize('state', ['locked', 'ready', 'tripped'])
def test_zero_when_not_live(rig, state):
    ticks = Ticks(rig)
    for _ in range(20):
        ticks.step([10.0, 0, 0])
    out = ticks.step([10.0, 0, 0], state=state)
    assert not out.rotor_demand.speed_rad_s.any()
    np.testing.assert_array_equal(out.carrier_demand.velocity_m_s, 0.0)


@pytest.mark.parametrize('bad', [np.nan, np.inf])
def test_demand_that_is_not_finite_is_counted_and_leaves_commands_finite(rig, bad):
    ticks = Ticks(rig)
    for _ in range(20):
        ticks.step([10.0, 0, 0])
    for number in (1, 2):
        out = ticks.step(demand=Wrench(ticks.t, np.array([bad, 0, 60.0]), np.zeros(3)))
        assert out.diagnostics['bad_demands'] == number
        speed = out.rotor_demand.speed_rad_s
        assert np.isfinite(speed).all()
        assert (speed >= rig.rotors.speed_min_rad_s).all()
        assert out.achieved.finite()


def test_strategy_that_is_not_finite_is_replaced_and_counted(rig):
    broken = Ticks(rig, strategy=Constant(np.full(8, np.nan)))
    spare = Ticks(rig, strategy=PseudoInverse(rig))
    for number in range(1, 30):
        out, expected = broken.step([8.0, 0, 0]), spare.step([8.0, 0, 0])
        assert out.diagnostics['fallbacks'] == number
        assert expected.diagnostics['fallbacks'] == 0
        # The same arithmetic on the same numbers.
        np.testing.assert_array_equal(out.rotor_demand.speed_rad_s,
                                      expected.rotor_demand.speed_rad_s)


def test_dead_rotor_leaves_soon_and_stays_out_until_it_follows(rig):
    ticks = Ticks(rig)
    for _ in range(100):
        out = ticks.step([6.0, 0, 0])
    assert out.diagnostics['rotors_out'] == 0
    ticks.dead[3] = True
    out_after = next(k for k in range(1, 30) if ticks.step([6.0, 0, 0]).diagnostics['rotors_out'])
    # Three samples in a row, at 200 Hz one a tick.
    assert out_after <= 4
    for _ in range(300):
        out = ticks.step([6.0, 0, 0])
        assert out.diagnostics['rotors_out'] == 1
        # Asked for its least speed, which shows when it follows again.
        assert out.rotor_demand.speed_rad_s[3] == rig.rotors.speed_min_rad_s[3]
    ticks.dead[3] = False
    for _ in range(150):
        out = ticks.step([6.0, 0, 0])
    assert out.diagnostics['rotors_out'] == 0


def test_sound_rotors_seen_late_on_steep_ramps_stay_in(rig):
    rotors, rng = rig.rotors, np.random.default_rng(6)
    observer = RotorObserver(rotors, 0.002)
    late = round(0.030 / TICK_S)
    true = [np.zeros(rotors.count)] * (late + 1)
    for k in range(800):
        t = 10.0 + k * TICK_S
        # Between least and greatest speed, as steep as the lag lets a rotor go.
        command = np.where((k // 50 + np.arange(rotors.count)) % 2, rotors.speed_min_rad_s,
                           rotors.speed_max_rad_s)
        observer.advance(t)
        noise = 1.0 + 0.01 * rng.normal(size=rotors.count)
        observer.correct(RotorSample(t, true[-1 - late] * noise))
        assert observer.healthy.all(), f'tick {k}'
        observer.commanded(command)
        true.append(lagged_speed(true[-1], command, TICK_S, rotors.time_constant_s))


def test_reversible_rotors_are_never_asked_to_rest_in_their_band():
    rig = load_rig('seam_head')
    ticks = Ticks(rig)
    least = rig.rotors.speed_min_rad_s
    negative = False
    for k in range(400):
        swing = np.sin(2.0 * np.pi * k / 160)
        speed = ticks.step([35.0 * swing, 10.0 * swing, 0.0]).rotor_demand.speed_rad_s
        assert (np.abs(speed) >= least).all()
        assert (np.abs(speed) <= rig.rotors.speed_max_rad_s).all()
        negative = negative or bool((speed < 0.0).any())
    # Both ways were used, or the band would never have been crossed.
    assert negative


def test_swap_is_open_before_the_rotors_turn(rig):
    ticks = Ticks(rig)
    assert ticks.part.swap_refusal(Constant(np.full(8, 1e3))) is None
    ticks.step(state='ready')
    assert ticks.part.swap_refusal(Constant(np.full(8, 1e3))) is None


def test_swap_while_live_only_within_one_tick(rig):
    ticks = Ticks(rig)
    for _ in range(100):
        ticks.step()
    part = ticks.part
    assert part.swap_refusal(PseudoInverse(rig)) is None
    least = ticks.speed ** 2 * 3e-5
    far = least.copy()
    far[2] = 24.0
    assert 'r3' in part.swap_refusal(Constant(far))
    assert 'finite' in part.swap_refusal(Constant(np.full(8, np.nan)))
    assert part.swap_refusal(Constant(least, ticks.setpoint)) is None
    # One tick at full speed is 1.5 mm.
    room = rig.carrier.speed_max_m_s[1] * TICK_S
    near, beyond = ticks.setpoint.copy(), ticks.setpoint.copy()
    near[1] += 0.9 * room
    beyond[1] += 1.1 * room
    assert part.swap_refusal(Constant(least, near)) is None
    assert 'axis y' in part.swap_refusal(Constant(least, beyond))
    part.swap('pseudo_inverse', PseudoInverse(rig))
    assert part.settings.allocator == 'pseudo_inverse'
    assert part.plan_request(ticks.t + 1.0) is None
