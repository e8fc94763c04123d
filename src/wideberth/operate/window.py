"""The step that gives the operating window around a setting, proven, or says what must give."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from decimal import ROUND_CEILING, ROUND_FLOOR, Decimal

import numpy as np

from wideberth.decide.conflicts import side_text
from wideberth.decide.judge import own_setting, read_setting
from wideberth.decide.problem import Problem, arena
from wideberth.decide.recommend import solve
from wideberth.decide.records import Choice
from wideberth.decide.region import room_of
from wideberth.decide.search import HOLDS
from wideberth.errors import refusal
from wideberth.fit.records import Models
from wideberth.operate.proof import prove_over_box
from wideberth.operate.records import Ends, Stop, Window
from wideberth.operate.widest import (
    Box,
    Ground,
    alone,
    ground_of,
    largest_box,
    plane_slack,
    proven,
    stoppers,
    worst_over,
)
from wideberth.progress import Progress, silent
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import FloatArray, NumericFactor, Setting
from wideberth.surface.explored import factor_ranges

_UNSUPPORTED = (
    "A model that the answer rests on must not be used, or the setting was never explored: no"
    " window can be claimed."
)
_ASKED = Stop("the range asked for", "the range asked for")


def window(
    models: Models,
    *,
    seed: int | None = None,
    at: Setting | None = None,
    hold: Mapping[str, Ends] | None = None,
    progress: Progress = silent,
) -> Window:
    """Give the operating window around the recommended setting, or one of the person's own.

    Parameters
    ----------
    hold : mapping, optional
        Ranges of some factors, own units, to be proven or refuted; the others keep their room and
        are widened only where the ranges hold.

    Raises
    ------
    RefusedError
        As `recommend`, and when a range cannot be read.
    """
    problem, choice = solve(models, seed=seed, at=at, progress=progress)
    return window_around(problem, choice, hold=hold, progress=progress)


def window_around(
    problem: Problem,
    choice: Choice,
    *,
    hold: Mapping[str, Ends] | None = None,
    progress: Progress = silent,
) -> Window:
    """Give the operating window around a choice that `solve` gave with its problem."""
    if choice.setpoint is None:
        return _none(choice, ("There is no setting to draw a window around.",))
    if choice.status == "unsupported":
        return _none(choice, (_UNSUPPORTED,))
    study = problem.study
    levels, x = read_setting(study, choice.setpoint)
    if not problem.possible:
        return _none(choice, ("The runs leave no degrees of freedom to guard a limit with.",))
    ground = ground_of(arena(problem, levels, "simultaneous"), problem.region, room_of(study), x)
    room = ground.core
    if hold:
        ground = _held(problem, ground, hold)
    core, boxes = proven(ground, ground.core)
    if core is None or not np.array_equal(core.low, ground.core.low):
        against = _counterexample(problem, ground, levels) if hold else None
        return replace(_none(choice, _must_give(problem, ground)), counterexample=against)
    progress("window", 0.2)
    box, more = largest_box(ground)
    progress("window", 0.7)
    names = (*(_row_name(problem, row.limit) for row in ground.rows), *problem.region.names)
    stops = stoppers(ground, box, names)
    singly = [alone(ground, j) or ground.core for j in range(len(x))]
    progress("window", 1.0)
    factors = study.numeric
    ranges = _ends(factors, box)
    held = _ends(factors, ground.core)
    low, high = factor_ranges(problem.explored)
    explored = np.where(ground.free, high - low, 1.0)
    share = np.where(ground.free, (box.high - box.low) / explored, 1.0)
    return Window(
        status="proven",
        setting=choice.setpoint,
        ranges=ranges,
        settable={f.name: _inwards(f, ranges[f.name], held[f.name]) for f in factors},
        hold=held,
        act_at=_ends(factors, _inside(box, ground.core, x, room)),
        relative_volume=float(np.prod(share)),
        stopped_by={
            f.name: _ASKED if hold and f.name in hold else Stop(*stop)
            for f, stop in zip(factors, stops, strict=True)
        },
        singly={
            f.name: _ends(factors, one)[f.name] for f, one in zip(factors, singly, strict=True)
        },
        boxes=boxes + more,
        must_give=(),
    )


def _none(choice: Choice, must_give: tuple[str, ...]) -> Window:
    return Window("none", choice.setpoint, {}, {}, {}, {}, None, {}, {}, 0, must_give)


def _held(problem: Problem, ground: Ground, hold: Mapping[str, Ends]) -> Ground:
    """Take the stated ranges into the core; their factors are not widened beyond them."""
    factors = problem.study.numeric
    names = [factor.name for factor in factors]
    low, high = (to_actual(factors, end) for end in (ground.core.low, ground.core.high))
    free = ground.free.copy()
    for name, (first, last) in hold.items():
        if name not in names:
            raise refusal(
                f"no numeric factor is called {name}", "--hold", f"use {', '.join(names)}"
            )
        j = names.index(name)
        if not (np.isfinite([first, last]).all() and first <= last):
            raise refusal(f"{name} from {first:g} to {last:g} is no range", "--hold", "low first")
        if factors[j].scale == "log" and first <= 0:
            raise refusal(f"{name} is {first:g}", "--hold", "give numbers above 0")
        low[j], high[j], free[j] = first, last, False
    core = Box(to_coded(factors, low), to_coded(factors, high))
    return replace(ground, core=core, free=free)


def _counterexample(problem: Problem, ground: Ground, levels: tuple[int, ...]) -> Setting | None:
    """Find a setting of the core that breaks a row or a plane."""
    for row in ground.rows:
        found = prove_over_box(row, ground.core.low, ground.core.high, HOLDS)
        if found.breaks is not None:
            return own_setting(problem.study, levels, found.breaks)
    slack = plane_slack(ground, ground.core)
    if slack.min(initial=np.inf) < HOLDS:
        steep = ground.planes[int(slack.argmin())]
        corner = np.where(steep > 0, ground.core.high, ground.core.low)
        return own_setting(problem.study, levels, corner)
    return None


def _inside(box: Box, core: Box, x: FloatArray, room: Box) -> Box:
    """Draw a box in by the room, but not inside its core."""
    return Box(
        np.minimum(box.low + (x - room.low), core.low),
        np.maximum(box.high - (room.high - x), core.high),
    )


def _must_give(problem: Problem, ground: Ground) -> tuple[str, ...]:
    """Say what breaks somewhere in the room, and what would open a window."""
    sentences = []
    seen: dict[int, float] = {}
    for row in ground.rows:
        worst = worst_over(row, ground.core)
        if row.limit is None:
            if worst < HOLDS:
                sentences.append("The box to be held reaches beyond what the runs explored.")
            continue
        seen[row.limit] = min(worst, seen.get(row.limit, np.inf))
    for limit, worst in seen.items():
        if worst >= HOLDS:
            continue
        side = problem.sides[limit]
        unit = problem.models[side.response].unit
        guarding = problem.guarding[side.response]
        counted = "batch sd" if guarding.in_batch_sd else "% of the response's range"
        sentences.append(
            f"{side_text(side.response, side.side, side.value, unit)} is broken by"
            f" {-worst:.2g} {counted} at the worst place of the box to be held: a looser limit, a"
            " tighter tolerance or more runs must give."
        )
    for slack, name in zip(plane_slack(ground, ground.core), problem.region.names, strict=True):
        if slack < -1e-9:
            sentences.append(f"The box to be held reaches beyond {name}.")
    return tuple(sentences) or ("The box to be held could not be proven.",)


def _row_name(problem: Problem, limit: int | None) -> str:
    if limit is None:
        return "edge of the explored region"
    side = problem.sides[limit]
    return f"{side.response} {side.side}"


def _ends(factors: tuple[NumericFactor, ...], box: Box) -> dict[str, Ends]:
    low, high = to_actual(factors, box.low), to_actual(factors, box.high)
    return {f.name: (float(low[j]), float(high[j])) for j, f in enumerate(factors)}


def _inwards(factor: NumericFactor, ends: Ends, held: Ends) -> Ends:
    """Move ends inwards to whole steps, but never inside what the plant holds."""
    step = factor.settable_step
    if step is None:
        return ends
    # a hair outwards first, so that an end that is a multiple up to rounding stays one
    slack = step * Decimal("1e-7")
    low = ((Decimal(repr(ends[0])) - slack) / step).to_integral_value(ROUND_CEILING) * step
    high = ((Decimal(repr(ends[1])) + slack) / step).to_integral_value(ROUND_FLOOR) * step
    return min(float(low), held[0]), max(float(high), held[1])
