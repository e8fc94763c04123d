"""What each limit and goal bound costs: the problem solved again a little tighter and looser.

A step is a natural one: about half a batch standard deviation, or a fiftieth of a goal's span,
rounded to 1, 2 or 5. Settings are those before the settable steps, so that rounding hides nothing.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from wideberth.decide.problem import Mode, Problem
from wideberth.decide.proving import best_everywhere
from wideberth.decide.records import Choice, ResolvedGoal
from wideberth.fit.records import surface
from wideberth.progress import Progress, silent
from wideberth.quadratic.terms import features

_HALF_SD = 0.5
_FIFTIETH = 0.02
_OF_MEAN = 0.01


@dataclass(frozen=True, slots=True)
class Change:
    """What one step does: to D, and to the mean of every response in its unit.

    ``desirability`` is ``None`` where no setting holds the limits any more.
    """

    desirability: float | None
    responses: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class GiveUp:
    """One bound moved by a step both ways, everything else kept.

    Attributes
    ----------
    kind : {"limit", "goal"}
    response, unit : str
    bound : str
        ``low`` or ``high`` of a limit; ``poor`` or ``ideal`` of a goal, with its side where there
        are two.
    value, step : float
        In the response's unit.
    tighter, looser : Change
        Asking more and asking less.
    per_unit : float or None
        Change of D for one unit less asked, from the two steps; ``None`` where one has no answer.
    scales, units : mapping
        Of every response: the batch standard deviation (exact ones: 1 % of the mean) and the unit.
    """

    kind: Literal["limit", "goal"]
    response: str
    unit: str
    bound: str
    value: float
    step: float
    tighter: Change
    looser: Change
    per_unit: float | None
    scales: Mapping[str, float]
    units: Mapping[str, str]


def give_ups(
    problem: Problem, choice: Choice, *, progress: Progress = silent
) -> tuple[GiveUp, ...]:
    """Move every limit and every goal's bound a step; empty unless the choice is ``met``."""
    if choice.status != "met" or choice.asked or not problem.goals:
        return ()
    base = _solved(problem, "simultaneous")
    if base is None:
        return ()
    bounds = [*_limits(problem), *_goals(problem)]
    scales = {
        model.response: model.s or _OF_MEAN * abs(base[1][model.response])
        for model in problem.models.models
    }
    units = {model.response: model.unit for model in problem.models.models}
    found = []
    for done, one in enumerate(bounds):
        progress("give-ups", done / len(bounds))
        tighter = _change(base, _solved(one.moved(problem, one.step), "simultaneous"))
        looser = _change(base, _solved(one.moved(problem, -one.step), "simultaneous"))
        per_unit = None
        if tighter.desirability is not None and looser.desirability is not None:
            per_unit = (looser.desirability - tighter.desirability) / (2 * one.step)
        model = problem.models[one.response]
        found.append(
            GiveUp(
                one.kind,
                one.response,
                model.unit,
                one.bound,
                one.value,
                one.step,
                tighter,
                looser,
                per_unit,
                scales,
                units,
            )
        )
    return tuple(found)


@dataclass(frozen=True, slots=True)
class _Bound:
    """One bound that can be moved: ``place`` finds it, ``inward`` is the way of asking more."""

    kind: Literal["limit", "goal"]
    response: str
    bound: str
    value: float
    step: float
    inward: float
    place: tuple[int, int]

    def moved(self, problem: Problem, step: float) -> Problem:
        """Ask for ``step`` more (or less where negative)."""
        value = self.value + self.inward * step
        index, part = self.place
        if self.kind == "limit":
            sides = list(problem.sides)
            sides[index] = replace(sides[index], value=value)
            return replace(problem, sides=tuple(sides))
        goals = list(problem.goals)
        goals[index] = _with_bound(goals[index], self.bound.split()[0], part, value)
        return replace(problem, goals=tuple(goals))


def _with_bound(goal: ResolvedGoal, name: str, part: int, value: float) -> ResolvedGoal:
    ends = list(goal.poor if name == "poor" else goal.ideal)
    if name == "ideal" and goal.want == "near" and ends[0] == ends[1]:
        ends = [value, value]
    else:
        ends[part] = value
    return replace(goal, poor=tuple(ends)) if name == "poor" else replace(goal, ideal=tuple(ends))


def _limits(problem: Problem) -> list[_Bound]:
    found = []
    for i, side in enumerate(problem.sides):
        step = natural_step(_HALF_SD * problem.guarding[side.response].scale)
        inward = -1.0 if side.side == "high" else 1.0
        found.append(_Bound("limit", side.response, side.side, side.value, step, inward, (i, 0)))
    return found


def _goals(problem: Problem) -> list[_Bound]:
    """List the bounds of one-sided goals and the outer and inner ends of bands."""
    found = []
    for i, goal in enumerate(problem.goals):
        for name, ends in (("poor", goal.poor), ("ideal", goal.ideal)):
            for part, value in enumerate(ends):
                if goal.want == "near" and name == "ideal" and goal.ideal[0] == goal.ideal[1]:
                    # a point target has no tighter or looser way
                    continue
                span = abs(goal.poor[part] - goal.ideal[part])
                rises = goal.want == "more" or (goal.want == "near" and part == 0)
                label = name if goal.want != "near" else f"{name} {('low', 'high')[part]}"
                step = natural_step(_FIFTIETH * span)
                inward = 1.0 if rises else -1.0
                found.append(_Bound("goal", goal.response, label, value, step, inward, (i, part)))
    return found


def natural_step(size: float) -> float:
    """Round a size to 1, 2 or 5 times a power of ten, the nearest on a log scale."""
    power = 10.0 ** np.floor(np.log10(size))
    choices = np.array([1.0, 2.0, 5.0, 10.0]) * power
    return float(choices[np.abs(np.log(choices / size)).argmin()])


def _solved(problem: Problem, mode: Mode) -> tuple[float, dict[str, float]] | None:
    """Find D and every response's mean at the free optimum over all levels."""
    found = best_everywhere(problem, mode)
    if found is None:
        return None
    where, best = found
    terms = features(best.x)
    means = {
        model.response: float(terms @ surface(model, problem.study, levels=where).coefficients)
        for model in problem.models.models
    }
    return float(np.exp(best.score)), means


def _change(
    base: tuple[float, dict[str, float]], other: tuple[float, dict[str, float]] | None
) -> Change:
    if other is None:
        return Change(None, {})
    return Change(
        other[0] - base[0], {name: mean - base[1][name] for name, mean in other[1].items()}
    )
