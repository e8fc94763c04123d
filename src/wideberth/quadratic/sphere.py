"""Extreme values of a quadratic on a sphere around the coded centre, exactly.

On ``|x| = r`` a largest value satisfies ``(mu I - Q) x = lin / 2`` with mu at least the largest
eigenvalue of Q, so only one number is searched: the root of the secular equation
``|x(mu)| = r``. In the hard case, where lin has no part along the top eigenvectors, mu is that
eigenvalue and the missing length is made up along one of them.

References
----------
Draper (1963), "Ridge analysis" of response surfaces, Technometrics 5, 469-479; Moré and Sorensen
(1983), SIAM J. Sci. Stat. Comput. 4, 553-572 (hard case). Both from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import FloatArray

_NEGLIGIBLE = 1e-12


@dataclass(frozen=True, slots=True, eq=False)
class SphereExtreme:
    """An extreme on a sphere: x of shape (k,), the value, and whether another x ties with it."""

    x: FloatArray
    value: float
    tied: bool


def extreme_on_sphere(stack: Stack, radius: float, *, largest: bool) -> SphereExtreme:
    """Find the largest or smallest value of one quadratic at coded distance ``radius``.

    Ties are settled for the setting whose first component that is not nil is positive.
    """
    k = stack.n_factors
    if radius == 0.0:
        return SphereExtreme(np.zeros(k), float(stack.const), tied=False)
    sign = 1.0 if largest else -1.0
    curvature, axes = np.linalg.eigh(sign * stack.quad)
    pull = axes.T @ (sign * stack.lin) / 2
    scale = float(np.abs(pull).max(initial=0.0) + np.abs(curvature).max(initial=0.0)) or 1.0
    top = float(curvature[-1])
    at_top = curvature >= top - _NEGLIGIBLE * scale
    rest = np.where(at_top, 0.0, pull / np.where(at_top, 1.0, top - curvature))
    flat_pull = float(np.abs(pull[at_top]).max())
    if flat_pull <= _NEGLIGIBLE * scale and float(rest @ rest) <= radius**2:
        missing = np.sqrt(max(radius**2 - float(rest @ rest), 0.0))
        direction = axes[:, int(np.argmax(at_top))]
        x = _positive_first(axes @ rest + missing * direction, axes @ rest - missing * direction)
        return SphereExtreme(x, float(stack.value(x)), tied=missing > 0)
    below = top - curvature
    x = axes @ (pull / (_gap(below, pull, radius) + below))
    x *= radius / float(np.sqrt(x @ x))
    return SphereExtreme(x, float(stack.value(x)), tied=False)


def _gap(below: FloatArray, pull: FloatArray, radius: float) -> float:
    """Solve ``1/radius = 1/|x|`` for how far mu lies above the top eigenvalue: one root."""

    def excess(gap: float) -> float:
        if gap == 0.0:
            return -1.0 / radius
        length = float(np.sqrt(((pull / (gap + below)) ** 2).sum()))
        return 1.0 / length - 1.0 / radius

    farthest = float(np.sqrt(pull @ pull)) / radius * (1 + 1e-9)
    return float(brentq(excess, 0.0, farthest, xtol=1e-300, rtol=1e-15, maxiter=500))


def _positive_first(one: FloatArray, other: FloatArray) -> FloatArray:
    for x in (one, other):
        first = x[np.abs(x) > _NEGLIGIBLE * np.abs(x).max()]
        if len(first) and first[0] > 0:
            return x
    return one
