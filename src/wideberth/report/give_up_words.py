"""Give-ups in the words of whoever has to decide: what one step asked more or less changes."""

from __future__ import annotations

from wideberth.decide.give_ups import Change, GiveUp
from wideberth.report.numbers import format_value, with_unit

WORTH_SAYING = 5e-5
_COUNTS = 1e-3


def bound_words(one: GiveUp) -> str:
    """Name the bound: ``limit heat_rate at most 45 W/kg``, ``goal yield, ideal 95 %``."""
    value = with_unit(f"{one.value:.6g}", one.unit)
    if one.kind == "limit":
        word = "at least" if one.bound == "low" else "at most"
        return f"limit {one.response} {word} {value}"
    return f"goal {one.response}, {one.bound} {value}"


def step_words(one: GiveUp, *, tighter: bool) -> str:
    """Say what one step changes: settings are re-optimised, everything else is kept."""
    change = one.tighter if tighter else one.looser
    if change.desirability is None:
        return "no setting holds the limits any more"
    if abs(change.desirability) < WORTH_SAYING:
        return "changes nothing"
    moved = moved_words(one, change)
    return f"D {change.desirability:+.4f}{f', {moved}' if moved else ''}"


def moved_words(one: GiveUp, change: Change) -> str:
    """List the responses that move by more than a thousandth of the step's effect on anything."""
    parts = []
    for name, by in change.responses.items():
        scale = one.scales.get(name, 0.0)
        if abs(by) > _COUNTS * scale:
            text = format_value(by, abs(by))
            sign = "" if text.startswith("-") else "+"
            parts.append(with_unit(f"{name} {sign}{text}", one.units.get(name, "")))
    return ", ".join(parts)


def give_up_sentence(one: GiveUp) -> str:
    """Word a give-up in one sentence."""
    step = with_unit(f"{one.step:g}", one.unit)
    return (
        f"{bound_words(one)}: tightened by {step}, {step_words(one, tighter=True)};"
        f" loosened by {step}, {step_words(one, tighter=False)}."
    )
