"""Everything over time, on one axis, with what happened marked through all of it."""

from collections.abc import Callable, Mapping

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
import numpy as np

from suspended_ctrl.review.acceptance import Criterion
from suspended_ctrl.review.figures.story import Story
from suspended_ctrl.review.figures.theme import (
    AXIS_COLOURS,
    BLUE,
    heading,
    INK,
    LIMIT,
    new_figure,
    OFF_PATH,
    PALE_BLUE,
    place,
    RULE,
    SMALL_PX,
    SOFT,
    STATE_COLOURS,
    STATE_TEXT,
    WIDTH_PX,
)
from suspended_ctrl.review.figures.thinning import thinned
from suspended_ctrl.review.words import plain
from suspended_ctrl.rig.frozen import Array

_LEFT, _RIGHT, _GAP = 60, 136, 30
_BAND_TOP, _BAND = 44, 24
# Travel's end is drawn for an axis that comes this near to it.
_NEAR_END_M = 0.1
_WIDTH = WIDTH_PX - _LEFT - _RIGHT

Criteria = Mapping[str, Criterion]


def time_figure(story: Story, criteria: Criteria) -> Figure:
    """
    Stack of plots over time.

    Parameters
    ----------
    story : Story
        The run's series.
    criteria : mapping of str to Criterion
        By key; their bounds are drawn.

    Returns
    -------
    Figure

    """
    plots: list[tuple[float, Callable[[Axes, Story, Criteria], None]]] = []
    if len(story.tracking.time_s):
        plots += [(150, _position), (105, _attitude)]
    if len(story.rotor_s):
        plots.append((150, _rotors))
    if len(story.tension_s):
        plots.append((120, _tension))
    if story.rig.carrier.axes and len(story.log.carrier_command):
        plots.append((120, _carrier))
    top: float = _BAND_TOP + _BAND + _GAP + 6
    height = top + sum(size + _GAP for size, _ in plots) + 26
    figure = new_figure(height)
    band = place(figure, _LEFT, _BAND_TOP, _WIDTH, _BAND)
    _states(band, story)
    stack = []
    for size, draw in plots:
        axes = place(figure, _LEFT, top, _WIDTH, size)
        axes.set_xlim(story.start_s, story.end_s)
        draw(axes, story, criteria)
        stack.append(axes)
        top += size + _GAP
    for axes in stack:
        _mark(axes, story)
        axes.tick_params(axis='x', labelbottom=axes is stack[-1])
    last = stack[-1] if stack else band
    last.tick_params(axis='x', labelbottom=True)
    last.set_xlabel('seconds from the start of the path' if story.path.exists else
                    'seconds from the start of the recording')
    return figure


def _labels(axes: Axes, labels: list[tuple[float, str, str]]) -> None:
    """Put words beside the right edge at given heights, moved apart where they would overlap."""
    low, high = axes.get_ylim()
    pixels = axes.bbox.height
    step = (SMALL_PX + 2.5) * (high - low) / pixels
    order = sorted(range(len(labels)), key=lambda k: labels[k][0])
    heights: list[float] = []
    for k in order:
        wanted = min(max(labels[k][0], low), high)
        heights.append(max(wanted, heights[-1] + step) if heights else wanted)
    over = heights[-1] - max(high, max(label[0] for label in labels)) if heights else 0.0
    for k, height in zip(order, heights, strict=True):
        _, text, colour = labels[k]
        axes.annotate(text, (1, height - max(over, 0.0)), xycoords=('axes fraction', 'data'),
                      xytext=(8, 0), textcoords='offset points', va='center', color=colour,
                      fontsize=SMALL_PX, annotation_clip=False)


def _limit(axes: Axes, value: float) -> None:
    axes.axhline(value, color=LIMIT, linewidth=1.1, dashes=(5, 3))


def _mark(axes: Axes, story: Story) -> None:
    """Grey what is off the path; lines through events and the injected fault."""
    span = story.path_span
    if span is not None:
        for begin, end in ((story.start_s, span[0]), (span[1], story.end_s)):
            if end > begin:
                axes.axvspan(begin, end, color=OFF_PATH, zorder=-5, linewidth=0)
    for t, event in story.events:
        colour = STATE_COLOURS['tripped' if event.stop_category == 0 else 'stopping']
        axes.axvline(t, color=colour, linewidth=1.6, zorder=4)
    fault_s = story.log.facts.fault_s
    if fault_s is not None:
        axes.axvline(fault_s - story.origin_s, color=INK, linewidth=1.1, dashes=(1, 2), zorder=4)


