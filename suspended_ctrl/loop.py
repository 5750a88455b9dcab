"""
The four parts in a row: measurements in, commands out.

Nothing is decided here. What passes between the parts in one tick here passes over topics in the
graph; the parts are the same.
"""

from dataclasses import dataclass, field

from suspended_ctrl.allocation.allocator import EffortAllocator
from suspended_ctrl.allocation.settings import EffortSettings
from suspended_ctrl.allocation.values import EffortInputs, EffortOutputs
from suspended_ctrl.control.controller import ControlSettings, WrenchController
from suspended_ctrl.control.values import ControlInputs, ControlOutputs
from suspended_ctrl.estimation.estimator import Estimator, EstimatorInputs, EstimatorOutputs
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.values import CarrierSample, RotorSample, Sample
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.supervisor import SafetySupervisor
from suspended_ctrl.safety.values import EmergencyStop, Message, SafetyInputs, SafetyOutputs


@dataclass(frozen=True)
class LoopSettings:
    """
    Settings of the parts, and the tick.

    Attributes
    ----------
    rate_hz : float
        Of every part.
    transport_s : float
        From a step to the drives.
    control : ControlSettings
    effort : EffortSettings
        ``transport_s`` of both is set from the two above: half a tick of hold is added.

    """

    rate_hz: float = 200.0
    transport_s: float = 0.002
    control: ControlSettings = field(default_factory=ControlSettings)
    effort: EffortSettings = field(default_factory=EffortSettings)


@dataclass(frozen=True, eq=False, slots=True)
class LoopInputs:
    """
    What came since the last tick.

    Attributes
    ----------
    samples : tuple of Sample
        In order of arrival.
    emergency_stop : tuple of bool
        The line's messages, true for pressed.
    requests : tuple of str
        To the supervisor: 'enable', 'disable', 'stop', 'reset'.
    reference : Reference or None
        A new one; with fewer than two points it clears.
    silent : frozenset of str
        Parts that are dead, by the names of their executables.

    """

    samples: tuple[Sample, ...] = ()
    emergency_stop: tuple[bool, ...] = ()
    requests: tuple[str, ...] = ()
    reference: Reference | None = None
    silent: frozenset[str] = frozenset()


@dataclass(frozen=True, eq=False, slots=True)
class LoopOutputs:
    """What each part said this tick; None where it is silent or had nothing to step on."""

    estimator: EstimatorOutputs | None
    control: ControlOutputs | None
    effort: EffortOutputs | None
    safety: SafetyOutputs | None


class ControlLoop:
    """
    Estimator, controller, allocator and supervisor, called in a row.

    Parameters
    ----------
    rig : Rig
    settings : LoopSettings
    safety : SafetySettings, optional

    """

    def __init__(self, rig: Rig, settings: LoopSettings,
                 safety: SafetySettings | None = None) -> None:
        self.rig = rig
        self.settings = settings
        self.estimator = Estimator(rig)
        self.controller = WrenchController(rig, settings.control)
        self.allocator = EffortAllocator(rig, settings.effort)
        self.supervisor = SafetySupervisor(rig, safety)
        self._state = 'locked'
        self._effort: EffortOutputs | None = None

    def step(self, t: float, inputs: LoopInputs) -> LoopOutputs:
        """
        One tick.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : LoopInputs
            What came since the last tick.

        Returns
        -------
        LoopOutputs
            ``safety`` holds the commands.

        """
        silent = inputs.silent
        estimated = control = effort = safety = None
        if 'state_estimator' not in silent:
            estimated = self.estimator.step(t, EstimatorInputs(inputs.samples))
        usable = estimated is not None and estimated.estimate.valid
        carrier = _newest_carrier(inputs.samples)
        if 'wrench_controller' not in silent and usable:
            assert estimated is not None
            before = self._effort
            control = self.controller.step(t, ControlInputs(
                estimated.estimate, self._state, inputs.reference,
                before.plan if before else None, before.achieved if before else None, carrier))
            self._effort = None
        if 'effort_allocator' not in silent and control is not None:
            assert estimated is not None
            told = tuple(s for s in inputs.samples if isinstance(s, RotorSample | CarrierSample))
            effort = self.allocator.step(t, EffortInputs(
                control.demand, estimated.estimate, self._state, told, inputs.reference))
            self._effort = effort
        if 'safety_supervisor' not in silent:
            safety = self.supervisor.step(t, SafetyInputs(
                t, _arrivals(t, inputs, estimated if usable else None, effort), inputs.requests))
            self._state = safety.state
        return LoopOutputs(estimated, control, effort, safety)


def _newest_carrier(samples: tuple[Sample, ...]) -> CarrierSample | None:
    for sample in reversed(samples):
        if isinstance(sample, CarrierSample):
            return sample
    return None


def _arrivals(t: float, inputs: LoopInputs, estimated: EstimatorOutputs | None,
              effort: EffortOutputs | None) -> tuple[tuple[float, Message], ...]:
    messages: list[Message] = [*inputs.samples]
    messages += [EmergencyStop(pressed) for pressed in inputs.emergency_stop]
    if estimated is not None:
        messages.append(estimated.estimate)
    if effort is not None:
        messages.append(effort.rotor_demand)
        if effort.carrier_demand is not None:
            messages.append(effort.carrier_demand)
    return tuple((t, message) for message in messages)
