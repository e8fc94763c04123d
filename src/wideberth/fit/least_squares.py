"""Ordinary least squares by QR, with everything that is read off one fit.

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
        Unscaled: (X'X)^-1.
    fitted, residuals, leverage : ndarray, shape (n,)
    df : int
        n - q.
    rss : float
        Residual sum of squares.
    """

    coefficients: FloatArray
    covariance: FloatArray
    fitted: FloatArray
    residuals: FloatArray
    leverage: FloatArray
    df: int
    rss: float


def least_squares(matrix: FloatArray, y: FloatArray) -> LeastSquares:
    """Fit y, shape (n,), on a matrix of full column rank, shape (n, q)."""
    length = np.sqrt((matrix**2).sum(axis=0))
    q_factor, r_factor = np.linalg.qr(matrix / length)
    scaled = solve_triangular(r_factor, q_factor.T @ y)
    # one step of refinement recovers digits that nearly collinear columns cost
    rest = y - (matrix / length) @ scaled
    scaled = scaled + solve_triangular(r_factor, q_factor.T @ rest)
    inverse = solve_triangular(r_factor, np.eye(len(r_factor)))
    residuals = y - (matrix / length) @ scaled
    return LeastSquares(
        coefficients=scaled / length,
        covariance=(inverse @ inverse.T) / np.outer(length, length),
        fitted=y - residuals,
        residuals=residuals,
        leverage=np.minimum((q_factor**2).sum(axis=1), 1.0),
        df=matrix.shape[0] - matrix.shape[1],
        rss=float(residuals @ residuals),
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
    free = 1.0 - fit.leverage
    with np.errstate(divide="ignore", invalid="ignore"):
        without = (fit.rss - fit.residuals**2 / free) / (fit.df - 1)
        result: FloatArray = fit.residuals / np.sqrt(np.maximum(without, 0.0) * free)
    return np.where((free > _RANK_TOLERANCE) & np.isfinite(result), result, np.nan)


def cook_distance(fit: LeastSquares) -> FloatArray:
    """Cook's distances, shape (n,); NaN where they are undefined."""
    if fit.df < 1 or fit.rss == 0.0:
        return np.full(len(fit.residuals), np.nan)
    free = 1.0 - fit.leverage
    n_columns = len(fit.coefficients)
    with np.errstate(divide="ignore", invalid="ignore"):
        size = fit.residuals**2 / (n_columns * fit.rss / fit.df)
        result: FloatArray = size * fit.leverage / free**2
    return np.where(free > _RANK_TOLERANCE, result, np.nan)


def press(fit: LeastSquares) -> float | None:
    """Prediction sum of squares; ``None`` where a run has leverage 1."""
    free = 1.0 - fit.leverage
    if (free <= _RANK_TOLERANCE).any():
        return None
    return float(((fit.residuals / free) ** 2).sum())


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
