"""Values on the wire, held to rosbags' and rclpy's own serialization."""

import array
import dataclasses
import importlib
import struct

from hypothesis import given, settings
from hypothesis import strategies as st
import numpy as np
import pytest

from suspended_ctrl.nodes.topics import GRAPH, latched, message_class, QOS
from suspended_ctrl.nodes.wire import (
    decode,
    motion_reader,
    placed_estimate_reader,
    value_reader,
    value_writer,
)
from suspended_ctrl.nodes.wire.write import encode, WireTypes
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.reference import Reference
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
from suspended_ctrl.review.bag_types import BagTypes, typestore
from suspended_ctrl.review.messages import (
    build_reference,
    Diagnostics,
    Disturbance,
    MessageError,
    NodeStatus,
    read_reference,
)
from suspended_ctrl.review.qos import offered_qos
from suspended_ctrl.review.topics import JointNames, TOPICS

NAMES = JointNames(('r1', 'r2', 'r3'), ('x', 'hoist'))


def value_of(topic, rng):
    """Make a value of a topic, of numbers at random."""
    stamp = 1.7e9 + float(rng.uniform(0.0, 1e6))
    turn = rng.normal(size=4)
    turn /= np.linalg.norm(turn)
    root = rng.normal(size=(12, 12))
    covariance = root @ root.T
    covariance[:6, 6:] = covariance[6:, :6] = 0.0

    def v(n=3):
        return rng.normal(size=n)

    makers = {
        PoseSample: lambda: PoseSample(stamp, v(), turn),
        ImuSample: lambda: ImuSample(stamp, v(), v()),
        RotorSample: lambda: RotorSample(stamp, v(3)),
        RotorCommand: lambda: RotorCommand(stamp, v(3)),
        CarrierSample: lambda: CarrierSample(stamp, v(2), v(2)),
        CarrierCommand: lambda: CarrierCommand(stamp, v(2), v(2)),
        CarrierPlan: lambda: CarrierPlan(stamp, np.array([0.1, 0.3]), v(4).reshape(2, 2),
                                         v(4).reshape(2, 2)),
        TetherLoadSample: lambda: TetherLoadSample(stamp, float(v(1)[0])),
        PayloadEvent: lambda: PayloadEvent(stamp, abs(float(v(1)[0])), v()),
        PlatformState: lambda: PlatformState(stamp, v(), v(), turn, v()),
        Estimate: lambda: Estimate(stamp, v(), v(), turn, v(), covariance, np.zeros(3),
                                   np.zeros(3), Payload(), stamp, True),
        Disturbance: lambda: Disturbance(stamp, v(), v()),
        Wrench: lambda: Wrench(stamp, v(), v()),
        Diagnostics: lambda: Diagnostics(stamp, (NodeStatus('n', 1, 'm', {'a': 'b'}),)),
        bool: lambda: bool(rng.integers(2)),
        str: lambda: 'live',
        Reference: lambda: reference(rng, stamp, 5),
    }
    return makers[topic.value_type]()


def reference(rng, start_s, count):
    turns = rng.normal(size=(count, 4))
    turns /= np.linalg.norm(turns, axis=1)[:, None]
    return Reference(start_s, 0.01 * np.arange(count), rng.normal(size=(count, 3)),
                     rng.normal(size=(count, 3)), rng.normal(size=(count, 3)), turns,
                     rng.normal(size=(count, 3)), rng.normal(size=(count, 3)))


def by_rosbags(topic, value):
    message = topic.build(BagTypes(), value, NAMES)
    return bytes(typestore().serialize_cdr(message, topic.message_type))


@pytest.mark.parametrize('name', sorted(GRAPH))
def test_bytes_are_those_of_rosbags(name):
    topic, rng = GRAPH[name], np.random.default_rng(1)
    write = value_writer(topic, NAMES)
    # The first goes through messages, the others into copies of it.
    for _ in range(4):
        value = value_of(topic, rng)
        assert write(value) == by_rosbags(topic, value)


class RclpyTypes:
    """rclpy's own message classes."""

    def __call__(self, name):
        return message_class(name)

    def floats(self, values):
        return array.array('d', np.asarray(values, dtype=float).tolist())

    def byte(self, value):
        return bytes([value])


