"""Which factor makes a response wander: one bar a response, parts by factor."""

from __future__ import annotations

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from wideberth.operate.records import Robustness
from wideberth.report.figures import axes_or_new, axis_label, plain_text, shortened
from wideberth.report.style import FAINT, INK, SHADE, WIDTH, house_style, plain_axes

_HATCHES = ("", "////", "....", "\\\\\\\\", "xxxx", "----", "oo", "++")
_WIDE_ENOUGH = 0.09


def draw_shares(answer: Robustness, ax: Axes | None = None) -> Figure:
    """Draw the standard deviation that setting error makes, against the batch noise.

    A bar's length is the share of the whole variance (setting and batch) that setting error makes;
    its parts are the factors, each with its own hatch and name.
    """
    shown = {name: one for name, one in answer.responses.items() if one.shares}
    factors = list(next(iter(shown.values())).shares) if shown else []
    with house_style():
        figure, ax = axes_or_new(ax, (WIDTH, 0.95 + 0.36 * max(len(shown), 1)))
        colours = mpl.colormaps[SHADE](np.linspace(0.25, 0.75, max(len(factors), 2)))
        drawn: set[str] = set()
        for place, one in enumerate(shown.values()):
            total = one.sd_setting**2 + (one.sd_batch or 0.0) ** 2
            start = 0.0
            for i, name in enumerate(factors):
                part = one.shares.get(name, 0.0) * one.sd_setting**2 / total
                ax.barh(
                    place,
                    100 * part,
                    left=100 * start,
                    height=0.62,
                    color=colours[i],
                    edgecolor=INK,
                    linewidth=0.5,
                    hatch=_HATCHES[i % len(_HATCHES)],
                    label=plain_text(shortened(name)) if name not in drawn else None,
                )
                drawn.add(name)
                start += part
            ax.barh(
                place,
                100 * (1 - start),
                left=100 * start,
                height=0.62,
                color="white",
                edgecolor=FAINT,
                linewidth=0.5,
            )
        ax.set_yticks(
            range(len(shown)), [axis_label(name, one.unit) for name, one in shown.items()]
        )
        ax.set_ylim(len(shown) - 0.5, -0.5)
        ax.set_xlim(0, 100)
        ax.set_xlabel("share of the variance of single batches [%]; white: batch noise")
        if factors:
            figure.legend(loc="outside upper center", ncols=min(len(factors), 4), frameon=False)
        ax.spines["left"].set_visible(False)
        plain_axes(ax)
    return figure
