"""A run's folder: recording, figures, verdict and page, all there or not there at all."""

from collections.abc import Mapping
import os
from pathlib import Path
import shutil
import tempfile

from suspended_ctrl.review.acceptance import Bound
from suspended_ctrl.review.bag import write_bag
from suspended_ctrl.review.junit import junit_xml
from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.metrics import assess, Assessment
from suspended_ctrl.review.page import render_page
from suspended_ctrl.review.topics import JointNames
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.rig import Rig

RECORDING, METRICS, JUNIT, REPORT = 'run', 'metrics.json', 'junit.xml', 'report.html'
_ENTRIES = {RECORDING, METRICS, JUNIT, REPORT}


def check_out(out_dir: Path) -> None:
    """
    See that a run folder may be written there, before hours are spent on it.

    Parameters
    ----------
    out_dir : Path
        The run folder.

    Raises
    ------
    InputError
        If something is there that is not a run folder, or nothing can be made there.

    """
    if out_dir.is_dir():
        other = sorted({entry.name for entry in out_dir.iterdir()} - _ENTRIES)
        if other:
            raise InputError(f'{out_dir}: holds {other[0]!r}, which is no part of a run; allowed '
                             "is a folder that is new, empty or an earlier run's")
    elif out_dir.exists():
        raise InputError(f'{out_dir}: is a file; allowed is a folder')
    parent = out_dir.absolute().parent
    while not parent.exists():
        parent = parent.parent
    if not parent.is_dir() or not os.access(parent, os.W_OK):
        raise InputError(f'{out_dir}: {parent} cannot be written to')


def write_run(log: RunLog, rig: Rig, criteria: Mapping[str, Bound] | None, out_dir: Path,
              recording: Path | None = None) -> Assessment:
    """
    Write ``run/``, ``metrics.json``, ``junit.xml`` and ``report.html``.

    Everything is written beside the folder first and renamed into place at the end; an earlier
    run's folder is replaced.

    Parameters
    ----------
    log : RunLog
        The run.
    rig : Rig
        The hardware.
    criteria : mapping of str to bound
        See ``acceptance.judged``; None for none.
    out_dir : Path
        The run folder.
    recording : Path, optional
        A rosbag2 folder to move in as ``run/``, made while the run went on; without it the log is
        written there.

    Returns
    -------
    Assessment

    Raises
    ------
    InputError
        See ``check_out``.

    """
    out_dir = out_dir.absolute()
    check_out(out_dir)
    out_dir.parent.mkdir(parents=True, exist_ok=True)
    work = Path(tempfile.mkdtemp(prefix=f'.{out_dir.name}.', dir=out_dir.parent))
    try:
        assessment = assess(log, rig, criteria)
        (work / METRICS).write_text(assessment.text(), encoding='utf-8')
        (work / JUNIT).write_text(junit_xml(assessment), encoding='utf-8')
        (work / REPORT).write_text(render_page(log, rig, assessment), encoding='utf-8')
        if recording is None:
            write_bag(log, JointNames(rig.rotors.names, rig.carrier.axes), work / RECORDING)
        else:
            _renamed_files(Path(shutil.move(recording, work / RECORDING)))
        work.chmod(0o755)
        if out_dir.exists():
            old = Path(tempfile.mkdtemp(prefix=f'.{out_dir.name}.', dir=out_dir.parent))
            out_dir.rename(old / out_dir.name)
            work.rename(out_dir)
            shutil.rmtree(old)
        else:
            work.rename(out_dir)
    except BaseException:
        shutil.rmtree(work, ignore_errors=True)
        raise
    return assessment


def _renamed_files(folder: Path) -> None:
    """Name a moved recording's file after its folder, as rosbag2 does."""
    files = list(folder.glob('*.mcap'))
    wanted = f'{folder.name}.mcap'
    if len(files) != 1 or files[0].name == wanted:
        return
    old = files[0].name
    files[0].rename(folder / wanted)
    about = folder / 'metadata.yaml'
    if about.exists():
        about.write_text(about.read_text().replace(old, wanted))
