"""Desirabilities of Derringer and Suich: one number per goal, one for all goals together.

Each goal is the smaller of one or two sides; a side rises in a straight line from 0 at ``poor`` to
1 at ``ideal`` and is then raised to its exponent. The overall desirability is the geometric mean
weighted by the priorities.

References
----------
Derringer and Suich (1980), Simultaneous optimization of several response variables, Journal of
Quality Technology 12, 214-219.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.records import ResolvedGoal
from wideberth.study.records import FloatArray


@dataclass(frozen=True, slots=True)
class GoalSide:
    """One side of a goal: ``slope * y + offset`` is its uncapped desirability at exponent 1."""

    slope: float
    offset: float
    exponent: float


def sides(goal: ResolvedGoal) -> tuple[GoalSide, ...]:
    """Give the side or the two sides of a goal, left one first."""
    if goal.want != "near":
        (poor,), (ideal,) = goal.poor, goal.ideal
        return (_side(poor, ideal, goal.exponent[0]),)
    return (
        _side(goal.poor[0], goal.ideal[0], goal.exponent[0]),
        _side(goal.poor[1], goal.ideal[1], goal.exponent[1]),
    )


def _side(poor: float, ideal: float, exponent: float) -> GoalSide:
    width = ideal - poor
    return GoalSide(slope=1.0 / width, offset=-poor / width, exponent=exponent)


def uncapped(goal: ResolvedGoal, y: FloatArray) -> FloatArray:
    """Evaluate the uncapped desirability at exponent 1: negative beyond poor, above 1 past ideal.

    ``y`` in the response's unit, any shape.
    """
    values = [side.slope * y + side.offset for side in sides(goal)]
    result: FloatArray = np.min(values, axis=0)
    return result


def desirability(goal: ResolvedGoal, y: FloatArray) -> FloatArray:
    """Evaluate the desirability, between 0 and 1, of response values of any shape."""
    values = [
        np.clip(side.slope * y + side.offset, 0.0, 1.0) ** side.exponent for side in sides(goal)
    ]
    result: FloatArray = np.min(values, axis=0)
    return result


def shares_of_priority(goals: tuple[ResolvedGoal, ...]) -> FloatArray:
    """Give each goal's weight in the geometric mean; they sum to 1."""
    priorities = np.array([goal.priority for goal in goals], dtype=np.float64)
    shares: FloatArray = priorities / priorities.sum()
    return shares


def overall(goals: tuple[ResolvedGoal, ...], y: FloatArray) -> FloatArray:
    """Combine the goals: y of shape (..., n_goals) to D of shape (...)."""
    parts = np.stack([desirability(goal, y[..., i]) for i, goal in enumerate(goals)], axis=-1)
    result: FloatArray = np.prod(parts ** shares_of_priority(goals), axis=-1)
    return result
