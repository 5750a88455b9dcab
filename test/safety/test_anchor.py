"""The anchor: stopped without a step, held without creeping, watched against its model."""

from dataclasses import replace

from cell import Cell, TICK_S
import numpy as np
import pytest

from suspended_ctrl.physics.carrier import carrier_step
from suspended_ctrl.physics.values import CarrierSample
from suspended_ctrl.safety.anchor import AnchorWatch
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.values import EmergencyStop


class Gantry:
    """The carrier behind the commands, measured at 50 Hz with noise."""

    def __init__(self, cell: Cell, noise_m: float = 0.0) -> None:
        count = len(cell.rig.carrier.axes)
        self.cell, self.noise_m = cell, noise_m
        self.position, self.velocity = np.zeros(count), np.zeros(count)
        self.rng = np.random.default_rng(3)
        self.log: list[tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]] = []
        cell.change['carrier_states'] = self.measure
        cell.change['carrier_demand'] = lambda m: replace(m, velocity_m_s=self.demand_rate)
        self.demand_rate = np.zeros(count)

    def measure(self, sample: CarrierSample) -> CarrierSample:
        noise = self.noise_m * self.rng.standard_normal(len(self.position))
        return CarrierSample(sample.stamp_s, self.position + noise, self.velocity.copy())

    def tick(self, *requests: str) -> None:
        self.cell.axes_demand = self.cell.axes_demand + self.demand_rate * TICK_S
        before = self.cell.last
        if before is not None and before.carrier_command is not None:
            self.position, self.velocity = carrier_step(
                self.cell.rig.carrier, self.position, self.velocity,
                before.carrier_command.position_m, TICK_S)
        out = self.cell.tick(*requests)
        if out.carrier_command is not None:
            self.log.append((self.position, self.velocity, out.carrier_command.position_m,
                             out.carrier_command.velocity_m_s))

    def run(self, seconds: float) -> None:
        for _ in range(round(seconds / TICK_S)):
            self.tick()


@pytest.fixture
def moving(bay_head) -> Gantry:
    """Live, the anchor under way in x at its full speed and in y at half of it."""
    cell = Cell(bay_head)
    gantry = Gantry(cell)
    gantry.run(0.3)
    gantry.tick('enable')
    gantry.run(0.2)
    gantry.demand_rate = np.array([0.30, 0.15, 0.0])
    gantry.run(2.0)
    assert cell.state == 'live', cell.events
    assert gantry.velocity[0] == pytest.approx(0.30, abs=0.01)
    gantry.log.clear()
    return gantry


@pytest.mark.parametrize('how', ['category 0', 'category 1', 'demand gone'])
def test_stops_under_its_own_deceleration_and_never_with_a_step(moving, how):
    cell = moving.cell
    if how == 'category 0':
        cell.extra = [EmergencyStop(True)]
    elif how == 'category 1':
        cell.silent.add('rotor_states')
    else:
        cell.silent.add('carrier_demand')
    last = cell.last.carrier_command.position_m
    moving.run(4.0)
    assert cell.state == 'tripped'  # at rest by now, where it was stopped under power
    position, velocity, command, rate = (np.array(x) for x in zip(*moving.log, strict=True))
    steps = np.diff(np.vstack((last, command)), axis=0)
    # No setpoint step larger than the axis' own speed, and no harder a change of that speed than
    # the axis brakes; where demands just end, the setpoint has stood from then on.
    assert np.abs(steps).max() <= 0.30 * TICK_S + 1e-6
    if how != 'demand gone':
        assert np.abs(np.diff(steps, axis=0)).max() <= 0.35 * TICK_S ** 2 + 1e-9
        assert np.abs(np.diff(rate, axis=0)).max() <= 0.35 * TICK_S + 1e-9
    assert np.abs(np.diff(velocity, axis=0)).max() <= 0.35 * TICK_S + 1e-9
    assert np.abs(velocity[-1]).max() < 1e-3
    assert np.abs(position[-1] - command[-1]).max() < 2e-3
    if how == 'demand gone':
        return
    # From the last demand that passed: v^2 / 2a of the setpoint, and what the axis was behind:
    # its lag, or where that is more the way that it needs to stop.
    moved = np.flatnonzero(np.abs(np.diff(rate[:, 0])) > 1e-6)
    way = position[-1] - position[moved[0]]
    for axis, speed in ((0, 0.30), (1, 0.15)):
        brake = speed ** 2 / 0.7
        assert way[axis] == pytest.approx(brake + max(0.25 * speed, brake), rel=0.1)


def test_at_the_end_of_travel_the_ramp_stays_inside(bay_head):
    watch = AnchorWatch(bay_head, SafetySettings.for_rig(bay_head))
    watch.measured(np.array([3.49, 0.0, 0.0]), np.zeros(3))
    watch.follow(np.array([3.499, 0.0, 0.0]), np.array([0.3, 0.0, 0.0]))
    for _ in range(40):
        watch.advance(TICK_S)
    for _ in range(400):
        watch.stop(TICK_S, False)
        watch.advance(TICK_S)
        assert watch.setpoint_m[0] <= 3.5


def test_waiting_holds_the_last_measured_anchor_and_does_not_creep(bay_head):
    """Fed back at once, 0.5 mm of noise moves a drive by millimetres a minute."""
    cell = Cell(bay_head)
    gantry = Gantry(cell, noise_m=0.0005)
    gantry.position = np.array([1.0, -0.5, 0.2])
    cell.position = cell.position + gantry.position
    gantry.run(30.0)
    assert cell.state == 'ready'
    assert np.abs(gantry.position - [1.0, -0.5, 0.2]).max() < 0.002
    np.testing.assert_array_equal(cell.last.carrier_command.velocity_m_s, 0.0)


def test_waiting_follows_an_anchor_that_is_moved_by_others(cell):
    cell.run(0.3)
    cell.axes = np.array([0.5, 0.0, 0.0])
    cell.run(0.1)
    np.testing.assert_array_equal(cell.last.carrier_command.position_m, cell.axes)
    assert cell.supervisor.state == 'ready'


def test_no_command_until_measured_and_none_without_axes(bay_head, seam_head):
    cell = Cell(bay_head)
    cell.silent.add('carrier_states')
    assert cell.run(0.2).carrier_command is None
    assert Cell(seam_head).run(0.2).carrier_command is None


def test_a_stalled_axis_shows_when_it_should_move(moving):
    cell = moving.cell
    stuck = moving.position.copy()
    moving.demand_rate = np.array([0.30, 0.15, 0.0])
    cell.change['carrier_states'] = lambda m: CarrierSample(m.stamp_s, stuck, np.zeros(3))
    # 40 mm at 0.3 m/s, the hold-off, and two periods of the carrier's telemetry.
    elapsed = 0.0
    while cell.state == 'live' and elapsed < 1.0:
        moving.tick()
        elapsed += TICK_S
    assert cell.events[0].cause == 'anchor_following'
    assert elapsed <= 0.04 / 0.30 + 0.1 + 2 * 0.02 + 2 * TICK_S


def test_bad_carrier_samples_are_refused(cell):
    cell.run(0.3)
    before = cell.supervisor.refused.get('CarrierSample', 0)
    for position, velocity in (([np.nan, 0, 0], [0, 0, 0]), ([0, 0, 0], [0, np.inf, 0]),
                               ([0, 0], [0, 0]), ([], [])):
        cell.extra = [CarrierSample(cell.now_s, np.array(position, float),
                                    np.array(velocity, float))]
        cell.tick()
    assert cell.supervisor.refused['CarrierSample'] == before + 4
