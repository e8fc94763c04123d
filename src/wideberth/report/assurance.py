"""How sure the setpoint is, how far it may move, what to try next: the parts after the limits."""

from __future__ import annotations

from wideberth.chain.record import Record
from wideberth.report.blocks import Block, Bullets, Drawing, Heading, Paragraph, Table
from wideberth.report.numbers import format_range, format_setting, format_value, named, with_unit
from wideberth.report.ridge_figure import draw_ridge
from wideberth.report.rows import region_header, region_row, wander_row, window_row
from wideberth.report.shares_figure import draw_shares
from wideberth.report.style import to_svg
from wideberth.report.wording import (
    SINGLY_WARNING,
    difference_words,
    location_sentence,
    loss_sentence,
    lost_sentences,
    setting_words,
    shares_words,
    today_sentences,
    together_sentences,
    window_sentence,
)


def assurance(record: Record) -> list[Block]:
    """Write the parts on doubt, window, wandering settings and runs to try."""
    return [*_doubt(record), *_window(record), *_wandering(record), *_beyond(record)]


def _doubt(record: Record) -> list[Block]:
    sure, study = record.uncertainty, record.study
    blocks: list[Block] = [Heading(3, "How sure this is")]
    if sure.reason:
        return [*blocks, Paragraph(f"Nothing can be said: {sure.reason}.")]
    blocks.append(
        Paragraph(
            f"The same question was asked of {sure.draws} sets of equations that the runs allow as"
            " well; the spread of the answers is the doubt."
        )
    )
    said = (
        location_sentence(sure),
        *together_sentences(sure),
        *lost_sentences(sure),
        *loss_sentence(sure, record.choice),
    )
    levels = tuple(
        f"{n}: best in {100 * s:.0f} of 100 draws." for n, s in sure.level_shares.items()
    )
    findings = tuple(finding.text for finding in sure.findings)
    blocks.append(Bullets("", (*said, *levels, *findings)))
    if sure.region is not None and record.choice.setpoint is not None:
        rows = tuple(region_row(sure, factor, study) for factor in study.numeric)
        caption = "Where the optimum may lie: smallest to largest in its region, by how sure"
        blocks.append(Table(caption, region_header(sure), rows))
    return [*blocks, *_corrected(record), *_against_today(record)]


def _against_today(record: Record) -> list[Block]:
    today = record.uncertainty.today
    if today is None:
        return []
    rows = []
    for name, change in today.differences.items():
        before, now = today.predictions[name], record.choice.predictions[name]
        half = (change.interval[1] - change.interval[0]) / 2 if change.interval else None
        rows.append(
            (
                named(name, before.unit),
                format_value(before.mean, half or None),
                format_value(now.mean, half or None),
                difference_words(change),
            )
        )
    header = ("Response", "Today", "This setting", "Change, 95 %")
    words = f"Today's setting: {setting_words(record.study, today.setting)}."
    return [
        Table("Against today's setting", header, tuple(rows)),
        Paragraph(" ".join([words, *today_sentences(record.uncertainty)])),
    ]


def _corrected(record: Record) -> list[Block]:
    optimism = record.uncertainty.optimism
    if optimism is None:
        return []
    rows = []
    for name, (bias, corrected) in optimism.responses.items():
        prediction = record.choice.predictions[name]
        interval = prediction.mean_interval
        half = (interval[1] - interval[0]) / 2 if interval else None
        if not half:
            continue
        unit = prediction.unit
        rows.append(
            (
                named(name, unit),
                format_value(prediction.mean, half),
                format_value(bias, half),
                format_value(corrected, half),
            )
        )
    header = ("Response", "Fitted mean", "Too high by about", "Corrected")
    return [Table("Expected values without what the search flatters", header, tuple(rows))]


def _window(record: Record) -> list[Block]:
    box = record.window
    blocks: list[Block] = [Heading(3, "Operating window"), Paragraph(window_sentence(box))]
    if box.status == "none":
        return [*blocks, Bullets("What must give", box.must_give, tone="doubt")]
    rows = tuple(window_row(box, factor) for factor in record.study.numeric)
    header = ("Factor", "Window", "Stopped below by", "Stopped above by", "Taken alone")
    return [*blocks, Table("The window and what stops it", header, rows), Paragraph(SINGLY_WARNING)]


def _wandering(record: Record) -> list[Block]:
    answer = record.robustness
    if not any(one.shares for one in answer.responses.values()):
        return [Heading(3, "When settings wander"), Paragraph(answer.advice)]
    rows = tuple(wander_row(name, one) for name, one in answer.responses.items())
    header = (
        "Response",
        "Shift of the mean",
        "sd from settings",
        "sd from batches",
        "Mean anywhere in the room",
        "Made by",
    )
    figure = to_svg(draw_shares(answer), "shares")
    alt = "; ".join(f"{n}: {shares_words(one.shares)}" for n, one in answer.responses.items())
    return [
        Heading(3, "When settings wander"),
        Paragraph(
            "A tolerance is taken as a normal error with 95 % inside; what it does to every"
            f" response follows exactly from the equations. {answer.advice}"
        ),
        Drawing(figure, f"Shares of variance by factor: {alt}.", "What setting error adds."),
        Table("What wandering settings do", header, rows),
    ]


def _beyond(record: Record) -> list[Block]:
    answer, study = record.outward, record.study
    if not answer.runs:
        return []
    names = list(answer.runs[0].predictions)
    rows = []
    for run in answer.runs:
        cells = [f"{run.reach:g}"]
        cells += [format_setting(study, f.name, run.setting[f.name]) for f in study.factors]
        for name in names:
            one = run.predictions[name]
            interval = one.mean_interval
            half = (interval[1] - interval[0]) / 2 if interval else None
            text = format_value(one.mean, half or None)
            cells.append(f"{text} ({format_range(*interval, half)})" if interval and half else text)
        cells.append(f"{run.leverage_ratio:.1f}")
        rows.append(tuple(cells))
    units = {model.response: model.unit for model in record.models.models}
    header = (
        "Reach",
        *(named(f.name, f.unit) for f in study.factors),
        *(f"{named(name, units[name])}, 95 %" for name in names),
        "Leverage ratio",
    )
    last = answer.runs[-1]
    return [
        Heading(3, "Runs to try beyond what was explored"),
        Paragraph(
            "The best compromise leans on the edge of what was tried, and the equations rise beyond"
            f" it: at {with_unit(f'{last.reach:g}', 'times')} the explored reach the overall"
            f" desirability would be {last.desirability or 0:.3f}. That is extrapolation. These are"
            " runs to try, one after the other and under supervision, never settings to use; stop"
            " where a result falls outside its interval. Above 1 the leverage ratio says how much"
            " less is known there than at any run."
        ),
        Drawing(
            to_svg(draw_ridge(answer), "ridge"),
            f"Mean and 95 % band of {', '.join(names)} along the ridge of the compromise.",
            "Along the ridge; dashed beyond the explored edge, circles are the runs to try.",
        ),
        Table("Runs to try, not settings to use", header, tuple(rows)),
    ]
