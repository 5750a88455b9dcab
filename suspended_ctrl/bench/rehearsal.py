"""A whole mission against the bench in one process: deterministic, faster than real time."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
import time

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.fault_kinds import Fault
from suspended_ctrl.bench.mismatch import Mismatch
from suspended_ctrl.bench.operator import Operator
from suspended_ctrl.bench.record import Recorder
from suspended_ctrl.bench.values import EmergencyStopSample
from suspended_ctrl.loop import ControlLoop, LoopInputs, LoopOutputs, LoopSettings
from suspended_ctrl.mission.player import MissionPlayer
from suspended_ctrl.mission.timing import TimedMission
from suspended_ctrl.physics.values import PayloadEvent, Sample
from suspended_ctrl.review.log import RunLog

# After this much longer than the mission takes something hangs.
_SLACK_S = 60.0
_PROGRESS_EVERY = 100


@dataclass(frozen=True)
class RehearsalSettings:
    """
    How to rehearse.

    Attributes
    ----------
    seed : int
        Everything random comes from it.
    mismatch : str
        'default' or 'none'.
    wind_m_s : float
        Wind at 20 feet, all the time.
    loop : LoopSettings

    """

    seed: int = 0
    mismatch: str = 'default'
    wind_m_s: float = 0.0
    loop: LoopSettings = field(default_factory=LoopSettings)


class Rehearsal:
    """
    Bench, loop, player and operator, ready to run once.

    Parameters
    ----------
    mission : TimedMission
    settings : RehearsalSettings
    faults : sequence of Fault

    Attributes
    ----------
    log : RunLog
        Filled by ``run``.

    """

    def __init__(self, mission: TimedMission, settings: RehearsalSettings,
                 faults: Sequence[Fault] = ()) -> None:
        rig = mission.mission.rig
        self.mission = mission
        self.settings = settings
        mismatch = Mismatch.none(rig) if settings.mismatch == 'none' else None
        self.bench = Bench(rig, settings.seed, mismatch, faults, wind_m_s=settings.wind_m_s)
        self.loop = ControlLoop(rig, settings.loop)
        self.player = MissionPlayer(mission)
        self.operator = Operator(self.player)
        self._recorder = Recorder(mission, settings.seed, settings.loop)
        self.log = self._recorder.log
        self._events: tuple[PayloadEvent, ...] = ()

    def run(self, progress: Callable[[float], None] | None = None) -> RunLog:
        """
        Run the mission to its end, or to its trip.

        Parameters
        ----------
        progress : callable, optional
            Called with the share done, now and then.

        Returns
        -------
        RunLog

        """
        settings = self.settings.loop
        dt = 1.0 / settings.rate_hz
        limit = float(self.mission.reference.time_s[-1]) + _SLACK_S
        began = time.perf_counter()
        outputs: LoopOutputs | None = None
        tick = 0
        t = 0.0
        while not self.operator.done and t < limit:
            tick += 1
            t = tick * dt
            outputs = self._tick(t, outputs)
            if progress is not None and tick % _PROGRESS_EVERY == 0:
                progress(self.player.progress(t))
        if not self.operator.done:
            self.operator.trouble = f'not over after {limit:.0f} s'
        self._recorder.finish(self.player, self.operator.trouble, self.bench.fault_events,
                              time.perf_counter() - began)
        return self.log

    def _tick(self, t: float, before: LoopOutputs | None) -> LoopOutputs:
        bench, loop = self.bench, self.loop
        self._send(t, before)
        bench.advance(t)
        arrived = bench.samples(t)
        estimate = before.estimator.estimate if before and before.estimator else None
        orders = self.operator.step(t, before.safety if before else None, estimate)
        if orders.reference is not None:
            bench.path_start_s = self.player.path_window_s()[0]
        for event in orders.payload_events:
            if event.mass_kg > 0.0:
                bench.attach_payload(event.mass_kg, event.position_m)
            else:
                bench.release_payload()
        samples: list[Sample] = []
        pressed: list[bool] = []
        for item in arrived:
            if isinstance(item, EmergencyStopSample):
                pressed.append(item.stop)
            else:
                samples.append(item)
        samples.extend(orders.payload_events)
        inputs = LoopInputs(tuple(samples), tuple(pressed), orders.requests, orders.reference,
                            bench.silent_parts(t))
        started = time.thread_time()
        outputs = loop.step(t, inputs)
        spent = time.thread_time() - started
        self._recorder.tick(t, inputs, outputs, bench.truth(), spent)
        self._plan(t)
        return outputs

    def _plan(self, t: float) -> None:
        """Plan the carrier outside the tick; the allocator puts it into effect a period later."""
        allocator = self.loop.allocator
        request = allocator.plan_request(t)
        if request is not None:
            started = time.thread_time()
            allocator.take_plan(allocator.solve_plan(request))
            self._recorder.plan(time.thread_time() - started)

    def _send(self, t: float, before: LoopOutputs | None) -> None:
        """Hand the last tick's commands to the drives after the transport's delay."""
        if before is None or before.safety is None:
            return
        settings = self.settings.loop
        at = t - 1.0 / settings.rate_hz + settings.transport_s
        self.bench.advance(at)
        self.bench.command_rotors(at, before.safety.rotor_command.speed_rad_s)
        carrier = before.safety.carrier_command
        if carrier is not None:
            self.bench.command_carrier(at, carrier.position_m, carrier.velocity_m_s)
