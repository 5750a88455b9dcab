"""What rotors, tether and carrier did for it."""

import numpy as np

from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.measure.on_path import OnPath
from suspended_ctrl.review.measure.summary import integral, largest, Section, smallest
from suspended_ctrl.review.rows import interpolated, matrices
from suspended_ctrl.review.table import Table
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig, Rotors

# A command this near to the greatest speed is at it: rounding of solver and message.
_AT_BOUND = 1e-3


def thrusts(rotors: Rotors, speed_rad_s: Array) -> Array:
    """Thrust in N by the rig's thrust law, shape (n, rotors), odd in speed."""
    square = speed_rad_s ** 2
    out = np.empty_like(square)
    for i in range(rotors.count):
        knots = rotors.curve_speed_rad_s[i] ** 2
        thrust = rotors.curve_thrust_n[i]
        slope = (thrust[-1] - thrust[-2]) / (knots[-1] - knots[-2])
        out[:, i] = np.interp(square[:, i], knots, thrust) + slope * np.maximum(
            square[:, i] - knots[-1], 0.0)
    return np.sign(speed_rad_s) * out


def rotor_speeds(log: RunLog) -> Table:
    """Best record of the rotors' speeds: the plant's own, measured, or commanded."""
    for name in ('ground_truth_rotors', 'rotor_states'):
        if len(log[name]):
            return log[name]
    return log['rotor_command']


def effort(log: RunLog, rig: Rig, path: OnPath) -> Section:
    """
    ``effort`` of metrics.json, over the path.

    ``rotor_effort_n1p5_s``: integral of the sum of |thrust|^1.5, N^1.5 s. ``rotor_energy_j``:
    momentum theory's ideal energy, the integral of the sum of |thrust|^1.5 / sqrt(2 rho A). A rig
    has no disc area, so A is the area for which momentum theory and the rotor's two coefficients
    agree at figure of merit 1, ``A = k_T^3 / (2 rho k_Q^2)``; the density cancels and the power is
    ``k_Q |w|^3``, what the drag torque takes from the shaft: an upper bound for the true disc.
    ``rotor_saturated_fraction``: share of the time with a rotor commanded to its greatest speed.
    ``rotor_reversals``: changes of sign of commanded speeds, all rotors together.
    ``carrier_travel_m``: way of the commanded axes, summed over them; measured positions would add
    their noise at every sample.
    """
    speeds = rotor_speeds(log)
    result: Section = dict.fromkeys((
        'rotor_effort_n1p5_s', 'rotor_energy_j', 'rotor_saturated_fraction', 'rotor_reversals',
        'carrier_travel_m'))
    if len(speeds):
        rotors = rig.rotors
        load = np.abs(thrusts(rotors, speeds.speed_rad_s)) ** 1.5
        power = load * (rotors.torque_coefficient_nm_s2 / rotors.thrust_coefficient_n_s2 ** 1.5)
        on = path.mask(speeds.stamp_s)
        result['rotor_effort_n1p5_s'] = integral(speeds.stamp_s, load.sum(axis=1), on)
        result['rotor_energy_j'] = integral(speeds.stamp_s, power.sum(axis=1), on)
    commands = log.rotor_command
    if len(commands) and (on := path.mask(commands.log_s)).any():
        speed = commands.speed_rad_s[on]
        full = np.abs(speed) >= (1.0 - _AT_BOUND) * rig.rotors.speed_max_rad_s
        result['rotor_saturated_fraction'] = float(full.any(axis=1).mean())
        result['rotor_reversals'] = _reversals(speed)
    if rig.carrier.axes and len(log.carrier_command):
        on = path.mask(log.carrier_command.log_s)
        if on.any():
            travel = np.abs(np.diff(log.carrier_command.position_m[on], axis=0))
            result['carrier_travel_m'] = float(travel.sum())
    return result


def _reversals(speed_rad_s: Array) -> int:
    count = 0
    for column in speed_rad_s.T:
        signs = np.sign(column[column != 0.0])
        count += int((signs[1:] != signs[:-1]).sum())
    return count


def tensions(log: RunLog, rig: Rig) -> tuple[Array, Array]:
    """
    Tension over time, from the best source there is.

    Parameters
    ----------
    log : RunLog
        The run.
    rig : Rig
        The hardware.

    Returns
    -------
    time_s, tension_n : ndarray, shape (n,)
        The plant's own, the load cell's, or by the rig's tether law from the truth (else the
        estimate) and the carrier; empty without any.

    """
    for name in ('ground_truth_tether', 'tether_load'):
        if len(log[name]):
            return log[name].stamp_s, log[name].tension_n
    motion = log.ground_truth if len(log.ground_truth) else log.odometry
    if not len(motion) or (rig.carrier.axes and not len(log.carrier_states)):
        return np.zeros(0), np.zeros(0)
    time_s = motion.stamp_s
    anchor = np.tile(rig.carrier.anchor_m, (len(time_s), 1))
    anchor_velocity = np.zeros((len(time_s), 3))
    if rig.carrier.axes:
        states = log.carrier_states
        reading = interpolated(time_s, states.stamp_s, states.position_m)
        anchor += (reading + rig.carrier.zero_offset_m) @ rig.carrier.direction_map
        anchor_velocity = interpolated(
            time_s, states.stamp_s, states.velocity_m_s) @ rig.carrier.direction_map
    turn = matrices(motion.quaternion_wxyz)
    hook = motion.position_map_m + turn @ rig.tether.hook_m
    swing = np.cross(motion.rate_body_rad_s, rig.tether.hook_m)
    velocity = motion.velocity_map_m_s + np.einsum('nij,nj->ni', turn, swing)
    span = anchor - hook
    length = np.linalg.norm(span, axis=1)
    rate = np.einsum('ni,ni->n', span, anchor_velocity - velocity) / np.maximum(length, 1e-9)
    pull = (rig.tether.stiffness_n_per_m * (length - rig.tether.rest_length_m)
            + rig.tether.damping_n_s_per_m * rate)
    return time_s, np.where(length > rig.tether.rest_length_m, np.maximum(pull, 0.0), 0.0)


def tether(log: RunLog, rig: Rig, path: OnPath) -> Section:
    """``tether`` of metrics.json: least and greatest tension on the path, N."""
    time_s, tension_n = tensions(log, rig)
    on = path.mask(time_s)
    return {'tension_min_n': smallest(tension_n[on]), 'tension_max_n': largest(tension_n[on])}
