"""The same question asked of many draws at once: each draw's own best setting, found globally.

Shared candidates are screened for all draws, the best of several basins are refined together, the
optima of other draws serve as further starts. What the draws answer is what the search for the
setpoint answers, without room and steps.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.aims import BEST, LEAST_POOR, SAFEST, Aim, tie_break
from wideberth.decide.arena import (
    Arena,
    Cuts,
    goal_targets,
    goal_values,
    hard_values,
    limit_margins,
    log_desirability,
    no_cuts,
)
from wideberth.decide.interior import refine
from wideberth.decide.region import candidates, inside_planes
from wideberth.decide.search import HOLDS
from wideberth.quadratic.terms import features
from wideberth.study.records import BoolArray, FloatArray, IntArray

_PENALTY = 20.0
_GRADED_BELOW = 0.05
_BASINS = 5
_CELL_AXES = 5
_LIBRARY = 64
_APART = 0.15
_WORTH_TRYING = 0.3
_TIE = 1e-8
_SAME = 1e-7


@dataclass(frozen=True, slots=True, eq=False)
class Optima:
    """The best setting of each of n draws.

    Attributes
    ----------
    x : ndarray, shape (n, k)
        Coded.
    score : ndarray, shape (n,)
        log D, minus infinity where D is 0 everywhere or no setting holds the limits; without
        goals the smallest margin.
    feasible : ndarray of bool, shape (n,)
        Whether any setting holds the draw's guarded limits; where none does, x says nothing.
    """

    x: FloatArray
    score: FloatArray
    feasible: BoolArray


def find_many(arena: Arena, warm: FloatArray) -> Optima:
    """Find the best setting of every draw of an arena (`problem.drawn_arena`).

    Parameters
    ----------
    arena : Arena
        With n draws.
    warm : ndarray, shape (w, k)
        Settings that every draw tries too, such as the optimum of the fitted models.
    """
    pool = Pool.of(arena)
    aim = BEST if arena.goals else SAFEST
    n = _n_draws(arena)
    starts = np.concatenate([pool.starts(arena, aim), np.tile(warm, (n, 1, 1))], axis=1)
    x, score = refined(arena, aim, starts)
    x, score = _with_library(arena, aim, pool, x, score)
    if not arena.goals:
        return Optima(x, score, score >= HOLDS)
    feasible = np.isfinite(score)
    lost = np.flatnonzero(~feasible)
    if len(lost):
        x[lost], score[lost], feasible[lost] = _second_try(arena.take(lost), pool, x[lost])
    flat = np.flatnonzero(score >= -_TIE)
    if len(flat):
        x[flat] = _settled(arena.take(flat), x[flat], score[flat])
    return Optima(x, score, feasible)


@dataclass(frozen=True, slots=True, eq=False)
class Pool:
    """Candidates (G, k) in cells around the region's middle: ``edges`` (n_cells + 1,)."""

    x: FloatArray
    edges: IntArray
    size: float

    @classmethod
    def of(cls, arena: Arena) -> Pool:
        """Cover an arena's region."""
        k = arena.n_factors
        x = candidates(arena.region, 1024 if k <= 3 else 4096)
        side = (x - arena.region.middle) @ arena.region.basis[:, :_CELL_AXES] > 0
        cell = side @ (1 << np.arange(side.shape[1]))
        order = np.argsort(cell, kind="stable")
        edges = np.flatnonzero(np.diff(cell[order], prepend=-1, append=1 << _CELL_AXES))
        size = float(np.sqrt(((x - x.mean(axis=0)) ** 2).sum(axis=1).mean()))
        return cls(x[order], edges.astype(np.int64), size)

    def starts(self, arena: Arena, aim: Aim) -> FloatArray:
        """Pick for every draw the best candidate of each of the best few cells: (n, S, k)."""
        scores = _screen(arena, aim, self.x)
        columns = np.arange(scores.shape[1])
        cells = list(zip(self.edges[:-1], self.edges[1:], strict=True))
        best = np.stack([first + scores[first:last].argmax(axis=0) for first, last in cells])
        heights = scores[best, columns]
        top = np.argsort(-heights, axis=0, kind="stable")[:_BASINS]
        result: FloatArray = self.x[best[top, columns].T]
        return result


def _n_draws(arena: Arena) -> int:
    return arena.goal_means.shape[1] if arena.goals else len(arena.hard[0].curve)