def _states(axes: Axes, story: Story) -> None:
    axes.set_xlim(story.start_s, story.end_s)
    axes.set_ylim(0, 1)
    axes.axis('off')
    seconds = (story.end_s - story.start_s) / _WIDTH
    if not story.states:
        axes.text(0.0, 0.5, 'no safety state recorded', transform=axes.transAxes, va='center',
                  color=SOFT)
    for begin, end, state in story.states:
        axes.axvspan(begin, end, color=STATE_COLOURS[state], linewidth=0)
        if (end - begin) / seconds > 8.5 * len(state):
            axes.text(0.5 * (begin + end), 0.46, state, ha='center', va='center',
                      color=STATE_TEXT.get(state, INK), fontsize=SMALL_PX)
    axes.add_patch(Rectangle((story.start_s, 0), story.end_s - story.start_s, 1, fill=False,
                             edgecolor=RULE, linewidth=0.9))
    heading(axes, 'Safety state', 'red danger, yellow abnormal, green normal')
    _event_words(axes, story)


def _event_words(axes: Axes, story: Story) -> None:
    words = [(t, event.cause.replace('_', ' ') + (
        '' if event.stop_category is None else f', category {event.stop_category}'))
        for t, event in story.events[:1]]
    if len(story.events) > 1:
        words = [(words[0][0], f'{words[0][1]} (and {len(story.events) - 1} more)')]
    middle = 0.5 * (story.start_s + story.end_s)
    for t, text in words:
        side = 'right' if t > middle else 'left'
        axes.annotate(text, (t, 0), xytext=(-4 if side == 'right' else 4, -5),
                      textcoords='offset points', ha=side, va='top', fontsize=SMALL_PX,
                      color=INK, annotation_clip=False)


def _peak(axes: Axes, time: Array, series: Array, text: str) -> None:
    """Mark the greatest value and say it."""
    k = int(np.argmax(series))
    axes.plot(time[k], series[k], 'o', markersize=5, color=INK, zorder=6)
    late = time[k] > np.mean(axes.get_xlim())
    axes.annotate(text, (time[k], series[k]), xytext=(-8 if late else 8, 3),
                  textcoords='offset points', ha='right' if late else 'left', va='bottom',
                  fontsize=SMALL_PX, annotation_clip=False)


def _bound(axes: Axes, criteria: Criteria, key: str, scale: float, unit: str,
           greatest: float) -> tuple[float, str, str] | None:
    """Draw a criterion's upper bound where it helps, and return its label."""
    criterion = criteria.get(key)
    if criterion is None or criterion.bound is None or criterion.at_least:
        return None
    value = criterion.bound * scale
    # A bound far above everything would press the series flat.
    if value > 6.0 * greatest:
        return (np.inf, f'allowed {value:g} {unit} ↑', LIMIT)
    _limit(axes, value)
    return (value, f'allowed {value:g} {unit}', LIMIT)


def _position(axes: Axes, story: Story, criteria: Criteria) -> None:
    time = story.tracking.time_s - story.origin_s
    error = 1e3 * story.tracking.position_error_map_m
    distance = np.linalg.norm(error, axis=1)
    axes.plot(*thinned(time, distance), color=INK, linewidth=1.7, zorder=3)
    labels = [(float(distance[-1]), 'distance', INK)]
    for k, name in enumerate('xyz'):
        axes.plot(*thinned(time, error[:, k]), color=AXIS_COLOURS[k], linewidth=1.0)
        labels.append((float(error[-1, k]), f'{name}', AXIS_COLOURS[k]))
    axes.axhline(0.0, color=RULE, linewidth=0.9, zorder=1)
    bound = _bound(axes, criteria, 'tracking.position_max_m', 1e3, 'mm', float(distance.max()))
    low, high = axes.get_ylim()
    axes.set_ylim(low, high + 0.12 * (high - low))
    heading(axes, 'Position error', 'mm, truth less reference, map axes')
    k = int(np.argmax(distance))
    _peak(axes, time, distance, f'{plain(distance[k], 3)} mm at {time[k]:.1f} s')
    _labels(axes, labels + ([bound] if bound else []))


