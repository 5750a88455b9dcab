"""Timed paths built from moves: shared by missions and by the way to rest of a stop."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.physics.reference import Reference, SPACING_MAX_S
from suspended_ctrl.physics.rotation import (
    conjugate,
    exponential,
    logarithm,
    multiply,
    normalised,
)
from suspended_ctrl.rig.frozen import Array, frozen


@dataclass(frozen=True, eq=False)
class Progress:
    """Path fraction ``s`` over ``time_s``, 0 to 1, with its rate and second rate, shape (m,)."""

    time_s: Array
    s: Array
    s_dot: Array
    s_ddot: Array


def sample_times(duration_s: float) -> Array:
    """Spread times from 0 to ``duration_s`` evenly, at most the reference's spacing apart."""
    count = max(int(np.ceil(duration_s / SPACING_MAX_S - 1e-9)), 1) + 1
    return np.linspace(0.0, duration_s, count)


def minimum_jerk(duration_s: float) -> Progress:
    """
    Minimum-jerk progress from rest to rest.

    ``10 x^3 - 15 x^4 + 6 x^5``, Flash and Hogan, J. Neurosci. 5 (1985); peak rate 1.875 / T, peak
    second rate 5.7735 / T^2.
    """
    time = sample_times(duration_s)
    x = time / duration_s
    s = x ** 3 * (10.0 - 15.0 * x + 6.0 * x ** 2)
    s_dot = 30.0 * x ** 2 * (1.0 - x) ** 2 / duration_s
    s_ddot = 60.0 * x * (1.0 - x) * (1.0 - 2.0 * x) / duration_s ** 2
    return Progress(time, s, s_dot, s_ddot)


def trapezoid(duration_s: float, peak: float) -> Progress:
    """
    Trapezoidal speed from rest to rest, peak rate ``peak`` between 1 / T and 2 / T.

    Equal ramps; ``1 / T`` would be a rectangle, ``2 / T`` is a triangle (Biagiotti and Melchiorri,
    Trajectory Planning for Automatic Machines and Robots, 2008).
    """
    time = sample_times(duration_s)
    ramp = duration_s - 1.0 / peak
    bend = peak / ramp
    left = np.minimum(time, duration_s - time)
    near = np.where(left < ramp, 0.5 * bend * left ** 2, peak * (left - 0.5 * ramp))
    s = np.where(time <= 0.5 * duration_s, near, 1.0 - near)
    s_dot = np.minimum(bend * left, peak)
    rising = np.where(time < ramp, bend, 0.0)
    s_ddot = np.where(time > duration_s - ramp, -bend, rising)
    return Progress(time, s, s_dot, s_ddot)


def straight(progress: Progress, position_from: Array, position_to: Array, quaternion_from: Array,
             quaternion_to: Array) -> Reference:
    """
    Straight line and shortest turn under one progress, starting at time 0.

    Parameters
    ----------
    progress : Progress
        Share of the way over time, and its derivatives.
    position_from, position_to : ndarray, shape (3,)
        map, m.
    quaternion_from, quaternion_to : ndarray, shape (4,)
        Body to map.

    Returns
    -------
    Reference

    """
    span = position_to - position_from
    turn = logarithm(multiply(conjugate(quaternion_from), quaternion_to))
    quaternion = np.array([normalised(multiply(quaternion_from, exponential(s * turn)))
                           for s in progress.s])
    return Reference(
        0.0, frozen(progress.time_s), frozen(position_from + np.outer(progress.s, span)),
        frozen(np.outer(progress.s_dot, span)), frozen(np.outer(progress.s_ddot, span)),
        frozen(quaternion), frozen(np.outer(progress.s_dot, turn)),
        frozen(np.outer(progress.s_ddot, turn)))


def to_rest(position: Array, velocity: Array, acceleration: Array, quaternion: Array,
            position_to: Array, quaternion_to: Array, duration_s: float,
            start_s: float) -> Reference:
    """
    Quintic from a moving start to rest, turning by minimum jerk meanwhile.

    Parameters
    ----------
    position, velocity, acceleration : ndarray, shape (3,)
        Start, map.
    quaternion, quaternion_to : ndarray, shape (4,)
        Start and end, body to map.
    position_to : ndarray, shape (3,)
        End, map.
    duration_s, start_s : float
        How long it takes, and when it starts.

    Returns
    -------
    Reference

    """
    progress = minimum_jerk(duration_s)
    turned = straight(progress, position, position_to, quaternion, quaternion_to)
    x = (progress.time_s / duration_s)[:, None]
    c1 = velocity * duration_s
    c2 = 0.5 * acceleration * duration_s ** 2
    gap = position_to - position - c1 - c2
    gap_v = -c1 - 2.0 * c2
    gap_a = -2.0 * c2
    c3 = 10.0 * gap - 4.0 * gap_v + 0.5 * gap_a
    c4 = -15.0 * gap + 7.0 * gap_v - gap_a
    c5 = 6.0 * gap - 3.0 * gap_v + 0.5 * gap_a
    place = position + x * (c1 + x * (c2 + x * (c3 + x * (c4 + x * c5))))
    speed = c1 + x * (2.0 * c2 + x * (3.0 * c3 + x * (4.0 * c4 + x * 5.0 * c5)))
    bend = 2.0 * c2 + x * (6.0 * c3 + x * (12.0 * c4 + x * 20.0 * c5))
    return Reference(start_s, turned.time_s, frozen(place), frozen(speed / duration_s),
                     frozen(bend / duration_s ** 2), turned.quaternion_wxyz,
                     turned.rate_body_rad_s, turned.rate_dot_body_rad_s2)


def joined(parts: list[Reference]) -> Reference:
    """Join references end to start into one that starts at time 0; shared ends are kept once."""
    time: list[Array] = []
    columns: list[list[Array]] = [[], [], [], [], [], []]
    offset = 0.0
    for index, part in enumerate(parts):
        first = 0 if index == 0 else 1
        time.append(part.time_s[first:] + offset)
        offset += float(part.time_s[-1])
        for column, values in zip(columns, (
                part.position_map_m, part.velocity_map_m_s, part.acceleration_map_m_s2,
                part.quaternion_wxyz, part.rate_body_rad_s, part.rate_dot_body_rad_s2),
                strict=True):
            column.append(values[first:])
    return Reference(0.0, frozen(np.concatenate(time)),
                     *(frozen(np.concatenate(column)) for column in columns))
