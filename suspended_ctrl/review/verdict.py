"""The verdict of a run, for a person at a terminal and for a log file."""

from pathlib import Path

from rich.console import Console
from rich.table import Table

from suspended_ctrl.review.acceptance import Criterion
from suspended_ctrl.review.metrics import Assessment
from suspended_ctrl.review.run_folder import REPORT
from suspended_ctrl.review.words import reading_of

# Shown beside the criteria, since everybody asks for them.
_ALWAYS = ('tracking.position_max_m', 'tracking.attitude_max_rad', 'realtime_factor')


def print_verdict(assessment: Assessment, folder: Path, console: Console | None = None) -> None:
    """
    Print criteria with value and bound, the verdict, and where the run folder is.

    Parameters
    ----------
    assessment : Assessment
        Its figures and verdict.
    folder : Path
        The run folder.
    console : Console, optional
        Standard output if left out.

    """
    out = console or Console(highlight=False)
    metrics = assessment.metrics
    table = Table(box=None, pad_edge=False)
    table.add_column('figure')
    table.add_column('value', justify='right')
    table.add_column('bound', justify='right')
    table.add_column()
    judged = {criterion.key for criterion in assessment.criteria}
    for criterion in assessment.criteria:
        table.add_row(*_row(criterion))
    for key in _ALWAYS:
        value = _value(metrics, key)
        if key not in judged and value is not None:
            reading = reading_of(key)
            table.add_row(reading.words, reading.number(value), '', '')
    out.print(table)
    for event in metrics['safety']['events']:
        category = event['stop_category']
        kind = 'no stop' if category is None else f'stop category {category}'
        out.print(f'event at {event["t_s"]:.2f} s: {event["cause"]} ({kind})')
    colour = 'green' if assessment.passed else 'red'
    out.print(f'[bold {colour}]{metrics["verdict"]}[/]: {metrics["mission"]} on {metrics["rig"]}, '
              f'{metrics["law"]}, {metrics["allocator"]}, seed {metrics["seed"]}')
    out.print(f'run folder: {folder} (open {folder / REPORT})', soft_wrap=True)


def _row(criterion: Criterion) -> tuple[str, str, str, str]:
    outcome = '[green]met[/]' if criterion.passed else '[red]not met[/]'
    if criterion.bound is None:
        return 'Run', criterion.reason, '', outcome
    reading = reading_of(criterion.key)
    sign = '>=' if criterion.at_least else '<='
    value = 'none' if criterion.value is None else reading.number(criterion.value)
    return reading.words, value, f'{sign} {reading.number(criterion.bound)}', outcome


def _value(metrics: dict[str, object], key: str) -> float | None:
    value: object = metrics
    for part in key.split('.'):
        value = value.get(part) if isinstance(value, dict) else None
    return value if isinstance(value, float) else None
