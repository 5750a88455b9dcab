"""Rig files with one thing wrong: refused in one line that says where, what and what else."""

from dataclasses import dataclass
from pathlib import Path

import pytest
from rig_text import BAY_HEAD, changed, line_of, SHORT

from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.file import load_rig


@dataclass(frozen=True)
class Bad:
    """
    A spoilt file.

    ``old`` in ``text`` becomes ``new``; the message must name ``key``, ``value`` and ``allowed``
    and the line on which ``at`` (``new`` if left out) begins.
    """

    old: str
    new: str
    key: str
    value: str
    allowed: str
    at: str = ''
    text: str = SHORT


R1 = 'rotors[0].'
CURVE = 'thrust_coefficient_n_s2: 3.0e-5'
INERTIA = '[0.17, 0.16, 0.21]'
AXIS = 'axis: [-0.50, -0.72, 0.53]'

UNITS = [
    Bad('mass_kg: 6.2', 'mass_g: 6200', 'body.mass_g', '6200', 'mass_kg (in kilograms)'),
    Bad('mass_kg: 6.2', 'mass: 6.2', 'body.mass', '6.2', 'unit is missing, did you mean mass_kg'),
    Bad('hook_m: [', 'hook_mm: [', 'tether.hook_mm', '[0, 0, 0.1]', 'hook_m (in metres)'),
    Bad('speed_max_rad_s: 900', 'speed_max_rpm: 8594', R1 + 'speed_max_rpm', '8594',
        'speed_max_rad_s (in radians per second)'),
    Bad('stiffness_n_per_m: 74', 'stiffness_n_per_mm: 0.074', 'tether.stiffness_n_per_mm', '0.074',
        'stiffness_n_per_m (in newtons per metre)'),
    Bad('latency_s: 0.008', 'latency_ms: 8', 'sensors.pose.latency_ms', '8',
        'latency_s (in seconds)'),
    Bad('inertia_kg_m2: [', 'inertia_g_mm2: [', 'body.inertia_g_mm2', INERTIA,
        'inertia_kg_m2 (in kilogram square metres)'),
    Bad('keep_in_m: {', 'keep_in: {', 'keep_in', '{x: [-4.2, 4.2]', 'keep_in_m (in metres)'),
    Bad('mass_kg: 6.2', 'mass_kg: 6.2 kg', 'body.mass_kg', "'6.2 kg'", 'without a unit'),
    Bad('mass_kg: 6.2', 'mass_kg: "6.2"', 'body.mass_kg', "'6.2'", 'a number in kilograms'),
]
KEYS = [
    Bad('stiffness_n', 'stifness_n', 'tether.stifness_n_per_m', '74', 'mean stiffness_n_per_m'),
    Bad('    y:     {', '    z:     {', 'carrier.axes.z', '{min_m: -1.5',
        'allowed here: x, y, hoist'),
    Bad('emergency_stop_required', 'emergency_stop_needed', 'emergency_stop_needed', 'true',
        'mean emergency_stop_required'),
    Bad('  mass_kg: 6.2\n', '', 'body.mass_kg', 'missing', 'required, in kilograms', at='body:'),
    Bad('  carrier_states', '  # carrier_states', 'sensors.carrier_states', 'missing',
        'the carrier has axes x, y, hoist', at='sensors:'),
    Bad(', noise_fraction: 0.01', '', 'sensors.rotor_states.noise_fraction', 'missing',
        'unless telemetry: false', at='  rotor_states'),
    Bad('    ' + CURVE + '\n', '', R1 + 'thrust_coefficient_n_s2', 'missing', 'thrust_curve',
        at='  - name: r1'),
    Bad('  mass_kg: 6.2', '  mass_kg: 6.2\n  mass_kg: 6.3', 'mass_kg', '6.3', 'each key once',
        at='  mass_kg: 6.3'),
    Bad('body:', '7: 8\nbody:', 'the file', '7', 'keys are plain words', at='name:'),
]
NUMBERS = [
    Bad('mass_kg: 6.2', 'mass_kg: .nan', 'body.mass_kg', '.nan', 'a finite number'),
    Bad('mass_kg: 6.2', 'mass_kg: -.inf', 'body.mass_kg', '-.inf', 'finite number'),
    Bad('mass_kg: 6.2', 'mass_kg: -6.2', 'body.mass_kg', '-6.2', 'above 0 in kilograms'),
    Bad('mass_kg: 6.2', 'mass_kg: 0', 'body.mass_kg', '0', 'above 0'),
    Bad('mass_kg: 6.2', 'mass_kg: 1.0e300', 'body.mass_kg', '1e+300', 'at most 1e+09'),
    Bad('mass_kg: 6.2', 'mass_kg: 1' + '0' * 400, 'body.mass_kg', '20 digits', 'a number'),
    Bad('mass_kg: 6.2', 'mass_kg: true', 'body.mass_kg', 'true', 'a number'),
    Bad('mass_kg: 6.2', 'mass_kg:', 'body.mass_kg', 'empty', 'a number'),
    Bad('mass_kg: 6.2', 'mass_kg: [6.2]', 'body.mass_kg', '[6.2]', 'a number'),
    Bad('mass_kg: 6.2', 'mass_kg: 2020-01-01', 'body.mass_kg', '2020-01-01', 'numbers'),
    Bad('mass_kg: 6.2', 'mass_kg: !kilo 6.2', 'body.mass_kg', '6.2', 'text, numbers'),
    Bad('latency_s: 0.008', 'latency_s: -0.008', 'sensors.pose.latency_s', '-0.008',
        'at least 0 in seconds'),
    Bad('rate_hz: 200', 'rate_hz: 0', 'sensors.pose.rate_hz', '0', 'above 0 in hertz'),
    Bad('noise_fraction: 0.01', 'noise_fraction: 1.0', 'sensors.rotor_states.noise_fraction',
        '1.0', 'below 1'),
    Bad('position_m: [0.32, 0.32, 0.24]', 'position_m: [0.32, .nan, 0.24]', R1 + 'position_m[1]',
        '.nan', 'finite'),
    Bad('hook_m: [0, 0, 0.10]', 'hook_m: [0, 0]', 'tether.hook_m', '[0, 0]', 'at least 3'),
    Bad('hook_m: [0, 0, 0.10]', 'hook_m: 0.10', 'tether.hook_m', '0.1', 'a list'),
    Bad('drag_area_m2: [0.08', 'drag_area_m2: [-0.08', 'body.drag_area_m2[0]', '-0.08',
        'at least 0'),
]
BODY = [
    Bad(INERTIA, '[0.17, 0.16, 0.4]', 'body.inertia_kg_m2', '[0.17, 0.16, 0.4]',
        'no principal moment above the sum'),
    Bad(INERTIA, '[0.17, 0.16]', 'body.inertia_kg_m2', '[0.17, 0.16]', '3 rows of 3'),
    Bad(INERTIA, '[0.17, -0.16, 0.2]', 'body.inertia_kg_m2[1]', '-0.16', 'above 0'),
    Bad(INERTIA, '[0.17, .inf, 0.2]', 'body.inertia_kg_m2[1]', '.inf', 'above 0'),
    Bad(INERTIA, '[0.17, .nan, 0.2]', 'body.inertia_kg_m2[1]', '.nan', 'above 0'),
    Bad(INERTIA, '[[0.17, 0.1, 0], [0, 0.16, 0], [0, 0, 0.2]]', 'body.inertia_kg_m2',
        '[[0.17, 0.1, 0]', 'symmetric'),
    Bad(INERTIA, '[[0.17, 0.3, 0], [0.3, 0.16, 0], [0, 0, 0.2]]', 'body.inertia_kg_m2',
        '[0.3, 0.16, 0]', 'positive principal moments'),
    Bad(INERTIA, '[[0.17, x, 0], [0, 0.16, 0], [0, 0, 0.2]]', 'body.inertia_kg_m2[0][1]', "'x'",
        'a number'),
    Bad(INERTIA, 'heavy', 'body.inertia_kg_m2', "'heavy'", '3 numbers'),
]
ROTORS = [
    Bad(AXIS, 'axis: [0, 0, 0]', R1 + 'axis', '[0, 0, 0]', 'not zero'),
    Bad('spin: 1', 'spin: 2', R1 + 'spin', '2', '1 or -1'),
    Bad('spin: 1', 'spin: true', R1 + 'spin', 'true', '1 or -1'),
    Bad('name: r2', 'name: r1', 'rotors[1].name', "'r1'", 'no other rotor', at='  - name: r1\n    '
        'position_m: [0.32, 0.32, -0.24]'),
    Bad('name: r2', 'name: 2', 'rotors[1].name', '2', 'text'),
    Bad('reversible: false', 'reversible: no', R1 + 'reversible', "'no'", 'true or false'),
    Bad('reversible: false', 'reversible: 0', R1 + 'reversible', '0', 'true or false'),
    Bad('speed_min_rad_s: 0', 'speed_min_rad_s: 900', R1 + 'speed_min_rad_s', '900',
        'below speed_max_rad_s, 900'),
    Bad('speed_min_rad_s: 0', 'speed_min_rad_s: -170', R1 + 'speed_min_rad_s', '-170',
        'at least 0'),
    Bad(CURVE, CURVE + '\n    thrust_curve: {speed_rad_s: [900], thrust_n: [24]}',
        R1 + 'thrust_coefficient_n_s2', '3e-05', 'not both'),
    Bad(CURVE, 'thrust_curve: {speed_rad_s: [170, 800], thrust_n: [1, 20]}',
        R1 + 'speed_max_rad_s', '900', 'last speed of thrust_curve, 800',
        at='    speed_max_rad_s'),
    Bad(CURVE, 'thrust_curve: {speed_rad_s: [170, 900], thrust_n: [20, 20]}',
        R1 + 'thrust_curve.thrust_n[1]', '20', 'above the one before'),
    Bad(CURVE, 'thrust_curve: {speed_rad_s: [900, 170], thrust_n: [1, 20]}',
        R1 + 'thrust_curve.speed_rad_s[1]', '170', 'above the one before'),
    Bad(CURVE, 'thrust_curve: {speed_rad_s: [170, 900], thrust_n: [20]}',
        R1 + 'thrust_curve.thrust_n', '[20]', 'there are 2 speeds'),
    Bad(CURVE, 'thrust_curve: {speed_rad_s: [0, 900], thrust_n: [0.1, 20]}',
        R1 + 'thrust_curve.thrust_n[0]', '0.1', '0 at speed 0'),
    Bad(CURVE, 'thrust_curve: {speed_rad_s: [170, 900], thrust_n: [0, 20]}',
        R1 + 'thrust_curve.thrust_n[0]', '0', 'above 0'),
    Bad(CURVE, 'thrust_curve: {speed_rad_s: [0], thrust_n: [0]}',
        R1 + 'thrust_curve.speed_rad_s', '[0]', 'at least one speed above 0'),
    Bad(SHORT[SHORT.index('  - name: r1'):SHORT.index('tether:')], '  []\n', 'rotors',
        '[]', 'at least 1', at='rotors:'),
]
WHOLE = [
    Bad('min_m: -3.5', 'min_m: 3.5', 'carrier.axes.x.min_m', '3.5', 'below max_m, 3.5'),
    Bad('x: [-4.2, 4.2]', 'x: [4.2, -4.2]', 'keep_in_m.x', '[4.2, -4.2]', 'lower below upper'),
    Bad('z: [0.5, 4.6]', 'z: [3.0, 4.6]', 'keep_in_m.z', '[3.0, 4.6]', 'equilibrium'),
    Bad('rotation_wxyz: [1, 0, 0, 0]', 'rotation_wxyz: [0, 0, 0, 0]', 'sensors.pose.rotation_wxyz',
        '[0, 0, 0, 0]', 'not zero', at='         position_m: [0, 0, 0], rotation'),
    Bad('working_load_n: 150', 'working_load_n: 61', 'tether.working_load_n', '61',
        'above the weight of platform and tether, 61.39 newtons'),
    Bad('slack_margin_n: 5', 'slack_margin_n: 61', 'tether.slack_margin_n', '61',
        'below the weight of the platform, 60.8 newtons'),
    Bad('name: bay_head', 'name: a/b', 'name', "'a/b'", 'letters'),
    Bad('name: bay_head', 'name: "a\\nb"', 'name', r"'a\nb'", 'letters'),
    Bad('emergency_stop_required: true', 'emergency_stop_required: yes',
        'emergency_stop_required', "'yes'", 'true or false'),
    Bad('body:', 'body: 3\nhull:', 'hull', '{mass_kg', 'allowed here: name, body',
        at='hull:'),
]
YAML_ITSELF = [
    Bad('rotors:', 'rotors: [1, 2', '', '- name: r1', 'expected', at='  - name: r1'),
    Bad('body:', '\tbody:', '', 'body:', 'cannot start any token'),
    Bad('rotors:', '---\nrotors:', '', '---', 'another document'),
    Bad('mass_kg: 6.2', 'mass_kg: *weight', '', 'mass_kg: *weight', 'undefined alias'),
    Bad('body:', 'body: !frame', 'body', '!frame', 'no tags'),
]


