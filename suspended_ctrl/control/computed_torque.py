"""Computed torque: error dynamics of a chosen bandwidth about the reference, model inverted."""

import numpy as np

from suspended_ctrl.control.bandwidth import checked_bandwidth
from suspended_ctrl.control.values import LawInputs
from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rigid_body import point_acceleration, wrench_for
from suspended_ctrl.physics.rotation import (
    attitude_error,
    conjugate,
    cross,
    multiply,
    rotate,
    rotate_back,
)
from suspended_ctrl.physics.values import Wrench
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR,
                   VECTOR, REAL, REAL, REAL, MATRIX, VECTOR, VECTOR))
def _demand(position: Array, velocity: Array, quaternion: Array, rate: Array,
            position_wanted: Array, velocity_wanted: Array, acceleration_wanted: Array,
            quaternion_wanted: Array, rate_wanted: Array, rate_dot_wanted: Array,
            disturbance: Array, stiffness: float, damping: float, mass: float, inertia: Array,
            centre: Array, nominal_centre: Array) -> Array:
    """Wrench at the nominal centre of mass, body axes, shape (6,)."""
    acceleration = np.empty(3)
    for i in range(3):
        acceleration[i] = (acceleration_wanted[i]
                           + damping * (velocity_wanted[i] - velocity[i])
                           + stiffness * (position_wanted[i] - position[i]))
    # Wanted rates are in the wanted body's axes; turn them into this body's.
    between = multiply(conjugate(quaternion), quaternion_wanted)
    rate_here = rotate(between, rate_wanted)
    rate_dot_here = rotate(between, rate_dot_wanted)
    error = attitude_error(quaternion, quaternion_wanted)
    bend = cross(rate, rate_here)
    rate_dot = np.empty(3)
    for i in range(3):
        rate_dot[i] = (rate_dot_here[i] - bend[i] + damping * (rate_here[i] - rate[i])
                       - stiffness * error[i])
    centre_acceleration = point_acceleration(acceleration, quaternion, rate, rate_dot, centre)
    wrench = wrench_for(mass, inertia, quaternion, rate, centre_acceleration, rate_dot)
    push = rotate_back(quaternion, disturbance[:3])
    twist = rotate_back(quaternion, disturbance[3:])
    out = np.empty(6)
    for i in range(3):
        out[i] = wrench[i] - push[i]
        out[3 + i] = wrench[3 + i] - twist[i]
    moment = cross(centre - nominal_centre, out[:3])
    for i in range(3):
        out[3 + i] += moment[i]
    return out


class ComputedTorque:
    """
    The default law.

    Position error obeys ``e'' + 2 zeta w e' + w^2 e = 0``, attitude error (Lee, Leok and
    McClamroch 2010) the same, with gravity, the gyroscopic torque and the estimated disturbance
    taken out.

    Parameters
    ----------
    rig : Rig
    bandwidth_hz, damping_ratio : float
        w / 2 pi and zeta; the slowest rotor's time constant bounds the first.

    Raises
    ------
    BandwidthError
        If the rig's lag cannot carry the bandwidth.

    """

    def __init__(self, rig: Rig, bandwidth_hz: float, damping_ratio: float) -> None:
        lag = float(rig.rotors.time_constant_s.max())
        natural = checked_bandwidth(bandwidth_hz, damping_ratio, lag)
        self.stiffness_1_s2 = natural ** 2
        self.damping_1_s = 2.0 * damping_ratio * natural

    def step(self, t: float, inputs: LawInputs) -> Wrench:
        """
        Demand for the felt moment.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : LawInputs
            What the controller sees this tick.

        Returns
        -------
        Wrench
            Total, tether included, gravity not; stamped as the estimate.

        """
        felt, point, body = inputs.felt, inputs.point, inputs.body
        disturbance = np.concatenate((inputs.estimate.disturbance_force_map_n,
                                      inputs.estimate.disturbance_torque_map_nm))
        out = _demand(
            felt.position_map_m, felt.velocity_map_m_s, felt.quaternion_wxyz,
            felt.rate_body_rad_s, point.position_map_m, point.velocity_map_m_s,
            inputs.feedforward_map_m_s2, point.quaternion_wxyz, point.rate_body_rad_s,
            point.rate_dot_body_rad_s2, disturbance, self.stiffness_1_s2, self.damping_1_s,
            body.mass_kg, body.inertia_kg_m2, body.centre_m, body.nominal_centre_m)
        return Wrench(inputs.estimate.stamp_s, out[:3], out[3:])