def _attitude(axes: Axes, story: Story, criteria: Criteria) -> None:
    time = story.tracking.time_s - story.origin_s
    angle = 1e3 * story.tracking.attitude_error_rad
    axes.plot(*thinned(time, angle), color=BLUE, linewidth=1.4)
    bound = _bound(axes, criteria, 'tracking.attitude_max_rad', 1e3, 'mrad', float(angle.max()))
    axes.set_ylim(0.0, axes.get_ylim()[1] * 1.12)
    heading(axes, 'Attitude error', 'mrad')
    k = int(np.argmax(angle))
    _peak(axes, time, angle, f'{plain(angle[k], 3)} mrad at {time[k]:.1f} s')
    _labels(axes, [bound] if bound else [])


def _rotors(axes: Axes, story: Story, _criteria: Criteria) -> None:
    rotors = story.rig.rotors
    time, speed = story.rotor_s, story.rotor_speed_rad_s
    low_time, low = thinned(time, speed.min(axis=1))
    high_time, high = thinned(time, speed.max(axis=1))
    grid = np.union1d(low_time, high_time)
    axes.fill_between(grid, np.interp(grid, low_time, low), np.interp(grid, high_time, high),
                      color=PALE_BLUE, linewidth=0)
    for k in range(rotors.count):
        axes.plot(*thinned(time, speed[:, k], 350), color=BLUE, linewidth=0.7, alpha=0.65)
    labels = [(float(np.median(speed[len(speed) // 2])), f'{rotors.count} rotors', BLUE)]
    greatest, least = float(rotors.speed_max_rad_s.max()), float(rotors.speed_min_rad_s.min())
    two_way = bool(rotors.reversible.any())
    for value, text in ((greatest, f'greatest {greatest:g}'), (least, f'least held {least:g}'),
                        *(((-greatest, f'greatest {-greatest:g}'),
                           (-least, f'least held {-least:g}')) if two_way else ())):
        _limit(axes, value)
        labels.append((value, text, LIMIT))
    axes.set_ylim(-1.08 * greatest if two_way else 0.0, 1.08 * greatest)
    heading(axes, 'Rotor speeds', 'rad/s')
    _labels(axes, labels)


def _tension(axes: Axes, story: Story, _criteria: Criteria) -> None:
    tether = story.rig.tether
    axes.plot(*thinned(story.tension_s, story.tension_n), color=BLUE, linewidth=1.4)
    labels = []
    for value, text in ((tether.slack_margin_n, f'slack margin {tether.slack_margin_n:g}'),
                        (tether.working_load_n, f'working load {tether.working_load_n:g}')):
        _limit(axes, value)
        labels.append((value, text, LIMIT))
    top = max(1.08 * tether.working_load_n, 1.05 * float(story.tension_n.max()))
    axes.set_ylim(0.0, top)
    heading(axes, 'Tether tension', 'N')
    _labels(axes, labels)


def _carrier(axes: Axes, story: Story, _criteria: Criteria) -> None:
    states, commands = story.log.carrier_states, story.log.carrier_command
    labels = []
    for k, name in enumerate(story.rig.carrier.axes):
        colour = AXIS_COLOURS[k]
        axes.plot(*thinned(commands.log_s - story.origin_s, commands.position_m[:, k]),
                  color=colour, linewidth=1.0, dashes=(3, 2))
        last = commands.position_m[-1, k]
        if len(states):
            axes.plot(*thinned(states.stamp_s - story.origin_s, states.position_m[:, k]),
                      color=colour, linewidth=1.5)
            last = states.position_m[-1, k]
        labels.append((float(last), name, colour))
    carrier = story.rig.carrier
    for k, name in enumerate(carrier.axes):
        series = commands.position_m[:, k]
        ends = [end for end in (carrier.min_m[k], carrier.max_m[k])
                if np.abs(series - end).min() < _NEAR_END_M]
        for end in ends:
            _limit(axes, float(end))
            labels.append((float(end), f'end of {name}', LIMIT))
    heading(axes, 'Carrier axes', 'm, measured (line) and commanded (dashes)')
    _labels(axes, labels)
