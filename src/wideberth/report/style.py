"""One look for all figures: quiet greys, one blue, line styles that survive a grey printer."""

from __future__ import annotations

import io
import logging
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from wideberth.report.fonts import families

INK = "#22272e"
FAINT = "#8a929b"
BLUE = "#1f5a94"
RUST = "#a4481c"
SHADE = "Blues"
LINES = ("solid", (0, (6, 2)), (0, (2, 2)), (0, (8, 2, 2, 2)), (0, (1, 1)))
WIDTH = 6.7
"""Width of the text on a printed page, in inches."""

# the library types every key of its settings apart; ours are plain texts and numbers
_SETTINGS: Any = {
    "font.family": list(families()),
    "font.size": 8.0,
    "axes.titlesize": 8.5,
    "axes.labelsize": 8.0,
    "axes.edgecolor": FAINT,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "svg.fonttype": "path",
    "axes.formatter.useoffset": False,
}


@contextmanager
def house_style() -> Iterator[None]:
    """Draw in the house style, whatever the person's own settings are."""
    # a fallback font may come in one weight only, of which every figure would complain
    complaints = logging.getLogger("matplotlib.font_manager")
    before = complaints.level
    complaints.setLevel(logging.ERROR)
    try:
        with mpl.rc_context(), mpl.rc_context(_SETTINGS):
            yield
    finally:
        complaints.setLevel(before)


def to_svg(figure: Figure, name: str) -> str:
    """Write a figure as SVG; the same figure always gives the same bytes."""
    target = io.StringIO()
    with house_style(), mpl.rc_context({"svg.hashsalt": name}):
        figure.savefig(target, format="svg", metadata={"Date": None, "Creator": None})
    text = target.getvalue()
    return text[text.index("<svg") :]


def plain_axes(ax: Axes) -> None:
    """Keep ticks out of the way."""
    ax.tick_params(length=2.5, width=0.6)