@pytest.mark.parametrize('name', sorted(GRAPH))
def test_rclpy_reads_what_is_written(name):
    serialization = importlib.import_module('rclpy.serialization')
    topic, rng = GRAPH[name], np.random.default_rng(2)
    write = value_writer(topic, NAMES)
    for _ in range(2):
        value = value_of(topic, rng)
        read = serialization.deserialize_message(
            write(value), message_class(topic.message_type))
        assert read == topic.build(RclpyTypes(), value, NAMES)


@pytest.mark.parametrize('name', sorted(GRAPH))
def test_values_are_read_as_messages_read_them(name):
    topic, rng = GRAPH[name], np.random.default_rng(3)
    read = value_reader(topic, NAMES)
    for _ in range(4):
        value = value_of(topic, rng)
        data = by_rosbags(topic, value)
        message = typestore().deserialize_cdr(data, topic.message_type)
        assert_same(read(data), topic.read(message, NAMES))


def assert_same(one, other):
    if not dataclasses.is_dataclass(one):
        assert one == other
        return
    assert type(one) is type(other)
    for item in dataclasses.fields(one):
        a, b = getattr(one, item.name), getattr(other, item.name)
        if dataclasses.is_dataclass(a):
            assert_same(a, b)
        else:
            np.testing.assert_array_equal(a, b)


def test_velocity_of_odometry_is_turned_into_map():
    topic, rng = TOPICS['odometry'], np.random.default_rng(4)
    motion, placed = motion_reader(topic), placed_estimate_reader(topic)
    for _ in range(3):
        value = value_of(topic, rng)
        data = by_rosbags(topic, value)
        for read in (motion, placed):
            found = read(data)
            # Into the child's frame and back: rounding of two rotations.
            np.testing.assert_allclose(found.velocity_map_m_s, value.velocity_map_m_s,
                                       atol=1e-14)
        np.testing.assert_allclose(placed(data).covariance[:3, :3], value.covariance[:3, :3],
                                   rtol=1e-15)


def replaced(data, topic, path, number):
    """Bytes of a message with one number changed."""
    layout = importlib.import_module('suspended_ctrl.review.cdr_layout').Layout(
        topic.message_type, data)
    leaf = layout.leaves[path]
    out = bytearray(data)
    struct.pack_into('<d', out, leaf.offset, number)
    return bytes(out)


@pytest.mark.parametrize('number', [float('nan'), float('inf'), -float('inf')])
@pytest.mark.parametrize('name, path', [
    ('pose', 'pose.position.x'), ('pose', 'pose.orientation.w'), ('imu', 'angular_velocity.z'),
    ('rotor_demand', 'velocity'), ('carrier_demand', 'points[0].positions'),
    ('wrench_demand', 'wrench.torque.y'), ('tether_load', 'wrench.force.z'),
    ('odometry', 'twist.twist.linear.x'), ('payload_event', 'inertia.m')])
def test_what_is_not_finite_is_refused(name, path, number):
    topic, rng = TOPICS[name], np.random.default_rng(5)
    read = value_reader(topic, NAMES)
    good = by_rosbags(topic, value_of(topic, rng))
    bad = replaced(good, topic, path, number)
    # Before and after the reader has seen what a good one looks like.
    with pytest.raises(MessageError):
        read(bad)
    read(good)
    with pytest.raises(MessageError):
        read(bad)


def test_joints_in_another_order_are_put_in_the_rigs():
    topic = TOPICS['rotor_states']
    read = value_reader(topic, NAMES)
    other = JointNames(('r3', 'r1', 'r2'), NAMES.axes)
    write = value_writer(topic, other)
    for _ in range(2):
        found = read(write(RotorSample(1.0, np.array([3.0, 1.0, 2.0]))))
        np.testing.assert_array_equal(found.speed_rad_s, [1.0, 2.0, 3.0])
    found = read(value_writer(topic, NAMES)(RotorSample(1.0, np.array([1.0, 2.0, 3.0]))))
    np.testing.assert_array_equal(found.speed_rad_s, [1.0, 2.0, 3.0])


