"""The figures, each drawn on axes of the caller's or on its own.

Every drawing function takes records, computes nothing but positions, and returns the figure.
"""

from __future__ import annotations

from math import ceil

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle

from wideberth.decide.records import Choice, FactorMap, LimitMap, LimitVerdict
from wideberth.fit.records import Model, Models
from wideberth.operate.records import Window
from wideberth.report.fonts import drawable
from wideberth.report.style import (
    BLUE,
    FAINT,
    INK,
    LINES,
    RUST,
    SHADE,
    WIDTH,
    house_style,
    plain_axes,
)
from wideberth.study.coding import to_actual
from wideberth.study.records import FloatArray, Study
from wideberth.uncertainty.records import OptimumRegion

_STANDS_OUT = 3.0
_SHADED_TO = 6.0
_BATCHES = np.array([0.0, 10.0, 50.0, 80.0, 90.0, 95.0, 99.0, 100.0])


def shortened(name: str, longest: int = 26) -> str:
    """Cut a long name so that it fits on an axis; its end often tells it from others."""
    name = drawable(name)
    if len(name) <= longest:
        return name
    tail = longest // 2
    return f"{name[: longest - tail - 1]}…{name[-tail:]}"


def axis_label(name: str, unit: str) -> str:
    """Name a quantity with its unit, as `plain_text`."""
    return plain_text(f"{shortened(name)} [{shortened(unit, 16)}]" if unit else shortened(name))


def plain_text(text: str) -> str:
    """Make a text safe to draw: only characters at hand, and dollar signs are no mathematics."""
    return drawable(text).replace("$", r"\$")


def draw_margins(limits: tuple[LimitVerdict, ...], ax: Axes | None = None) -> Figure:
    """Draw the margins of all limits on one axis: right of 0 holds, left of 0 is broken."""
    judged = [verdict for verdict in limits if verdict.margin is not None]
    with house_style():
        figure, ax = axes_or_new(ax, (WIDTH, 0.75 + 0.26 * max(len(judged), 1)))
        for place, verdict in enumerate(judged):
            margin = verdict.margin or 0.0
            colour = BLUE if verdict.met else RUST
            ax.plot([0, margin], [place, place], color=colour, linewidth=2.2)
            ax.plot(
                margin, place, "o" if verdict.met else "X", color=colour, markersize=6, zorder=3
            )
        ax.axvline(0, color=INK, linewidth=0.9)
        ends = [verdict.margin or 0.0 for verdict in judged]
        span = max([*ends, 1.0]) - min([*ends, 0.0])
        ax.set_xlim(min([*ends, 0.0]) - 0.08 * span, max([*ends, 1.0]) + 0.08 * span)
        ax.set_ylim(len(judged) - 0.4, -0.6)
        ax.set_yticks(range(len(judged)), [_limit_name(v, v.unit) for v in judged])
        sds = all(verdict.margin_in == "batch sd" for verdict in judged)
        ax.set_xlabel(
            "margin [standard deviations of a batch], 0 = just met"
            if sds
            else "margin [batch sd, or hundredths of the response's range], 0 = just met"
        )
        ax.spines["left"].set_visible(False)
        plain_axes(ax)
    return figure


def draw_map(
    study: Study,
    choice: Choice,
    view: FactorMap,
    *,
    window: Window | None = None,
    region: OptimumRegion | None = None,
    ax: Axes | None = None,
) -> Figure:
    """Draw two factors through the setpoint: shading by conformance, limits by name.

    Without draws the shading is the smallest margin, without limits the desirability. A window is
    a dashed box, the region of the optimum, seen along the other factors, a dash-dotted line.
    """
    with house_style():
        figure, ax = axes_or_new(ax, (WIDTH * 0.49, WIDTH * 0.43))
        _shade(figure, ax, view)
        taken = [_shown_setting(choice, view)]
        for i, limit in enumerate(view.margins):
            _limit_line(ax, view, limit, i, study, taken)
        if view.depth.min() < 0 < view.depth.max():
            ax.contour(
                view.across_actual,
                view.up_actual,
                view.depth,
                levels=[0.0],
                colors=FAINT,
                linewidths=1.0,
                linestyles=[(0, (1, 2))],
            )
        _mark_runs(ax, study, view)
        _mark_window(ax, view, window)
        _mark_region(ax, study, view, region)
        _mark_setpoint(ax, choice, view)
        units = {factor.name: factor.unit for factor in study.factors}
        ax.set_xlabel(axis_label(view.across, units[view.across]))
        ax.set_ylabel(axis_label(view.up, units[view.up]))
        ax.set_xlim(view.across_actual[0], view.across_actual[-1])
        ax.set_ylim(view.up_actual[0], view.up_actual[-1])
        plain_axes(ax)
    return figure


