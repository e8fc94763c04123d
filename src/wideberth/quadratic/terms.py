"""The terms of a full second-order polynomial, in one fixed order used everywhere.

For k factors: the constant, the k linear terms, the k squares, then the products a*b with a
before b, in all ``n_terms(k)`` columns.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]


def n_terms(n_factors: int) -> int:
    """Count the terms of the full second-order polynomial."""
    return 1 + 2 * n_factors + n_factors * (n_factors - 1) // 2


@cache
def pairs(n_factors: int) -> tuple[tuple[int, ...], tuple[int, ...]]:
    """Give the first and second factor of each product, in the order of the terms."""
    first, second = np.triu_indices(n_factors, 1)
    return tuple(first.tolist()), tuple(second.tolist())


@cache
def powers(n_factors: int) -> tuple[tuple[int, ...], ...]:
    """Give for each term the power of each factor."""
    unit = np.eye(n_factors, dtype=int)
    first, second = pairs(n_factors)
    rows = [np.zeros(n_factors, dtype=int), *unit, *(2 * unit)]
    rows += [unit[a] + unit[b] for a, b in zip(first, second, strict=True)]
    return tuple(tuple(int(power) for power in row) for row in rows)


def term_names(names: tuple[str, ...]) -> tuple[str, ...]:
    """Write the terms as ``1``, ``a``, ``a^2``, ``a*b``."""
    first, second = pairs(len(names))
    products = tuple(f"{names[a]}*{names[b]}" for a, b in zip(first, second, strict=True))
    return ("1", *names, *(f"{name}^2" for name in names), *products)


def features(x: FloatArray) -> FloatArray:
    """Evaluate every term.

    Parameters
    ----------
    x : ndarray, shape (..., k)
        Coded settings.

    Returns
    -------
    ndarray, shape (..., n_terms(k))
    """
    first, second = pairs(x.shape[-1])
    products = x[..., list(first)] * x[..., list(second)]
    return np.concatenate([np.ones((*x.shape[:-1], 1)), x, x * x, products], axis=-1)


def feature_gradients(x: FloatArray) -> FloatArray:
    """Differentiate every term: shape (..., n_terms(k), k)."""
    k = x.shape[-1]
    slopes = np.zeros((*x.shape[:-1], n_terms(k), k))
    diagonal = np.arange(k)
    slopes[..., 1 + diagonal, diagonal] = 1.0
    slopes[..., 1 + k + diagonal, diagonal] = 2.0 * x
    first, second = (np.array(index, dtype=int) for index in pairs(k))
    place = 1 + 2 * k + np.arange(len(first))
    slopes[..., place, first] = x[..., second]
    slopes[..., place, second] = x[..., first]
    return slopes


def shift_map(shift: FloatArray) -> FloatArray:
    """Give T, shape (p, p), with ``features(x + shift) == T @ features(x)`` for every x.

    Coefficients of the shifted polynomial are ``T.T @ beta``, a covariance becomes ``T.T @ C @ T``.
    """
    k = len(shift)
    mapped = np.eye(n_terms(k))
    diagonal = np.arange(k)
    mapped[1 + diagonal, 0] = shift
    mapped[1 + k + diagonal, 0] = shift * shift
    mapped[1 + k + diagonal, 1 + diagonal] = 2 * shift
    first, second = (np.array(index, dtype=int) for index in pairs(k))
    place = 1 + 2 * k + np.arange(len(first))
    mapped[place, 0] = shift[first] * shift[second]
    mapped[place, 1 + second] = shift[first]
    mapped[place, 1 + first] = shift[second]
    return mapped
