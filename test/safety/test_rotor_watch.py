"""Do the rotors follow: quick where one is dead, quiet where the lag or the sensor is off."""

from cell import Cell, TICK_S
import numpy as np
import pytest

from suspended_ctrl.physics.values import RotorSample
from suspended_ctrl.rig.rig import Rig


def drive(cell: Cell, seconds: float, lag_factor: float, noise: float, seed: int,
          jumps: bool = True, delay_ticks: int = 1) -> float:
    """Rotors with another lag under demands that jump; worst share of the limit."""
    rng = np.random.default_rng(seed)
    count = cell.rig.rotors.count
    speed = cell.speed.copy()
    queue = [cell.last.rotor_command.speed_rad_s] * delay_ticks
    worst = 0.0
    row = [limit.name for limit in cell.supervisor.limits].index('rotor_not_following')

    def measured(sample: RotorSample) -> RotorSample:
        return RotorSample(sample.stamp_s, speed * (1.0 + noise * rng.standard_normal(count)))

    cell.change['rotor_states'] = measured
    for k in range(round(seconds / TICK_S)):
        if jumps and k % 20 == 0:
            cell.demand = rng.uniform(170.0, 900.0, count)
        command = queue.pop(0)
        speed += (command - speed) * (1.0 - np.exp(-TICK_S / (0.040 * lag_factor)))
        cell.tick()
        queue.append(cell.last.rotor_command.speed_rad_s)
        worst = max(worst, 1.0 - cell.last.margin[row])
    return worst


@pytest.mark.parametrize('factor', [0.9, 1.0, 1.1])
def test_lag_mismatch_is_no_trip(live, factor):
    """Default mismatch is 10 %; full jumps every 0.1 s and 1 % noise on top."""
    worst = drive(live, 5.0, factor, 0.01, 11)
    assert live.state == 'live', live.events
    assert 0.1 < worst < 1.0


@pytest.mark.parametrize('delay', [0, 1, 3])
def test_transport_delay_is_no_trip(live, delay):
    drive(live, 5.0, 1.0, 0.01, 12, delay_ticks=max(delay, 1))
    assert live.state == 'live', live.events


@pytest.mark.parametrize('rotor', range(8))
def test_dead_rotor_while_still(bay_head, rotor):
    """It drops 15 % in 6.5 ms (first-order lag, 40 ms), then the hold-off and two ticks."""
    cell = Cell(bay_head).go_live()
    start = cell.t
    name = bay_head.rotors.names[rotor]

    def dead(sample: RotorSample) -> RotorSample:
        speed = sample.speed_rad_s.copy()
        speed[rotor] *= np.exp(-(cell.t - start) / 0.040)
        return RotorSample(sample.stamp_s, speed)

    cell.change['rotor_states'] = dead
    assert cell.until('stopping', 1.0) <= 0.0066 + 0.010 + 2 * TICK_S
    event = cell.events[0]
    assert (event.cause, event.stop_category) == ('rotor_not_following', 1)
    assert f'{name}_measured_rad_s' in dict(event.values)


def test_stuck_rotor_shows_when_told_to_move(live):
    stuck = live.speed.copy()
    live.change['rotor_states'] = lambda m: RotorSample(
        m.stamp_s, np.concatenate((stuck[:1], m.speed_rad_s[1:])))
    live.run(1.0)
    assert live.state == 'live'  # still: nothing to see
    live.demand = live.demand * 1.6
    assert live.until('stopping', 1.0) < 0.1
    assert live.events[0].cause == 'rotor_not_following'


def test_rig_that_can_spare_a_rotor_goes_on_and_stops_at_the_second(seam_head: Rig):
    cell = Cell(seam_head).go_live()
    cell.speed_factor[2] = 0.0
    cell.run(1.0)
    assert cell.state == 'live'
    assert [(e.cause, e.stop_category) for e in cell.events] == [('rotor_not_following', None)]
    cell.speed_factor[5] = 0.0
    cell.until('stopping', 1.0)
    assert cell.events[-1].stop_category == 1
    assert 'r6_measured_rad_s' in dict(cell.events[-1].values)
    cell.until('tripped', 3.0)
    # After a reset every rotor is watched again.
    cell.speed_factor[5] = 1.0
    cell.run(0.5)
    assert cell.tick('reset').replies[0].success
    cell.run(0.1)
    cell.tick('enable')
    cell.run(0.5)
    assert cell.events[-1].stop_category is None


def test_a_rotor_that_turns_by_itself_keeps_the_rig_locked(cell):
    cell.change['rotor_states'] = lambda m: RotorSample(m.stamp_s, np.full(8, 200.0))
    cell.run(0.5)
    assert cell.state == 'locked'
    assert 'rotor_not_following' in cell.last.failed_checks


@pytest.mark.parametrize('speed', [np.full(8, np.nan), np.full(8, np.inf), np.zeros(7),
                                   np.array([]), None])
def test_bad_telemetry_counts_as_silence(live, speed):
    live.change['rotor_states'] = lambda m: RotorSample(m.stamp_s, speed)
    assert live.until('stopping', 1.0) <= 0.150 + 2 * TICK_S
    assert live.events[0].cause == 'rotor_states_stale'
    assert live.supervisor.refused['RotorSample'] > 10
