"""One run of a session: the operator's part, and the recording."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
import signal
import time
from typing import Any

from std_srvs.srv import SetBool, Trigger

from suspended_ctrl.bench.fault_kinds import Fault
from suspended_ctrl.bench.operator import AFTER_TRIP_S, HOLD_AFTER_END_S, HOLD_BEFORE_START_S
from suspended_ctrl.mission.timing import TimedMission
from suspended_ctrl.nodes.process_faults import ProcessFaults
from suspended_ctrl.nodes.processes import Processes
from suspended_ctrl.nodes.session_node import SessionNode
from suspended_ctrl.review.log import RunFacts

_TURN_S = 0.02
# From starting the processes to all of them answering; a busy machine takes its time.
_UP_WITHIN_S = 120.0
_READY_WITHIN_S = 15.0
_ANSWER_WITHIN_S = 5.0
# A stop is over by then, see the supervisor's ``stop_timeout_s``.
_STOP_WITHIN_S = 20.0
_LAST_WORDS_S = 0.3
POWERED = ('live', 'holding', 'stopping')


@dataclass(frozen=True)
class Ended:
    """
    How a session ended.

    Attributes
    ----------
    kind : str
        'done', 'trouble' (the mission did not run to its end), 'interrupted', 'input' (a node
        refused what it was given) or 'not_run'.
    reason : str or None
        In words; None when done.
    facts : RunFacts
        As in the recording.

    """

    kind: str
    reason: str | None
    facts: RunFacts


class _OverError(Exception):
    """The run is over before the mission is."""

    def __init__(self, kind: str, reason: str) -> None:
        super().__init__(reason)
        self.kind = kind


class SessionRun:
    """
    What the operator of a headless run does, in order.

    Parameters
    ----------
    mission : TimedMission
    processes : Processes
        Started by the caller before ``follow``.
    recording : Path
    facts : RunFacts
        Completed here.
    faults : sequence of Fault
    domain : int
    namespace : str
    told : list of int
        Signals that came.

    """

    def __init__(self, mission: TimedMission, processes: Processes, recording: Path,
                 facts: RunFacts, faults: Sequence[Fault], domain: int, namespace: str,
                 told: list[int]) -> None:
        self._mission = mission
        self._processes = processes
        self._facts = facts
        self._told = told
        self._node = SessionNode(mission.mission.rig, domain, namespace, recording)
        self._faults = ProcessFaults(faults, processes, self._node)
        self._at_s = [fault.at_s for fault in faults if fault.at_s is not None]
        self._guarded = True
        self._live = False
        self._closed = False

    def close(self) -> None:
        """Close the recording; nothing happens the second time."""
        if not self._closed:
            self._closed = True
            self._node.close(self._facts)

    def follow(self, wait_s: float, bench: bool, progress: Callable[[float], None]) -> Ended:
        """
        Wait for the nodes, enable, start, follow the path to its end, stop, end the nodes.

        Parameters
        ----------
        wait_s : float
            How long to wait for the plant's topics.
        bench : bool
            Whether the plant is ours.
        progress : callable
            Called with the share done.

        Returns
        -------
        Ended

        """
        began = time.monotonic()
        kind, reason = 'done', None
        try:
            self._up()
            self._plant(wait_s, bench)
            self._enable()
            self._rest(HOLD_BEFORE_START_S)
            self._start()
            self._path(progress)
            self._rest(HOLD_AFTER_END_S)
            self._stop()
        except _OverError as over:
            kind, reason = over.kind, str(over)
            self._aftermath(kind)
        self._end()
        self._facts.ended = reason
        self._facts.wall_s = time.monotonic() - began
        self.close()
        return Ended(kind, reason, self._facts)

    # ------------------------------------------------------------ the order of events

    def _up(self) -> None:
        if not self._until(self._node.answering, _UP_WITHIN_S):
            raise _OverError('not_run', f'the nodes were not up within {_UP_WITHIN_S:.0f} s: '
                             f'no {", ".join(self._node.silent_services())}')

    def _plant(self, wait_s: float, bench: bool) -> None:
        if not self._until(lambda: not self._node.silent_topics(), wait_s):
            whose = 'the bench' if bench else 'no plant'
            silent = ', '.join(self._node.silent_topics())
            raise _OverError('not_run', f'{whose}: nothing on {silent} within {wait_s:g} s')

    def _enable(self) -> None:
        if not self._until(self._node.settled, _READY_WITHIN_S):
            failed = self._ask('safety/enable', SetBool.Request(data=True))
            raise _OverError('trouble', f'not ready after {_READY_WITHIN_S:.0f} s, the rig is '
                             f'{self._node.state}: {failed.message}')
        answer = self._ask('safety/enable', SetBool.Request(data=True))
        if not answer.success:
            raise _OverError('trouble', f'not enabled: {answer.message}')
        if not self._until(lambda: self._node.state == 'live', _ANSWER_WITHIN_S):
            raise _OverError('trouble', f'enabled, but {self._node.state}')
        self._live = True

    def _start(self) -> None:
        answer = self._ask('mission/start', Trigger.Request())
        if not answer.success:
            raise _OverError('trouble', f'mission not started: {answer.message}')
        if not self._until(lambda: self._node.reference is not None, _ANSWER_WITHIN_S):
            raise _OverError('trouble', 'the mission was started, but there is no reference')

    def _path(self, progress: Callable[[float], None]) -> None:
        reference = self._node.reference
        assert reference is not None
        facts, start_s = self._facts, reference.start_s
        facts.path_start_s = start_s + self._mission.path_start_s
        facts.path_end_s = start_s + self._mission.path_end_s
        if self._at_s:
            facts.fault_s = facts.path_start_s + min(self._at_s)
        self._faults.begin(facts.path_start_s)
        length_s = reference.end_s - start_s
        while (now := self._node.now_s()) < reference.end_s:
            progress(min(max((now - start_s) / length_s, 0.0), 1.0))
            self._turn()
        progress(1.0)

    def _stop(self) -> None:
        self._live = False
        answer = self._ask('safety/stop', Trigger.Request())
        if not answer.success:
            raise _OverError('trouble', f'not stopped: {answer.message}')
        if not self._until(lambda: self._node.state in ('ready', 'tripped', 'locked'),
                           _STOP_WITHIN_S):
            raise _OverError('trouble', f'still {self._node.state} {_STOP_WITHIN_S:.0f} s after '
                             'stop')
        if self._node.state == 'tripped':
            raise _OverError('trouble', f'tripped while stopping: {self._node.cause}')
        self._rest(0.1)

    def _aftermath(self, kind: str) -> None:
        """Let the rig come to rest as it does, and record it; not for long if interrupted."""
        self._guarded = False
        if kind in ('interrupted', 'input', 'not_run'):
            return
        if self._node.state in ('live', 'holding'):
            self._node.request('safety/stop', Trigger.Request())
        self._until(lambda: self._node.state not in POWERED
                    or 'safety_supervisor' in self._processes.ended(), _STOP_WITHIN_S)
        self._rest(AFTER_TRIP_S)

    def _end(self) -> None:
        """End the nodes, the supervisor first: its last word is zero, and is recorded."""
        self._guarded = False
        self._processes.send('safety_supervisor', signal.SIGINT)
        self._rest(_LAST_WORDS_S)
        self._processes.end()
        self._node.turn()

    # ------------------------------------------------------------ turns

    def _ask(self, service: str, request: Any) -> Any:
        future = self._node.request(service, request)
        if not self._until(future.done, _ANSWER_WITHIN_S):
            raise _OverError('trouble', f'{service}: no answer within {_ANSWER_WITHIN_S:g} s')
        return future.result()

    def _until(self, condition: Callable[[], bool], within_s: float) -> bool:
        until = time.monotonic() + within_s
        while not condition():
            if time.monotonic() > until:
                return False
            self._turn()
        return True

    def _rest(self, seconds: float) -> None:
        until = time.monotonic() + seconds
        while time.monotonic() < until:
            self._turn()

    def _turn(self) -> None:
        due = time.monotonic() + _TURN_S
        self._node.turn()
        self._faults.turn(self._node.now_s())
        if self._guarded:
            self._watch()
        time.sleep(max(due - time.monotonic(), 0.0))

    def _watch(self) -> None:
        """End the run where something ends it; what is told first counts."""
        if self._told:
            raise _OverError('interrupted', 'interrupted')
        for name, code in self._processes.ended().items():
            said = self._processes.last_line(name)
            if code == 2:
                raise _OverError('input', said or f'{name} refused its parameters')
            how = f'killed by {signal.Signals(-code).name}' if code < 0 else f'exit {code}: {said}'
            raise _OverError('trouble', f'{name} ended: {how}')
        state = self._node.state
        if self._live and state != 'live':
            raise _OverError('trouble', f'{state}: {self._node.cause or "no cause was said"}')
