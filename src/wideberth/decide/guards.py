"""How far a guarded value stands from the fitted mean, as a smooth function of the leverage.

A guarded value is ``mean + c * K(h(x)) * s`` for a high limit and the mirror image for a low one.
K is the pointwise factor: for ``mean`` the confidence bound of the mean, for ``batch`` the
prediction bound of one batch, for ``share`` the one-sided tolerance bound. c makes it
simultaneous (`decide.simultaneous`).

References
----------
Owen (1968), A survey of properties and applications of the noncentral t-distribution,
Technometrics 10, 445-478 (the tolerance factor by noncentral t; from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numpy.polynomial import Chebyshev
from numpy.polynomial.chebyshev import chebval
from scipy.special import ndtri, stdtrit

from wideberth.fit.tolerance import tolerance_factor
from wideberth.study.records import FloatArray, GuardKind

_DEGREE = 28
_LEAST = 1e-12


@dataclass(frozen=True, slots=True)
class Guard:
    """The pointwise factor of one limit.

    Attributes
    ----------
    kind : GuardKind
    df : float
        Degrees of freedom of the estimated variance; unused for ``none``.
    confidence : float
        One-sided, after the risk of several ``share`` limits was split.
    share : float
        Used by ``share`` alone.
    """

    kind: GuardKind
    df: float
    confidence: float
    share: float

    def factor(self, leverage: npt.ArrayLike) -> FloatArray:
        """Evaluate K exactly at leverages h, any shape."""
        h = np.asarray(leverage, dtype=np.float64)
        if self.kind == "none":
            return np.zeros_like(h)
        if self.kind == "share":
            return tolerance_factor(h, self.df, self.share, self.confidence)
        t = float(stdtrit(self.df, self.confidence))
        factor: FloatArray = t * np.sqrt(h if self.kind == "mean" else 1.0 + h)
        return factor

    def extra(self, normal: FloatArray) -> FloatArray:
        """Give the term e of the pivotal ratio, drawn from common standard normals."""
        if self.kind == "share":
            return np.full_like(normal, float(ndtri(self.share)))
        return normal if self.kind == "batch" else np.zeros_like(normal)


@dataclass(frozen=True, slots=True, eq=False)
class SmoothGuard:
    """K with two derivatives in h: exact for ``mean`` and ``batch``, to about 1e-10 for ``share``.

    A share's factor is a Chebyshev series in sqrt(h) between ``low`` and ``high``; outside it goes
    on as a straight line, so that a search that strays stays well-behaved.

    Attributes
    ----------
    low, high : float
        Square roots of leverages.
    series : ndarray, shape (degree + 1, 3)
        Coefficients of K and of its first two derivatives in sqrt(h); unused for other kinds.
    """

    guard: Guard
    low: float
    high: float
    series: FloatArray

    @classmethod
    def between(cls, guard: Guard, least: float, largest: float) -> SmoothGuard:
        """Cover leverages from ``least`` to ``largest``, with a margin on both sides."""
        low, high = 0.6 * np.sqrt(least), 1.5 * np.sqrt(largest)
        series = np.zeros((_DEGREE + 1, 3))
        if guard.kind == "share":
            curve = Chebyshev.interpolate(
                lambda root: guard.factor(root * root), _DEGREE, domain=[low, high]
            )
            for order in range(3):
                part = curve.deriv(order).coef if order else curve.coef
                series[: len(part), order] = part
        return cls(guard, float(low), float(high), series)

    def value(self, leverage: FloatArray) -> FloatArray:
        """Give K at leverages h, of h's shape."""
        if self.guard.kind != "share":
            return self.guard.factor(np.maximum(leverage, _LEAST))
        root = np.sqrt(np.maximum(leverage, _LEAST))
        inside = np.clip(root, self.low, self.high)
        factor: FloatArray = self._series(inside, 1)[0]
        if (inside != root).any():
            factor = factor + self._series(inside, 2)[1] * (root - inside)
        return factor

    def derivatives(self, leverage: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Give K, dK/dh and d2K/dh2 at leverages h, each of h's shape."""
        h = np.maximum(leverage, _LEAST)
        if self.guard.kind != "share":
            # K is t sqrt(h) or t sqrt(1 + h), so each derivative is the last one over 2 (1 +) h
            base = h if self.guard.kind == "mean" else 1.0 + h
            value = self.guard.factor(h)
            slope: FloatArray = value / (2 * base)
            return value, slope, -slope / (2 * base)
        root = np.sqrt(h)
        inside = np.clip(root, self.low, self.high)
        factor, first, second = self._series(inside, 3)
        second = np.where(inside == root, second, 0.0)
        value = factor + first * (root - inside)
        # chain rule from v = sqrt(h): v' = 1/(2v), v'' = -1/(4 v^3)
        return value, first / (2 * root), second / (4 * root**2) - first / (4 * root**3)

    def _series(self, root: FloatArray, n: int) -> FloatArray:
        """Sum K and its derivatives in sqrt(h), the first n of them: shape (n, ...)."""
        place = (2 * root - self.low - self.high) / (self.high - self.low)
        result: FloatArray = np.asarray(chebval(place, self.series[:, :n]), dtype=np.float64)
        return result
