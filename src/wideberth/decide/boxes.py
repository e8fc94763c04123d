"""Boxes of a branch and bound in the directions z that the runs span: first box, steps, planes.

Settable steps shrink a box to the values inside it, so that a proof over settings that can be
dialled in looks at nothing between them.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy.optimize import linprog

from wideberth.decide.region import Region
from wideberth.study.records import BoolArray, FloatArray

ROUNDING = 1e-9
"""What a bound allows for rounding errors."""
_AT_ONCE = 8192

Axes = tuple[tuple[int, FloatArray], ...]
"""Places of stepped factors, or of their directions, each with its settable values."""


def first_box(
    region: Region, planes: FloatArray, bounds: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Enclose the region in z: by planes (L, r), bounds (L,), and by its ellipsoid if it has one.

    Returns
    -------
    middles, halves : ndarray, shape (1, r)
    """
    r = region.basis.shape[1]
    ends = np.empty((2, r))
    for j in range(r):
        for side, sign in enumerate((1.0, -1.0)):
            goal = np.zeros(r)
            goal[j] = sign
            found = linprog(goal, A_ub=planes, b_ub=bounds, bounds=[(None, None)] * r)
            ends[side, j] = sign * found.fun if found.fun is not None else -sign * np.inf
    if region.has_ellipsoid:
        inner = region.basis.T @ region.shape @ region.basis
        centre = (region.centre - region.origin) @ region.basis
        reach = np.sqrt(np.diag(np.linalg.inv(inner)))
        ends = np.stack([np.maximum(ends[0], centre - reach), np.minimum(ends[1], centre + reach)])
    ends += np.array([[-1.0], [1.0]]) * ROUNDING
    return (ends.sum(axis=0) / 2)[None, :], ((ends[1] - ends[0]) / 2)[None, :]


def in_parts(
    bound: Callable[[FloatArray, FloatArray], FloatArray], middles: FloatArray, halves: FloatArray
) -> FloatArray:
    """Bound boxes (n, r) a few thousand at a time, so that memory stays flat: shape (n,)."""
    starts = range(0, len(middles), _AT_ONCE)
    parts = [bound(middles[i : i + _AT_ONCE], halves[i : i + _AT_ONCE]) for i in starts]
    return np.concatenate(parts)


def excluded(
    planes: FloatArray, bounds: FloatArray, middles: FloatArray, halves: FloatArray
) -> BoolArray:
    """Tell which boxes (n, r) lie wholly beyond one of the planes (L, r): shape (n,)."""
    nearest = np.einsum("lr,nr->nl", planes, middles)
    nearest -= np.einsum("lr,nr->nl", np.abs(planes), halves)
    result: BoolArray = (nearest > bounds + ROUNDING).any(axis=1)
    return result


def steps_in_z(region: Region, axes: Axes) -> Axes:
    """Find the directions of z that are stepped factors themselves; others are left free."""
    steps = []
    for factor, values in axes:
        column = np.flatnonzero(np.abs(region.basis[factor]) > 1.0 - 1e-12)
        if len(column) and np.abs(region.basis[:, column[0]]).sum() < 1.0 + 1e-12:
            z = (values - region.origin[factor]) * region.basis[factor, column[0]]
            steps.append((int(column[0]), np.sort(z)))
    return tuple(steps)


def on_values(
    middles: FloatArray, halves: FloatArray, steps: Axes
) -> tuple[FloatArray, FloatArray]:
    """Shrink boxes to the settable values inside them; boxes without any are dropped."""
    low, high = middles - halves, middles + halves
    some: BoolArray = np.ones(len(middles), dtype=np.bool_)
    for j, values in steps:
        first = np.searchsorted(values, low[:, j] - ROUNDING)
        last = np.searchsorted(values, high[:, j] + ROUNDING, side="right") - 1
        some &= first <= last
        low[:, j] = values[np.minimum(first, len(values) - 1)]
        high[:, j] = values[np.maximum(last, 0)]
    low, high = low[some], high[some]
    return (low + high) / 2, (high - low) / 2
