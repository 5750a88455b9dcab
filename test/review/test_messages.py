"""Conversions between values and messages, for both message libraries."""

import array
import importlib
import math
import time

import numpy as np
import pytest

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.rotation import exponential, matrix
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierPlan,
    CarrierSample,
    Estimate,
    ImuSample,
    Payload,
    PayloadEvent,
    PoseSample,
    RotorCommand,
    RotorSample,
    TetherLoadSample,
    Wrench,
)
from suspended_ctrl.review import messages as m
from suspended_ctrl.review.bag_types import BagTypes

ROTORS = ('r1', 'r2', 'r3')
AXES = ('x', 'y', 'hoist')
STAMP_S = 1_700_000_000.125


class RosTypes:
    """rclpy's generated classes."""

    def __call__(self, name):
        package, _, kind = name.split('/')
        return getattr(importlib.import_module(f'{package}.msg'), kind)

    def floats(self, values):
        return array.array('d', np.asarray(values, dtype=np.float64).tobytes())

    def byte(self, value):
        return bytes([value])


def _ros_types():
    for package in ('rclpy', 'geometry_msgs', 'sensor_msgs', 'nav_msgs', 'trajectory_msgs',
                    'diagnostic_msgs'):
        pytest.importorskip(package, reason='no ROS 2 Python packages here')
    return RosTypes()


@pytest.fixture(params=['rosbags', 'rclpy'])
def types(request):
    return BagTypes() if request.param == 'rosbags' else _ros_types()


def vector(*values):
    return np.array(values, dtype=np.float64)


QUATERNION = exponential(vector(0.3, -0.5, 0.7))


def estimate():
    rng = np.random.default_rng(3)
    root = rng.normal(size=(12, 12))
    return Estimate(STAMP_S, vector(1, 2, 3), vector(0.1, -0.2, 0.3), QUATERNION,
                    vector(0.01, 0.02, 0.03), root @ root.T, vector(4, 5, 6), vector(7, 8, 9),
                    Payload(0.6, vector(0, 0, -0.25)), STAMP_S, True)


def reference(count=5):
    k = np.arange(count)[:, None]
    return Reference(
        STAMP_S, 0.01 * np.arange(count), k * vector(0.1, 0.2, 0.3), k * vector(0.4, 0.5, 0.6),
        k * vector(0.7, 0.8, 0.9), np.array([exponential(0.1 * i * vector(1, 2, 3))
                                             for i in range(count)]),
        k * vector(1.0, 1.1, 1.2), k * vector(1.3, 1.4, 1.5))


def assert_same(got, wanted):
    """Every field equal; stamps to the quarter microsecond that doubles of today resolve."""
    assert type(got) is type(wanted)
    for name in type(wanted).__slots__:
        one, two = getattr(got, name), getattr(wanted, name)
        if isinstance(two, np.ndarray):
            # Turning into another frame and back rounds twice.
            np.testing.assert_allclose(one, two, rtol=0, atol=1e-14, err_msg=name)
        elif isinstance(two, Payload):
            assert_same(one, two)
        else:
            assert one == pytest.approx(two, abs=2.5e-7, rel=0), name


PLAIN = {
    'pose': (PoseSample(STAMP_S, vector(1, 2, 3), QUATERNION), m.build_pose, m.read_pose, ()),
    'imu': (ImuSample(STAMP_S, vector(1, 2, 3), vector(4, 5, 6)), m.build_imu, m.read_imu, ()),
    'rotor_states': (RotorSample(STAMP_S, vector(100, -200, 300)), m.build_rotors, m.read_rotors,
                     (ROTORS,)),
    'rotor_command': (RotorCommand(STAMP_S, vector(100, -200, 300)), m.build_rotors,
                      m.read_rotor_command, (ROTORS,)),
    'carrier_states': (CarrierSample(STAMP_S, vector(1, 2, 3), vector(4, 5, 6)), m.build_carrier,
                       m.read_carrier, (AXES,)),
    'carrier_command': (CarrierCommand(STAMP_S, vector(1, 2, 3), vector(4, 5, 6)),
                        m.build_carrier_command, m.read_carrier_command, (AXES,)),
    'carrier_plan': (CarrierPlan(STAMP_S, vector(0.1, 0.2), np.arange(6.0).reshape(2, 3),
                                 np.arange(6.0, 12.0).reshape(2, 3)),
                     m.build_carrier_plan, m.read_carrier_plan, (AXES,)),
    'wrench': (Wrench(STAMP_S, vector(1, 2, 3), vector(4, 5, 6)), m.build_wrench, m.read_wrench,
               ()),
    'disturbance': (m.Disturbance(STAMP_S, vector(1, 2, 3), vector(4, 5, 6)), m.build_disturbance,
                    m.read_disturbance, ()),
    'tether_load': (TetherLoadSample(STAMP_S, 42.5), m.build_tether_load, m.read_tether_load, ()),
    'payload_event': (PayloadEvent(STAMP_S, 0.6, vector(0, 0, -0.25)), m.build_payload,
                      m.read_payload_event, ()),
    'ground_truth': (PlatformState(STAMP_S, vector(1, 2, 3), vector(4, 5, 6), QUATERNION,
                                   vector(7, 8, 9)), m.build_odometry, m.read_motion, ()),
    'reference': (reference(), m.build_reference, m.read_reference, ()),
}


