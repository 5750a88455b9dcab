"""What goes into the wrench controller and its laws, and what comes out."""

from dataclasses import dataclass

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.loaded_body import LoadedBody
from suspended_ctrl.physics.reference import Reference, ReferencePoint
from suspended_ctrl.physics.values import CarrierPlan, CarrierSample, Estimate, Wrench
from suspended_ctrl.rig.frozen import Array


@dataclass(frozen=True, eq=False, slots=True)
class LawInputs:
    """
    What a law sees in one tick.

    Attributes
    ----------
    estimate : Estimate
        As it came, valid at its own stamp.
    felt : PlatformState
        Predicted to the moment at which this tick's demand is felt.
    point : ReferencePoint
        Reference at that moment.
    feedforward_map_m_s2 : ndarray, shape (3,)
        Reference acceleration there, corrected for the bend of the rotors' lag.
    reference : Reference
        The whole of it, for laws that look ahead.
    body : LoadedBody
        The moving mass with what payload there is.
    anchor_map_m : ndarray, shape (3,)
        As last measured.
    plan : CarrierPlan or None
        Where the allocator means to move the anchor.
    achieved : Wrench or None
        What the last commands are expected to give, tether included.
    saturated : bool
        Whether the last demand was more than that.

    """

    estimate: Estimate
    felt: PlatformState
    point: ReferencePoint
    feedforward_map_m_s2: Array
    reference: Reference
    body: LoadedBody
    anchor_map_m: Array
    plan: CarrierPlan | None
    achieved: Wrench | None
    saturated: bool


@dataclass(frozen=True, eq=False, slots=True)
class ControlInputs:
    """
    What is new since the controller's last step; None where nothing came.

    ``reference`` with a single point clears the one there was.
    """

    estimate: Estimate
    safety_state: str
    reference: Reference | None = None
    plan: CarrierPlan | None = None
    achieved: Wrench | None = None
    carrier: CarrierSample | None = None


@dataclass(frozen=True, eq=False, slots=True)
class ControlOutputs:
    """The demand, and what the controller follows (``path``, ``hold``, ``stop``, ``idle``)."""

    demand: Wrench
    following: str
    diagnostics: dict[str, float]
