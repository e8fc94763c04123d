"""Weighted least squares by QR, with everything that is read off one fit.

A run of weight w has the variance of one batch over w; without weights every run has weight 1.
Columns are scaled to unit length before the decomposition, so that badly scaled columns cost no
digits.

References
----------
Golub and Van Loan, Matrix Computations (QR); Cook (1977), Technometrics 19, 15-18 (distance);
Allen (1974), Technometrics 16, 125-127 (PRESS). All from memory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_triangular

from wideberth.study.records import FloatArray

_RANK_TOLERANCE = 1e-9
_EXACT = 1e-9


@dataclass(frozen=True, slots=True, eq=False)
class LeastSquares:
    """One fit of n values on q columns.

    Attributes
    ----------
    coefficients : ndarray, shape (q,)
    covariance : ndarray, shape (q, q)
        Unscaled: (X'WX)^-1.
    fitted, residuals, leverage : ndarray, shape (n,)
        Residuals in the unit of y; leverages of the weighted fit.
    weight : ndarray, shape (n,)
    basis : ndarray, shape (n, q)
        Orthonormal basis of the weighted columns.
    df : int
        n - q.
    rss : float
        Weighted residual sum of squares.
    """

    coefficients: FloatArray
    covariance: FloatArray
    fitted: FloatArray
    residuals: FloatArray
    leverage: FloatArray
    weight: FloatArray
    basis: FloatArray
    df: int
    rss: float

    @property
    def weighted_residuals(self) -> FloatArray:
        """Residuals times the root of the weight, all of one variance; shape (n,)."""
        result: FloatArray = np.sqrt(self.weight) * self.residuals
        return result


def least_squares(
    matrix: FloatArray, y: FloatArray, weight: FloatArray | None = None
) -> LeastSquares:
    """Fit y, shape (n,), on a matrix of full column rank, shape (n, q); weight, shape (n,)."""
    w = np.ones(len(y)) if weight is None else weight
    root = np.sqrt(w)
    weighted, target = matrix * root[:, None], y * root
    length = np.sqrt((weighted**2).sum(axis=0))
    q_factor, r_factor = np.linalg.qr(weighted / length)
    scaled = solve_triangular(r_factor, q_factor.T @ target)
    # one step of refinement recovers digits that nearly collinear columns cost
    rest = target - (weighted / length) @ scaled
    scaled = scaled + solve_triangular(r_factor, q_factor.T @ rest)
    inverse = solve_triangular(r_factor, np.eye(len(r_factor)))
    residuals = y - (matrix / length) @ scaled
    return LeastSquares(
        coefficients=scaled / length,
        covariance=(inverse @ inverse.T) / np.outer(length, length),
        fitted=y - residuals,
        residuals=residuals,
        leverage=np.minimum((q_factor**2).sum(axis=1), 1.0),
        weight=w,
        basis=q_factor,
        df=matrix.shape[0] - matrix.shape[1],
        rss=float(w @ residuals**2),
    )


def is_noise_free(fit: LeastSquares, y: FloatArray) -> bool:
    """Tell whether the residuals are at rounding level against the spread of y."""
    spread = float(np.ptp(y))
    size = float(np.abs(fit.residuals).max(initial=0.0))
    return size <= _EXACT * spread + 1e-12 * float(np.abs(y).max(initial=0.0))


def studentized(fit: LeastSquares) -> FloatArray:
    """Externally studentized residuals, shape (n,); NaN where they are undefined."""
    if fit.df < 2:
        return np.full(len(fit.residuals), np.nan)
    free, residuals = 1.0 - fit.leverage, fit.weighted_residuals
    with np.errstate(divide="ignore", invalid="ignore"):
        without = (fit.rss - residuals**2 / free) / (fit.df - 1)
        result: FloatArray = residuals / np.sqrt(np.maximum(without, 0.0) * free)
    return np.where((free > _RANK_TOLERANCE) & np.isfinite(result), result, np.nan)


def cook_distance(fit: LeastSquares) -> FloatArray:
    """Cook's distances, shape (n,); NaN where they are undefined."""
    if fit.df < 1 or fit.rss == 0.0:
        return np.full(len(fit.residuals), np.nan)
    free = 1.0 - fit.leverage
    n_columns = len(fit.coefficients)
    with np.errstate(divide="ignore", invalid="ignore"):
        size = fit.weighted_residuals**2 / (n_columns * fit.rss / fit.df)
        result: FloatArray = size * fit.leverage / free**2
    return np.where(free > _RANK_TOLERANCE, result, np.nan)


def press(fit: LeastSquares) -> float | None:
    """Prediction sum of squares; ``None`` where a run has leverage 1."""
    free = 1.0 - fit.leverage
    if (free <= _RANK_TOLERANCE).any():
        return None
    return float(((fit.weighted_residuals / free) ** 2).sum())


def independent_columns(matrix: FloatArray) -> list[int]:
    """Give the columns that no earlier column explains, in order."""
    kept: list[int] = []
    basis = np.zeros((matrix.shape[0], 0))
    for column in range(matrix.shape[1]):
        vector = matrix[:, column]
        rest = vector - basis @ (basis.T @ vector)
        rest -= basis @ (basis.T @ rest)
        size = float(np.sqrt(rest @ rest))
        if size > _RANK_TOLERANCE * float(np.sqrt(vector @ vector)) and size > 0:
            basis = np.concatenate([basis, (rest / size)[:, None]], axis=1)
            kept.append(column)
    return kept


def aliased_with(matrix: FloatArray, column: int, others: list[int]) -> list[int]:
    """Give those of the other columns that a dependent column is a combination of."""
    pool = matrix[:, others]
    weights, *_ = np.linalg.lstsq(pool, matrix[:, column], rcond=None)
    return [other for other, weight in zip(others, weights, strict=True) if abs(weight) > 1e-6]
