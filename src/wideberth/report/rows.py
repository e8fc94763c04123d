"""Table rows that the shell and the memo share, so that both say the same."""

from __future__ import annotations

import numpy as np

from wideberth.decide.alternatives import Alternative
from wideberth.decide.frontier import Frontier, FrontierPoint
from wideberth.fit.records import Models
from wideberth.operate.records import Wander, Window
from wideberth.report.numbers import format_range, format_setting, format_value, named
from wideberth.report.wording import batches_in_100, ends_words, setting_words, shares_words
from wideberth.study.records import NumericFactor, Study
from wideberth.uncertainty.records import OptimumRegion, Uncertainty


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


def region_header(sure: Uncertainty) -> tuple[str, ...]:
    """Head the table of the optimum's region: factor, setting, one column a level."""
    return ("Factor", "Setting", *(f"{100 * region.level:g} %" for region in _regions(sure)))


def region_row(sure: Uncertainty, factor: NumericFactor, study: Study) -> tuple[str, ...]:
    """Write one factor's smallest and largest value in the region at each level."""
    setting = (
        ""
        if sure.setting is None
        else format_setting(study, factor.name, sure.setting[factor.name])
    )
    ends = (ends_words(factor, region.ranges[factor.name]) for region in _regions(sure))
    return (named(factor.name, factor.unit), setting, *ends)


def _regions(sure: Uncertainty) -> tuple[OptimumRegion, ...]:
    return (*sure.narrower, *((sure.region,) if sure.region is not None else ()))


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


def alternative_header(models: Models) -> tuple[str, ...]:
    """Head the table of aims: aim, setting, every response, batches inside all limits, D."""
    names = (named(model.response, model.unit) for model in models.models)
    return ("Aim", "Setting", *names, "Inside all limits", "D")


def alternative_row(
    one: Alternative, every: tuple[Alternative, ...], study: Study
) -> tuple[str, ...]:
    """Write one aim: its setting, each mean with the spread from settings, conformance, D."""
    cells = []
    for name, mean in one.means.items():
        means = [other.means[name] for other in every if other.means]
        size = float(max(np.ptp(means) / 5, one.setting_sd[name])) or None
        spread = one.setting_sd[name]
        text = format_value(mean, size)
        cells.append(f"{text} ({format_value(spread, spread)})" if spread > 0 else text)
    inside = "not known" if one.conformance is None else batches_in_100(one.conformance.mean)
    score = "" if one.desirability is None else f"{one.desirability:.3f}"
    setting = "" if one.setpoint is None else setting_words(study, one.setpoint)
    return (one.aim, setting, *cells, inside, score)
