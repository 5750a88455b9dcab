"""Where the platform went: in space, from above and from the side."""

from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.patches import Polygon
import numpy as np

from suspended_ctrl.review.figures.scene import Scene, scene_of
from suspended_ctrl.review.figures.story import Story
from suspended_ctrl.review.figures.theme import (
    BLUE,
    GRID,
    heading,
    INK,
    LIMIT,
    new_figure,
    OCHRE,
    PALE_BLUE,
    place,
    RULE,
    SMALL_PX,
    SOFT,
)
from suspended_ctrl.review.words import plain
from suspended_ctrl.rig.frozen import Array

_ERROR_COLOURS = LinearSegmentedColormap.from_list('error', ['#a9cbe2', '#1d5f91', '#0a1f33'])
_GROUND, _GROUND_EDGE, _GROUND_WORDS = '#f7f1e3', '#dccfa9', '#85702f'
# The view of the drawing in space: turned about the vertical, then seen from above.
_AZIMUTH_RAD, _ELEVATION_RAD = np.radians(-28.0), np.radians(24.0)
# How much of the tether is shown above the path there.
_ABOVE_M = 0.55
_FLOOR_STEP_M = 0.5


def space_figure(story: Story) -> Figure:
    """
    Path in space, plan and elevation.

    Parameters
    ----------
    story : Story
        With a motion.

    Returns
    -------
    Figure

    """
    scene = scene_of(story)
    figure = new_figure(560)
    _in_space(figure, scene, (0, 34, 500, 458))
    _flat(figure, scene, (552, 34, 320, 180), (0, 1), ('Plan', 'from above'))
    _flat(figure, scene, (552, 272, 146, 248), (0, 2), ('Elevation', 'front'))
    _flat(figure, scene, (746, 272, 126, 248), (1, 2), ('', 'side'))
    if scene.error_mm is not None:
        _scale(figure, scene)
    return figure


def _fitted(figure: Figure, points: Array, box: tuple[float, float, float, float],
            pad: float) -> Axes:
    """Axes in a box of pixels, equal in both directions, that show all points (n, 2)."""
    axes = place(figure, *box)
    low, high = points.min(axis=0), points.max(axis=0)
    scale = max((high - low) / (np.array(box[2:]) * (1.0 - 2.0 * pad)))
    half = 0.5 * max(scale, 1e-4) * np.array(box[2:])
    centre = 0.5 * (low + high)
    axes.set_xlim(centre[0] - half[0], centre[0] + half[0])
    axes.set_ylim(centre[1] - half[1], centre[1] + half[1])
    return axes


def _coloured(axes: Axes, scene: Scene, flat: Array, width: float) -> None:
    pieces = list(np.stack((flat[:-1], flat[1:]), axis=1))
    if scene.error_mm is None:
        axes.add_collection(LineCollection(pieces, colors=BLUE, linewidths=width, zorder=5),
                            autolim=False)
        return
    lines = LineCollection(pieces, cmap=_ERROR_COLOURS, linewidths=width, capstyle='round',
                           zorder=5)
    lines.set_array(scene.error_mm)
    lines.set_clim(0.0, scene.top_mm)
    axes.add_collection(lines, autolim=False)


def _platform(axes: Axes, hubs: Array, discs: Array, centre: Array, strong: bool) -> None:
    edge = INK if strong else SOFT
    for hub in hubs:
        axes.plot([centre[0], hub[0]], [centre[1], hub[1]], color=edge, linewidth=0.8, zorder=6)
    for disc in discs:
        axes.add_patch(Polygon(disc, facecolor=PALE_BLUE, edgecolor=edge, linewidth=0.8,
                               alpha=0.85, zorder=6))


def _plane(axes: Axes, corners: Array) -> None:
    axes.add_patch(Polygon(corners, facecolor=_GROUND, edgecolor=_GROUND_EDGE, linewidth=1.0,
                           zorder=1))


def _flat(figure: Figure, scene: Scene, box: tuple[float, float, float, float],
          axis_pair: tuple[int, int], words: tuple[str, str]) -> None:
    """Draw two of the three axes of map: plan or elevation."""
    pick = list(axis_pair)
    across, up = axis_pair
    parts = [scene.near(), scene.rail] if up == 1 else [scene.near(), scene.rail, scene.hooks]
    axes = _fitted(figure, np.vstack(parts)[:, pick], box, 0.05)
    if scene.plane is not None:
        _plane(axes, scene.plane[:, pick])
    if up == 2:
        for anchor, hook in zip(scene.anchors[:, pick], scene.hooks[:, pick], strict=True):
            axes.plot([anchor[0], hook[0]], [anchor[1], hook[1]], color=RULE, linewidth=0.8)
    axes.plot(scene.rail[:, across], scene.rail[:, up], color=OCHRE, linewidth=1.8, zorder=4)
    _coloured(axes, scene, scene.track[:, pick], 2.2)
    _platform(axes, scene.hubs[:, pick], scene.discs[..., pick], scene.start[pick], strong=False)
    _keep_in(axes, scene, pick)
    if axis_pair == (0, 2):
        x, z = scene.rail[np.argmax(scene.rail[:, 2]), pick].tolist()
        axes.annotate('anchor', (x, z), xytext=(0, 5), textcoords='offset points',
                      ha='center', color=OCHRE, fontsize=SMALL_PX)
    axes.set_ylabel('xyz'[up] + ' m', labelpad=2)
    axes.set_xlabel('xyz'[across] + ' m', labelpad=0)
    heading(axes, *words)