@pytest.mark.parametrize('topic', PLAIN)
def test_a_value_comes_back_from_its_message(types, topic):
    value, build, read, names = PLAIN[topic]
    assert_same(read(build(types, value, *names), *names), value)


def test_an_estimate_comes_back_but_for_what_odometry_cannot_say(types):
    value = estimate()
    message = m.build_odometry(types, value)
    got = m.read_odometry(message, m.read_disturbance(m.build_disturbance(types, value)),
                          m.read_payload(m.build_payload(types, value)))
    for block in (slice(0, 6), slice(6, 12)):
        # Entries are about 10; two rotations of doubles.
        np.testing.assert_allclose(got.covariance[block, block], value.covariance[block, block],
                                   rtol=0, atol=1e-13)
    assert not got.covariance[:6, 6:].any()
    np.testing.assert_allclose(got.velocity_map_m_s, value.velocity_map_m_s, rtol=0, atol=1e-15)
    assert got.payload.mass_kg == 0.6
    np.testing.assert_array_equal(got.disturbance_torque_map_nm, [7, 8, 9])


def test_odometry_speaks_of_map_and_of_the_child_frame(types):
    """Sampled errors of map velocity and body attitude have the covariances in the message."""
    value = estimate()
    message = m.build_odometry(types, value)
    assert (message.header.frame_id, message.child_frame_id) == ('map', 'base_link')
    turn = matrix(QUATERNION)
    linear = message.twist.twist.linear
    np.testing.assert_allclose([linear.x, linear.y, linear.z], turn.T @ value.velocity_map_m_s,
                               rtol=0, atol=1e-15)
    samples = np.random.default_rng(0).multivariate_normal(
        np.zeros(12), value.covariance, size=200_000)
    pose = np.hstack((samples[:, :3], samples[:, 3:6] @ turn.T))
    twist = np.hstack((samples[:, 6:9] @ turn, samples[:, 9:]))
    for got, drawn in ((message.pose.covariance, pose), (message.twist.covariance, twist)):
        # A sample covariance of 2e5 draws scatters by about var/300; five times that.
        np.testing.assert_allclose(np.reshape(got, (6, 6)), np.cov(drawn.T), rtol=0,
                                   atol=np.diag(value.covariance).max() / 60)


def test_diagnostics_come_back(types):
    value = m.Diagnostics(STAMP_S, (
        m.NodeStatus('state_estimator', 1, 'late pose', {'age_s': '1'}),
        m.NodeStatus('wrench_controller', 0, 'ok')))
    assert m.read_diagnostics(m.build_diagnostics(types, value)).statuses == value.statuses


def test_state_and_flag_come_back(types):
    assert m.read_safety_state(m.build_text(types, 'holding')) == 'holding'
    assert m.read_flag(m.build_flag(types, True)) is True
    with pytest.raises(m.MessageError, match='flying'):
        m.read_safety_state(m.build_text(types, 'flying'))


def test_joints_go_by_name_not_by_order(types):
    message = m.build_rotors(types, RotorSample(STAMP_S, vector(3, 1, 2)), ('r3', 'r1', 'r2'))
    np.testing.assert_array_equal(m.read_rotors(message, ROTORS).speed_rad_s, [1, 2, 3])
    command = CarrierCommand(STAMP_S, vector(1, 2, 3), vector(4, 5, 6))
    message = m.build_carrier_command(types, command, ('hoist', 'x', 'y'))
    np.testing.assert_array_equal(m.read_carrier_command(message, AXES).position_m, [2, 3, 1])


