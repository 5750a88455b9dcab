"""The gate: what is not a sound, fresh, bounded demand never passes, whatever it is."""

from dataclasses import replace

from cell import Cell, TICK_S
from hypothesis import given, settings
from hypothesis import strategies as st
import numpy as np
import pytest

from suspended_ctrl.physics.values import CarrierCommand, RotorCommand
from suspended_ctrl.safety.gate import bounded, Gate, in_order
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.values import EmergencyStop, Refused

NUMBERS = st.one_of(
    st.floats(allow_nan=True, allow_infinity=True), st.floats(-1000.0, 1000.0),
    st.sampled_from([0.0, -0.0, 170.0, 900.0, 900.5, 901.0, -1e-9, 5e-324, np.nan, np.inf]))


@given(st.lists(NUMBERS, min_size=0, max_size=10))
@settings(max_examples=300, deadline=None)
def test_what_passes_is_finite_and_inside(bay_head_gate, values):
    demand = np.array(values)
    passed = bay_head_gate.rotors(demand)
    sound = (demand.shape == (8,) and np.isfinite(demand).all()
             and (demand >= -0.9).all() and (demand <= 900.9).all())
    if passed is None:
        assert not sound
    else:
        assert sound
        assert ((passed >= 0.0) & (passed <= 900.0)).all()
        np.testing.assert_allclose(passed, demand, atol=0.9)


@pytest.fixture(scope='session')
def bay_head_gate(bay_head):
    return Gate(bay_head, SafetySettings.for_rig(bay_head))


def test_reversible_rotors_may_turn_both_ways(seam_head):
    gate = Gate(seam_head, SafetySettings.for_rig(seam_head))
    demand = np.linspace(-900.0, 900.0, 8)
    np.testing.assert_array_equal(gate.rotors(demand), demand)
    assert gate.rotors(demand * 1.01) is None


def test_rounding_is_clipped():
    out = np.empty(2)
    lower, upper = np.zeros(2), np.full(2, 900.0)
    assert bounded(np.array([-0.5, 900.5]), lower, upper, 1e-3, out)
    np.testing.assert_array_equal(out, [0.0, 900.0])


@pytest.mark.parametrize(('place', 'speed'), [
    ([3.6, 0.0, 0.0], [0.0, 0.0, 0.0]), ([0.0, 0.0, -0.7], [0.0, 0.0, 0.0]),
    ([0.0, 0.0, 0.0], [0.31, 0.0, 0.0]), ([np.nan, 0.0, 0.0], [0.0, 0.0, 0.0]),
    ([0.0, 0.0, 0.0], [0.0, np.inf, 0.0]), ([0.0, 0.0], [0.0, 0.0]), ([], [])])
def test_carrier_demand_outside_travel_or_speed_is_refused(bay_head_gate, place, speed):
    assert bay_head_gate.carrier(np.array(place), np.array(speed)) is None


def test_names_put_values_in_order():
    np.testing.assert_array_equal(in_order(['b', 'a'], [2.0, 1.0], ['a', 'b']), [1.0, 2.0])
    np.testing.assert_array_equal(in_order(['a', 'b'], [1.0, 2.0], ['a', 'b']), [1.0, 2.0])


@pytest.mark.parametrize(('names', 'values'), [
    (['a'], [1.0]), (['a', 'b', 'c'], [1.0, 2.0, 3.0]), (['a', 'c'], [1.0, 2.0]),
    (['a', 'a'], [1.0, 2.0]), (['a', 'b'], [1.0]), ([], []), (['a', ''], [1.0, 2.0])])
def test_wrong_names_give_nothing(names, values):
    assert in_order(names, values, ['a', 'b']) is None


# ---------------------------------------------------------------- through the supervisor


BAD_SPEEDS = [
    np.full(8, np.nan), np.array([300.0] * 7 + [np.inf]), np.array([300.0] * 7 + [-np.inf]),
    np.array([]), np.full(7, 300.0), np.full(9, 300.0), np.full((8, 1), 300.0),
    np.full(8, 300, dtype=np.int64), np.full(8, 300.0, dtype=np.float32), np.full(8, '300'),
    np.full(8, None), [300.0] * 8, None, 300.0, 'fast', np.full(8, -300.0), np.full(8, 1000.0),
    np.full(8, 300.0 + 1.0j), np.full(16, 300.0)[::2]]


