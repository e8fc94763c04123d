"""The questions that the search is asked, each written as one program.

Limits are tightened by a hair, so that a setting found on a limit still meets it after rounding.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from wideberth.decide.arena import Arena, Cuts, HardRow
from wideberth.decide.desirability import shares_of_priority, sides
from wideberth.decide.guards import SmoothGuard
from wideberth.decide.program import Curves, GuardedPart, Program
from wideberth.decide.records import ResolvedGoal
from wideberth.quadratic.terms import n_terms, shift_map
from wideberth.study.records import FloatArray

_STRICT = 1e-8
_NO_TARGET = -1

Question = Callable[[Arena, Cuts], Program]


@dataclass(frozen=True, slots=True, eq=False)
class _Row:
    curve: FloatArray
    target: int = _NO_TARGET
    power: float = 1.0
    weight: FloatArray | float = 0.0
    guard: SmoothGuard | None = None
    covariance: FloatArray | None = None


def best_desirability(arena: Arena, cuts: Cuts) -> Program:
    """Maximise log D inside all limits; one target a goal, its uncapped desirability."""
    rows: list[_Row] = []
    weights = []
    for i, (goal, share) in enumerate(
        zip(arena.goals, shares_of_priority(arena.goals), strict=True)
    ):
        steepest = max(side.exponent for side in sides(goal))
        weights.append(share * steepest)
        rows += [_Row(curve, i, power) for curve, power in _goal_sides(arena, i)]
        if not _is_point_target(goal):
            rows.append(_Row(_constant(arena, 1.0), i))
    rows += _hard_rows(arena, cuts, lambda _: _NO_TARGET)
    return _program(arena, rows, np.array(weights), logarithmic=True)


def least_violation(arena: Arena, cuts: Cuts) -> Program:
    """Minimise the sum over the limits of how far each is broken; targets are minus that."""
    order = {limit: i for i, limit in enumerate(arena.limits)}
    rows = [_Row(_constant(arena, 0.0), i) for i in order.values()]
    rows += _hard_rows(
        arena, cuts, lambda row: _NO_TARGET if row.limit is None else order[row.limit]
    )
    return _program(arena, rows, np.ones(len(order)))


def largest_margin(arena: Arena, cuts: Cuts, goal_floor: FloatArray | None = None) -> Program:
    """Maximise the smallest margin; with a floor (n_goals, ...), keep every target above it."""
    rows = _hard_rows(arena, cuts, lambda row: _NO_TARGET if row.limit is None else 0)
    rows += _floor_rows(arena, goal_floor)
    return _program(arena, rows, np.ones(1))


def least_relaxation(limit: int) -> Question:
    """Maximise the margin of one limit side while all the others hold."""

    def question(arena: Arena, cuts: Cuts) -> Program:
        rows = _hard_rows(arena, cuts, lambda row: 0 if row.limit == limit else _NO_TARGET)
        return _program(arena, rows, np.ones(1))

    return question


def largest_uncapped(arena: Arena, cuts: Cuts, goal_floor: FloatArray | None = None) -> Program:
    """Maximise the smallest uncapped desirability inside all limits, perhaps above a floor."""
    rows = [_Row(curve, 0) for i in range(len(arena.goals)) for curve, _ in _goal_sides(arena, i)]
    rows += _floor_rows(arena, goal_floor)
    rows += _hard_rows(arena, cuts, lambda _: _NO_TARGET)
    return _program(arena, rows, np.ones(1))


def largest_value(curve: FloatArray) -> Question:
    """Maximise a quadratic, (p,) or one a start (N, p), in the region, limits disregarded."""

    def question(arena: Arena, cuts: Cuts) -> Program:
        ellipsoid = _hard_rows(arena, cuts, lambda _: _NO_TARGET, only_region=True)
        return _program(arena, [_Row(curve, 0), *ellipsoid], np.ones(1))

    return question


def largest_inside(curve: FloatArray, goal_floor: FloatArray) -> Question:
    """Maximise a quadratic (p,) inside all limits, every goal's target above a floor (n_goals,)."""

    def question(arena: Arena, cuts: Cuts) -> Program:
        rows = [_Row(curve, 0), *_floor_rows(arena, goal_floor)]
        return _program(arena, [*rows, *_hard_rows(arena, cuts, lambda _: _NO_TARGET)], np.ones(1))

    return question


def _goal_sides(arena: Arena, goal: int) -> list[tuple[FloatArray, float]]:
    """Give each side's uncapped desirability as coefficients, with the power of its target."""
    parts = sides(arena.goals[goal])
    steepest = max(side.exponent for side in parts)
    result = []
    for side in parts:
        curve = side.slope * arena.goal_means[goal]
        curve[..., 0] += side.offset
        result.append((curve, steepest / side.exponent))
    return result


def _floor_rows(arena: Arena, goal_floor: FloatArray | None) -> list[_Row]:
    if goal_floor is None:
        return []
    return [
        _Row(curve - _constant(arena, goal_floor[i] ** power))
        for i in range(len(arena.goals))
        for curve, power in _goal_sides(arena, i)
    ]


def _is_point_target(goal: ResolvedGoal) -> bool:
    # the two sides of a point target already meet at desirability 1; a cap there is degenerate
    return goal.want == "near" and goal.ideal[0] == goal.ideal[1]


def _constant(arena: Arena, value: FloatArray | float) -> FloatArray:
    curve = np.zeros((*np.shape(value), n_terms(arena.n_factors)))
    curve[..., 0] = value
    return curve


def _hard_rows(
    arena: Arena, cuts: Cuts, target: Callable[[HardRow], int], *, only_region: bool = False
) -> list[_Row]:
    rows = []
    for row, shifts in zip(arena.hard, cuts, strict=True):
        if only_region and row.limit is not None:
            continue
        for shift in (np.zeros(arena.n_factors), *shifts):
            mapped = shift_map(shift)
            curve = row.curve @ mapped - _constant(arena, _STRICT)
            covariance = mapped.T @ row.covariance @ mapped
            rows.append(_Row(curve, target(row), 1.0, row.weight, row.guard, covariance))
    return rows


def _program(
    arena: Arena, rows: list[_Row], weights: FloatArray, *, logarithmic: bool = False
) -> Program:
    region = arena.region
    # a plane along which nothing can move bounds nothing and would have no interior
    moves = np.abs(region.planes @ region.basis).max(axis=1, initial=0.0) > 1e-9
    n_draws = max(np.atleast_2d(row.curve).shape[0] for row in rows)
    shape = (n_draws, n_terms(arena.n_factors))
    return Program(
        weights=weights,
        logarithmic=np.full(len(weights), logarithmic),
        curves=Curves.from_coefficients(
            np.stack([np.broadcast_to(row.curve, shape) for row in rows]), arena.n_factors
        ),
        target=np.array([row.target for row in rows], dtype=np.int64),
        power=np.array([row.power for row in rows]),
        guards=tuple(
            GuardedPart(i, np.atleast_1d(row.weight), row.guard, row.covariance)
            for i, row in enumerate(rows)
            if row.guard is not None and row.covariance is not None
        ),
        planes=region.planes[moves],
        bounds=region.bounds[moves] - 1e-10,
    )
