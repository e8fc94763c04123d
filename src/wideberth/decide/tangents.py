"""Quadratics that lie above the problem: what a proof of the optimum is made of.

Along the spanned directions z, log D is at most any mixture of its goals' sides, each side's
logarithm at most its tangent, and a limit's row at most its quadratic less the tangent of the
guard, because a guard's factor is convex in the model row. Each of these is a quadratic in z,
whose largest value over a box is bounded in one line.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.arena import Arena, Cuts
from wideberth.decide.desirability import shares_of_priority, sides
from wideberth.decide.guards import SmoothGuard
from wideberth.quadratic.box import lowest_on_boxes
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features, n_terms, shift_map
from wideberth.study.records import FloatArray, IntArray

_GRID = 400
_FLAT = -1e-9


@dataclass(frozen=True, slots=True, eq=False)
class Row:
    """One hard row at one place of the room, in z: ``curve - weight * K(h)`` must not be negative.

    ``convex`` tells whether the tangent of K bounds it from below; else ``least`` does.
    ``of_limit`` tells a limit from the ellipsoid.
    """

    curve: FloatArray
    weight: float
    guard: SmoothGuard | None
    covariance: FloatArray
    convex: bool
    least: float
    of_limit: bool


@dataclass(frozen=True, slots=True, eq=False)
class Relaxed:
    """An arena with finitely many places of the room, in the r spanned directions.

    Attributes
    ----------
    side_curves : ndarray, shape (S, p)
        Uncapped desirability of every side of every goal at exponent 1.
    side_goal : ndarray of int, shape (S,)
    side_power : ndarray, shape (S,)
        Exponent times the goal's share of the priorities: log D sums these times log u.
    rows : tuple of Row
    planes : ndarray, shape (L, r); bounds : ndarray, shape (L,)
    """

    side_curves: FloatArray
    side_goal: IntArray
    side_power: FloatArray
    rows: tuple[Row, ...]
    planes: FloatArray
    bounds: FloatArray

    @property
    def n_goals(self) -> int:
        """Number of goals."""
        return int(self.side_goal.max(initial=-1)) + 1


def relax(arena: Arena, cuts: Cuts) -> Relaxed:
    """Write an arena's goals and rows along its spanned directions."""
    region, k = arena.region, arena.n_factors
    identity = Stack.from_coefficients(np.eye(n_terms(k)), k)
    into_z = identity.restrict(region.origin, region.basis).coefficients()
    curves, goals, powers = [], [], []
    for i, (goal, share) in enumerate(
        zip(arena.goals, shares_of_priority(arena.goals), strict=True)
    ):
        for side in sides(goal):
            curve = side.slope * arena.goal_means[i]
            curve[0] += side.offset
            curves.append(curve @ into_z)
            goals.append(i)
            powers.append(share * side.exponent)
    rows = []
    for row, shifts in zip(arena.hard, cuts, strict=True):
        convex, least = (True, 0.0) if row.guard is None else _shape_of(row.guard)
        for shift in (np.zeros(k), *shifts):
            mapped = shift_map(shift) @ into_z
            rows.append(
                Row(
                    row.curve @ mapped,
                    float(row.weight),
                    row.guard,
                    mapped.T @ row.covariance @ mapped,
                    convex,
                    least,
                    row.limit is not None,
                )
            )
    return Relaxed(
        side_curves=np.array(curves).reshape(len(curves), into_z.shape[1]),
        side_goal=np.array(goals, dtype=np.int64),
        side_power=np.array(powers),
        rows=tuple(rows),
        planes=region.planes @ region.basis,
        bounds=region.bounds - region.planes @ region.origin,
    )


def _shape_of(guard: SmoothGuard) -> tuple[bool, float]:
    """Tell whether K rises and is convex in sqrt(h), and its least value."""
    root = np.linspace(guard.low, guard.high, _GRID)
    value = guard.value(root * root)
    rising = np.diff(value)
    scale = float(np.abs(value).max()) or 1.0
    convex = bool((rising >= _FLAT * scale).all() and (np.diff(rising) >= _FLAT * scale).all())
    return convex, float(min(value.min(), guard.guard.factor(np.array(1e-9))))


def row_value(row: Row, z: FloatArray) -> FloatArray:
    """Evaluate a row at z (n, r): shape (n,)."""
    terms = features(z)
    value: FloatArray = terms @ row.curve
    if row.guard is None:
        return value
    leverage = np.einsum("np,np->n", terms @ row.covariance, terms)
    return value - row.weight * row.guard.value(leverage)


def row_above(row: Row, z: FloatArray) -> FloatArray:
    """Give for each place z (n, r) coefficients of a quadratic above the row: (n, p)."""
    above = np.tile(row.curve, (len(z), 1))
    if row.guard is None:
        return above
    if not row.convex:
        above[:, 0] -= row.weight * row.least
        return above
    terms = features(z)
    pulled = terms @ row.covariance
    leverage = np.einsum("np,np->n", pulled, terms)
    value, rate, _ = row.guard.derivatives(leverage)
    above -= row.weight * 2 * rate[:, None] * pulled
    above[:, 0] -= row.weight * (value - 2 * rate * leverage)
    return above


def highest_on_boxes(
    coefficients: FloatArray, middles: FloatArray, halves: FloatArray
) -> FloatArray:
    """Bound quadratics (n, p) or (p,) from above over boxes (n, r): shape (n,)."""
    stack = Stack.from_coefficients(coefficients, middles.shape[1])
    quad = np.broadcast_to(stack.quad, (len(middles), *stack.quad.shape[-2:]))
    value: FloatArray = stack.value(middles) - lowest_on_boxes(
        -stack.gradient(middles), -quad, halves
    )
    return value
