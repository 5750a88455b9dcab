"""Faults that befall processes: killed or stopped, at a time or at a place."""

from collections.abc import Sequence
import signal

import numpy as np

from suspended_ctrl.bench.fault_kinds import Fault, Place, ProcessKilled, ProcessStopped
from suspended_ctrl.nodes.processes import Processes
from suspended_ctrl.nodes.session_node import SessionNode
from suspended_ctrl.nodes.wire import motion_reader
from suspended_ctrl.review.topics import TOPICS
from suspended_ctrl.rig.frozen import Array


class ProcessFaults:
    """
    Sends the signals that faults stand for.

    Parameters
    ----------
    faults : sequence of Fault
        Those that befall no process are somebody else's.
    processes : Processes
    node : SessionNode
        Hears where the platform truly is.

    """

    def __init__(self, faults: Sequence[Fault], processes: Processes, node: SessionNode) -> None:
        self._waiting = [fault for fault in faults
                         if isinstance(fault, ProcessKilled | ProcessStopped)]
        self._processes = processes
        self._path_start_s: float | None = None
        self._wakes: list[tuple[float, str]] = []
        self._place: Array | None = None
        self._read = motion_reader(TOPICS['ground_truth'])
        if any(fault.at_place is not None for fault in self._waiting):
            node.watch('ground_truth', self._hear)

    def begin(self, path_start_s: float) -> None:
        """Count from the start of the path, host time."""
        self._path_start_s = path_start_s

    def turn(self, now_s: float) -> None:
        """Do what has come due."""
        if self._path_start_s is None or now_s < self._path_start_s:
            return
        for fault in list(self._waiting):
            if self._due(fault, now_s - self._path_start_s):
                self._waiting.remove(fault)
                stopped = isinstance(fault, ProcessStopped)
                self._processes.send(fault.node, signal.SIGSTOP if stopped else signal.SIGKILL)
                if isinstance(fault, ProcessStopped) and fault.for_s is not None:
                    self._wakes.append((now_s + fault.for_s, fault.node))
        for wake in list(self._wakes):
            if now_s >= wake[0]:
                self._wakes.remove(wake)
                self._processes.send(wake[1], signal.SIGCONT)

    def _due(self, fault: ProcessKilled | ProcessStopped, since_s: float) -> bool:
        if fault.at_s is not None:
            return since_s >= fault.at_s
        return fault.at_place is not None and self._inside(fault.at_place)

    def _inside(self, place: Place) -> bool:
        return self._place is not None and bool(
            np.linalg.norm(self._place - np.array(place.position_m)) <= place.within_m)

    def _hear(self, data: bytes) -> None:
        self._place = self._read(data).position_map_m
