"""The graph's topics: those of recordings and one more, and their quality of service."""

from functools import cache
import importlib
from typing import Any

from rclpy.qos import DurabilityPolicy, qos_profile_sensor_data, QoSProfile, ReliabilityPolicy

from suspended_ctrl.review.messages import build_flag, read_flag
from suspended_ctrl.review.topics import Topic, TOPICS

_IMU = QoSProfile(depth=50, reliability=ReliabilityPolicy.BEST_EFFORT)
_NEWEST = QoSProfile(depth=1, reliability=ReliabilityPolicy.RELIABLE)
_LATCHED = QoSProfile(depth=1, reliability=ReliabilityPolicy.RELIABLE,
                      durability=DurabilityPolicy.TRANSIENT_LOCAL)
_DEFAULT = QoSProfile(depth=10)

GRAPH = TOPICS | {
    # Any message is a sign of life of the operator's client, where one is asked for.
    'operator_heartbeat': Topic('operator_heartbeat', 'std_msgs/msg/Bool', bool, build_flag,
                                read_flag),
}

QOS = {
    'pose': qos_profile_sensor_data,
    'imu': _IMU,
    'rotor_states': qos_profile_sensor_data,
    'carrier_states': qos_profile_sensor_data,
    'tether_load': qos_profile_sensor_data,
    'emergency_stop': qos_profile_sensor_data,
    'ground_truth': qos_profile_sensor_data,
    'ground_truth_tether': qos_profile_sensor_data,
    'ground_truth_rotors': qos_profile_sensor_data,
    'odometry': _NEWEST,
    'disturbance': _NEWEST,
    'payload': _NEWEST,
    'payload_event': _LATCHED,
    'reference': _LATCHED,
    'wrench_demand': _NEWEST,
    'wrench_achieved': _NEWEST,
    'rotor_demand': _NEWEST,
    'rotor_command': _NEWEST,
    'carrier_demand': _NEWEST,
    'carrier_command': _NEWEST,
    'carrier_plan': _NEWEST,
    'safety/state': _LATCHED,
    '/diagnostics': _DEFAULT,
    'operator_heartbeat': qos_profile_sensor_data,
}


def latched(topic: str) -> bool:
    """Whether the last message holds until the next one, also for those who come later."""
    return bool(QOS[topic].durability == DurabilityPolicy.TRANSIENT_LOCAL)


@cache
def message_class(message_type: str) -> Any:
    """Class that rclpy's publishers and subscriptions of a message type want."""
    package, folder, name = message_type.split('/')
    return getattr(importlib.import_module(f'{package}.{folder}'), name)
