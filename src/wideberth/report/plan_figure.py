"""How well a plan will predict: along the way out from its centre, and over its region."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from wideberth.plan.records import Plan
from wideberth.report.style import BLUE, FAINT, RUST, WIDTH, house_style, plain_axes


def draw_plan(plan: Plan, other: Plan | None = None) -> Figure:
    """Draw the prediction variance of a plan, and of a second one beside it.

    Left, against the distance from the centre: the mean on each sphere as a line, least to most as
    a band. Right, the share of the region in which the variance stays below each level.
    """
    plans = [(plan, BLUE, "-", "this plan")]
    if other is not None:
        plans.append((other, RUST, "--", "beside"))
    with house_style():
        figure = Figure(figsize=(WIDTH, 2.9), layout="constrained")
        left, right = figure.subplots(1, 2)
        for one, colour, line, name in plans:
            _spheres(left, one, colour, line)
            _shares(right, one, colour, line, name)
        left.set_xlabel("distance from the centre [coded]")
        left.set_ylabel("prediction variance [error variance]")
        right.set_xlabel("prediction variance [error variance]")
        right.set_ylabel("share of the region below it [%]")
        right.set_ylim(0, 102)
        right.set_xlim(left=0)
        left.set_ylim(bottom=0)
        left.set_xlim(left=0)
        for ax in (left, right):
            ax.grid(color=FAINT, alpha=0.25, linewidth=0.5)
            plain_axes(ax)
        if other is not None:
            right.legend(frameon=False, fontsize=7, loc="lower right")
    return figure


def _spheres(ax: Axes, plan: Plan, colour: str, line: str) -> None:
    spheres, n = plan.quality.spheres, plan.quality.n_runs
    if spheres is None:
        ax.text(0.5, 0.5, "no numeric factor", ha="center", transform=ax.transAxes)
        return
    ax.fill_between(
        spheres.radius, spheres.least / n, spheres.most / n, color=colour, alpha=0.15, linewidth=0
    )
    ax.plot(spheres.radius, spheres.mean / n, color=colour, linewidth=1.6, linestyle=line)


def _shares(ax: Axes, plan: Plan, colour: str, line: str, name: str) -> None:
    levels = plan.quality.variance_levels
    share = 100 * (np.arange(len(levels)) + 0.5) / max(len(levels), 1)
    ax.plot(levels, share, color=colour, linewidth=1.6, linestyle=line, label=name)
