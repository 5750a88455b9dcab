"""
The two rigs that come with the package.

Source of the expected figures: the reference rigs' description, which the files restate; its
reach was computed apart from this program by linear programme.
"""

import numpy as np
import pytest
from rig_text import BAY_HEAD
from ruamel.yaml import YAML
from scipy.optimize import linprog
from scipy.spatial.transform import Rotation

from suspended_ctrl.physics.equilibrium import equilibrium
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.rig.shared_files import config_folder


def reach(model: RotorModel, out: int | None = None) -> np.ndarray:
    """Greatest of each wrench component, the other five zero, both senses, shape (6, 2)."""
    least, most = model.thrust_min_n.copy(), model.thrust_max_n.copy()
    if out is not None:
        least[out] = most[out] = 0.0
    found = np.empty((6, 2))
    for row in range(6):
        others = np.delete(model.wrench_per_thrust, row, axis=0)
        for column, sense in enumerate((-1.0, 1.0)):
            answer = linprog(-sense * model.wrench_per_thrust[row], A_eq=others, b_eq=np.zeros(5),
                             bounds=np.column_stack((least, most)))
            assert answer.status == 0
            found[row, column] = -answer.fun
    return found


@pytest.fixture(scope='module')
def bay_head() -> Rig:
    return load_rig('bay_head')


@pytest.fixture(scope='module')
def seam_head() -> Rig:
    return load_rig('seam_head')


@pytest.mark.parametrize('name', ['bay_head', 'seam_head'])
def test_corner_order_spin_and_axes(name: str) -> None:
    rotors = load_rig(name).rotors
    row = 0
    for sx in (1, -1):
        for sy in (1, -1):
            for sz in (1, -1):
                np.testing.assert_allclose(rotors.position_m[row], [.32 * sx, .32 * sy, .24 * sz])
                along = sx * sy * sz * np.array([-.50 * sx, -.72 * sy, .53 * sz])
                # Rounding of one division.
                np.testing.assert_allclose(rotors.axis[row], along / np.linalg.norm(along),
                                           atol=1e-15)
                assert rotors.spin[row] == (1 if row % 2 == 0 else -1)
                row += 1
    assert rotors.count == row == 8


@pytest.mark.parametrize('name', ['bay_head', 'seam_head'])
@pytest.mark.parametrize('speed', [170.0, 423.0, 900.0])
def test_equal_speeds_cancel_out(name: str, speed: float) -> None:
    rig = load_rig(name)
    model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
    wrench = model.wrench(np.full(8, speed), np.zeros(8), np.zeros(3))
    # Eight thrusts of at most 24 N that cancel out: rounding of sums of that size.
    np.testing.assert_allclose(wrench, 0.0, atol=1e-12)


def test_reach_of_bay_head(bay_head: Rig) -> None:
    found = reach(RotorModel(bay_head.rotors, bay_head.body.centre_of_mass_m))
    # The source gives one decimal.
    for column in (0, 1):
        np.testing.assert_allclose(found[:, column], [45.8, 65.9, 48.5, 30.2, 25.9, 6.4],
                                   atol=0.05)


def test_seam_head_keeps_half_its_reach_with_any_rotor_out(seam_head: Rig) -> None:
    model = RotorModel(seam_head.rotors, seam_head.body.centre_of_mass_m)
    whole = reach(model)
    least = np.min([reach(model, out) / whole for out in range(8)], axis=0)
    # The source says half; one decimal of a ratio.
    np.testing.assert_allclose(least, 0.5, atol=0.05)