@pytest.mark.parametrize('speed', BAD_SPEEDS, ids=range(len(BAD_SPEEDS)))
def test_bad_rotor_demand_never_passes_and_trips(live, speed):
    before = live.last.rotor_command.speed_rad_s
    count = live.supervisor.refused.get('RotorCommand', 0)
    live.change['rotor_demand'] = lambda m: replace(m, speed_rad_s=speed)
    out = live.tick()
    # The last good one stands until it is stale or the trip comes, whichever is first.
    np.testing.assert_array_equal(out.rotor_command.speed_rad_s, before)
    assert live.supervisor.refused['RotorCommand'] == count + 1
    assert live.until('tripped', 1.0) <= 0.020 + TICK_S
    assert live.events[0].cause == 'demand_out_of_bounds'
    assert live.zero()


STAMPS = [-10.0, -0.21, 0.06, 10.0, np.nan, np.inf, -np.inf, -1e300]


@pytest.mark.parametrize('shift', STAMPS)
def test_old_and_future_demands_never_pass(live, shift):
    live.demand = np.full(8, 500.0)
    live.latency_s = 0.0
    live.change['rotor_demand'] = lambda m: replace(m, stamp_s=m.stamp_s + shift)
    for _ in range(40):
        assert live.tick().rotor_command.speed_rad_s.max() < 500.0
    assert live.state == 'tripped'


@pytest.mark.parametrize('stamp', ['now', None, np.array([1.0, 2.0])])
def test_stamps_that_are_no_numbers_never_pass(live, stamp):
    live.demand = np.full(8, 500.0)
    live.change['rotor_demand'] = lambda m: replace(m, stamp_s=stamp)
    for _ in range(40):
        assert live.tick().rotor_command.speed_rad_s.max() < 500.0
    assert live.events[0].cause == 'demand_stale'


def test_message_that_could_not_be_read_counts_and_trips(live):
    live.silent.add('rotor_demand')
    live.extra = [Refused('rotor_demand', 'names')]
    live.run(0.03)
    assert live.state == 'tripped'
    assert live.events[0].cause == 'demand_out_of_bounds'
    assert live.supervisor.refused['rotor_demand'] > 0


@pytest.mark.parametrize('bad', ['nan', 'short', 'far', 'fast'])
def test_bad_carrier_demand_never_passes_and_stops(live, bad):
    def spoil(m: CarrierCommand) -> CarrierCommand:
        if bad == 'nan':
            return replace(m, position_m=np.full(3, np.nan))
        if bad == 'short':
            return replace(m, position_m=np.zeros(2), velocity_m_s=np.zeros(2))
        if bad == 'far':
            return replace(m, position_m=np.array([5.0, 0.0, 0.0]))
        return replace(m, velocity_m_s=np.array([9.0, 0.0, 0.0]))

    live.change['carrier_demand'] = spoil
    live.run(0.3)
    assert live.state == 'live'
    np.testing.assert_array_equal(live.last.carrier_command.position_m, 0.0)
    live.run(0.1)
    assert live.events[0].cause == 'carrier_demand_stale'


def test_good_demand_passes_whole_with_its_stamp(live):
    live.demand = np.linspace(200.0, 800.0, 8)
    out = live.tick()
    np.testing.assert_array_equal(out.rotor_command.speed_rad_s, live.demand)
    assert out.rotor_command.stamp_s == live.now_s - live.latency_s


def test_rotor_demand_may_stop_a_rotor_of_a_one_way_rig(live):
    """The idle floor is lifted in the controlled stop after a rotor loss."""
    live.demand[2] = 0.0
    live.run(0.5)
    assert live.state == 'live'
    assert live.last.rotor_command.speed_rad_s[2] == 0.0


def test_only_while_live_stopping_or_holding(bay_head):
    cell = Cell(bay_head)
    for _ in range(60):
        cell.tick()
        assert cell.zero()
    cell.tick('enable')
    assert not cell.zero()
    cell.extra = [EmergencyStop(True)]
    for _ in range(20):
        cell.tick()
        assert cell.zero()


def test_given_commands_cannot_be_changed_afterwards(live):
    """What was judged is what is sent, even if the sender writes into its array later."""
    array = np.full(8, 400.0)
    live.change['rotor_demand'] = lambda m: RotorCommand(m.stamp_s, array)
    live.tick()
    array[:] = 5000.0
    live.silent.add('rotor_demand')
    assert live.tick().rotor_command.speed_rad_s.max() == 400.0