def refusal(text: str, tmp_path: Path) -> tuple[Path, str]:
    file = tmp_path / 'rig.yaml'
    file.write_text(text)
    with pytest.raises(InputError) as caught:
        load_rig(file)
    return file, str(caught.value)


@pytest.mark.parametrize('bad', [*UNITS, *KEYS, *NUMBERS, *BODY, *ROTORS, *WHOLE, *YAML_ITSELF],
                         ids=lambda bad: f'{bad.new.strip()[:40]!r}'.strip("'"))
def test_refused_in_one_line(bad: Bad, tmp_path: Path) -> None:
    text = changed(bad.text, bad.old, bad.new)
    file, said = refusal(text, tmp_path)
    at = bad.at or bad.new
    assert said.isprintable()
    where = f'{file}:{line_of(text, at)}: '
    assert said.startswith(where + bad.key)
    value, _, allowed = said[len(where):].partition('value ')[2].partition(': ')
    # A mapping's own colons end the value early: what follows counts as both.
    assert bad.value in f'{value}: {allowed}'
    assert bad.allowed in allowed


def test_the_file_that_is_spoilt_is_good(tmp_path: Path) -> None:
    (tmp_path / 'rig.yaml').write_text(SHORT)
    assert load_rig(tmp_path / 'rig.yaml').rotors.count == 2


