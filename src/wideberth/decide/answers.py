"""Answers of the search over all levels, in one mode of guarding: free optimum and settable one."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.aims import BEST, LEAST_POOR, NEAREST, SAFEST, Aim
from wideberth.decide.problem import Mode, Problem, arena
from wideberth.decide.search import HOLDS, Found, find_best, find_nearest
from wideberth.decide.settable import on_steps, settable_grid


@dataclass(frozen=True, slots=True, eq=False)
class Answer:
    """A setting found under one mode: free optimum and settable one, at one combination.

    ``everywhere`` holds the free optimum of every combination of levels, ``None`` without one.
    """

    levels: tuple[int, ...]
    mode: Mode
    free: Found
    settable: Found
    off_steps: bool = False
    everywhere: tuple[tuple[tuple[int, ...], Found | None], ...] = ()


def best_answer(problem: Problem, mode: Mode) -> Answer | None:
    """Find the best settable setting over all levels that holds every limit in this mode."""
    grid = settable_grid(problem.study.numeric, problem.tight)
    best: Answer | None = None
    everywhere: list[tuple[tuple[int, ...], Found | None]] = []
    for levels in problem.combinations:
        rows = arena(problem, levels, mode)
        free = find_best(rows)
        everywhere.append((levels, free))
        if free is None:
            continue
        settable = on_steps(rows, grid, _aim(problem, free), free)
        if settable is None or settable.worst.min(initial=np.inf) < HOLDS:
            continue
        answer = Answer(levels, mode, free, settable)
        if best is None or _order(answer) > _order(best):
            best = answer
    return None if best is None else replace(best, everywhere=tuple(everywhere))


def nearest_answer(problem: Problem, mode: Mode) -> Answer:
    """Find the setting that breaks the limits least over all levels."""
    grid = settable_grid(problem.study.numeric, problem.tight)
    answers = []
    for levels in problem.combinations:
        rows = arena(problem, levels, mode)
        free = find_nearest(rows)
        settable = on_steps(rows, grid, NEAREST, free)
        answers.append(Answer(levels, mode, free, settable or free, settable is None))
    return max(answers, key=lambda answer: answer.settable.score)


def _aim(problem: Problem, free: Found) -> Aim:
    if not problem.goals:
        return SAFEST
    return BEST if np.isfinite(free.score) else LEAST_POOR


def _order(answer: Answer) -> tuple[float, float]:
    """Order answers by what the free optimum scores when settable, then by the worst margin."""
    score = answer.settable.score if np.isfinite(answer.free.score) else -np.inf
    return score, float(answer.settable.worst.min(initial=np.inf))


def reaches(answer: Answer) -> bool:
    """Tell whether an answer reaches every goal at all."""
    return bool(np.isfinite(answer.free.score) and np.isfinite(answer.settable.score))
