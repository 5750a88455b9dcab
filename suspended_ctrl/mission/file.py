"""The mission file: where to go, how fast, what hangs on, and what counts as accepted."""

from dataclasses import dataclass
import os
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.rig.section import (
    Name,
    NonNegative,
    Number,
    Positive,
    refuse,
    Section,
    Vector3,
)
from suspended_ctrl.rig.shared_files import find_file
from suspended_ctrl.rig.yaml_file import read_file

Degrees = Annotated[float, Field(ge=-180.0, le=180.0)]
# Tilt beyond this would ask a hung platform to lie on its side.
Tilt = Annotated[float, Field(ge=-60.0, le=60.0)]
Margin = Annotated[float, Field(ge=0.0, lt=1.0)]


class Start(Section):
    """Where the mission's path begins."""

    position_m: Vector3
    yaw_deg: Degrees = 0.0


class MoveTo(Section):
    """A straight move; angles left out stay as they are."""

    position_m: Vector3
    yaw_deg: Degrees | None = None
    pitch_deg: Tilt | None = None
    roll_deg: Tilt | None = None
    peak_speed_m_s: Positive | None = None
    duration_s: Positive | None = None

    @model_validator(mode='after')
    def _one_timing(self) -> 'MoveTo':
        if self.peak_speed_m_s is not None and self.duration_s is not None:
            refuse('duration_s', self.duration_s, 'peak_speed_m_s or duration_s, not both')
        return self


class Dwell(Section):
    """Stay for a time."""

    seconds: Positive


class Pick(Section):
    """A payload that hangs on from here on, as a point mass on the platform."""

    mass_kg: Positive
    position_m: Vector3


class Release(Section):
    """The payload is let go."""


class Step(Section):
    """One step of the path: exactly one of its keys."""

    move_to: MoveTo | None = None
    dwell: Dwell | None = None
    pick: Pick | None = None
    release: Release | None = None

    @model_validator(mode='after')
    def _exactly_one(self) -> 'Step':
        given = [name for name in type(self).model_fields if getattr(self, name) is not None]
        if len(given) != 1:
            refuse((), given, 'exactly one of move_to, dwell, pick, release')
        return self


class AtLeast(Section):
    """A lower bound."""

    at_least: Number


class MissionFile(Section):
    """Every key of a mission file."""

    name: Name
    rig: str
    start: Start
    timing: Literal['minimum_jerk', 'trapezoid', 'feasible'] = 'minimum_jerk'
    out_of_reach: Literal['refuse', 'attempt'] = 'refuse'
    feasible_margin: Margin = 0.10
    path: Annotated[tuple[Step, ...], Field(min_length=1)]
    accept: dict[str, NonNegative | AtLeast] = {}

    @model_validator(mode='after')
    def _timed_and_paired(self) -> 'MissionFile':
        hanging = False
        for index, step in enumerate(self.path):
            move = step.move_to
            if (move is not None and self.timing != 'feasible' and move.peak_speed_m_s is None
                    and move.duration_s is None):
                refuse(('path', index, 'move_to'), 'no timing',
                       'peak_speed_m_s or duration_s (only timing: feasible finds its own)')
            if move is not None and move.peak_speed_m_s is not None and _is_turn(
                    self.start, self.path[:index], move):
                refuse(('path', index, 'move_to', 'peak_speed_m_s'), move.peak_speed_m_s,
                       'duration_s for a move that only turns')
            if step.pick is not None:
                if hanging:
                    refuse(('path', index, 'pick'), step.pick.mass_kg,
                           'release before picking again')
                hanging = True
            if step.release is not None:
                if not hanging:
                    refuse(('path', index, 'release'), '{}', 'a pick before it')
                hanging = False
        return self


def _is_turn(start: Start, before: tuple[Step, ...], move: MoveTo) -> bool:
    moves = [step.move_to.position_m for step in before if step.move_to is not None]
    return tuple(moves[-1] if moves else start.position_m) == tuple(move.position_m)


@dataclass(frozen=True, eq=False)
class Mission:
    """A mission as read, its rig loaded, and where it was read from."""

    file: MissionFile
    rig: Rig
    path: Path


def load_mission(path_or_name: str | os.PathLike[str], rig: str | None = None) -> Mission:
    """
    Read a mission and the rig that it names.

    Parameters
    ----------
    path_or_name : str or path-like
        A path, or the name of a mission that comes with the package.
    rig : str, optional
        Another rig, by name or path from the working folder.

    Returns
    -------
    Mission

    Raises
    ------
    InputError
        On anything wrong in either file.

    """
    path = find_file(path_or_name, 'missions')
    file = read_file(path, MissionFile)
    loaded = load_rig(rig) if rig else load_rig(file.rig, relative_to=path.parent)
    return Mission(file, loaded, path)
