"""The body that the process model moves: platform, tether's share, payload, as one."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.estimation.dynamics import BODY
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.constants import GRAVITY_M_S2
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig


@dataclass(frozen=True, eq=False)
class BodyModel:
    """
    Constants of the process model.

    Attributes
    ----------
    vector : ndarray, shape (28,)
        As the kernels read it, see ``dynamics``.
    centre_m : ndarray, shape (3,)
        Centre of mass from the ``base_link`` origin.
    pose_arm_m, imu_arm_m : ndarray, shape (3,)
        Sensors from the centre of mass.
    rotors : RotorModel or None
        About the centre of mass.
    payload : Payload

    """

    vector: Array
    centre_m: Array
    pose_arm_m: Array
    imu_arm_m: Array
    rotors: RotorModel | None
    payload: Payload


def build_body(rig: Rig | None, payload: Payload) -> BodyModel:
    """
    Put the constants together.

    Parameters
    ----------
    rig : Rig or None
        None is a body of unit mass and inertia that nothing is known to push.
    payload : Payload
        What hangs on the platform.

    Returns
    -------
    BodyModel

    """
    vector = np.zeros(BODY)
    vector[25] = GRAVITY_M_S2
    zero = frozen(np.zeros(3))
    if rig is None:
        vector[0] = 1.0
        vector[1:10] = vector[10:19] = np.eye(3).ravel()
        return BodyModel(frozen(vector), zero, zero, zero, None, payload)
    body, tether, sensors = loaded_body(rig, payload), rig.tether, rig.sensors
    centre = body.centre_m
    vector[0] = body.mass_kg
    vector[1:10] = body.inertia_kg_m2.ravel()
    vector[10:19] = body.inertia_inverse.ravel()
    vector[19:22] = tether.hook_m - centre
    vector[22] = tether.rest_length_m
    vector[23] = tether.stiffness_n_per_m
    vector[24] = tether.damping_n_s_per_m
    # Speeds and anchor are carried on along their rates for two periods, then held.
    rotors, carrier = sensors.rotor_states, sensors.carrier_states
    vector[26] = 2.0 / rotors.rate_hz if rotors else 0.0
    vector[27] = 2.0 / carrier.rate_hz if carrier else 0.0
    imu = sensors.imu.position_m - centre if sensors.imu else zero
    return BodyModel(frozen(vector), centre, frozen(sensors.pose.position_m - centre), frozen(imu),
                     RotorModel(rig.rotors, centre), payload)
