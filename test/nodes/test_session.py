"""Sessions through real processes: to the end of the path, and interrupted on it."""

import os
from pathlib import Path
import signal

from graph import MISSION
import pytest

from suspended_ctrl.mission.file import load_mission
from suspended_ctrl.mission.timing import timed
from suspended_ctrl.nodes.session import run_session, SessionSettings
from suspended_ctrl.review.bag_read import read_bag
from suspended_ctrl.review.metrics import assess
from suspended_ctrl.rig.errors import InputError

pytestmark = pytest.mark.graph

# A busy machine may trip a rig that is sound.
ATTEMPTS = 3


@pytest.fixture
def mission(tmp_path):
    file = tmp_path / 'short_hop.yaml'
    file.write_text(MISSION)
    return timed(load_mission(file))


def children():
    """Name the processes that this one started and that run."""
    found = []
    for stat in Path('/proc').glob('[0-9]*/stat'):
        try:
            fields = stat.read_text().rsplit(')', 1)[1].split()
        except OSError:
            continue
        if int(fields[1]) == os.getpid() and fields[0] != 'Z':
            found.append(stat.parent.name)
    return found


def test_a_mission_goes_to_its_end(mission, tmp_path):
    before, said = children(), []
    for attempt in range(ATTEMPTS):
        recording = tmp_path / f'run{attempt}'
        ended = run_session(mission, SessionSettings(), recording, say=said.append)
        if ended.kind == 'done':
            break
    assert (ended.kind, ended.reason) == ('done', None)
    assert children() == before
    assert any('no safety-rated device' in line for line in said)
    log = read_bag(recording)
    rig = mission.mission.rig
    metrics = assess(log, rig, mission.mission.file.accept).metrics
    assert metrics['verdict'] == 'pass', metrics['failed_criteria']
    assert metrics['safety']['state'] in ('ready', 'locked')
    assert [state for state in log.rows('safety/state').rows if state != 'locked'] == [
        'ready', 'live', 'stopping', 'ready']
    assert not log.refused


def test_interrupted_on_the_path_everything_ends_and_the_recording_is_whole(mission, tmp_path):
    before = children()

    def interrupt(share):
        if share > 0.3:
            os.kill(os.getpid(), signal.SIGINT)

    for attempt in range(ATTEMPTS):
        recording = tmp_path / f'run{attempt}'
        ended = run_session(mission, SessionSettings(), recording, progress=interrupt,
                            say=lambda _: None)
        if ended.kind == 'interrupted':
            break
    assert ended.kind == 'interrupted'
    assert children() == before
    assert (recording / 'metadata.yaml').exists()
    log = read_bag(recording)
    assert log.facts.ended == 'interrupted'
    command = log.rotor_command
    assert command.speed_rad_s.any()
    # The supervisor's last words.
    assert not command.speed_rad_s[-5:].any()


def test_a_node_that_refuses_its_parameters_is_bad_input(mission, tmp_path):
    settings = SessionSettings(overrides={'wrench_controller': {'bandwidth_hz': 15.0}})
    before = children()
    with pytest.raises(InputError, match='wrench_controller: .*15'):
        run_session(mission, settings, tmp_path / 'run', say=lambda _: None)
    assert children() == before
