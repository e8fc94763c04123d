"""Numbers as a reader wants them: rounded to what their uncertainty supports, with units."""

from __future__ import annotations

import math

from wideberth.study.records import NumericFactor, Study


def format_value(value: float, uncertainty: float | None = None) -> str:
    """Write a number to two significant digits of its uncertainty, else to four digits.

    Ordinary magnitudes are written without an exponent.
    """
    if not math.isfinite(value):
        return "not finite"
    if value == 0.0 and not uncertainty:
        return "0"
    if uncertainty:
        decimals = 1 - math.floor(math.log10(abs(uncertainty)))
    else:
        decimals = 3 - math.floor(math.log10(abs(value)))
    decimals = min(decimals, 12)
    rounded = round(value, decimals)
    if rounded != 0 and not 1e-6 <= abs(rounded) < 1e9:
        return f"{rounded:.3e}"
    text = f"{rounded:.{max(decimals, 0)}f}"
    if uncertainty is None and "." in text:
        text = text.rstrip("0").rstrip(".")
    if text.startswith("-") and float(text) == 0.0:
        text = text[1:]
    return text or "0"


def format_range(low: float, high: float, uncertainty: float | None = None) -> str:
    """Write two ends to the same digits: ``a to b``."""
    width = uncertainty or abs(high - low) or None
    return f"{format_value(low, width)} to {format_value(high, width)}"


def format_setting(study: Study, name: str, value: float | str) -> str:
    """Write one factor's setting: to its settable step, else to a thousandth of its range."""
    if isinstance(value, str):
        return value
    factor = next(f for f in study.numeric if f.name == name)
    return f"{value:.{decimals_of(factor)}f}"


def decimals_of(factor: NumericFactor) -> int:
    """Count the decimals that a setting of this factor is worth."""
    if factor.settable_step is not None:
        exponent = factor.settable_step.normalize().as_tuple().exponent
        return max(-int(exponent), 0)
    return max(2 - math.floor(math.log10(factor.high - factor.low)), 0)


def with_unit(text: str, unit: str) -> str:
    """Put a unit behind a number."""
    return f"{text} {unit}".rstrip()


def named(name: str, unit: str) -> str:
    """Name a quantity with its unit in brackets, where it has one."""
    return f"{name} [{unit}]" if unit else name
