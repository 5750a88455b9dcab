"""A mission through the real graph: start the nodes, enable, follow, stop, end them all."""

from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager, ExitStack
from dataclasses import dataclass
import os
from pathlib import Path
import signal
import sys
import tempfile
from types import FrameType

from rclpy.exceptions import InvalidNamespaceException
from ruamel.yaml import YAML

from suspended_ctrl.bench.fault_kinds import Fault
from suspended_ctrl.mission.timing import TimedMission
from suspended_ctrl.nodes.cautions import CAUTIONS
from suspended_ctrl.nodes.domain import NoDomainError, own_domain
from suspended_ctrl.nodes.parameter_files import check_file
from suspended_ctrl.nodes.processes import Processes
from suspended_ctrl.nodes.session_run import Ended, SessionRun
from suspended_ctrl.review.log import RunFacts
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.shared_files import find_file

PARTS = ('safety_supervisor', 'effort_allocator', 'wrench_controller', 'state_estimator',
         'mission_player')
BENCH = 'rig_bench'


class SessionError(RuntimeError):
    """The session could not run: no middleware, no plant, no free domain."""


@dataclass(frozen=True)
class SessionSettings:
    """
    How to run a mission through the graph.

    Attributes
    ----------
    rig : str or None
        A rig file other than the mission's, by name or path.
    law, allocator : str
    seed : int
    mismatch : str
        'default' or 'none'.
    faults : str or None
        Fault file, by name or path.
    wind_m_s : float
    plant : str
        'bench' or 'external', somebody else's plant on the driver topics.
    namespace : str
        Of the whole stack.
    wait_s : float
        How long to wait for the driver topics.
    parameters : str
        Parameter file, by name or path.
    overrides : mapping of str to mapping
        Parameters that go before those of the file, by node.

    """

    rig: str | None = None
    law: str = 'computed_torque'
    allocator: str = 'horizon_qp'
    seed: int = 0
    mismatch: str = 'default'
    faults: str | None = None
    wind_m_s: float = 0.0
    plant: str = 'bench'
    namespace: str = ''
    wait_s: float = 30.0
    parameters: str = 'default'
    overrides: Mapping[str, Mapping[str, object]] | None = None


def run_session(mission: TimedMission, settings: SessionSettings, recording: Path,
                faults: tuple[Fault, ...] = (),
                progress: Callable[[float], None] | None = None,
                say: Callable[[str], None] | None = None) -> Ended:
    """
    Run a mission through the nodes, as processes of their own, and record it.

    Whatever happens, the rotors are told zero, the processes are gone and the recording is closed
    when this returns or raises.

    Parameters
    ----------
    mission : TimedMission
        The mission, timed.
    settings : SessionSettings
        Figures that the caller chose.
    recording : Path
        Folder of the recording; must not exist.
    faults : sequence of Fault
        Those of the settings' file; the session does what befalls processes.
    progress : callable, optional
        Called with the share of the path done.
    say : callable, optional
        Called with a line now and then; to standard error if left out.

    Returns
    -------
    Ended
        How it ended, and the facts in the recording.

    Raises
    ------
    InputError
        If a node refuses its parameters.
    SessionError
        If it could not run.

    """
    say = say or _to_stderr
    with ExitStack() as stack:
        told = stack.enter_context(_signals())
        folder = Path(stack.enter_context(tempfile.TemporaryDirectory(prefix='suspended_ctrl-')))
        domain, environment = _place(settings, stack)
        environment['ROS_LOG_DIR'] = str(folder)
        for sentence in CAUTIONS:
            say(f'caution: {sentence}')
        say(f'ROS_DOMAIN_ID {domain}, namespace {settings.namespace or "/"}')
        processes = Processes(environment, folder)
        stack.callback(processes.end)
        facts = _facts(mission, settings)
        try:
            run = SessionRun(mission, processes, recording, facts, faults, domain,
                             settings.namespace, told)
        except InvalidNamespaceException as error:
            raise InputError(f'--namespace {settings.namespace}: {error}') from error
        except OSError as error:
            raise SessionError(f'cannot record: {error}') from error
        stack.callback(run.close)
        arguments = _arguments(mission, settings, folder)
        bench = settings.plant == 'bench'
        for name in (*PARTS, *((BENCH,) if bench else ())):
            processes.start(name, arguments)
        ended = run.follow(settings.wait_s, bench, progress or (lambda _: None))
    return _judged(ended)


