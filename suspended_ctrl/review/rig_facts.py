"""A rig in a few lines, for a page."""

import numpy as np

from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig


def _span(values: Array) -> str:
    low, high = float(values.min()), float(values.max())
    return f'{low:g}' if low == high else f'{low:g} to {high:g}'


def rig_facts(rig: Rig) -> list[tuple[str, str]]:
    """
    Name and value of what a reader of a report wants to know of the rig.

    Parameters
    ----------
    rig : Rig
        The hardware.

    Returns
    -------
    list of (str, str)

    """
    body, rotors, tether, carrier = rig.body, rig.rotors, rig.tether, rig.carrier
    inertia = ', '.join(f'{value:g}' for value in np.diag(body.inertia_kg_m2))
    ways = 'reversible' if rotors.reversible.all() else (
        'some reversible' if rotors.reversible.any() else 'one-way')
    facts = [
        ('Mass, inertia', f'{body.mass_kg:g} kg; {inertia} kg m²'),
        ('Rotors', f'{rotors.count}, {ways}'),
        ('Rotor speed', f'{_span(rotors.speed_min_rad_s)} to {_span(rotors.speed_max_rad_s)} '
         'rad/s'),
        ('Rotor lag', f'{_span(1e3 * rotors.time_constant_s)} ms'),
        ('Tether', f'{tether.rest_length_m:g} m, {tether.stiffness_n_per_m:g} N/m'),
        ('Slack margin, working load',
         f'{tether.slack_margin_n:g} N, {tether.working_load_n:g} N'),
        ('Anchor', ', '.join(f'{x:g}' for x in carrier.anchor_m) + ' m')]
    for k, axis in enumerate(carrier.axes):
        facts.append((f'Carrier {axis}', f'{carrier.min_m[k]:g} to {carrier.max_m[k]:g} m, '
                      f'{carrier.speed_max_m_s[k]:g} m/s, '
                      f'{carrier.acceleration_max_m_s2[k]:g} m/s²'))
    if not carrier.axes:
        facts.append(('Carrier', 'fixed'))
    box = ', '.join(f'{name} {low:g} to {high:g}' for name, low, high in zip(
        'xyz', rig.keep_in.lower_m, rig.keep_in.upper_m, strict=True))
    facts.append(('Keep-in', f'{box} m'))
    return facts