def test_an_unknown_rotor_is_refused():
    write = value_writer(TOPICS['rotor_states'], JointNames(('r1', 'r2', 'r4'), NAMES.axes))
    with pytest.raises(MessageError, match='r4'):
        value_reader(TOPICS['rotor_states'], NAMES)(write(RotorSample(1.0, np.ones(3))))


@settings(max_examples=300, deadline=None)
@given(st.sampled_from(sorted(GRAPH)), st.binary(max_size=400))
def test_any_bytes_are_a_value_or_refused(name, data):
    read = value_reader(GRAPH[name], NAMES)
    for prefix in (b'', b'\x00\x01\x00\x00'):
        try:
            read(prefix + data)
        except MessageError:
            continue


@settings(max_examples=200, deadline=None)
@given(st.sampled_from(sorted(GRAPH)), st.integers(0, 2**31), st.data())
def test_damaged_messages_are_values_or_refused(name, seed, data):
    topic = GRAPH[name]
    read = value_reader(topic, NAMES)
    good = by_rosbags(topic, value_of(topic, np.random.default_rng(seed)))
    read(good)
    broken = bytearray(good)
    for _ in range(3):
        broken[data.draw(st.integers(0, len(broken) - 1))] = data.draw(st.integers(0, 255))
    cut = data.draw(st.integers(0, len(broken)))
    for candidate in (bytes(broken), bytes(broken[:cut])):
        try:
            read(candidate)
        except MessageError:
            continue


def test_big_endian_messages_are_read():
    topic = TOPICS['imu']
    value = value_of(topic, np.random.default_rng(6))
    message = topic.build(BagTypes(), value, NAMES)
    data = bytes(typestore().serialize_cdr(message, topic.message_type, little_endian=False))
    assert_same(value_reader(topic, NAMES)(data), value_of(topic, np.random.default_rng(6)))


def test_padding_after_a_message_is_left_alone():
    topic = TOPICS['rotor_states']
    data = by_rosbags(topic, RotorSample(2.0, np.ones(3)))
    np.testing.assert_array_equal(
        value_reader(topic, NAMES)(data + bytes(8)).speed_rad_s, np.ones(3))


@pytest.mark.parametrize('count', [1, 2, 700])
def test_references_go_as_rows(count):
    topic = TOPICS['reference']
    value = reference(np.random.default_rng(7), 1.7e9, count)
    data = value_writer(topic, NAMES)(value)
    assert data == by_rosbags(topic, value)
    message = typestore().deserialize_cdr(data, topic.message_type)
    assert_same(value_reader(topic, NAMES)(data), read_reference(message))


def test_a_reference_that_starts_elsewhere_in_its_bytes_is_read():
    # A longer frame name moves the first point by four bytes against the numbers' alignment.
    message = build_reference(WireTypes(), reference(np.random.default_rng(8), 5.0, 4))
    message.header.frame_id = 'map_1'
    data = encode(message, TOPICS['reference'].message_type)
    assert_same(value_reader(TOPICS['reference'], NAMES)(data),
                read_reference(decode(data, TOPICS['reference'].message_type)))


def test_a_reference_without_points_clears():
    topic = TOPICS['reference']
    assert value_reader(topic, NAMES)(value_writer(topic, NAMES)(None)) is None


@pytest.mark.parametrize('field, change', [
    ('position_map_m', np.nan), ('quaternion_wxyz', 0.6), ('time_s', 0.5)])
def test_a_wrong_reference_is_refused(field, change):
    good = reference(np.random.default_rng(9), 5.0, 6)
    numbers = np.array(getattr(good, field))
    numbers[3] = change
    bad = dataclasses.replace(good, **{field: numbers})
    topic = TOPICS['reference']
    with pytest.raises(MessageError):
        value_reader(topic, NAMES)(value_writer(topic, NAMES)(bad))


@pytest.mark.parametrize('name', sorted(TOPICS))
def test_quality_of_service_is_what_recordings_say(name):
    said, profile = offered_qos(name), QOS[name]
    assert f'depth: {profile.depth}\n' in said
    assert f'reliability: {profile.reliability.name.lower()}\n' in said
    assert f'durability: {profile.durability.name.lower()}\n' in said
    assert latched(name) == ('transient_local' in said)
