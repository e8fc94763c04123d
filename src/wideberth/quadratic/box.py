"""Extreme values of a quadratic over a box of settings, exactly, by its faces.

A smallest value over a box lies on some face, in the inside of which the quadratic is stationary
and curved upwards. Every face is tried; faces whose curvature cannot hold a minimum are dropped.
"""

from __future__ import annotations

from itertools import combinations, product

import numpy as np

from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import BoolArray, FloatArray, IntArray


def extreme_over_box(
    stack: Stack, low: FloatArray, high: FloatArray, *, largest: bool
) -> tuple[float, FloatArray]:
    """Find the largest or smallest value of one quadratic over a box.

    Parameters
    ----------
    stack : Stack
        One quadratic, no leading axes, k factors.
    low, high : ndarray, shape (k,)
        Coded ends; equal ends fix a factor.
    largest : bool
        True for the largest value.

    Returns
    -------
    (float, ndarray of shape (k,))
        The value and a setting where it is taken.
    """
    sign = -1.0 if largest else 1.0
    turned = Stack(sign * stack.const, sign * stack.lin, sign * stack.quad)
    loose = np.flatnonzero(high > low)
    best, where = np.inf, low.copy()
    for n_free in range(len(loose) + 1):
        for free in combinations(loose.tolist(), n_free):
            for x in _stationary_on_faces(turned, low, high, np.array(free, dtype=int), loose):
                value = float(turned.value(x))
                if value < best:
                    best, where = value, x
    return sign * best, where


def lowest_on_boxes(slope: FloatArray, bend: FloatArray, halves: FloatArray) -> FloatArray:
    """Bound ``slope'd + d'bend d`` from below for |d| <= halves: (n, k), (n, k, k) to (n,).

    Products of two coordinates are shared between their squares in proportion to the half-widths;
    each coordinate is then minimised exactly.
    """
    wide = halves > 0
    safe = np.where(wide, halves, 1.0)
    mixed = np.abs(bend)
    diagonal = np.arange(bend.shape[1])
    mixed[:, diagonal, diagonal] = 0.0
    own = bend[:, diagonal, diagonal] - np.einsum("nij,nj->ni", mixed, halves) / safe
    steep = np.abs(slope)
    inside = np.where(own > 0, steep / np.where(own > 0, 2 * own, 1.0), np.inf)
    step = np.where(wide, np.minimum(inside, halves), 0.0)
    result: FloatArray = (-steep * step + own * step * step).sum(axis=1)
    return result


def halved(middles: FloatArray, halves: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Cut every box, middles and half-widths (n, k), in two across its widest side: (2n, k)."""
    widest, every = halves.argmax(axis=1), np.arange(len(halves))
    halves = halves.copy()
    halves[every, widest] /= 2
    moved = np.zeros_like(middles)
    moved[every, widest] = halves[every, widest]
    return np.concatenate([middles - moved, middles + moved]), np.concatenate([halves, halves])


def _stationary_on_faces(
    stack: Stack, low: FloatArray, high: FloatArray, free: IntArray, loose: IntArray
) -> FloatArray:
    """Give the stationary points inside all faces with these free factors: (n, k), best only."""
    held = np.setdiff1d(loose, free)
    curvature = stack.quad[np.ix_(free, free)]
    if len(free) and np.linalg.eigvalsh(curvature)[0] <= 0.0:
        return np.zeros((0, len(low)))
    corners = _corners(len(held))
    x = np.tile(low, (len(corners), 1))
    x[:, held] = np.where(corners, high[held], low[held])
    if len(free):
        x[:, free] = 0.0
        slope = stack.lin[free] + 2 * x @ stack.quad[:, free]
        x[:, free] = np.linalg.solve(curvature, -slope.T / 2).T
        kept = ((x[:, free] >= low[free]) & (x[:, free] <= high[free])).all(axis=1)
        x = x[kept]
    if not len(x):
        return x
    return x[[int(stack.value(x).argmin())]]


def _corners(n: int) -> BoolArray:
    """Give every choice of low (False) or high (True) for n factors: shape (2**n, n)."""
    return np.array(list(product((False, True), repeat=n)), dtype=np.bool_).reshape(2**n, n)
