"""Other aims side by side with the best compromise, and what each of them gives up.

The least sensitive setting has the least variation transmitted from setting errors, summed over
the responses in batch standard deviations; the likeliest has the largest conformance. Both keep
every limit with its guard and of every goal at least half of what the best compromise reaches:
without that, either would wander off to settings that nobody would run.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from wideberth.decide.aims import Aim, least_of, most_of
from wideberth.decide.arena import goal_targets, goal_values
from wideberth.decide.conformance import (
    Conformance,
    conformance,
    conformance_over,
    setting_sd,
)
from wideberth.decide.judge import overall_desirability, own_setting, predictions, read_setting
from wideberth.decide.problem import Problem, arena
from wideberth.decide.records import Choice
from wideberth.decide.search import HOLDS, Found, seek
from wideberth.decide.settable import on_steps, settable_grid
from wideberth.fit.draws import Draws
from wideberth.fit.records import surface
from wideberth.progress import Progress, silent
from wideberth.quadratic.moments import setting_error_moments, transmitted_variance
from wideberth.quadratic.stack import Stack
from wideberth.study.records import FloatArray, Setting

AimName = Literal["best compromise", "least sensitive", "most likely inside"]
_KEPT = 0.5
_SCREENED_DRAWS = 500
_AT_ONCE = 2048


@dataclass(frozen=True, slots=True)
class Alternative:
    """One aim's setting with what it gives.

    Attributes
    ----------
    aim : AimName
    setpoint : Setting or None
        ``None`` with a ``reason``.
    desirability : float or None
    means, setting_sd : mapping
        Of every response, in its unit: fitted mean, and the spread that setting errors transmit.
    conformance : Conformance or None
        ``None`` without limits, or where nothing can be drawn.
    """

    aim: AimName
    setpoint: Setting | None
    desirability: float | None
    means: Mapping[str, float]
    setting_sd: Mapping[str, float]
    conformance: Conformance | None
    reason: str = ""


def alternatives(
    problem: Problem, choice: Choice, draws: Draws | None, *, progress: Progress = silent
) -> tuple[Alternative, ...]:
    """Find what other aims would name; empty unless the choice is ``met`` and was searched for."""
    if choice.status != "met" or choice.asked or choice.setpoint is None or not problem.goals:
        return ()
    levels, x = read_setting(problem.study, choice.setpoint)
    rows = arena(problem, levels, "simultaneous")
    here = np.clip(goal_targets(rows, goal_values(rows, x[None, :]))[0], 0.0, 1.0)
    # the targets carry the steepest exponent: half of a desirability is less of a target
    floor = here * np.array([_KEPT ** (1.0 / max(goal.exponent)) for goal in problem.goals])
    progress("aims", 0.2)
    calm = _least_sensitive(problem, draws, floor, choice)
    progress("aims", 0.5)
    return (
        _judged(problem, draws, "best compromise", (levels, x), choice.seed),
        calm,
        _most_likely(problem, draws, floor, choice),
    )


def _least_sensitive(
    problem: Problem, draws: Draws | None, floor: FloatArray, choice: Choice
) -> Alternative:
    sd = setting_sd(problem.study)
    if not sd.any():
        return _none("least sensitive", "no tolerance is stated, so nothing is known to wander")
    found = _best_over_levels(
        problem, lambda levels: least_of(transmitted(problem, levels, sd), floor)
    )
    if found is None:
        return _none("least sensitive", "no other setting keeps limits and goals")
    return _judged(problem, draws, "least sensitive", found, choice.seed)


def _most_likely(
    problem: Problem, draws: Draws | None, floor: FloatArray, choice: Choice
) -> Alternative:
    name: AimName = "most likely inside"
    if not problem.sides:
        return _none(name, "no limit is stated")
    if draws is None:
        return _none(name, "nothing can be drawn from these runs")
    sd, some = setting_sd(problem.study), draws.part(0, _SCREENED_DRAWS)

    def aim(levels: tuple[int, ...]) -> Aim:
        def share(x: FloatArray) -> FloatArray:
            parts = [x[i : i + _AT_ONCE] for i in range(0, len(x), _AT_ONCE)]
            held = [conformance_over(problem, some, levels, p, sd, choice.seed) for p in parts]
            return np.concatenate([np.zeros(0), *(one for one in held if one is not None)])

        return most_of(share, floor)

    found = _best_over_levels(problem, aim)
    if found is None:
        return _none(name, "no other setting keeps limits and goals")
    return _judged(problem, draws, name, found, choice.seed)


def transmitted(problem: Problem, levels: tuple[int, ...], sd: FloatArray) -> FloatArray:
    """Give the variance that setting errors ``sd`` (k,) transmit, as a quadratic (p,).

    Summed over the responses with a goal or a limit, each in squared batch standard deviations
    (exact ones: in squared hundredths of the mean at the middle of the region).
    """
    asked = {goal.response for goal in problem.goals} | {side.response for side in problem.sides}
    total = np.zeros(0)
    for model in problem.models.models:
        if model.response in asked:
            at = surface(model, problem.study, levels=levels)
            stack = Stack.from_coefficients(at.coefficients, len(sd))
            scale = at.s or abs(float(stack.value(problem.region.middle))) / 100 or 1.0
            part = transmitted_variance(stack, sd).coefficients() / scale**2
            total = part if not len(total) else total + part
    return total


def _best_over_levels(
    problem: Problem, aim_at: Callable[[tuple[int, ...]], Aim]
) -> tuple[tuple[int, ...], FloatArray] | None:
    grid = settable_grid(problem.study.numeric, problem.tight)
    best: tuple[tuple[int, ...], Found] | None = None
    for levels in problem.combinations:
        rows = arena(problem, levels, "simultaneous")
        aim = aim_at(levels)
        free = seek(rows, aim)
        if free is None or not np.isfinite(free.score):
            continue
        found = on_steps(rows, grid, aim, free)
        if found is None or found.worst.min(initial=np.inf) < HOLDS:
            continue
        if np.isfinite(found.score) and (best is None or found.score > best[1].score):
            best = (levels, found)
    return None if best is None else (best[0], best[1].x)


def _judged(
    problem: Problem,
    draws: Draws | None,
    name: AimName,
    found: tuple[tuple[int, ...], FloatArray],
    seed: int,
) -> Alternative:
    levels, x = found
    sd = setting_sd(problem.study)
    held = None
    if draws is not None:
        held = conformance(problem, draws, levels, x, sd, seed)
    spread = {}
    for model in problem.models.models:
        at = surface(model, problem.study, levels=levels)
        moments = setting_error_moments(Stack.from_coefficients(at.coefficients, len(x)), x, sd)
        spread[model.response] = float(np.sqrt(moments.variance))
    return Alternative(
        aim=name,
        setpoint=own_setting(problem.study, levels, x),
        desirability=overall_desirability(problem, levels, x),
        means={name: one.mean for name, one in predictions(problem, levels, x).items()},
        setting_sd=spread,
        conformance=held,
    )


def _none(name: AimName, reason: str) -> Alternative:
    return Alternative(name, None, None, {}, {}, None, reason)