def test_a_file_that_holds_itself(tmp_path: Path) -> None:
    _, said = refusal('&all\nbody: *all\n', tmp_path)
    assert ":2: body: value 'alias': no alias to something that holds it" in said


def test_first_by_line_and_how_many_more(tmp_path: Path) -> None:
    text = changed(SHORT, 'slack_margin_n: 5', 'slack_margin_n: -5')
    text = changed(text, 'mass_kg: 6.2', 'mass_kg: .nan')
    text = changed(text, 'noise_m: 0.0005', 'noise_m: x')
    _, said = refusal(text, tmp_path)
    assert 'body.mass_kg' in said
    assert said.endswith(' (and 2 more)')


@pytest.mark.parametrize('content', ['', '# only this\n', '[1, 2]', 'words', '{}', 'name: x',
                                     '[' * 400, 'name: \x00'])
def test_whole_file_refused(content: str, tmp_path: Path) -> None:
    file, said = refusal(content, tmp_path)
    assert said.startswith(f'{file}:1: ')
    assert said.isprintable()


def test_aliases_of_aliases_do_not_fill_the_memory(tmp_path: Path) -> None:
    rows = ['a: &a [x, x, x, x, x, x, x, x, x, x]']
    rows += [f'{new}: &{new} [{", ".join(["*" + old] * 10)}]'
             for old, new in zip('abcdefgh', 'bcdefghi', strict=True)]
    _, said = refusal('\n'.join(rows), tmp_path)
    assert 'at most 50000 values' in said


