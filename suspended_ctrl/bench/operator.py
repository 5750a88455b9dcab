"""Who works the rig in a rehearsal: waits, enables, starts the mission, stops at its end."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.mission.player import MissionPlayer
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.values import Estimate, PayloadEvent
from suspended_ctrl.safety.values import SafetyOutputs

READY_WITHIN_S = 10.0
HOLD_BEFORE_START_S = 1.0
HOLD_AFTER_END_S = 0.5
AFTER_TRIP_S = 2.0


@dataclass(frozen=True, eq=False, slots=True)
class Orders:
    """What the operator does this tick."""

    requests: tuple[str, ...] = ()
    reference: Reference | None = None
    payload_events: tuple[PayloadEvent, ...] = ()


class Operator:
    """
    The headless order of events: ready, enable, start, end of path, stop.

    Parameters
    ----------
    player : MissionPlayer

    Attributes
    ----------
    done : bool
        The rig is without power again and nothing is left to do.
    trouble : str or None
        Why the mission did not run to its end.

    """

    def __init__(self, player: MissionPlayer) -> None:
        self.player = player
        self.done = False
        self.trouble: str | None = None
        self._phase = 'wait'
        self._since = 0.0
        self._was_live = False

    def step(self, t: float, safety: SafetyOutputs | None, estimate: Estimate | None) -> Orders:
        """
        Look at the last tick's outputs and decide.

        Parameters
        ----------
        t : float
            Now, s.
        safety : SafetyOutputs or None
            The supervisor's, None before the first.
        estimate : Estimate or None
            None while there is none.

        Returns
        -------
        Orders

        """
        state = safety.state if safety else 'locked'
        self._was_live = self._was_live or state == 'live'
        if self._was_live and state not in ('live', 'stopping') and self._phase != 'over':
            if self._phase != 'stop' or state != 'ready':
                cause = safety.changes[-1].cause if safety and safety.changes else state
                self.trouble = self.trouble or f'{state}: {cause}'
            self._to('over', t)
        return self._phase_step(t, state, safety, estimate)

    def _phase_step(self, t: float, state: str, safety: SafetyOutputs | None,
                    estimate: Estimate | None) -> Orders:
        waited = t - self._since
        if self._phase == 'wait':
            if state == 'ready':
                self._to('enable', t)
                return Orders(requests=('enable',))
            if waited > READY_WITHIN_S:
                failed = ', '.join(safety.failed_checks) if safety else 'no supervisor'
                self.trouble = f'not ready after {READY_WITHIN_S:.0f} s: {failed}'
                self.done = True
        elif self._phase == 'enable':
            if state == 'live' and waited > HOLD_BEFORE_START_S and estimate is not None:
                reply = self.player.start(t, state, np.array(estimate.position_map_m),
                                          np.array(estimate.quaternion_wxyz))
                self._to('path' if reply.success else 'stop', t)
                if not reply.success:
                    self.trouble = reply.message
                    return Orders(requests=('stop',))
                return Orders(reference=self.player.reference)
            if waited > READY_WITHIN_S:
                self.trouble = f'not live {READY_WITHIN_S:.0f} s after enabling'
                self.done = True
        elif self._phase == 'path':
            events = tuple(self.player.payload_events(t))
            if self.player.finished(t - HOLD_AFTER_END_S):
                self._to('stop', t)
                return Orders(requests=('stop',), payload_events=events)
            return Orders(payload_events=events)
        elif self._phase == 'over':
            settle = AFTER_TRIP_S if self.trouble else 0.1
            self.done = waited > settle
        return Orders()

    def _to(self, phase: str, t: float) -> None:
        self._phase, self._since = phase, t
