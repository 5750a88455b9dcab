"""Parameter models: their files, their descriptors, what they refuse."""

import importlib

import pytest
from rcl_interfaces.msg import ParameterType
import rclpy
from rclpy.context import Context
from rclpy.parameter import Parameter
from rclpy.signals import SignalHandlerOptions

from suspended_ctrl.nodes.domain import own_domain
from suspended_ctrl.nodes.parameter_files import check_file
from suspended_ctrl.nodes.parameters import (
    check,
    check_seen,
    declare,
    descriptor,
    may_change,
    RCLPY_PARAMETERS,
)
from suspended_ctrl.nodes.registry import MODELS
from suspended_ctrl.nodes.safety_parameters import SafetySupervisorParameters, settings_of
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.shared_files import config_folder
from suspended_ctrl.safety.settings import SafetySettings

FIELDS = [(node, name) for node, model in MODELS.items() for name in model.model_fields]


@pytest.mark.parametrize('file', sorted((config_folder() / 'parameters').glob('*.yaml')),
                         ids=lambda path: path.stem)
def test_every_parameter_file_is_allowed(file):
    check_file(file)


def test_default_file_says_every_default():
    given = check_file(config_folder() / 'parameters' / 'default.yaml')
    # Arguments of the launch files, which stand before the file.
    arguments = {'rig', 'activate', 'law', 'allocator'}
    for node, model in MODELS.items():
        wanted = {name: field.default for name, field in model.model_fields.items()
                  if name not in arguments and (node, name) != ('mission_player', 'mission')}
        assert given.get(node, {}) == wanted, node


@pytest.mark.parametrize('node, name', FIELDS)
def test_every_parameter_is_described(node, name):
    field = MODELS[node].model_fields[name]
    made = descriptor(name, field)
    assert made.description.endswith('.')
    assert made.read_only == (name not in ('law', 'allocator'))
    ranges = [*made.floating_point_range, *made.integer_range]
    if field.annotation in (int, float):
        (bounds,) = ranges
        assert bounds.from_value <= field.default <= bounds.to_value
    else:
        assert not ranges


@pytest.mark.parametrize('node, name', [
    (node, name) for node, name in FIELDS if MODELS[node].model_fields[name].annotation is float])
def test_bounds_are_inclusive_and_kept(node, name):
    model = MODELS[node]
    (bounds,) = descriptor(name, model.model_fields[name]).floating_point_range
    for inside in (bounds.from_value, bounds.to_value):
        assert getattr(check(model, {name: inside}, 'x'), name) == inside
    for outside in (bounds.from_value - 1e-6, bounds.to_value + 1e-6):
        with pytest.raises(InputError, match=rf'x: {name}: value .*from {bounds.from_value:g} to'):
            check(model, {name: outside}, 'x')


@pytest.mark.parametrize('node, given, words', [
    ('state_estimator', {'rate': 100.0}, r'rate: value 100.0: .*rate_hz'),
    ('state_estimator', {'rate_hz': 'fast'}, r"rate_hz: value 'fast': a number from 20 to 1000"),
    ('state_estimator', {'rate_hz': True}, r'rate_hz: value true: a number'),
    ('state_estimator', {'rate_hz': float('nan')}, r'rate_hz: value .nan: a number'),
    ('rig_bench', {'seed': 1.5}, r'seed: value 1.5: a whole number'),
    ('rig_bench', {'seed': -1}, r'seed: value -1: a whole number from 0'),
    ('rig_bench', {'mismatch': 'some'}, r"mismatch: value 'some': one of default, none"),
    ('mission_player', {'mission': 3}, r'mission: value 3: text'),
    ('safety_supervisor', {'demand_silence_s': 0.5}, r'demand_silence_s: value 0.5: .*to 0.08'),
])
def test_what_is_not_allowed_is_said_in_one_line(node, given, words):
    with pytest.raises(InputError, match=words) as refused:
        check(MODELS[node], given, node)
    assert '\n' not in str(refused.value)


def test_a_whole_number_stands_for_the_same_floating_point_number():
    rate = check(MODELS['state_estimator'], {'rate_hz': 100}, 'x').rate_hz
    assert rate == 100.0
    assert isinstance(rate, float)


