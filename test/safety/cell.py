"""A cell on paper: every input that a quiet rig sends, each of which a test can change."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.equilibrium import equilibrium
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierSample,
    Estimate,
    ImuSample,
    Payload,
    PoseSample,
    RotorCommand,
    RotorSample,
)
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.supervisor import SafetySupervisor
from suspended_ctrl.safety.values import (
    EmergencyStop,
    Message,
    SafetyEvent,
    SafetyInputs,
    SafetyOutputs,
    StateChange,
)

TICK_S = 0.005
EPOCH_S = 1.7e9  # a ROS clock of today; its float64 grain is 0.24 microseconds
IDENTITY = np.array([1.0, 0.0, 0.0, 0.0])
IDLE_RAD_S = 300.0


class Cell:
    """
    The quiet rig and a supervisor in front of it.

    Attributes named after inputs are what the next tick sends; None sends nothing.
    """

    def __init__(self, rig: Rig, **settings: object) -> None:
        self.rig = rig
        self.supervisor = SafetySupervisor(rig, SafetySettings.for_rig(rig, **settings))
        self.t = 100.0
        self.clock_offset_s = EPOCH_S
        self.latency_s = 0.008
        rest = equilibrium(rig)
        self.position = rest.position_map_m.copy()
        self.velocity = np.zeros(3)
        self.quaternion = IDENTITY.copy()
        self.rate = np.zeros(3)
        self.sigma_m = 0.0002
        self.valid = True
        self.force = np.array([0.0, 0.0, GRAVITY_M_S2])
        self.axes = np.zeros(len(rig.carrier.axes))
        self.demand = np.full(rig.rotors.count, IDLE_RAD_S)
        self.axes_demand = np.zeros(len(rig.carrier.axes))
        # The rotors' speeds follow the commands by their lag.
        self.speed = np.zeros(rig.rotors.count)
        self.speed_factor = np.ones(rig.rotors.count)
        self.silent: set[str] = set()
        self.extra: list[Message] = []
        self.peers: dict[str, bool] | None = None
        self.change: dict[str, Callable[[Message], Message]] = {}
        self.last: SafetyOutputs | None = None
        self.events: list[SafetyEvent] = []
        self.changes: list[StateChange] = []

    @property
    def now_s(self) -> float:
        return self.t + self.clock_offset_s

    @property
    def state(self) -> str:
        return self.supervisor.state

    def messages(self) -> list[Message]:
        """Everything a quiet tick brings, in the order of arrival."""
        stamp = self.now_s - self.latency_s
        k = round(self.t / TICK_S)
        out: dict[str, Message] = {
            'imu': ImuSample(self.now_s - 0.004, self.rate.copy(), self.force.copy()),
            'imu_2': ImuSample(self.now_s - 0.0015, self.rate.copy(), self.force.copy()),
            'pose': PoseSample(stamp, self.position - self.velocity * self.latency_s,
                               self.quaternion.copy()),
            'rotor_states': RotorSample(self.now_s, self.speed * self.speed_factor),
            'odometry': Estimate(
                stamp, self.position - self.velocity * self.latency_s, self.velocity.copy(),
                self.quaternion.copy(), self.rate.copy(), np.eye(12) * self.sigma_m ** 2,
                np.zeros(3), np.zeros(3), Payload(), stamp, self.valid),
            'rotor_demand': RotorCommand(stamp, self.demand.copy()),
        }
        if self.rig.sensors.imu is None:
            del out['imu'], out['imu_2']
        if self.rig.sensors.rotor_states is None:
            del out['rotor_states']
        if self.rig.carrier.axes:
            if k % 4 == 0:
                out['carrier_states'] = CarrierSample(
                    self.now_s, self.axes.copy(), np.zeros(len(self.axes)))
            out['carrier_demand'] = CarrierCommand(
                stamp, self.axes_demand.copy(), np.zeros(len(self.axes)))
        if k % 10 == 0:
            out['emergency_stop'] = EmergencyStop(False)
        if 'imu' in self.silent:
            out.pop('imu_2', None)
        return [self.change.get(name, lambda m: m)(message) for name, message in out.items()
                if name not in self.silent] + self.extra

    def tick(self, *requests: str, dt: float = TICK_S) -> SafetyOutputs:
        """One step of time and of the supervisor."""
        self.t += dt
        if self.last is not None:
            command = self.last.rotor_command.speed_rad_s
            lag = self.rig.rotors.time_constant_s
            self.speed = command + (self.speed - command) * np.exp(-dt / lag)
        arrivals = tuple((self.t - 0.001, message) for message in self.messages())
        self.last = self.supervisor.step(
            self.t, SafetyInputs(self.now_s, arrivals, requests, self.peers))
        self.events.extend(self.last.events)
        self.changes.extend(self.last.changes)
        return self.last

    def run(self, seconds: float) -> SafetyOutputs:
        """Quiet ticks for a while."""
        out = self.tick()
        for _ in range(round(seconds / TICK_S) - 1):
            out = self.tick()
        return out

    def until(self, state: str, within_s: float) -> float:
        """Tick until a state is reached; the time it took, infinite if it was not."""
        start = self.t
        while self.t - start < within_s:
            self.tick()
            if self.state == state:
                return self.t - start
        return float('inf')

    def go_live(self) -> 'Cell':
        """Ready, enabled, rotors spun up."""
        self.run(0.3)
        assert self.state == 'ready', self.last and self.last.failed_checks
        out = self.tick('enable')
        assert out.replies[0].success
        self.run(0.5)
        assert self.state == 'live', self.events
        return self

    def zero(self) -> bool:
        """Whether the newest command stops every rotor."""
        return self.last is not None and not self.last.rotor_command.speed_rad_s.any()


def without(rig: Rig, **sensors: None) -> Rig:
    """Rig without some of its sensors."""
    return replace(rig, sensors=replace(rig.sensors, **sensors))
