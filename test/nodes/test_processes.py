"""Processes of a session: all of them end, whatever they or the session are doing."""

import os
from pathlib import Path
import signal
import subprocess
import sys
import time

import pytest

from suspended_ctrl.nodes.processes import Processes

# Stand-ins for nodes, found as suspended_ctrl.nodes.NAME on the children's path.
DEAF = ('import signal, time\n'
        'for number in (signal.SIGINT, signal.SIGTERM):\n'
        '    signal.signal(number, signal.SIG_IGN)\n'
        'print("deaf", flush=True)\n'
        'time.sleep(600)\n')
POLITE = ('import signal, sys, time\n'
          'from suspended_ctrl.nodes.parent import end_with_parent\n'
          'end_with_parent()\n'
          'signal.signal(signal.SIGINT, lambda *_: sys.exit(0))\n'
          'print("polite", flush=True)\n'
          'time.sleep(600)\n')
PARENT = Path(__file__).parents[2] / 'suspended_ctrl' / 'nodes' / 'parent.py'


@pytest.fixture
def environment(tmp_path):
    package = tmp_path / 'path' / 'suspended_ctrl' / 'nodes'
    package.mkdir(parents=True)
    for folder in (package, package.parent):
        (folder / '__init__.py').touch()
    (package / 'deaf.py').write_text(DEAF)
    (package / 'polite.py').write_text(POLITE)
    (package / 'parent.py').write_text(PARENT.read_text())
    return dict(os.environ) | {'PYTHONPATH': str(tmp_path / 'path'), 'PYTHONSAFEPATH': '1'}


def started(environment, folder, names):
    processes = Processes(environment, folder)
    for name in names:
        processes.start(name, [])
    until = time.monotonic() + 30.0
    while any(processes.last_line(name) != name for name in names):
        assert time.monotonic() < until
        time.sleep(0.02)
    return processes


def test_a_polite_one_ends_by_itself_and_says_how(environment, tmp_path):
    processes = started(environment, tmp_path, ['polite'])
    assert processes.ended() == {}
    processes.end()
    assert processes.ended() == {'polite': 0}


def test_one_that_hears_nothing_is_killed(environment, tmp_path):
    processes = started(environment, tmp_path, ['deaf', 'polite'])
    processes.end()
    assert processes.ended() == {'deaf': -signal.SIGKILL, 'polite': 0}


def test_one_that_is_stopped_is_ended_too(environment, tmp_path):
    processes = started(environment, tmp_path, ['polite'])
    processes.send('polite', signal.SIGSTOP)
    processes.end()
    assert processes.ended() == {'polite': 0}


def test_children_end_when_the_session_is_killed(environment, tmp_path):
    session = (
        'import os, sys, time\n'
        'from pathlib import Path\n'
        'from suspended_ctrl.nodes.processes import Processes\n'
        f'processes = Processes({environment!r}, Path({str(tmp_path)!r}))\n'
        'processes.start("polite", [])\n'
        'print(processes._running["polite"].pid, flush=True)\n'
        'time.sleep(600)\n')
    parent = subprocess.Popen([sys.executable, '-c', session], stdout=subprocess.PIPE)
    child = int(parent.stdout.readline())
    log = tmp_path / 'polite.log'
    until = time.monotonic() + 30.0
    while not (log.exists() and 'polite' in log.read_text()):
        assert time.monotonic() < until
        time.sleep(0.02)
    parent.kill()
    parent.wait()
    until = time.monotonic() + 10.0
    while alive(child):
        assert time.monotonic() < until
        time.sleep(0.02)


def alive(pid):
    """Whether a process runs; one that ended and waits to be collected does not."""
    try:
        return Path(f'/proc/{pid}/stat').read_text().rsplit(')', 1)[1].split()[0] != 'Z'
    except OSError:
        return False