def _to_stderr(line: str) -> None:
    print(line, file=sys.stderr, flush=True)


def _judged(ended: Ended) -> Ended:
    if ended.kind == 'input':
        raise InputError(ended.reason or '')
    if ended.kind == 'not_run':
        raise SessionError(ended.reason)
    return ended


@contextmanager
def _signals() -> Iterator[list[int]]:
    """Collect interrupts in a list, so that nothing is left half done."""
    told: list[int] = []

    def tell(number: int, _: FrameType | None) -> None:
        told.append(number)

    before = {number: signal.signal(number, tell) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield told
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _place(settings: SessionSettings, stack: ExitStack) -> tuple[int, dict[str, str]]:
    """Domain, and environment of the nodes: the caller's, or a domain of its own on this host."""
    environment = dict(os.environ)
    if settings.plant == 'external':
        return int(environment.get('ROS_DOMAIN_ID') or 0), environment
    try:
        domain = stack.enter_context(own_domain())
    except NoDomainError as error:
        raise SessionError(str(error)) from error
    changes = {'ROS_DOMAIN_ID': str(domain), 'ROS_AUTOMATIC_DISCOVERY_RANGE': 'LOCALHOST'}
    removed = ('ROS_LOCALHOST_ONLY', 'ROS_STATIC_PEERS')
    stack.enter_context(_environment(changes, removed))
    return domain, dict(os.environ)


@contextmanager
def _environment(changes: Mapping[str, str], removed: tuple[str, ...]) -> Iterator[None]:
    """Change the process's environment, which the middleware reads, for a while."""
    before = {name: os.environ.get(name) for name in (*changes, *removed)}
    for name in removed:
        os.environ.pop(name, None)
    os.environ.update(changes)
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


def _facts(mission: TimedMission, settings: SessionSettings) -> RunFacts:
    file = mission.mission.file
    bench = settings.plant == 'bench'
    return RunFacts(
        mission=file.name, rig=mission.mission.rig.name, seed=settings.seed if bench else None,
        law=settings.law, allocator=settings.allocator, rig_text=_rig_path(
            mission, settings).read_text(), mission_text=mission.mission.path.read_text())


def _rig_path(mission: TimedMission, settings: SessionSettings) -> Path:
    if settings.rig is not None:
        return find_file(settings.rig, 'rigs').absolute()
    loaded = mission.mission
    return find_file(loaded.file.rig, 'rigs', loaded.path.parent).absolute()


def _arguments(mission: TimedMission, settings: SessionSettings, folder: Path) -> list[str]:
    """Words of every node's call: the parameter file, and one with what this session wants."""
    path = str(mission.mission.path.absolute())
    wanted: dict[str, dict[str, object]] = {
        'wrench_controller': {'law': settings.law},
        'effort_allocator': {'allocator': settings.allocator},
        'mission_player': {'mission': path},
        BENCH: {'mission': path, 'seed': settings.seed, 'mismatch': settings.mismatch,
                'wind_m_s': settings.wind_m_s,
                'faults': str(find_file(settings.faults, 'faults').absolute())
                if settings.faults else ''},
    }
    rig = str(_rig_path(mission, settings))
    for name in (*PARTS, BENCH):
        own = wanted.setdefault(name, {})
        own |= {'rig': rig, 'activate': True}
        own |= (settings.overrides or {}).get(name, {})
    parameters = find_file(settings.parameters, 'parameters')
    check_file(parameters)
    file = folder / 'session.yaml'
    with file.open('w') as stream:
        YAML().dump({f'/**/{name}': {'ros__parameters': own} for name, own in wanted.items()},
                    stream)
    words = ['--ros-args', '--params-file', str(parameters), '--params-file', str(file)]
    if settings.namespace:
        words += ['-r', f'__ns:={_full(settings.namespace)}']
    return words


def _full(namespace: str) -> str:
    return '/' + namespace.strip('/')
