"""Launch files held to the package, and started where ROS's launch is installed."""

import os
from pathlib import Path
import re
import signal
import subprocess
import sys
import time
from xml.etree import ElementTree as ET

import pytest

from suspended_ctrl.nodes.cautions import CAUTIONS
from suspended_ctrl.nodes.domain import own_domain
from suspended_ctrl.nodes.parameter_files import check_file
from suspended_ctrl.nodes.parameters import RCLPY_PARAMETERS
from suspended_ctrl.nodes.registry import MODELS

ROOT = Path(__file__).parents[2]
FILES = sorted((ROOT / 'launch').glob('*.launch.xml'))
ARGUMENTS = ['rig', 'mission', 'law', 'allocator', 'parameters', 'namespace', 'use_sim_time',
             'activate', 'log_level']
each_file = pytest.mark.parametrize('file', FILES, ids=lambda path: path.name)


def nodes(file):
    return list(ET.parse(file).getroot().iter('node'))


def test_both_files_are_there():
    assert [file.name for file in FILES] == ['bench.launch.xml', 'cell.launch.xml']


@each_file
def test_arguments_have_defaults_and_descriptions(file):
    arguments = ET.parse(file).getroot().findall('arg')
    assert [argument.get('name') for argument in arguments] == ARGUMENTS
    for argument in arguments:
        assert argument.get('default') is not None
        assert argument.get('description').endswith('.')


@each_file
def test_every_executable_exists(file):
    wanted = set(MODELS) - ({'rig_bench'} if file.name == 'cell.launch.xml' else set())
    assert {node.get('exec') for node in nodes(file)} == wanted
    # setup.py makes an executable of each of these names.
    listed = re.search(r'NODES = \((.*?)\)', (ROOT / 'setup.py').read_text(), re.DOTALL)[1]
    assert set(re.findall(r"'(\w+)'", listed)) == set(MODELS)
    for node in nodes(file):
        assert node.get('pkg') == 'suspended_ctrl'
        assert node.get('name') == node.get('exec')


@each_file
def test_every_parameter_is_declared_and_every_variable_an_argument(file):
    for node in nodes(file):
        model = MODELS[node.get('exec')]
        for parameter in node.findall('param'):
            name = parameter.get('name')
            if name is not None:
                assert name in (*model.model_fields, *RCLPY_PARAMETERS)
    assert set(re.findall(r'\$\(var (\w+)\)', file.read_text())) <= set(ARGUMENTS)


@each_file
def test_every_node_gets_the_parameter_file_the_rig_and_whether_to_activate(file):
    for node in nodes(file):
        parameters = node.findall('param')
        assert parameters[0].get('from') == '$(var parameters)'
        assert {'rig', 'activate', 'use_sim_time'} <= {p.get('name') for p in parameters}


@each_file
def test_default_parameter_file_is_there_and_allowed(file):
    (default,) = [argument.get('default')
                  for argument in ET.parse(file).getroot().findall('arg')
                  if argument.get('name') == 'parameters']
    check_file(ROOT / default.replace('$(find-pkg-share suspended_ctrl)/', ''))


@each_file
def test_only_the_supervisors_end_ends_the_launch(file):
    assert {node.get('exec'): node.get('on_exit') for node in nodes(file)} == {
        node.get('exec'): 'shutdown' if node.get('exec') == 'safety_supervisor' else None
        for node in nodes(file)}


@each_file
def test_cautions_stand_at_the_top(file):
    top = ' '.join(file.read_text().split('-->')[0].split())
    for caution in CAUTIONS:
        assert caution in top


@pytest.mark.graph
@each_file
def test_launching_brings_the_nodes_up(file, tmp_path):
    pytest.importorskip('launch_ros', reason='launch_ros comes with a ROS installation')
    pytest.importorskip('launch_xml', reason='launch_xml comes with a ROS installation')
    script = (
        'import sys\n'
        'from launch import LaunchDescription, LaunchService\n'
        'from launch.actions import IncludeLaunchDescription\n'
        'from launch.launch_description_sources import AnyLaunchDescriptionSource\n'
        'service = LaunchService()\n'
        'service.include_launch_description(LaunchDescription([IncludeLaunchDescription(\n'
        f'    AnyLaunchDescriptionSource({str(file)!r}),\n'
        "    launch_arguments={'namespace': 'cell'}.items())]))\n"
        'sys.exit(service.run())\n')
    log = tmp_path / 'launch.log'
    # Against the bench the checks turn green; without a plant the supervisor says its cautions.
    sign = 'locked -> ready' if file.name == 'bench.launch.xml' else CAUTIONS[-1]
    with own_domain() as domain, log.open('w') as out:
        environment = dict(os.environ) | {
            'ROS_DOMAIN_ID': str(domain), 'ROS_AUTOMATIC_DISCOVERY_RANGE': 'LOCALHOST',
            'ROS_LOG_DIR': str(tmp_path)}
        launched = subprocess.Popen([sys.executable, '-c', script], env=environment, stdout=out,
                                    stderr=subprocess.STDOUT)
        try:
            until = time.monotonic() + 90.0
            while sign not in log.read_text():
                assert time.monotonic() < until, log.read_text()
                assert launched.poll() is None, log.read_text()
                time.sleep(0.1)
        finally:
            launched.send_signal(signal.SIGINT)
            launched.wait(30.0)
    assert log.read_text().count('process has finished cleanly') == len(nodes(file))
