"""Node ``rig_bench``: the simulated rig on the driver topics, in real time."""

from dataclasses import replace
import sys
import time
from typing import Literal

from pydantic import Field

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.faults import load_faults
from suspended_ctrl.bench.mismatch import Mismatch
from suspended_ctrl.bench.values import EmergencyStopSample
from suspended_ctrl.mission.file import load_mission
from suspended_ctrl.mission.timing import timed
from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.parameters import NodeParameters
from suspended_ctrl.nodes.run import run_node
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.values import (
    CarrierSample,
    ImuSample,
    PoseSample,
    RotorSample,
    TetherLoadSample,
)

NAME = 'rig_bench'
_TOPICS: dict[type, str] = {
    PoseSample: 'pose', ImuSample: 'imu', RotorSample: 'rotor_states',
    CarrierSample: 'carrier_states', TetherLoadSample: 'tether_load',
    EmergencyStopSample: 'emergency_stop'}
_TRUTH_EVERY_S = 0.005
_PARTS_OF_TRUTH_EVERY_S = 0.02
# Measurements go out in bursts, so that each wakes its receivers once; this often at least, and
# timed so that a pose arrives this much before the burst that takes it along.
_BURSTS_HZ = 200.0
_BEFORE_BURST_S = 0.0005
# What is caught up with in one turn, and how far behind time is given up.
_CATCH_UP_S = 0.02
_GIVE_UP_S = 0.25


class RigBenchParameters(NodeParameters):
    """Parameters of ``rig_bench``."""

    seed: int = Field(0, ge=0, le=2**31 - 1, description='Everything that is random comes from '
                      'it.')
    mismatch: Literal['default', 'none'] = Field('default', description='Whether the true rig '
                                                 'differs from its file: default or none.')
    faults: str = Field('', description='Fault file: a name that comes with the package, or a '
                        'path; empty for none.')
    mission: str = Field('', description="Mission whose path the faults' times count from; empty "
                         'counts from the start of the reference.')
    wind_m_s: float = Field(0.0, ge=0.0, le=30.0, description='Wind at 20 feet, all the time.')


