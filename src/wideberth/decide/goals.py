"""Settling what a goal leaves open: where it is poor and where it is ideal.

Left out, ``poor`` is the limit on that side or else the worst run, and ``ideal`` the best fitted
mean that can be reached in the region; every answer says so.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from wideberth.decide.records import ResolvedGoal
from wideberth.errors import refusal
from wideberth.fit.records import Model, Models, surface
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_coded
from wideberth.study.records import FloatArray, Goal, Limit, Response, Side, Study

Reach = Callable[[str, float], float]
"""Gives the largest (+1) or smallest (-1) fitted mean of a response over the region."""


def settle_goals(models: Models, reach: Reach) -> tuple[ResolvedGoal, ...]:
    """Settle every goal of the study, in the order of the responses.

    Raises
    ------
    RefusedError
        When what was left open cannot be settled, for instance because no reachable value is
        better than the poor one.
    """
    return tuple(
        _settle(models, response, response.goal, reach)
        for response in models.study.responses
        if response.goal is not None
    )


def _settle(models: Models, response: Response, goal: Goal, reach: Reach) -> ResolvedGoal:
    said: list[str] = []
    ends: tuple[Side, ...] = ("low", "high")
    sides = ends if goal.want == "near" else (("low",) if goal.want == "more" else ("high",))
    poor = goal.poor
    if poor is None:
        poor = tuple(_poor(models, response, side, said) for side in sides)
    ideal = goal.ideal
    if ideal is None:
        sign = 1.0 if goal.want == "more" else -1.0
        ideal = (reach(response.name, sign),)
        said.append("ideal from the best fitted mean within reach")
    settled = ResolvedGoal(
        response=response.name,
        unit=response.unit,
        want=goal.want,
        poor=poor,
        ideal=ideal,
        exponent=goal.exponent,
        priority=goal.priority,
        defaulted="; ".join(said),
    )
    _refuse_backwards(settled)
    return settled


def _poor(models: Models, response: Response, side: Side, said: list[str]) -> float:
    limit = _limit_on(response.limit, side)
    if limit is not None:
        said.append(f"poor from the {side} limit")
        return limit
    values = _run_values(models[response.name], models.study)
    said.append("poor from the worst run")
    return float(values.min() if side == "low" else values.max())


def _limit_on(limit: Limit | None, side: Side) -> float | None:
    if limit is None:
        return None
    return limit.low if side == "low" else limit.high


def _run_values(model: Model, study: Study) -> FloatArray:
    """Give the measured values, or an exact response evaluated at the runs."""
    if not model.exact:
        return np.array([run.observed for run in model.runs])
    x = to_coded(study.numeric, study.runs.numeric_actual[study.runs.fitted])
    values: FloatArray = (
        features(x) @ surface(model, study, levels=tuple(0 for _ in study.categorical)).coefficients
    )
    return values


def _refuse_backwards(goal: ResolvedGoal) -> None:
    if goal.want == "near":
        good = goal.poor[0] < goal.ideal[0] <= goal.ideal[1] < goal.poor[1]
    else:
        rising = goal.ideal[0] > goal.poor[0]
        good = goal.ideal[0] != goal.poor[0] and rising == (goal.want == "more")
    if not good:
        poor, ideal = (" and ".join(f"{v:.6g}" for v in e) for e in (goal.poor, goal.ideal))
        raise refusal(
            f"the goal of {goal.response} is poor at {poor} and ideal at {ideal} {goal.unit}"
            f" ({goal.defaulted or 'both stated'}), which leaves nothing to gain",
            f"study.toml, responses.{goal.response}.goal",
            "state poor and ideal so that ideal is the better of the two",
        )
