"""
What follows a stop: distance under power, swing without.

A category 0 stop leaves a pendulum on a spring. ``swing_amplitude`` is its small-angle amplitude,
``predict_cut`` the point-mass elastic pendulum itself, from the state at the cut and with the
thrust that runs down with the rotors' lag; air drag is left out, so it swings less in truth.
"""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.kernel import kernel, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

_STEP_S = 0.01


@kernel(REAL(REAL, REAL, REAL))
def stopping_distance(speed: float, deceleration: float, reaction: float) -> float:
    """Way in m from ``speed`` to rest: on for the reaction time, then even deceleration."""
    return speed * reaction + 0.5 * speed * speed / deceleration


@kernel(REAL(REAL, REAL, REAL))
def swing_amplitude(offset: float, speed: float, length: float) -> float:
    """Amplitude in m of a pendulum of this length, ``offset`` out and moving at ``speed``."""
    amplitude: float = np.sqrt(offset * offset + speed * speed * length / GRAVITY_M_S2)
    return amplitude


@kernel(OUT_VECTOR(VECTOR, VECTOR, REAL, VECTOR, REAL, REAL, REAL, REAL))
def _pull(place: Array, velocity: Array, time: float, thrust: Array, lag: float, length: float,
          stiffness: float, damping: float) -> Array:
    """Force on a point at ``place`` from the anchor, gravity not included, and tension."""
    out = np.zeros(4)
    distance = np.sqrt(place[0] * place[0] + place[1] * place[1] + place[2] * place[2])
    if distance > length:
        rate = (place[0] * velocity[0] + place[1] * velocity[1]
                + place[2] * velocity[2]) / distance
        out[3] = max(stiffness * (distance - length) + damping * rate, 0.0)
    left = np.exp(-2.0 * time / lag)  # thrust goes with the square of a speed that runs down
    for i in range(3):
        out[i] = left * thrust[i] - (out[3] * place[i] / distance if distance > 0.0 else 0.0)
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, REAL, REAL, REAL, REAL, REAL, REAL))
def _swing(place: Array, velocity: Array, thrust: Array, lag: float, mass: float, length: float,
           stiffness: float, damping: float, duration: float) -> Array:
    """Lowest and highest coordinates, least and greatest tension, greatest radius, shape (9,)."""
    out = np.empty(9)
    out[:3] = place
    out[3:6] = place
    out[6] = np.inf
    out[7] = 0.0
    out[8] = 0.0
    x = place.copy()
    v = velocity.copy()
    h = _STEP_S
    g = np.zeros(3)
    g[2] = -GRAVITY_M_S2
    for k in range(int(duration / h) + 1):
        time = k * h
        pull = _pull(x, v, time, thrust, lag, length, stiffness, damping)
        for i in range(3):
            out[i] = min(out[i], x[i])
            out[3 + i] = max(out[3 + i], x[i])
        out[6] = min(out[6], pull[3])
        out[7] = max(out[7], pull[3])
        out[8] = max(out[8], np.sqrt(x[0] * x[0] + x[1] * x[1]))
        a1 = pull[:3] / mass + g
        v2 = v + 0.5 * h * a1
        a2 = _pull(x + 0.5 * h * v, v2, time + 0.5 * h, thrust, lag, length, stiffness,
                   damping)[:3] / mass + g
        v3 = v + 0.5 * h * a2
        a3 = _pull(x + 0.5 * h * v2, v3, time + 0.5 * h, thrust, lag, length, stiffness,
                   damping)[:3] / mass + g
        v4 = v + h * a3
        a4 = _pull(x + h * v3, v4, time + h, thrust, lag, length, stiffness,
                   damping)[:3] / mass + g
        x = x + h / 6.0 * (v + 2.0 * v2 + 2.0 * v3 + v4)
        v = v + h / 6.0 * (a1 + 2.0 * a2 + 2.0 * a3 + a4)
    return out


@dataclass(frozen=True, eq=False)
class Swing:
    """
    The swing that follows a cut, over one period of the pendulum.

    Attributes
    ----------
    lower_map_m, upper_map_m : ndarray, shape (3,)
        Box in ``map`` that the ``base_link`` origin sweeps.
    radius_m : float
        Greatest horizontal distance from under the anchor.
    tension_min_n, tension_max_n : float
    leaves_keep_in : bool

    """

    lower_map_m: Array
    upper_map_m: Array
    radius_m: float
    tension_min_n: float
    tension_max_n: float
    leaves_keep_in: bool


def predict_cut(rig: Rig, position_map_m: Array, velocity_map_m_s: Array, anchor_map_m: Array,
                thrust_map_n: Array) -> Swing:
    """
    Predict the swing after the rotors are cut.

    Parameters
    ----------
    rig : Rig
        The hardware.
    position_map_m, velocity_map_m_s : ndarray, shape (3,)
        Of the ``base_link`` origin at the cut.
    anchor_map_m : ndarray, shape (3,)
        Where the anchor stands, or comes to stand.
    thrust_map_n : ndarray, shape (3,)
        The rotors' force at the cut, in ``map``; it runs down with their lag.

    Returns
    -------
    Swing
        For a point mass at the origin on the tether lengthened by the hook's height above it.

    """
    tether = rig.tether
    mass = rig.body.mass_kg + tether.mass_kg / 3.0
    length = tether.rest_length_m + float(np.linalg.norm(tether.hook_m))
    hanging = length + mass * GRAVITY_M_S2 / tether.stiffness_n_per_m
    # One small-angle period; a quarter more covers swings of up to 100 degrees (1.37 at 120).
    duration = 1.25 * 2.0 * np.pi * np.sqrt(hanging / GRAVITY_M_S2)
    out = _swing(position_map_m - anchor_map_m, velocity_map_m_s, thrust_map_n,
                 float(rig.rotors.time_constant_s.max()), mass, length,
                 tether.stiffness_n_per_m, tether.damping_n_s_per_m, duration)
    lower, upper = out[:3] + anchor_map_m, out[3:6] + anchor_map_m
    leaves = bool((lower < rig.keep_in.lower_m).any() or (upper > rig.keep_in.upper_m).any())
    return Swing(frozen(lower), frozen(upper), float(out[8]), float(out[6]), float(out[7]), leaves)
