"""The trade-off, two responses at a time: frontier settings, the setpoint and today's setting."""

from __future__ import annotations

from itertools import combinations
from math import ceil

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from wideberth.decide.frontier import Frontier, FrontierPoint
from wideberth.report.figures import axis_label
from wideberth.report.style import BLUE, INK, RUST, WIDTH, house_style, plain_axes

_MOST_PAIRS = 3
_COLUMNS = 3


def draw_frontier(answer: Frontier) -> Figure:
    """Draw the pairs of responses that trade most against each other, at most three."""
    units = {goal.response: goal.unit for goal in answer.goals}
    pairs = _trading(answer)
    columns = min(_COLUMNS, len(pairs))
    lines = ceil(len(pairs) / columns)
    with house_style():
        figure = Figure(figsize=(WIDTH, 2.35 * lines), layout="constrained")
        for place, (across, up) in enumerate(pairs, start=1):
            ax = figure.add_subplot(lines, columns, place)
            _panel(ax, answer, across, up)
            ax.set_xlabel(axis_label(across, units[across]))
            ax.set_ylabel(axis_label(up, units[up]))
        handles, labels = figure.axes[0].get_legend_handles_labels()
        figure.legend(handles, labels, loc="outside upper center", ncols=3, frameon=False)
    return figure


def _trading(answer: Frontier) -> list[tuple[str, str]]:
    """Order pairs by how strongly one response's gain goes with the other's loss."""
    names = [goal.response for goal in answer.goals]
    toward = {g.response: -1.0 if g.want == "less" else 1.0 for g in answer.goals}
    strengths = []
    for across, up in combinations(names, 2):
        values = np.array(
            [[p.means[across] * toward[across], p.means[up] * toward[up]] for p in answer.points]
        )
        flat = np.ptp(values, axis=0).min() <= 0 or len(values) < 3
        strengths.append(0.0 if flat else float(np.corrcoef(values.T)[0, 1]))
    order = np.argsort(strengths, kind="stable")[:_MOST_PAIRS]
    pairs = list(combinations(names, 2))
    return [pairs[i] for i in order]


def _panel(ax: Axes, answer: Frontier, across: str, up: str) -> None:
    def at(points: list[FrontierPoint]) -> tuple[list[float], list[float]]:
        return [p.means[across] for p in points], [p.means[up] for p in points]

    ax.plot(
        *at(list(answer.points)),
        "o",
        color=BLUE,
        markersize=4,
        markerfacecolor="white",
        label="frontier",
    )
    if answer.setpoint is not None:
        ax.plot(*at([answer.setpoint]), "D", color=RUST, markersize=5, label="setpoint")
    if answer.today is not None:
        ax.plot(*at([answer.today]), "s", color=INK, markersize=4.5, label="today")
    ax.locator_params(nbins=5)
    plain_axes(ax)
