"""Covariance matrices between responses: estimated pair by pair, and drawn."""

from __future__ import annotations

import numpy as np

from wideberth.study.records import FloatArray


def root_of_correlation(residuals: FloatArray) -> FloatArray:
    """Correlate residuals pair by pair over common runs, repair to a covariance; (m, m) root."""
    m = residuals.shape[1]
    correlation: FloatArray = np.eye(m)
    for a in range(m):
        for b in range(a):
            both = np.isfinite(residuals[:, a]) & np.isfinite(residuals[:, b])
            first, second = residuals[both, a], residuals[both, b]
            size = np.sqrt((first @ first) * (second @ second))
            correlation[a, b] = correlation[b, a] = first @ second / size if size > 0 else 0.0
    values, vectors = np.linalg.eigh(correlation)
    root: FloatArray = vectors * np.sqrt(np.maximum(values, 0.0))
    length = np.sqrt(np.square(root).sum(axis=1, keepdims=True))
    result: FloatArray = root / length
    return result


def inverse_wishart_root(
    random: np.random.Generator, root: FloatArray, df: int, n: int
) -> FloatArray:
    """Draw roots of inverse Wishart matrices around ``root root'``; shape (n, m, m).

    The scale is such that each diagonal element is one over a chi-square with ``df``.
    """
    m = len(root)
    lower = np.zeros((n, m, m))
    for i in range(m):
        lower[:, i, i] = np.sqrt(random.chisquare(df + m - 1 - i, n))
        lower[:, i, :i] = random.standard_normal((n, i))
    solved = np.linalg.solve(lower, np.broadcast_to(root.T, lower.shape))
    result: FloatArray = solved.astype(np.float64).transpose(0, 2, 1)
    return result
