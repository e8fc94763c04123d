"""From the optimum to settings that can be dialled in: whole multiples of the settable steps.

Neighbours on the grid are searched, never mere rounding: every combination where there are few,
else the steps around the optimum and then around the best of them until nothing improves. Factors
without a step are optimised anew for each combination of steps.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from decimal import ROUND_CEILING, ROUND_FLOOR, Decimal
from itertools import product

import numpy as np

from wideberth.decide.aims import Aim
from wideberth.decide.arena import Arena, Cuts, hard_values
from wideberth.decide.interior import refine
from wideberth.decide.region import Region
from wideberth.decide.search import Found, accept, rank
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import FloatArray, NumericFactor, Setting, Study

_EVERY = 60_000
_MANY_REFINED = 256
_ROUNDS = 200


@dataclass(frozen=True, slots=True, eq=False)
class Grid:
    """Settable coded values of the factors with a step, and the directions left to the others.

    ``axes`` holds for each stepped factor its place and its values in increasing order; ``free``
    (k, r) the directions in which factors without a step may move.
    """

    axes: tuple[tuple[int, FloatArray], ...]
    free: FloatArray


def settable_grid(factors: tuple[NumericFactor, ...], region: Region) -> Grid:
    """List the settable values inside the region's box, for factors that may move at all."""
    k = len(factors)
    moves = np.abs(region.basis).max(axis=1, initial=0.0) > 1e-9
    low, high = -region.bounds[:k], region.bounds[k : 2 * k]
    axes = []
    for j, factor in enumerate(factors):
        if factor.settable_step is not None and moves[j]:
            axes.append((j, _settable_values(factors, j, float(low[j]), float(high[j]))))
    stepped = {j for j, _ in axes}
    aligned = [
        column for column in region.basis.T if not any(abs(column[j]) > 1e-9 for j in stepped)
    ]
    return Grid(tuple(axes), np.array(aligned).reshape(len(aligned), k).T)


def nearest_settable(study: Study, setting: Setting) -> dict[str, float | str]:
    """Round a setting, own units, to the nearest settable steps; other factors stay."""
    nearest = dict(setting)
    for factor in study.numeric:
        if factor.settable_step is not None:
            step = factor.settable_step
            nearest[factor.name] = float(
                round(Decimal(repr(float(setting[factor.name]))) / step) * step
            )
    return nearest


def on_steps(arena: Arena, grid: Grid, aim: Aim, found: Found) -> Found | None:
    """Find the best settable setting for the aim that ``found`` is the free optimum of.

    Returns
    -------
    Found or None
        ``None`` when no settable setting near by holds what the aim requires; ``found`` itself
        when no factor has a step.
    """
    if not grid.axes:
        return found
    pinned = replace(arena, region=replace(arena.region, basis=grid.free))
    if any(not len(values) for _, values in grid.axes):
        return None
    total = int(np.prod([len(values) for _, values in grid.axes]))
    if total <= _EVERY and not grid.free.shape[1]:
        everything = _near_span(arena.region, grid, _combine(grid, found.x, None, total))
        return _best_of(pinned, aim, found.cuts, everything)
    best = None
    for around in (found.x, *found.equals):
        near = _combine(grid, around, around, _room_for(grid))
        tried = _best_of(pinned, aim, found.cuts, _near_span(arena.region, grid, near))
        if tried is not None and (best is None or tried.score > best.score):
            best = tried
    for _ in range(_ROUNDS):
        if best is None:
            return None
        near = _combine(grid, best.x, best.x, _room_for(grid))
        better = _best_of(pinned, aim, best.cuts, _near_span(arena.region, grid, near))
        if better is None or better.score <= best.score:
            return best
        best = better
    return best


def _settable_values(
    factors: tuple[NumericFactor, ...], j: int, low: float, high: float
) -> FloatArray:
    """Give the multiples of the step between two coded ends, coded; exact in decimals."""
    step = factors[j].settable_step or Decimal(1)
    ends = np.zeros((2, len(factors)))
    ends[:, j] = low, high
    first, last = (Decimal(repr(float(v))) for v in to_actual(factors, ends)[:, j])
    # a multiple that the coding moved off its bound by rounding still counts as inside
    slack = step * Decimal("1e-9")
    start = int(((first - slack) / step).to_integral_value(ROUND_CEILING))
    stop = int(((last + slack) / step).to_integral_value(ROUND_FLOOR))
    actual = np.ones((max(stop - start + 1, 0), len(factors)))
    actual[:, j] = [float(m * step) for m in range(start, stop + 1)]
    return to_coded(factors, actual)[:, j]


def _room_for(grid: Grid) -> int:
    return _MANY_REFINED if grid.free.shape[1] else _EVERY


def _combine(grid: Grid, base: FloatArray, around: FloatArray | None, most: int) -> FloatArray:
    """Combine steps into settings (N, k): all of them, or those nearest around a setting."""
    chosen = [values for _, values in grid.axes]
    if around is not None:
        # as many neighbours on each axis as keep the number of combinations within bounds
        reach = max(2, int(most ** (1.0 / len(grid.axes)) + 1e-9))
        chosen = [
            values[np.sort(np.argsort(np.abs(values - around[j]), kind="stable")[: min(reach, 5)])]
            for j, values in grid.axes
        ]
    combinations = np.array(list(product(*chosen)))
    settings = np.tile(base, (len(combinations), 1))
    settings[:, [j for j, _ in grid.axes]] = combinations
    return settings


def _near_span(region: Region, grid: Grid, settings: FloatArray) -> FloatArray:
    """Keep settings that lie within less than half a step of the directions that the runs span."""
    away = settings - region.origin
    off = np.abs(away - away @ region.basis @ region.basis.T)
    reach = np.full(settings.shape[1], 1e-9)
    for j, values in grid.axes:
        reach[j] += 0.499 * float(np.diff(values).max(initial=0.0))
    kept: FloatArray = settings[(off <= reach).all(axis=1)]
    return kept


def _best_of(arena: Arena, aim: Aim, cuts: Cuts, settings: FloatArray) -> Found | None:
    """Take the best setting that stands at its worst places in the room."""
    if not len(settings):
        return None
    for _ in range(_ROUNDS):
        tried = settings
        if arena.region.basis.shape[1]:
            values = hard_values(arena, cuts, settings)
            targets = aim.targets(arena, settings, values)
            ended = refine(aim.program(arena, cuts), settings, targets, arena.region.basis)
            tried = np.concatenate([ended.x, settings])
        ranked, scores = rank(arena, aim, cuts, tried)
        if not len(ranked):
            return None
        found, cuts = accept(arena, aim, cuts, ranked, scores)
        if found is not None:
            return found
    return None
