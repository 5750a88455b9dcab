"""The table of states, and that the supervisor walks along it and nowhere else."""

from cell import Cell, TICK_S
import numpy as np
import pytest

from suspended_ctrl.physics.values import SAFETY_STATES
from suspended_ctrl.safety import sequence
from suspended_ctrl.safety.sequence import next_state, ROTOR_POWER, TRANSITIONS
from suspended_ctrl.safety.values import EmergencyStop


def test_table_in_the_text_is_the_table():
    rule = '========== ============ =========='
    body = sequence.__doc__.split(rule)[2]
    listed = {tuple(line.split()[:2]): line.split()[2]
              for line in body.splitlines()[1:] if line.strip()}
    assert listed == TRANSITIONS


def test_table_uses_every_state_and_no_other():
    assert {s for s, _ in TRANSITIONS} | set(TRANSITIONS.values()) == set(SAFETY_STATES)
    assert set(SAFETY_STATES) > ROTOR_POWER


def test_power_comes_on_by_enable_only():
    gained = {(state, event) for (state, event), after in TRANSITIONS.items()
              if after in ROTOR_POWER and state not in ROTOR_POWER}
    assert gained == {('ready', 'enable')}


def test_stop_categories_end_as_the_standard_has_them():
    """IEC 60204-1: 0 power off at once; 1 stop, then power off; 2 stop, power stays on."""
    for state in ROTOR_POWER:
        assert next_state(state, 'category_0') == 'tripped'
    for state in ('live', 'holding'):
        assert next_state(state, 'category_1') == 'stopping'
    assert next_state('live', 'category_2') == 'holding'
    assert next_state('stopping', 'category_2') == 'stopping'
    assert not {next_state('stopping', e) for e in ('rest', 'rest_latched')} & ROTOR_POWER


def test_what_a_state_does_not_list_leaves_it():
    assert next_state('tripped', 'enable') == 'tripped'
    assert next_state('locked', 'enable') == 'locked'


# ---------------------------------------------------------------- requests


def test_locked_until_every_input_is_there(cell):
    names = ('pose', 'rotor_states', 'carrier_states', 'emergency_stop', 'odometry',
             'rotor_demand')
    cell.silent.update(names)
    for name in names:
        cell.run(0.3)
        assert cell.state == 'locked', name
        assert not cell.tick('enable').replies[0].success
        cell.silent.remove(name)
    cell.run(0.3)
    assert cell.state == 'ready'


def test_enable_answers_and_goes_live(cell):
    cell.run(0.3)
    reply = cell.tick('enable').replies[0]
    assert (reply.request, reply.success) == ('enable', True)
    assert cell.state == 'live'
    assert not cell.zero()
    assert cell.tick('enable').replies[0].success


def test_ready_sends_zero_at_every_step(cell):
    cell.run(0.3)
    for _ in range(100):
        cell.tick()
        assert cell.zero()
        assert cell.last.rotor_command.stamp_s == cell.now_s
        np.testing.assert_array_equal(cell.last.carrier_command.velocity_m_s, 0.0)


def test_ready_is_lost_and_found(cell):
    cell.run(0.3)
    cell.silent.add('pose')
    assert cell.until('locked', 1.0) <= 0.2 + 2 * TICK_S
    cell.silent.clear()
    cell.run(0.02)
    assert cell.state == 'ready'
    assert [c.cause for c in cell.changes[1:]] == ['pose_stale', 'every check is green']


@pytest.mark.parametrize('request_', ['stop', 'disable'])
def test_own_stop_ends_ready_and_latches_nothing(live, request_):
    live.velocity = np.array([0.5, 0.0, 0.0])
    assert live.tick(request_).replies[0].success
    live.run(1.0)
    assert live.state == 'stopping'
    assert not live.zero()
    live.velocity = np.zeros(3)
    assert live.until('ready', 5.0) == pytest.approx(1.2, abs=2 * TICK_S)
    assert live.zero()
    assert live.tick('enable').replies[0].success
    assert not live.events


def test_own_stop_that_does_not_come_to_rest_is_cut(live):
    live.velocity = np.array([0.1, 0.0, 0.0])
    live.tick('stop')
    assert live.until('tripped', 20.0) == pytest.approx(12.0, abs=2 * TICK_S)
    assert live.events[-1].cause == 'stop_timeout'
    assert live.zero()


@pytest.mark.parametrize('moving', ['speed', 'rate'])
def test_at_rest_means_both_for_long_enough(live, moving):
    def move(share):
        if moving == 'speed':
            live.velocity = np.array([0.0, 0.06 * share, 0.0])
        else:
            live.rate = np.array([0.0, 0.12 * share, 0.0])

    move(0.98)
    live.tick('stop')
    live.run(1.1)
    move(1.02)
    live.tick()
    move(0.98)
    live.run(1.1)
    assert live.state == 'stopping'
    live.run(0.2)
    assert live.state == 'ready'


