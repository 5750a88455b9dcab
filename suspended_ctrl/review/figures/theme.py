"""Looks shared by all figures, and figures as SVG that can stand inside a page."""

from collections.abc import Iterator
from contextlib import contextmanager
from html import escape
from io import StringIO
import re
from typing import Any

from matplotlib import rc_context
from matplotlib.axes import Axes
from matplotlib.figure import Figure

# One unit of a figure is one CSS pixel of the page, so sizes below are what a reader sees.
_PIXELS_PER_INCH = 72
WIDTH_PX = 880
TEXT_PX = 12.5
SMALL_PX = 11.5

INK = '#1c2b33'
SOFT = '#5d6d75'
RULE = '#b9c4c9'
GRID = '#e6ebed'
OFF_PATH = '#f3f5f6'
LIMIT = '#a3341f'
BLUE = '#1d5f91'
VIOLET = '#74479c'
OCHRE = '#9a6b12'
AXIS_COLOURS = (BLUE, VIOLET, OCHRE)
PALE_BLUE = '#cfe0ec'

# IEC 60073: red danger, yellow abnormal, green normal; grey where the meaning is neutral.
STATE_COLOURS = {'locked': '#d5dbde', 'ready': '#e9eef0', 'live': '#3f9150', 'holding': '#f5c518',
                 'stopping': '#f5c518', 'tripped': '#c62f2b'}
STATE_TEXT = {'live': '#ffffff', 'tripped': '#ffffff'}

_STYLE: dict[Any, Any] = {
    'font.family': 'DejaVu Sans', 'font.size': TEXT_PX, 'axes.labelsize': TEXT_PX,
    'axes.titlesize': TEXT_PX, 'xtick.labelsize': SMALL_PX, 'ytick.labelsize': SMALL_PX,
    'text.color': INK, 'axes.labelcolor': INK, 'xtick.color': SOFT, 'ytick.color': SOFT,
    'axes.edgecolor': RULE, 'axes.linewidth': 0.9, 'axes.spines.top': False,
    'axes.spines.right': False, 'axes.grid': True, 'axes.axisbelow': True, 'grid.color': GRID,
    'grid.linewidth': 0.9, 'lines.linewidth': 1.5, 'lines.solid_capstyle': 'round',
    'xtick.major.size': 3, 'ytick.major.size': 0, 'figure.facecolor': 'none',
    'axes.facecolor': 'none', 'svg.fonttype': 'none', 'path.simplify_threshold': 0.3,
}
_FONTS = "system-ui, 'Segoe UI', Roboto, 'Helvetica Neue', Arial, 'DejaVu Sans', sans-serif"


@contextmanager
def themed(name: str) -> Iterator[None]:
    """Give all figures their look; ``name`` makes identifiers a figure's own, always the same."""
    with rc_context({**_STYLE, 'svg.hashsalt': name}):
        yield


def new_figure(height_px: float) -> Figure:
    """Figure as wide as the page's text."""
    size = (WIDTH_PX / _PIXELS_PER_INCH, height_px / _PIXELS_PER_INCH)
    return Figure(figsize=size, dpi=_PIXELS_PER_INCH)


def place(figure: Figure, left: float, top: float, width: float, height: float,
          **options: object) -> Axes:
    """Axes in pixels, ``left`` and ``top`` from the figure's upper left corner."""
    across, down = figure.get_size_inches() * _PIXELS_PER_INCH
    axes = figure.add_axes(
        (left / across, 1.0 - (top + height) / down, width / across, height / down),
        **options)  # type: ignore[call-overload]
    assert isinstance(axes, Axes)
    return axes


def heading(axes: Axes, text: str, aside: str) -> None:
    """Name of a plot above its left corner, unit or view above its right one."""
    axes.annotate(text, (0, 1), xycoords='axes fraction', xytext=(0, 4),
                  textcoords='offset points', va='bottom', fontweight='bold')
    axes.annotate(aside, (1, 1), xycoords='axes fraction', xytext=(0, 4),
                  textcoords='offset points', ha='right', va='bottom', color=SOFT,
                  fontsize=SMALL_PX)


def _shorter(match: re.Match[str]) -> str:
    return f'{float(match.group()):.2f}'.rstrip('0').rstrip('.')


def svg_text(figure: Figure, name: str, title: str, description: str) -> str:
    """
    SVG element of a figure for a page.

    Parameters
    ----------
    figure : Figure
        Drawn already.
    name : str
        Letters only; the figure's identifiers begin with it.
    title, description : str
        Read out in place of the picture.

    Returns
    -------
    str

    """
    buffer = StringIO()
    figure.savefig(buffer, format='svg', metadata={'Date': None, 'Creator': None})
    text = buffer.getvalue()
    text = text[text.index('<svg'):]
    text = re.sub(r'<metadata>.*?</metadata>', '', text, flags=re.DOTALL)
    text = re.sub(r'<!--.*?-->', '', text, flags=re.DOTALL)
    text = re.sub(r'\bid="', f'id="{name}-', text)
    text = re.sub(r'url\(#', f'url(#{name}-', text)
    text = re.sub(r'href="#', f'href="#{name}-', text)
    text = re.sub(r'-?\d+\.\d{3,}', _shorter, text)
    text = re.sub(r"'DejaVu Sans'", _FONTS.replace('"', "'"), text)
    width, height = figure.get_size_inches() * _PIXELS_PER_INCH
    opening = (f'<svg xmlns:xlink="http://www.w3.org/1999/xlink" class="figure" role="img" '
               f'width="{width:.0f}" height="{height:.0f}" viewBox="0 0 {width:.0f} {height:.0f}" '
               f'xmlns="http://www.w3.org/2000/svg" aria-labelledby="{name}-t {name}-d">'
               f'<title id="{name}-t">{escape(title)}</title>'
               f'<desc id="{name}-d">{escape(description)}</desc>')
    return opening + text[text.index('>') + 1:].strip()
