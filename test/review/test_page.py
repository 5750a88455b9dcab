"""The report page, as text and in a real browser."""

from html.parser import HTMLParser
import json
import re
import shutil
import subprocess

import numpy as np
import pytest

from suspended_ctrl.review.figures.thinning import thinned
from suspended_ctrl.review.log import RunFacts, RunLog
from suspended_ctrl.review.metrics import assess
from suspended_ctrl.review.page import render_page
from suspended_ctrl.rig.file import load_rig

from synthetic_run import synthetic_run

CRITERIA = {'tracking.position_max_m': 0.010, 'tracking.attitude_max_rad': 0.10,
            'tether.tension_min_n': {'at_least': 5.0}}
CHROMIUM = next((found for name in ('chromium', 'chromium-browser', 'google-chrome')
                 if (found := shutil.which(name))), None)
VOID = {'meta', 'link', 'br', 'path', 'rect', 'use'}

# Runs inside the page, which has no script of its own, through the browser's own protocol.
PROBE = """
<script>
window.addEventListener('load', () => {
  const figures = [...document.querySelectorAll('svg.figure')].map(svg => {
    const box = svg.getBoundingClientRect();
    const drawn = [...svg.querySelectorAll('path, use')].filter(p => {
      const b = p.getBoundingClientRect(); return b.width > 0 || b.height > 0; });
    return {width: box.width, height: box.height, drawn: drawn.length,
      texts: svg.querySelectorAll('text').length, title: svg.querySelector('title').textContent,
      named: !!document.getElementById(svg.getAttribute('aria-labelledby').split(' ')[1])};
  });
  const sizes = [...document.querySelectorAll('body *')].filter(e => [...e.childNodes].some(
      n => n.nodeType === 3 && n.textContent.trim())).filter(
      e => !['STYLE', 'SCRIPT', 'TITLE', 'title', 'desc'].includes(e.tagName)).map(
      e => parseFloat(getComputedStyle(e).fontSize));
  const wide = document.documentElement.scrollWidth - window.innerWidth;
  const out = document.createElement('pre');
  out.id = 'probe';
  out.textContent = JSON.stringify({figures, smallest: Math.min(...sizes), count: sizes.length,
    wide, resources: performance.getEntriesByType('resource').map(r => r.name)});
  document.body.appendChild(out);
});
</script>
"""


@pytest.fixture(scope='module')
def pages():
    out = {}
    for name, trip_at_s in (('good', None), ('tripped', 1.0)):
        log, rig = synthetic_run(until_s=9.0, trip_at_s=trip_at_s)
        out[name] = render_page(log, rig, assess(log, rig, CRITERIA))
    return out


class Balance(HTMLParser):
    """Tags that do not close, and every place that a browser would fetch from."""

    def __init__(self):
        super().__init__()
        self.open, self.wrong, self.links, self.ids = [], [], [], []

    def handle_starttag(self, tag, attrs):
        self.links += [value for key, value in attrs if key in ('src', 'href', 'xlink:href')]
        self.ids += [value for key, value in attrs if key == 'id']
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.links += [value for key, value in attrs if key in ('src', 'href', 'xlink:href')]
        self.ids += [value for key, value in attrs if key == 'id']

    def handle_endtag(self, tag):
        if tag in VOID:
            return
        if not self.open or self.open.pop() != tag:
            self.wrong.append(tag)


@pytest.mark.parametrize('name', ['good', 'tripped'])
def test_the_page_stands_alone(pages, name):
    page = pages[name]
    assert len(page.encode()) < 3_000_000
    reader = Balance()
    reader.feed(page)
    assert (reader.open, reader.wrong) == ([], [])
    assert len(reader.ids) == len(set(reader.ids))
    assert all(link.startswith(('#', 'data:')) for link in reader.links)
    assert '@import' not in page
    assert not re.search(r'url\((?!#)', page)
    # References inside figures lead somewhere.
    for target in re.findall(r'(?:url\(|href=")#([\w-]+)', page):
        assert target in reader.ids


