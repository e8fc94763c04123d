"""The optimisation problem in the one form that the search knows.

Maximise ``sum_i weight_i * phi_i(t_i)`` over coded settings x and targets t, where phi is the
logarithm or the identity, subject to rows ``G_r(x) - slack_r * t_{i(r)} ** power_r >= 0``. Goals,
caps, limits with any guard, the ellipsoid, least violation and largest smallest margin are all
rows of this kind, so one search serves every question.

Settings are batched with the candidate last: x has shape (k, N), row values (R, N).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.guards import SmoothGuard
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import feature_gradients, features, pairs
from wideberth.study.records import BoolArray, FloatArray, IntArray


@dataclass(frozen=True, slots=True, eq=False)
class GuardedPart:
    """What a guard takes off one row: ``weight * K(h(x + shift))``.

    ``covariance`` (p, p) is unscaled; the shift of a worst point in the room is folded into it.
    """

    row: int
    weight: float
    guard: SmoothGuard
    covariance: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Program:
    """Targets, curved rows and planes of one problem in k factors.

    Attributes
    ----------
    weights : ndarray, shape (T,)
    logarithmic : ndarray of bool, shape (T,)
        phi is the logarithm where true, the identity elsewhere.
    curves : Stack, leading shape (R,)
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
    curves: Stack
    target: IntArray
    power: FloatArray
    guards: tuple[GuardedPart, ...]
    planes: FloatArray
    bounds: FloatArray

    @property
    def n_factors(self) -> int:
        """Number of factors k."""
        return self.curves.n_factors


def row_values(program: Program, x: FloatArray) -> FloatArray:
    """Evaluate G at settings, shape (k, N): shape (R, N)."""
    terms = features(x.T)
    values: FloatArray = program.curves.coefficients() @ terms.T
    for part in program.guards:
        leverage = np.einsum("np,np->n", terms @ part.covariance, terms)
        values[part.row] -= part.weight * part.guard.value(leverage)
    return values


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
    bent = np.tensordot(curves.quad, x, axes=1)
    slopes = curves.lin[:, :, None] + 2 * bent
    values = curves.const[:, None] + np.einsum("rkn,kn->rn", curves.lin[:, :, None] + bent, x)
    curvatures = []
    if program.guards:
        terms, jacobian = features(x.T), feature_gradients(x.T)
        for part in program.guards:
            value, slope, curvature = _guarded(part, terms, jacobian)
            values[part.row] -= value
            slopes[part.row] -= slope
            curvatures.append((part.row, -curvature))
    return Expansion(values, slopes, tuple(curvatures))


def weighted_curvature(program: Program, at: Expansion, multipliers: FloatArray) -> FloatArray:
    """Sum the rows' Hessians with multipliers, shape (R, N): shape (k, k, N)."""
    total: FloatArray = 2 * np.tensordot(program.curves.quad, multipliers, axes=(0, 0))
    for row, curvature in at.guard_curvatures:
        total += multipliers[row] * curvature
    return total


def _guarded(
    part: GuardedPart, terms: FloatArray, jacobian: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Evaluate weight * K(h), its gradient (k, N) and Hessian (k, k, N)."""
    k = jacobian.shape[-1]
    pull = terms @ part.covariance
    leverage = np.einsum("np,np->n", pull, terms)
    slope_h = 2 * np.einsum("npk,np->kn", jacobian, pull)
    swept = np.einsum("npk,pq->nkq", jacobian, part.covariance)
    curvature_h = 2 * np.einsum("nkq,nqj->kjn", swept, jacobian)
    diagonal = np.arange(k)
    curvature_h[diagonal, diagonal] += 4 * pull.T[1 + k : 1 + 2 * k]
    first, second = (np.array(index, dtype=int) for index in pairs(k))
    products = 2 * pull.T[1 + 2 * k :]
    curvature_h[first, second] += products
    curvature_h[second, first] += products
    value, rate, bend = part.guard.derivatives(leverage)
    slope = part.weight * rate * slope_h
    curvature = part.weight * (rate * curvature_h + bend * slope_h[:, None] * slope_h[None])
    return part.weight * value, slope, curvature
