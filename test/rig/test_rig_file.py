"""Good rig files in every form that the format allows."""

from pathlib import Path
import sys

from hypothesis import given, settings
from hypothesis import strategies as st
import numpy as np
import pytest
from rig_text import BAY_HEAD, changed, SEAM_HEAD, SHORT
from scipy.spatial.transform import Rotation

from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.file import build_rig, load_rig
from suspended_ctrl.rig.parts import BodySection, PoseSection, TetherSection
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.rig.schema import RigFile
from suspended_ctrl.rig.shared_files import config_folder
from suspended_ctrl.rig.yaml_file import read_tree
from suspended_ctrl.rig.yaml_tree import parse


def rig_of(text: str) -> Rig:
    return build_rig(read_tree(parse(text, 'rig.yaml'), 'rig.yaml', RigFile))


def test_full_inertia_matrix() -> None:
    matrix = '[[0.17, 0.01, 0], [0.01, 0.16, -0.02], [0, -0.02, 0.21]]'
    rig = rig_of(changed(SHORT, '[0.17, 0.16, 0.21] ', matrix))
    np.testing.assert_array_equal(
        rig.body.inertia_kg_m2, [[0.17, 0.01, 0], [0.01, 0.16, -0.02], [0, -0.02, 0.21]])


@settings(max_examples=40, deadline=None)
@given(masses=st.lists(st.floats(0.1, 5.0), min_size=4, max_size=8), seed=st.integers(0, 999))
def test_every_cloud_of_point_masses_has_a_permitted_inertia(masses: list[float],
                                                             seed: int) -> None:
    points = np.random.default_rng(seed).normal(size=(len(masses), 3))
    inertia = sum(m * (p @ p * np.eye(3) - np.outer(p, p))
                  for m, p in zip(masses, points, strict=True))
    rows = [[float(x) for x in row] for row in inertia]
    text = ('{mass_kg: 1, centre_of_mass_m: [0, 0, 0], drag_area_m2: [0, 0, 0], '
            f'inertia_kg_m2: {rows}}}')
    body = read_tree(parse(text, 'body.yaml'), 'body.yaml', BodySection)
    # Written with every digit.
    np.testing.assert_array_equal(body.inertia_kg_m2, inertia)


def test_a_thin_plate_is_a_body() -> None:
    rig = rig_of(changed(SHORT, '[0.17, 0.16, 0.21]', '[0.1, 0.2, 0.3]'))
    assert rig.body.inertia_kg_m2[2, 2] == 0.3


def test_axes_become_unit_vectors() -> None:
    text = BAY_HEAD.replace('axis: [-0.50, -0.72, 0.53]', 'axis: [-5.0, -7.2, 5.3]')
    # Rounding of one division.
    np.testing.assert_allclose(rig_of(text).rotors.axis, load_rig('bay_head').rotors.axis,
                               atol=1e-15)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.floats(-1e3, 1e3, allow_subnormal=False), min_size=4, max_size=4)
       .filter(lambda q: max(map(abs, q)) > 1e-300))
def test_rotations_are_normalised_and_keep_their_meaning(quaternion: list[float]) -> None:
    text = ('{rate_hz: 200, latency_s: 0, position_noise_m: 0, attitude_noise_rad: 0, '
            f'rotation_wxyz: {quaternion}}}')
    found = read_tree(parse(text, 'pose.yaml'), 'pose.yaml', PoseSection).rotation_wxyz
    # Rounding of a square root and a division.
    assert np.linalg.norm(found) == pytest.approx(1.0, abs=1e-15)
    scaled = np.array(quaternion) / max(map(abs, quaternion))
    turned = (Rotation.from_quat(scaled, scalar_first=True).inv()
              * Rotation.from_quat(found, scalar_first=True))
    # scipy's arc sine near zero gives half the digits.
    assert turned.magnitude() < 1e-7


CURVE = 'thrust_curve: {speed_rad_s: [170, 400, 900], thrust_n: [0.7, 4.6, 24.3]}'


