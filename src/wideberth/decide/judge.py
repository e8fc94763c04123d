"""Judging one setting: what to expect there, and how each limit and constraint stands."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal
from itertools import groupby

import numpy as np
from scipy.special import stdtrit

from wideberth.decide.arena import Arena
from wideberth.decide.desirability import desirability, overall
from wideberth.decide.problem import Problem
from wideberth.decide.records import (
    ConstraintVerdict,
    FactorRange,
    LimitVerdict,
    Prediction,
)
from wideberth.decide.room import worst_in_room
from wideberth.decide.search import HOLDS
from wideberth.errors import refusal
from wideberth.fit.records import Model, level_names, surface
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_actual, to_coded
from wideberth.study.records import FloatArray, NumericFactor, Setting, Study
from wideberth.surface.explored import factor_ranges

_TWO_SIDED = 0.975


def own_setting(study: Study, levels: tuple[int, ...], x: FloatArray) -> dict[str, float | str]:
    """Write a coded setting in own units, snapped to the settable steps where it lies on one."""
    actual = to_actual(study.numeric, x)
    numbers = {f.name: _snapped(f, float(v)) for f, v in zip(study.numeric, actual, strict=True)}
    chosen = level_names(study.categorical, levels)
    return {f.name: chosen[f.name] if f.name in chosen else numbers[f.name] for f in study.factors}


def read_setting(study: Study, setting: Setting) -> tuple[tuple[int, ...], FloatArray]:
    """Code a setting that a person gave: (levels, coded setting of shape (k,)).

    Raises
    ------
    RefusedError
        When a factor is missing or unknown, a level unknown, or a number not finite.
    """
    known = {factor.name for factor in study.factors}
    for name in setting:
        if name not in known:
            raise refusal(
                f"no factor is called {name}", "the setting given", f"use {', '.join(known)}"
            )
    for factor in study.factors:
        if factor.name not in setting:
            raise refusal(
                f"{factor.name} has no value", "the setting given", "give every factor a value"
            )
    levels = []
    for category in study.categorical:
        level = setting[category.name]
        if level not in category.levels:
            raise refusal(
                f"{category.name} has no level {level}",
                "the setting given",
                f"use one of {', '.join(category.levels)}",
            )
        levels.append(category.levels.index(str(level)))
    actual = np.array([_number(setting, factor) for factor in study.numeric])
    return tuple(levels), to_coded(study.numeric, actual)


def predictions(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> dict[str, Prediction]:
    """Predict every response at a coded setting (k,), block average."""
    goals = {goal.response: goal for goal in problem.goals}
    result = {}
    for model in problem.models.models:
        at = surface(model, problem.study, levels=levels)
        terms = features(x)
        mean = float(terms @ at.coefficients)
        goal = goals.get(model.response)
        result[model.response] = Prediction(
            unit=model.unit,
            mean=mean,
            mean_interval=_interval(model, mean, float(terms @ at.covariance @ terms), 0.0),
            batch_interval=_interval(model, mean, float(terms @ at.covariance @ terms), 1.0),
            desirability=None if goal is None else float(desirability(goal, np.array(mean))),
        )
    return result


def overall_desirability(problem: Problem, levels: tuple[int, ...], x: FloatArray) -> float | None:
    """Give D at a coded setting (k,); ``None`` without goals."""
    if not problem.goals:
        return None
    study, terms = problem.study, features(x)
    y = [
        terms @ surface(problem.models[goal.response], study, levels=levels).coefficients
        for goal in problem.goals
    ]
    return float(overall(problem.goals, np.array(y)))


def limit_verdicts(problem: Problem, rows: Arena, x: FloatArray) -> tuple[LimitVerdict, ...]:
    """Judge every limit side over the room of a coded setting (k,), at its worst block.

    ``rows`` is the arena whose mode of guarding is judged, at the setting's levels.
    """
    limits = [row for row in rows.hard if row.limit is not None]
    verdicts = []
    for limit, group in groupby(limits, key=lambda row: row.limit):
        same_side = list(group)
        margins = [worst_in_room(row, rows.room, x)[0] for row in same_side]
        worst = int(np.argmin(margins))
        here = min(float(row.value(x)) for row in same_side)
        verdicts.append(
            _verdict(problem, int(limit or 0), margins[worst], here, same_side[worst].block)
        )
    return tuple(verdicts)


def _verdict(
    problem: Problem, limit: int, margin: float, here: float, block: str | None
) -> LimitVerdict:
    side = problem.sides[limit]
    guarding = problem.guarding[side.response]
    guard = guarding.guard
    stated = next(r.limit for r in problem.study.responses if r.name == side.response)
    outward = 1.0 if side.side == "high" else -1.0
    possible = guarding.possible
    return LimitVerdict(
        response=side.response,
        unit=problem.models[side.response].unit,
        side=side.side,
        value=side.value,
        guard=guard.kind,
        confidence=stated.confidence if stated else guard.confidence,
        share=guard.share,
        point=stated.point if stated else "chosen",
        guarded=side.value - outward * margin * guarding.scale if possible else None,
        at_setting=side.value - outward * here * guarding.scale if possible else None,
        met=possible and margin >= HOLDS,
        margin=margin if possible else None,
        margin_in="batch sd" if guarding.in_batch_sd else "hundredths of the range",
        factor=guarding.factor,
        block=block,
        reason="" if possible else "the runs leave no degrees of freedom to estimate the noise",
    )


def constraint_verdicts(problem: Problem, x: FloatArray) -> tuple[ConstraintVerdict, ...]:
    """Judge every several-factor constraint over the room of a coded setting (k,)."""
    study, room = problem.study, problem.room
    names = [factor.name for factor in study.numeric]
    low, high = (to_actual(study.numeric, end) for end in (x - room.below, x + room.above))
    verdicts = []
    for constraint in study.constraints:
        weights = np.array([constraint.weights.get(name, 0.0) for name in names])
        most = float(np.maximum(weights * low, weights * high).sum())
        least = float(np.minimum(weights * low, weights * high).sum())
        slack = 1e-9 * float(np.abs(weights * (high - low)).sum() + abs(most) + abs(least))
        if constraint.at_most is not None:
            met = most <= constraint.at_most + slack
            verdicts.append(
                ConstraintVerdict(constraint.name, "at_most", constraint.at_most, most, met)
            )
        if constraint.at_least is not None:
            met = least >= constraint.at_least - slack
            verdicts.append(
                ConstraintVerdict(constraint.name, "at_least", constraint.at_least, least, met)
            )
    return tuple(verdicts)


def factor_surroundings(problem: Problem, x: FloatArray | None) -> Mapping[str, FactorRange]:
    """Say for each numeric factor what is allowed, what was explored, and the room around x."""
    study, room = problem.study, problem.room
    low, high = factor_ranges(problem.explored)
    explored = [to_actual(study.numeric, end) for end in (low, high)]
    k = len(study.numeric)
    box = [
        to_actual(study.numeric, e)
        for e in (-problem.region.bounds[:k], problem.region.bounds[k : 2 * k])
    ]
    around = None
    if x is not None:
        around = [to_actual(study.numeric, e) for e in (x - room.below, x + room.above)]
    surroundings = {}
    for j, factor in enumerate(study.numeric):
        held = factor.tolerance is not None and around is not None
        surroundings[factor.name] = FactorRange(
            unit=factor.unit,
            allowed=factor.allowed or (float(box[0][j]), float(box[1][j])),
            explored=(float(explored[0][j]), float(explored[1][j])),
            room=(float(around[0][j]), float(around[1][j])) if held and around else None,
        )
    return surroundings


def _interval(
    model: Model, mean: float, leverage: float, extra: float
) -> tuple[float, float] | None:
    """Give the two-sided 95 % interval of a mean (``extra`` 0) or of one batch (1)."""
    if model.exact or model.noise_free:
        return mean, mean
    if model.s is None or model.df_error == 0:
        return None
    variance = leverage + extra
    df = float(model.degrees(variance, extra, _TWO_SIDED))
    half = float(stdtrit(df, _TWO_SIDED)) * model.s * float(np.sqrt(variance))
    return mean - half, mean + half


def _snapped(factor: NumericFactor, value: float) -> float:
    if factor.settable_step is None:
        return value
    step = factor.settable_step
    multiple = (Decimal(repr(value)) / step).to_integral_value()
    nearest = float(multiple * step)
    on_it = abs(nearest - value) <= 1e-6 * float(step)
    return nearest if on_it else value


def _number(setting: Setting, factor: NumericFactor) -> float:
    value = setting[factor.name]
    if isinstance(value, str) or not np.isfinite(value) or (factor.scale == "log" and value <= 0):
        raise refusal(
            f"{factor.name} is {value}, which is no number that can be set",
            "the setting given",
            f"give a number in {factor.unit}",
        )
    return float(value)
