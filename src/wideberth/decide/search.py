"""The search: screen many settings, refine the best of several basins, compare, never by luck.

The same candidates in the same order every time. The worst places in the room join as further
rows until none is broken. Ties are settled by the largest smallest margin, without limits by the
largest smallest uncapped desirability.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.aims import BEST, LEAST_POOR, NEAREST, SAFEST, Aim, peak, tie_break
from wideberth.decide.arena import (
    Arena,
    Cuts,
    goal_targets,
    goal_values,
    hard_values,
    limit_margins,
    no_cuts,
)
from wideberth.decide.interior import refine
from wideberth.decide.region import candidates, inside_planes
from wideberth.decide.room import worst_of_all
from wideberth.errors import NumericalError
from wideberth.study.records import FloatArray

HOLDS = -1e-9
"""A hard row at or above this is met: only rounding is forgiven."""
_N_STARTS = 24
_APART = 0.15
_ROUNDS = 60
_FOLLOWED = 6
_PENALTY = 20.0
_TIE = 1e-8
_SAME = 1e-7
_FLAT = 1e-3
_BASIN_WIDTH = 0.02


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A setting with what it scores.

    Attributes
    ----------
    x : ndarray, shape (k,)
        Coded.
    score : float
        What was asked for.
    worst : ndarray, shape (n_hard,)
        The lowest value of every hard row over the room.
    cuts : Cuts
        The worst places met on the way.
    equals : ndarray, shape (n, k)
        Other settings that score the same.
    """

    x: FloatArray
    score: float
    worst: FloatArray
    cuts: Cuts
    equals: FloatArray


def find_best(arena: Arena) -> Found | None:
    """Find the setting of largest log D inside all limits; ``None`` when none holds them.

    Where D is 0 everywhere, the score is minus infinity and the setting the one with the largest
    smallest uncapped desirability. Without goals the score is the smallest margin.
    """
    if not arena.goals:
        safest = find_safest(arena)
        return safest if safest.score >= HOLDS else None
    best = _search(arena, BEST, no_cuts(arena), [])
    if best is None or not np.isfinite(best.score):
        first = [] if not arena.limits else [find_safest(arena).x]
        least_poor = _search(arena, LEAST_POOR, no_cuts(arena), first)
        if least_poor is None:
            return None
        if least_poor.score <= 0:
            return replace(least_poor, score=-np.inf)
        best = _search(arena, BEST, least_poor.cuts, [least_poor.x])
    return None if best is None else _settle_ties(arena, best)


def local_optima(arena: Arena, best: Found, aim: Aim = BEST) -> FloatArray:
    """Give the optima that a search for an aim ends in, the best one first: (n, k), at most six.

    They hold the rows at the places of the room that ``best`` met, no more.
    """
    starts = _screen(arena, aim, best.cuts, [best.x])
    values = hard_values(arena, best.cuts, starts)
    targets = aim.targets(arena, starts, values)
    ended = refine(aim.program(arena, best.cuts), starts, targets, arena.region.basis)
    settings, _ = rank(arena, aim, best.cuts, np.concatenate([best.x[None, :], ended.x]))
    return settings[_apart(settings, _BASIN_WIDTH, _FOLLOWED)]


def find_safest(arena: Arena) -> Found:
    """Find the setting with the largest smallest margin, met or not."""
    return _expect(_search(arena, SAFEST, no_cuts(arena), []))


def find_for(arena: Arena, aim: Aim) -> Found:
    """Find the best setting for any aim that some setting of the region can serve."""
    return _expect(seek(arena, aim))


def seek(arena: Arena, aim: Aim) -> Found | None:
    """Find the best setting for an aim, ``None`` when no setting can serve it."""
    first = [find_safest(arena).x] if arena.limits else []
    return _search(arena, aim, no_cuts(arena), first)


def find_nearest(arena: Arena) -> Found:
    """Find the setting that breaks the limits least, by the sum of violations."""
    return _expect(_search(arena, NEAREST, no_cuts(arena), [find_safest(arena).x]))


def find_peak(arena: Arena, curve: FloatArray) -> Found:
    """Find the largest value of a quadratic, coefficients (p,), anywhere in the region."""
    return _expect(_search(arena, peak(curve), no_cuts(arena), []))


def _expect(found: Found | None) -> Found:
    if found is None:
        message = "a region that holds settings gave none"
        raise NumericalError(message)
    return found


def _search(arena: Arena, aim: Aim, cuts: Cuts, first: list[FloatArray]) -> Found | None:
    starts = _screen(arena, aim, cuts, [*first, *arena.near])
    for _ in range(_ROUNDS):
        values = hard_values(arena, cuts, starts)
        targets = aim.targets(arena, starts, values)
        ended = refine(aim.program(arena, cuts), starts, targets, arena.region.basis)
        settings, scores = rank(arena, aim, cuts, np.concatenate([ended.x, starts]))
        if not len(settings):
            return None
        found, cuts = accept(arena, aim, cuts, settings, scores)
        if found is not None:
            return found
        starts = settings[_apart(settings, 1e-6, _N_STARTS)]
    message = "the worst places in the room did not settle"
    raise NumericalError(message)


