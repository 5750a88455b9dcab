"""
The command line: ``suspended-ctrl``.

Exit codes: 0 done and accepted, 1 done and not accepted, 2 bad input, 3 could not run, 130
interrupted.
"""

import argparse
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
import os
from pathlib import Path
import sys
import tempfile
from typing import TYPE_CHECKING

from suspended_ctrl import __version__
from suspended_ctrl.rig.errors import InputError

if TYPE_CHECKING:
    from suspended_ctrl.bench.fault_kinds import Fault
    from suspended_ctrl.loop import LoopSettings
    from suspended_ctrl.mission.timing import TimedMission
    from suspended_ctrl.review.log import RunLog

ACCEPTED, NOT_ACCEPTED, BAD_INPUT, COULD_NOT_RUN, INTERRUPTED = 0, 1, 2, 3, 130

EPILOG = ('Exit codes: 0 done and accepted, 1 done and not accepted, 2 bad input, 3 could not '
          'run, 130 interrupted.')


class _OneLine(argparse.ArgumentParser):
    """Says what is wrong with the words of a call in one line."""

    def error(self, message: str) -> None:  # type: ignore[override]
        """Raise instead of printing the usage as well."""
        raise InputError(f'{self.prog}: {message} (see {self.prog} --help)')


def _natural(text: str) -> int:
    try:
        number = int(text)
    except ValueError:
        number = -1
    if number < 0:
        raise argparse.ArgumentTypeError(f'value {text}: allowed is a whole number from 0')
    return number


def _positive(text: str) -> float:
    try:
        number = float(text)
    except ValueError:
        number = -1.0
    if not 0.0 < number < float('inf'):
        raise argparse.ArgumentTypeError(f'value {text}: allowed is a number above 0')
    return number


def _not_negative(text: str) -> float:
    return 0.0 if text in ('0', '0.0') else _positive(text)


def build_parser() -> argparse.ArgumentParser:
    """Build the parser of every command."""
    parser = _OneLine(prog='suspended-ctrl', epilog=EPILOG, description=(
        'Describe, rehearse and run a rotor-driven platform that hangs on an elastic tether '
        'under a slow carrier.'))
    parser.add_argument('--version', action='version', version=f'suspended-ctrl {__version__}')
    commands = parser.add_subparsers(dest='command', required=True, metavar='COMMAND',
                                     parser_class=_OneLine)
    _add_rehearse(commands)
    return parser


def _add_rehearse(commands: 'argparse._SubParsersAction[_OneLine]') -> None:
    parser = commands.add_parser(
        'rehearse', epilog=EPILOG, help='a mission against the simulated rig, and a verdict',
        description='Run a mission through the whole loop against the simulated rig, judge it, '
                    'and leave a run folder. Without --ros: one process, faster than real time, '
                    'the same for the same seed. With --ros: the real nodes over DDS.')
    add = parser.add_argument
    add('mission', metavar='MISSION', help='a mission file, or the name of one that comes along')
    add('--rig', metavar='RIG', help="another rig than the mission's: a file or a name")
    add('--law', default='computed_torque', help='wrench law (default: %(default)s)')
    add('--allocator', metavar='NAME', help='effort allocator (default: the best there is)')
    add('--bandwidth-hz', type=_positive, metavar='HZ', help="the law's bandwidth, Hz")
    add('--damping-ratio', type=_positive, metavar='ZETA', help="the law's damping ratio")
    add('--faults', metavar='FILE', help='a fault file, or the name of one that comes along')
    add('--seed', type=_natural, default=0, help='all that is random (default: %(default)s)')
    add('--mismatch', choices=('default', 'none'), default='default',
        help='what the loop does not know of the simulated rig (default: %(default)s)')
    add('--wind-m-s', type=_not_negative, default=0.0, metavar='SPEED',
        help='gusty wind over the whole run, m/s at 6 m (default: %(default)s)')
    add('--out', metavar='DIR', help='run folder (default: a new one under runs/)')
    ros = parser.add_argument_group('through the graph')
    ros.add_argument('--ros', action='store_true', help='the real nodes, in real time')
    ros.add_argument('--plant', choices=('bench', 'external'), default='bench',
                     help="external: somebody else's plant on the driver topics, in the caller's "
                          'ROS_DOMAIN_ID (default: %(default)s)')
    ros.add_argument('--namespace', default='', metavar='NAME', help='of the whole stack')
    ros.add_argument('--wait-s', type=_positive, default=30.0, metavar='SECONDS',
                     help='how long to wait for the driver topics, s (default: %(default)s)')
    parser.set_defaults(run=_rehearse)


def _rehearse(options: argparse.Namespace) -> int:
    # Imported late: `--help` and refusals should not wait for compiled kernels.
    from suspended_ctrl.bench.faults import load_faults
    from suspended_ctrl.mission.file import load_mission
    from suspended_ctrl.mission.timing import timed
    from suspended_ctrl.review.run_folder import check_out

    if options.plant == 'external' and not options.ros:
        raise InputError('--plant external: goes with --ros')
    mission = timed(load_mission(options.mission, options.rig))
    _check_criteria(mission)
    faults = load_faults(options.faults, mission.mission.rig) if options.faults else ()
    settings = _loop_settings(options)
    folder = _new_folder(options, mission.mission.file.name)
    check_out(folder)
    if options.ros:
        return _through_graph(options, mission, faults, folder, settings)
    return _in_process(options, mission, faults, folder, settings)


