"""Whether a timed path stays inside the keep-in box and inside what the rotors reach."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.mission.file import Mission
from suspended_ctrl.physics.loaded_body import LoadedBody
from suspended_ctrl.physics.needed_wrench import carried_anchors, rotor_wrench_along
from suspended_ctrl.physics.reach import Reach
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

_COMPONENTS = ('force x', 'force y', 'force z', 'torque x', 'torque y', 'torque z')


@dataclass(frozen=True, eq=False)
class ReachUse:
    """
    Where a path asks most of the rotors.

    Attributes
    ----------
    share : float
        1 is all that they reach in that direction.
    time_s : float
        Of the reference.
    position_map_m : ndarray, shape (3,)
    speed_m_s : float
        Greatest speed within the half second around it.
    wrench : ndarray, shape (6,)
        Asked of the rotors there, ``base_link`` axes, N and N m.

    """

    share: float
    time_s: float
    position_map_m: Array
    speed_m_s: float
    wrench: Array

    def sentence(self) -> str:
        """Say where, in which direction, by how much, and what speed would do."""
        place = ', '.join(f'{x:.2f}' for x in self.position_map_m)
        asked = ', '.join(f'{name} {value:.1f}' for name, value in zip(
            _COMPONENTS, self.wrench, strict=True)
            if abs(value) > 0.05 * np.abs(self.wrench).max())
        # Inertial forces go with the square of speed along a given path.
        speed = self.speed_m_s / np.sqrt(self.share)
        return (f"{self.share:.2f} times the rotors' reach at ({place}) m, {self.time_s:.2f} s "
                f'in, where {asked} (N, N m) is asked of them; allowed is 1: a peak speed of '
                f'about {speed:.2f} m/s there would do, or timing: feasible, or out_of_reach: '
                'attempt')


def check_keep_in(mission: Mission, reference: Reference) -> None:
    """
    Refuse a path that leaves the keep-in box.

    Parameters
    ----------
    mission : Mission
        Names the place in its file.
    reference : Reference
        Its path with times.

    Raises
    ------
    InputError
        Naming the first point outside.

    """
    box = mission.rig.keep_in
    outside = np.any((reference.position_map_m < box.lower_m)
                     | (reference.position_map_m > box.upper_m), axis=1)
    if outside.any():
        point = reference.position_map_m[int(np.argmax(outside))]
        place = ', '.join(f'{x:.3f}' for x in point)
        allowed = ', '.join(f'{axis} {low:g} to {high:g}' for axis, low, high in zip(
            'xyz', box.lower_m, box.upper_m, strict=True))
        raise InputError(f'{mission.path}: path: passes ({place}) m: allowed is keep_in_m of rig '
                         f'{mission.rig.name}, {allowed}')


def use_of_reach(rig: Rig, reference: Reference,
                 loads: list[tuple[float, LoadedBody]]) -> ReachUse:
    """
    Find where a path asks most of the rotors, the carrier moved as suits best.

    Parameters
    ----------
    rig : Rig
        The hardware.
    reference : Reference
        The path.
    loads : list of (float, LoadedBody)
        The moving mass from each time of the reference on.

    Returns
    -------
    ReachUse

    """
    reach = Reach(rig)
    best: tuple[float, Array, Array] | None = None
    for anchor in carried_anchors(rig, reference):
        wrench = np.empty((len(reference.time_s), 6))
        for index, (begin, body) in enumerate(loads):
            until = loads[index + 1][0] if index + 1 < len(loads) else np.inf
            rows = (reference.time_s >= begin) & (reference.time_s < until)
            wrench[rows] = rotor_wrench_along(rig, body, reference, anchor)[rows]
        use = reach.use(wrench)
        if best is None or use.max() < best[0]:
            best = float(use.max()), use, wrench
    assert best is not None
    _, use, wrench = best
    worst = int(np.argmax(use))
    near = np.abs(reference.time_s - reference.time_s[worst]) <= 0.5
    speed = float(np.linalg.norm(reference.velocity_map_m_s[near], axis=1).max())
    return ReachUse(float(use[worst]), float(reference.time_s[worst]),
                    reference.position_map_m[worst], speed, wrench[worst])
