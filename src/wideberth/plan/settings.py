"""Coded designs in own units: whole settable steps, kept inside what is allowed."""

from __future__ import annotations

import math
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Decimal

import numpy as np

from wideberth.study.coding import to_actual
from wideberth.study.records import FloatArray, NumericFactor

_DIGITS = 4
_SAME = 1e-9


def settable(factors: tuple[NumericFactor, ...], coded: FloatArray) -> FloatArray:
    """Turn coded settings, shape (n, k), into settings a person can dial in, own units.

    With a settable step the nearest whole multiple; without one, a number of digits that leaves
    the design what it is (a few parts in ten thousand of the range). A setting that was inside
    what is allowed stays inside.
    """
    actual = to_actual(factors, coded)
    for j, factor in enumerate(factors):
        # every setting of one coded value must come out alike, or replicates would differ
        values, places = np.unique(np.round(coded[:, j], 9), return_inverse=True)
        exact = to_actual((factor,), values[:, None])[:, 0]
        rounded = np.array(
            [_dial(factor, float(c), float(a)) for c, a in zip(values, exact, strict=True)]
        )
        actual[:, j] = rounded[places]
    return actual


def settable_bounds(factor: NumericFactor) -> tuple[float, float]:
    """Give the range that a factor's runs must keep: what is allowed, else low to high."""
    return factor.allowed or (factor.low, factor.high)


def _dial(factor: NumericFactor, coded: float, actual: float) -> float:
    low, high = settable_bounds(factor)
    slack = _SAME * (factor.high - factor.low)
    inside = low - slack <= actual <= high + slack
    if factor.settable_step is not None:
        return _whole_steps(factor.settable_step, actual, (low, high) if inside else None)
    if abs(abs(coded) - 1.0) < _SAME:
        return factor.low if coded < 0 else factor.high
    size = abs(actual) if factor.scale == "log" else factor.high - factor.low
    rounded = round(actual, _DIGITS - 1 - math.floor(math.log10(size)))
    return min(max(rounded, low), high) if inside else rounded


def _whole_steps(step: Decimal, actual: float, keep: tuple[float, float] | None) -> float:
    count = (Decimal(repr(actual)) / step).quantize(Decimal(1), ROUND_HALF_EVEN)
    if keep is not None:
        first = (Decimal(repr(keep[0])) / step).to_integral_value(ROUND_CEILING)
        last = (Decimal(repr(keep[1])) / step).to_integral_value(ROUND_FLOOR)
        # where no whole step lies between the ends, the check of the runs says so
        count = min(max(count, first), last) if first <= last else count
    return float(count * step)