def _screen(arena: Arena, aim: Aim, cuts: Cuts, first: list[FloatArray]) -> FloatArray:
    """Pick the best candidates that lie apart from each other, after the given settings."""
    n = 1024 if arena.n_factors <= 2 else 2048 if arena.n_factors <= 4 else 4096
    pool = candidates(arena.region, n)
    values = hard_values(arena, cuts, pool)
    required = _required(arena, aim, values)
    graded = aim.graded(arena, pool, values) + _PENALTY * np.minimum(required, 0.0)
    ranked = pool[np.argsort(-graded, kind="stable")]
    size = float(np.sqrt(((pool - pool.mean(axis=0)) ** 2).sum(axis=1).mean()))
    picked = ranked[_apart(ranked, _APART * size, _N_STARTS)]
    return np.concatenate([np.array(first).reshape(len(first), arena.n_factors), picked])


def _required(arena: Arena, aim: Aim, values: FloatArray) -> FloatArray:
    """Give the smallest of the hard values (n_hard, ...) that must hold for the aim; (...)."""
    rows = [aim.holds_limits or row.limit is None for row in arena.hard]
    smallest: FloatArray = values[rows].min(axis=0, initial=np.inf)
    return smallest


def rank(arena: Arena, aim: Aim, cuts: Cuts, settings: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Keep the settings that hold what the aim requires, best score first."""
    values = hard_values(arena, cuts, settings)
    kept = (_required(arena, aim, values) >= HOLDS) & inside_planes(arena.region, settings)
    settings, values = settings[kept], values[:, kept]
    scores = aim.score(arena, settings, values)
    order = np.argsort(-scores, kind="stable")
    return settings[order], scores[order]


def _apart(settings: FloatArray, distance: float, most: int) -> list[int]:
    """Choose indices in order, each farther than ``distance`` from all chosen before."""
    chosen: list[int] = []
    free = np.ones(len(settings), dtype=np.bool_)
    while free.any() and len(chosen) < most:
        index = int(free.argmax())
        chosen.append(index)
        free &= ((settings - settings[index]) ** 2).sum(axis=1) > distance**2
        free[index] = False
    return chosen


def accept(
    arena: Arena, aim: Aim, cuts: Cuts, settings: FloatArray, scores: FloatArray
) -> tuple[Found | None, Cuts]:
    """Accept the best setting if it stands at its worst places too, else add those as cuts."""
    for place, index in enumerate(_apart(settings, _FLAT, _FOLLOWED)):
        x = settings[index]
        worst, shifts = worst_of_all(arena, x)
        true_score = float(aim.score(arena, x[None, :], worst[:, None])[0])
        holds = float(_required(arena, aim, worst)) >= HOLDS
        if holds and true_score >= scores[index] - _SAME:
            if place == 0:
                return Found(
                    x, true_score, worst, cuts, _equals(arena, aim, settings, scores)
                ), cuts
            break
        cuts = _with_worst(arena, cuts, x, worst, shifts)
    return None, cuts


def _with_worst(
    arena: Arena, cuts: Cuts, x: FloatArray, worst: FloatArray, shifts: list[FloatArray]
) -> Cuts:
    known = hard_values(arena, cuts, x[None, :])
    smallest = max(0.0, float(limit_margins(arena, known).min())) if arena.limits else 0.0
    matters = [0.0 if row.limit is None else smallest for row in arena.hard]
    return tuple(
        (*old, shift) if low < min(value, level) else old
        for old, shift, low, value, level in zip(
            cuts, shifts, worst, known[:, 0], matters, strict=True
        )
    )


def _equals(arena: Arena, aim: Aim, settings: FloatArray, scores: FloatArray) -> FloatArray:
    tied = settings[scores >= scores[0] - _TIE]
    others = tied[_apart(tied, _FLAT, _FOLLOWED)][1:]
    standing = [
        x for x in others if float(_required(arena, aim, worst_of_all(arena, x)[0])) >= HOLDS
    ]
    return np.array(standing).reshape(len(standing), arena.n_factors)


def _settle_ties(arena: Arena, best: Found) -> Found:
    """Among settings that score alike take the one that stands farthest from trouble."""
    if not len(best.equals) and best.score < -_TIE:
        return best
    by_margin = bool(arena.limits)
    tied = np.concatenate([best.x[None, :], best.equals])
    chosen, height, cuts = best, -np.inf, best.cuts
    floors = np.clip(goal_targets(arena, goal_values(arena, tied)), None, 1.0) - _TIE
    # settings that reach every goal alike ask the same question
    for i in _apart(floors, _FLAT, len(floors)):
        alike = tied[np.abs(floors - floors[i]).max(axis=1) <= _FLAT]
        aim = tie_break(np.maximum(floors[i], 0.0), best.score - _SAME, by_margin=by_margin)
        found = _search(arena, aim, cuts, list(alike))
        if found is None:
            continue
        cuts = found.cuts
        if found.score > height + _SAME:
            score = float(BEST.score(arena, found.x[None, :], found.worst[:, None])[0])
            chosen, height = replace(found, score=score, equals=tied), found.score
    away = ((chosen.equals - chosen.x) ** 2).sum(axis=1) > _FLAT**2
    return replace(chosen, equals=chosen.equals[away])
