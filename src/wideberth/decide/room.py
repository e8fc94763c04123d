"""The worst place in the room of a setting: where the tolerances let a hard row fall lowest.

A row without a guard is a quadratic, whose lowest value over a box is exact by faces. A guarded
row is searched from the box's corners, faces and middle by shrinking coordinate moves.
"""

from __future__ import annotations

import numpy as np

from wideberth.decide.arena import Arena, HardRow
from wideberth.decide.region import Room
from wideberth.quadratic.box import extreme_over_box
from wideberth.quadratic.stack import Stack
from wideberth.study.records import FloatArray

_REFINEMENTS = 40
_LOOKED_EVERY = 8
_FOLLOWED = 4
_MANY_PATTERNS = 6


def worst_in_room(row: HardRow, room: Room, x: FloatArray) -> tuple[float, FloatArray]:
    """Find the lowest value of a hard row over the room of one setting.

    Parameters
    ----------
    x : ndarray, shape (k,)
        Coded setting.

    Returns
    -------
    (float, ndarray of shape (k,))
        The value and the shift from the setting at which it is taken.
    """
    if room.is_empty:
        return float(row.value(x)), np.zeros_like(x)
    low, high = x - room.below, x + room.above
    if row.guard is None:
        curve = Stack.from_coefficients(row.curve, len(x))
        value, at = extreme_over_box(curve, low, high, largest=False)
        return float(value), at - x
    points = _patterns(low, high, x)
    points = points[np.argsort(row.value(points), kind="stable")[:_FOLLOWED]]
    for step in range(_REFINEMENTS):
        points = _moved_down(row, points, low, high, 0.25 * 0.7**step)
        if step % _LOOKED_EVERY == _LOOKED_EVERY - 1 and _settled(row, points, low, high):
            break
    values = row.value(points)
    lowest = int(values.argmin())
    return float(values[lowest]), points[lowest] - x


def worst_of_all(arena: Arena, x: FloatArray) -> tuple[FloatArray, list[FloatArray]]:
    """Find each hard row's lowest value over the room of x: values (n_hard,) and their shifts."""
    found = [worst_in_room(row, arena.room, x) for row in arena.hard]
    return np.array([value for value, _ in found]), [shift for _, shift in found]


def _patterns(low: FloatArray, high: FloatArray, x: FloatArray) -> FloatArray:
    """Corners of the box and, for few factors, the middles of all its faces."""
    loose = np.flatnonzero(high > low)
    choices = [-1, 0, 1] if len(loose) <= _MANY_PATTERNS else [-1, 1]
    grid = np.stack(np.meshgrid(*[choices] * len(loose), indexing="ij"), axis=-1)
    signs = grid.reshape(-1, len(loose))
    points = np.tile(x, (len(signs) + 1, 1))
    ends = np.where(signs < 0, low[loose], np.where(signs > 0, high[loose], x[loose]))
    points[:-1, loose] = ends
    return points


def _settled(row: HardRow, points: FloatArray, low: FloatArray, high: FloatArray) -> bool:
    """Tell whether all points (n, k) are corners from which every way into the box leads up."""
    slope, loose = row.slope(points), high > low
    held = np.where(points <= low, slope > 0.0, (points >= high) & (slope < 0.0))
    return bool(held[:, loose].all())


def _moved_down(
    row: HardRow, points: FloatArray, low: FloatArray, high: FloatArray, share: float
) -> FloatArray:
    """Take from each point the best of all moves along one axis by a share of the box."""
    k = points.shape[1]
    moves = np.concatenate([np.zeros((1, k)), np.eye(k), -np.eye(k)]) * share * (high - low)
    tried = np.clip(points[:, None, :] + moves, low, high)
    best = row.value(tried).argmin(axis=1)
    result: FloatArray = tried[np.arange(len(points)), best]
    return result
