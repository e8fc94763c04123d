"""Doubtful statements: nothing is wrong with them as written, but a reader should look again."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

import numpy as np

from wideberth.study.records import (
    Finding,
    FloatArray,
    Limit,
    NumericFactor,
    Response,
    Study,
)
from wideberth.study.resets import seldom_reset

_TOGETHER = 1 - 1e-9
_ALONE = 0.25
_FAR_BEYOND = 0.5
_CODED = 3.0


def check_study(study: Study) -> tuple[Finding, ...]:
    """Find everything doubtful in a study that could be read, its reading notes included."""
    return (
        *study.notes,
        *_goals_and_limits(study),
        *_factors(study),
        *_sets_of_factors(study),
        *seldom_reset(study),
        *_today(study),
    )


def _doubt(text: str, about: str = "") -> Finding:
    return Finding("look", text, about)


def _goals_and_limits(study: Study) -> Iterator[Finding]:
    fitted = study.runs.fitted
    for response in study.responses:
        if response.formula is None and response.limit is not None:
            column = study.runs.measured[fitted, study.measured.index(response)]
            yield from _limit_out_of_reach(response, response.limit, column)
        yield from _goal_against_limit(response)


def _limit_out_of_reach(response: Response, limit: Limit, column: FloatArray) -> Iterator[Finding]:
    least, most = float(np.nanmin(column)), float(np.nanmax(column))
    for bound, missed, word in (
        (limit.low, limit.low is not None and limit.low > most, "above every measured value"),
        (limit.high, limit.high is not None and limit.high < least, "below every measured value"),
    ):
        if missed:
            yield _doubt(
                f"{response.name}: the limit {bound:g} lies {word} ({least:g} to {most:g}"
                f" {response.unit}); is it in the same unit?",
                response.name,
            )


def _goal_against_limit(response: Response) -> Iterator[Finding]:
    goal, limit = response.goal, response.limit
    if goal is None or limit is None or goal.ideal is None:
        return
    too_low = limit.low is not None and max(goal.ideal) < limit.low
    too_high = limit.high is not None and min(goal.ideal) > limit.high
    if too_low or too_high:
        yield _doubt(
            f"{response.name}: the ideal {goal.ideal[0]:g} {response.unit} breaks its own limit;"
            " one of the two is not meant so.",
            response.name,
        )


def _factors(study: Study) -> Iterator[Finding]:
    fitted = study.runs.fitted
    for j, factor in enumerate(study.numeric):
        values = study.runs.numeric_actual[fitted, j]
        yield from _tolerance(factor)
        yield from _coded_or_alone(factor, values)
        if np.ptp(values) == 0.0:
            yield _doubt(
                f"{factor.name}: every run was made at {values[0]:g} {factor.unit}; its effect"
                " cannot be known.",
                factor.name,
            )


def _tolerance(factor: NumericFactor) -> Iterator[Finding]:
    if factor.tolerance is None or factor.scale == "log":
        return
    low, high = factor.allowed or (factor.low, factor.high)
    if 2 * factor.tolerance >= high - low:
        yield _doubt(
            f"{factor.name}: the tolerance {factor.tolerance:g} {factor.unit} spans all of"
            f" {low:g} to {high:g} {factor.unit}; is it plus or minus?",
            factor.name,
        )


def _coded_or_alone(factor: NumericFactor, values: FloatArray) -> Iterator[Finding]:
    outside = ((values < factor.low) | (values > factor.high)).all()
    if outside and np.abs(values).max() <= _CODED:
        yield _doubt(
            f"{factor.name}: the sheet holds {values.min():g} to {values.max():g}, none of it"
            f" between low {factor.low:g} and high {factor.high:g} {factor.unit}; the settings"
            " look coded.",
            factor.name,
        )
        return
    ordered = np.sort(np.log(values) if factor.scale == "log" else values)
    span = ordered[-1] - ordered[0]
    if len(ordered) < 3 or span == 0.0:
        return
    for end, gap in (("lowest", ordered[1] - ordered[0]), ("highest", ordered[-1] - ordered[-2])):
        ends = (ordered == ordered[0 if end == "lowest" else -1]).sum()
        if ends == 1 and gap > _ALONE * span and len(np.unique(ordered)) > 5:
            yield _doubt(
                f"{factor.name}: one run reaches out alone at the {end} setting; the region there"
                " rests on it.",
                factor.name,
            )
    if factor.allowed is not None:
        low, high = np.log(factor.allowed) if factor.scale == "log" else np.array(factor.allowed)
        if low < ordered[0] - _FAR_BEYOND * span or high > ordered[-1] + _FAR_BEYOND * span:
            yield _doubt(
                f"{factor.name}: allowed reaches far beyond what the runs span; only the explored"
                " part is searched.",
                factor.name,
            )


def _sets_of_factors(study: Study) -> Iterator[Finding]:
    fitted = study.runs.fitted
    values = study.runs.numeric_actual[fitted]
    moving = [j for j in range(values.shape[1]) if np.ptp(values[:, j]) > 0]
    names = [factor.name for factor in study.numeric]
    for a, b in combinations(moving, 2):
        correlation = np.corrcoef(values[:, a], values[:, b])[0, 1]
        if abs(correlation) >= _TOGETHER:
            yield _doubt(
                f"{names[a]} and {names[b]} always moved together; their effects cannot be told"
                " apart."
            )
    totals = values[:, moving].sum(axis=1)
    if len(moving) > 2 and np.ptp(totals) <= 1e-9 * max(float(np.abs(totals).max()), 1e-300):
        yield _doubt(
            f"{', '.join(names[j] for j in moving)} always sum to {totals[0]:g}: this looks like a"
            " mixture, for which these models are not made."
        )


def _today(study: Study) -> Iterator[Finding]:
    for factor in study.numeric:
        value = study.today.get(factor.name)
        if isinstance(value, str) or value is None or factor.allowed is None:
            continue
        if not factor.allowed[0] <= value <= factor.allowed[1]:
            yield _doubt(
                f"{factor.name}: today's {value:g} {factor.unit} lies outside the allowed"
                f" {factor.allowed[0]:g} to {factor.allowed[1]:g}.",
                factor.name,
            )