def test_numbers_of_bay_head(bay_head: Rig) -> None:
    rig = bay_head
    assert rig.name == 'bay_head'
    assert rig.body.mass_kg == 6.2
    np.testing.assert_array_equal(rig.body.inertia_kg_m2, np.diag([0.17, 0.16, 0.21]))
    np.testing.assert_array_equal(rig.body.drag_area_m2, [0.08, 0.08, 0.10])
    np.testing.assert_allclose(rig.rotors.thrust_coefficient_n_s2, 3.0e-5, rtol=1e-15)
    np.testing.assert_array_equal(rig.rotors.torque_coefficient_nm_s2, 4.8e-7)
    np.testing.assert_array_equal(rig.rotors.speed_min_rad_s, 170.0)
    np.testing.assert_array_equal(rig.rotors.speed_max_rad_s, 900.0)
    np.testing.assert_array_equal(rig.rotors.time_constant_s, 0.040)
    np.testing.assert_array_equal(rig.rotors.inertia_kg_m2, 6.0e-5)
    assert not rig.rotors.reversible.any()
    tether = rig.tether
    assert (tether.rest_length_m, tether.stiffness_n_per_m, tether.damping_n_s_per_m,
            tether.mass_kg, tether.slack_margin_n, tether.working_load_n) == (
                2.90, 74.0, 1.5, 0.06, 5.0, 150.0)
    np.testing.assert_array_equal(tether.hook_m, [0, 0, 0.10])
    assert rig.carrier.axes == ('x', 'y', 'hoist')
    np.testing.assert_array_equal(rig.carrier.anchor_m, [0, 0, 6.5])
    np.testing.assert_array_equal(rig.carrier.direction_map, np.eye(3))
    np.testing.assert_array_equal(rig.carrier.min_m, [-3.5, -1.5, -0.6])
    np.testing.assert_array_equal(rig.carrier.max_m, [3.5, 1.5, 0.6])
    np.testing.assert_array_equal(rig.carrier.speed_max_m_s, 0.30)
    np.testing.assert_array_equal(rig.carrier.acceleration_max_m_s2, 0.35)
    np.testing.assert_array_equal(rig.carrier.time_constant_s, 0.25)
    np.testing.assert_array_equal(rig.carrier.zero_offset_m, 0.0)
    np.testing.assert_array_equal(rig.keep_in.lower_m, [-4.2, -2.0, 0.5])
    np.testing.assert_array_equal(rig.keep_in.upper_m, [4.2, 2.0, 4.6])
    sensors = rig.sensors
    pose, imu, speeds = sensors.pose, sensors.imu, sensors.rotor_states
    assert imu is not None
    assert speeds is not None
    assert sensors.carrier_states is not None
    assert (pose.rate_hz, pose.latency_s, pose.position_noise_m, pose.attitude_noise_rad) == (
        200.0, 0.008, 0.0003, 0.001)
    assert (imu.rate_hz, imu.rate_noise_rad_s, imu.rate_bias_rad_s, imu.force_noise_m_s2,
            imu.force_bias_m_s2) == (400.0, 0.005, 0.010, 0.05, 0.10)
    assert (speeds.rate_hz, speeds.noise_fraction) == (200.0, 0.01)
    assert (sensors.carrier_states.rate_hz, sensors.carrier_states.noise_m) == (50.0, 0.0005)
    assert sensors.tether_load is None
    assert rig.emergency_stop_required


def test_bay_head_hangs_and_bounces_as_described(bay_head: Rig) -> None:
    # The source's figures, to its last digit: missions centred at 2.68 m, bounce mode 0.55 Hz.
    assert equilibrium(bay_head).position_map_m[2] == pytest.approx(2.68, abs=0.005)
    moving = bay_head.body.mass_kg + bay_head.tether.mass_kg / 3
    bounce = np.sqrt(bay_head.tether.stiffness_n_per_m / moving) / (2 * np.pi)
    assert bounce == pytest.approx(0.55, abs=0.005)


def test_numbers_of_seam_head(seam_head: Rig, bay_head: Rig) -> None:
    rig = seam_head
    assert rig.body.mass_kg == 5.4
    assert rig.carrier.axes == ()
    assert rig.carrier.direction_map.shape == (0, 3)
    np.testing.assert_array_equal(rig.carrier.anchor_map(np.zeros(0)), [0, 0, 6.5])
    assert rig.rotors.reversible.all()
    np.testing.assert_allclose(rig.rotors.thrust_coefficient_n_s2, 1.5e-5, rtol=1e-15)
    np.testing.assert_array_equal(rig.rotors.speed_min_rad_s, 120.0)
    np.testing.assert_array_equal(rig.rotors.speed_max_rad_s, 900.0)
    assert rig.sensors.carrier_states is None
    np.testing.assert_array_equal(rig.body.inertia_kg_m2, bay_head.body.inertia_kg_m2)
    np.testing.assert_array_equal(rig.rotors.position_m, bay_head.rotors.position_m)
    np.testing.assert_array_equal(rig.keep_in.upper_m, bay_head.keep_in.upper_m)


def test_values_cannot_be_written(bay_head: Rig) -> None:
    for part in (bay_head.body, bay_head.rotors, bay_head.tether, bay_head.carrier,
                 bay_head.keep_in, bay_head.sensors.pose, bay_head.sensors.imu):
        for value in vars(part).values():
            if isinstance(value, np.ndarray):
                assert not value.flags.writeable


def test_every_number_is_the_one_that_a_plain_yaml_reader_finds(bay_head: Rig) -> None:
    plain = YAML(typ='safe', pure=True).load(BAY_HEAD)
    for row, rotor in enumerate(plain['rotors']):
        assert bay_head.rotors.names[row] == rotor['name']
        np.testing.assert_array_equal(bay_head.rotors.position_m[row], rotor['position_m'])
        assert bay_head.rotors.time_constant_s[row] == rotor['time_constant_s']
    identity = Rotation.from_quat(bay_head.sensors.pose.quaternion_wxyz, scalar_first=True)
    assert identity.magnitude() == 0.0


def test_config_folder_holds_the_rigs() -> None:
    assert {'bay_head', 'seam_head'} <= {file.stem
                                         for file in (config_folder() / 'rigs').glob('*.yaml')}