@pytest.mark.parametrize('text, words', [
    ('state_estimator:\n  ros__parameters: {rate_hz: 100.0}\n',
     r'state_estimator: .*/\*\*/NODE'),
    ('/**/state_estimater:\n  ros__parameters: {rate_hz: 100.0}\n', r'/\*\*/state_estimater'),
    ('/**/state_estimator:\n  ros_parameters: {rate_hz: 100.0}\n', r'ros__parameters'),
    ('/**/state_estimator:\n  ros__parameters: {rate_hs: 100.0}\n', r'rate_hs.*rate_hz'),
    ('/**/state_estimator:\n  ros__parameters: {rate_hz: 1.0}\n', r'rate_hz: value 1.0'),
])
def test_files_that_ros_would_ignore_in_silence_are_refused(tmp_path, text, words):
    file = tmp_path / 'mine.yaml'
    file.write_text(text)
    with pytest.raises(InputError, match=words):
        check_file(file)


def test_a_bare_name_is_refused_under_a_namespace_only(tmp_path):
    file = tmp_path / 'mine.yaml'
    file.write_text('state_estimator:\n  ros__parameters: {rate_hz: 100.0}\n')
    check_seen([str(file)], 'state_estimator', '/')
    check_seen([str(file)], 'rig_bench', '/cell')
    with pytest.raises(InputError, match=r'ignored in namespace /cell'):
        check_seen([str(file)], 'state_estimator', '/cell')


def test_a_file_for_every_node_in_any_namespace_is_allowed(tmp_path):
    file = tmp_path / 'mine.yaml'
    file.write_text('/**:\n  ros__parameters: {rig: seam_head, use_sim_time: false}\n')
    assert all(given == {'rig': 'seam_head', 'use_sim_time': False}
               for given in check_file(file).values())


def test_supervisors_defaults_are_those_of_the_safety_part():
    rig = load_rig('bay_head')
    assert settings_of(SafetySupervisorParameters(), rig) == SafetySettings.for_rig(rig)


@pytest.fixture
def context():
    made = Context()
    with own_domain() as domain:
        rclpy.init(args=[], context=made, domain_id=domain,
                   signal_handler_options=SignalHandlerOptions.NO)
        yield made
        made.try_shutdown()


@pytest.mark.graph
def test_declared_parameters_carry_types_ranges_and_what_was_given(context):
    node = rclpy.create_node(
        'rig_bench', context=context, automatically_declare_parameters_from_overrides=True,
        parameter_overrides=[Parameter('wind_m_s', value=2), Parameter('seed', value=7)])
    try:
        parameters = declare(node, MODELS['rig_bench'])
        assert (parameters.wind_m_s, parameters.seed) == (2.0, 7)
        assert node.get_parameter('wind_m_s').value == 2.0
        kinds = {name: node.describe_parameter(name).type for name in ('wind_m_s', 'seed', 'rig')}
        assert kinds == {'wind_m_s': ParameterType.PARAMETER_DOUBLE,
                         'seed': ParameterType.PARAMETER_INTEGER,
                         'rig': ParameterType.PARAMETER_STRING}
        refused = node.set_parameters([Parameter('seed', value=8)])[0]
        assert not refused.successful
        assert node.get_parameter('seed').value == 7
    finally:
        node.destroy_node()


@pytest.mark.graph
def test_a_key_that_nobody_declared_is_refused_at_the_start(context):
    node = rclpy.create_node(
        'rig_bench', context=context, automatically_declare_parameters_from_overrides=True,
        parameter_overrides=[Parameter('sed', value=7)])
    try:
        with pytest.raises(InputError, match='rig_bench: sed: value 7: .*seed'):
            declare(node, MODELS['rig_bench'])
    finally:
        node.destroy_node()


def test_rclpy_declares_what_is_let_through():
    assert set(RCLPY_PARAMETERS) == {'use_sim_time', 'start_type_description_service'}


def test_run_time_parameters_are_the_two_that_name_parts():
    assert {name for node, name in FIELDS if may_change(MODELS[node].model_fields[name])} == {
        'law', 'allocator'}


@pytest.mark.parametrize('node', MODELS)
def test_every_executable_has_its_module_and_main(node):
    assert callable(importlib.import_module(f'suspended_ctrl.nodes.{node}').main)
