"""
Values into standard ROS 2 messages, for either message library.

Every field is given by keyword: one library has no defaults. Quaternions turn from (w, x, y, z) to
the messages' (x, y, z, w) here and nowhere else.
"""

from collections.abc import Sequence
from math import floor
from typing import Any

import numpy as np

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.rotation import rotate_back
from suspended_ctrl.physics.values import (
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
from suspended_ctrl.review.messages.covariance import turned
from suspended_ctrl.review.messages.values import (
    Diagnostics,
    Disturbance,
    MessageTypes,
    NO_COVARIANCE,
)
from suspended_ctrl.rig.frozen import Array

MAP = 'map'
BASE_LINK = 'base_link'
_NO_ORIENTATION = np.array([-1.0] + [0.0] * 8)
_UNKNOWN_9 = np.zeros(9)


def split_seconds(seconds: float) -> tuple[int, int]:
    """Whole seconds rounded down, and the nanoseconds left, 0 to 999,999,999."""
    whole = floor(seconds)
    nanoseconds = round((seconds - whole) * 1e9)
    return (whole + 1, 0) if nanoseconds == 1_000_000_000 else (whole, nanoseconds)


def build_header(types: MessageTypes, stamp_s: float, frame: str) -> Any:
    """Header with a stamp in seconds."""
    seconds, nanoseconds = split_seconds(stamp_s)
    return types('std_msgs/msg/Header')(
        stamp=types('builtin_interfaces/msg/Time')(sec=seconds, nanosec=nanoseconds),
        frame_id=frame)


def build_vector(types: MessageTypes, vector: Array) -> Any:
    """Vector3 from shape (3,)."""
    x, y, z = vector.tolist()
    return types('geometry_msgs/msg/Vector3')(x=x, y=y, z=z)


def build_quaternion(types: MessageTypes, quaternion_wxyz: Array) -> Any:
    """Quaternion from (w, x, y, z)."""
    w, x, y, z = quaternion_wxyz.tolist()
    return types('geometry_msgs/msg/Quaternion')(x=x, y=y, z=z, w=w)


def _build_pose(types: MessageTypes, position: Array, quaternion_wxyz: Array) -> Any:
    x, y, z = position.tolist()
    return types('geometry_msgs/msg/Pose')(
        position=types('geometry_msgs/msg/Point')(x=x, y=y, z=z),
        orientation=build_quaternion(types, quaternion_wxyz))


def build_pose(types: MessageTypes, sample: PoseSample) -> Any:
    """Build a PoseStamped in map."""
    return types('geometry_msgs/msg/PoseStamped')(
        header=build_header(types, sample.stamp_s, MAP),
        pose=_build_pose(types, sample.position_map_m, sample.quaternion_wxyz))


def build_imu(types: MessageTypes, sample: ImuSample) -> Any:
    """Imu in its own frame; -1 says that it gives no orientation (sensor_msgs/Imu)."""
    return types('sensor_msgs/msg/Imu')(
        header=build_header(types, sample.stamp_s, 'imu'),
        orientation=types('geometry_msgs/msg/Quaternion')(x=0.0, y=0.0, z=0.0, w=1.0),
        orientation_covariance=_NO_ORIENTATION,
        angular_velocity=build_vector(types, sample.rate_rad_s),
        angular_velocity_covariance=_UNKNOWN_9,
        linear_acceleration=build_vector(types, sample.force_m_s2),
        linear_acceleration_covariance=_UNKNOWN_9)


def _build_joints(types: MessageTypes, stamp_s: float, names: Sequence[str],
                  position: Sequence[float] | Array, velocity: Array) -> Any:
    return types('sensor_msgs/msg/JointState')(
        header=build_header(types, stamp_s, BASE_LINK), name=list(names),
        position=types.floats(position), velocity=types.floats(velocity),
        effort=types.floats(()))


def build_rotors(types: MessageTypes, sample: RotorSample | RotorCommand,
                 rotors: Sequence[str]) -> Any:
    """Build a JointState of rotor speeds, measured or commanded, named as the rig names them."""
    return _build_joints(types, sample.stamp_s, rotors, (), sample.speed_rad_s)


def build_carrier(types: MessageTypes, sample: CarrierSample, axes: Sequence[str]) -> Any:
    """Build a JointState of the carrier's axes, named as the rig names them."""
    return _build_joints(types, sample.stamp_s, axes, sample.position_m, sample.velocity_m_s)


def _build_wrench(types: MessageTypes, stamp_s: float, frame: str, force: Array,
                  torque: Array) -> Any:
    return types('geometry_msgs/msg/WrenchStamped')(
        header=build_header(types, stamp_s, frame),
        wrench=types('geometry_msgs/msg/Wrench')(
            force=build_vector(types, force), torque=build_vector(types, torque)))


def build_wrench(types: MessageTypes, wrench: Wrench) -> Any:
    """Build a WrenchStamped in ``base_link``."""
    return _build_wrench(types, wrench.stamp_s, BASE_LINK, wrench.force_body_n,
                         wrench.torque_body_nm)


def build_disturbance(types: MessageTypes, value: Disturbance | Estimate) -> Any:
    """Build a WrenchStamped in map, from a disturbance or from the estimate that carries one."""
    if isinstance(value, Estimate):
        return _build_wrench(types, value.stamp_s, MAP, value.disturbance_force_map_n,
                             value.disturbance_torque_map_nm)
    return _build_wrench(types, value.stamp_s, MAP, value.force_map_n, value.torque_map_nm)


def build_tether_load(types: MessageTypes, sample: TetherLoadSample) -> Any:
    """Build a WrenchStamped whose ``force.z`` is the tension."""
    return _build_wrench(types, sample.stamp_s, 'tether',
                         np.array([0.0, 0.0, sample.tension_n]), np.zeros(3))


def build_payload(types: MessageTypes, value: PayloadEvent | Estimate) -> Any:
    """Build an InertiaStamped of a point mass, from a mission's event or from the estimate."""
    payload = value.payload if isinstance(value, Estimate) else value
    return types('geometry_msgs/msg/InertiaStamped')(
        header=build_header(types, value.stamp_s, BASE_LINK),
        inertia=types('geometry_msgs/msg/Inertia')(
            m=float(payload.mass_kg), com=build_vector(types, payload.position_m), ixx=0.0,
            ixy=0.0, ixz=0.0, iyy=0.0, iyz=0.0, izz=0.0))


def _odometry_covariances(estimate: Estimate) -> tuple[Array, Array]:
    """
    Pose in map axes and twist in body axes, each shape (36,).

    The velocity's is the covariance of the error in map, turned into the estimated body axes.
    """
    quaternion = estimate.quaternion_wxyz
    pose = turned(np.ascontiguousarray(estimate.covariance[:6, :6]), 3, quaternion, True)
    twist = turned(np.ascontiguousarray(estimate.covariance[6:, 6:]), 0, quaternion, False)
    return pose.ravel(), twist.ravel()


def build_odometry(types: MessageTypes, value: Estimate | PlatformState) -> Any:
    """Odometry in map, twist in ``base_link``; covariance only of an estimate, else zero."""
    if isinstance(value, Estimate):
        pose_covariance, twist_covariance = _odometry_covariances(value)
    else:
        pose_covariance = twist_covariance = NO_COVARIANCE[:3].ravel()
    return types('nav_msgs/msg/Odometry')(
        header=build_header(types, value.stamp_s, MAP), child_frame_id=BASE_LINK,
        pose=types('geometry_msgs/msg/PoseWithCovariance')(
            pose=_build_pose(types, value.position_map_m, value.quaternion_wxyz),
            covariance=pose_covariance),
        twist=types('geometry_msgs/msg/TwistWithCovariance')(
            twist=types('geometry_msgs/msg/Twist')(
                linear=build_vector(
                    types, rotate_back(value.quaternion_wxyz, value.velocity_map_m_s)),
                angular=build_vector(types, value.rate_body_rad_s)),
            covariance=twist_covariance))


def build_text(types: MessageTypes, text: str) -> Any:
    """Build a String, for example a safety state."""
    return types('std_msgs/msg/String')(data=text)


def build_flag(types: MessageTypes, flag: bool) -> Any:
    """Build a Bool, for example an emergency stop."""
    return types('std_msgs/msg/Bool')(data=bool(flag))


def build_diagnostics(types: MessageTypes, value: Diagnostics) -> Any:
    """DiagnosticArray, one status a node."""
    status, pair = (types('diagnostic_msgs/msg/DiagnosticStatus'),
                    types('diagnostic_msgs/msg/KeyValue'))
    return types('diagnostic_msgs/msg/DiagnosticArray')(
        header=build_header(types, value.stamp_s, ''),
        status=[status(level=types.byte(one.level), name=one.name, message=one.message,
                       hardware_id='',
                       values=[pair(key=key, value=text) for key, text in one.values.items()])
                for one in value.statuses])
