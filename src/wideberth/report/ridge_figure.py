"""The ridge of the compromise: every response along it, with bands, to beyond what was explored."""

from __future__ import annotations

from math import ceil

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from wideberth.operate.records import Outward
from wideberth.report.figures import axis_label
from wideberth.report.style import BLUE, FAINT, INK, RUST, WIDTH, house_style, plain_axes

_COLUMNS = 3


def draw_ridge(answer: Outward) -> Figure:
    """Draw each response's mean and 95 % band along the ridge, runs to try marked beyond it."""
    names = list(answer.path[0].predictions)
    columns = min(_COLUMNS, len(names))
    lines = ceil(len(names) / columns)
    with house_style():
        figure = Figure(figsize=(WIDTH, 2.0 * lines), layout="constrained")
        for place, name in enumerate(names, start=1):
            _panel(figure.add_subplot(lines, columns, place), answer, name)
    return figure


def _panel(ax: Axes, answer: Outward, name: str) -> None:
    reach = np.array([point.reach for point in answer.path])
    points = [point.predictions[name] for point in answer.path]
    mean = np.array([point.mean for point in points])
    bands = [point.mean_interval for point in points]
    if all(band is not None for band in bands):
        ends = np.array([band for band in bands if band is not None])
        ax.fill_between(reach, ends[:, 0], ends[:, 1], color=BLUE, alpha=0.18, linewidth=0)
    inside = reach <= 1.0
    ax.plot(reach[inside], mean[inside], color=BLUE, linewidth=1.6)
    beyond = reach >= reach[inside].max(initial=reach[0])
    ax.plot(reach[beyond], mean[beyond], color=BLUE, linewidth=1.6, linestyle=(0, (3, 2)))
    runs = answer.runs
    ax.plot(
        [run.reach for run in runs],
        [run.predictions[name].mean for run in runs],
        "o",
        markersize=4.5,
        markerfacecolor="white",
        color=RUST,
    )
    ax.axvline(1.0, color=INK, linewidth=0.8)
    ax.annotate(
        "explored",
        (1.0, 1.0),
        xycoords=("data", "axes fraction"),
        xytext=(-3, -2),
        textcoords="offset points",
        ha="right",
        va="top",
        fontsize=6.5,
        color=FAINT,
    )
    ax.set_xlabel("reach [times the explored edge]")
    ax.set_ylabel(axis_label(name, points[0].unit))
    ax.locator_params(axis="y", nbins=5)
    plain_axes(ax)
