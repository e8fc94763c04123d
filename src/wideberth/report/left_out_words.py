"""The sentences about runs that were left out, shared by shell and memo."""

from __future__ import annotations

from wideberth.decide.every_run import EveryRun
from wideberth.decide.records import Choice
from wideberth.report.numbers import format_value, with_unit
from wideberth.report.wording import setting_words
from wideberth.study.records import Study


def every_run_sentences(other: EveryRun, choice: Choice, study: Study) -> tuple[str, ...]:
    """Say what the answer would be with nothing left out."""
    if other.setpoint is None:
        return ("With every run fitted no setting can be shown.",)
    same = all(abs(step) < 1e-9 for step in other.moved.values()) and all(
        (choice.setpoint or {}).get(f.name) == other.setpoint[f.name] for f in study.categorical
    )
    place = "the same setting" if same else setting_words(study, other.setpoint)
    text = f"With every run fitted: {place}, status {other.status}"
    if other.desirability is not None and choice.desirability is not None:
        text += f", desirability {other.desirability:.3f} instead of {choice.desirability:.3f}"
    expected = [
        f"{name} {with_unit(format_value(there.mean), there.unit)} instead of"
        f" {format_value(choice.predictions[name].mean)}"
        for name, there in other.predictions.items()
        if name in choice.predictions
    ]
    said = [f"{text}; expected there: {', '.join(expected)}."]
    unusable = [name for name, grade in other.grades.items() if grade == "do not use"]
    if unusable:
        said.append(f"Fitted to every run, the model of {', '.join(unusable)} must not be used.")
    return tuple(said)
