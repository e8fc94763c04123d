"""How much the priorities matter: how far each may move before the setpoint leaves its tolerance.

One priority at a time is multiplied, the others kept; settings are compared before rounding to
steps. A factor without a tolerance counts as left when it moves by a twentieth of what was
explored.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.judge import own_setting
from wideberth.decide.problem import Place, Problem, mode_of
from wideberth.decide.proving import best_everywhere
from wideberth.decide.records import Choice
from wideberth.progress import Progress, silent
from wideberth.study.records import FloatArray, Setting
from wideberth.surface.explored import factor_ranges

FARTHEST = 8.0
"""Priorities are multiplied and divided by this at most."""
_HALVINGS = 5
_TWENTIETH = 0.05


@dataclass(frozen=True, slots=True)
class Sway:
    """One goal's priority, and what it sways.

    Attributes
    ----------
    response : str
    priority : float
    down, up : float or None
        The priority at which the setpoint leaves its tolerance when it matters less or more;
        ``None`` where an eighth, or eight times, still keeps it.
    doubled : Setting
        The best setting with this priority doubled, before settable steps.
    """

    response: str
    priority: float
    down: float | None
    up: float | None
    doubled: Setting


@dataclass(frozen=True, slots=True)
class Priorities:
    """All goals' priorities: ``equal`` is the best setting when they all count alike."""

    sways: tuple[Sway, ...]
    equal: Setting


def priorities(
    problem: Problem, choice: Choice, *, progress: Progress = silent
) -> Priorities | None:
    """Sway every priority; ``None`` unless the choice is ``met`` with several goals."""
    if choice.status != "met" or choice.asked or len(problem.goals) < 2:
        return None
    base = _best(problem)
    if base is None:
        return None
    near = _near(problem)
    sways = []
    for i, goal in enumerate(problem.goals):
        progress("priorities", i / len(problem.goals))
        found = _best(_multiplied(problem, i, 2.0)) or base
        sways.append(
            Sway(
                goal.response,
                goal.priority,
                _turning(problem, base, near, i, 1.0 / FARTHEST),
                _turning(problem, base, near, i, FARTHEST),
                own_setting(problem.study, *found),
            )
        )
    alike = tuple(replace(goal, priority=1.0) for goal in problem.goals)
    equal = _best(replace(problem, goals=alike)) or base
    return Priorities(tuple(sways), own_setting(problem.study, *equal))


def _best(problem: Problem) -> Place | None:
    """Find the free optimum over all levels."""
    found = best_everywhere(problem, mode_of(problem))
    return None if found is None else (found[0], found[1].x)


def _near(problem: Problem) -> FloatArray:
    """Give how far each factor may move before it has left, coded: (k,)."""
    low, high = factor_ranges(problem.explored)
    stated = np.maximum(problem.room.below, problem.room.above)
    result: FloatArray = np.where(stated > 0, stated, _TWENTIETH * (high - low))
    return result


def _multiplied(problem: Problem, goal: int, by: float) -> Problem:
    goals = list(problem.goals)
    goals[goal] = replace(goals[goal], priority=goals[goal].priority * by)
    return replace(problem, goals=tuple(goals))


def _turning(
    problem: Problem, base: Place, near: FloatArray, goal: int, farthest: float
) -> float | None:
    """Bisect on a log scale for the priority at which the setting leaves."""

    def stays(by: float) -> bool:
        found = _best(_multiplied(problem, goal, by))
        return (
            found is not None
            and found[0] == base[0]
            and bool((np.abs(found[1] - base[1]) <= near).all())
        )

    if stays(farthest):
        return None
    inner, outer = 0.0, float(np.log(farthest))
    for _ in range(_HALVINGS):
        middle = (inner + outer) / 2
        if stays(float(np.exp(middle))):
            inner = middle
        else:
            outer = middle
    return problem.goals[goal].priority * float(np.exp((inner + outer) / 2))
