"""Proving that a hard row holds over a whole box of settings.

A row without a guard is a quadratic, whose lowest value over a box is exact by faces. A guarded
row is bounded from below on ever smaller boxes until each bound meets the level asked for, or a
setting is found that breaks it.

The guard's factor K(h) is taken by its tangent in the leverage h, which bounds it from above where
K is concave in h, as it is for every confidence of 0.9 or more; elsewhere the largest curvature
met on a fine grid is added. The leverage itself is an exact second-order part plus a rest that is
bounded by absolute values.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.arena import HardRow
from wideberth.decide.guards import SmoothGuard
from wideberth.quadratic.box import extreme_over_box, halved, lowest_on_boxes
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features, pairs
from wideberth.study.records import FloatArray

_BUDGET = 400_000
_AT_ONCE = 20_000
_GRID = 400
_PADDING = 1.1


@dataclass(frozen=True, slots=True, eq=False)
class Proof:
    """Whether a row holds over a box.

    ``breaks`` is a setting (k,) that breaks it, ``None`` when none was met; ``proven`` is false
    with ``breaks`` missing when the budget of boxes was spent.
    """

    proven: bool
    breaks: FloatArray | None
    boxes: int


def prove_over_box(row: HardRow, low: FloatArray, high: FloatArray, level: float) -> Proof:
    """Prove that a row is at least ``level`` everywhere between ``low`` and ``high``, (k,) each."""
    if row.guard is None:
        lowest, x = extreme_over_box(
            Stack.from_coefficients(row.curve, len(low)), low, high, largest=False
        )
        return Proof(lowest >= level, None if lowest >= level else x, 1)
    bent = _largest_bend(row.guard)
    middles, halves = ((low + high) / 2)[None, :], ((high - low) / 2)[None, :]
    boxes = 0
    while len(middles):
        boxes += len(middles)
        bound, value = _bounds(row, row.guard, bent, middles, halves)
        place = int(value.argmin())
        if value[place] < level:
            return Proof(False, middles[place], boxes)
        left = bound < level
        if boxes > _BUDGET:
            return Proof(not left.any(), None, boxes)
        middles, halves = halved(middles[left], halves[left])
    return Proof(True, None, boxes)


def _largest_bend(guard: SmoothGuard) -> float:
    """Give the largest second derivative of K in h, 0 where K is concave."""
    root = np.linspace(guard.low, guard.high, _GRID)
    bend = guard.derivatives(root * root)[2]
    return _PADDING * max(0.0, float(bend.max()))


def _bounds(
    row: HardRow, guard: SmoothGuard, bent: float, middles: FloatArray, halves: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Bound the row from below over boxes, and give its value at their middles: (n,) each."""
    parts = [
        _bounds_at_once(row, guard, bent, middles[i : i + _AT_ONCE], halves[i : i + _AT_ONCE])
        for i in range(0, len(middles), _AT_ONCE)
    ]
    return np.concatenate([p[0] for p in parts]), np.concatenate([p[1] for p in parts])


def _bounds_at_once(
    row: HardRow, guard: SmoothGuard, bent: float, middles: FloatArray, halves: FloatArray
) -> tuple[FloatArray, FloatArray]:
    k = middles.shape[1]
    terms = features(middles)
    pulled = terms @ row.covariance
    leverage = np.einsum("np,np->n", pulled, terms)
    factor, rate, _ = guard.derivatives(leverage)
    value = terms @ row.curve - row.weight * factor
    curve, rising = Stack.from_coefficients(row.curve, k), Stack.from_coefficients(2 * pulled, k)
    weight = row.weight * rate
    slope = curve.gradient(middles) - weight[:, None] * rising.gradient(middles)
    bend = curve.quad - weight[:, None, None] * rising.quad
    reach = _feature_reach(middles, halves)
    rest = np.einsum("np,np->n", reach @ np.abs(row.covariance), reach)
    bound = value + lowest_on_boxes(slope, bend, halves) - np.maximum(weight, 0.0) * rest
    if bent > 0.0:
        # how far the leverage can move at all, for the curvature that the tangent leaves out
        moved = 2 * np.einsum("np,np->n", np.abs(pulled), reach) + rest
        bound -= row.weight * bent * moved * moved / 2
    return bound, value


def _feature_reach(middles: FloatArray, halves: FloatArray) -> FloatArray:
    """Bound how far every second-order term moves within the boxes: (n, p)."""
    first, second = (list(index) for index in pairs(middles.shape[1]))
    size = np.abs(middles)
    squares = 2 * size * halves + halves * halves
    products = (
        size[:, first] * halves[:, second]
        + size[:, second] * halves[:, first]
        + halves[:, first] * halves[:, second]
    )
    return np.concatenate([np.zeros((len(middles), 1)), halves, squares, products], axis=1)
