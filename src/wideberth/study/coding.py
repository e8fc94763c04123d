"""Between own units and coded units, in which ``low..high`` of every factor is -1..+1.

A factor on a log scale is coded after taking logarithms; everything above this floor computes in
coded units and speaks in own units.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from wideberth.study.records import FloatArray, NumericFactor


def _stretch(factor: NumericFactor, actual: FloatArray) -> FloatArray:
    if factor.scale == "log":
        # An overstepping box may reach zero; its coded value is minus infinity, not an error.
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.log(actual)
    return actual


def to_coded(factors: tuple[NumericFactor, ...], actual: npt.ArrayLike) -> FloatArray:
    """Code settings given in own units.

    Parameters
    ----------
    factors : tuple of NumericFactor
        The k numeric factors.
    actual : array_like, shape (..., k)
        Settings in own units.

    Returns
    -------
    ndarray, shape (..., k)
        Coded settings.
    """
    values = np.asarray(actual, dtype=np.float64)
    coded = np.empty_like(values)
    for j, factor in enumerate(factors):
        low, high = _stretch(factor, np.array([factor.low, factor.high]))
        coded[..., j] = (2.0 * _stretch(factor, values[..., j]) - low - high) / (high - low)
    return coded


def to_actual(factors: tuple[NumericFactor, ...], coded: npt.ArrayLike) -> FloatArray:
    """Turn coded settings, shape (..., k), back into own units, same shape."""
    values = np.asarray(coded, dtype=np.float64)
    actual = np.empty_like(values)
    for j, factor in enumerate(factors):
        low, high = _stretch(factor, np.array([factor.low, factor.high]))
        stretched = (low + high) / 2 + values[..., j] * (high - low) / 2
        actual[..., j] = np.exp(stretched) if factor.scale == "log" else stretched
    return actual
