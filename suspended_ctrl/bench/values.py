"""What the bench tells beyond the measurements: its truth, its signals, where it starts."""

from dataclasses import dataclass, field

import numpy as np

from suspended_ctrl.physics.values import Payload, Sample
from suspended_ctrl.rig.frozen import Array, frozen


@dataclass(frozen=True, slots=True)
class EmergencyStopSample:
    """The emergency stop's signal, true for stop."""

    stamp_s: float
    stop: bool


BenchSample = Sample | EmergencyStopSample


@dataclass(frozen=True, eq=False, slots=True)
class Truth:
    """
    What is the case at ``t_s`` of the bench's clock.

    Attributes
    ----------
    t_s : float
    position_map_m, velocity_map_m_s : ndarray, shape (3,)
        Of the ``base_link`` origin.
    quaternion_wxyz : ndarray, shape (4,)
    rate_body_rad_s : ndarray, shape (3,)
    acceleration_map_m_s2 : ndarray, shape (3,)
        Of the ``base_link`` origin, mean over the last plant step.
    tension_n : float
    rotor_speed_rad_s, rotor_thrust_n : ndarray, shape (n,)
        Signed by thrust direction; thrust is the mean over the last plant step.
    anchor_map_m : ndarray, shape (3,)
    carrier_position_m, carrier_velocity_m_s : ndarray, shape (k,)
    payload : Payload

    """

    t_s: float
    position_map_m: Array
    velocity_map_m_s: Array
    quaternion_wxyz: Array
    rate_body_rad_s: Array
    acceleration_map_m_s2: Array
    tension_n: float
    rotor_speed_rad_s: Array
    rotor_thrust_n: Array
    anchor_map_m: Array
    carrier_position_m: Array
    carrier_velocity_m_s: Array
    payload: Payload


@dataclass(frozen=True, eq=False)
class Start:
    """
    Where the platform is at time zero, from its own equilibrium, at rest.

    Attributes
    ----------
    offset_map_m : ndarray, shape (3,)
        Of the ``base_link`` origin.
    held : bool
        Held there until ``Bench.let_go``; rotors, carrier and sensors work meanwhile.

    """

    offset_map_m: Array = field(default_factory=lambda: frozen(np.zeros(3)))
    held: bool = False


@dataclass(frozen=True, slots=True)
class FaultEvent:
    """Fault number ``index`` of the list, of ``kind``, began or ended at ``t_s``."""

    t_s: float
    index: int
    kind: str
    began: bool
