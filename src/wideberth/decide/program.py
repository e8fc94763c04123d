"""The optimisation problem in the one form that the search knows.

Maximise ``sum_i weight_i * phi_i(t_i)`` over coded settings x and targets t, where phi is the
logarithm or the identity, subject to rows ``G_r(x) - slack_r * t_{i(r)} ** power_r >= 0``. Goals,
caps, limits with any guard, the ellipsoid, least violation and largest smallest margin are all
rows of this kind, so one search serves every question.

Settings are batched with the candidate last: x has shape (k, N), row values (R, N). Rows may be
shared by all candidates or belong to one each, as when every candidate is a start for its own
draw of the coefficients.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.guards import SmoothGuard
from wideberth.quadratic.terms import feature_gradients, features, pairs
from wideberth.study.records import BoolArray, FloatArray, IntArray


@dataclass(frozen=True, slots=True, eq=False)
class GuardedPart:
    """What a guard takes off one row: ``weight * K(h(x + shift))``.

    ``weight`` is (1,) or (N,); ``covariance`` (p, p) is unscaled, the shift of a worst point in
    the room folded into it.
    """

    row: int
    weight: FloatArray
    guard: SmoothGuard
    covariance: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Curves:
    """The quadratic parts of R rows, candidate last: one for all (M = 1) or one each (M = N).

    Attributes
    ----------
    const : ndarray, shape (R, M)
    lin : ndarray, shape (R, k, M)
    quad : ndarray, shape (R, k, k, M)
        Symmetric; the Hessian is ``2 quad``.
    """

    const: FloatArray
    lin: FloatArray
    quad: FloatArray

    @classmethod
    def from_coefficients(cls, coefficients: FloatArray, n_factors: int) -> Curves:
        """Build from coefficients in the order of the terms, shape (R, M, p)."""
        k = n_factors
        last = coefficients.transpose(0, 2, 1)
        quad = np.zeros((len(last), k, k, last.shape[2]))
        diagonal = np.arange(k)
        quad[:, diagonal, diagonal] = last[:, 1 + k : 1 + 2 * k]
        first, second = (np.array(index, dtype=int) for index in pairs(k))
        quad[:, first, second] = quad[:, second, first] = last[:, 1 + 2 * k :] / 2
        return cls(last[:, 0].copy(), last[:, 1 : 1 + k].copy(), quad)

    def take(self, keep: BoolArray) -> Curves:
        """Keep some candidates' rows."""
        if self.const.shape[1] == 1:
            return self
        return Curves(self.const[:, keep], self.lin[:, :, keep], self.quad[..., keep])


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """Targets, curved rows and planes of one problem in k factors.

    Attributes
    ----------
    weights : ndarray, shape (T,)
    logarithmic : ndarray of bool, shape (T,)
        phi is the logarithm where true, the identity elsewhere.
    curves : Curves
        The quadratic part of every row.
    target : ndarray of int, shape (R,)
        Which t the row carries, -1 for none.
    power : ndarray, shape (R,)
        Power of that t, 1 or more.
    guards : tuple of GuardedPart
    planes : ndarray, shape (L, k); bounds : ndarray, shape (L,)
        ``planes @ x <= bounds``.
    """

    weights: FloatArray
    logarithmic: BoolArray
    curves: Curves
    target: IntArray
    power: FloatArray
    guards: tuple[GuardedPart, ...]
    planes: FloatArray
    bounds: FloatArray

    @property
    def n_factors(self) -> int:
        """Number of factors k."""
        return int(self.curves.lin.shape[1])

    def take(self, keep: BoolArray) -> Program:
        """Keep some candidates' rows."""
        guards = tuple(
            part if len(part.weight) == 1 else replace(part, weight=part.weight[keep])
            for part in self.guards
        )
        return replace(self, curves=self.curves.take(keep), guards=guards)


@dataclass(frozen=True, slots=True, eq=False)
class Expansion:
    """G and its first two derivatives at settings.

    Attributes
    ----------
    values : ndarray, shape (R, N)
    slopes : ndarray, shape (R, k, N)
    guard_curvatures : tuple of (row, ndarray of shape (k, k, N))
        Hessians of the guarded parts; the quadratic parts' are constant.
    """

    values: FloatArray
    slopes: FloatArray
    guard_curvatures: tuple[tuple[int, FloatArray], ...]


def expand(program: Program, x: FloatArray) -> Expansion:
    """Evaluate the rows with their derivatives at settings, shape (k, N)."""
    curves = program.curves
    bent = np.einsum("rkjn,jn->rkn", curves.quad, x)
    slopes = curves.lin + 2 * bent
    values = curves.const + np.einsum("rkn,kn->rn", curves.lin + bent, x)
    curvatures = []
    if program.guards:
        terms, jacobian = features(x.T), feature_gradients(x.T)
        leverages: dict[bytes, _Leverage] = {}
        for part in program.guards:
            # responses with the same runs and terms share one leverage
            key = part.covariance.tobytes()
            if key not in leverages:
                leverages[key] = _Leverage.at(terms, jacobian, part.covariance)
            value, slope, curvature = _guarded(part, leverages[key])
            values[part.row] -= value
            slopes[part.row] -= slope
            curvatures.append((part.row, -curvature))
    return Expansion(values, slopes, tuple(curvatures))


def weighted_curvature(program: Program, at: Expansion, multipliers: FloatArray) -> FloatArray:
    """Sum the rows' Hessians with multipliers, shape (R, N): shape (k, k, N)."""
    total: FloatArray = 2 * np.einsum("rkjn,rn->kjn", program.curves.quad, multipliers)
    for row, curvature in at.guard_curvatures:
        total += multipliers[row] * curvature
    return total


@dataclass(frozen=True, slots=True, eq=False)
class _Leverage:
    """h at settings with its gradient and Hessian: shapes (N,), (k, N), (k, k, N)."""

    value: FloatArray
    slope: FloatArray
    curvature: FloatArray

    @classmethod
    def at(cls, terms: FloatArray, jacobian: FloatArray, covariance: FloatArray) -> _Leverage:
        k = jacobian.shape[-1]
        pull = terms @ covariance
        swept = np.matmul(jacobian.transpose(0, 2, 1), covariance)
        curvature = 2 * np.matmul(swept, jacobian).transpose(2, 1, 0)
        diagonal = np.arange(k)
        curvature[diagonal, diagonal] += 4 * pull.T[1 + k : 1 + 2 * k]
        first, second = (np.array(index, dtype=int) for index in pairs(k))
        products = 2 * pull.T[1 + 2 * k :]
        curvature[first, second] += products
        curvature[second, first] += products
        return cls(
            value=np.einsum("np,np->n", pull, terms),
            slope=2 * np.einsum("npk,np->kn", jacobian, pull),
            curvature=curvature,
        )


def _guarded(part: GuardedPart, at: _Leverage) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Evaluate weight * K(h), its gradient (k, N) and Hessian (k, k, N)."""
    value, rate, bend = part.guard.derivatives(at.value)
    slope = part.weight * rate * at.slope
    curvature = part.weight * (rate * at.curvature + bend * at.slope[:, None] * at.slope[None])
    return part.weight * value, slope, curvature
