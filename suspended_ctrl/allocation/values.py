"""What goes into the effort allocator and its strategies, and what comes out."""

from dataclasses import dataclass, field

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.loaded_body import LoadedBody
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierPlan,
    CarrierSample,
    Estimate,
    RotorCommand,
    RotorSample,
    Wrench,
)
from suspended_ctrl.rig.frozen import Array


@dataclass(frozen=True, eq=False, slots=True)
class AllocationInputs:
    """
    What a strategy sees in one tick.

    Attributes
    ----------
    demand : Wrench
        Total wrench wanted at the felt moment, finite.
    tether : Wrench
        What the tether gives then.
    tether_direction_body : ndarray, shape (3,)
        Unit vector from hook to anchor at the felt moment, ``base_link`` axes.
    other_torque_body_nm : ndarray, shape (3,)
        Torque the rotors give besides thrust and drag then: spin-up and gyroscopic.
    thrust_lower_n, thrust_upper_n : ndarray, shape (n,)
        Reachable from the present speeds through the lag inversion, inside the speed range; equal
        for a failed rotor. Reversible rotors: both signs, the unusable band included.
    rotor_speed_rad_s : ndarray, shape (n,)
        At the moment when this command arrives, by the observer.
    healthy : ndarray of bool, shape (n,)
    live : bool
        Whether the rotors are meant to turn.
    felt : PlatformState
        Platform at the felt moment.
    anchor_position_m, anchor_velocity_m_s : ndarray, shape (k,)
        Carrier axes now, by the observer.
    reference : Reference or None
        For a look ahead; None while there is none.
    body : LoadedBody
        Moving mass with what payload there is.
    disturbance_force_map_n : ndarray, shape (3,)
        What the model does not explain.

    """

    demand: Wrench
    tether: Wrench
    tether_direction_body: Array
    other_torque_body_nm: Array
    thrust_lower_n: Array
    thrust_upper_n: Array
    rotor_speed_rad_s: Array
    healthy: Array
    live: bool
    felt: PlatformState
    anchor_position_m: Array
    anchor_velocity_m_s: Array
    reference: Reference | None
    body: LoadedBody
    disturbance_force_map_n: Array


@dataclass(frozen=True, eq=False, slots=True)
class Allocation:
    """
    Who supplies the wrench.

    Attributes
    ----------
    thrust_n : ndarray, shape (n,)
        Of each rotor at the felt moment.
    carrier_position_m, carrier_velocity_m_s : ndarray, shape (k,), or None
        Setpoint of the carrier's axes; None leaves it as it was.
    plan : CarrierPlan or None
        Where the setpoint goes from here, where the strategy plans.
    fallback : str or None
        Why the strategy did not do its own work this tick.
    diagnostics : dict of str to float

    """

    thrust_n: Array
    carrier_position_m: Array | None = None
    carrier_velocity_m_s: Array | None = None
    plan: CarrierPlan | None = None
    fallback: str | None = None
    diagnostics: dict[str, float] = field(default_factory=dict)


@dataclass(frozen=True, eq=False, slots=True)
class EffortInputs:
    """
    What is new since the allocator's last step; None where nothing came.

    ``reference`` with fewer than two points clears the one there was.
    """

    demand: Wrench | None
    estimate: Estimate | None
    safety_state: str
    samples: tuple[RotorSample | CarrierSample, ...] = ()
    reference: Reference | None = None


@dataclass(frozen=True, eq=False, slots=True)
class EffortOutputs:
    """
    Commands for the safety supervisor, and what they are expected to do.

    Attributes
    ----------
    rotor_demand : RotorCommand
    carrier_demand : CarrierCommand or None
        None for a rig without axes.
    plan : CarrierPlan or None
        New this tick.
    achieved : Wrench
        Total wrench at the felt moment, tether included.
    diagnostics : dict of str to float

    """

    rotor_demand: RotorCommand
    carrier_demand: CarrierCommand | None
    plan: CarrierPlan | None
    achieved: Wrench
    diagnostics: dict[str, float]
