"""Proof of the optimum: an upper bound of D over everything allowed, by branch and bound on boxes.

At each optimum that the search found, the multipliers of the active rows make one quadratic that
lies above log D wherever every row holds (weak duality, whatever the multipliers): it discards
most boxes at once. The others are bounded by the range of each response, by each row, and by
tangents at their own middle, and are halved until they are bounded or the budget of boxes is
spent. Bounds carry a margin for rounding.

References
----------
Lagrangian bounds in branch and bound: Horst and Tuy (1996), Global Optimization (from memory);
multipliers by nonnegative least squares, Lawson and Hanson (1974, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import linprog, nnls

from wideberth.decide.arena import Arena, Cuts
from wideberth.decide.search import HOLDS
from wideberth.decide.tangents import (
    Relaxed,
    highest_on_boxes,
    relax,
    row_above,
    row_value,
)
from wideberth.quadratic.box import halved
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features
from wideberth.study.records import BoolArray, FloatArray

GAP = 1e-3
BUDGET = 300_000
_AT_ONCE = 8192
_ROUNDING = 1e-9
_ACTIVE = 1e-5
_SMALL = 0.05
_UNREACHED = 1e-6
_HEAVY = 100.0


@dataclass(frozen=True, slots=True)
class Certificate:
    """What no setting can exceed.

    ``bound`` is an upper bound of D; ``boxes`` how many were looked at; ``closed`` whether every
    box was bounded within the gap asked for.
    """

    bound: float
    boxes: int
    closed: bool


def bound_desirability(
    arena: Arena,
    cuts: Cuts,
    optima: FloatArray,
    best: float,
    *,
    axes: tuple[tuple[int, FloatArray], ...] = (),
    gap: float = GAP,
    budget: int = BUDGET,
) -> Certificate:
    """Bound D over all settings that hold an arena's rows at the places of its cuts.

    Parameters
    ----------
    arena : Arena
        With goals.
    cuts : Cuts
        Places of the room at which rows must hold as well; more would only lower D.
    optima : ndarray, shape (n, k)
        Settings at which tangents are worth taking.
    best : float
        The D already reached anywhere; the proof is against ``best + gap``.
    axes : tuple of (int, ndarray)
        Settable values of stepped factors: then only settings on them count.
    """
    relaxed = relax(arena, cuts)
    region = arena.region
    if not region.basis.shape[1]:
        value = float(np.exp(_log_d(relaxed, np.zeros((1, 0)))[0]))
        return Certificate(value, 1, closed=value <= best + gap)
    middles, halves = _first_box(arena, relaxed)
    found = [mixture_at(relaxed, z) for z in (optima - region.origin) @ region.basis]
    mixtures = [mixture for mixture in found if mixture is not None]
    steps = _steps_in_z(arena, axes)
    level = np.log(best + gap)
    highest, boxes, closed = best, 0, True
    while len(middles):
        boxes += len(middles)
        bounds = np.concatenate(
            [
                _bound(
                    relaxed, mixtures, middles[i : i + _AT_ONCE], halves[i : i + _AT_ONCE], level
                )
                for i in range(0, len(middles), _AT_ONCE)
            ]
        )
        left = bounds > level
        with np.errstate(over="ignore"):
            done = np.exp(bounds[~left])
        highest = max(highest, float(done.max(initial=0.0)))
        if boxes > budget and left.any():
            return Certificate(min(float(np.exp(bounds.max())), 1.0), boxes, closed=False)
        middles, halves = middles[left], halves[left]
        points = halves.max(axis=1) <= 0.0
        if points.any():
            # single settable settings that the places of the cuts do not exclude stay open
            closed = False
            highest = max(highest, float(np.exp(bounds[left][points].max())))
        middles, halves = halved(middles[~points], halves[~points])
        if steps:
            middles, halves = _on_values(middles, halves, steps)
    return Certificate(min(highest, 1.0), boxes, closed)


def _first_box(arena: Arena, relaxed: Relaxed) -> tuple[FloatArray, FloatArray]:
    """Enclose the region in z: by its planes, and by its ellipsoid where it has one."""
    region, r = arena.region, arena.region.basis.shape[1]
    ends = np.empty((2, r))
    for j in range(r):
        for side, sign in enumerate((1.0, -1.0)):
            goal = np.zeros(r)
            goal[j] = sign
            found = linprog(
                goal, A_ub=relaxed.planes, b_ub=relaxed.bounds, bounds=[(None, None)] * r
            )
            ends[side, j] = sign * found.fun if found.fun is not None else -sign * np.inf
    if region.has_ellipsoid:
        inner = region.basis.T @ region.shape @ region.basis
        centre = (region.centre - region.origin) @ region.basis
        reach = np.sqrt(np.diag(np.linalg.inv(inner)))
        ends = np.stack([np.maximum(ends[0], centre - reach), np.minimum(ends[1], centre + reach)])
    ends += np.array([[-1.0], [1.0]]) * _ROUNDING
    return (ends.sum(axis=0) / 2)[None, :], ((ends[1] - ends[0]) / 2)[None, :]


def _log_d(relaxed: Relaxed, z: FloatArray) -> FloatArray:
    """Give log D at z (n, r): shape (n,)."""
    u = features(z) @ relaxed.side_curves.T
    return _sum_of_goals(relaxed, u)


def _sum_of_goals(relaxed: Relaxed, u: FloatArray) -> FloatArray:
    """Turn (bounds of) uncapped desirabilities (n, S) into (bounds of) log D: shape (n,)."""
    with np.errstate(divide="ignore"):
        parts = relaxed.side_power * np.log(np.clip(u, 0.0, 1.0))
    total = np.zeros(len(u))
    for i in range(relaxed.n_goals):
        total += parts[:, relaxed.side_goal == i].min(axis=1)
    return total


@dataclass(frozen=True, slots=True, eq=False)
class Mixture:
    """Multipliers of an optimum z (r,): of the goals' sides (S,), rows (R,) and planes (L,).

    The sides' are multiplied by their powers already; a goal's cap takes what they lack.
    """

    z: FloatArray
    sides: FloatArray
    rows: FloatArray
    planes: FloatArray


def mixture_at(relaxed: Relaxed, z: FloatArray) -> Mixture | None:
    """Find multipliers that make a mixture of tangents flat at z; ``None`` where D is 0."""
    r, place = len(z), z[None, :]
    u = (features(place) @ relaxed.side_curves.T)[0]
    if (u <= _UNREACHED).any():
        return None
    log_u = np.log(np.minimum(u, 1.0)) * relaxed.side_power
    least = np.array([log_u[relaxed.side_goal == i].min() for i in range(relaxed.n_goals)])
    # a side beyond its cap is not active: the cap is
    active = (log_u <= least[relaxed.side_goal] + _ACTIVE) & (u <= 1.0 + _ACTIVE)
    sides = np.flatnonzero(active)
    capped = np.flatnonzero(least >= -_ACTIVE)
    rows = [i for i, row in enumerate(relaxed.rows) if row_value(row, place)[0] <= _ACTIVE]
    planes = np.flatnonzero(relaxed.bounds - relaxed.planes @ z <= _ACTIVE)
    side_slopes = Stack.from_coefficients(relaxed.side_curves[sides], r).gradient(z)
    side_slopes *= (relaxed.side_power[sides] / u[sides])[:, None]
    row_slopes = [
        Stack.from_coefficients(row_above(relaxed.rows[i], place)[0], r).gradient(z) for i in rows
    ]
    slopes = np.concatenate(
        [
            side_slopes,
            np.zeros((len(capped), r)),
            np.array(row_slopes).reshape(len(rows), r),
            -relaxed.planes[planes],
        ]
    )
    goal = np.concatenate([relaxed.side_goal[sides], capped])
    sums = np.zeros((relaxed.n_goals, len(slopes)))
    sums[goal, np.arange(len(goal))] = _HEAVY
    wanted = np.concatenate([np.zeros(r), np.full(relaxed.n_goals, _HEAVY)])
    weights, _ = nnls(np.concatenate([slopes.T, sums]), wanted)
    totals = np.bincount(goal, weights[: len(goal)], minlength=relaxed.n_goals)
    if (totals <= 0).any():
        return None
    own = np.zeros(len(relaxed.side_curves))
    own[sides] = weights[: len(sides)] / totals[relaxed.side_goal[sides]]
    of_rows, of_planes = np.zeros(len(relaxed.rows)), np.zeros(len(relaxed.bounds))
    of_rows[rows] = weights[len(goal) : len(goal) + len(rows)]
    of_planes[planes] = weights[len(goal) + len(rows) :]
    return Mixture(z, own * relaxed.side_power, of_rows, of_planes)


def _above(relaxed: Relaxed, mixture: Mixture, places: FloatArray) -> FloatArray:
    """Mix the tangents at places (n, r) into quadratics above log D where all rows hold: (n, p)."""
    r = places.shape[1]
    u = np.maximum(features(places) @ relaxed.side_curves.T, _SMALL)
    total: FloatArray = (mixture.sides / u) @ relaxed.side_curves
    total[:, 0] += (np.log(u) - 1.0) @ mixture.sides
    for weight, row in zip(mixture.rows, relaxed.rows, strict=True):
        if weight > 0:
            total += weight * row_above(row, places)
    # rows and planes that count as held may lack a hair
    total[:, 0] += mixture.planes @ relaxed.bounds
    total[:, 0] += _ROUNDING * (mixture.planes.sum() + mixture.rows.sum())
    total[:, 1 : 1 + r] -= mixture.planes @ relaxed.planes
    return total


def _bound(
    relaxed: Relaxed,
    mixtures: list[Mixture],
    middles: FloatArray,
    halves: FloatArray,
    level: float,
) -> FloatArray:
    """Bound log D over boxes (n, r), minus infinity where no setting holds every row: (n,)."""
    bounds = np.full(len(middles), np.inf)
    nearest = np.einsum("lr,nr->nl", relaxed.planes, middles)
    nearest -= np.einsum("lr,nr->nl", np.abs(relaxed.planes), halves)
    bounds[(nearest > relaxed.bounds + _ROUNDING).any(axis=1)] = -np.inf
    for mixture in mixtures:
        left = np.flatnonzero(bounds > level)
        if len(left):
            whole = _above(relaxed, mixture, mixture.z[None, :])[0]
            height = highest_on_boxes(whole, middles[left], halves[left])
            bounds[left] = np.minimum(bounds[left], height + _ROUNDING)
    for row in relaxed.rows:
        left = np.flatnonzero(bounds > level)
        if len(left):
            height = highest_on_boxes(row_above(row, middles[left]), middles[left], halves[left])
            bounds[left[height < HOLDS - _ROUNDING]] = -np.inf
    left = np.flatnonzero(bounds > level)
    if len(left):
        ranges = np.stack(
            [highest_on_boxes(c, middles[left], halves[left]) for c in relaxed.side_curves], axis=1
        )
        total = _sum_of_goals(relaxed, ranges + _ROUNDING)
        bounds[left] = np.minimum(bounds[left], total + _ROUNDING)
    left = np.flatnonzero(bounds > level)
    if len(left):
        own = _own_tangents(relaxed, middles[left])
        height = highest_on_boxes(own, middles[left], halves[left])
        bounds[left] = np.minimum(bounds[left], height + _ROUNDING)
    for mixture in mixtures:
        left = np.flatnonzero(bounds > level)
        if len(left):
            own = _above(relaxed, mixture, middles[left])
            height = highest_on_boxes(own, middles[left], halves[left])
            bounds[left] = np.minimum(bounds[left], height + _ROUNDING)
    return bounds


def _own_tangents(relaxed: Relaxed, z: FloatArray) -> FloatArray:
    """Add up for each place z (n, r) the tangents of each goal's lowest side there: (n, p)."""
    u = np.maximum(features(z) @ relaxed.side_curves.T, _SMALL)
    log_u = relaxed.side_power * np.log(u)
    total = np.zeros((len(z), relaxed.side_curves.shape[1]))
    for i in range(relaxed.n_goals):
        own = np.flatnonzero(relaxed.side_goal == i)
        lowest = own[log_u[:, own].argmin(axis=1)]
        here = u[np.arange(len(z)), lowest]
        # above its cap a goal adds nothing
        weight = np.where(here < 1.0, relaxed.side_power[lowest] / here, 0.0)
        total += weight[:, None] * relaxed.side_curves[lowest]
        total[:, 0] += weight * here * (np.log(np.minimum(here, 1.0)) - 1.0)
    return total


