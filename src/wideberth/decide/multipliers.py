"""The best multipliers of one box: rows and sides mixed so that the bound over the box is least.

Any mixture of tangents with nonnegative multipliers lies above log D where the rows hold. To first
order its largest value over a box is ``v + sum(half * |g|)``, v and g its value and slope at the
middle, and along one multiplier that is convex and piecewise linear: its least value is found
exactly among the places where a slope changes sign. One multiplier after the other is settled so,
all boxes at once. Where rows contradict each other inside a box the bound falls without end, which
is how a box without any setting shows itself.

References
----------
Lagrangian duals by coordinate descent: Horst and Tuy (1996), Global Optimization (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.boxes import ROUNDING
from wideberth.decide.tangents import Relaxed, row_above
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features
from wideberth.study.records import FloatArray

SMALL = 0.05
"""Uncapped desirabilities below this take the tangent here: still above, and not steeper."""
_PASSES = 2
_DEEP = 1.0


@dataclass(frozen=True, slots=True, eq=False)
class _Move:
    """A direction for one multiplier: coefficients (n, p) to add, at most ``most`` times."""

    coefficients: FloatArray
    most: float


def least_mixture(
    relaxed: Relaxed, middles: FloatArray, halves: FloatArray, level: float, *, goals: bool = True
) -> FloatArray:
    """Mix tangents at the middles of boxes (n, r) into quadratics above log D: shape (n, p).

    ``level`` is what the bounds are wanted below. Without goals the quadratics are only >= 0
    wherever every row holds.
    """
    total, moves = _at_middles(relaxed, middles, relaxed.n_goals if goals else 0)
    if not moves:
        return total
    r = middles.shape[1]
    value, slope = _seen_from(total, middles, r)
    seen = [_seen_from(move.coefficients, middles, r) for move in moves]
    taken = np.zeros((len(moves), len(middles)))
    for _ in range(_PASSES):
        for i, (move, (rise, turn)) in enumerate(zip(moves, seen, strict=True)):
            start = value - taken[i] * rise, slope - taken[i][:, None] * turn
            taken_now = _least_along(*start, rise, turn, halves, move.most, level)
            value = start[0] + taken_now * rise
            slope = start[1] + taken_now[:, None] * turn
            taken[i] = taken_now
    for amount, move in zip(taken, moves, strict=True):
        total = total + amount[:, None] * move.coefficients
    # rows that count as held may lack a hair
    total[:, 0] += 2 * ROUNDING * taken.sum(axis=0)
    return total


def _at_middles(
    relaxed: Relaxed, middles: FloatArray, n_goals: int
) -> tuple[FloatArray, list[_Move]]:
    """Start from each goal's lowest piece at the middle; moves mix in other pieces and rows."""
    n = len(middles)
    total = np.zeros((n, relaxed.side_curves.shape[1]))
    u = np.maximum(features(middles) @ relaxed.side_curves.T, SMALL)
    heights = relaxed.side_power * np.log(u)
    moves = []
    for goal in range(n_goals):
        own = np.flatnonzero(relaxed.side_goal == goal)
        pieces = np.zeros((len(own) + 1, n, total.shape[1]))
        for place, side in enumerate(own):
            weight = relaxed.side_power[side] / u[:, side]
            pieces[place] = weight[:, None] * relaxed.side_curves[side]
            pieces[place, :, 0] += heights[:, side] - relaxed.side_power[side]
        # the last piece is the cap: log D gains nothing beyond the ideal
        lowest = np.column_stack([heights[:, own], np.zeros(n)]).argmin(axis=1)
        chosen = pieces[lowest, np.arange(n)]
        total += chosen
        # to a goal with two sides and a cap the other two pieces are mixed in one after the other
        moves += [_Move(piece - chosen, 1.0 / len(own)) for piece in pieces]
    return total, [*moves, *(_Move(row_above(row, middles), np.inf) for row in relaxed.rows)]


def _seen_from(
    coefficients: FloatArray, middles: FloatArray, r: int
) -> tuple[FloatArray, FloatArray]:
    """Give value (n,) and slope (n, r) of quadratics (n, p) at the middles."""
    stack = Stack.from_coefficients(coefficients, r)
    return stack.value(middles), stack.gradient(middles)


def _least_along(
    value: FloatArray,
    slope: FloatArray,
    rise: FloatArray,
    turn: FloatArray,
    halves: FloatArray,
    most: float,
    level: float,
) -> FloatArray:
    """Find t in [0, most] with least ``value + t rise + sum(halves |slope + t turn|)``: (n,)."""
    with np.errstate(divide="ignore", invalid="ignore"):
        bends = -slope / turn
    bends = np.clip(np.where(np.isfinite(bends), bends, 0.0), 0.0, most)
    tried = np.column_stack([np.zeros(len(value)), bends])
    if np.isfinite(most):
        tried = np.column_stack([tried, np.full(len(value), most)])
    else:
        # beyond the last bend the bound may fall without end: far enough is enough
        last = bends.max(axis=1)
        end = rise + (halves * np.abs(turn)).sum(axis=1)
        there = value + last * rise
        there += (halves * np.abs(slope + last[:, None] * turn)).sum(axis=1)
        falls = end < 0.0
        further = np.where(falls, np.maximum(there - level, 0.0) + _DEEP, 0.0)
        step = further / np.where(falls, -end, 1.0)
        tried = np.column_stack([tried, last + step])
    height = value[:, None] + tried * rise[:, None]
    reach = np.abs(slope[:, None, :] + tried[:, :, None] * turn[:, None, :])
    height += np.einsum("nj,ntj->nt", halves, reach)
    best: FloatArray = tried[np.arange(len(value)), height.argmin(axis=1)]
    return best
