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
from scipy.special import ndtri, stdtrit

from wideberth.fit.tolerance import tolerance_factor
from wideberth.study.records import FloatArray, GuardKind

_DEGREE = 28


@dataclass(frozen=True, slots=True)
class Guard:
    """The pointwise factor of one limit.

    Attributes
    ----------
    kind : GuardKind
    df : int
        Residual degrees of freedom; unused for ``none``.
    confidence : float
        One-sided, after the risk of several ``share`` limits was split.
    share : float
        Used by ``share`` alone.
    """

    kind: GuardKind
    df: int
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
    """K with two derivatives in h, accurate to about 1e-10 between two leverages.

    Outside ``[low, high]`` (square roots of h) the factor goes on as a straight line in sqrt(h),
    so that a search that strays stays well-behaved.
    """

    guard: Guard
    low: float
    high: float
    curve: Chebyshev
    slope: Chebyshev
    bend: Chebyshev

    @classmethod
    def between(cls, guard: Guard, least: float, largest: float) -> SmoothGuard:
        """Fit K over leverages from ``least`` to ``largest``, with a margin on both sides."""
        low, high = 0.6 * np.sqrt(least), 1.5 * np.sqrt(largest)
        curve = Chebyshev.interpolate(
            lambda root: guard.factor(root * root), _DEGREE, domain=[low, high]
        )
        return cls(guard, float(low), float(high), curve, curve.deriv(1), curve.deriv(2))

    def value(self, leverage: FloatArray) -> FloatArray:
        """Give K at leverages h, of h's shape."""
        root = np.sqrt(np.maximum(leverage, 1e-12))
        inside = np.clip(root, self.low, self.high)
        factor: FloatArray = self.curve(inside)
        if (inside != root).any():
            factor = factor + self.slope(inside) * (root - inside)
        return factor

    def derivatives(self, leverage: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Give K, dK/dh and d2K/dh2 at leverages h, each of h's shape."""
        root = np.sqrt(np.maximum(leverage, 1e-12))
        inside = np.clip(root, self.low, self.high)
        first = self.slope(inside)
        second = np.where(inside == root, self.bend(inside), 0.0)
        value = self.curve(inside) + first * (root - inside)
        # chain rule from v = sqrt(h): v' = 1/(2v), v'' = -1/(4 v^3)
        return value, first / (2 * root), second / (4 * root**2) - first / (4 * root**3)