def _steps_in_z(
    arena: Arena, axes: tuple[tuple[int, FloatArray], ...]
) -> tuple[tuple[int, FloatArray], ...]:
    """Find the directions of z that are stepped factors themselves; others are left free."""
    region = arena.region
    steps = []
    for factor, values in axes:
        column = np.flatnonzero(np.abs(region.basis[factor]) > 1.0 - 1e-12)
        if len(column) and np.abs(region.basis[:, column[0]]).sum() < 1.0 + 1e-12:
            z = (values - region.origin[factor]) * region.basis[factor, column[0]]
            steps.append((int(column[0]), np.sort(z)))
    return tuple(steps)


def _on_values(
    middles: FloatArray, halves: FloatArray, steps: tuple[tuple[int, FloatArray], ...]
) -> tuple[FloatArray, FloatArray]:
    """Shrink boxes to the settable values inside them; boxes without any are dropped."""
    low, high = middles - halves, middles + halves
    some: BoolArray = np.ones(len(middles), dtype=np.bool_)
    for j, values in steps:
        first = np.searchsorted(values, low[:, j] - _ROUNDING)
        last = np.searchsorted(values, high[:, j] + _ROUNDING, side="right") - 1
        some &= first <= last
        low[:, j] = values[np.minimum(first, len(values) - 1)]
        high[:, j] = values[np.maximum(last, 0)]
    low, high = low[some], high[some]
    return (low + high) / 2, (high - low) / 2