def test_a_curve_beside_square_laws_has_its_own_thrust_and_top() -> None:
    rig = rig_of(changed(BAY_HEAD, 'thrust_coefficient_n_s2: 3.0e-5', CURVE))
    rotors = rig.rotors
    np.testing.assert_array_equal(rotors.curve_speed_rad_s[0], [0, 170, 400, 900])
    np.testing.assert_array_equal(rotors.curve_thrust_n[0], [0, 0.7, 4.6, 24.3])
    assert (np.diff(rotors.curve_speed_rad_s) > 0).all()
    assert (np.diff(rotors.curve_thrust_n) > 0).all()
    model = RotorModel(rotors, rig.body.centre_of_mass_m)
    for speed in (10.0, 170.0, 333.0, 900.0, 1000.0):
        thrust = model.thrust(np.full(8, speed))
        # Knots put inside a straight piece: rounding only.
        np.testing.assert_allclose(thrust[1:], 3.0e-5 * speed ** 2, rtol=1e-13)
    for speed, wanted in ((170.0, 0.7), (400.0, 4.6), (900.0, 24.3)):
        assert model.thrust(np.full(8, speed))[0] == pytest.approx(wanted, rel=1e-13)
    # Torque per thrust is taken at the top of the curve.
    assert rotors.thrust_coefficient_n_s2[0] == pytest.approx(24.3 / 900 ** 2, rel=1e-15)
    np.testing.assert_allclose(rotors.thrust_coefficient_n_s2[1:], 3.0e-5, rtol=1e-15)


def test_a_short_curve_keeps_its_shape_beside_a_long_one() -> None:
    text = changed(BAY_HEAD, 'thrust_coefficient_n_s2: 3.0e-5', CURVE)
    short = 'thrust_curve: {speed_rad_s: [0, 300, 950], thrust_n: [0, 2.5, 27.0]}'
    alone = rig_of(changed(BAY_HEAD, 'thrust_coefficient_n_s2: 3.0e-5', short))
    both = rig_of(changed(text, 'thrust_coefficient_n_s2: 3.0e-5', short))
    speeds = np.linspace(0.0, 950.0, 39)
    centre = np.zeros(3)
    for speed in speeds:
        wanted = RotorModel(alone.rotors, centre).thrust(np.full(8, speed))[0]
        found = RotorModel(both.rotors, centre).thrust(np.full(8, speed))[1]
        assert found == pytest.approx(wanted, rel=1e-13, abs=1e-14)


@pytest.mark.parametrize('rotor_states', ['{telemetry: false}', None,
                                          '{telemetry: false, rate_hz: 200}'])
def test_no_telemetry(rotor_states: str | None) -> None:
    line = '  rotor_states: {rate_hz: 200, noise_fraction: 0.01}\n'
    new = '' if rotor_states is None else f'  rotor_states: {rotor_states}\n'
    assert rig_of(changed(SHORT, line, new)).sensors.rotor_states is None


def test_telemetry_true_is_the_default() -> None:
    text = changed(SHORT, 'rotor_states: {', 'rotor_states: {telemetry: true, ')
    speeds = rig_of(text).sensors.rotor_states
    assert speeds is not None
    assert speeds.rate_hz == 200.0


def test_no_imu() -> None:
    start = SHORT.index('  imu:')
    end = SHORT.index('  rotor_states:')
    assert rig_of(SHORT[:start] + SHORT[end:]).sensors.imu is None


def test_tether_load() -> None:
    text = changed(SHORT, 'sensors:\n',
                   'sensors:\n  tether_load: {rate_hz: 100, noise_n: 0.3}\n')
    cell = rig_of(text).sensors.tether_load
    assert cell is not None
    assert (cell.rate_hz, cell.noise_n) == (100.0, 0.3)


def test_hoist_only_with_an_offset() -> None:
    limits = 'speed_max_m_s: 0.2, acceleration_max_m_s2: 0.3, time_constant_s: 0.2'
    text = changed(SEAM_HEAD, 'sensors:\n',
                   f'  axes: {{hoist: {{min_m: 1, max_m: 3, zero_offset_m: -2, {limits}}}}}\n'
                   'sensors:\n  carrier_states: {rate_hz: 50, noise_m: 0.001}\n')
    carrier = rig_of(text).carrier
    assert carrier.axes == ('hoist',)
    np.testing.assert_array_equal(carrier.anchor_map(np.array([2.5])), [0, 0, 7.0])
    np.testing.assert_array_equal(carrier.position_for(np.array([1.0, 1.0, 9.0])), [3.0])


