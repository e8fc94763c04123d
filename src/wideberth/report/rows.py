"""Table rows that the shell and the memo share, so that both say the same."""

from __future__ import annotations

import numpy as np

from wideberth.decide.frontier import Frontier, FrontierPoint
from wideberth.operate.records import Wander, Window
from wideberth.report.numbers import format_range, format_setting, format_value, named
from wideberth.report.wording import ends_words, shares_words
from wideberth.study.records import NumericFactor, Study


def window_row(box: Window, factor: NumericFactor) -> tuple[str, ...]:
    """Write one factor of a window: name, window, what stops it below and above, taken alone."""
    stop = box.stopped_by[factor.name]
    return (
        named(factor.name, factor.unit),
        ends_words(factor, box.settable[factor.name], inwards=True),
        stop.low or "nothing",
        stop.high or "nothing",
        ends_words(factor, box.singly[factor.name], inwards=True),
    )


def wander_row(name: str, one: Wander) -> tuple[str, ...]:
    """Write one response: shift, sd from settings, sd from batches, means in the room, made by."""
    size = one.sd_total or one.sd_setting or None
    return (
        named(name, one.unit),
        format_value(one.shift, size),
        format_value(one.sd_setting, size),
        "not known" if one.sd_batch is None else format_value(one.sd_batch, size),
        format_range(*one.worst, size),
        shares_words(one.shares),
    )


def frontier_row(answer: Frontier, point: FrontierPoint, study: Study) -> tuple[str, ...]:
    """Write one setting of the frontier: settings, means of the goals' responses, D."""
    means = np.array([[p.means[g.response] for g in answer.goals] for p in answer.points])
    spans = np.ptp(means, axis=0) if len(answer.points) > 1 else np.zeros(len(answer.goals))
    return (
        *(format_setting(study, f.name, point.setting[f.name]) for f in study.factors),
        *(
            format_value(point.means[goal.response], float(span) / 10 or None)
            for goal, span in zip(answer.goals, spans, strict=True)
        ),
        f"{point.desirability:.3f}",
    )