def test_the_verdict_comes_first_then_why(pages):
    good, tripped = pages['good'], pages['tripped']
    assert 'Accepted</div>' in good
    assert 'Not accepted' not in good
    first = tripped[tripped.index('<header>'):tripped.index('</header>')]
    assert 'Not accepted' in first
    assert 'tripped: pose silent' in first
    for page in (good, tripped):
        assert page.index('class="verdict') < page.index('<svg')
        assert 'hardware emergency stop' in page


def test_the_figures_say_what_happened(pages):
    words = re.sub(r'\s+', ' ', pages['tripped'])
    for text in ('live', 'tripped', 'greatest 900', 'least held 170', 'working load 150',
                 'slack margin 5', 'pose silent for 0.10 s, category 0', 'Plan', 'Elevation'):
        assert text in words, text
    assert '#c62f2b' in pages['tripped']      # red for danger
    assert '#3f9150' in pages['good']         # green for normal


def test_the_same_run_makes_the_same_page(pages):
    log, rig = synthetic_run(until_s=9.0)
    assert render_page(log, rig, assess(log, rig, CRITERIA)) == pages['good']


def test_names_cannot_break_the_page():
    log = RunLog(RunFacts(mission='<script>alert(1)</script>', ended='"&<b>'))
    rig = load_rig('seam_head')
    page = render_page(log, rig, assess(log, rig, {'no.such<key>': 1.0}))
    assert '<script' not in page
    reader = Balance()
    reader.feed(page)
    assert (reader.open, reader.wrong) == ([], [])


def test_thinning_keeps_peaks():
    time = np.linspace(0, 1, 100_001)
    series = np.sin(40 * time)
    series[54_321] = 7.0
    series[12_345] = -7.0
    few_time, few = thinned(time, series)
    assert len(few) <= 1_402
    assert few.max() == 7.0
    assert few.min() == -7.0
    assert (np.diff(few_time) > 0).all()


@pytest.mark.skipif(CHROMIUM is None, reason='no Chromium on this machine')
@pytest.mark.parametrize('name', ['good', 'tripped'])
def test_in_a_browser(pages, name, tmp_path):
    """No console errors, nothing fetched, every figure drawn, no text under 11 px."""
    page = pages[name]
    # The page forbids scripts, so the probe needs the policy out of its way.
    page = re.sub(r'<meta http-equiv="Content-Security-Policy"[^>]*>', '', page)
    path = tmp_path / 'report.html'
    path.write_text(page.replace('</body>', PROBE + '</body>'), encoding='utf-8')
    shot = subprocess.run(
        [CHROMIUM, '--headless', '--no-sandbox', '--disable-gpu', '--disable-extensions',
         f'--user-data-dir={tmp_path / "profile"}', '--enable-logging=stderr', '--log-level=0',
         '--window-size=1100,900', '--virtual-time-budget=4000', '--dump-dom', path.as_uri()],
        capture_output=True, text=True, timeout=120, check=True)
    assert 'CONSOLE' not in shot.stderr, shot.stderr
    found = json.loads(re.search(r'<pre id="probe">(.*?)</pre>', shot.stdout, re.DOTALL).group(1))
    assert found['resources'] == []
    assert [figure['title'] for figure in found['figures']] == [
        'Path in space, plan and elevation', 'Run over time']
    for figure in found['figures']:
        assert figure['width'] > 800
        assert figure['height'] > 400
        assert figure['drawn'] > 100
        assert figure['texts'] > 20
        assert figure['named']
    assert found['count'] > 150
    assert found['smallest'] >= 11.0
    assert found['wide'] <= 0


@pytest.mark.skipif(CHROMIUM is None, reason='no Chromium on this machine')
def test_the_policy_lets_the_page_be_itself(pages, tmp_path):
    path = tmp_path / 'report.html'
    path.write_text(pages['good'], encoding='utf-8')
    shot = subprocess.run(
        [CHROMIUM, '--headless', '--no-sandbox', '--disable-gpu', '--disable-extensions',
         f'--user-data-dir={tmp_path / "profile"}', '--enable-logging=stderr', '--log-level=0',
         '--window-size=1100,900', f'--print-to-pdf={tmp_path / "report.pdf"}', path.as_uri()],
        capture_output=True, text=True, timeout=120, check=True)
    assert 'CONSOLE' not in shot.stderr, shot.stderr
    assert (tmp_path / 'report.pdf').stat().st_size > 20_000
