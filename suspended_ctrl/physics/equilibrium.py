"""Where the platform hangs with the rotors at rest."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig


@dataclass(frozen=True, eq=False)
class Equilibrium:
    """Position of the ``base_link`` origin in map, tether stretch and tension, at rest."""

    position_map_m: Array
    stretch_m: float
    tension_n: float


def equilibrium(rig: Rig, anchor_map_m: Array | None = None,
                payload_kg: float = 0.0) -> Equilibrium:
    """
    Rest position under the anchor, platform level.

    Parameters
    ----------
    rig : Rig
        The hardware.
    anchor_map_m : ndarray, shape (3,), optional
        The anchor; where the carrier's zero stands if left out.
    payload_kg : float
        Mass that hangs on beside the body.

    Returns
    -------
    Equilibrium
        For a hook straight above the centre of mass; a platform whose hook is not hangs tilted,
        which the levelling torque of the rotors takes out while live.

    """
    anchor = anchor_at_zero(rig) if anchor_map_m is None else anchor_map_m
    tether = rig.tether
    tension = (rig.body.mass_kg + tether.mass_kg / 3.0 + payload_kg) * GRAVITY_M_S2
    stretch = tension / tether.stiffness_n_per_m
    drop = tether.rest_length_m + stretch + tether.hook_m[2]
    horizontal = rig.body.centre_of_mass_m[:2]
    position = anchor - np.array([horizontal[0], horizontal[1], drop])
    return Equilibrium(frozen(position), stretch, tension)


def anchor_at_zero(rig: Rig) -> Array:
    """Anchor in map with every axis reading zero, shape (3,)."""
    return rig.carrier.anchor_map(np.zeros(len(rig.carrier.axes)))
