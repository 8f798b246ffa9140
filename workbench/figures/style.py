"""One look for all figures: colours, marks and lines that hold in grey too, sizes, and text that is only text."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from functools import lru_cache
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib import font_manager
from matplotlib.axes import Axes
from matplotlib.text import Text

from workbench.look.words import percent, short

#: Okabe & Ito's colours, told apart by colour-blind readers, in an order that alternates dark and light.
COLOURS = ("#0072B2", "#E69F00", "#009E73", "#CC79A7", "#D55E00", "#56B4E9", "#000000", "#999999")
MARKS = ("o", "^", "s", "D", "v", "P", "X", "*")
LINES = ("-", "--", ":", "-.", (0, (6, 1)), (0, (1, 1)), (0, (4, 1, 1, 1)), (0, (8, 3)))
INK, GUIDE, PALE = "#222222", "#767676", "#D9D9D9"

ONE_COLUMN, TWO_COLUMNS = 3.5, 7.2  # inches
TEXT, SMALL = 7.5, 6.5  # points
NAME_IN_FIGURE = 20
MISSING_GLYPH = "\N{WHITE SQUARE}"

_SETTINGS: Any = {
    "font.family": ["DejaVu Sans"],
    "font.size": TEXT,
    "axes.titlesize": TEXT,
    "axes.labelsize": TEXT,
    "xtick.labelsize": SMALL,
    "ytick.labelsize": SMALL,
    "legend.fontsize": SMALL,
    "legend.title_fontsize": SMALL,
    "legend.frameon": False,
    "axes.linewidth": 0.6,
    "axes.edgecolor": INK,
    "axes.labelcolor": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "text.color": INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "lines.linewidth": 1.0,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "figure.dpi": 100.0,
    "savefig.dpi": 300.0,
    "svg.hashsalt": "workbench",
    "svg.fonttype": "path",
    "text.parse_math": False,
    "axes.unicode_minus": True,
}


@contextmanager
def figure_style() -> Iterator[None]:
    """Use the settings under which every figure is drawn and saved, whatever the user's own are."""
    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_SETTINGS)
        yield


@lru_cache(maxsize=1)
def _glyphs() -> frozenset[int]:
    """Characters that the figures' font can draw."""
    path = font_manager.findfont(font_manager.FontProperties(family=["DejaVu Sans"]))
    return frozenset(font_manager.get_font(path).get_charmap())


def legible(text: str) -> str:
    """Return a text with characters that the font lacks as empty squares."""
    return "".join(c if ord(c) in _glyphs() else MISSING_GLYPH for c in text)


def figure_name(name: str, length: int = NAME_IN_FIGURE) -> str:
    """Return a name as figures show it: one line, cut in its middle, every character drawable."""
    return legible(short(name, length))


def say(axes: Axes, x: float, y: float, text: str, **style: Any) -> Text:
    """Write a text into the axes as it is: no character of it is taken for mathematics."""
    return axes.text(x, y, text, parse_math=False, **style)


def plain_ticks(axes: Axes, which: str, places: Any, names: list[str], **style: Any) -> None:
    """Label the ticks of one axis with names, taken as they are."""
    axis = axes.xaxis if which == "x" else axes.yaxis
    axis.set_ticks(np.asarray(places))
    for label in axis.set_ticklabels(names, **style):
        label.set_parse_math(False)


def plain_legend(axes: Axes, **where: Any) -> None:
    """Add a legend whose labels are taken as they are."""
    handles, labels = axes.get_legend_handles_labels()
    if handles:
        legend = axes.legend(handles, labels, **where)
        for text in legend.get_texts():
            text.set_parse_math(False)


def component_label(number: int, share: float) -> str:
    """Return the label of a component's axis: its number and its share of the variance.

    >>> component_label(1, 0.21)
    'Component 1 (21 % of variance)'
    """
    return f"Component {number} ({percent(share)} of variance)"


def note(axes: Axes, text: str) -> Axes:
    """Show axes that hold a sentence in place of a figure."""
    axes.set_axis_off()
    say(axes, 0.5, 0.5, text, transform=axes.transAxes, ha="center", va="center", wrap=True)
    return axes
