"""
How fast a law may be on a given rig.

The law ``w^2 e + 2 zeta w e'`` on a double integrator crosses over at
``w sqrt(2 zeta^2 + sqrt(4 zeta^4 + 1))`` with phase margin ``atan(2 zeta wc / w)``; a delay of L
costs ``wc L`` of it (Astrom and Wittenmark, Computer-Controlled Systems). Prediction takes the
rotors' lag out as far as it is known; the margin below is kept against half of it being wrong.
"""

import math

PHASE_MARGIN_RAD = math.radians(45.0)
UNKNOWN_SHARE = 0.5


class BandwidthError(ValueError):
    """A bandwidth that the rotors' lag cannot carry; the message gives the highest that it can."""


def crossover_ratio(damping_ratio: float) -> float:
    """Crossover over natural frequency of the law on a double integrator."""
    square = 2.0 * damping_ratio ** 2
    return math.sqrt(square + math.sqrt(square ** 2 + 1.0))


def highest_bandwidth_hz(lag_s: float, damping_ratio: float) -> float:
    """
    Highest bandwidth that keeps the phase margin.

    Parameters
    ----------
    lag_s : float
        Time constant of the slowest rotor.
    damping_ratio : float
        Of the law on a double integrator.

    Returns
    -------
    float
        Hz.

    """
    ratio = crossover_ratio(damping_ratio)
    spare = math.atan(2.0 * damping_ratio * ratio) - PHASE_MARGIN_RAD
    return max(spare, 0.0) / (UNKNOWN_SHARE * lag_s) / ratio / (2.0 * math.pi)


def checked_bandwidth(bandwidth_hz: float, damping_ratio: float, lag_s: float) -> float:
    """
    Return the natural frequency in rad/s, or refuse.

    Parameters
    ----------
    bandwidth_hz, damping_ratio, lag_s : float
        Of the law, and the time constant of the slowest rotor, s.

    Returns
    -------
    float
        rad/s.

    Raises
    ------
    BandwidthError
        If either number is out of range or the lag cannot carry the bandwidth.

    """
    if not (math.isfinite(damping_ratio) and 0.3 <= damping_ratio <= 2.0):
        raise BandwidthError(f'damping_ratio {damping_ratio}: allowed is 0.3 to 2.0')
    if not (math.isfinite(bandwidth_hz) and bandwidth_hz > 0.0):
        raise BandwidthError(f'bandwidth_hz {bandwidth_hz}: must be above 0')
    highest = highest_bandwidth_hz(lag_s, damping_ratio)
    if bandwidth_hz > highest:
        raise BandwidthError(
            f'bandwidth_hz {bandwidth_hz}: a rotor lag of {lag_s * 1e3:.0f} ms carries at most '
            f'{highest:.2f} Hz at damping ratio {damping_ratio}')
    return 2.0 * math.pi * bandwidth_hz