class RigBenchNode(ManagedNode):
    """Moves the bench with the wall clock, publishes what it measures, obeys the commands."""

    parameters: RigBenchParameters

    def __init__(self) -> None:
        super().__init__(NAME, RigBenchParameters)

    def build(self) -> None:
        """Make the bench and its channels."""
        p, rig = self.parameters, self.rig
        faults = load_faults(p.faults, rig) if p.faults else ()
        self._path_after_s = 0.0
        if p.mission:
            self._path_after_s = timed(load_mission(p.mission, p.rig)).path_start_s
        mismatch = Mismatch.none(rig) if p.mismatch == 'none' else None
        self.part = Bench(rig, p.seed, mismatch, faults, wind_m_s=p.wind_m_s)
        self._rotors = self.inbox('rotor_command')
        self._carrier = self.inbox('carrier_command') if rig.carrier.axes else None
        self._payload = self.inbox('payload_event')
        self._reference = self.inbox('reference')
        sensors = rig.sensors
        there = {'pose': True, 'imu': sensors.imu, 'rotor_states': sensors.rotor_states,
                 'carrier_states': sensors.carrier_states and rig.carrier.axes,
                 'tether_load': sensors.tether_load, 'emergency_stop': True, 'ground_truth': True,
                 'ground_truth_tether': True, 'ground_truth_rotors': True}
        self._out = {topic: self.outbox(topic) for topic, is_there in there.items() if is_there}
        self._gave_up = 0
        self._truth_due_s = self._parts_due_s = 0.0
        self._period_s = 1.0 / max(sensors.pose.rate_hz, _BURSTS_HZ)
        self.loop.listen([self._rotors], self._period_s, timer=True)

    def start(self) -> None:
        """Let the bench's clock go with the next turn."""
        self._origin_s: float | None = None

    def turn(self, t: float, due: bool) -> None:
        """Bring the bench up to now, hand it what came, publish what it measured."""
        bench = self.part
        if self._origin_s is None:
            if not due:
                return
            self._origin_s = time.monotonic() - bench.t_s - _BEFORE_BURST_S - (
                self.rig.sensors.pose.latency_s % self._period_s)
        commands = self._rotors.empty()
        carrier = self._carrier.newest() if self._carrier else None
        now = self._now(self._origin_s)
        # Host time of the bench's zero: measurements are stamped in the host's clock.
        epoch_s = t - now
        bench.advance(now)
        if commands:
            bench.command_rotors(now, commands[-1].speed_rad_s)
        if carrier is not None:
            bench.command_carrier(now, carrier.position_m, carrier.velocity_m_s)
        self._follow_mission(epoch_s)
        if due:
            self._measure(now, epoch_s)

    def _now(self, origin_s: float) -> float:
        """Bench time: the wall clock's, but never more than a little ahead of where it is."""
        reached_s = self.part.t_s
        behind = time.monotonic() - origin_s - reached_s
        if behind > _GIVE_UP_S:
            self._gave_up += 1
            origin_s += behind - _CATCH_UP_S
            self._origin_s = origin_s
            self.get_logger().warning(
                f'{behind:.2f} s behind the wall clock: this machine is too busy, gave time up',
                throttle_duration_sec=1.0)
        return min(time.monotonic() - origin_s, reached_s + _CATCH_UP_S)

    def _follow_mission(self, epoch_s: float) -> None:
        for reference in self._reference.empty():
            if reference is not None and self.part.path_start_s is None:
                self.part.path_start_s = reference.start_s + self._path_after_s - epoch_s
        for event in self._payload.empty():
            if event.mass_kg > 0.0:
                self.part.attach_payload(event.mass_kg, event.position_m)
            else:
                self.part.release_payload()

    def _measure(self, now: float, epoch_s: float) -> None:
        started = time.perf_counter()
        for sample in self.part.samples(now):
            topic = _TOPICS[type(sample)]
            if isinstance(sample, EmergencyStopSample):
                self._out[topic].send(sample.stop)
            else:
                self._out[topic].send(replace(sample, stamp_s=sample.stamp_s + epoch_s))
        if self.part.t_s >= self._truth_due_s:
            self._tell_truth(epoch_s)
        self.health.stepped(time.perf_counter() - started)

    def _tell_truth(self, epoch_s: float) -> None:
        truth = self.part.truth()
        stamp_s = truth.t_s + epoch_s
        self._truth_due_s = _next(self._truth_due_s, truth.t_s, _TRUTH_EVERY_S)
        self._out['ground_truth'].send(PlatformState(
            stamp_s, truth.position_map_m, truth.velocity_map_m_s, truth.quaternion_wxyz,
            truth.rate_body_rad_s))
        if truth.t_s < self._parts_due_s:
            return
        self._parts_due_s = _next(self._parts_due_s, truth.t_s, _PARTS_OF_TRUTH_EVERY_S)
        self._out['ground_truth_tether'].send(TetherLoadSample(stamp_s, truth.tension_n))
        self._out['ground_truth_rotors'].send(RotorSample(stamp_s, truth.rotor_speed_rad_s))

    def notes(self) -> dict[str, float]:
        """How the bench keeps up, and what it refused."""
        return {'gave_up': float(self._gave_up),
                **{f'refused_by_drive.{topic}': float(count)
                   for topic, count in self.part.refused.items()}}


def _next(due_s: float, now_s: float, every_s: float) -> float:
    """Time of the next sample on the same grid."""
    return due_s + every_s * (int((now_s - due_s + 1e-9) / every_s) + 1)


def main() -> int:
    """Run the node."""
    return run_node(NAME, __doc__ or '', RigBenchParameters, RigBenchNode)


if __name__ == '__main__':
    sys.exit(main())