@pytest.mark.parametrize('given, allowed', [
    ('none.yaml', 'no such file'), ('.', 'a directory'), ('', 'a name of a file'),
    ('bytes.yaml', 'UTF-8'), ('no\0file.yaml', 'a readable YAML file')])
def test_files_that_cannot_be_read(given: str, allowed: str, tmp_path: Path) -> None:
    (tmp_path / 'bytes.yaml').write_bytes(b'name: \xff\xfe')
    with pytest.raises(InputError) as caught:
        load_rig(given, relative_to=tmp_path)
    said = str(caught.value)
    assert allowed in said
    assert said.isprintable()


def one_way(least: float, rows: list[str]) -> str:
    """Text of a rig with rotors ``position, axis, spin``, all one-way from ``least`` on."""
    start, end = SHORT.index('  - name: r1'), SHORT.index('tether:')
    rotors = ''
    for i, row in enumerate(rows):
        position, axis, spin = row.split('; ')
        rotors += (f'  - {{name: q{i}, position_m: {position}, axis: {axis}, spin: {spin}, '
                   'thrust_coefficient_n_s2: 3.0e-5, torque_coefficient_nm_s2: 4.8e-7, '
                   f'speed_min_rad_s: {least}, speed_max_rad_s: 900, reversible: false, '
                   'time_constant_s: 0.04, inertia_kg_m2: 6.0e-5}\n')
    return SHORT[:start] + rotors + SHORT[end:]


