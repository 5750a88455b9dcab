"""
The report: one page that opens anywhere, verdict first, then why.

No scripts, no fonts, no pictures from elsewhere; figures are SVG inside the page.
"""

from collections.abc import Iterable
from html import escape
from typing import Any

import suspended_ctrl
from suspended_ctrl.review.acceptance import Criterion, figure, RUN_COMPLETED
from suspended_ctrl.review.figures.space_figure import space_figure
from suspended_ctrl.review.figures.story import Story, told
from suspended_ctrl.review.figures.theme import svg_text, themed
from suspended_ctrl.review.figures.time_figure import time_figure
from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.metrics import Assessment
from suspended_ctrl.review.page_style import STYLE
from suspended_ctrl.review.rig_facts import rig_facts
from suspended_ctrl.review.words import GROUPS, reading_of
from suspended_ctrl.rig.rig import Rig

CAUTION = (
    'This page reports what a control program recorded on a general-purpose computer. It is no '
    'safety-rated device and no proof of safety: a hardware emergency stop must remove rotor '
    'power by itself, and local codes and licensed practice decide.')


def render_page(log: RunLog, rig: Rig, assessment: Assessment) -> str:
    """
    Write the report of a run.

    Parameters
    ----------
    log : RunLog
        The run.
    rig : Rig
        The hardware.
    assessment : Assessment
        Its figures and verdict.

    Returns
    -------
    str
        An HTML document.

    """
    metrics = assessment.metrics
    story = told(log, rig)
    title = f'{metrics["mission"] or "Run"} on {metrics["rig"]}'
    return '\n'.join((
        '<!DOCTYPE html>', '<html lang="en">', '<head>', '<meta charset="utf-8">',
        '<meta name="viewport" content="width=device-width, initial-scale=1">',
        '<meta http-equiv="Content-Security-Policy" content="default-src \'none\'; '
        'style-src \'unsafe-inline\'; img-src data:">',
        # Without it a browser asks the server for one.
        '<link rel="icon" href="data:,">',
        f'<title>{escape(title)}: {metrics["verdict"]}</title>', f'<style>{STYLE}</style>',
        '</head>', '<body>', '<header>', f'<h1>{escape(title)}</h1>',
        f'<p class="what">{escape(_settings(metrics))}</p>', _verdict(assessment), '</header>',
        '<main>', _criteria(assessment.criteria), *_figures(story, assessment),
        '<h2>All figures</h2>', _groups(metrics), _facts(log, rig, metrics),
        f'<p class="caution"><b>Caution.</b> {CAUTION}</p>', '</main>',
        f'<footer>suspended_ctrl {escape(suspended_ctrl.__version__)}, definitions '
        f'{escape(metrics["schema"])}. The numbers are in metrics.json, the recording in run/.'
        '</footer>', '</body>', '</html>', ''))


def _settings(metrics: dict[str, Any]) -> str:
    parts = [f'law {metrics["law"]}' if metrics['law'] else '',
             f'allocator {metrics["allocator"]}' if metrics['allocator'] else '',
             f'seed {metrics["seed"]}' if metrics['seed'] is not None else '']
    return ', '.join(part for part in parts if part) or 'recorded run'


def _said(criterion: Criterion) -> str:
    """One criterion in a sentence, in units that people read."""
    if criterion.key == RUN_COMPLETED:
        return ('The mission ran to the end of its path.' if criterion.passed
                else f'The run did not complete: {criterion.reason.replace("_", " ")}.')
    reading = reading_of(criterion.key)
    bound = reading.number(criterion.bound or 0.0)
    words = 'at least' if criterion.at_least else 'at most'
    if criterion.value is None:
        return f'{reading.words}: no figure, {words} {bound} wanted.'
    value = reading.number(criterion.value)
    if criterion.passed:
        return f'{reading.words} {value}, {words} {bound} wanted.'
    return f'{reading.words} {value}: {words} {bound} wanted.'


def _verdict(assessment: Assessment) -> str:
    shown = [c for c in assessment.criteria if not c.passed] or assessment.criteria
    word, kind = ('Accepted', 'pass') if assessment.passed else ('Not accepted', 'fail')
    items = ''.join(f'<li>{escape(_said(criterion))}</li>' for criterion in shown)
    return (f'<div class="verdict {kind}"><div class="word">{word}</div><ul>{items}</ul></div>')


def _criteria(criteria: Iterable[Criterion]) -> str:
    rows = []
    for criterion in criteria:
        reading = reading_of(criterion.key)
        name = 'Run completed' if criterion.key == RUN_COMPLETED else reading.words
        value = '' if criterion.value is None else reading.number(criterion.value)
        bound = ''
        if criterion.bound is not None:
            words = 'at least' if criterion.at_least else 'at most'
            bound = f'{words} {reading.number(criterion.bound)}'
            value = value or 'none'
        rows.append(
            f'<tr><th scope="row">{escape(name)}</th><td class="key">{escape(criterion.key)}</td>'
            f'<td class="number">{escape(value)}</td><td class="number">{escape(bound)}</td>'
            f'<td class="use">{_use(criterion)}</td>'
            f'<td>{_word(criterion.passed)}</td></tr>')
    return ('<h2>Acceptance</h2><table><thead><tr><th>Criterion</th><th>Key</th>'
            '<th class="number">Value</th><th class="number">Wanted</th>'
            '<th class="use">Share of the bound</th><th>Verdict</th></tr></thead><tbody>'
            + ''.join(rows) + '</tbody></table>')