def draw_line(study: Study, choice: Choice, view: FactorMap, ax: Axes | None = None) -> Figure:
    """Draw the only factor there is: each limit's margin along it, by name."""
    with house_style():
        figure, ax = axes_or_new(ax, (WIDTH * 0.8, 2.6))
        x = view.across_actual
        for i, limit in enumerate(view.margins):
            y = limit.margin[0]
            ax.plot(x, y, color=INK, linestyle=LINES[i % len(LINES)], linewidth=1.3)
            place = int(len(x) * 0.5)
            ax.annotate(plain_text(shortened(limit.response)), (x[place], y[place]), fontsize=7)
        if not view.margins and view.desirability is not None:
            ax.plot(x, view.desirability[0], color=BLUE, linewidth=1.5)
        value = (choice.setpoint or {}).get(view.across)
        around = choice.factors[view.across].room if view.across in choice.factors else None
        if isinstance(value, float):
            ax.axvline(value, color=BLUE, linewidth=1.2)
        if around is not None:
            ax.axvspan(*around, color=BLUE, alpha=0.15)
        if view.margins:
            ax.axhline(0, color=INK, linewidth=0.9)
        units = {factor.name: factor.unit for factor in study.factors}
        ax.set_xlabel(axis_label(view.across, units[view.across]))
        ax.set_ylabel("margin [batch sd]" if view.margins else "desirability")
        plain_axes(ax)
    return figure


def draw_residuals(models: Models) -> Figure:
    """Draw each measured response's residuals against its fitted values, odd runs by row."""
    shown = [model for model in models.models if model.runs]
    columns = min(3, max(len(shown), 1))
    lines = ceil(len(shown) / columns) or 1
    with house_style():
        figure = Figure(figsize=(WIDTH, 2.05 * lines), layout="constrained")
        for place, model in enumerate(shown, start=1):
            _residual_panel(figure.add_subplot(lines, columns, place), model)
    return figure


def axes_or_new(ax: Axes | None, size: tuple[float, float]) -> tuple[Figure, Axes]:
    """Take the caller's axes with their figure, or make new ones of a size in inches."""
    if ax is None:
        figure = Figure(figsize=size, layout="constrained")
        return figure, figure.add_subplot()
    figure = ax.get_figure(root=True)  # type: ignore[assignment]
    return figure, ax


def _shade(figure: Figure, ax: Axes, view: FactorMap) -> None:
    """Shade in one hue, in steps that a grey print keeps apart, with a bar that says of what."""
    smallest = _smallest(view)
    if view.conformance is not None:
        shade, label, steps = 100 * view.conformance, "batches inside all limits [%]", _BATCHES
    elif smallest is not None:
        shade = np.clip(smallest, 0.0, _SHADED_TO)
        label, steps = "smallest margin [batch sd]", np.linspace(0, _SHADED_TO, 7)
    elif view.desirability is not None:
        shade, label, steps = view.desirability, "desirability", np.linspace(0, 1, 11)
    else:
        return
    colours = mpl.colormaps[SHADE](np.linspace(0.02, 0.62, len(steps) - 1))
    filled = ax.contourf(
        view.across_actual, view.up_actual, shade, levels=steps, colors=colours.tolist()
    )
    bar = figure.colorbar(filled, ax=ax, pad=0.02, fraction=0.06, spacing="uniform")
    bar.set_label(label)
    bar.ax.tick_params(labelsize=7)
    bar.outline.set_visible(False)


def _mark_window(ax: Axes, view: FactorMap, window: Window | None) -> None:
    if window is None or window.status != "proven":
        return
    (left, right), (low, high) = window.ranges[view.across], window.ranges[view.up]
    ax.add_patch(
        Rectangle(
            (left, low),
            right - left,
            high - low,
            fill=False,
            edgecolor=INK,
            linewidth=1.3,
            linestyle=(0, (4, 2)),
            zorder=4,
        )
    )


def _mark_region(ax: Axes, study: Study, view: FactorMap, region: OptimumRegion | None) -> None:
    """Outline the region of the optimum as seen along the other factors."""
    if region is None:
        return
    names = [factor.name for factor in study.numeric]
    pair = [names.index(view.across), names.index(view.up)]
    spread = np.linalg.pinv(region.shape)[np.ix_(pair, pair)]
    sizes, axes = np.linalg.eigh(spread)
    turn = np.linspace(0, 2 * np.pi, 181)
    circle = np.stack([np.cos(turn), np.sin(turn)])
    coded = np.tile(region.centre, (len(turn), 1))
    coded[:, pair] += (axes @ (np.sqrt(np.maximum(sizes, 0.0))[:, None] * circle)).T
    actual = to_actual(study.numeric, coded)
    ax.plot(
        actual[:, pair[0]],
        actual[:, pair[1]],
        color=RUST,
        linewidth=1.2,
        linestyle=(0, (6, 2, 1, 2)),
        zorder=4,
    )


