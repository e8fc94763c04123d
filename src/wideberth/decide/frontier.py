"""The frontier: settings at which no goal can be met better without another getting worse.

For an even lattice of weights the largest smallest weighted gain over the goals is sought, all
weights at once by the search for many draws, inside all guarded limits and the whole room; what is
dominated is dropped and an even cover is kept.

References
----------
Weighted Chebyshev scalarisation: Steuer and Choo (1983), Mathematical Programming 26, 326-344 (from
memory).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np

from wideberth.decide.aims import LEAST_POOR
from wideberth.decide.arena import Arena, Cuts, no_cuts
from wideberth.decide.desirability import sides, uncapped
from wideberth.decide.judge import overall_desirability, own_setting, read_setting
from wideberth.decide.many import Pool, refined
from wideberth.decide.problem import Problem, arena, mode_of
from wideberth.decide.recommend import solve
from wideberth.decide.records import Choice, ResolvedGoal, Status
from wideberth.decide.region import inside_planes
from wideberth.decide.room import worst_of_all
from wideberth.decide.search import HOLDS, find_safest
from wideberth.errors import refusal
from wideberth.fit.records import Models, surface
from wideberth.progress import Progress, silent
from wideberth.quadratic.terms import features
from wideberth.study.records import BoolArray, FloatArray, Setting

N_POINTS = 24
_WEIGHTS = 150
_ROUNDS = 12
_LEAST_WEIGHT = 0.02
_SAME = 1e-6
_KNOWN = 1e-3


@dataclass(frozen=True, slots=True)
class FrontierPoint:
    """One setting of the frontier, own units, before settable steps.

    ``means`` are of every response; ``desirability`` is D.
    """

    setting: Setting
    means: Mapping[str, float]
    desirability: float


@dataclass(frozen=True, slots=True)
class Frontier:
    """The trade-off between the responses with a goal.

    Attributes
    ----------
    status : Status
        Of the study's answer; without a setting that holds every limit there is no frontier.
    goals : tuple of ResolvedGoal
    points : tuple of FrontierPoint
        Best overall desirability first.
    setpoint : FrontierPoint or None
        The recommended setting beside them.
    today : FrontierPoint or None
    reason : str
        Why there are no points, else empty.
    """

    status: Status
    seed: int
    goals: tuple[ResolvedGoal, ...]
    points: tuple[FrontierPoint, ...]
    setpoint: FrontierPoint | None
    today: FrontierPoint | None
    reason: str


def frontier(
    models: Models,
    *,
    seed: int | None = None,
    n_points: int = N_POINTS,
    progress: Progress = silent,
) -> Frontier:
    """Cover the trade-off between the responses with a goal, inside all limits.

    Raises
    ------
    RefusedError
        As `recommend`, and when fewer than two responses have a goal.
    """
    if sum(response.goal is not None for response in models.study.responses) < 2:
        raise refusal(
            "fewer than two responses have a goal",
            "study.toml",
            "a trade-off needs two goals; state another or use recommend",
        )
    problem, choice = solve(models, seed=seed, progress=progress)
    return trade_off(problem, choice, n_points=n_points, progress=progress)


def trade_off(
    problem: Problem, choice: Choice, *, n_points: int = N_POINTS, progress: Progress = silent
) -> Frontier:
    """Cover the trade-off around a choice that `solve` gave with its problem."""
    mode = mode_of(problem)
    found: list[tuple[tuple[int, ...], FloatArray]] = []
    for done, levels in enumerate(problem.combinations):
        progress("frontier", done / len(problem.combinations))
        found += [(levels, x) for x in _settings(arena(problem, levels, mode))]
    setpoint = None if choice.setpoint is None else _point_at(problem, choice.setpoint)
    today = None
    if all(factor.name in problem.study.today for factor in problem.study.factors):
        today = _point_at(problem, problem.study.today)
    nothing = Frontier(choice.status, choice.seed, problem.goals, (), setpoint, today, "")
    if not found:
        return replace(nothing, reason="no setting holds every limit, so nothing can be traded")
    heights = np.array([_heights(problem, levels, x) for levels, x in found])
    kept = np.flatnonzero(~_dominated(heights))
    kept = kept[_even(heights[kept], n_points)]
    points = [_point(problem, *found[i]) for i in kept]
    points.sort(key=lambda point: -point.desirability)
    return replace(nothing, points=tuple(points))


def _settings(rows: Arena) -> FloatArray:
    """Find for every weight the setting of largest smallest weighted gain: (n, k)."""
    if rows.limits and find_safest(rows).score < HOLDS:
        return np.zeros((0, rows.n_factors))
    pool = Pool.of(_weighted(rows, np.ones((1, len(rows.goals))), np.zeros(len(rows.goals))))
    heights = np.stack([_curve_heights(rows, i, pool.x) for i in range(len(rows.goals))], axis=1)
    low, high = heights.min(axis=0), np.minimum(heights.max(axis=0), 1.0)
    span = np.maximum(high - low, 1e-9)
    weighted = _weighted(rows, lattice(len(rows.goals)) * span, low)
    cuts = no_cuts(weighted)
    starts = pool.starts(weighted, LEAST_POOR)
    for _ in range(_ROUNDS):
        x, score = refined(weighted, LEAST_POOR, starts, cuts)
        x = x[np.isfinite(score)]
        cuts, held = _with_worst(rows, cuts, x)
        if held.all():
            break
    return x[held] if len(x) else x


def lattice(n_goals: int) -> FloatArray:
    """Spread weights evenly over the simplex: shape (n, n_goals), each row summing to about 1."""
    steps = 1
    while _count(n_goals, steps + 1) <= _WEIGHTS:
        steps += 1
    bars = np.array(list(combinations(range(steps + n_goals - 1), n_goals - 1)), dtype=float)
    padded = np.column_stack(
        [np.full(len(bars), -1.0), bars, np.full(len(bars), steps + n_goals - 1)]
    )
    shares: FloatArray = (np.diff(padded, axis=1) - 1) / steps
    return np.maximum(shares, _LEAST_WEIGHT)


def _count(n_goals: int, steps: int) -> int:
    total = 1
    for i in range(1, n_goals):
        total = total * (steps + i) // i
    return total


def _weighted(rows: Arena, weights: FloatArray, low: FloatArray) -> Arena:
    """Write one draw a weight: each goal's side, less its lowest height, over its weight."""
    plain, curves = [], []
    for i, goal in enumerate(rows.goals):
        for side in sides(goal):
            curve = side.slope * rows.goal_means[i]
            curve[0] += side.offset - low[i]
            curves.append(curve / weights[:, i, None])
            plain.append(replace(goal, want="more", poor=(0.0,), ideal=(1.0,), exponent=(1.0, 1.0)))
    return replace(rows, goals=tuple(plain), goal_means=np.array(curves))


