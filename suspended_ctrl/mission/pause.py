"""Slowing a path down to a halt on its own line, and taking it up again."""

from dataclasses import replace

import numpy as np

from suspended_ctrl.physics.path import minimum_jerk
from suspended_ctrl.physics.reference import Reference, SPACING_MAX_S
from suspended_ctrl.rig.frozen import Array, frozen

RAMP_S = 1.0


def halted(reference: Reference, now: float) -> tuple[Reference, float]:
    """
    Follow the path on from ``now`` while its own time slows to a halt.

    Parameters
    ----------
    reference : Reference
        The path under way.
    now : float
        Host time, s.

    Returns
    -------
    reference : Reference
        From ``now`` on, ending at rest on the path.
    path_time_s : float
        Of ``reference``, where it ends.

    """
    ramp = minimum_jerk(RAMP_S)
    rate = 1.0 - ramp.s
    path_time = now - reference.start_s + _integral(ramp.time_s, rate)
    scaled = _followed(reference, ramp.time_s, path_time, rate, -ramp.s_dot)
    return scaled.starting_at(now), float(path_time[-1])


def resumed(reference: Reference, path_time_s: float, start_s: float) -> Reference:
    """
    Take a halted path up again.

    Parameters
    ----------
    reference : Reference
        The whole path.
    path_time_s : float
        Where it was halted.
    start_s : float
        Host time at which it goes on.

    Returns
    -------
    Reference
        From there to the end of the path.

    """
    ramp = minimum_jerk(RAMP_S)
    path_time = path_time_s + _integral(ramp.time_s, ramp.s)
    rest = float(reference.time_s[-1]) - float(path_time[-1])
    if rest > 0.0:
        tail = np.arange(1, int(np.ceil(rest / SPACING_MAX_S)) + 1) * SPACING_MAX_S
        time = np.concatenate((ramp.time_s, ramp.time_s[-1] + tail))
        path_time = np.concatenate((path_time, path_time[-1] + tail))
    else:
        time = ramp.time_s
    rate = np.ones(len(time))
    rate_dot = np.zeros(len(time))
    rate[:len(ramp.s)] = ramp.s
    rate_dot[:len(ramp.s)] = ramp.s_dot
    return _followed(reference, time, path_time, rate, rate_dot).starting_at(start_s)


def _integral(time: Array, rate: Array) -> Array:
    # Trapezoids are exact to 1e-6 s here: the ramp is smooth over a hundred points.
    steps = 0.5 * (rate[1:] + rate[:-1]) * np.diff(time)
    return np.concatenate(([0.0], np.cumsum(steps)))


def _followed(reference: Reference, time: Array, path_time: Array, rate: Array,
              rate_dot: Array) -> Reference:
    own = reference.starting_at(0.0)
    points = [own.at(float(t)) for t in path_time]

    def scaled(first: list[Array], second: list[Array]) -> tuple[Array, Array]:
        velocity = np.array(first) * rate[:, None]
        bend = np.array(second) * rate[:, None] ** 2 + np.array(first) * rate_dot[:, None]
        return frozen(velocity), frozen(bend)

    velocity, acceleration = scaled([p.velocity_map_m_s for p in points],
                                    [p.acceleration_map_m_s2 for p in points])
    turn, turn_dot = scaled([p.rate_body_rad_s for p in points],
                            [p.rate_dot_body_rad_s2 for p in points])
    return replace(
        own, time_s=frozen(time), position_map_m=frozen([p.position_map_m for p in points]),
        velocity_map_m_s=velocity, acceleration_map_m_s2=acceleration,
        quaternion_wxyz=frozen([p.quaternion_wxyz for p in points]), rate_body_rad_s=turn,
        rate_dot_body_rad_s2=turn_dot)
