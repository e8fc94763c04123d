"""Maps of two factors at a time through a setting, the others held there.

With many factors only the pairs among the three that move the smallest margin (without limits
the desirability) most over their explored range are drawn.
"""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations

import numpy as np

from wideberth.decide.arena import Arena
from wideberth.decide.conformance import conformance_over, setting_sd
from wideberth.decide.desirability import overall
from wideberth.decide.judge import read_setting
from wideberth.decide.problem import Problem, arena, mode_of
from wideberth.decide.records import Choice, FactorMap, LimitMap
from wideberth.fit.draws import Draws
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import FloatArray
from wideberth.surface.explored import depth

_N_GRID = 41
_MOST_FACTORS = 3
_BEYOND = 0.08


def factor_maps(
    problem: Problem, choice: Choice, draws: Draws | None = None
) -> tuple[FactorMap, ...]:
    """Draw the maps through the choice's setting; none without a setting or a numeric factor.

    With draws, each map carries the conformance of its settings.
    """
    study = problem.study
    moving = np.flatnonzero(np.abs(problem.region.basis).max(axis=1, initial=0.0) > 1e-9)
    if choice.setpoint is None or not len(moving):
        return ()
    levels, x = read_setting(study, choice.setpoint)
    rows = arena(problem, levels, mode_of(problem))
    span = _spans(problem, x)
    if len(moving) == 1:
        only = _map(problem, rows, x, int(moving[0]), None, span)
        return (_with_conformance(problem, choice, draws, only),)
    shown = sorted([j for j in _most_moving(rows, x, span) if j in moving][:_MOST_FACTORS])
    views = [_map(problem, rows, x, a, b, span) for a, b in combinations(shown, 2)]
    return tuple(_with_conformance(problem, choice, draws, view) for view in views)


def _with_conformance(
    problem: Problem, choice: Choice, draws: Draws | None, view: FactorMap
) -> FactorMap:
    if draws is None or choice.setpoint is None:
        return view
    study = problem.study
    levels, x = read_setting(study, choice.setpoint)
    names = [factor.name for factor in study.numeric]
    actual = np.tile(to_actual(study.numeric, x), (len(view.up_actual), len(view.across_actual), 1))
    actual[:, :, names.index(view.across)] = view.across_actual
    if view.up:
        actual[:, :, names.index(view.up)] = view.up_actual[:, None]
    grid = to_coded(study.numeric, actual)
    sd = setting_sd(study)
    held = conformance_over(problem, draws, levels, grid, sd, choice.seed)
    return replace(view, conformance=held)


def _spans(problem: Problem, x: FloatArray) -> FloatArray:
    """Give the drawn ends of every factor, coded, a little beyond the region: (2, k)."""
    k = len(x)
    ends = np.stack([-problem.region.bounds[:k], problem.region.bounds[k : 2 * k]])
    beyond = _BEYOND * (ends[1] - ends[0])
    return np.stack([np.minimum(ends[0] - beyond, x), np.maximum(ends[1] + beyond, x)])


def _most_moving(rows: Arena, x: FloatArray, span: FloatArray) -> list[int]:
    moved = []
    for j in range(len(x)):
        line = np.tile(x, (_N_GRID, 1))
        line[:, j] = np.linspace(span[0, j], span[1, j], _N_GRID)
        moved.append(float(np.ptp(_merit(rows, line))))
    return [int(j) for j in np.argsort(-np.array(moved), kind="stable")]


def _merit(rows: Arena, x: FloatArray) -> FloatArray:
    margins = [row.value(x) for row in rows.hard if row.limit is not None]
    if margins:
        smallest: FloatArray = np.min(margins, axis=0)
        return smallest
    return overall(rows.goals, features(x) @ rows.goal_means.T)


def _map(
    problem: Problem, rows: Arena, x: FloatArray, a: int, b: int | None, span: FloatArray
) -> FactorMap:
    study = problem.study
    across = np.linspace(span[0, a], span[1, a], _N_GRID)
    up = x[:1] if b is None else np.linspace(span[0, b], span[1, b], _N_GRID)
    grid = np.tile(x, (len(up), len(across), 1))
    grid[:, :, a] = across
    if b is not None:
        grid[:, :, b] = up[:, None]
    actual, terms = to_actual(study.numeric, grid), features(grid)
    y = terms @ rows.goal_means.T if rows.goals else None
    margins = []
    for limit in rows.limits:
        side = problem.sides[limit]
        worst = np.min([row.value(grid) for row in rows.hard if row.limit == limit], axis=0)
        margins.append(LimitMap(side.response, side.side, side.value, worst))
    return FactorMap(
        across=study.numeric[a].name,
        up="" if b is None else study.numeric[b].name,
        across_actual=actual[0, :, a],
        up_actual=np.zeros(1) if b is None else actual[:, 0, b],
        desirability=None if y is None else overall(rows.goals, y),
        margins=tuple(margins),
        depth=depth(problem.explored, grid),
        conformance=None,
    )
