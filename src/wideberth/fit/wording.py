"""Numbers with their unit, for the sentences of this floor."""

from __future__ import annotations


def with_unit(value: float, unit: str) -> str:
    """Write a number to three or four digits with its unit."""
    written = f"{value:.0f}" if abs(value) >= 1000 else f"{value:.3g}"
    return f"{written} {unit}".rstrip()
