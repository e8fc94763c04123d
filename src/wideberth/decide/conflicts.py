"""When no setting holds every limit: which smallest set of limits cannot hold together."""

from __future__ import annotations

from wideberth.decide.problem import Mode, Problem, arena
from wideberth.decide.records import Conflict
from wideberth.decide.search import HOLDS, find_safest
from wideberth.study.records import Side


def can_hold(problem: Problem, mode: Mode, limits: tuple[int, ...]) -> bool:
    """Tell whether some setting at some levels holds these limit sides, over its whole room."""
    return any(
        find_safest(arena(problem, levels, mode, limits)).score >= HOLDS
        for levels in problem.combinations
    )


def smallest_conflict(problem: Problem, mode: Mode) -> Conflict:
    """Find one smallest set of limit sides that cannot hold together, by leaving out in turn."""
    kept = tuple(range(len(problem.sides)))
    for limit in kept:
        fewer = tuple(other for other in kept if other != limit)
        if fewer and not can_hold(problem, mode, fewer):
            kept = fewer
    sides = [problem.sides[limit] for limit in kept]
    guarded = (
        "" if mode == "means" else " with their guards" if len(sides) > 1 else " with its guard"
    )
    texts = [
        side_text(side.response, side.side, side.value, problem.models[side.response].unit)
        for side in sides
    ]
    if len(texts) == 1:
        text = f"{texts[0]} holds nowhere in the region{guarded}"
    else:
        text = f"{', '.join(texts[:-1])} and {texts[-1]} cannot hold together{guarded}"
    return Conflict(tuple((side.response, side.side, side.value) for side in sides), text)


def conflict_of_steps(problem: Problem) -> Conflict:
    """Say that the limits hold between the settable steps, but on none of them."""
    return Conflict(
        tuple((side.response, side.side, side.value) for side in problem.sides),
        "no setting on the settable steps holds every limit; between the steps one does",
    )


def side_text(response: str, side: Side, value: float, unit: str) -> str:
    """Word one side of a limit: ``yield at least 88 %``."""
    word = "at least" if side == "low" else "at most"
    return f"{response} {word} {value:.6g} {unit}".rstrip()