def _keep_in(axes: Axes, scene: Scene, pick: list[int]) -> None:
    """Edges of the keep-in box, where they come into view."""
    box = scene.story.rig.keep_in
    low, high = box.lower_m[pick], box.upper_m[pick]
    axes.plot([low[0], high[0], high[0], low[0], low[0]],
              [low[1], low[1], high[1], high[1], low[1]], color=LIMIT, linewidth=1.0,
              dashes=(5, 3), scalex=False, scaley=False, zorder=2)
    left, right = axes.get_xlim()
    bottom, top = axes.get_ylim()
    if bottom < high[1] < top:
        axes.annotate('keep-in', (min(right, high[0]), high[1]), xytext=(-3, 3),
                      textcoords='offset points', ha='right', color=LIMIT, fontsize=SMALL_PX)
    elif left < low[0] < right:
        axes.annotate('keep-in', (low[0], top), xytext=(4, -3), textcoords='offset points',
                      va='top', color=LIMIT, fontsize=SMALL_PX)


def _seen(points: Array) -> Array:
    """Parallel projection, shape (..., 3) to (..., 2)."""
    sine, cosine = np.sin(_AZIMUTH_RAD), np.cos(_AZIMUTH_RAD)
    x, y, z = points[..., 0], points[..., 1], points[..., 2]
    depth = sine * x + cosine * y
    return np.stack((cosine * x - sine * y,
                     np.sin(_ELEVATION_RAD) * depth + np.cos(_ELEVATION_RAD) * z), axis=-1)


def _in_space(figure: Figure, scene: Scene, box: tuple[float, float, float, float]) -> None:
    near = scene.near()
    low, high = near.min(axis=0), near.max(axis=0)
    ground = low[2] - 0.12
    floor_low = np.floor((low - 0.1) / _FLOOR_STEP_M) * _FLOOR_STEP_M
    floor_high = np.ceil((high + 0.1) / _FLOOR_STEP_M) * _FLOOR_STEP_M
    corners = np.array([[x, y, ground] for x in (floor_low[0], floor_high[0])
                        for y in (floor_low[1], floor_high[1])])
    top = np.array([[*scene.hooks[0][:2], high[2] + _ABOVE_M]])
    axes = _fitted(figure, _seen(np.vstack((near, corners, top))), box, 0.02)
    axes.axis('off')
    _floor(axes, floor_low, floor_high, ground)
    shadow = _seen(np.column_stack((scene.track[:, :2], np.full(len(scene.track), ground))))
    axes.plot(shadow[:, 0], shadow[:, 1], color='#d3dadd', linewidth=2.0, zorder=1)
    if scene.plane is not None:
        _plane(axes, _seen(scene.plane))
    for anchor, hook in zip(_seen(scene.anchors), _seen(scene.hooks), strict=True):
        axes.plot([anchor[0], hook[0]], [anchor[1], hook[1]], color='#c5ced2', linewidth=0.8,
                  zorder=4, scalex=False, scaley=False)
    _coloured(axes, scene, _seen(scene.track), 2.8)
    anchor, hook = _seen(scene.anchors[0]), _seen(scene.hooks[0])
    axes.plot([anchor[0], hook[0]], [anchor[1], hook[1]], color=INK, linewidth=1.4, zorder=6,
              scalex=False, scaley=False)
    _platform(axes, _seen(scene.hubs), _seen(scene.discs), _seen(scene.start), strong=True)
    above = scene.anchors[0][2] - high[2]
    x, y = _seen(top[0]).tolist()
    axes.annotate(f'tether, its anchor {above:.1f} m above', (x, y), xytext=(-8, -2),
                  textcoords='offset points', va='top', ha='right', fontsize=SMALL_PX, zorder=7,
                  bbox={'facecolor': 'white', 'edgecolor': 'none', 'pad': 1.5})
    if scene.plane is not None:
        corners = _seen(scene.plane)
        x, y = corners[np.argmin(corners[:, 1])].tolist()
        axes.annotate(f'plane of the path, tilted {scene.tilt_deg:.0f}°', (x, y), xytext=(10, -2),
                      textcoords='offset points', va='top', fontsize=SMALL_PX,
                      color=_GROUND_WORDS)
    heading(axes, 'In space', f'grid {_FLOOR_STEP_M} m')


def _floor(axes: Axes, low: Array, high: Array, ground: float) -> None:
    """Grid a little below everything, to stand the drawing on."""
    for x in np.arange(low[0], high[0] + 1e-6, _FLOOR_STEP_M):
        line = _seen(np.array([[x, low[1], ground], [x, high[1], ground]]))
        axes.plot(line[:, 0], line[:, 1], color=GRID, linewidth=0.9, zorder=0)
    for y in np.arange(low[1], high[1] + 1e-6, _FLOOR_STEP_M):
        line = _seen(np.array([[low[0], y, ground], [high[0], y, ground]]))
        axes.plot(line[:, 0], line[:, 1], color=GRID, linewidth=0.9, zorder=0)


def _scale(figure: Figure, scene: Scene) -> None:
    """Colours of the path in millimetres of error."""
    axes = place(figure, 12, 512, 190, 9)
    steps = 44
    edges = np.linspace(0.0, scene.top_mm, steps + 1)
    axes.bar(edges[:-1], 1.0, width=1.05 * scene.top_mm / steps, align='edge',
             color=_ERROR_COLOURS(np.linspace(0.0, 1.0, steps)), linewidth=0)
    axes.set_xlim(0.0, scene.top_mm)
    axes.set_ylim(0.0, 1.0)
    axes.grid(False)
    axes.set_yticks([])
    for spine in axes.spines.values():
        spine.set_visible(False)
    axes.set_xticks([0.0, scene.top_mm], ['0', f'{plain(scene.top_mm, 3)} mm'])
    axes.annotate('position error', (0, 1), xycoords='axes fraction', xytext=(0, 4),
                  textcoords='offset points', va='bottom', fontsize=SMALL_PX, color=SOFT)
