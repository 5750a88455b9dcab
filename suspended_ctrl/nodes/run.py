"""A node's process: start, signals, last words, exit code."""

from collections.abc import Callable
from contextlib import suppress
from itertools import pairwise
import os
import signal
import sys
from types import FrameType

import rclpy
from rclpy.exceptions import InvalidParameterException
from rclpy.lifecycle import TransitionCallbackReturn
from rclpy.signals import SignalHandlerOptions
from rclpy.utilities import remove_ros_args

from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.parameters import allowed, check_seen, NodeParameters
from suspended_ctrl.nodes.parent import end_with_parent
from suspended_ctrl.rig.errors import InputError

_SWITCH_S = 0.0005
# Whose turns do not wait for others'.
_INTERRUPTS = ('safety_supervisor',)


def usage(name: str, sentence: str, model: type[NodeParameters]) -> str:
    """Text of ``--help``: what the node does and its parameters."""
    lines = [f'usage: {name} [--ros-args -p NAME:=VALUE ... --params-file FILE ...]', '',
             sentence, '', 'parameters:']
    for field_name, field in model.model_fields.items():
        lines.append(f'  {field_name} ({allowed(field)}; {field.default!r})')
        lines.append(f'      {field.description}')
    return '\n'.join(lines)


def run_node(name: str, sentence: str, model: type[NodeParameters],
             make: Callable[[], ManagedNode]) -> int:
    """
    Run a node until it is told to end.

    Parameters
    ----------
    name, sentence : str
        Of the executable, for ``--help``.
    model : subclass of NodeParameters
        The model of the parameters.
    make : callable
        Gives the node; called once ROS is up.

    Returns
    -------
    int
        0 after an ordinary end, 1 if it could not go on, 2 for bad input.

    """
    end_with_parent()
    told: list[int] = []

    def tell(number: int, _: FrameType | None) -> None:
        told.append(number)

    # rclpy's own handlers shut the context down first, and then nobody can say zero any more.
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, tell)
    _yield_to_others(name)
    try:
        rest = remove_ros_args(sys.argv)[1:]
        if rest in (['--help'], ['-h']):
            print(usage(name, sentence, model))
            return 0
        if rest:
            print(f'{name}: {rest[0]}: unknown argument: parameters come after --ros-args',
                  file=sys.stderr)
            return 2
        rclpy.init(signal_handler_options=SignalHandlerOptions.NO)
    except RuntimeError as error:
        print(f'{name}: {" ".join(str(error).split())}', file=sys.stderr)
        return 2
    # Work in a thread, see ``Loop.meanwhile``, must not keep a tick waiting for the interpreter.
    sys.setswitchinterval(_SWITCH_S)
    try:
        return _live(name, make, told)
    finally:
        rclpy.try_shutdown()


def _yield_to_others(name: str) -> None:
    """
    Let a thread that wakes up wait for the one that runs, but for the supervisor's.

    Each message wakes a thread of the middleware in every receiver. Where that may interrupt, a
    burst of messages from one node becomes hundreds of switches between processes, which cost
    more than the messages. Turns are short, so nobody waits for long.
    """
    if name not in _INTERRUPTS and hasattr(os, 'SCHED_BATCH'):
        with suppress(OSError):
            os.sched_setscheduler(0, os.SCHED_BATCH, os.sched_param(0))


def _live(name: str, make: Callable[[], ManagedNode], told: list[int]) -> int:
    try:
        node = make()
        check_seen(_parameter_files(sys.argv), name, node.get_namespace())
    except (InputError, InvalidParameterException) as error:
        print(error, file=sys.stderr)
        return 2
    try:
        if node.parameters.activate and not _bring_up(node):
            print(f'{name}: {node.fault}', file=sys.stderr)
            return 2
        node.loop.leave_when(lambda: bool(told) or node.leaving)
        node.loop.run()
        node.leave()
        if not node.leaving:
            node.trigger_shutdown()
    finally:
        node.destroy_node()
    return 0


def _parameter_files(words: list[str]) -> list[str]:
    return [file for option, file in pairwise(words) if option == '--params-file']


def _bring_up(node: ManagedNode) -> bool:
    return bool(node.trigger_configure() == TransitionCallbackReturn.SUCCESS
                and node.trigger_activate() == TransitionCallbackReturn.SUCCESS)
