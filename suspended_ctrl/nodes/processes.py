"""The processes of a session: started together, watched, and all of them ended."""

from collections.abc import Mapping, Sequence
from contextlib import suppress
import os
from pathlib import Path
import signal
import subprocess
import sys
import time

from suspended_ctrl.nodes.parent import PARENT_VARIABLE

# How long a process is given to end by itself after each signal.
_GRACE_S = ((signal.SIGINT, 3.0), (signal.SIGTERM, 1.0), (signal.SIGKILL, 2.0))
_LOOK_EVERY_S = 0.02


class Processes:
    """
    Nodes as processes, each in a group of its own.

    They end with this process, however it ends, since each asks the system to be told.

    Parameters
    ----------
    environment : mapping of str to str
    folder : Path
        For what they print, one file each.

    """

    def __init__(self, environment: Mapping[str, str], folder: Path) -> None:
        self._environment = dict(environment) | {
            PARENT_VARIABLE: str(os.getpid()), 'PYTHONUNBUFFERED': '1'}
        self._folder = folder
        self._running: dict[str, subprocess.Popen[bytes]] = {}

    def start(self, name: str, arguments: Sequence[str]) -> None:
        """Start a node by the name of its executable."""
        with self._log(name).open('wb') as log:
            self._running[name] = subprocess.Popen(
                [sys.executable, '-m', f'suspended_ctrl.nodes.{name}', *arguments],
                env=self._environment, stdin=subprocess.DEVNULL, stdout=log,
                stderr=subprocess.STDOUT, start_new_session=True)

    def _log(self, name: str) -> Path:
        return self._folder / f'{name}.log'

    def ended(self) -> dict[str, int]:
        """Exit codes of those that ended, minus the signal of those that were killed."""
        return {name: code for name, process in self._running.items()
                if (code := process.poll()) is not None}

    def last_line(self, name: str) -> str:
        """Last thing that a node printed."""
        with suppress(OSError):
            lines = self._log(name).read_text(errors='replace').split('\n')
            said = [line.strip() for line in lines if line.strip()]
            return said[-1] if said else ''
        return ''

    def send(self, name: str, number: int) -> None:
        """Send a signal to a node."""
        if (process := self._running.get(name)) is not None and process.poll() is None:
            process.send_signal(number)

    def end(self, names: Sequence[str] | None = None) -> None:
        """
        End some or all of them, whatever state they are in; returns when they are gone.

        Parameters
        ----------
        names : sequence of str, optional
            All if left out.

        """
        left = [self._running[name] for name in (names if names is not None else self._running)
                if name in self._running]
        for process in left:
            # One that is stopped would hear nothing but the last signal.
            _signal_group(process, signal.SIGCONT)
        for number, grace_s in _GRACE_S:
            left = [process for process in left if process.poll() is None]
            for process in left:
                if number == signal.SIGKILL:
                    _signal_group(process, number)
                else:
                    process.send_signal(number)
            until = time.monotonic() + grace_s
            while time.monotonic() < until and any(p.poll() is None for p in left):
                time.sleep(_LOOK_EVERY_S)
        for process in self._running.values():
            if process.poll() is not None:
                # What a killed node had started itself.
                _signal_group(process, signal.SIGKILL)


def _signal_group(process: 'subprocess.Popen[bytes]', number: int) -> None:
    with suppress(OSError):
        os.killpg(process.pid, number)