@pytest.mark.parametrize('axes', ['  axes: {}\n', '  axes:\n'])
def test_axes_said_to_be_none(axes: str) -> None:
    assert rig_of(changed(SEAM_HEAD, 'sensors:\n', axes + 'sensors:\n')).carrier.axes == ()


def test_axes_stay_in_order_whatever_the_file_says_first() -> None:
    start, middle, end = (SHORT.index(part) for part in ('    x: ', '    hoist: ', 'sensors:'))
    text = SHORT[:start] + SHORT[middle:end] + SHORT[start:middle] + SHORT[end:]
    carrier = rig_of(text).carrier
    assert carrier.axes == ('x', 'y', 'hoist')
    np.testing.assert_array_equal(carrier.max_m, [3.5, 1.5, 0.6])


@pytest.mark.parametrize('line, wanted', [('emergency_stop_required: false\n', False), ('', True)])
def test_emergency_stop(line: str, wanted: bool) -> None:
    text = changed(SHORT, 'emergency_stop_required: true\n', line)
    assert rig_of(text).emergency_stop_required is wanted


def test_anchors_and_merges() -> None:
    text = changed(SHORT, '    x:     {', '    x:     &axis {')
    start, end = text.index('    y: '), text.index('    hoist: ')
    text = text[:start] + '    y:     {<<: *axis, min_m: -1.0}\n' + text[end:]
    np.testing.assert_array_equal(rig_of(text).carrier.min_m, [-3.5, -1.0, -0.6])


@settings(max_examples=60, deadline=None)
@given(st.floats(1e-9, 1e9))
def test_numbers_survive_the_file_to_the_last_bit(number: float) -> None:
    start, end = SEAM_HEAD.index('tether:\n') + len('tether:\n'), SEAM_HEAD.index('carrier:')
    text = changed(SEAM_HEAD[start:end], 'stiffness_n_per_m: 74', f'stiffness_n_per_m: {number!r}')
    tether = read_tree(parse(text, 'tether.yaml'), 'tether.yaml', TetherSection)
    assert tether.stiffness_n_per_m == number


def test_found_by_name_path_and_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / 'mine.yaml').write_text(changed(SHORT, 'name: bay_head', 'name: mine'))
    (tmp_path / 'plain').write_text(changed(SHORT, 'name: bay_head', 'name: plain'))
    assert load_rig(tmp_path / 'mine.yaml').name == 'mine'
    assert load_rig('mine.yaml', relative_to=tmp_path).name == 'mine'
    assert load_rig('plain', relative_to=tmp_path).name == 'plain'
    assert load_rig('seam_head', relative_to=tmp_path).name == 'seam_head'
    monkeypatch.chdir(tmp_path)
    assert load_rig('./mine.yaml').name == 'mine'
    assert load_rig(config_folder() / 'rigs' / 'bay_head.yaml').name == 'bay_head'
    with pytest.raises(InputError, match=r'^mine: no such file in .*one of bay_head, seam_head$'):
        load_rig('mine')


def installed(tmp_path: Path, site: str) -> Path:
    """Tree as installers leave it, with this package's module that finds the folder."""
    source = Path(sys.modules['suspended_ctrl.rig.shared_files'].__file__ or '')
    package = tmp_path / site / 'suspended_ctrl' / 'rig'
    package.mkdir(parents=True)
    (package / 'shared_files.py').write_text(source.read_text())
    return package / 'shared_files.py'


@pytest.mark.parametrize('site', ['lib/python3.12/site-packages',
                                  'local/lib/python3.12/dist-packages', '.'])
def test_config_folder_of_an_installation(tmp_path: Path, site: str,
                                          monkeypatch: pytest.MonkeyPatch) -> None:
    import suspended_ctrl.rig.shared_files as shared_files
    share = tmp_path / 'share' / 'suspended_ctrl' / 'config'
    share.mkdir(parents=True)
    monkeypatch.setattr(shared_files, '__file__', str(installed(tmp_path, site)))
    assert shared_files.config_folder() == share


def test_an_installation_without_config_says_so(tmp_path: Path,
                                                monkeypatch: pytest.MonkeyPatch) -> None:
    import suspended_ctrl.rig.shared_files as shared_files
    monkeypatch.setattr(shared_files, '__file__', str(installed(tmp_path, 'site-packages')))
    monkeypatch.setattr(sys, 'prefix', str(tmp_path))
    with pytest.raises(InputError, match='install the package with its data files'):
        shared_files.config_folder()
