"""Read a rig file into the values that everything else works on."""

import os

import numpy as np

from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.parts import RotorSection
from suspended_ctrl.rig.rig import (
    AXIS_DIRECTION_MAP,
    Body,
    Carrier,
    CarrierSensor,
    ImuSensor,
    KeepIn,
    PoseSensor,
    Rig,
    Rotors,
    RotorTelemetry,
    Sensors,
    Tether,
    TetherLoadSensor,
)
from suspended_ctrl.rig.schema import RigFile
from suspended_ctrl.rig.shared_files import find_file
from suspended_ctrl.rig.yaml_file import read_file


def load_rig(path_or_name: str | os.PathLike[str],
             relative_to: str | os.PathLike[str] | None = None) -> Rig:
    """
    Read and check a rig file.

    Parameters
    ----------
    path_or_name : str or path-like
        A bare name, such as ``bay_head``, of a rig that comes with the package, or a path.
    relative_to : path-like, optional
        Folder that relative paths start from; the working folder if left out.

    Returns
    -------
    Rig

    Raises
    ------
    InputError
        In one line, if the file is missing or anything in it is not allowed.

    """
    return build_rig(read_file(find_file(path_or_name, 'rigs', relative_to), RigFile))


def build_rig(file: RigFile) -> Rig:
    """Turn checked file contents into a rig."""
    body, tether, keep_in = file.body, file.tether, file.keep_in_m
    inertia = np.array(body.inertia_kg_m2)
    box = np.array((keep_in.x, keep_in.y, keep_in.z))
    return Rig(
        name=file.name,
        body=Body(body.mass_kg, frozen(0.5 * (inertia + inertia.T), 3, 3),
                  frozen(body.centre_of_mass_m, 3), frozen(body.drag_area_m2, 3)),
        rotors=_rotors(file.rotors),
        tether=Tether(frozen(tether.hook_m, 3), tether.rest_length_m, tether.stiffness_n_per_m,
                      tether.damping_n_s_per_m, tether.mass_kg, tether.slack_margin_n,
                      tether.working_load_n),
        carrier=_carrier(file),
        sensors=_sensors(file),
        keep_in=KeepIn(frozen(box[:, 0], 3), frozen(box[:, 1], 3)),
        emergency_stop_required=file.emergency_stop_required)


def _knots(rotor: RotorSection, count: int) -> tuple[Array, Array]:
    """
    Speeds and thrusts of one rotor's curve from (0, 0) on, ``count`` of them.

    Knots that are wanting are put inside the last piece, on its line in squared speed: neither
    the curve nor its top, from which torque per thrust is taken, changes by that.
    """
    speed, thrust = rotor.knots()
    wanting = count - len(speed)
    if wanting > 0:
        share = np.arange(1, wanting + 1) / (wanting + 1)
        square = speed[-2] ** 2 + share * (speed[-1] ** 2 - speed[-2] ** 2)
        between = thrust[-2] + share * (thrust[-1] - thrust[-2])
        speed = np.concatenate((speed[:-1], np.sqrt(square), speed[-1:]))
        thrust = np.concatenate((thrust[:-1], between, thrust[-1:]))
    return speed, thrust


def _rotors(rotors: tuple[RotorSection, ...]) -> Rotors:
    count = max(len(rotor.knots()[0]) for rotor in rotors)
    knots = [_knots(rotor, count) for rotor in rotors]
    reversible = np.array([rotor.reversible for rotor in rotors])
    reversible.setflags(write=False)
    return Rotors(
        names=tuple(rotor.name for rotor in rotors),
        position_m=frozen([rotor.position_m for rotor in rotors]),
        axis=frozen([rotor.axis for rotor in rotors]),
        curve_speed_rad_s=frozen(np.array([speed for speed, _ in knots])),
        curve_thrust_n=frozen(np.array([thrust for _, thrust in knots])),
        torque_coefficient_nm_s2=frozen([rotor.torque_coefficient_nm_s2 for rotor in rotors]),
        spin=frozen([float(rotor.spin) for rotor in rotors]),
        speed_min_rad_s=frozen([rotor.speed_min_rad_s for rotor in rotors]),
        speed_max_rad_s=frozen([rotor.speed_max_rad_s for rotor in rotors]),
        reversible=reversible,
        time_constant_s=frozen([rotor.time_constant_s for rotor in rotors]),
        inertia_kg_m2=frozen([rotor.inertia_kg_m2 for rotor in rotors]))


def _carrier(file: RigFile) -> Carrier:
    axes = file.axes()
    rows = list(axes.values())
    direction = np.array([AXIS_DIRECTION_MAP[name] for name in axes]).reshape(len(axes), 3)
    return Carrier(
        anchor_m=frozen(file.carrier.anchor_m, 3),
        axes=tuple(axes),
        direction_map=frozen(direction),
        min_m=frozen([axis.min_m for axis in rows]),
        max_m=frozen([axis.max_m for axis in rows]),
        speed_max_m_s=frozen([axis.speed_max_m_s for axis in rows]),
        acceleration_max_m_s2=frozen([axis.acceleration_max_m_s2 for axis in rows]),
        time_constant_s=frozen([axis.time_constant_s for axis in rows]),
        zero_offset_m=frozen([axis.zero_offset_m for axis in rows]))


def _sensors(file: RigFile) -> Sensors:
    given = file.sensors
    pose, imu, speeds = given.pose, given.imu, given.rotor_states
    telemetry = None
    if speeds is not None and speeds.rate_hz is not None and speeds.noise_fraction is not None:
        telemetry = RotorTelemetry(speeds.rate_hz, speeds.noise_fraction)
    return Sensors(
        pose=PoseSensor(pose.rate_hz, pose.latency_s, pose.position_noise_m,
                        pose.attitude_noise_rad, frozen(pose.position_m, 3),
                        frozen(pose.rotation_wxyz, 4)),
        imu=None if imu is None else ImuSensor(
            imu.rate_hz, imu.rate_noise_rad_s, imu.rate_bias_rad_s, imu.force_noise_m_s2,
            imu.force_bias_m_s2, frozen(imu.position_m, 3), frozen(imu.rotation_wxyz, 4)),
        rotor_states=telemetry if speeds is not None and speeds.telemetry else None,
        # Without axes nothing is measured there, whatever the file says of its quality.
        carrier_states=None if given.carrier_states is None or not file.axes()
        else CarrierSensor(given.carrier_states.rate_hz, given.carrier_states.noise_m),
        tether_load=None if given.tether_load is None
        else TetherLoadSensor(given.tether_load.rate_hz, given.tether_load.noise_n))