def test_trip_latches_until_reset_and_reset_does_not_restart(live):
    live.extra = [EmergencyStop(True)]
    live.tick()
    assert live.state == 'tripped'
    assert not live.tick('enable').replies[0].success
    reply = live.tick('reset').replies[0]
    assert not reply.success
    assert 'emergency_stop' in reply.message
    live.extra = []
    live.run(0.2)
    assert live.state == 'tripped'
    assert live.tick('reset').replies[0].success
    live.run(1.0)
    assert live.state == 'ready'
    assert live.zero()
    assert live.tick('enable').replies[0].success
    assert live.state == 'live'


def test_emergency_stop_let_go_within_a_tick_still_stops(live):
    live.extra = [EmergencyStop(True), EmergencyStop(False)]
    live.tick()
    assert live.state == 'tripped'
    live.extra = []
    live.tick()
    assert live.zero()


@pytest.mark.parametrize('content', [None, 1, 'false', np.bool_(True), float('nan')])
def test_emergency_stop_message_that_is_no_plain_false_stops(live, content):
    live.extra = [EmergencyStop(content)]
    live.tick()
    assert live.state == 'tripped'


def test_emergency_stop_latches_without_power_too(cell):
    cell.extra = [EmergencyStop(True)]
    cell.tick()
    assert cell.state == 'tripped'
    cell.extra = []
    cell.run(0.5)
    assert cell.state == 'tripped'
    cell.tick('reset')
    cell.run(0.1)
    assert cell.state == 'ready'


def test_emergency_stop_wins_over_enable_in_the_same_tick(cell):
    cell.run(0.3)
    cell.extra = [EmergencyStop(True)]
    assert not cell.tick('enable').replies[0].success
    assert cell.state == 'tripped'
    assert cell.zero()


def test_reset_refused_while_the_cause_stands(live):
    live.quaternion = np.array([np.cos(0.4), np.sin(0.4), 0.0, 0.0])
    live.until('tripped', 3.0)
    assert live.events[0].cause == 'tilt'
    reply = live.tick('reset').replies[0]
    assert not reply.success
    assert 'tilt' in reply.message
    live.quaternion = np.array([1.0, 0.0, 0.0, 0.0])
    assert live.tick('reset').replies[0].success


def test_limit_stop_ends_tripped(live):
    live.speed_factor[2] = 0.7
    live.until('stopping', 1.0)
    assert live.until('tripped', 2.0) == pytest.approx(1.2, abs=2 * TICK_S)
    assert live.changes[-1].cause == 'rotor_not_following'


def test_limit_during_own_stop_latches_and_restarts_no_clock(live):
    live.velocity = np.array([0.1, 0.0, 0.0])
    live.tick('stop')
    live.run(6.0)
    live.speed_factor[2] = 0.7
    live.run(0.1)
    assert live.events[0].cause == 'rotor_not_following'
    assert live.until('tripped', 10.0) == pytest.approx(5.9, abs=3 * TICK_S)


def test_requests_without_effect_answer(cell, live):
    assert cell.tick('stop').replies[0].success
    assert cell.tick('reset').replies[0].success
    assert not live.tick('reset').replies[0].success
    assert not live.tick('launch').replies[0].success
    assert live.state == 'live'


# ---------------------------------------------------------------- category 2


@pytest.fixture
def holding(bay_head) -> Cell:
    cell = Cell(bay_head, hold_timeout_s=4.0)
    cell.peers = {'mission_player': True}
    cell.go_live()
    cell.peers = {'mission_player': False}
    cell.run(0.1)
    assert cell.state == 'holding'
    return cell


def test_hold_keeps_power_and_reset_returns_to_live(holding):
    assert not holding.zero()
    assert not holding.tick('enable').replies[0].success
    assert not holding.tick('reset').replies[0].success
    holding.peers = {'mission_player': True}
    assert holding.tick('reset').replies[0].success
    assert holding.state == 'live'


def test_hold_is_left_by_stop(holding):
    holding.tick('stop')
    assert holding.state == 'stopping'
    holding.until('ready', 3.0)
    assert holding.zero()


def test_hold_ends_by_itself(holding):
    assert holding.until('stopping', 5.0) == pytest.approx(4.0 - 0.1, abs=3 * TICK_S)
    assert holding.events[-1].cause == 'hold_timeout'
    holding.until('tripped', 13.0)
    assert holding.zero()


def test_standstill_is_watched_once_at_rest(holding):
    """IEC 61800-5-2: a stop of category 2 ends in a monitored standstill."""
    holding.velocity = np.array([0.3, 0.0, 0.0])
    holding.run(0.5)
    assert holding.state == 'holding'  # not at rest yet
    holding.velocity = np.zeros(3)
    holding.run(1.3)
    holding.velocity = np.array([0.3, 0.0, 0.0])
    assert holding.until('stopping', 1.0) <= 0.1 + 2 * TICK_S
    assert holding.events[-1].cause == 'standstill'


def test_limits_act_while_holding(holding):
    holding.silent.add('rotor_demand')
    holding.run(0.1)
    assert holding.state == 'tripped'
    assert holding.zero()
