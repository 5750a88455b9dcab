"""Every limit: quiet just inside, its own cause, category and time just outside."""

from collections.abc import Callable
from dataclasses import dataclass, replace

from cell import Cell, TICK_S, without
import numpy as np
import pytest

from suspended_ctrl.physics.values import PoseSample, TetherLoadSample
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety import rows
from suspended_ctrl.safety.limits import limit_table
from suspended_ctrl.safety.motion import JUDGED
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.values import EmergencyStop, Heartbeat

STEP_AWAY = 0.02  # how far inside or outside of a limit a case stands


def turned(angle_rad: float, axis: int) -> np.ndarray:
    """Quaternion of a turn about one body axis."""
    out = np.zeros(4)
    out[0], out[1 + axis] = np.cos(0.5 * angle_rad), np.sin(0.5 * angle_rad)
    return out


def tilt(cell: Cell, share: float) -> None:
    cell.quaternion = turned(0.70 * share, 0)


def rates(cell: Cell, share: float) -> None:
    cell.rate = np.array([0.0, 0.0, 4.0 * share])


def gyroscope(cell: Cell, share: float) -> None:
    """Only the inertial sensor sees it."""
    for name in ('imu', 'imu_2'):
        cell.change[name] = lambda m: replace(m, rate_rad_s=np.array([0.0, 4.0 * share, 0.0]))


def speed(cell: Cell, share: float) -> None:
    cell.velocity = np.array([3.5 * share, 0.0, 0.0])


def hang_at_tension(cell: Cell, tension_n: float) -> None:
    tether = cell.rig.tether
    span = tether.hook_m[2] + tether.rest_length_m + tension_n / tether.stiffness_n_per_m
    cell.position[2] = cell.rig.carrier.anchor_m[2] - span
    cell.force = np.array([0.0, 0.0, tension_n / cell.rig.body.mass_kg])


def slack(cell: Cell, share: float) -> None:
    hang_at_tension(cell, 5.0 / share)


def overload(cell: Cell, share: float) -> None:
    hang_at_tension(cell, 150.0 * share)


def hook_angle(cell: Cell, share: float) -> None:
    """Tether leans one way, the platform the other; each alone is inside every limit."""
    lean = 0.9 * share - 0.6
    tether = cell.rig.tether
    span = tether.rest_length_m + 61.0 / tether.stiffness_n_per_m
    cell.quaternion = turned(0.6, 1)
    hook_map = 0.1 * np.array([np.sin(0.6), 0.0, np.cos(0.6)])
    cell.position = (cell.rig.carrier.anchor_m
                     - span * np.array([-np.sin(lean), 0.0, np.cos(lean)]) - hook_map)


def outside(cell: Cell, share: float) -> None:
    cell.position[0] = 4.2 * share


def keep_in(cell: Cell, share: float) -> None:
    """On the way out at 1.2 m/s: 0.18 m of reaction, and v^2 / 2a."""
    way = 0.18 + 0.72 / cell.supervisor.settings.stop_deceleration_m_s2
    cell.position[0] = 4.2 * share - way
    cell.velocity = np.array([1.2, 0.0, 0.0])


def far_from_anchor(cell: Cell) -> None:
    """So far out that stopping takes more room than swinging."""
    cell.axes[0] = cell.axes_demand[0] = 2.1
    cell.position[0] = 2.1


def swing(cell: Cell, share: float) -> None:
    """At the anchor's end of travel a cut swings by v sqrt(L / g) beyond it."""
    length = cell.rig.carrier.anchor_m[2] - cell.position[2]
    cell.velocity = np.array([(4.2 * share - 3.5) / np.sqrt(length / 9.80665), 0.0, 0.0])


def at_end_of_travel(cell: Cell) -> None:
    cell.axes[0] = cell.axes_demand[0] = 3.5
    cell.position[0] = 3.5


def tether_lost(cell: Cell, share: float) -> None:
    """Accelerometer that feels this much less than the stretch gives."""
    cell.force = cell.force * (1.0 - 0.75 * share)


def load_cell(cell: Cell, share: float) -> None:
    cell.extra = [TetherLoadSample(cell.now_s, 60.996 * (1.0 - 0.75 * share))]


