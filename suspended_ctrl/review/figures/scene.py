"""What is drawn of a run in space: path, tether, anchor, platform, as points in map."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.review.figures.story import Story
from suspended_ctrl.review.figures.thinning import bucketed
from suspended_ctrl.rig.frozen import Array

_PIECES = 420
_TETHERS = 13
_PLANE_MARGIN_M = 0.15
_DISC_POINTS = 25


@dataclass(frozen=True, eq=False)
class Scene:
    """
    Points in map, m.

    Attributes
    ----------
    story : Story
    track : ndarray, shape (p + 1, 3)
        Path as flown.
    error_mm : ndarray, shape (p,), or None
        Greatest position error on each piece of it.
    top_mm : float
        Greatest of all.
    rail : ndarray, shape (p + 1, 3)
        Way of the anchor meanwhile.
    anchors, hooks : ndarray, shape (t, 3)
        Ends of the tether at moments evenly apart.
    start : ndarray, shape (3,)
        Where the platform was first.
    discs : ndarray, shape (rotors, d, 3)
        Outlines of the rotors there.
    hubs : ndarray, shape (rotors, 3)
    plane : ndarray, shape (4, 3), or None
        Corners of the plane that the path lies in, where there is one that is not level.
    tilt_deg : float
        Its angle to the level.

    """

    story: Story
    track: Array
    error_mm: Array | None
    top_mm: float
    rail: Array
    anchors: Array
    hooks: Array
    start: Array
    discs: Array
    hubs: Array
    plane: Array | None
    tilt_deg: float

    def near(self) -> Array:
        """Return all points but those of the anchor, shape (n, 3)."""
        parts = [self.track, self.discs.reshape(-1, 3)]
        if self.plane is not None:
            parts.append(self.plane)
        return np.vstack(parts)


def scene_of(story: Story) -> Scene:
    """
    Gather what is drawn.

    Parameters
    ----------
    story : Story
        With a motion.

    Returns
    -------
    Scene

    """
    on = story.path.mask(story.motion_s + story.origin_s)
    on = on if on.any() else np.ones(len(on), dtype=bool)
    time, position = story.motion_s[on], story.position_map_m[on]
    count = max(min(_PIECES, len(time) - 1), 1)
    index = np.linspace(0, len(time) - 1, count + 1).astype(int)
    error_mm, top_mm = None, 1.0
    if len(story.tracking.time_s):
        error = 1e3 * np.linalg.norm(story.tracking.position_error_map_m, axis=1)
        error_mm, top_mm = bucketed(error, count), max(float(error.max()), 1e-3)
    moments = np.linspace(0, len(time) - 1, _TETHERS).astype(int)
    start = position[0]
    plane, tilt_deg = _plane(story)
    return Scene(
        story, position[index], error_mm, top_mm, story.anchor_map(time[index] + story.origin_s),
        story.anchor_map(time[moments] + story.origin_s),
        position[moments] + story.rig.tether.hook_m, start, start + _discs(story),
        start + story.rig.rotors.position_m, plane, tilt_deg)


def _discs(story: Story) -> Array:
    """Circles across the rotors' axes, of a size that shows well; a rig states no radius."""
    rotors = story.rig.rotors
    radius = 0.19 * float(np.linalg.norm(rotors.position_m, axis=1).mean())
    angle = np.linspace(0.0, 2.0 * np.pi, _DISC_POINTS)
    discs = []
    for hub, axis in zip(rotors.position_m, rotors.axis, strict=True):
        first = np.cross(axis, np.eye(3)[int(np.argmin(np.abs(axis)))])
        first /= np.linalg.norm(first)
        second = np.cross(axis, first)
        discs.append(hub + radius * (np.cos(angle)[:, None] * first
                                     + np.sin(angle)[:, None] * second))
    return np.array(discs)


def _plane(story: Story) -> tuple[Array | None, float]:
    lines = story.path.lines()
    if not lines:
        return None, 0.0
    points = np.vstack(lines)
    centre = points.mean(axis=0)
    _, sizes, axes = np.linalg.svd(points - centre, full_matrices=False)
    normal = axes[2] if axes[2][2] >= 0.0 else -axes[2]
    tilt = float(np.degrees(np.arccos(min(normal[2], 1.0))))
    if sizes[1] < 0.05 * sizes[0] or sizes[2] > 1e-3 * sizes[0] or tilt < 3.0:
        return None, 0.0
    across = np.cross([0.0, 0.0, 1.0], normal)
    across /= np.linalg.norm(across)
    along = np.cross(normal, across)
    u, v = (points - centre) @ across, (points - centre) @ along
    m = _PLANE_MARGIN_M
    corners = [(u.min() - m, v.min() - m), (u.max() + m, v.min() - m), (u.max() + m, v.max() + m),
               (u.min() - m, v.max() + m)]
    return np.array([centre + a * across + b * along for a, b in corners]), tilt
