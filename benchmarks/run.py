"""How long a rehearsal and its parts take on this machine; give missions to run others."""

from collections.abc import Callable
import os
import platform
import sys
import time
from typing import Any

import numpy as np
from rich.console import Console
from rich.progress import Progress
from rich.table import Table

from suspended_ctrl.bench.rehearsal import Rehearsal, RehearsalSettings
from suspended_ctrl.mission.file import load_mission
from suspended_ctrl.mission.timing import timed

MISSIONS = ('panel_pass_1p0', 'four_stations')


def timing(owner: Any, name: str) -> list[float]:
    """Put a stopwatch on a method of one object; its seconds of CPU go into the list returned."""
    spent: list[float] = []
    inner: Callable[..., Any] = getattr(owner, name)

    def watched(*arguments: Any, **named: Any) -> Any:
        began = time.thread_time()
        result = inner(*arguments, **named)
        spent.append(time.thread_time() - began)
        return result

    setattr(owner, name, watched)
    return spent


def rehearse(mission: str, progress: Progress) -> tuple[str, dict[str, list[float]], float]:
    """Run a mission once; its title, durations of the parts' calls, simulated seconds."""
    timed_mission = timed(load_mission(mission))
    rehearsal = Rehearsal(timed_mission, RehearsalSettings(seed=0))
    loop = rehearsal.loop
    watched = {
        'tick, the four parts': timing(loop, 'step'),
        'state estimator': timing(loop.estimator, 'step'),
        'wrench controller': timing(loop.controller, 'step'),
        'effort allocator': timing(loop.allocator, 'step'),
        'safety supervisor': timing(loop.supervisor, 'step'),
        'bench, to the next command': timing(rehearsal.bench, 'advance'),
    }
    bar = progress.add_task(mission, total=1.0)
    began = time.perf_counter()
    log = rehearsal.run(lambda share: progress.update(bar, completed=share))
    wall_s = time.perf_counter() - began
    progress.remove_task(bar)
    simulated_s = log.end_s - log.start_s
    title = (f'{mission}: {simulated_s:.1f} s in {wall_s:.1f} s, '
             f'{simulated_s / wall_s:.1f} times real time')
    return title, watched, simulated_s


def table(title: str, watched: dict[str, list[float]], simulated_s: float) -> Table:
    """Durations of each part, and what share of a core it needs in real time."""
    made = Table('part', 'calls', 'median us', 'p99 us', 'greatest us', 'of a core', title=title)
    for name, spent in watched.items():
        p50, p99, most = np.percentile(spent, (50, 99, 100)) * 1e6
        made.add_row(name, str(len(spent)), f'{p50:.0f}', f'{p99:.0f}', f'{most:.0f}',
                     f'{100.0 * sum(spent) / simulated_s:.1f} %')
    for column in made.columns[1:]:
        column.justify = 'right'
    return made


def main(missions: list[str]) -> None:
    """Rehearse each mission and print its table."""
    console = Console()
    console.print(f'{platform.python_implementation()} {platform.python_version()}, '
                  f'{platform.machine()}, {os.cpu_count()} cores')
    for mission in missions:
        with Progress(console=console, transient=True) as progress:
            title, watched, simulated_s = rehearse(mission, progress)
        console.print(table(title, watched, simulated_s))


if __name__ == '__main__':
    main(sys.argv[1:] or list(MISSIONS))