def load_cell_high(cell: Cell, share: float) -> None:
    cell.extra = [TetherLoadSample(cell.now_s, 150.0 * share)]


def not_following(cell: Cell, share: float) -> None:
    cell.speed_factor[3] = 1.0 - 0.15 * share


def running_away(cell: Cell, share: float) -> None:
    cell.speed_factor[3] = 1.0 + 0.15 * share


def overspeed(cell: Cell, share: float) -> None:
    cell.speed_factor[:] = 1.08 * share


def at_full_speed(cell: Cell) -> None:
    cell.demand = cell.rig.rotors.speed_max_rad_s.copy()


def beyond_bounds(cell: Cell, share: float) -> None:
    cell.demand = cell.demand.copy()
    cell.demand[0] = 900.0 + 0.001 * 900.0 * share


def unsure(cell: Cell, share: float) -> None:
    cell.sigma_m = 0.1 / 3.0 * share


def pose_off(cell: Cell, share: float) -> None:
    cell.change['pose'] = lambda m: replace(
        m, position_map_m=m.position_map_m + np.array([0.0, 0.05 * share, 0.0]))


def pose_turned(cell: Cell, share: float) -> None:
    cell.change['pose'] = lambda m: replace(m, quaternion_wxyz=turned(0.15 * share, 2))


def hoisted(cell: Cell) -> None:
    cell.axes[2] = cell.axes_demand[2] = 0.6
    cell.position[2] += 0.6


def travel(cell: Cell, share: float) -> None:
    cell.axes[2] = 0.62 * share


def following(cell: Cell, share: float) -> None:
    cell.axes[1] = 0.04 * share


def pressed(cell: Cell, share: float) -> None:
    cell.extra = [EmergencyStop(share > 1.0)]


def peer(name: str) -> Callable[[Cell, float], None]:
    def leave(cell: Cell, share: float) -> None:
        cell.peers = {'state_estimator': True, 'wrench_controller': True,
                      'effort_allocator': True, 'mission_player': True, 'other': False}
        cell.peers[name] = share < 1.0
    return leave


def silent(name: str) -> Callable[[Cell, float], None]:
    def fall(cell: Cell, share: float) -> None:
        if share > 1.0:
            cell.silent.add(name)
    return fall


@dataclass(frozen=True)
class Case:
    """A way to break a limit; within_s is its hold-off, or its silence, to which ticks come."""

    cause: str
    category: int
    breaks: Callable[[Cell, float], None]
    within_s: float
    prepare: Callable[[Cell], None] | None = None


MOTION_S = 0.020
CASES = [
    Case('outside', 0, outside, MOTION_S, at_end_of_travel),
    Case('keep_in', 1, keep_in, MOTION_S, far_from_anchor),
    Case('swing', 1, swing, MOTION_S, at_end_of_travel),
    Case('tilt', 1, tilt, MOTION_S),
    Case('rates', 1, rates, MOTION_S),
    Case('rates', 1, gyroscope, MOTION_S),
    Case('speed', 1, speed, MOTION_S),
    Case('tether_slack', 1, slack, MOTION_S),
    Case('overload', 1, overload, MOTION_S),
    Case('overload', 1, load_cell_high, MOTION_S),
    Case('hook_angle', 1, hook_angle, MOTION_S),
    Case('emergency_stop', 0, pressed, 0.0),
    # The line was heard at most one of its periods (50 ms here) before it fell silent.
    Case('emergency_stop_silent', 0, silent('emergency_stop'), 0.200),
    Case('peer_gone', 0, peer('state_estimator'), 0.0),
    Case('peer_gone', 0, peer('wrench_controller'), 0.0),
    Case('peer_gone', 0, peer('effort_allocator'), 0.0),
    Case('mission_gone', 2, peer('mission_player'), 0.0),
    # The balance of forces is filtered over 10 ms.
    Case('tether_lost', 0, tether_lost, 0.040 + 0.035),
    Case('tether_lost', 0, load_cell, 0.040),
    Case('rotor_overspeed', 0, overspeed, 0.010, at_full_speed),
    Case('rotor_not_following', 1, not_following, 0.010),
    Case('rotor_not_following', 1, running_away, 0.010),
    Case('demand_out_of_bounds', 0, beyond_bounds, 0.020),
    Case('odometry_stale', 0, silent('odometry'), 0.075),
    Case('demand_stale', 0, silent('rotor_demand'), 0.080),
    Case('rotor_states_stale', 1, silent('rotor_states'), 0.150),
    Case('carrier_states_stale', 1, silent('carrier_states'), 0.300),
    Case('carrier_demand_stale', 1, silent('carrier_demand'), 0.350),
    Case('pose_stale', 1, silent('pose'), 0.600),
    Case('pose_rejected', 1, pose_off, 0.200),
    Case('pose_rejected', 1, pose_turned, 0.200),
    Case('estimator_inconsistent', 1, unsure, 0.0),
    Case('anchor_travel', 1, travel, MOTION_S + 0.02, hoisted),
    Case('anchor_following', 1, following, 0.100 + 0.02),
]
IDS = [f'{case.cause}-{case.breaks.__name__}' for case in CASES]


