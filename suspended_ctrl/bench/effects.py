"""Faults over time: which are active, and what they do."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
import math
from typing import Any

import numpy as np

from suspended_ctrl.bench import fault_kinds as kinds
from suspended_ctrl.bench import plant_effects as plant
from suspended_ctrl.bench import sensor_effects as sensor
from suspended_ctrl.bench.condition import Condition, Effect, Scene
from suspended_ctrl.bench.values import FaultEvent
from suspended_ctrl.rig.frozen import Array


class SilentEffect(Effect):
    """A part is silent; the loop asks the bench which are (``FaultSchedule.silent_parts``)."""

    def __init__(self, fault: kinds.ProcessKilled | kinds.ProcessStopped, scene: Scene) -> None:
        pass


_EFFECTS: dict[type, Callable[[Any, Scene], Effect]] = {
    kinds.PoseGone: sensor.GoneEffect, kinds.PoseLate: sensor.PoseLateEffect,
    kinds.PoseJump: sensor.PoseJumpEffect, kinds.PoseOutliers: sensor.PoseOutliersEffect,
    kinds.PoseFrozen: sensor.PoseFrozenEffect, kinds.PoseNan: sensor.PoseNanEffect,
    kinds.ImuGone: sensor.GoneEffect, kinds.ImuBiasStep: sensor.ImuBiasStepEffect,
    kinds.RotorDead: plant.RotorModeEffect, kinds.RotorStuck: plant.RotorModeEffect,
    kinds.RotorWeak: plant.RotorWeakEffect, kinds.TelemetryGone: sensor.GoneEffect,
    kinds.TetherCut: plant.TetherCutEffect, kinds.TetherSnag: plant.TetherSnagEffect,
    kinds.CarrierStall: plant.CarrierEffect, kinds.CarrierRunaway: plant.CarrierEffect,
    kinds.Push: plant.PushEffect, kinds.GustFault: plant.GustEffect,
    kinds.PayloadDrop: plant.PayloadDropEffect, kinds.EmergencyStop: sensor.EmergencyStopEffect,
    kinds.ProcessKilled: SilentEffect, kinds.ProcessStopped: SilentEffect,
    kinds.ClockJump: sensor.ClockJumpEffect, kinds.MessageFlood: sensor.MessageFloodEffect,
}
_ROUNDING_S = 1e-9
_NOBODY: frozenset[str] = frozenset()


def build_effect(fault: kinds.Fault, scene: Scene) -> Effect:
    """Make what a fault does."""
    return _EFFECTS[type(fault)](fault, scene)


@dataclass(eq=False)
class _Entry:
    fault: kinds.Fault
    effect: Effect
    start_s: float = math.inf
    end_s: float = math.inf
    active: bool = False
    done: bool = False

    def begin_at(self, t_s: float) -> None:
        lasting = getattr(self.fault, 'for_s', None)
        self.start_s = t_s
        self.end_s = t_s + lasting if lasting is not None else math.inf


class FaultSchedule:
    """
    The faults of one run over time.

    Parameters
    ----------
    faults : sequence of Fault
    effects : sequence of Effect
        One a fault.

    Attributes
    ----------
    next_change_s : float
        When the set of active faults changes next; inf where that is not known.
    watches_place : bool
        Whether a fault waits for the platform to come somewhere.
    events : list of FaultEvent
        Beginnings and ends so far.

    """

    def __init__(self, faults: Sequence[kinds.Fault], effects: Sequence[Effect]) -> None:
        self._entries = [_Entry(fault, effect)
                         for fault, effect in zip(faults, effects, strict=True)]
        self._parts = [(entry.fault.node, entry) for entry in self._entries
                       if isinstance(entry.fault, kinds.ProcessKilled | kinds.ProcessStopped)]
        self._path_start_s: float | None = None
        self.next_change_s = math.inf
        self.watches_place = False
        self.events: list[FaultEvent] = []

    @property
    def path_start_s(self) -> float | None:
        """Start of the mission's path, from which faults count; None before it is known."""
        return self._path_start_s

    @path_start_s.setter
    def path_start_s(self, t_s: float) -> None:
        self._path_start_s = t_s
        for entry in self._entries:
            if not (entry.active or entry.done) and entry.fault.at_s is not None:
                entry.begin_at(t_s + entry.fault.at_s)
        self._look_ahead()

    def watch_place(self, t_s: float, position_map_m: Array) -> None:
        """Begin the faults whose place the platform is at; nothing before the path starts."""
        if self._path_start_s is None or t_s < self._path_start_s - _ROUNDING_S:
            return
        for entry in self._entries:
            place = entry.fault.at_place
            if place is not None and entry.start_s == math.inf:
                away = np.linalg.norm(position_map_m - place.position_m)
                if away <= place.within_m:
                    entry.begin_at(t_s)
        self._look_ahead()

    def update(self, t_s: float, condition: Condition) -> Condition:
        """
        Begin and end what is due.

        Parameters
        ----------
        t_s : float
            The moment.
        condition : Condition
            Without a fault.

        Returns
        -------
        Condition
            The same one, with what the active faults do.

        """
        due = t_s + _ROUNDING_S
        for index, entry in enumerate(self._entries):
            if not (entry.active or entry.done) and entry.start_s <= due:
                entry.active = True
                entry.effect.begin(t_s)
                self.events.append(FaultEvent(t_s, index, entry.fault.kind, True))
            if entry.active and entry.end_s <= due:
                entry.active, entry.done = False, True
                self.events.append(FaultEvent(t_s, index, entry.fault.kind, False))
            if entry.active:
                entry.effect.apply(condition)
        self._look_ahead()
        return condition

    def silent_parts(self, t_s: float) -> frozenset[str]:
        """Nodes that are killed or stopped at ``t_s``."""
        if not self._parts:
            return _NOBODY
        due = t_s + _ROUNDING_S
        return frozenset(
            node for node, entry in self._parts if entry.start_s <= due < entry.end_s)

    def _look_ahead(self) -> None:
        waiting = [entry.end_s if entry.active else entry.start_s
                   for entry in self._entries if not entry.done]
        self.next_change_s = min(waiting, default=math.inf)
        self.watches_place = any(entry.fault.at_place is not None and entry.start_s == math.inf
                                 for entry in self._entries)
