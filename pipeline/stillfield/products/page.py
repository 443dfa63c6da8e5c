"""The page every picture stands on: size, palette, title, footer, caution, and a PNG that repeats itself."""

from __future__ import annotations

import textwrap
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from stillfield.vocabulary import WATER_CAUTION

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

INK = "#1d2b36"
MUTED = "#5d6b76"
RULE = "#c9d1d7"
SEA = "#e4ecf1"
NO_VALUE = "#dcdad5"
NO_VALUE_HATCH = "#b3afa7"
ACCENT = "#b5472f"

WIDTH_IN = 10.0
DPI = 160
LEFT_IN, RIGHT_IN = 0.62, 0.30
_HEADER_IN, _FOOTER_LINE_IN, _CAUTION_LINE_IN = 0.84, 0.17, 0.135
_CAUTION_CHARACTERS = 196
_TITLE_CHARACTERS, _LINE_CHARACTERS = 72, 156

_STYLE = {
    "font.family": "DejaVu Sans", "text.color": INK, "axes.labelcolor": INK, "axes.edgecolor": MUTED,
    "xtick.color": MUTED, "ytick.color": MUTED, "axes.linewidth": 0.6,
}


@dataclass(frozen=True)
class Words:
    """What is written around a picture.

    Attributes
    ----------
    title : str
        Heading.
    footer : str
        One line on method and still.
    subtitle : str
        Line under the heading: what is shown, in which unit.
    caution : str
        Water-safety words, in small print on every page that shows litres.
    """

    title: str
    footer: str = ""
    subtitle: str = ""
    caution: str = WATER_CAUTION


@contextmanager
def house_style() -> Iterator[None]:
    """Draw with the same fonts and lines whatever the user's own matplotlib settings are."""
    from matplotlib import style

    with style.context(["default", _STYLE]), warnings.catch_warnings():
        # A name in a script the font lacks is drawn as boxes; that is no reason to stop a run.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        yield


@dataclass(frozen=True)
class Page:
    """A page under construction; places on it are inches from the left and from the top."""

    figure: Figure
    height_in: float
    body_top_in: float
    body_bottom_in: float

    def axes(self, left: float, top: float, width: float, height: float) -> Axes:
        """Axes with their upper left corner at `left`, `top`; all in inches."""
        bottom = self.height_in - top - height
        return self.figure.add_axes(
            (left / WIDTH_IN, bottom / self.height_in, width / WIDTH_IN, height / self.height_in))

    def text(self, left: float, top: float, words: str, **style: Any) -> None:
        """Words at `left`, `top` in inches; dollar signs are signs, not mathematics."""
        self.figure.text(left / WIDTH_IN, 1.0 - top / self.height_in, words, parse_math=False, **style)


def new_page(words: Words, body_in: float) -> Page:
    """Start a page with its words and room for a body.

    Parameters
    ----------
    words : Words
        Title, subtitle, footer and caution; long ones are wrapped.
    body_in : float
        Height of the room between subtitle and footer. [in]

    Returns
    -------
    Page
        White, 1600 px wide when saved.

    Examples
    --------
    >>> with house_style():
    ...     page = new_page(Words("Wells of the plain"), 4.0)
    >>> round(page.body_bottom_in - page.body_top_in, 6)
    4.0
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    title = textwrap.wrap(words.title, _TITLE_CHARACTERS)[:2]
    footer = textwrap.wrap(words.footer, _LINE_CHARACTERS)
    caution = textwrap.wrap(words.caution, _CAUTION_CHARACTERS)
    header = _HEADER_IN + 0.28 * (len(title) - 1)
    foot = 0.24 + _FOOTER_LINE_IN * len(footer) + _CAUTION_LINE_IN * len(caution) + 0.14
    height = header + body_in + foot
    figure = Figure(figsize=(WIDTH_IN, height), dpi=DPI, facecolor="white")
    FigureCanvasAgg(figure)
    page = Page(figure, height, header, header + body_in)
    for row, line in enumerate(title):
        page.text(LEFT_IN, 0.42 + 0.28 * row, line, size=15.5, weight="bold", va="baseline")
    page.text(LEFT_IN, header - 0.19, words.subtitle, size=8.8, color=MUTED, va="baseline")
    _foot(page, footer, caution)
    return page


def _foot(page: Page, footer: list[str], caution: list[str]) -> None:
    from matplotlib.lines import Line2D

    level = 1.0 - (page.body_bottom_in + 0.10) / page.height_in
    page.figure.add_artist(
        Line2D([LEFT_IN / WIDTH_IN, 1.0 - RIGHT_IN / WIDTH_IN], [level, level], color=RULE, linewidth=0.7))
    top = page.body_bottom_in + 0.27
    for line in footer:
        page.text(LEFT_IN, top, line, size=7.6, color=INK, va="baseline")
        top += _FOOTER_LINE_IN
    for line in caution:
        page.text(LEFT_IN, top, line, size=6.4, color=MUTED, va="baseline")
        top += _CAUTION_LINE_IN


def save_png(figure: Figure, path: str | Path) -> None:
    """Write a figure as PNG without date or program name, so that equal pictures are equal files."""
    figure.savefig(path, format="png", dpi=DPI, metadata={"Software": None})