def ready_for(case: Case, rig: Rig) -> Cell:
    cell = Cell(rig)
    if case.prepare is not None:
        case.prepare(cell)
    return cell.go_live()


@pytest.mark.parametrize('case', CASES, ids=IDS)
def test_just_inside_is_quiet(case, bay_head):
    cell = ready_for(case, bay_head)
    case.breaks(cell, 1.0 - STEP_AWAY)
    cell.run(1.0)
    assert cell.state == 'live', cell.events
    assert not cell.events


@pytest.mark.parametrize('case', CASES, ids=IDS)
def test_just_outside_names_its_cause_in_time(case, bay_head):
    cell = ready_for(case, bay_head)
    case.breaks(cell, 1.0 + STEP_AWAY)
    start = cell.t
    after = {0: 'tripped', 1: 'stopping', 2: 'holding'}[case.category]
    # Hold-off or silence, and two ticks; messages arrive 1 ms before the tick that takes them.
    assert cell.until(after, 2.0) <= case.within_s + 2 * TICK_S + 1e-9
    event = cell.events[0]
    assert (event.cause, event.stop_category) == (case.cause, case.category)
    assert event.t_s > start
    change = cell.changes[-1]
    assert (change.before, change.after, change.cause) == ('live', after, case.cause)
    assert all(np.isfinite(value) for _, value in event.values)
    assert cell.zero() == (case.category == 0)
    row = [limit.name for limit in cell.supervisor.limits].index(case.cause)
    assert cell.last.margin[row] < 0.0


# The others apply only while rotor power is on, or need commands that are not followed.
CHECKS = [case for case in CASES if case.cause not in (
    'mission_gone', 'tether_lost', 'carrier_demand_stale', 'rotor_overspeed',
    'rotor_not_following', 'anchor_following')]


@pytest.mark.parametrize('case', CHECKS, ids=lambda c: f'{c.cause}-{c.breaks.__name__}')
def test_never_enabled_while_broken(case, bay_head):
    cell = Cell(bay_head)
    if case.prepare is not None:
        case.prepare(cell)
    case.breaks(cell, 1.0 + STEP_AWAY)
    cell.run(0.7)
    out = cell.tick('enable')
    assert cell.state == ('tripped' if case.cause == 'emergency_stop' else 'locked')
    assert not out.replies[0].success
    if case.cause != 'emergency_stop':
        assert case.cause in out.replies[0].message
        assert case.cause in out.failed_checks


def test_table_and_rows_agree(bay_head):
    table = limit_table(bay_head, SafetySettings.for_rig(bay_head))
    assert tuple(limit.name for limit in table[:len(JUDGED)]) == JUDGED
    assert len(table) == rows.COUNT
    for k, limit in enumerate(table):
        assert getattr(rows, limit.name.upper()) == k
        assert limit.category in (0, 1, 2)
        assert limit.meaning


def test_an_emergency_stop_is_category_0_or_1_and_latches(bay_head):
    """ISO 13850: never category 2; a reset does not restart."""
    table = limit_table(bay_head, SafetySettings.for_rig(bay_head))
    assert all(limit.category < 2 for limit in table if limit.name.startswith('emergency'))


