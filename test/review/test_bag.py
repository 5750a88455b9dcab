"""Recordings: written, read back, read by others, damaged."""

import dataclasses
import shutil

from mcap.reader import make_reader
from mcap_ros2.decoder import DecoderFactory
import numpy as np
import pytest
from rosbags.rosbag2 import Reader

from suspended_ctrl.physics.values import PoseSample, RotorSample
from suspended_ctrl.review.bag import BagWriter, write_bag
from suspended_ctrl.review.bag_read import read_bag, RecordingError
from suspended_ctrl.review.bag_types import BagTypes, typestore
from suspended_ctrl.review.columns import LEAVES
from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.topics import JointNames, TOPICS

from synthetic_run import names_of, synthetic_run

NAMES = JointNames(('r1', 'r2'), ('x',))
LEVEL = np.array([1.0, 0.0, 0.0, 0.0])


@pytest.fixture(scope='module')
def recorded(tmp_path_factory):
    log, rig = synthetic_run(until_s=1.6)
    path = tmp_path_factory.mktemp('bag') / 'run'
    write_bag(log, names_of(rig), path)
    return log, rig, path


def message(topic, value, names=NAMES):
    kind = TOPICS[topic]
    return bytes(typestore().serialize_cdr(kind.build(BagTypes(), value, names),
                                           kind.message_type))


def test_everything_comes_back(recorded):
    log, rig, path = recorded
    back = read_bag(path, names_of(rig))
    assert back.refused == {}
    for name, topic in TOPICS.items():
        one, two = log[name], back[name]
        assert len(one) == len(two), name
        # Times travel in whole nanoseconds.
        np.testing.assert_allclose(two.log_s, one.log_s, rtol=0, atol=1e-9, err_msg=name)
        if len(one) and topic.value_type in LEAVES:
            for column in LEAVES[topic.value_type]:
                # Into the body's axes and back again: two roundings of speeds about 1 m/s.
                np.testing.assert_allclose(two.column(column), one.column(column), rtol=1e-14,
                                           atol=1e-14, err_msg=f'{name}.{column}')
    assert list(back.rows('safety/state').rows) == ['locked', 'ready', 'live']
    point = back.rows('reference').rows[0].at(1.5)
    np.testing.assert_allclose(point.position_map_m,
                               log.rows('reference').rows[0].at(1.5).position_map_m, atol=1e-12)


def test_facts_come_back(recorded):
    log, _, path = recorded
    back = read_bag(path).facts
    for field in dataclasses.fields(back):
        one, two = getattr(log.facts, field.name), getattr(back, field.name)
        if isinstance(one, np.ndarray):
            np.testing.assert_allclose(two, one, rtol=0, atol=1e-9)
        else:
            assert two == one, field.name


def test_an_independent_reader_finds_the_same(recorded):
    log, rig, path = recorded
    counts, poses, speeds, names = {}, [], [], None
    with (path / 'run.mcap').open('rb') as file:
        reader = make_reader(file, decoder_factories=[DecoderFactory()])
        for _, channel, record, decoded in reader.iter_decoded_messages():
            counts[channel.topic] = counts.get(channel.topic, 0) + 1
            if channel.topic == '/pose':
                at = decoded.pose.position
                poses.append((record.log_time, at.x, at.y, at.z))
            if channel.topic == '/rotor_command':
                speeds.append(decoded.velocity)
                names = decoded.name
    assert counts == {name if name.startswith('/') else f'/{name}': len(log[name])
                      for name in TOPICS if len(log[name])}
    poses = np.array(poses)
    np.testing.assert_allclose(poses[:, 0] * 1e-9, log.pose.log_s, rtol=0, atol=1e-9)
    np.testing.assert_array_equal(poses[:, 1:], log.pose.position_map_m)
    np.testing.assert_array_equal(speeds, log.rotor_command.speed_rad_s)
    assert tuple(names) == rig.rotors.names


def test_the_folder_is_a_rosbag2_folder(recorded):
    log, _, path = recorded
    assert sorted(file.name for file in path.iterdir()) == ['metadata.yaml', 'run.mcap']
    with Reader(path) as reader:
        assert reader.message_count == sum(len(log[name]) for name in TOPICS)
        assert reader.ros_distro == 'jazzy'
        state = reader.topics['/safety/state'].connections[0]
        assert state.ext.offered_qos_profiles[0].durability.name == 'TRANSIENT_LOCAL'
        messages = list(reader.messages())
        assert [t for _, t, _ in messages] == sorted(t for _, t, _ in messages)


