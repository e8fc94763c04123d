"""Page one of the memo: what a signer reads, in the order the questions come."""

from __future__ import annotations

from wideberth.chain.record import Record
from wideberth.decide.records import Choice, Prediction, Status
from wideberth.report.blocks import Block, Bullets, Heading, Paragraph, SignOff, Table
from wideberth.report.give_up_words import WORTH_SAYING, bound_words, moved_words
from wideberth.report.numbers import (
    decimals_of,
    format_range,
    format_setting,
    format_value,
    named,
    with_unit,
)
from wideberth.report.wording import (
    CAUTIONS,
    conformance_words,
    difference_words,
    ends_words,
    guard_sentence,
    limit_words,
    location_sentence,
    margin_words,
    status_sentence,
    today_sentences,
    unknowns,
)
from wideberth.study.records import Finding, Study

_VERDICT: dict[Status, str] = {
    "met": "Supported",
    "conflict": "Not supported: the limits conflict",
    "provisional": "Not yet supported: provisional",
    "unproven": "Not supported: not proven",
    "unreached": "Not supported: the goals are not reached",
    "unsupported": "Not supported: the evidence does not carry it",
}


_BEYOND = (
    "Better settings may lie beyond what was tried: the evidence lists runs to try there, which"
    " are no settings to use."
)


def page_one(record: Record, digest: str = "") -> tuple[Block, ...]:
    """Write the blocks of page one; ``digest`` is the hash of ``record.json``."""
    study, choice = record.study, record.choice
    blocks: list[Block] = [
        Heading(1, f"Setpoint memo: {study.title}"),
        _identity(record, digest),
        Heading(2, "Question and verdict"),
        Paragraph(_question(study)),
        Paragraph(f"{verdict(record)}. {status_sentence(choice)}", tone="lead"),
    ]
    blocks += [Bullets("", tuple(c.text for c in choice.conflicts))] if choice.conflicts else []
    doubts = tuple(finding.text for finding in _spoiling(record))
    if choice.edge:
        beyond = () if not record.outward.runs else (_BEYOND,)
        blocks.append(Bullets("Conditions", (*choice.edge, *beyond), tone="doubt"))
    if doubts:
        blocks.append(Bullets("What weakens this answer", doubts, tone="doubt"))
    blocks += [_settings(record), _responses(record)]
    today = record.uncertainty.today
    if today is not None:
        changes = "; ".join(
            with_unit(f"{name} {difference_words(one)}", today.predictions[name].unit)
            for name, one in today.differences.items()
        )
        verdict_words = " ".join(today_sentences(record.uncertainty)[: 2 if today.broken else 1])
        blocks.append(Paragraph(f"Against today: {changes}. {verdict_words}"))
    blocks += _given_up(record)
    blocks += [
        Bullets("What is not known", (_location(record), *unknowns(study))),
        Paragraph(_confirmation(choice)),
        Bullets("Cautions", CAUTIONS),
        SignOff(
            (
                ("Prepared", "the numbers come from the runs named here"),
                ("Reviewed", "models, limits and guards are right for this purpose"),
                ("Approved", "the setting may be confirmed within its room"),
            )
        ),
    ]
    return tuple(blocks)


def verdict(record: Record) -> str:
    """Give the verdict in a few words."""
    if record.choice.status == "met":
        missing = set(record.study.notes)
        conditions = bool(record.choice.edge) or any(f not in missing for f in _spoiling(record))
        return "Supported with conditions" if conditions else "Supported"
    return _VERDICT[record.choice.status]


def setting_word(choice: Choice) -> str:
    """Call the setting what it is: recommended only when every limit is met."""
    return "recommended" if choice.status == "met" else "setting shown"


def _spoiling(record: Record) -> tuple[Finding, ...]:
    found = [f for f in record.choice.findings if f.grade != "fine"]
    found += [f for f in record.doubts if f.grade != "fine"]
    # a doubt about the runs is said by the answer as well
    return tuple(dict.fromkeys(found))


def _given_up(record: Record) -> list[Block]:
    """Say which limit rules, and which limit costs most."""
    said = []
    if record.choice.ruling:
        said.append(f"The limit that rules: {record.choice.ruling}.")
    costs = [
        (one.looser.desirability, one)
        for one in record.give_ups
        if one.kind == "limit" and one.looser.desirability is not None
    ]
    gain, dearest = max(costs, key=lambda cost: cost[0], default=(0.0, None))
    if dearest is not None and gain > WORTH_SAYING:
        step = with_unit(f"{dearest.step:g}", dearest.unit)
        moved = moved_words(dearest, dearest.looser) or "no response noticeably"
        said.append(
            f"Given up most to the {bound_words(dearest)}: loosened by {step}, the best setting"
            f" would change {moved}."
        )
    return [Paragraph(" ".join(said))] if said else []


def _identity(record: Record, digest: str) -> Table:
    study = record.study
    context = study.context
    document = (
        context.document or "no document number",
        f"revision {context.revision or 'not stated'}",
        context.date or "no date stated",
    )
    rows = [
        (
            "Product, equipment",
            f"{context.product or 'not stated'}, {context.equipment or 'not stated'}",
        ),
        (
            "Scale run / intended",
            f"{context.scale_run or 'not stated'} / {context.scale_intended or 'not stated'}",
        ),
        ("Document", ", ".join(document)),
        ("Status, record", f"{study.stage}; {record.choice.status}; {digest[:16]}".rstrip("; ")),
    ]
    return Table("", ("", ""), tuple(rows))


