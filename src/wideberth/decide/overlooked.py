"""A place that a proof met and the search had not: the search starts again from there."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import TypeVar

import numpy as np

from wideberth.decide.problem import Place, Problem

_MOST = 8
_SAME = 1e-6

Answer = TypeVar("Answer")


class Overlooked(Exception):  # noqa: N818
    """Raised by a proof that met a setting better than what the search found."""

    def __init__(self, place: Place) -> None:
        super().__init__("the search overlooked a setting")
        self.place = place


def look_again(problem: Problem, place: Place) -> None:
    """Ask for another search from a place, unless it was started from already.

    Raises
    ------
    Overlooked
        When the place is new. One that is known and still does not serve breaks a limit somewhere
        in its room that the proof did not look at.
    """
    known = any(
        levels == place[0] and np.abs(x - place[1]).max(initial=0.0) < _SAME
        for levels, x in problem.known
    )
    if not known and len(problem.known) < _MOST:
        raise Overlooked(place)


def until_nothing_is_overlooked(
    problem: Problem, solve: Callable[[Problem], Answer]
) -> tuple[Problem, Answer]:
    """Solve, from every place that proofs meet on the way: the problem with them, the answer."""
    while True:
        try:
            return problem, solve(problem)
        except Overlooked as found:
            problem = replace(problem, known=(*problem.known, found.place))