def _limit_name(limit: LimitVerdict | LimitMap, unit: str) -> str:
    word = "≥" if limit.side == "low" else "≤"
    text = f"{shortened(limit.response)} {word} {limit.value:.6g} {shortened(unit, 16)}"
    return plain_text(text.rstrip())


def _smallest(view: FactorMap) -> FloatArray | None:
    if not view.margins:
        return None
    smallest: FloatArray = np.min([limit.margin for limit in view.margins], axis=0)
    return smallest


def _limit_line(
    ax: Axes,
    view: FactorMap,
    limit: LimitMap,
    i: int,
    study: Study,
    taken: list[FloatArray],
) -> None:
    """Draw where a limit is just met, with its name at a place that is not taken yet."""
    if not (limit.margin.min() < 0 < limit.margin.max()):
        return
    unit = next(r.unit for r in study.responses if r.name == limit.response)
    lines = ax.contour(
        view.across_actual,
        view.up_actual,
        limit.margin,
        levels=[0.0],
        colors=INK,
        linewidths=1.4,
        linestyles=[LINES[i % len(LINES)]],
    )
    place = _clear_place(np.concatenate([s for s in lines.allsegs[0] if len(s)]), view, taken)
    taken.append(place)
    ax.clabel(
        lines,
        fmt={0.0: _limit_name(limit, unit)},
        fontsize=7,
        inline=True,
        manual=[(float(place[0]), float(place[1]))],
    )


def _shown_setting(choice: Choice, view: FactorMap) -> FloatArray:
    setpoint = choice.setpoint or {}
    return np.array([setpoint.get(name, 0.0) for name in (view.across, view.up)], dtype=float)


def _clear_place(line: FloatArray, view: FactorMap, taken: list[FloatArray]) -> FloatArray:
    """Choose the place on a line (n, 2) for its name: off the frame, far from what is taken."""
    low = np.array([view.across_actual[0], view.up_actual[0]])
    width = np.array([view.across_actual[-1], view.up_actual[-1]]) - low
    share = (line - low) / width
    away = np.min([np.sqrt((((line - place) / width) ** 2).sum(axis=1)) for place in taken], axis=0)
    from_frame = np.minimum(share, 1 - share).min(axis=1)
    # near the frame a name would be cut off; beyond some distance more is no clearer
    clear = np.minimum(away, 0.45) + 2 * np.minimum(from_frame, 0.2)
    best: FloatArray = line[int(clear.argmax())]
    return best


def _mark_runs(ax: Axes, study: Study, view: FactorMap) -> None:
    names = [factor.name for factor in study.numeric]
    runs = study.runs.numeric_actual[study.runs.fitted]
    ax.plot(
        runs[:, names.index(view.across)],
        runs[:, names.index(view.up)],
        ".",
        color=FAINT,
        markersize=4,
        zorder=3,
    )


def _mark_setpoint(ax: Axes, choice: Choice, view: FactorMap) -> None:
    setpoint = choice.setpoint or {}
    x, y = setpoint.get(view.across), setpoint.get(view.up)
    if not isinstance(x, float) or not isinstance(y, float):
        return
    across, up = choice.factors[view.across].room, choice.factors[view.up].room
    left, right = across or (x, x)
    low, high = up or (y, y)
    ax.add_patch(
        Rectangle(
            (left, low),
            right - left,
            high - low,
            facecolor="white",
            edgecolor=RUST,
            linewidth=1.4,
            zorder=4,
        )
    )
    ax.plot(x, y, "D", color=RUST, markersize=3.5, zorder=5)


def _residual_panel(ax: Axes, model: Model) -> None:
    fitted = np.array([run.fitted for run in model.runs])
    known = all(run.studentized is not None for run in model.runs)
    heights = np.array([run.studentized if known else run.residual for run in model.runs], float)
    ax.axhline(0, color=FAINT, linewidth=0.8)
    ax.plot(fitted, heights, "o", color=BLUE, markersize=3.2, markerfacecolor="white")
    for run, height in zip(model.runs, heights, strict=True):
        if known and abs(height) > _STANDS_OUT:
            ax.annotate(
                f"row {run.row}",
                (run.fitted, height),
                xytext=(3, 2),
                textcoords="offset points",
                fontsize=6.5,
            )
    if known:
        reach = max(_STANDS_OUT, float(np.abs(heights).max())) * 1.15
        ax.set_ylim(-reach, reach)
    ax.set_title(plain_text(shortened(model.response)), loc="left")
    ax.set_xlabel(axis_label("fitted", model.unit))
    ax.set_ylabel("studentized residual" if known else axis_label("residual", model.unit))
    ax.locator_params(axis="x", nbins=5)
    plain_axes(ax)