def _question(study: Study) -> str:
    wants = {"more": "high", "less": "low", "near": "near its target"}
    goals = [f"{r.name} {wants[r.goal.want]}" for r in study.responses if r.goal]
    limits = [r.name for r in study.responses if r.limit]
    names = _listed([factor.name for factor in study.factors])
    asked = f"At which {names} should the process run"
    if goals:
        asked += f", with {_listed(goals)}"
    if limits:
        asked += f", so that the limits on {_listed(limits)} hold"
    return asked + "?"


def _listed(items: list[str]) -> str:
    return items[0] if len(items) == 1 else f"{', '.join(items[:-1])} and {items[-1]}"


def _location(record: Record) -> str:
    """Say what is not known about where the optimum lies."""
    sure = record.uncertainty
    if sure.reason:
        return f"How sure the answer is: {sure.reason}."
    loose = [finding.text for finding in sure.findings if "locate" in finding.text]
    return " ".join([location_sentence(sure), *loose])


def _settings(record: Record) -> Table:
    study, choice, box = record.study, record.choice, record.window
    today = record.uncertainty.today
    header = (
        "Factor",
        *(("Today",) if today else ()),
        setting_word(choice).capitalize(),
        "Hold within",
        "Proven window",
        "Allowed",
        "Explored",
    )
    rows: list[tuple[str, ...]] = []
    units = {factor.name: factor.unit for factor in study.factors}
    numeric = {factor.name: factor for factor in study.numeric}
    for name, value in (choice.setpoint or {}).items():
        around = choice.factors.get(name)
        before = (format_setting(study, name, today.setting[name]),) if today else ()
        if around is None:
            levels = next(f.levels for f in study.categorical if f.name == name)
            rows.append((name, *before, str(value), "", "", ", ".join(levels), ""))
            continue
        digits = decimals_of(numeric[name])
        ends = [around.room, around.allowed, around.explored]
        texts = [
            "no tolerance stated" if end is None else f"{end[0]:.{digits}f} to {end[1]:.{digits}f}"
            for end in ends
        ]
        proven = "none"
        if box.status == "proven":
            proven = ends_words(numeric[name], box.settable[name], inwards=True)
        shown = format_setting(study, name, value)
        rows.append((named(name, units[name]), *before, shown, texts[0], proven, *texts[1:]))
    return Table("Settings", header, tuple(rows))


def _responses(record: Record) -> Table:
    choice, today = record.choice, record.uncertainty.today
    optimism = record.uncertainty.optimism
    corrected = optimism.responses if optimism else {}
    header = (
        "Response",
        *(("Today",) if today else ()),
        "Expected, corrected; fitted mean (95 %)" if corrected else "Fitted mean (95 %)",
        "One run; mean of 3 *",
        "Limit and its guard",
        "Margin over the room",
    )
    rows: list[tuple[str, ...]] = []
    for name, prediction in choice.predictions.items():
        half = _half(prediction)
        before = (format_value(today.predictions[name].mean, half),) if today else ()
        expected = _expected(prediction, corrected.get(name))
        single = _runs_should_fall(choice, name)
        own = [verdict for verdict in choice.limits if verdict.response == name]
        limits = "; ".join(
            f"{limit_words(v)}: {guard_sentence(v.guard, v.confidence, v.share)}" for v in own
        )
        margins = "; ".join(margin_words(v) for v in own)
        rows.append((named(name, prediction.unit), *before, expected, single, limits, margins))
    blank = ("",) if today else ()
    for constraint in choice.constraints:
        word = "at most" if constraint.side == "at_most" else "at least"
        mark = "met" if constraint.met else "not met"
        value = with_unit(f"{constraint.value:.4g}", "at its worst in the room")
        rows.append((constraint.name, *blank, value, "", f"{word} {constraint.bound:g}", mark))
    together = record.uncertainty.conformance
    if together is not None:
        wandering = record.uncertainty.setting_error_included
        how = "settings wandering within their tolerances" if wandering else "settings held exactly"
        words = conformance_words(together)
        rows.append(("All limits together", *blank, words, "", how, ""))
    return Table("What to expect there", header, tuple(rows))


def _half(prediction: Prediction) -> float | None:
    """Give half the width of the interval of the mean; ``None`` where there is no width."""
    if prediction.mean_interval is None:
        return None
    low, high = prediction.mean_interval
    return (high - low) / 2 or None


def _expected(prediction: Prediction, corrected: tuple[float, float] | None) -> str:
    """Write what to expect: without what the search flatters, then the fitted mean."""
    interval, half = prediction.mean_interval, _half(prediction)
    mean = format_value(prediction.mean, half)
    if interval is None:
        return f"{mean} (no interval: no degrees of freedom)"
    if half is None:
        return f"{mean} (exact)"
    fitted = f"{mean} ({format_range(*interval, half)})"
    return fitted if corrected is None else f"{format_value(corrected[1], half)}; {fitted}"


def _runs_should_fall(choice: Choice, name: str) -> str:
    expected = choice.confirm.get(name)
    if expected is None:
        return "known exactly" if choice.predictions[name].mean_interval else "not known"
    ends = (expected.one, expected.three)
    return "; ".join(format_range(low, high, (high - low) / 2) for low, high in ends)


def _confirmation(choice: Choice) -> str:
    if choice.confirmation is not None:
        return f"Confirm before use: {choice.confirmation.text}. Provisional until then."
    if choice.status == "met":
        return (
            "Confirm before use: run at least three batches at the setpoint; each run and their"
            " mean must fall in the ranges marked *, which hold for all responses together with"
            " 95 %, and meet every limit. Provisional until then."
        )
    return "There is no setting to confirm yet."
