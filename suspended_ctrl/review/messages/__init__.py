"""
The package's values as standard ROS 2 messages, and back; written once for both message libraries.

``build_*`` take a provider of message classes first, ``read_*`` a message. Rotors and carrier axes
travel by name: readers put them into the rig's order, whatever the message's.
"""

from suspended_ctrl.review.messages.build import (
    build_carrier,
    build_diagnostics,
    build_disturbance,
    build_flag,
    build_imu,
    build_odometry,
    build_payload,
    build_pose,
    build_rotors,
    build_tether_load,
    build_text,
    build_wrench,
)
from suspended_ctrl.review.messages.read import (
    read_carrier,
    read_diagnostics,
    read_disturbance,
    read_flag,
    read_imu,
    read_motion,
    read_odometry,
    read_payload,
    read_payload_event,
    read_pose,
    read_rotor_command,
    read_rotors,
    read_safety_state,
    read_tether_load,
    read_wrench,
)
from suspended_ctrl.review.messages.trajectory import (
    build_carrier_command,
    build_carrier_plan,
    build_reference,
    read_carrier_command,
    read_carrier_plan,
    read_reference,
)
from suspended_ctrl.review.messages.values import (
    Diagnostics,
    Disturbance,
    MessageError,
    MessageTypes,
    NodeStatus,
)

__all__ = [
    'Diagnostics',
    'Disturbance',
    'MessageError',
    'MessageTypes',
    'NodeStatus',
    'build_carrier',
    'build_carrier_command',
    'build_carrier_plan',
    'build_diagnostics',
    'build_disturbance',
    'build_flag',
    'build_imu',
    'build_odometry',
    'build_payload',
    'build_pose',
    'build_reference',
    'build_rotors',
    'build_tether_load',
    'build_text',
    'build_wrench',
    'read_carrier',
    'read_carrier_command',
    'read_carrier_plan',
    'read_diagnostics',
    'read_disturbance',
    'read_flag',
    'read_imu',
    'read_motion',
    'read_odometry',
    'read_payload',
    'read_payload_event',
    'read_pose',
    'read_reference',
    'read_rotor_command',
    'read_rotors',
    'read_safety_state',
    'read_tether_load',
    'read_wrench',
]
