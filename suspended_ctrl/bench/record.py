"""What a rehearsal leaves behind: the topics that the graph would have carried."""

from collections.abc import Sequence

import numpy as np

from suspended_ctrl.bench.values import FaultEvent, Truth
from suspended_ctrl.loop import LoopInputs, LoopOutputs, LoopSettings
from suspended_ctrl.mission.player import MissionPlayer
from suspended_ctrl.mission.timing import TimedMission
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.values import (
    CarrierSample,
    ImuSample,
    PayloadEvent,
    PoseSample,
    RotorSample,
    TetherLoadSample,
)
from suspended_ctrl.review.log import RunFacts, RunLog, SafetyEvent
from suspended_ctrl.review.messages import Diagnostics, Disturbance, NodeStatus

_TOPICS = {PoseSample: 'pose', ImuSample: 'imu', RotorSample: 'rotor_states',
           CarrierSample: 'carrier_states', TetherLoadSample: 'tether_load',
           PayloadEvent: 'payload_event'}
# Truth beyond the pose, as the bench's node publishes it: 50 Hz; diagnostics once a second.
_TRUTH_EVERY_S = 0.02
_DIAGNOSTICS_EVERY_S = 1.0


class Recorder:
    """
    Fills a run's log, tick by tick.

    Parameters
    ----------
    mission : TimedMission
    seed : int
    loop : LoopSettings

    """

    def __init__(self, mission: TimedMission, seed: int, loop: LoopSettings) -> None:
        self.log = RunLog(RunFacts(
            mission=mission.mission.file.name, rig=mission.mission.rig.name, seed=seed,
            law=loop.control.law, allocator=loop.effort.allocator,
            mission_text=mission.mission.path.read_text()))
        self._ticks: list[float] = []
        self._plans: list[float] = []
        self._state = ''
        self._truth_due = 0.0
        self._diagnostics_due = 0.0
        self._payload_kg = 0.0

    def tick(self, t: float, inputs: LoopInputs, outputs: LoopOutputs, truth: Truth,
             spent_s: float) -> None:
        """
        Record one tick.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : LoopInputs
            What the loop was given.
        outputs : LoopOutputs
            What it gave.
        truth : Truth
            The plant as the tick begins.
        spent_s : float
            CPU time of the tick.

        """
        append = self.log.append
        self._ticks.append(spent_s)
        for sample in inputs.samples:
            append(_TOPICS[type(sample)], t, sample)
        for pressed in inputs.emergency_stop:
            append('emergency_stop', t, pressed)
        if inputs.reference is not None:
            append('reference', t, inputs.reference)
        append('ground_truth', t, PlatformState(
            truth.t_s, truth.position_map_m, truth.velocity_map_m_s, truth.quaternion_wxyz,
            truth.rate_body_rad_s))
        if t >= self._truth_due - 1e-9:
            self._truth_due += _TRUTH_EVERY_S
            append('ground_truth_tether', t, TetherLoadSample(truth.t_s, truth.tension_n))
            append('ground_truth_rotors', t, RotorSample(truth.t_s, truth.rotor_speed_rad_s))
        self._parts(t, outputs)
        if t >= self._diagnostics_due - 1e-9:
            self._diagnostics_due += _DIAGNOSTICS_EVERY_S
            append('/diagnostics', t, _diagnostics(t, outputs))

    def plan(self, spent_s: float) -> None:
        """Note the wall-clock time of a carrier plan."""
        self._plans.append(spent_s)

    def _parts(self, t: float, outputs: LoopOutputs) -> None:
        append = self.log.append
        estimated, control, effort = outputs.estimator, outputs.control, outputs.effort
        if estimated is not None and estimated.estimate.valid:
            estimate = estimated.estimate
            append('odometry', t, estimate)
            append('disturbance', t, Disturbance(
                estimate.stamp_s, estimate.disturbance_force_map_n,
                estimate.disturbance_torque_map_nm))
            if estimate.payload.mass_kg != self._payload_kg:
                self._payload_kg = estimate.payload.mass_kg
                append('payload', t, PayloadEvent(estimate.stamp_s, estimate.payload.mass_kg,
                                                  estimate.payload.position_m))
        if control is not None:
            append('wrench_demand', t, control.demand)
        if effort is not None:
            append('wrench_achieved', t, effort.achieved)
            append('rotor_demand', t, effort.rotor_demand)
            if effort.carrier_demand is not None:
                append('carrier_demand', t, effort.carrier_demand)
            if effort.plan is not None:
                append('carrier_plan', t, effort.plan)
        safety = outputs.safety
        if safety is not None:
            append('rotor_command', t, safety.rotor_command)
            if safety.carrier_command is not None:
                append('carrier_command', t, safety.carrier_command)
            if safety.state != self._state:
                self._state = safety.state
                append('safety/state', t, safety.state)
            for event in safety.events:
                self.log.facts.events.append(
                    SafetyEvent(event.t_s, event.cause, event.stop_category))

    def finish(self, player: MissionPlayer, trouble: str | None, faults: Sequence[FaultEvent],
               wall_s: float) -> None:
        """
        Add what is known only at the end.

        Parameters
        ----------
        player : MissionPlayer
            Knows when the path was flown.
        trouble : str or None
            Why the run ended before its path did.
        faults : sequence of FaultEvent
            What was injected, and when.
        wall_s : float
            Wall-clock time of the run.

        """
        facts = self.log.facts
        start, end = player.path_window_s()
        if np.isfinite(start):
            facts.path_start_s, facts.path_end_s = start, end
        began = [event.t_s for event in faults if event.began]
        facts.fault_s = min(began) if began else None
        facts.wall_s = wall_s
        facts.tick_wall_s = np.array(self._ticks)
        facts.plan_wall_s = np.array(self._plans)
        facts.ended = trouble


def _diagnostics(t: float, outputs: LoopOutputs) -> Diagnostics:
    parts = {'state_estimator': outputs.estimator, 'wrench_controller': outputs.control,
             'effort_allocator': outputs.effort}
    statuses = tuple(
        NodeStatus(name, 0 if part else 3, '' if part else 'silent',
                   _texts(part.diagnostics) if part else {})
        for name, part in parts.items())
    return Diagnostics(t, statuses)


def _texts(figures: dict[str, float]) -> dict[str, str]:
    return {key: f'{value:.6g}' for key, value in figures.items()}