def _curve_heights(rows: Arena, goal: int, x: FloatArray) -> FloatArray:
    return uncapped(rows.goals[goal], features(x) @ rows.goal_means[goal])


def _with_worst(rows: Arena, cuts: Cuts, x: FloatArray) -> tuple[Cuts, BoolArray]:
    """Add the worst places of the room that break a row, and tell which settings hold: (n,)."""
    held = np.zeros(len(x), dtype=np.bool_)
    grown = [list(shifts) for shifts in cuts]
    for n, place in enumerate(x):
        worst, shifts = worst_of_all(rows, place)
        inside = bool(inside_planes(rows.region, place))
        held[n] = inside and float(worst.min(initial=np.inf)) >= HOLDS
        for i, (value, shift) in enumerate(zip(worst, shifts, strict=True)):
            known = any(float(np.abs(shift - old).max()) < _KNOWN for old in grown[i])
            if value < HOLDS and not known and shift.any():
                grown[i].append(shift)
    return tuple(tuple(shifts) for shifts in grown), held


def _heights(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> FloatArray:
    """Give every goal's uncapped desirability at exponent 1, at most 1: (n_goals,)."""
    means = _means(problem, levels, x)
    return np.array(
        [min(float(uncapped(g, np.array(means[g.response]))), 1.0) for g in problem.goals]
    )


def _means(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> dict[str, float]:
    terms = features(x)
    return {
        model.response: float(terms @ surface(model, problem.study, levels=levels).coefficients)
        for model in problem.models.models
    }


def _dominated(heights: FloatArray) -> BoolArray:
    """Tell which rows (n, m) another row beats in one goal and equals in the rest; (n,)."""
    better = (heights[:, None, :] >= heights[None, :, :] - _SAME).all(axis=2)
    strictly = (heights[:, None, :] > heights[None, :, :] + _SAME).any(axis=2)
    return np.asarray((better & strictly).any(axis=0))


def _even(heights: FloatArray, most: int) -> list[int]:
    """Pick rows (n, m) far from each other, those with one goal's best first."""
    scaled = heights / np.maximum(np.ptp(heights, axis=0), 1e-9)
    chosen = list(dict.fromkeys(int(i) for i in scaled.argmax(axis=0)))
    while len(chosen) < min(most, len(heights)):
        away = np.sqrt(((scaled[:, None] - scaled[chosen]) ** 2).sum(axis=2)).min(axis=1)
        farthest = int(away.argmax())
        if away[farthest] < 1e-3:
            break
        chosen.append(farthest)
    return chosen


def _point(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> FrontierPoint:
    return FrontierPoint(
        own_setting(problem.study, levels, x),
        _means(problem, levels, x),
        overall_desirability(problem, levels, x) or 0.0,
    )


def _point_at(problem: Problem, setting: Setting) -> FrontierPoint:
    whole = {factor.name: setting[factor.name] for factor in problem.study.factors}
    return _point(problem, *read_setting(problem.study, whole))
