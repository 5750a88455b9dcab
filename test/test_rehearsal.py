"""Whole missions against the bench in one process, through the command line as well."""

import json
import subprocess
import sys

import numpy as np
from numpy.testing import assert_allclose
import pytest

from suspended_ctrl.bench.rehearsal import Rehearsal, RehearsalSettings
from suspended_ctrl.cli import main
from suspended_ctrl.mission.file import load_mission
from suspended_ctrl.mission.timing import timed
from suspended_ctrl.rig.shared_files import config_folder

WALL_CLOCK = {'loop', 'realtime_factor'}

SHORT = """
name: short
rig: bay_head
start: {position_m: [0.1, 0.0, 2.70], yaw_deg: 10}
path:
  - move_to: {position_m: [0.4, 0.1, 2.65], yaw_deg: -10, duration_s: 1.5}
  - pick: {mass_kg: 0.4, position_m: [0, 0, -0.2]}
  - dwell: {seconds: 0.5}
accept:
  tracking.position_max_m: 0.030
"""


@pytest.fixture(name='short')
def _short(tmp_path):
    path = tmp_path / 'short.yaml'
    path.write_text(SHORT)
    return path


def figures(folder):
    metrics = json.loads((folder / 'metrics.json').read_text())
    return {key: value for key, value in metrics.items() if key not in WALL_CLOCK}


@pytest.mark.parametrize('name', ['panel_pass_1p0', 'probe_dock', 'pick_and_place',
                                  'release_and_settle'])
def test_reference_missions_are_accepted(name, tmp_path):
    assert main(['rehearse', name, '--out', str(tmp_path / 'run'), '--seed', '3']) == 0
    metrics = json.loads((tmp_path / 'run' / 'metrics.json').read_text())
    assert metrics['verdict'] == 'pass'
    # What labs of this kind report (common practice): 1 cm, 0.1 rad at 1 m/s.
    if name == 'panel_pass_1p0':
        assert metrics['tracking']['position_max_m'] <= 0.010
        assert metrics['tracking']['attitude_max_rad'] <= 0.10


def test_the_same_seed_gives_the_same_figures(short, tmp_path):
    for out in ('a', 'b'):
        assert main(['rehearse', str(short), '--out', str(tmp_path / out), '--seed', '7']) == 0
    assert main(['rehearse', str(short), '--out', str(tmp_path / 'c'), '--seed', '8']) == 0
    assert figures(tmp_path / 'a') == figures(tmp_path / 'b')
    assert figures(tmp_path / 'a')['tracking'] != figures(tmp_path / 'c')['tracking']


def test_without_mismatch_the_rig_is_as_its_file_says(short):
    rehearsal = Rehearsal(timed(load_mission(short)), RehearsalSettings(mismatch='none'))
    assert_allclose(rehearsal.bench.true_rig.rotors.curve_thrust_n,
                    rehearsal.bench.rig.rotors.curve_thrust_n)


def test_an_emergency_stop_ends_the_run_without_power(short, tmp_path, capsys):
    faults = tmp_path / 'stop.yaml'
    faults.write_text('faults:\n  - {kind: emergency_stop, at_s: 0.5}\n')
    code = main(['rehearse', str(short), '--faults', str(faults), '--out', str(tmp_path / 'run')])
    assert code == 1
    metrics = json.loads((tmp_path / 'run' / 'metrics.json').read_text())
    assert metrics['safety']['state'] == 'tripped'
    assert metrics['safety']['events'][0]['stop_category'] == 0
    assert 'run_completed' in metrics['failed_criteria']
    assert 'emergency' in capsys.readouterr().out


def test_the_payload_is_felt_and_named(short):
    rehearsal = Rehearsal(timed(load_mission(short)), RehearsalSettings())
    log = rehearsal.run()
    masses = [event.mass_kg for event in log['payload'].rows]
    assert masses == [0.4]
    assert rehearsal.bench.payload.mass_kg == 0.4


def test_nothing_turns_before_it_is_enabled(short):
    log = Rehearsal(timed(load_mission(short)), RehearsalSettings()).run()
    live = log['safety/state'].times[log['safety/state'].rows.index('live')]
    table = log['rotor_command']
    before = [row.speed_rad_s for t, row in zip(table.times, table.rows, strict=True) if t < live]
    assert before
    assert not np.any(before)
    assert not np.any(table.rows[-1].speed_rad_s)


@pytest.mark.parametrize(('words', 'said'), [
    (['rehearse', 'no_such_mission'], 'no_such_mission'),
    (['rehearse', 'absent/mission.yaml'], 'absent/mission.yaml'),
    (['rehearse', 'panel_pass_1p0', '--rig', 'absent.yaml'], 'absent.yaml'),
    (['rehearse', 'panel_pass_1p0', '--law', 'guess'], 'computed_torque'),
    (['rehearse', 'panel_pass_1p0', '--allocator', 'guess'], 'priority_qp'),
    (['rehearse', 'panel_pass_1p0', '--seed', '-1'], '--seed'),
    (['rehearse', 'panel_pass_1p0', '--bandwidth-hz', 'nan'], '--bandwidth-hz'),
    (['rehearse', 'panel_pass_1p0', '--bandwidth-hz', '40'], 'at most'),
    (['rehearse', 'panel_pass_1p0', '--plant', 'external'], '--ros'),
    (['rehearse'], 'MISSION'),
    (['reherse', 'panel_pass_1p0'], 'rehearse'),
])
def test_bad_calls_are_refused_in_one_line(words, said, tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert main(words) == 2
    captured = capsys.readouterr()
    assert captured.out == ''
    assert captured.err.count('\n') == 1
    assert said in captured.err
    assert not list(tmp_path.iterdir())


def test_unknown_figures_and_foreign_folders_are_refused(short, tmp_path, capsys):
    text = short.read_text().replace('position_max_m', 'position_maximum_m')
    (tmp_path / 'odd.yaml').write_text(text)
    assert main(['rehearse', str(tmp_path / 'odd.yaml'), '--out', str(tmp_path / 'run')]) == 2
    assert 'position_maximum_m' in capsys.readouterr().err
    assert main(['rehearse', str(short), '--out', str(config_folder())]) == 2
    assert capsys.readouterr().err.count('\n') == 1
    assert not (tmp_path / 'run').exists()


def test_help_and_version_of_the_module():
    for words in (['--help'], ['rehearse', '--help'], ['--version']):
        out = subprocess.run([sys.executable, '-m', 'suspended_ctrl', *words], text=True,
                             capture_output=True, check=False)
        assert out.returncode == 0
        assert out.stdout
    assert 'Hz' in subprocess.run([sys.executable, '-m', 'suspended_ctrl', 'rehearse', '--help'],
                                  text=True, capture_output=True, check=True).stdout
