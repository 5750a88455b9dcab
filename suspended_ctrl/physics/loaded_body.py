"""The moving mass as a whole: platform, payload, and a third of the tether at the hook."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig


@dataclass(frozen=True, eq=False)
class LoadedBody:
    """
    One rigid body standing for all that moves.

    Attributes
    ----------
    mass_kg : float
    centre_m : ndarray, shape (3,)
        Its centre of mass, from the ``base_link`` origin.
    inertia_kg_m2, inertia_inverse : ndarray, shape (3, 3)
        About that centre, ``base_link`` axes.
    nominal_centre_m : ndarray, shape (3,)
        The rig file's centre of mass, where wrenches are taken.

    """

    mass_kg: float
    centre_m: Array
    inertia_kg_m2: Array
    inertia_inverse: Array
    nominal_centre_m: Array


def loaded_body(rig: Rig, payload: Payload | None = None) -> LoadedBody:
    """
    Combine the rig's body with a payload and the tether's share (parallel axes).

    Parameters
    ----------
    rig : Rig
        The hardware.
    payload : Payload, optional
        A point mass on the platform.

    Returns
    -------
    LoadedBody

    """
    points = [(rig.tether.mass_kg / 3.0, rig.tether.hook_m)]
    if payload is not None and payload.mass_kg > 0.0:
        points.append((payload.mass_kg, payload.position_m))
    body = rig.body
    mass = body.mass_kg + sum(m for m, _ in points)
    centre = (body.mass_kg * body.centre_of_mass_m + sum(m * p for m, p in points)) / mass
    inertia = body.inertia_kg_m2 + _steiner(body.mass_kg, body.centre_of_mass_m - centre)
    for m, p in points:
        inertia = inertia + _steiner(m, p - centre)
    return LoadedBody(mass, frozen(centre), frozen(inertia), frozen(np.linalg.inv(inertia)),
                      frozen(body.centre_of_mass_m))


def _steiner(mass: float, arm: Array) -> Array:
    shifted: Array = mass * ((arm @ arm) * np.eye(3) - np.outer(arm, arm))
    return shifted