def test_tick_late(live):
    live.tick(dt=0.078)
    assert live.state == 'live'
    live.tick(dt=0.083)
    assert live.state == 'tripped'
    assert live.events[0].cause == 'tick_late'
    assert live.zero()


@pytest.mark.parametrize('jump', [-2.0, -0.2, 0.2, 2.0, 3600.0])
def test_clock_jump_is_named_and_stops(live, jump):
    live.clock_offset_s += jump
    live.tick()
    assert (live.events[0].cause, live.events[0].stop_category) == ('clock_jump', 1)
    live.run(0.3)
    assert live.state == 'stopping', live.events


@pytest.mark.parametrize('jump', [-2.0, -0.3, 0.3, 2.0])
def test_jump_of_the_sensors_clock_is_named(live, jump):
    """The stamps of all sensors, and of what is derived from them, jump; this host's clock not."""
    def shifted(message):
        return replace(message, stamp_s=message.stamp_s + jump)

    for name in ('imu', 'imu_2', 'pose', 'rotor_states', 'carrier_states', 'odometry',
                 'rotor_demand', 'carrier_demand'):
        live.change[name] = shifted
    # Four poses in a row; then the refused odometry ends the stop.
    assert live.until('stopping', 1.0) <= 4 * TICK_S + TICK_S
    assert (live.events[0].cause, live.events[0].stop_category) == ('clock_jump', 1)
    live.until('tripped', 1.0)
    assert live.zero()


def test_poses_that_come_late_in_a_burst_are_no_clock_jump(live):
    """A stalled network: nothing for 0.3 s, then everything of it at once, in order."""
    kept = []
    for _ in range(60):
        live.t += TICK_S
        kept += [m for m in live.messages() if isinstance(m, PoseSample)]
        live.t -= TICK_S
        live.silent.add('pose')
        live.tick()
    live.silent.clear()
    live.extra = kept
    live.tick()
    live.extra = []
    live.run(0.3)
    assert live.state == 'live', live.events


def test_small_clock_slew_is_no_jump(live):
    for _ in range(200):
        live.clock_offset_s += 0.0005  # a tenth of the tick: far more than a disciplined clock
        live.tick()
    assert live.state == 'live'


def test_operator_heartbeat_where_configured(bay_head):
    cell = Cell(bay_head, heartbeat_silence_s=0.5)
    cell.run(0.5)
    assert cell.state == 'locked'
    assert cell.last.failed_checks == ('operator_silent',)
    cell.extra = [Heartbeat()]
    cell.go_live()
    cell.extra = []
    assert cell.until('holding', 1.0) == pytest.approx(0.5, abs=2 * TICK_S)
    assert cell.events[0].stop_category == 2
    assert not cell.zero()


def test_pose_gap_of_half_a_second_is_no_trip(live):
    live.silent.add('pose')
    live.run(0.5)
    live.silent.clear()
    live.run(0.5)
    assert live.state == 'live'


@pytest.mark.parametrize('cause', ['pose_stale', 'pose_rejected', 'estimator_inconsistent'])
def test_without_inertial_sensor_a_lost_pose_is_category_0(bay_head, cause):
    cell = Cell(without(bay_head, imu=None)).go_live()
    if cause == 'pose_stale':
        cell.silent.add('pose')
    elif cause == 'pose_rejected':
        pose_off(cell, 1.1)
    else:
        unsure(cell, 1.1)
    cell.until('tripped', 1.0)
    assert (cell.events[0].cause, cell.events[0].stop_category) == (cause, 0)


def test_inertial_sensor_lost_during_a_stop_without_pose(live):
    live.silent.add('pose')
    live.until('stopping', 1.0)
    live.velocity = np.array([0.2, 0.0, 0.0])
    live.run(0.5)
    live.silent.add('imu')
    assert live.until('tripped', 1.0) <= 0.1 + 2 * TICK_S
    assert [(e.cause, e.stop_category) for e in live.events] == [
        ('pose_stale', 1), ('pose_stale', 0)]


