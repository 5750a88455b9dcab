"""How long a plant step is."""

from suspended_ctrl.rig.rig import Rig

# With MuJoCo's fourth-order Runge-Kutta steps this long keep a free top's precession over 7 s to
# 1e-11 of its spin (half-implicit Euler at half the step: 1e-2) and an undamped swing's energy
# over a minute to 1e-6 J (test/bench/test_free_body.py, test_tether.py).
STEP_MAX_S = 0.0025
# Not shorter than this for the sake of an odd rate.
_STEP_MIN_S = 0.0005
_WHOLE = 1e-6


def plant_step_s(rig: Rig) -> float:
    """
    Longest step on which every sensor's samples fall, if one of over half a millisecond does.

    Parameters
    ----------
    rig : Rig
        The hardware.

    Returns
    -------
    float
        Else a step for the fastest sensor; the others' samples are taken on the next step.

    """
    sensors = rig.sensors
    rates = [sensor.rate_hz for sensor in (
        sensors.pose, sensors.imu, sensors.rotor_states, sensors.carrier_states,
        sensors.tether_load) if sensor is not None]
    fastest = max(rates)
    first = 1
    while 1.0 / (fastest * first) > STEP_MAX_S * (1.0 + _WHOLE):
        first += 1
    parts = first
    while 1.0 / (fastest * parts) >= _STEP_MIN_S:
        step = 1.0 / (fastest * parts)
        steps = [1.0 / (rate * step) for rate in rates]
        if all(abs(n - round(n)) < _WHOLE * n for n in steps):
            return step
        parts += 1
    return 1.0 / (fastest * first)
