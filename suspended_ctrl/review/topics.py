"""
Every topic that a run is recorded on: its message type, its value, and the way between.

Names are relative to the stack's namespace, but for ``/diagnostics``.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierPlan,
    CarrierSample,
    Estimate,
    ImuSample,
    PayloadEvent,
    PoseSample,
    RotorCommand,
    RotorSample,
    TetherLoadSample,
    Wrench,
)
from suspended_ctrl.review import messages
from suspended_ctrl.review.messages import Diagnostics, Disturbance, MessageTypes


@dataclass(frozen=True)
class JointNames:
    """The rig's names, in its order, of what travels as named joints."""

    rotors: tuple[str, ...]
    axes: tuple[str, ...]


@dataclass(frozen=True)
class Topic:
    """
    One topic of the graph.

    Attributes
    ----------
    name, message_type : str
    value_type : type
        Of the values that a recording holds; None too on ``reference``, where it clears.
    joints : str
        ``rotors`` or ``axes`` where the message names joints, else empty.
    build_function, read_function : callable
        Of ``review.messages``.

    """

    name: str
    message_type: str
    value_type: type
    build_function: Callable[..., Any]
    read_function: Callable[..., Any]
    joints: str = ''

    def build(self, types: MessageTypes, value: Any, names: JointNames) -> Any:
        """Message of a value."""
        if self.joints:
            return self.build_function(types, value, self.joint_names(names))
        return self.build_function(types, value)

    def read(self, message: Any, names: JointNames) -> Any:
        """Value of a message; raises ``MessageError`` where it must not be used."""
        if self.joints:
            return self.read_function(message, self.joint_names(names))
        return self.read_function(message)

    def joint_names(self, names: JointNames) -> Sequence[str]:
        """Names of the joints that travel on this topic."""
        return names.rotors if self.joints == 'rotors' else names.axes


_JOINTS = 'sensor_msgs/msg/JointState'
_WRENCH = 'geometry_msgs/msg/WrenchStamped'
_INERTIA = 'geometry_msgs/msg/InertiaStamped'
_ODOMETRY = 'nav_msgs/msg/Odometry'
_TRAJECTORY = 'trajectory_msgs/msg/JointTrajectory'
_M = messages

TOPICS = {topic.name: topic for topic in (
    Topic('pose', 'geometry_msgs/msg/PoseStamped', PoseSample, _M.build_pose, _M.read_pose),
    Topic('imu', 'sensor_msgs/msg/Imu', ImuSample, _M.build_imu, _M.read_imu),
    Topic('rotor_states', _JOINTS, RotorSample, _M.build_rotors, _M.read_rotors, 'rotors'),
    Topic('carrier_states', _JOINTS, CarrierSample, _M.build_carrier, _M.read_carrier, 'axes'),
    Topic('tether_load', _WRENCH, TetherLoadSample, _M.build_tether_load, _M.read_tether_load),
    Topic('emergency_stop', 'std_msgs/msg/Bool', bool, _M.build_flag, _M.read_flag),
    Topic('ground_truth', _ODOMETRY, PlatformState, _M.build_odometry, _M.read_motion),
    Topic('ground_truth_tether', _WRENCH, TetherLoadSample, _M.build_tether_load,
          _M.read_tether_load),
    Topic('ground_truth_rotors', _JOINTS, RotorSample, _M.build_rotors, _M.read_rotors, 'rotors'),
    Topic('odometry', _ODOMETRY, Estimate, _M.build_odometry, _M.read_odometry),
    Topic('disturbance', _WRENCH, Disturbance, _M.build_disturbance, _M.read_disturbance),
    Topic('payload', _INERTIA, PayloadEvent, _M.build_payload, _M.read_payload_event),
    Topic('payload_event', _INERTIA, PayloadEvent, _M.build_payload, _M.read_payload_event),
    Topic('reference', 'trajectory_msgs/msg/MultiDOFJointTrajectory', Reference,
          _M.build_reference, _M.read_reference),
    Topic('wrench_demand', _WRENCH, Wrench, _M.build_wrench, _M.read_wrench),
    Topic('wrench_achieved', _WRENCH, Wrench, _M.build_wrench, _M.read_wrench),
    Topic('rotor_demand', _JOINTS, RotorCommand, _M.build_rotors, _M.read_rotor_command,
          'rotors'),
    Topic('rotor_command', _JOINTS, RotorCommand, _M.build_rotors, _M.read_rotor_command,
          'rotors'),
    Topic('carrier_demand', _TRAJECTORY, CarrierCommand, _M.build_carrier_command,
          _M.read_carrier_command, 'axes'),
    Topic('carrier_command', _TRAJECTORY, CarrierCommand, _M.build_carrier_command,
          _M.read_carrier_command, 'axes'),
    Topic('carrier_plan', _TRAJECTORY, CarrierPlan, _M.build_carrier_plan, _M.read_carrier_plan,
          'axes'),
    Topic('safety/state', 'std_msgs/msg/String', str, _M.build_text, _M.read_safety_state),
    Topic('/diagnostics', 'diagnostic_msgs/msg/DiagnosticArray', Diagnostics,
          _M.build_diagnostics, _M.read_diagnostics),
)}