def _word(passed: bool) -> str:
    return '<span class="met">met</span>' if passed else '<span class="missed">not met</span>'


def _use(criterion: Criterion) -> str:
    """Bar of an upper bound's use; the mark is the bound."""
    if criterion.value is None or criterion.at_least or not criterion.bound:
        return ''
    share = max(criterion.value / criterion.bound, 0.0)
    colour = '#2f7d43' if criterion.passed else '#b3261e'
    words = f'{100 * share:.0f} % of the bound'
    return (f'<svg width="140" height="12" role="img" aria-label="{words}">'
            f'<rect width="{100 * min(share, 1.4):.1f}" y="2" height="8" fill="{colour}"/>'
            '<path d="M100 0V12" stroke="#1c2b33" stroke-width="1.5"/></svg>')


def _figures(story: Story, assessment: Assessment) -> Iterable[str]:
    criteria = {criterion.key: criterion for criterion in assessment.criteria}
    if len(story.motion_s):
        with themed('space'):
            drawing = space_figure(story)
            whose = "plant's truth" if story.from_truth else 'estimate, no truth was recorded'
            text = svg_text(drawing, 'space', 'Path in space, plan and elevation', (
                f'Path of the platform ({whose}), coloured by its position error, with tether and '
                'anchor at some moments.'))
        yield (f'<h2>Where it went</h2><figure>{text}<figcaption>The path as flown ({whose}), '
               'darker where it was further from its reference. Thin grey lines: the tether at '
               'moments evenly apart; ochre: the way of the anchor. The platform is drawn at the '
               'start of the path by its rotors.</figcaption></figure>')
    with themed('time'):
        drawing = time_figure(story, criteria)
        text = svg_text(drawing, 'time', 'Run over time', _time_words(story, assessment.metrics))
    yield (f'<h2>What happened when</h2><figure>{text}<figcaption>One time axis for all. Grey '
           'ground: off the path, not judged. Red dashes: limits of the rig and bounds of the '
           'acceptance. Vertical lines: yellow or red where the supervisor acted, black dots '
           'where a fault was injected.</figcaption></figure>')


def _time_words(story: Story, metrics: dict[str, Any]) -> str:
    words = [f'Safety state: {", ".join(state for _, _, state in story.states) or "none"}.']
    for key in ('tracking.position_max_m', 'tracking.attitude_max_rad', 'tether.tension_min_n',
                'tether.tension_max_n'):
        value = figure(metrics, key)
        if value is not None:
            reading = reading_of(key)
            words.append(f'{reading.words} {reading.number(value)}.')
    words += [f'At {t:.2f} s: {event.cause}.' for t, event in story.events]
    return ' '.join(words)


def _table(rows: Iterable[tuple[str, str]], number: bool) -> str:
    kind = ' class="number"' if number else ''
    return '<table><tbody>' + ''.join(
        f'<tr><th scope="row">{escape(name)}</th><td{kind}>{escape(value)}</td></tr>'
        for name, value in rows) + '</tbody></table>'


def _groups(metrics: dict[str, Any]) -> str:
    sections = []
    for title, readings in GROUPS.items():
        rows = []
        for key, reading in readings.items():
            value = figure(metrics, key)
            rows.append((reading.words, 'none' if value is None else reading.number(value)))
        sections.append(f'<section><h3>{escape(title)}</h3>{_table(rows, True)}</section>')
    return f'<div class="groups">{"".join(sections)}</div>'


def _facts(log: RunLog, rig: Rig, metrics: dict[str, Any]) -> str:
    run = [('Mission', metrics['mission']), ('Rig', metrics['rig']), ('Law', metrics['law']),
           ('Allocator', metrics['allocator']), ('Seed', metrics['seed']),
           ('Safety state at the end', metrics['safety']['state'])]
    rows = [(name, str(value)) for name, value in run if value is not None]
    rows += [(f'Event at {event["t_s"]:.2f} s', _event_words(event))
             for event in metrics['safety']['events']]
    rows += [(f'Refused on {topic}', f'{count} messages') for topic, count in log.refused.items()]
    return (f'<h2>Run and rig</h2><div class="facts"><section><h3>Run</h3>{_table(rows, False)}'
            f'</section><section><h3>Rig</h3>{_table(rig_facts(rig), False)}</section></div>')


def _event_words(event: dict[str, Any]) -> str:
    category = event['stop_category']
    words = str(event['cause']).replace('_', ' ')
    return words if category is None else f'{words}, stop category {category}'
