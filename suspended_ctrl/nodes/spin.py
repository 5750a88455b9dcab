"""
A node's loop: wait for what wakes it, empty its inboxes, step.

An executor builds its wait set anew for every callback and serves one message a turn; at 1,300
messages a second that alone is most of a core. Here one wait set serves the node's life and a turn
empties everything that waits. The wait set is the one that ``rclpy.wait_for_message`` uses.
Services and parameters go through an ordinary executor, looked at 20 times a second.
"""

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
import time
from typing import TypeVar

from rclpy.executors import SingleThreadedExecutor
from rclpy.impl.implementation_singleton import rclpy_implementation
from rclpy.node import Node

from suspended_ctrl.nodes.channels import Emptied, Inbox

_Result = TypeVar('_Result')

SERVE_EVERY_S = 0.05
# Periods after a step on a message: before the next one at the soonest, and before the timer steps
# if no message comes.
_GAP = 0.4
_PATIENCE = 1.5
# A longer gap between two steps is no lateness: nobody spoke.
_SILENCE_S = 0.5
_NESTED_S = 0.001


class Waiter:
    """
    Wait for messages of a fixed set of inboxes.

    Parameters
    ----------
    node : Node
    inboxes : sequence of Inbox

    """

    def __init__(self, node: Node, inboxes: Sequence[Inbox]) -> None:
        # What rclpy itself listens to, such as the clock under use_sim_time, wakes the loop too.
        self._own = [one for one in node.subscriptions
                     if not isinstance(one.callback_group, Emptied)]
        self._handles = [one.handle for one in (*inboxes, *self._own)]
        self._own_pointers = {one.handle.pointer for one in self._own}
        self._set = rclpy_implementation.WaitSet(
            len(self._handles), 0, 0, 0, 0, 0, node.context.handle)

    def wait(self, timeout_s: float) -> bool:
        """
        Wait for a message.

        Parameters
        ----------
        timeout_s : float
            Longest wait.

        Returns
        -------
        bool
            Whether one of rclpy's own subscriptions has something.

        """
        if not self._handles:
            time.sleep(max(timeout_s, 0.0))
            return False
        self._set.clear_entities()
        for handle in self._handles:
            self._set.add_subscription(handle)
        self._set.wait(max(int(timeout_s * 1e9), 0))
        if not self._own_pointers:
            return False
        return not self._own_pointers.isdisjoint(self._set.get_ready_entities('subscription'))


class Loop:
    """
    Turns of a node at a rate, on messages, or both.

    Parameters
    ----------
    node : Node
    turn : callable
        Called with whether the turn is due by the timer.
    serve : callable
        Called every ``SERVE_EVERY_S``, for what need not be punctual.

    Attributes
    ----------
    late : int
        Ticks that could not be held because the one before took, or the machine was away, longer
        than a period.

    """

    def __init__(self, node: Node, turn: Callable[[bool], None],
                 serve: Callable[[], None]) -> None:
        self.late = 0
        self._node = node
        self._turn = turn
        self._house = serve
        self._leaving: Callable[[], bool] = lambda: False
        self._executor = SingleThreadedExecutor(context=node.context)
        self._executor.add_node(node)
        self._waiter = Waiter(node, ())
        self._period_s = 0.0
        self._timer = False
        self._due_s = 0.0
        self._earliest_s = 0.0
        self._stepped_s = float('-inf')
        self._nested = False

    def listen(self, wakes: Sequence[Inbox], period_s: float | None = None,
               timer: bool = False) -> None:
        """
        Set what gives the node a turn; takes effect at once.

        Parameters
        ----------
        wakes : sequence of Inbox
            A message in one of them, not sooner than a part of a period after the last step.
        period_s : float, optional
            Between two steps, as a rule.
        timer : bool
            Whether the time alone gives a turn, too.

        """
        self._waiter = Waiter(self._node, wakes)
        self._period_s = period_s or 0.0
        self._timer = timer
        self._due_s = self._earliest_s = time.monotonic()

    def stepped(self) -> None:
        """Note a step that a message gave: the timer waits for the next message first."""
        now = time.monotonic()
        gap_s = now - self._stepped_s
        if 2.0 * self._period_s < gap_s < _SILENCE_S:
            self.late += int(gap_s / self._period_s) - 1
        self._stepped_s = now
        self._earliest_s = now + _GAP * self._period_s
        self._due_s = now + _PATIENCE * self._period_s

    def leave_when(self, leaving: Callable[[], bool]) -> None:
        """Set what brings the loop to its end."""
        self._leaving = leaving

    def run(self) -> None:
        """Turn until told to leave."""
        serve_s = time.monotonic()
        while not self._leaving():
            if time.monotonic() >= serve_s:
                self._serve()
                self._house()
                serve_s = time.monotonic() + SERVE_EVERY_S
            else:
                self._once(serve_s)
        self._executor.shutdown()

    def meanwhile(self, work: Callable[[], _Result]) -> _Result:
        """
        Do something slow in a thread and go on turning until it is done.

        Parameters
        ----------
        work : callable
            Must not touch what turns use.

        Returns
        -------
        object
            What ``work`` returned; what it raised is raised here.

        """
        with ThreadPoolExecutor(1) as pool:
            future = pool.submit(work)
            self._nested = True
            try:
                while not future.done():
                    self._once(time.monotonic() + SERVE_EVERY_S)
            finally:
                self._nested = False
            return future.result()

    def _once(self, until_s: float) -> None:
        """One turn, on a message, the timer or the time ``until_s``."""
        if self._timer:
            until_s = min(until_s, self._due_s)
        if self._waiter.wait(until_s - time.monotonic()):
            if self._nested:
                # An executor serves one thing at a time; the clock stands still meanwhile.
                time.sleep(_NESTED_S)
            else:
                self._executor.spin_once(timeout_sec=0.0)
        early_s = self._earliest_s - time.monotonic()
        if early_s > 0.0:
            # A flood of messages must not become a flood of steps.
            time.sleep(early_s)
        self._turn(self._is_due())

    def _is_due(self) -> bool:
        now = time.monotonic()
        if not self._timer or now < self._due_s:
            return False
        missed = int((now - self._due_s) / self._period_s)
        self.late += missed
        self._due_s += (missed + 1) * self._period_s
        return True

    def _serve(self) -> None:
        """Serve requests that wait, a few at a time so that no client can hold up the ticks."""
        for _ in range(4):
            if not any(self._asked()):
                return
            self._executor.spin_once(timeout_sec=0.0)

    def _asked(self) -> list[int]:
        services = list(self._node.services)
        wait_set = rclpy_implementation.WaitSet(
            0, 0, 0, 0, len(services), 0, self._node.context.handle)
        wait_set.clear_entities()
        for service in services:
            wait_set.add_service(service.handle)
        wait_set.wait(0)
        ready: list[int] = wait_set.get_ready_entities('service')
        return ready
