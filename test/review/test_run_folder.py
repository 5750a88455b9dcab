"""The run folder: complete or absent."""

import json
from xml.etree import ElementTree as ET

import numpy as np
import pytest

from suspended_ctrl.review import run_folder
from suspended_ctrl.review.bag import write_bag
from suspended_ctrl.review.bag_read import read_bag
from suspended_ctrl.review.metrics import assess
from suspended_ctrl.review.run_folder import write_run
from suspended_ctrl.rig.errors import InputError

from synthetic_run import names_of, synthetic_run

CRITERIA = {'tracking.position_max_m': 0.01, 'effort.rotor_energy_j': 1.0}


@pytest.fixture(scope='module')
def made():
    return synthetic_run(until_s=9.0)


def names_in(folder):
    return sorted(entry.name for entry in folder.iterdir())


def test_a_folder_has_everything(made, tmp_path):
    log, rig = made
    out = tmp_path / 'deep' / 'out'
    assessment = write_run(log, rig, CRITERIA, out)
    assert names_in(out) == ['junit.xml', 'metrics.json', 'report.html', 'run']
    assert names_in(out / 'run') == ['metadata.yaml', 'run.mcap']
    assert names_in(out.parent) == ['out']
    metrics = json.loads((out / 'metrics.json').read_text())
    assert metrics == json.loads(assessment.text())
    assert metrics['failed_criteria'] == ['effort.rotor_energy_j']
    ET.parse(out / 'junit.xml')
    assert (out / 'report.html').read_text().startswith('<!DOCTYPE html>')
    # From the recording alone the same figures.
    again = assess(read_bag(out / 'run'), rig, CRITERIA).metrics
    assert again['tracking']['position_max_m'] == pytest.approx(
        metrics['tracking']['position_max_m'], rel=1e-6)
    write_run(log, rig, {}, out)
    assert json.loads((out / 'metrics.json').read_text())['failed_criteria'] == []
    assert names_in(out.parent) == ['out']


def test_a_recording_made_meanwhile_moves_in(made, tmp_path):
    log, rig = made
    write_bag(log, names_of(rig), tmp_path / 'live')
    out = tmp_path / 'out'
    write_run(log, rig, {}, out, recording=tmp_path / 'live')
    assert names_in(tmp_path) == ['out']
    assert names_in(out / 'run') == ['metadata.yaml', 'run.mcap']
    np.testing.assert_array_equal(read_bag(out / 'run').rotor_command.speed_rad_s,
                                  log.rotor_command.speed_rad_s)


def test_nothing_is_left_of_a_run_that_could_not_be_written(made, tmp_path, monkeypatch):
    log, rig = made

    def fail(*_):
        raise OSError('no space left on device')

    monkeypatch.setattr(run_folder, 'write_bag', fail)
    with pytest.raises(OSError, match='no space'):
        write_run(log, rig, CRITERIA, tmp_path / 'out')
    assert names_in(tmp_path) == []


def test_other_peoples_folders_are_left_alone(made, tmp_path):
    log, rig = made
    (tmp_path / 'out').mkdir()
    (tmp_path / 'out' / 'thesis.tex').write_text('years of work')
    with pytest.raises(InputError, match='thesis.tex'):
        write_run(log, rig, CRITERIA, tmp_path / 'out')
    assert (tmp_path / 'out' / 'thesis.tex').read_text() == 'years of work'
    (tmp_path / 'file').write_text('')
    with pytest.raises(InputError, match='is a file'):
        write_run(log, rig, CRITERIA, tmp_path / 'file')
