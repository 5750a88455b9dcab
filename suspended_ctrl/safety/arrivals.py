"""What arrives, and whether it may be believed."""

from collections import Counter
from collections.abc import Callable
import math
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
from suspended_ctrl.safety import rows
from suspended_ctrl.safety.anchor import AnchorWatch
from suspended_ctrl.safety.balance import ForceBalance
from suspended_ctrl.safety.gate import Gate
from suspended_ctrl.safety.motion import take_motion, take_pose
from suspended_ctrl.safety.rotors import RotorWatch
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.values import EmergencyStop, Heartbeat, Refused, SafetyInputs

_NEVER = -math.inf
_VECTOR, _QUATERNION = (3,), (4,)
_ODD_POSES = 4


class Arrivals:
    """
    The newest of everything that arrived, and when.

    Sensors are timed by their arrival on the monotonic clock, the pose by its stamp against the
    ROS clock; odometry and demands with a stamp outside the window around now do not count as
    arrived. Whatever has a wrong shape or a number that is not finite is refused and counted.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings

    Attributes
    ----------
    refused : Counter
        Refused messages by kind.
    at : ndarray, shape (rows.SENDERS,)
        Monotonic times of the newest arrivals; minus infinity before the first.
    rotors : RotorWatch
    anchor : AnchorWatch
    balance : ForceBalance
    pose : ndarray, shape (7,)
        Of ``base_link``: position, quaternion; of ``pose_stamp_s``, judged while ``pose_new``.
    motion : ndarray, shape (13,)
        Odometry: position, velocity, quaternion, rate; of ``motion_stamp_s``, judged while
        ``motion_new``, there at all if ``motion_known``.
    sigma3_m : float
        3 sigma of the odometry's position on the worst axis; infinite if it is not to be used.
    demand_rad_s, carrier_demand :
        Newest demands that passed the gate's bounds; None before the first.
    demand_refused : bool
        Whether the newest rotor demand did not.
    pose_jump_s : float
        How far the stamps of poses have jumped off this host's clock; 0 while they are sound.
    pressed, chain_gone, mission_gone : bool
        Emergency stop pressed; peers gone.

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
        self.at = np.full(rows.SENDERS, _NEVER)
        self.now_s = 0.0
        self.pose = np.zeros(7)
        self.pose_stamp_s = _NEVER
        self.pose_jump_s = 0.0
        self._odd = 0
        self.motion = np.zeros(13)
        self.motion_stamp_s = 0.0
        self.motion_known = self.motion_new = self.pose_new = False
        self.sigma3_m = math.inf
        self.demand_rad_s: Array | None = None
        self.demand_stamp_s = 0.0
        self.demand_refused = False
        self.carrier_demand: tuple[Array, Array] | None = None
        self.pressed = self._pressed_now = self.chain_gone = self.mission_gone = False
        self.load_n = 0.0
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
        if not self.motion_known:
            return math.inf, math.inf
        values = self.motion.tolist()
        return math.hypot(*values[3:6]), math.hypot(*values[10:13])

    def take(self, t: float, inputs: SafetyInputs, jump_s: float) -> None:
        """
        Take in what arrived.

        Parameters
        ----------
        t : float
            Monotonic time of this step; arrivals later than that count as now.
        inputs : SafetyInputs
            What is new since the last step.
        jump_s : float
            Step of the ROS clock against the monotonic clock since the last step.

        """
        self.now_s = inputs.now_s
        self._pressed_now = False
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
        stamp = sample.stamp_s
        if position.shape != _VECTOR or quaternion.shape != _QUATERNION:
            return False
        known = self.pose_stamp_s
        if not self._timely(stamp, self._s.pose_age_max_s):
            # Late is one thing; back in time by more than delivery mixes up, or from the future,
            # is another clock. A few in a row, so that one stray message is no jump.
            ahead = stamp - self.now_s > self._s.stamp_ahead_max_s
            self._odd += 1 if ahead or known - stamp > self._s.clock_jump_s else 0
            self.pose_jump_s = stamp - known if self._odd >= _ODD_POSES else 0.0
            return False
        self._odd, self.pose_jump_s = 0, 0.0
        # A known stamp ahead of now by more than may be is left from before a clock jump.
        if stamp <= known <= self.now_s + self._s.stamp_ahead_max_s:
            return True  # late or twice: not wrong, but not new
        if not take_pose(position, quaternion, self._pose_sensor, self.pose):
            return False
        self.pose_stamp_s, self.pose_new = stamp, True
        return True

    def _take_imu(self, at: float, sample: ImuSample) -> bool:
        rate, force = sample.rate_rad_s, sample.force_m_s2
        if rate.shape != _VECTOR or force.shape != _VECTOR:
            return False
        if not self.balance.take(sample.stamp_s, rate, force):
            return False
        self.at[rows.IMU] = at
        return True

    def _take_rotors(self, at: float, sample: RotorSample) -> bool:
        speed = sample.speed_rad_s
        if speed.shape != self._rotor_shape or not self.rotors.measured(speed):
            return False
        self.at[rows.ROTORS] = at
        return True

    def _take_carrier(self, at: float, sample: CarrierSample) -> bool:
        position, velocity = sample.position_m, sample.velocity_m_s
        shape = self._axes_shape
        if position.shape != shape or velocity.shape != shape or shape == (0,):
            return False
        if not self.anchor.measured(position, velocity):
            return False
        self.at[rows.CARRIER] = at
        return True

    def _take_load(self, at: float, sample: TetherLoadSample) -> bool:
        tension = float(sample.tension_n)
        if not math.isfinite(tension):
            return False
        self.load_n = tension
        self.at[rows.LOAD] = at
        return True

    def _take_odometry(self, at: float, estimate: Estimate) -> bool:
        position, velocity = estimate.position_map_m, estimate.velocity_map_m_s
        quaternion, rate = estimate.quaternion_wxyz, estimate.rate_body_rad_s
        if (position.shape != _VECTOR or velocity.shape != _VECTOR or rate.shape != _VECTOR
                or quaternion.shape != _QUATERNION):
            return False
        if not self._timely(estimate.stamp_s, self._s.stamp_age_max_s):
            return False
        variance = estimate.covariance
        x, y, z = variance.item(0, 0), variance.item(1, 1), variance.item(2, 2)
        if not (0.0 <= x < math.inf and 0.0 <= y < math.inf and 0.0 <= z < math.inf):
            return False
        if not take_motion(position, velocity, quaternion, rate, self.motion):
            return False
        self.sigma3_m = 3.0 * math.sqrt(max(x, y, z)) if estimate.valid else math.inf
        self.motion_stamp_s = estimate.stamp_s
        self.motion_known = self.motion_new = True
        self.at[rows.ODOMETRY] = at
        return True

    def _take_rotor_demand(self, at: float, demand: RotorCommand) -> bool:
        if not self._timely(demand.stamp_s, self._s.stamp_age_max_s):
            return False  # as if it had not come
        self.demand_refused = True
        speed = self._gate.rotors(demand.speed_rad_s)
        if speed is None:
            return False
        self.demand_rad_s, self.demand_stamp_s = speed, float(demand.stamp_s)
        self.demand_refused = False
        self.at[rows.ROTOR_DEMAND] = at
        return True

    def _take_carrier_demand(self, at: float, demand: CarrierCommand) -> bool:
        if self._axes_shape == (0,):
            return False
        if not self._timely(demand.stamp_s, self._s.carrier_stamp_age_max_s):
            return False
        passed = self._gate.carrier(demand.position_m, demand.velocity_m_s)
        if passed is None:
            return False
        self.carrier_demand = passed
        self.at[rows.CARRIER_DEMAND] = at
        return True

    def _take_emergency_stop(self, at: float, message: EmergencyStop) -> bool:
        # Whatever is not a plain false is a stop; one that is let go before the step still is.
        self._pressed_now = self._pressed_now or message.pressed is not False
        self.pressed = self._pressed_now
        self.at[rows.STOP_LINE] = at
        return True

    def _take_heartbeat(self, at: float, message: Heartbeat) -> bool:
        self.at[rows.HEARTBEAT] = at
        return True

    def _take_payload(self, at: float, message: PayloadEvent) -> bool:
        return True  # no limit depends on it

    def _take_refused(self, at: float, message: Refused) -> bool:
        if message.topic == 'rotor_demand':
            self.demand_refused = True
        return False