LIFTERS = ['[0.3, 0.3, 0]; [0, 0, 1]; 1', '[-0.3, 0.3, 0]; [0, 0, 1]; -1',
           '[-0.3, -0.3, 0]; [0, 0, 1]; 1', '[0.3, -0.3, 0]; [0, 0, 1]; -1']
SAME_SPIN = [row.replace('; -1', '; 1') for row in LIFTERS]
APART = ['[0, 0.2, 0.1]; [1, 0, 0]; 1', '[0, -0.2, 0.1]; [-1, 0, 0]; 1']
SIDEWAYS = ['[0, 0, 0]; [1, 0, 0]; 1']
OPPOSED = ['[0, 0, 0]; [1, 0, 0]; 1', '[0, 0, 0]; [-1, 0.0005, 0]; 1']


@pytest.mark.parametrize('rows, least', [
    (LIFTERS, 170), (SIDEWAYS, 0), (APART, 0), (SAME_SPIN, 0), ([*LIFTERS, *SIDEWAYS], 0)])
def test_layouts_that_idle(rows: list[str], least: float, tmp_path: Path) -> None:
    file = tmp_path / 'rig.yaml'
    file.write_text(one_way(least, rows))
    assert load_rig(file).rotors.count == len(rows)


def test_a_direction_off_by_rounding_idles_and_one_off_by_three_degrees_does_not(
        tmp_path: Path) -> None:
    file = tmp_path / 'rig.yaml'
    file.write_text(one_way(170, OPPOSED))
    assert load_rig(file).rotors.count == 2
    _, said = refusal(one_way(170, [OPPOSED[0], OPPOSED[1].replace('0.0005', '0.05')]), tmp_path)
    assert 'able to idle' in said


@pytest.mark.parametrize('rows, allowed', [
    (SIDEWAYS, 'cancel out but for a vertical force'),  # pushes it away
    (APART, 'cancel out but for a vertical force'),     # turns it about z
    (SAME_SPIN, 'cancel out but for a vertical force'),  # drag torque turns it about z
    ([*LIFTERS, *SIDEWAYS], 'cancel out but for a vertical force')])
def test_layouts_that_cannot_idle(rows: list[str], allowed: str, tmp_path: Path) -> None:
    _, said = refusal(one_way(170, rows), tmp_path)
    assert ': rotors: value least thrusts 0.867' in said
    assert allowed in said
    assert said.isprintable()


def test_one_rotor_less_cannot_idle(tmp_path: Path) -> None:
    start, end = BAY_HEAD.index('  - name: r1'), BAY_HEAD.index('  - name: r2')
    _, said = refusal(BAY_HEAD[:start] + BAY_HEAD[end:], tmp_path)
    assert 'one-way rotors able to idle' in said


def test_least_speeds_that_lift_the_platform_off_its_tether(tmp_path: Path) -> None:
    # Four times 3.0e-5 * 700^2 is 58.8 N of 60.8: 2 N are left where 5 must be.
    _, said = refusal(one_way(700, LIFTERS), tmp_path)
    assert 'tether tension 2 newtons' in said
    assert 'slack_margin_n, 5 newtons' in said