def test_inertial_sensor_is_not_required(live):
    live.silent.add('imu')
    live.run(1.0)
    assert live.state == 'live'


@pytest.mark.parametrize(('breaks', 'cause'), [(tilt, 'tilt'), (rates, 'rates'), (speed, 'speed'),
                                               (unsure, 'estimator_inconsistent'),
                                               (pose_off, 'pose_rejected')])
def test_much_worse_is_cut(live, breaks, cause):
    breaks(live, 1.05)
    live.until('stopping', 1.0)
    breaks(live, {'tilt': 1.9, 'rates': 2.05, 'speed': 1.75, 'estimator_inconsistent': 5.1,
                  'pose_rejected': 6.2}[cause])
    assert live.until('tripped', 1.0) <= 2 * TICK_S
    assert (cause, 0) in {(e.cause, e.stop_category) for e in live.events}


def test_tilt_is_an_angle_beyond_a_right_angle_too(live):
    """The geometric error's length falls again past 90 degrees; the angle does not (checks C5)."""
    live.quaternion = turned(np.deg2rad(179.0), 0)
    live.until('tripped', 1.0)
    measured = dict(next(e for e in live.events if e.cause == 'tilt').values)
    assert measured['measured_rad'] == pytest.approx(np.deg2rad(179.0), abs=1e-9)


def test_yaw_is_no_tilt(live):
    live.quaternion = turned(3.0, 2)
    live.run(0.5)
    assert live.state == 'live'


def test_invalid_estimate_is_cut(live):
    live.valid = False
    live.tick()
    assert live.state == 'tripped'
    assert (live.events[0].cause, live.events[0].stop_category) == ('estimator_inconsistent', 0)


def test_single_outliers_are_no_trip(live):
    """One pose in a hundred off by 0.2 m and 30 degrees, as architecture's faults have it."""
    rng = np.random.default_rng(5)

    def outlier(sample):
        if rng.random() > 0.01:
            return sample
        return PoseSample(sample.stamp_s, sample.position_map_m + np.array([0.2, 0.0, 0.0]),
                          turned(np.deg2rad(30.0), 0))

    live.change['pose'] = outlier
    live.run(20.0)
    assert live.state == 'live', live.events


def test_late_poses_are_no_trip_and_very_late_ones_are_stale(live):
    live.latency_s = 0.048
    live.run(1.0)
    assert live.state == 'live'
    live.change['pose'] = lambda m: replace(m, stamp_s=m.stamp_s - 0.12)
    assert live.until('stopping', 1.0) <= 0.6 - 0.048 + 2 * TICK_S
    assert live.events[0].cause == 'pose_stale'


def test_rotor_telemetry_is_not_missed_where_the_rig_has_none(bay_head):
    cell = Cell(without(bay_head, rotor_states=None)).go_live()
    cell.run(1.0)
    assert cell.state == 'live'
    assert np.isnan(cell.last.margin[rows.ROTOR_NOT_FOLLOWING])


def test_emergency_stop_line_may_be_absent_where_not_required(bay_head):
    cell = Cell(bay_head, emergency_stop_required=False)
    cell.silent.add('emergency_stop')
    cell.go_live()
    cell.extra = [EmergencyStop(True)]
    cell.tick()
    assert cell.state == 'tripped'


def test_margins_run_from_untouched_to_broken(live):
    seen = []
    for share in (0.0, 0.25, 0.5, 0.75, 0.99, 1.2):
        speed(live, share)
        seen.append(live.tick().margin[rows.SPEED])
    np.testing.assert_allclose(seen, [1.0, 0.75, 0.5, 0.25, 0.01, -0.2], atol=1e-9)


def test_category_0_reports_the_swing(live):
    live.position[0] += 0.5
    live.extra = [EmergencyStop(True)]
    live.tick()
    values = dict(live.events[0].values)
    # Let go at rest half a metre out: it swings back by as much, and air has no say in this.
    assert values['swing_radius_m'] == pytest.approx(0.5, abs=0.02)
    assert values['swing_x_min_m'] == pytest.approx(-0.5, abs=0.02)
    assert values['swing_leaves_keep_in'] == 0.0
    assert live.changes[-1].values == live.events[0].values
