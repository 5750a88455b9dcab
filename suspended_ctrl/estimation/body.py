"""The body that the process model moves: platform, tether's share, payload, as one."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.estimation.dynamics import BODY
from suspended_ctrl.rig.constants import GRAVITY_M_S2
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.physics.values import Payload
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


def point_inertia(arm_m: Array, mass_kg: float) -> Array:
    """Inertia matrix of a point mass at ``arm_m``, shape (3, 3), kg m^2 (Steiner's term)."""
    square = float(arm_m @ arm_m)
    inertia: Array = mass_kg * (square * np.eye(3) - np.outer(arm_m, arm_m))
    return inertia


def build_body(rig: Rig | None, payload: Payload, mass_kg: float | None = None,
               rest_length_m: float | None = None) -> BodyModel:
    """
    Put the body together.

    Parameters
    ----------
    rig : Rig or None
        None is a body of unit mass and inertia that nothing is known to push.
    payload : Payload
        A point mass.
    mass_kg, rest_length_m : float, optional
        Platform's mass and tether's rest length as found at start-up; the rig's if left out.

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
    body, tether, sensors = rig.body, rig.tether, rig.sensors
    platform = body.mass_kg if mass_kg is None else mass_kg
    # A third of the tether's mass moves with the hook (Rayleigh).
    parts = ((platform, body.centre_of_mass_m), (tether.mass_kg / 3.0, tether.hook_m),
             (payload.mass_kg, payload.position_m))
    mass = sum(part for part, _ in parts)
    centre = frozen(np.array([part * place for part, place in parts]).sum(axis=0) / mass)
    inertia = body.inertia_kg_m2.copy()
    for part, place in parts:
        inertia += point_inertia(place - centre, part)
    vector[0] = mass
    vector[1:10] = inertia.ravel()
    vector[10:19] = np.linalg.inv(inertia).ravel()
    vector[19:22] = tether.hook_m - centre
    vector[22] = tether.rest_length_m if rest_length_m is None else rest_length_m
    vector[23] = tether.stiffness_n_per_m
    vector[24] = tether.damping_n_s_per_m
    # Speeds and anchor are carried on along their rates for two periods, then held.
    rotor_rate = sensors.rotor_states.rate_hz if sensors.rotor_states else np.inf
    carrier_rate = sensors.carrier_states.rate_hz if sensors.carrier_states else np.inf
    vector[26] = 2.0 / rotor_rate
    vector[27] = 2.0 / carrier_rate
    imu = sensors.imu.position_m - centre if sensors.imu else zero
    return BodyModel(frozen(vector), centre, frozen(sensors.pose.position_m - centre), frozen(imu),
                     RotorModel(rig.rotors, centre), payload)
