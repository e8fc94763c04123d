"""Quadratics made of many tangents: above log D at an optimum, or a proof that limits contradict.

A `Mixture` holds the multipliers of an optimum: its quadratic touches log D there and lies above
it wherever every row holds (weak duality, whatever the multipliers). A `Contradiction` holds those
of the worst limits where no setting holds them all: its quadratic must not be negative wherever
every row holds (a theorem of alternatives).

References
----------
Farkas (1902); Horst and Tuy (1996), Global Optimization; multipliers by nonnegative least squares,
Lawson and Hanson (1974) (all from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import nnls

from wideberth.decide.boxes import ROUNDING
from wideberth.decide.multipliers import SMALL
from wideberth.decide.search import HOLDS
from wideberth.decide.tangents import Relaxed, highest_on_boxes, row_above, row_value
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features
from wideberth.study.records import BoolArray, FloatArray

_ACTIVE = 1e-5
_UNREACHED = 1e-6
_HEAVY = 100.0


def log_d(relaxed: Relaxed, z: FloatArray) -> FloatArray:
    """Give log D at z (n, r): shape (n,)."""
    u = features(z) @ relaxed.side_curves.T
    return sum_of_goals(relaxed, u)


def sum_of_goals(relaxed: Relaxed, u: FloatArray) -> FloatArray:
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


def mixed(relaxed: Relaxed, mixture: Mixture, places: FloatArray) -> FloatArray:
    """Mix the tangents at places (n, r) into quadratics above log D where all rows hold: (n, p)."""
    r = places.shape[1]
    u = np.maximum(features(places) @ relaxed.side_curves.T, SMALL)
    total: FloatArray = (mixture.sides / u) @ relaxed.side_curves
    total[:, 0] += (np.log(u) - 1.0) @ mixture.sides
    for weight, row in zip(mixture.rows, relaxed.rows, strict=True):
        if weight > 0:
            total += weight * row_above(row, places)
    # rows and planes that count as held may lack a hair
    total[:, 0] += mixture.planes @ relaxed.bounds
    total[:, 0] += ROUNDING * (mixture.planes.sum() + mixture.rows.sum())
    total[:, 1 : 1 + r] -= mixture.planes @ relaxed.planes
    return total


@dataclass(frozen=True, slots=True, eq=False)
class Contradiction:
    """Multipliers at z (r,), of rows (R,) and planes (L,), that leave the limits no way up."""

    z: FloatArray
    rows: FloatArray
    planes: FloatArray


def contradiction_at(relaxed: Relaxed, z: FloatArray) -> Contradiction | None:
    """Weigh the worst limits at z so that their mixture is flat there; ``None`` without limits."""
    of_limit = np.array([row.of_limit for row in relaxed.rows], dtype=np.bool_)
    if not of_limit.any():
        return None
    r, place = len(z), z[None, :]
    values = np.array([row_value(row, place)[0] for row in relaxed.rows])
    level = np.where(of_limit, values[of_limit].min(), 0.0)
    rows = np.flatnonzero(values <= level + _ACTIVE)
    planes = np.flatnonzero(relaxed.bounds - relaxed.planes @ z <= _ACTIVE)
    above = np.array([row_above(relaxed.rows[i], place)[0] for i in rows])
    slopes = np.concatenate(
        [Stack.from_coefficients(above, r).gradient(z), -relaxed.planes[planes]]
    )
    total = np.zeros(len(slopes))
    total[: len(rows)] = np.where(of_limit[rows], _HEAVY, 0.0)
    weights, _ = nnls(
        np.concatenate([slopes.T, total[None, :]]), np.concatenate([np.zeros(r), [_HEAVY]])
    )
    of_rows, of_planes = np.zeros(len(values)), np.zeros(len(relaxed.bounds))
    of_rows[rows] = weights[: len(rows)]
    of_planes[planes] = weights[len(rows) :]
    return Contradiction(z, of_rows, of_planes)


def contradicted(relaxed: Relaxed, contradiction: Contradiction, places: FloatArray) -> FloatArray:
    """Mix the tangents at places (n, r) into quadratics that are >= 0 where rows hold: (n, p)."""
    r = places.shape[1]
    total = np.zeros((len(places), relaxed.side_curves.shape[1]))
    for weight, row in zip(contradiction.rows, relaxed.rows, strict=True):
        if weight > 0:
            total += weight * row_above(row, places)
    # rows and planes that count as held may lack a hair
    total[:, 0] += contradiction.planes @ relaxed.bounds
    total[:, 0] += (ROUNDING - HOLDS) * (contradiction.planes.sum() + contradiction.rows.sum())
    total[:, 1 : 1 + r] -= contradiction.planes @ relaxed.planes
    return total


def contradicts(
    relaxed: Relaxed,
    found: tuple[Contradiction, ...],
    middles: FloatArray,
    halves: FloatArray,
) -> BoolArray:
    """Tell in which boxes (n, r) the limits surely contradict each other: shape (n,)."""
    result: BoolArray = np.zeros(len(middles), dtype=np.bool_)
    for one in found:
        left = np.flatnonzero(~result)
        if len(left):
            whole = contradicted(relaxed, one, one.z[None, :])[0]
            result[left] = highest_on_boxes(whole, middles[left], halves[left]) < -ROUNDING
    return result