@pytest.mark.parametrize('names, wrong', [
    (('r1', 'r2', 'r4'), 'r4'), (('r1', 'r2'), 'r3'), (('r1', 'r2', 'r3', 'r3'), 'twice'),
    ((), 'r1')])
def test_other_names_are_refused(types, names, wrong):
    message = m.build_rotors(types, RotorSample(STAMP_S, np.zeros(len(names))), names)
    with pytest.raises(m.MessageError, match=wrong):
        m.read_rotors(message, ROTORS)


@pytest.mark.parametrize('bad', [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize('topic', [t for t in PLAIN if t not in ('reference', 'tether_load')])
def test_any_number_that_is_not_finite_is_refused(types, topic, bad):
    value, build, read, names = PLAIN[topic]
    arrays = [name for name in type(value).__slots__
              if isinstance(getattr(value, name), np.ndarray) and name != 'time_s']
    for name in arrays:
        for k in range(getattr(value, name).size):
            spoilt = np.array(getattr(value, name))
            spoilt.flat[k] = bad
            fields = {n: getattr(value, n) for n in type(value).__slots__} | {name: spoilt}
            message = build(types, type(value)(**fields), *names)
            with pytest.raises(m.MessageError) as caught:
                read(message, *names)
            assert '\n' not in str(caught.value)


def test_a_bad_reference_is_refused(types):
    for name in ('position_map_m', 'velocity_map_m_s', 'acceleration_map_m_s2', 'quaternion_wxyz',
                 'rate_body_rad_s', 'rate_dot_body_rad_s2'):
        message_of = reference()
        getattr(message_of, name)[2, 1] = math.nan
        with pytest.raises(m.MessageError, match='point 2'):
            m.read_reference(m.build_reference(types, message_of))
    slow = m.build_reference(types, reference())
    slow.points[3].time_from_start.nanosec += 1_000_000
    with pytest.raises(m.MessageError, match='at most 0.01'):
        m.read_reference(slow)
    halved = m.build_reference(types, reference())
    halved.points[1].velocities = []
    with pytest.raises(m.MessageError, match='point 1'):
        m.read_reference(halved)
    named = m.build_reference(types, reference())
    named.joint_names = ['hook']
    with pytest.raises(m.MessageError, match='hook'):
        m.read_reference(named)


def test_no_points_clear_the_reference(types):
    assert m.read_reference(m.build_reference(types, None)) is None


def test_a_quaternion_that_is_no_rotation_is_refused(types):
    message = m.build_pose(types, PoseSample(STAMP_S, vector(1, 2, 3), vector(0, 0, 0, 0)))
    with pytest.raises(m.MessageError, match='unit length'):
        m.read_pose(message)
    single = np.asarray(QUATERNION, dtype=np.float32).astype(np.float64)
    message = m.build_pose(types, PoseSample(STAMP_S, vector(1, 2, 3), single))
    assert np.linalg.norm(m.read_pose(message).quaternion_wxyz) == pytest.approx(1.0, abs=1e-15)


def test_wrong_lengths_are_refused(types):
    message = m.build_rotors(types, RotorSample(STAMP_S, vector(1, 2)), ROTORS)
    with pytest.raises(m.MessageError, match='2 numbers, 3'):
        m.read_rotors(message, ROTORS)
    plan = m.build_carrier_plan(types, PLAIN['carrier_plan'][0], AXES)
    with pytest.raises(m.MessageError, match='2 points, 1 expected'):
        m.read_carrier_command(plan, AXES)


@pytest.mark.parametrize('stamp_s', [0.0, 0.9999999999, 12.3456, STAMP_S, -0.25])
def test_stamps_are_whole_seconds_and_nanoseconds(types, stamp_s):
    stamp = m.build_pose(types, PoseSample(stamp_s, vector(1, 2, 3), QUATERNION)).header.stamp
    assert 0 <= stamp.nanosec < 1_000_000_000
    assert stamp.sec + stamp.nanosec * 1e-9 == pytest.approx(stamp_s, abs=1e-9)


@pytest.mark.parametrize('topic, limit_us', [('pose', 15), ('imu', 15), ('rotor_states', 15)])
def test_reading_is_quick(types, topic, limit_us):
    """Median of many, so that a busy machine does not count."""
    value, build, read, names = PLAIN[topic]
    message = build(types, value, *names)
    laps = []
    for _ in range(500):
        start = time.perf_counter()
        read(message, *names)
        laps.append(time.perf_counter() - start)
    assert np.median(laps) * 1e6 < limit_us
