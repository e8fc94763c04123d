"""Drifting factors in rows and sentences that shell and memo share."""

from __future__ import annotations

from wideberth.operate.records import Correction, Drift, DriftStep, Robustness
from wideberth.report.numbers import decimals_of, named, with_unit
from wideberth.report.wording import batches_in_100
from wideberth.study.records import NumericFactor, Study

DRIFT_HEADER = ("Factor", "3 low", "2 low", "1 low", "1 high", "2 high", "3 high")
_FREE = 0.005


def drift_row(one: Drift, study: Study) -> tuple[str, ...]:
    """Write what each drift does: batches of 100 inside all limits, or the first limit broken."""
    factor = _factor(study, one.factor)
    tolerance = f"{factor.tolerance:g}" if factor.tolerance else ""
    name = named(one.factor, f"{tolerance} {one.unit}".strip())
    return (name, *(_step(step) for step in one.steps))


def _step(step: DriftStep) -> str:
    if not step.explored:
        return "not explored"
    if step.broken:
        return f"guard lost: {step.broken[0].split(' at ')[0]}"
    if step.conformance is None:
        return "holds"
    return batches_in_100(step.conformance).replace(" of 100 batches", "")


def correction_sentence(one: Correction, study: Study) -> str:
    """Say what to do when a factor is off and cannot be brought back."""
    factor = _factor(study, one.factor)
    way = "high" if one.tolerances > 0 else "low"
    value = with_unit(f"{one.value:.{decimals_of(factor)}f}", one.unit)
    lead = f"{one.factor} at {value} ({abs(one.tolerances)} tolerances {way})"
    lost = f" {', '.join(one.broken)} is no longer sure." if one.broken else ""
    if one.after is None:
        return f"{lead}: no setting of the others holds every limit; stop and bring it back.{lost}"
    if not one.changes:
        return f"{lead}: leave the others as they are."
    moves = ", ".join(
        with_unit(f"{name} {by:+.{decimals_of(_factor(study, name))}f}", _factor(study, name).unit)
        for name, by in one.changes.items()
    )
    scores = f"overall desirability {one.after:.3f}"
    if one.before is not None:
        scores += f" instead of {one.before:.3f}"
    return f"{lead}: {moves} ({scores}).{lost}"


def looser_sentence(answer: Robustness) -> str:
    """Name the tolerances that could be doubled for free; empty where nothing is known."""
    if not answer.doubled:
        return ""
    free = [
        name
        for name, one in answer.doubled.items()
        if one.holds
        and (
            one.conformance is None
            or answer.conformance is None
            or one.conformance >= answer.conformance.mean - _FREE
        )
    ]
    if not free:
        return "No tolerance could be doubled for free."
    return (
        f"Could be held half as tightly, one at a time, with every guarded limit still met:"
        f" {', '.join(free)}."
    )


def _factor(study: Study, name: str) -> NumericFactor:
    return next(factor for factor in study.numeric if factor.name == name)
