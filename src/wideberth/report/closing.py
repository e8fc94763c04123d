"""What comes after the evidence: alternatives, what was taken for granted, runs to confirm."""

from __future__ import annotations

from wideberth.chain.record import Record
from wideberth.report.blocks import Block, Bullets, Heading, Paragraph, Table
from wideberth.report.numbers import format_range, named
from wideberth.report.options import options
from wideberth.report.wording import setting_words

_RUNS_IF_MET = 3
_BLANK = "........"


def closing(record: Record) -> list[Block]:
    """Write alternatives considered, assumptions, and the table to fill in when confirming."""
    return [*_alternatives(record), *_assumptions(record), *_confirmation(record)]


def _alternatives(record: Record) -> list[Block]:
    choice, study = record.choice, record.study
    rows: list[tuple[str, str, str]] = []

    def add(what: str, setting: str, desirability: float | None) -> None:
        rows.append((what, setting, "" if desirability is None else f"{desirability:.4f}"))

    if choice.setpoint is None:
        return []
    add("the setting of this memo", setting_words(study, choice.setpoint), choice.desirability)
    bare = choice.unrounded
    if bare.setpoint is not None and dict(bare.setpoint) != dict(choice.setpoint):
        add("before rounding to steps", setting_words(study, bare.setpoint), bare.desirability)
    if record.priorities is not None:
        add("with all priorities equal", setting_words(study, record.priorities.equal), None)
    today = record.uncertainty.today
    if today is not None:
        before = record.frontier.today if record.frontier else None
        reached = before.desirability if before else None
        add("today", setting_words(study, today.setting), reached)
    others = options(record)
    if len(rows) == 1 and not others:
        return []
    header = ("Alternative", "Setting", "Overall desirability")
    return [
        Heading(3, "Alternatives considered"),
        Paragraph("Settings that the question could also have been answered with."),
        *([Table("Alternatives", header, tuple(rows))] if len(rows) > 1 else []),
        *others,
    ]


def _assumptions(record: Record) -> list[Block]:
    study = record.study
    taken = [
        "Between the runs every measured response is a second-order equation in the factors.",
        (
            "Runs differ by independent, normal noise of the same size everywhere, and later"
            " batches will differ as these runs did."
        ),
        "The settings in the run sheet are those that were really run.",
    ]
    if any(factor.tolerance is not None for factor in study.numeric):
        taken.append(
            "The plant holds each factor within its stated tolerance; where that is read as an"
            " error, it is normal with 95 % inside."
        )
    if study.runs.blocks:
        taken.append(f"Later batches come from {', '.join(study.runs.blocks)} again.")
    exact = [response.name for response in study.responses if response.formula is not None]
    if exact:
        taken.append(f"The formula of {', '.join(exact)} is right and has no error.")
    return [
        Heading(3, "Assumptions"),
        Paragraph("If one of these is wrong, so may be the answer."),
        Bullets("", tuple(taken)),
    ]


def _confirmation(record: Record) -> list[Block]:
    choice = record.choice
    runs = _RUNS_IF_MET if choice.status == "met" else None
    if choice.confirmation is not None:
        runs = choice.confirmation.runs
    if runs is None or choice.setpoint is None or not choice.confirm:
        return []
    rows = tuple(
        (
            named(name, expected.unit),
            format_range(*expected.one, (expected.one[1] - expected.one[0]) / 2),
            format_range(*expected.three, (expected.three[1] - expected.three[0]) / 2),
            *([_BLANK] * (min(runs, 4) + 1)),
        )
        for name, expected in choice.confirm.items()
    )
    header = (
        "Response",
        "One run *",
        "Mean of 3 *",
        *(f"Run {i + 1}" for i in range(min(runs, 4))),
        "Mean",
    )
    return [
        Heading(3, "Runs to confirm"),
        Paragraph(
            f"To be filled in at {setting_words(record.study, choice.setpoint)}, at the scale that"
            " was run. The ranges marked * hold for all responses together with 95 %. Runs asked"
            f" for: {runs}."
        ),
        Table("Confirmation runs, to fill in", header, rows),
    ]
