"""README.md says what the code takes and gives, table by table."""

import importlib
from pathlib import Path
import re
from types import UnionType
from typing import Any, get_args, get_origin, Union

from pydantic import BaseModel
import pytest

from suspended_ctrl.bench.fault_kinds import KINDS
from suspended_ctrl.cli import build_parser
from suspended_ctrl.mission.file import MissionFile
from suspended_ctrl.physics.values import SAFETY_STATES
from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.metrics import assess
from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.schema import RigFile
from suspended_ctrl.safety.limits import limit_table
from suspended_ctrl.safety.settings import SafetySettings

README = (Path(__file__).resolve().parents[1] / 'README.md').read_text(encoding='utf-8')


def tables(heading: str) -> list[list[list[str]]]:
    """Rows of cells of each table under a heading, header and rule left out."""
    level, title = heading.split(' ', 1)
    section = re.split(rf'^{level} {re.escape(title)}$', README, flags=re.MULTILINE)
    assert len(section) == 2, heading
    text = re.split(rf'^#{{1,{len(level)}}} ', section[1], flags=re.MULTILINE)[0]
    found = []
    for block in re.findall(r'(?:^\|.*\n)+', text, flags=re.MULTILINE):
        rows = [[cell.strip() for cell in line.strip().strip('|').split('|')]
                for line in block.splitlines()]
        found.append(rows[2:])
    return found


def names(cell: str) -> list[str]:
    """Code spans of a cell."""
    return re.findall(r'`([^`]+)`', cell)


def first_column(heading: str, table: int = 0) -> set[str]:
    """Code spans of a table's first column."""
    return {name for row in tables(heading)[table] for name in names(row[0])}


def sections_in(annotation: Any) -> tuple[str, type[BaseModel] | None]:
    """Model inside an annotation and what its place in a file is called: '', '[]' or '.*'."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return '', annotation
    origin = get_origin(annotation)
    if origin is None:
        return '', None
    for argument in get_args(annotation):
        _, model = sections_in(argument)
        if model is not None:
            mark = '' if origin in (Union, UnionType) else '.*' if origin is dict else '[]'
            return mark if mark else sections_in(argument)[0], model
    return '', None


def keys(model: type[BaseModel], before: str = '') -> set[str]:
    """Keys of everything in a file that holds a value, as paths."""
    found = set()
    for name, field in model.model_fields.items():
        path = f'{before}{name}'
        mark, inner = sections_in(field.annotation)
        if inner is None or not inner.model_fields:
            found.add(path)
        else:
            found |= keys(inner, f'{path}{mark}.')
    return found


def test_rig_table():
    same_for_each = {re.sub(r'axes\.(x|y|hoist)\.', 'axes.*.', key) for key in keys(RigFile)}
    headings = {'carrier.axes', 'sensors.imu', 'sensors.rotor_states', 'sensors.carrier_states',
                'sensors.tether_load'}
    assert first_column('## Rig file') - headings == same_for_each


def test_mission_table():
    assert first_column('## Missions') - {'accept'} == keys(MissionFile)


def test_fault_table():
    rows = tables('## Faults')[0]
    listed = {names(row[0])[0]: set(names(row[1])) for row in rows}
    general = {'kind', 'at_s', 'for_s', 'at_place'}
    assert listed == {get_args(kind.model_fields['kind'].annotation)[0]:
                      set(kind.model_fields) - general for kind in KINDS}


def test_topic_table():
    topics = pytest.importorskip('suspended_ctrl.nodes.topics', reason='rclpy is not installed')
    rows = tables('## Topics and services')[0]
    listed = {names(row[0])[0]: re.split(r'[:, ]', row[1])[0] for row in rows}
    assert listed == {name: topic.message_type.replace('/msg', '')
                      for name, topic in topics.GRAPH.items()}
    for row in rows:
        quality = topics.QOS[names(row[0])[0]]
        best_effort = quality.reliability == topics.ReliabilityPolicy.BEST_EFFORT
        assert (row[3] == 'latched') == topics.latched(names(row[0])[0])
        assert (row[3] == 'sensor data' or row[3].startswith('best effort')) == best_effort
        depth = re.search(r'depth (\d+)', row[3])
        assert depth is None or int(depth.group(1)) == quality.depth


def test_parameter_table():
    parameters = pytest.importorskip('suspended_ctrl.nodes.parameters',
                                     reason='rclpy is not installed')
    common = set(parameters.NodeParameters.model_fields)
    listed: dict[str, list[list[str]]] = {}
    for row in tables('### Nodes and parameters')[0]:
        if row[0].startswith('**'):
            rows = listed.setdefault(row[0].strip('*`'), [])
        else:
            rows.append(row)
    assert {names(row[0])[0] for row in listed.pop('every node')} == common
    assert len(listed) == 6
    for node, rows in listed.items():
        fields = parameter_model(node, parameters.NodeParameters).model_fields
        assert {names(row[0])[0] for row in rows} == set(fields) - common
        for row in rows:
            field = fields[names(row[0])[0]]
            assert row[2] == (f'{field.default:g}' if isinstance(field.default, int | float)
                              else field.default)
            limits = re.fullmatch(r'([\d.]+) to ([\d.]+)', row[1])
            if limits:
                assert parameters.allowed(field).endswith(
                    f'from {limits.group(1)} to {limits.group(2)}'), row


def parameter_model(node: str, base: type[BaseModel]) -> type[BaseModel]:
    """Model of a node's parameters."""
    module = importlib.import_module(f'suspended_ctrl.nodes.{node}')
    models = [value for value in vars(module).values() if isinstance(value, type)
              and issubclass(value, base) and value is not base]
    assert len(models) == 1
    return models[0]


def test_state_table():
    assert [names(row[0])[0] for row in tables('## Sequence and states')[0]] == list(SAFETY_STATES)


def test_limit_table():
    rig = load_rig('bay_head')
    limits = limit_table(rig, SafetySettings.for_rig(rig))
    rows = tables('### Limits')[0]
    assert [(names(row[0])[0], int(row[1])) for row in rows] == [
        (limit.name, limit.category) for limit in limits]
    for row, limit in zip(rows, limits, strict=True):
        for figure in re.findall(r'(\d[\d.]*) (?:rad|m|s|m/s|rad/s)\b', row[2]):
            assert float(figure) in (limit.limit, limit.hold_off_s), row


def dotted(value: Any, before: str = '') -> set[str]:
    """Keys of nested mappings, joined by dots."""
    found = set()
    for key, inner in value.items():
        found |= dotted(inner, f'{before}{key}.') if isinstance(inner, dict) else {before + key}
    return found


def test_metrics_table():
    made = assess(RunLog(), load_rig('bay_head')).metrics
    assert first_column('### Run folder') == dotted(made)


def test_command_tables():
    parser = build_parser()
    command = parser._subparsers._group_actions[0].choices['rehearse']
    options = {option for action in command._actions for option in action.option_strings}
    listed = {name.split()[0] for name in first_column('## Command line', 1)}
    assert listed == options - {'-h', '--help'}
    codes = {row[0] for row in tables('## Command line')[0]}
    assert codes == {'0', '1', '2', '3', '130'}
