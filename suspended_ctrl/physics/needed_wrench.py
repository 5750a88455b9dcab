"""What the rotors must give along a path, the tether's share taken off."""

import numpy as np

from suspended_ctrl.physics.carrier import carrier_step
from suspended_ctrl.physics.equilibrium import equilibrium
from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.loaded_body import LoadedBody
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.rigid_body import point_acceleration, wrench_for
from suspended_ctrl.physics.rotation import cross
from suspended_ctrl.physics.tether import tether_wrench
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

# What a carrier of decimetres a second can use of the path to come.
_PREVIEW_S = 8.0


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, REAL, MATRIX, VECTOR, VECTOR))
def _total(acceleration: Array, quaternion: Array, rate: Array, rate_dot: Array, mass: float,
           inertia: Array, centre: Array, nominal_centre: Array) -> Array:
    at_centre = point_acceleration(acceleration, quaternion, rate, rate_dot, centre)
    out = wrench_for(mass, inertia, quaternion, rate, at_centre, rate_dot)
    moment = cross(centre - nominal_centre, out[:3])
    for i in range(3):
        out[3 + i] += moment[i]
    return out


def total_wrench(reference: Reference, index: int, body: LoadedBody) -> Array:
    """Wrench in body axes at the nominal centre of mass that point ``index`` needs, shape (6,)."""
    out: Array = _total(
        reference.acceleration_map_m_s2[index], reference.quaternion_wxyz[index],
        reference.rate_body_rad_s[index], reference.rate_dot_body_rad_s2[index], body.mass_kg,
        body.inertia_kg_m2, body.centre_m, body.nominal_centre_m)
    return out


def carried_anchors(rig: Rig, reference: Reference) -> list[Array]:
    """
    Anchors in map along a path, for some ways of moving the carrier inside its own limits.

    Parameters
    ----------
    rig : Rig
        The hardware.
    reference : Reference
        The path.

    Returns
    -------
    list of ndarray, shape (m, 3)
        Held where the path starts and at the carrier's zero, trailing the platform, and following
        its mean over a preview: one of them comes near the best that a planner finds.

    """
    carrier = rig.carrier
    rise = -equilibrium(rig, np.zeros(3)).position_map_m
    above = np.array([carrier.position_for(point + rise) for point in reference.position_map_m])
    ways = [np.zeros_like(above)]
    if carrier.axes:
        ways += [np.tile(above[0], (len(above), 1)), above,
                 _centred_mean(reference.time_s, above, _PREVIEW_S)]
    out = []
    for way in ways:
        place, speed = way[0], np.zeros(len(carrier.axes))
        anchor = np.empty((len(way), 3))
        for index, setpoint in enumerate(way):
            if index and carrier.axes:
                dt = float(reference.time_s[index] - reference.time_s[index - 1])
                place, speed = carrier_step(carrier, place, speed, setpoint, dt)
            anchor[index] = carrier.anchor_map(place)
        out.append(anchor)
    return out


def _centred_mean(time: Array, values: Array, width: float) -> Array:
    grid = np.arange(-0.5 * width, 0.5 * width + 1e-9, 0.05)
    return np.column_stack([
        np.mean([np.interp(time + shift, time, column) for shift in grid], axis=0)
        for column in values.T]) if values.shape[1] else values


def rotor_wrench_along(rig: Rig, body: LoadedBody, reference: Reference,
                       anchor_map_m: Array) -> Array:
    """
    Wrench that the rotors must give at every point of a path.

    Parameters
    ----------
    rig : Rig
        The hardware.
    body : LoadedBody
        The moving mass with what payload there is.
    reference : Reference
        The path.
    anchor_map_m : ndarray, shape (m, 3)
        Of the tether at each point.

    Returns
    -------
    ndarray, shape (m, 6)
        Body axes, nominal centre of mass, N and N m.

    """
    out = np.empty((len(reference.time_s), 6))
    still = np.zeros(3)
    for index in range(len(out)):
        pull = tether_wrench(
            rig.tether, body.nominal_centre_m, reference.position_map_m[index],
            reference.velocity_map_m_s[index], reference.quaternion_wxyz[index],
            reference.rate_body_rad_s[index], anchor_map_m[index], still)
        out[index] = total_wrench(reference, index, body) - pull[:6]
    return out