def test_columns_are_what_message_by_message_reading_gives(recorded, tmp_path):
    """One message of another size sends the reader the slow way; the rest must not change."""
    log, rig, _ = recorded
    path = tmp_path / 'run'
    bag = BagWriter(path)
    odd = {'pose': 'elsewhere', 'odometry': 'a frame of another length', 'rotor_states': 'here'}
    wanted = [name for name, topic in TOPICS.items()
              if topic.value_type in LEAVES and len(log.rows(name)) > 1]
    for name in wanted:
        channel = bag.add_topic(f'/{name}', TOPICS[name].message_type)
        for k, (t, value) in enumerate(zip(log.rows(name).times, log.rows(name).rows,
                                           strict=True)):
            built = TOPICS[name].build(BagTypes(), value, names_of(rig))
            if k == 1:
                built.header.frame_id = odd.get(name, 'some other frame')
            bag.write(channel, round(t * 1e9), bytes(
                typestore().serialize_cdr(built, TOPICS[name].message_type)))
    bag.close()
    back = read_bag(path, names_of(rig))
    for name in wanted:
        assert type(back[name]).__name__ == 'Rows', name
        for column in LEAVES[TOPICS[name].value_type]:
            np.testing.assert_allclose(
                back[name].column(column), log[name].column(column), rtol=1e-14, atol=1e-14,
                err_msg=f'{name}.{column}')


def test_bad_messages_are_left_out_and_counted(tmp_path):
    path = tmp_path / 'run'
    bag = BagWriter(path)
    channel = bag.add_topic('/cell/pose', 'geometry_msgs/msg/PoseStamped')
    for k in range(5):
        position = np.array([np.nan if k == 2 else k, 0.0, 0.0])
        bag.write(channel, k, message('pose', PoseSample(k, position, LEVEL * (k != 3))))
    channel = bag.add_topic('/cell/rotor_states', 'sensor_msgs/msg/JointState')
    bag.write(channel, 9, message('rotor_states', RotorSample(0.0, np.array([1.0, 2.0])),
                                  JointNames(('r2', 'r1'), ())))
    channel = bag.add_topic('/cell/rotor_command', 'sensor_msgs/msg/JointState')
    bag.write(channel, 9, message('rotor_states', RotorSample(0.0, np.array([1.0, 2.0])),
                                  JointNames(('r1', 'r9'), ())))
    bag.close()
    log = read_bag(path, NAMES)
    assert log.refused == {'pose': 2, 'rotor_command': 1}
    np.testing.assert_array_equal(log.pose.position_map_m[:, 0], [0, 1, 4])
    np.testing.assert_array_equal(log.rotor_states.speed_rad_s, [[2.0, 1.0]])


def test_a_killed_writer_loses_only_what_it_had_not_flushed(tmp_path):
    path = tmp_path / 'run'
    bag = BagWriter(path)
    channel = bag.add_topic('/pose', 'geometry_msgs/msg/PoseStamped')
    for k in range(100):
        bag.write(channel, k, message('pose', PoseSample(k, np.zeros(3), LEVEL)))
    bag.flush()
    for k in range(100, 150):
        bag.write(channel, k, message('pose', PoseSample(k, np.zeros(3), LEVEL)))
    # No close: what a kill leaves is what the file has now.
    killed = tmp_path / 'killed'
    shutil.copytree(path, killed)
    for source in (killed, killed / 'run.mcap'):
        np.testing.assert_array_equal(read_bag(source).pose.stamp_s, np.arange(100))
    bag.flush()
    whole = (path / 'run.mcap').read_bytes()
    (tmp_path / 'torn.mcap').write_bytes(whole[:-1500])
    assert len(read_bag(tmp_path / 'torn.mcap').pose) == 100


@pytest.mark.parametrize('content', [
    b'', b'\x89MCAP0\r\n', b'time,x,y\n0,1,2\n', b'\x89PNG\r\n' + bytes(200)])
def test_other_files_are_refused_in_one_line(tmp_path, content):
    path = tmp_path / 'file.mcap'
    path.write_bytes(content)
    with pytest.raises(RecordingError, match='file.mcap: not a recording') as caught:
        read_bag(path)
    assert '\n' not in str(caught.value)
    with pytest.raises(RecordingError):
        read_bag(tmp_path)


def test_a_recording_of_something_else_is_refused(tmp_path):
    bag = BagWriter(tmp_path / 'run')
    channel = bag.add_topic('/chatter', 'std_msgs/msg/String')
    bag.write(channel, 1, bytes(8))
    bag.close()
    with pytest.raises(RecordingError, match='none of the stack'):
        read_bag(tmp_path / 'run')


def test_an_empty_log_is_still_a_folder(tmp_path):
    write_bag(RunLog(), NAMES, tmp_path / 'run')
    with Reader(tmp_path / 'run') as reader:
        assert reader.message_count == 0