def _screen(arena: Arena, aim: Aim, pool: FloatArray) -> FloatArray:
    """Grade candidates (G, k) for every draw, finite everywhere: (G, n)."""
    n, terms = _n_draws(arena), features(pool)
    hard = []
    for row in arena.hard:
        value = terms @ row.curve.T
        if row.curve.ndim == 1:
            value = np.broadcast_to(value[:, None], (len(pool), n))
        elif row.guard is not None:
            leverage = np.einsum("gp,gp->g", terms @ row.covariance, terms)
            value -= row.guard.value(leverage)[:, None] * row.weight
        hard.append(value)
    values = np.array(hard).reshape(len(hard), len(pool), n)
    if aim is SAFEST:
        margins = limit_margins(arena, values.reshape(len(hard), -1)).min(axis=0)
        free = [value for row, value in zip(arena.hard, values, strict=True) if row.limit is None]
        inside = np.min(free, axis=0, initial=0.0)
        graded: FloatArray = margins.reshape(len(pool), n) + _PENALTY * inside
        return graded
    y = np.stack([terms @ means.T for means in arena.goal_means], axis=-1)
    targets = goal_targets(arena, y.reshape(-1, y.shape[-1]))
    if aim is LEAST_POOR:
        required = np.minimum(values.min(axis=0, initial=0.0), 0.0)
        smallest: FloatArray = targets.min(axis=1).reshape(len(pool), n) + _PENALTY * required
        return smallest
    short = np.minimum(targets - _GRADED_BELOW, 0.0).sum(axis=1) / _GRADED_BELOW
    log_d = log_desirability(arena, np.maximum(targets, _GRADED_BELOW)) + short
    required = np.minimum(values.min(axis=0, initial=0.0), 0.0)
    whole: FloatArray = log_d.reshape(len(pool), n) + _PENALTY * required
    return whole


def refined(
    arena: Arena, aim: Aim, starts: FloatArray, cuts: Cuts | None = None
) -> tuple[FloatArray, FloatArray]:
    """Refine all starts (n, S, k) and keep each draw's best: x (n, k), score (n,).

    ``cuts`` are places of the room at which every draw's rows must hold as well.
    """
    n, each, k = starts.shape
    flat = starts.reshape(-1, k)
    own = arena.take(np.repeat(np.arange(n), each))
    cuts = no_cuts(own) if cuts is None else cuts
    targets = aim.targets(own, flat, hard_values(own, cuts, flat))
    ended = refine(aim.program(own, cuts), flat, targets, arena.region.basis).x
    score = np.stack([score_of(own, aim, x, cuts).reshape(n, each) for x in (ended, flat)], axis=1)
    score = score.reshape(n, -1)
    every = np.stack([ended.reshape(n, each, k), starts], axis=1).reshape(n, -1, k)
    best = score.argmax(axis=1)
    return every[np.arange(n), best], score[np.arange(n), best]


def score_of(arena: Arena, aim: Aim, x: FloatArray, cuts: Cuts | None = None) -> FloatArray:
    """Score settings (n, k), each by its own draw; minus infinity where the aim's rows break."""
    values = hard_values(arena, no_cuts(arena) if cuts is None else cuts, x)
    rows = [aim.holds_limits or row.limit is None for row in arena.hard]
    kept = (values[rows].min(axis=0, initial=np.inf) >= HOLDS) & inside_planes(arena.region, x)
    with np.errstate(invalid="ignore"):
        return np.where(kept, aim.score(arena, x, values), -np.inf)


def _with_library(
    arena: Arena, aim: Aim, pool: Pool, x: FloatArray, score: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Try on every draw the optima of others that lie apart from its own."""
    found = x[np.isfinite(score)]
    if len(found) < 2:
        return x, score
    library = found[np.linspace(0, len(found) - 1, min(_LIBRARY, len(found))).astype(int)]
    graded = _screen(arena, aim, library)
    near = ((library[:, None, :] - x) ** 2).sum(axis=2) <= (_APART * pool.size) ** 2
    graded[near] = -np.inf
    best = graded.argmax(axis=0)
    height = graded[best, np.arange(len(x))]
    worth = np.flatnonzero((height > score - _WORTH_TRYING) & np.isfinite(height))
    if not len(worth):
        return x, score
    tried, reached = refined(arena.take(worth), aim, library[best[worth]][:, None, :])
    better = reached > score[worth]
    x, score = x.copy(), score.copy()
    x[worth[better]], score[worth[better]] = tried[better], reached[better]
    return x, score


def _second_try(
    arena: Arena, pool: Pool, x: FloatArray
) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Look again at draws where no start held the limits or reached every goal."""
    if arena.limits:
        x, margin = refined(arena, SAFEST, pool.starts(arena, SAFEST))
        feasible = margin >= HOLDS
    else:
        feasible = np.ones(len(x), dtype=np.bool_)
    starts = np.concatenate([x[:, None, :], pool.starts(arena, BEST)], axis=1)
    least_poor, height = refined(arena, LEAST_POOR, starts)
    held = np.isfinite(height)
    x = np.where(held[:, None], least_poor, x)
    again, score = refined(arena, BEST, x[:, None, :])
    x = np.where(np.isfinite(score)[:, None], again, x)
    return x, score, feasible | held


def _settled(arena: Arena, x: FloatArray, score: FloatArray) -> FloatArray:
    """Among settings that keep D take each draw's farthest from trouble: (n, k)."""
    floor = np.clip(goal_targets(arena, goal_values(arena, x)), 0.0, 1.0) - _TIE
    aim = tie_break(np.maximum(floor, 0.0).T, score - _SAME, by_margin=bool(arena.limits))
    chosen, height = refined(arena, aim, x[:, None, :])
    result: FloatArray = np.where(np.isfinite(height)[:, None], chosen, x)
    return result
