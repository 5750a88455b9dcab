"""What arrives, and whether it may be believed."""

from collections import Counter
from collections.abc import Callable
from typing import Any

import numpy as np

from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierSample,
    Estimate,
    ImuSample,
    PayloadEvent,
    PoseSample,
    RotorCommand,
    RotorSample,
    TetherLoadSample,
)
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety import motion
from suspended_ctrl.safety.anchor import AnchorWatch
from suspended_ctrl.safety.balance import ForceBalance
from suspended_ctrl.safety.gate import Gate
from suspended_ctrl.safety.rotors import RotorWatch
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.values import EmergencyStop, Heartbeat, Refused, SafetyInputs

_NEVER = -np.inf


class Arrivals:
    """
    The newest of everything that arrived, and when.

    Sensors are timed by their arrival on the monotonic clock, the pose also by its stamp against
    the ROS clock; odometry and demands with a stamp outside the window around now do not count as
    arrived. Whatever has a wrong shape or a number that is not finite is refused and counted.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings

    Attributes
    ----------
    refused : Counter
        Refused messages by kind.
    rotors : RotorWatch
    anchor : AnchorWatch
    balance : ForceBalance
    pose : ndarray, shape (7,), or None
        Of ``base_link``: position, quaternion. New when ``pose_new``, of ``pose_stamp_s``.
    odometry : Estimate or None
        New when ``odometry_new``; ``sigma3_m`` is 3 sigma of its position, on the worst axis.
    demand_rad_s, carrier_demand :
        Newest that passed the gate's bounds; None before the first.
    demand_refused : bool
        Whether the newest rotor demand did not.
    imu_at, rotors_at, carrier_at, load_at, stop_at, heartbeat_at, odometry_at, demand_at,\
    carrier_demand_at : float
        Monotonic times of the newest arrivals; minus infinity before the first.

    """

    def __init__(self, rig: Rig, settings: SafetySettings) -> None:
        self._s = settings
        pose = rig.sensors.pose
        self._pose_sensor = frozen([*pose.position_m, *pose.quaternion_wxyz], 7)
        self.rotors = RotorWatch(rig, settings)
        self.anchor = AnchorWatch(rig, settings)
        self.balance = ForceBalance(rig)
        self._gate = Gate(rig, settings)
        self._rotor_shape = (rig.rotors.count,)
        self._axes_shape = (len(rig.carrier.axes),)
        self.refused: Counter[str] = Counter()
        self.now_s = 0.0
        self.pose: Array | None = None
        self.pose_stamp_s = _NEVER
        self.odometry: Estimate | None = None
        self.odometry_new = self.pose_new = False
        self.sigma3_m = np.inf
        self.demand_rad_s: Array | None = None
        self.demand_stamp_s = 0.0
        self.demand_refused = False
        self.carrier_demand: tuple[Array, Array] | None = None
        self.odometry_at = self.imu_at = self.rotors_at = self.carrier_at = _NEVER
        self.load_at = self.stop_at = self.heartbeat_at = self.demand_at = _NEVER
        self.carrier_demand_at = _NEVER
        self.pressed = False
        self.load_n = 0.0
        self.chain_gone = self.mission_gone = False
        self._handlers: dict[type, Callable[[float, Any], bool]] = {
            PoseSample: self._take_pose, ImuSample: self._take_imu,
            RotorSample: self._take_rotors, CarrierSample: self._take_carrier,
            TetherLoadSample: self._take_load, Estimate: self._take_odometry,
            RotorCommand: self._take_rotor_demand, CarrierCommand: self._take_carrier_demand,
            EmergencyStop: self._take_emergency_stop, Heartbeat: self._take_heartbeat,
            PayloadEvent: self._take_payload, Refused: self._take_refused,
        }

    def speeds(self) -> tuple[float, float]:
        """Speed in m/s and angular rate in rad/s of the newest odometry; infinite before it."""
        if self.odometry is None:
            return np.inf, np.inf
        x, y, z = self.odometry.velocity_map_m_s.tolist()
        p, q, r = self.odometry.rate_body_rad_s.tolist()
        return (x * x + y * y + z * z) ** 0.5, (p * p + q * q + r * r) ** 0.5

    def take(self, t: float, inputs: SafetyInputs, jump_s: float) -> None:
        """
        Take in what arrived.

        Parameters
        ----------
        t : float
            Monotonic time of this step; arrivals later than that count as now.
        inputs : SafetyInputs
        jump_s : float
            Step of the ROS clock against the monotonic clock since the last step.

        """
        self.now_s = inputs.now_s
        if abs(jump_s) > self._s.clock_jump_s:
            self.pose_stamp_s += jump_s  # its age is what it was
        handlers = self._handlers
        for at, message in inputs.arrivals:
            handler = handlers.get(type(message))
            try:
                taken = handler is not None and handler(at if at < t else t, message)
            except (TypeError, ValueError, AttributeError, IndexError, OverflowError):
                taken = False
            if not taken:
                kind = message.topic if type(message) is Refused else type(message).__name__
                self.refused[kind] += 1
        if inputs.peers is not None:
            self.chain_gone = not all(inputs.peers.get(name, True) for name in self._s.chain)
            self.mission_gone = not inputs.peers.get(self._s.mission_peer, True)

    def _timely(self, stamp_s: float, age_max_s: float) -> bool:
        return -age_max_s <= stamp_s - self.now_s <= self._s.stamp_ahead_max_s

    def _take_pose(self, at: float, sample: PoseSample) -> bool:
        position, quaternion = sample.position_map_m, sample.quaternion_wxyz
        if position.shape != (3,) or quaternion.shape != (4,):
            return False
        if not self._timely(sample.stamp_s, self._s.pose_age_max_s):
            return False
        pose = motion.base_pose(position, quaternion, self._pose_sensor)
        if pose[0] != pose[0]:
            return False
        # A stamp ahead of now by more than may be is left from before a clock jump.
        known = self.pose_stamp_s
        if sample.stamp_s > known or known > self.now_s + self._s.stamp_ahead_max_s:
            self.pose, self.pose_stamp_s, self.pose_new = pose, float(sample.stamp_s), True
        return True

    def _take_imu(self, at: float, sample: ImuSample) -> bool:
        rate, force = sample.rate_rad_s, sample.force_m_s2
        if rate.shape != (3,) or force.shape != (3,):
            return False
        if not self.balance.take(sample.stamp_s, rate, force):
            return False
        self.imu_at = at
        return True

    def _take_rotors(self, at: float, sample: RotorSample) -> bool:
        speed = sample.speed_rad_s
        if speed.shape != self._rotor_shape or not self.rotors.measured(speed):
            return False
        self.rotors_at = at
        return True

    def _take_carrier(self, at: float, sample: CarrierSample) -> bool:
        position, velocity = sample.position_m, sample.velocity_m_s
        shape = self._axes_shape
        if position.shape != shape or velocity.shape != shape or shape == (0,):
            return False
        if not self.anchor.measured(position, velocity):
            return False
        self.carrier_at = at
        return True

    def _take_load(self, at: float, sample: TetherLoadSample) -> bool:
        tension = float(sample.tension_n)
        if not abs(tension) < np.inf:
            return False
        self.load_n = tension
        self.load_at = at
        return True

    def _take_odometry(self, at: float, estimate: Estimate) -> bool:
        position, velocity = estimate.position_map_m, estimate.velocity_map_m_s
        quaternion, rate = estimate.quaternion_wxyz, estimate.rate_body_rad_s
        if (position.shape != (3,) or velocity.shape != (3,) or quaternion.shape != (4,)
                or rate.shape != (3,)):
            return False
        if not self._timely(estimate.stamp_s, self._s.stamp_age_max_s):
            return False
        if not motion.sound_motion(position, velocity, quaternion, rate):
            return False
        covariance = estimate.covariance
        a, b, c = float(covariance[0, 0]), float(covariance[1, 1]), float(covariance[2, 2])
        if not (0.0 <= a < np.inf and 0.0 <= b < np.inf and 0.0 <= c < np.inf):
            return False
        self.sigma3_m = 3.0 * max(a, b, c) ** 0.5 if estimate.valid else np.inf
        self.odometry, self.odometry_at, self.odometry_new = estimate, at, True
        return True

    def _take_rotor_demand(self, at: float, demand: RotorCommand) -> bool:
        self.demand_refused = True
        if not self._timely(demand.stamp_s, self._s.stamp_age_max_s):
            return False
        speed = self._gate.rotors(demand.speed_rad_s)
        if speed is None:
            return False
        self.demand_rad_s, self.demand_stamp_s = speed, float(demand.stamp_s)
        self.demand_at, self.demand_refused = at, False
        return True

    def _take_carrier_demand(self, at: float, demand: CarrierCommand) -> bool:
        if self._axes_shape == (0,):
            return False
        if not self._timely(demand.stamp_s, self._s.carrier_stamp_age_max_s):
            return False
        passed = self._gate.carrier(demand.position_m, demand.velocity_m_s)
        if passed is None:
            return False
        self.carrier_demand, self.carrier_demand_at = passed, at
        return True

    def _take_emergency_stop(self, at: float, message: EmergencyStop) -> bool:
        self.pressed = message.pressed is not False  # whatever is not a plain false is a stop
        self.stop_at = at
        return True

    def _take_heartbeat(self, at: float, message: Heartbeat) -> bool:
        self.heartbeat_at = at
        return True

    def _take_payload(self, at: float, message: PayloadEvent) -> bool:
        return True  # no limit depends on it

    def _take_refused(self, at: float, message: Refused) -> bool:
        if message.topic == 'rotor_demand':
            self.demand_refused = True
        return False
