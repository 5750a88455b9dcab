"""What each figure of metrics.json is called, and in what unit a person reads it."""

from dataclasses import dataclass


def plain(value: float, digits: int) -> str:
    """Write a number with so many significant digits, large ones without an exponent."""
    text = f'{value:.{digits}g}'
    return f'{value:.0f}' if 'e' in text and abs(value) >= 1.0 else text


@dataclass(frozen=True)
class Reading:
    """Words, unit, factor from SI, and significant digits of a figure."""

    words: str
    unit: str = ''
    factor: float = 1.0
    digits: int = 3

    def number(self, value: float) -> str:
        """Value in this unit, with it."""
        return f'{plain(value * self.factor, self.digits)} {self.unit}'.rstrip()


GROUPS: dict[str, dict[str, Reading]] = {
    "Tracking, plant's truth against the reference": {
        'tracking.position_max_m': Reading('Greatest position error', 'mm', 1e3),
        'tracking.position_rms_m': Reading('Position error, root mean square', 'mm', 1e3),
        'tracking.path_max_m': Reading('Greatest distance from the path', 'mm', 1e3),
        'tracking.attitude_max_rad': Reading('Greatest attitude error', 'mrad', 1e3),
        'tracking.attitude_rms_rad': Reading('Attitude error, root mean square', 'mrad', 1e3)},
    'Effort on the path': {
        'effort.rotor_effort_n1p5_s': Reading('Rotor effort', 'N¹·⁵ s', 1.0, 4),
        'effort.rotor_energy_j': Reading('Rotor energy, ideal', 'J', 1.0, 4),
        'effort.rotor_saturated_fraction': Reading('Time with a rotor at its greatest speed', '%',
                                                   100.0),
        'effort.rotor_reversals': Reading('Rotor reversals', '', 1.0, 6),
        'effort.carrier_travel_m': Reading('Carrier travel', 'm')},
    'Tether on the path': {
        'tether.tension_min_n': Reading('Least tension', 'N'),
        'tether.tension_max_n': Reading('Greatest tension', 'N')},
    "Estimation, against the plant's truth": {
        'estimation.position_rms_m': Reading('Position error, root mean square', 'mm', 1e3),
        'estimation.velocity_rms_m_s': Reading('Velocity error, root mean square', 'mm/s', 1e3),
        'estimation.attitude_rms_rad': Reading('Attitude error, root mean square', 'mrad', 1e3),
        'estimation.nees_mean': Reading('Normalised error squared, mean (9 when consistent)')},
    'Loop, wall clock': {
        'loop.rate_hz': Reading('Rate', 'Hz', 1.0, 4),
        'loop.tick_p50_s': Reading('Tick, median', 'ms', 1e3),
        'loop.tick_p99_s': Reading('Tick, 99 in 100 below', 'ms', 1e3),
        'loop.tick_max_s': Reading('Tick, longest', 'ms', 1e3),
        'loop.plan_p99_s': Reading('Carrier plan, 99 in 100 below', 'ms', 1e3)},
    'Safety': {
        'safety.reaction_latency_s': Reading('Fault or broken limit to change of state', 'ms',
                                             1e3),
        'safety.cut_latency_s': Reading('Fault or broken limit to zero rotor command', 'ms', 1e3)},
    'Run': {
        'duration_s': Reading('Recorded', 's', 1.0, 4),
        'realtime_factor': Reading('Times as fast as real time')},
}

READINGS = {key: reading for group in GROUPS.values() for key, reading in group.items()}


def reading_of(key: str) -> Reading:
    """Words and unit of a key; the key itself where it is none of ours."""
    return READINGS.get(key, Reading(key))