def _loop_settings(options: argparse.Namespace) -> 'LoopSettings':
    from suspended_ctrl.allocation.allocators import ALLOCATORS
    from suspended_ctrl.control.laws import LAWS
    from suspended_ctrl.loop import LoopSettings
    from suspended_ctrl.physics.registry import UnknownNameError

    settings = LoopSettings()
    changes = {key: value for key, value in (
        ('law', options.law), ('bandwidth_hz', options.bandwidth_hz),
        ('damping_ratio', options.damping_ratio)) if value is not None}
    control = replace(settings.control, **changes)
    effort = settings.effort
    if options.allocator is not None:
        effort = replace(effort, allocator=options.allocator)
    try:
        LAWS.maker(control.law)
        ALLOCATORS.maker(effort.allocator)
    except UnknownNameError as error:
        raise InputError(str(error)) from error
    return replace(settings, control=control, effort=effort)


def _in_process(options: argparse.Namespace, mission: 'TimedMission', faults: 'Sequence[Fault]',
                folder: Path, settings: 'LoopSettings') -> int:
    from suspended_ctrl.bench.rehearsal import Rehearsal, RehearsalSettings
    from suspended_ctrl.control.bandwidth import BandwidthError

    try:
        rehearsal = Rehearsal(mission, RehearsalSettings(
            options.seed, options.mismatch, options.wind_m_s, settings), faults)
    except BandwidthError as error:
        raise InputError(f'rig {mission.mission.rig.name}: {error}') from error
    with _progress_bar(mission.mission.file.name) as progress:
        log = rehearsal.run(progress)
    return _judge(log, mission, folder)


def _through_graph(options: argparse.Namespace, mission: 'TimedMission',
                   faults: 'Sequence[Fault]', folder: Path, settings: 'LoopSettings') -> int:
    from suspended_ctrl.review.bag_read import read_bag
    from suspended_ctrl.review.topics import JointNames

    try:
        from suspended_ctrl.nodes.session import run_session, SessionError, SessionSettings
    except ImportError as error:
        print(f'no ROS 2 here ({error}): run `make setup`, or source a ROS 2 Jazzy',
              file=sys.stderr)
        return COULD_NOT_RUN
    control = {key: getattr(settings.control, key) for key in ('bandwidth_hz', 'damping_ratio')}
    session = SessionSettings(
        rig=options.rig, law=settings.control.law, allocator=settings.effort.allocator,
        seed=options.seed, mismatch=options.mismatch, faults=options.faults,
        wind_m_s=options.wind_m_s, plant=options.plant, namespace=options.namespace,
        wait_s=options.wait_s, overrides={'wrench_controller': control})
    rig = mission.mission.rig
    folder.absolute().parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(prefix=f'.{folder.name}.',
                                     dir=folder.absolute().parent) as work:
        recording = Path(work) / 'run'
        try:
            with _progress_bar(mission.mission.file.name) as progress:
                ended = run_session(mission, session, recording, tuple(faults), progress)
        except SessionError as error:
            print(error, file=sys.stderr)
            return COULD_NOT_RUN
        log = read_bag(recording, JointNames(rig.rotors.names, rig.carrier.axes))
        code = _judge(log, mission, folder, recording)
    if ended.kind == 'interrupted':
        print('interrupted', file=sys.stderr)
        return INTERRUPTED
    return code


def _judge(log: 'RunLog', mission: 'TimedMission', folder: Path,
           recording: Path | None = None) -> int:
    from suspended_ctrl.review.run_folder import write_run
    from suspended_ctrl.review.verdict import print_verdict

    assessment = write_run(log, mission.mission.rig, mission.mission.file.accept, folder,
                           recording)
    print_verdict(assessment, folder)
    return ACCEPTED if assessment.passed else NOT_ACCEPTED


def _check_criteria(mission: 'TimedMission') -> None:
    from suspended_ctrl.review.words import READINGS

    for key in mission.mission.file.accept:
        if key not in READINGS:
            raise InputError(f'{mission.mission.path}: accept: key {key}: allowed is a figure of '
                             f'metrics.json: {", ".join(READINGS)}')


@contextmanager
def _progress_bar(what: str) -> Iterator[Callable[[float], None] | None]:
    """Show a bar on a terminal; say nothing in a pipe."""
    if not sys.stderr.isatty():
        yield None
        return
    from rich.console import Console
    from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

    with Progress(TextColumn('{task.description}'), BarColumn(),
                  TextColumn('{task.percentage:.0f} %'),
                  TimeRemainingColumn(), console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(what, total=1.0)
        yield lambda share: bar.update(task, completed=share)


def _new_folder(options: argparse.Namespace, mission: str) -> Path:
    if options.out is not None:
        return Path(options.out)
    way = '-ros' if options.ros else ''
    for number in range(1, 100_000):
        folder = Path('runs') / f'{mission}-seed{options.seed}{way}-{number:03d}'
        if not folder.exists():
            return folder
    raise InputError('runs: is full: remove old ones or give --out')


def main(arguments: Sequence[str] | None = None) -> int:
    """
    Run a command.

    Parameters
    ----------
    arguments : sequence of str, optional
        The call's words; those of the process if left out.

    Returns
    -------
    int
        The exit code.

    """
    # Small matrices only: threads of the linear algebra library cost more than they bring. It
    # reads this when it is loaded, which the commands below do.
    for variable in ('OPENBLAS_NUM_THREADS', 'OMP_NUM_THREADS'):
        os.environ.setdefault(variable, '1')
    try:
        options = build_parser().parse_args(arguments)
        code: int = options.run(options)
    except InputError as error:
        print(error, file=sys.stderr)
        return BAD_INPUT
    except KeyboardInterrupt:
        print('interrupted', file=sys.stderr)
        return INTERRUPTED
    return code
