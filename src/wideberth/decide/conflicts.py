"""When no setting holds every limit: the smallest sets that cannot hold together, what frees them.

A smallest set is one that loses its conflict when any of its limits is left out. Each member is
also asked how far it alone would have to be relaxed for the set to hold.
"""

from __future__ import annotations

from itertools import combinations

import numpy as np

from wideberth.decide.aims import relaxation
from wideberth.decide.emptiness import none_holds
from wideberth.decide.problem import Mode, Problem, arena
from wideberth.decide.records import Conflict
from wideberth.decide.search import HOLDS, find_for, find_safest
from wideberth.study.records import Side

_MOST_SETS = 5
_MOST_LIMITS = 4


def can_hold(problem: Problem, mode: Mode, limits: tuple[int, ...]) -> bool:
    """Tell whether some setting at some levels holds these limit sides, over its whole room."""
    return any(
        find_safest(arena(problem, levels, mode, limits)).score >= HOLDS
        for levels in problem.combinations
    )


def smallest_conflicts(problem: Problem, mode: Mode) -> tuple[Conflict, ...]:
    """Find every smallest set of up to four limit sides that cannot hold together.

    At most five sets are named, the smallest first; where every conflict needs more limits, one
    is found by leaving limits out in turn.
    """
    every = range(len(problem.sides))
    found: list[tuple[int, ...]] = []
    for size in range(1, min(_MOST_LIMITS, len(problem.sides)) + 1):
        for limits in combinations(every, size):
            covered = any(set(known) <= set(limits) for known in found)
            if len(found) < _MOST_SETS and not covered and not can_hold(problem, mode, limits):
                found.append(limits)
    if not found:
        found = [_by_leaving_out(problem, mode)]
    return tuple(_conflict(problem, mode, limits) for limits in found)


def _by_leaving_out(problem: Problem, mode: Mode) -> tuple[int, ...]:
    kept = tuple(range(len(problem.sides)))
    for limit in kept:
        fewer = tuple(other for other in kept if other != limit)
        if fewer and not can_hold(problem, mode, fewer):
            kept = fewer
    return kept


def _conflict(problem: Problem, mode: Mode, limits: tuple[int, ...]) -> Conflict:
    sides = [problem.sides[limit] for limit in limits]
    guarded = (
        "" if mode == "means" else " with their guards" if len(sides) > 1 else " with its guard"
    )
    units = [problem.models[side.response].unit for side in sides]
    texts = [
        side_text(side.response, side.side, side.value, unit)
        for side, unit in zip(sides, units, strict=True)
    ]
    if len(texts) == 1:
        text = f"{texts[0]} holds nowhere in the region{guarded}"
    else:
        text = f"{', '.join(texts[:-1])} and {texts[-1]} cannot hold together{guarded}"
    relaxed = [_relaxed_value(problem, mode, limits, limit) for limit in limits]
    ways = [
        side_text(side.response, side.side, value, unit)
        for side, unit, value in zip(sides, units, relaxed, strict=True)
    ]
    way = ways[0] if len(ways) == 1 else f"{', '.join(ways[:-1])} or {ways[-1]}"
    alone = "" if len(ways) == 1 else " alone"
    return Conflict(
        limits=tuple((side.response, side.side, side.value) for side in sides),
        text=f"{text}; relaxed{alone} to {way} it would be free",
        relaxed=tuple(relaxed),
        proven=none_holds(problem, mode, limits),
    )


def _relaxed_value(problem: Problem, mode: Mode, limits: tuple[int, ...], limit: int) -> float:
    """Give the least relaxed value of one limit at which the set can hold, rounded outwards."""
    margin = max(
        find_for(arena(problem, levels, mode, limits), relaxation(limit)).score
        for levels in problem.combinations
    )
    side = problem.sides[limit]
    scale = problem.guarding[side.response].scale
    outward = 1.0 if side.side == "high" else -1.0
    value = side.value + outward * max(-margin, 0.0) * scale
    # to four digits, outwards: the printed value must free the set
    unit = 10.0 ** (np.floor(np.log10(max(abs(value), abs(side.value), 1e-12))) - 3)
    return float(outward * np.ceil(outward * value / unit + 1e-9) * unit)


def conflict_of_steps(problem: Problem, mode: Mode) -> Conflict:
    """Say that the limits hold between the settable steps, but on none of them."""
    return Conflict(
        tuple((side.response, side.side, side.value) for side in problem.sides),
        "no setting on the settable steps holds every limit; between the steps one does",
        (),
        none_holds(problem, mode, stepped=True),
    )


def side_text(response: str, side: Side, value: float, unit: str) -> str:
    """Word one side of a limit: ``yield at least 88 %``."""
    word = "at least" if side == "low" else "at most"
    return f"{response} {word} {value:.6g} {unit}".rstrip()
