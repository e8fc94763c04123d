"""Residual sheets: everything that residuals can show about one response, on one page."""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from scipy.special import ndtri

from wideberth.fit.records import Model, Models
from wideberth.report.figures import axis_label, draw_residuals
from wideberth.report.style import BLUE, FAINT, RUST, WIDTH, house_style, plain_axes, to_svg
from wideberth.study.records import FloatArray, Study

_STANDS_OUT = 3.0
_COLUMNS = 3
_LARGE_COOK = 1.0


def residual_sheets(models: Models) -> dict[str, str]:
    """Draw one sheet for every fitted response and one of all: file name to SVG."""
    fitted = [model for model in models.models if model.runs]
    sheets = {}
    for place, model in enumerate(fitted, start=1):
        safe = "".join(c if c.isalnum() else "-" for c in model.response)
        name = f"residuals-{place}-{safe}.svg"
        sheets[name] = to_svg(draw_sheet(models.study, model), name)
    if fitted:
        sheets["residuals.svg"] = to_svg(draw_residuals(models), "residuals")
    return sheets


def draw_sheet(study: Study, model: Model) -> Figure:
    """Draw one response's residuals against fitted values, order, scores, factors and columns."""
    known = all(run.studentized is not None for run in model.runs)
    heights = np.array([run.studentized if known else run.residual for run in model.runs], float)
    places = [study.runs.rows.index(run.row) for run in model.runs]
    fitted = np.array([run.fitted for run in model.runs])
    panels: list[tuple[str, FloatArray, Sequence[str]]] = [
        (axis_label("fitted", model.unit), fitted, ()),
        _order(study, places),
    ]
    for j, factor in enumerate(study.numeric):
        values = study.runs.numeric_actual[places, j]
        panels.append((axis_label(factor.name, factor.unit), values, ()))
    for j, category in enumerate(study.categorical):
        levels = study.runs.levels[places, j].astype(np.float64)
        panels.append((axis_label(category.name, ""), levels, category.levels))
    panels += _columns(study, places)
    lines = ceil((len(panels) + 2) / _COLUMNS)
    with house_style():
        figure = Figure(figsize=(WIDTH, 1.95 * lines), layout="constrained")
        axes = [figure.add_subplot(lines, _COLUMNS, i + 1) for i in range(len(panels) + 2)]
        _scores(axes[0], model, heights, known=known)
        _influence(axes[1], model)
        for ax, (label, across, ticks) in zip(axes[2:], panels, strict=True):
            _scatter(ax, model, across, heights, known=known)
            ax.set_xlabel(label)
            if ticks:
                ax.set_xticks(range(len(ticks)), [axis_label(tick, "")[:12] for tick in ticks])
        for ax in axes:
            plain_axes(ax)
        figure.suptitle(axis_label(model.response, model.unit), x=0.01, ha="left", fontsize=9.5)
    return figure


def _order(study: Study, places: list[int]) -> tuple[str, FloatArray, Sequence[str]]:
    if study.runs.order is not None:
        return "run order", np.array([study.runs.order[i] for i in places], dtype=np.float64), ()
    rows = np.array([study.runs.rows[i] for i in places], dtype=np.float64)
    return "row of the sheet (run order not stated)", rows, ()


def _columns(study: Study, places: list[int]) -> list[tuple[str, FloatArray, Sequence[str]]]:
    """Lay out the sheet's other columns that are numbers or have few different texts."""
    found: list[tuple[str, FloatArray, Sequence[str]]] = []
    for name, cells in study.runs.others.items():
        own = [cells[i] for i in places]
        try:
            numbers = np.array([float(cell) for cell in own])
        except ValueError:
            different = list(dict.fromkeys(own))
            if 1 < len(different) <= len(own) / 2:
                where = np.array([different.index(cell) for cell in own], dtype=np.float64)
                found.append((axis_label(name, ""), where, different))
            continue
        if np.isfinite(numbers).all() and np.ptp(numbers) > 0:
            found.append((axis_label(name, ""), numbers, ()))
    return found


def _scatter(
    ax: Axes, model: Model, across: FloatArray, heights: FloatArray, *, known: bool
) -> None:
    ax.axhline(0, color=FAINT, linewidth=0.8)
    ax.plot(across, heights, "o", color=BLUE, markersize=3.0, markerfacecolor="white")
    if known:
        reach = max(_STANDS_OUT, float(np.abs(heights).max())) * 1.15
        ax.set_ylim(-reach, reach)
        for run, x, y in zip(model.runs, across, heights, strict=True):
            if abs(y) > _STANDS_OUT:
                _name_row(ax, run.row, x, y)
    if np.ptp(across) == 0:
        ax.set_xlim(across[0] - 1, across[0] + 1)
    ax.set_ylabel(_height_label(model, known=known))
    ax.locator_params(axis="x", nbins=5)


def _height_label(model: Model, *, known: bool) -> str:
    return "studentized residual" if known else axis_label("residual", model.unit)


def _name_row(ax: Axes, row: int, x: float, y: float) -> None:
    place = {"xytext": (3, 2), "textcoords": "offset points", "fontsize": 6.5}
    ax.annotate(f"row {row}", (x, y), **place)  # type: ignore[arg-type]


def _scores(ax: Axes, model: Model, heights: FloatArray, *, known: bool) -> None:
    """Plot ordered residuals against normal scores; on a straight line they look normal."""
    order = np.argsort(heights, kind="stable")
    n = len(heights)
    scores = ndtri((np.arange(1, n + 1) - 0.375) / (n + 0.25))
    ax.plot(scores, heights[order], "o", color=BLUE, markersize=3.0, markerfacecolor="white")
    slope = 1.0 if known else float(scores @ heights[order] / (scores @ scores))
    ax.plot(scores[[0, -1]], slope * scores[[0, -1]], color=FAINT, linewidth=0.8)
    for place, i in enumerate(order):
        if known and abs(heights[i]) > _STANDS_OUT:
            _name_row(ax, model.runs[i].row, scores[place], heights[i])
    ax.set_xlabel("normal score")
    ax.set_ylabel(_height_label(model, known=known))


def _influence(ax: Axes, model: Model) -> None:
    """Plot Cook's distance against leverage: which runs hold the model."""
    leverage = np.array([run.leverage for run in model.runs])
    cook = np.array([np.nan if run.cook is None else run.cook for run in model.runs])
    ax.set_xlabel("leverage")
    ax.set_ylabel("Cook's distance")
    ax.set_xlim(0, 1.02)
    if not np.isfinite(cook).any():
        ax.text(0.5, 0.5, "not defined", ha="center", transform=ax.transAxes, color=FAINT)
        return
    ax.plot(leverage, cook, "o", color=BLUE, markersize=3.0, markerfacecolor="white")
    if float(np.nanmax(cook)) > _LARGE_COOK / 2:
        ax.axhline(_LARGE_COOK, color=RUST, linewidth=0.8)
    for run in model.runs:
        if run.cook is not None and run.cook > _LARGE_COOK:
            _name_row(ax, run.row, run.leverage, run.cook)
    ax.set_ylim(bottom=0)
