"""What a search can be after: a program to refine with, and how to score a setting exactly.

Scores are evaluated from the models themselves, never taken from the refinement.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from wideberth.decide.arena import (
    Arena,
    Cuts,
    goal_targets,
    goal_values,
    limit_margins,
    log_desirability,
)
from wideberth.decide.program import Program
from wideberth.decide.questions import (
    Question,
    best_desirability,
    largest_inside,
    largest_margin,
    largest_uncapped,
    largest_value,
    least_relaxation,
    least_violation,
)
from wideberth.quadratic.terms import features
from wideberth.study.records import FloatArray

_GRADED_BELOW = 0.05
_FIRST_TARGET = 1e-2
_MET = -1e-9
_MET_FLOOR = 1e-9
_STEEP = 20.0
_HAIR = 1e-6

Scorer = Callable[[Arena, FloatArray, FloatArray], FloatArray]
"""Takes the arena, settings (N, k) and their hard values (n_hard, N)."""


@dataclass(frozen=True, slots=True)
class Aim:
    """One aim of a search.

    Attributes
    ----------
    program : Question
    score : Scorer
        What is maximised, (N,).
    graded : Scorer
        The same for screening: finite where the score is minus infinity, (N,).
    targets : Scorer
        Where the targets of a refinement start, (N, T).
    holds_limits : bool
        Whether a setting that breaks a limit is out of the question.
    """

    program: Question
    score: Scorer
    graded: Scorer
    targets: Scorer
    holds_limits: bool


def _targets_of_goals(arena: Arena, x: FloatArray) -> FloatArray:
    return goal_targets(arena, goal_values(arena, x))


def _log_d(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
    return log_desirability(arena, _targets_of_goals(arena, x))


def _graded_log_d(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
    targets = _targets_of_goals(arena, x)
    short = np.minimum(targets - _GRADED_BELOW, 0.0).sum(axis=1) / _GRADED_BELOW
    graded: FloatArray = log_desirability(arena, np.maximum(targets, _GRADED_BELOW)) + short
    return graded


def _first_goal_targets(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
    return np.clip(0.9 * _targets_of_goals(arena, x), _FIRST_TARGET, 0.9)


def _smallest_uncapped(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
    smallest: FloatArray = _targets_of_goals(arena, x).min(axis=1)
    return smallest


def _smallest_margin(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
    smallest: FloatArray = limit_margins(arena, values).min(axis=0)
    return smallest


def _violation(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
    total: FloatArray = np.minimum(limit_margins(arena, values), 0.0).sum(axis=0)
    return total


def _just_below(score: Scorer) -> Scorer:
    def targets(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        return score(arena, x, values)[:, None] - _FIRST_TARGET

    return targets


def _violations(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
    return np.minimum(limit_margins(arena, values), 0.0).T - _FIRST_TARGET


BEST = Aim(best_desirability, _log_d, _graded_log_d, _first_goal_targets, holds_limits=True)
SAFEST = Aim(
    largest_margin,
    _smallest_margin,
    _smallest_margin,
    _just_below(_smallest_margin),
    holds_limits=False,
)
LEAST_POOR = Aim(
    largest_uncapped,
    _smallest_uncapped,
    _smallest_uncapped,
    _just_below(_smallest_uncapped),
    holds_limits=True,
)
NEAREST = Aim(least_violation, _violation, _violation, _violations, holds_limits=False)


def peak(curve: FloatArray) -> Aim:
    """Aim at the largest value of one quadratic, coefficients (p,), without regard to limits."""

    def value(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        result: FloatArray = features(x) @ curve
        return result

    return Aim(largest_value(curve), value, value, _just_below(value), holds_limits=False)


def relaxation(limit: int) -> Aim:
    """Aim at the largest margin of one limit side among settings that hold all the others."""

    def apart(arena: Arena, values: FloatArray) -> tuple[FloatArray, FloatArray]:
        margins = limit_margins(arena, values)
        place = arena.limits.index(limit)
        others = np.delete(margins, place, axis=0).min(axis=0, initial=np.inf)
        return margins[place], others

    def score(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        margin, others = apart(arena, values)
        return np.where(others >= _MET, margin, -np.inf)

    def graded(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        margin, others = apart(arena, values)
        result: FloatArray = margin + _STEEP * np.minimum(others, 0.0)
        return result

    def targets(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        return apart(arena, values)[0][:, None] - _FIRST_TARGET

    return Aim(least_relaxation(limit), score, graded, targets, holds_limits=False)


def least_of(curve: FloatArray, goal_floor: FloatArray) -> Aim:
    """Aim at the least value of a quadratic, coefficients (p,), inside all limits.

    Every goal's target keeps its floor (n_goals,).
    """

    def value(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        result: FloatArray = -(features(x) @ curve)
        return result

    def program(arena: Arena, cuts: Cuts) -> Program:
        return largest_inside(-curve, goal_floor)(arena, cuts)

    kept = _above_floor(goal_floor, value)
    graded = _toward_floor(goal_floor, value)
    return Aim(program, kept, graded, _just_below(value), holds_limits=True)


def most_of(share: Callable[[FloatArray], FloatArray], goal_floor: FloatArray) -> Aim:
    """Aim at the largest ``share``, a function of settings (N, k), inside all limits.

    Every goal's target keeps its floor (n_goals,). Refined on the smallest margin, which is smooth
    where a simulated share is not; ties go to the larger margin.
    """

    def value(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        margin = _smallest_margin(arena, x, values)
        return share(x) + _HAIR * margin / (1.0 + np.abs(margin))

    def program(arena: Arena, cuts: Cuts) -> Program:
        return largest_margin(arena, cuts, goal_floor)

    kept = _above_floor(goal_floor, value)
    graded = _toward_floor(goal_floor, value)
    return Aim(program, kept, graded, _just_below(_smallest_margin), holds_limits=True)


def _above_floor(goal_floor: FloatArray, value: Scorer) -> Scorer:
    def score(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        short = (goal_floor - _targets_of_goals(arena, x)).max(axis=1, initial=-np.inf)
        return np.where(short <= _MET_FLOOR, value(arena, x, values), -np.inf)

    return score


def _toward_floor(goal_floor: FloatArray, value: Scorer) -> Scorer:
    def graded(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        short = np.minimum(_targets_of_goals(arena, x) - goal_floor, 0.0).sum(axis=1)
        result: FloatArray = value(arena, x, values) + _STEEP * short
        return result

    return graded


def tie_break(goal_floor: FloatArray, least_log_d: FloatArray | float, *, by_margin: bool) -> Aim:
    """Among settings that keep log D, aim at the one farthest from trouble.

    ``goal_floor`` (n_goals, ...) is what each goal's target must keep in the refinement; settings
    below ``least_log_d`` score minus infinity.
    """
    height = _smallest_margin if by_margin else _smallest_uncapped
    question = largest_margin if by_margin else largest_uncapped

    def program(arena: Arena, cuts: Cuts) -> Program:
        return question(arena, cuts, goal_floor)

    def score(arena: Arena, x: FloatArray, values: FloatArray) -> FloatArray:
        kept = _log_d(arena, x, values) >= least_log_d
        return np.where(kept, height(arena, x, values), -np.inf)

    return Aim(program, score, height, _just_below(height), holds_limits=True)
