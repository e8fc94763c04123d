"""The cloud: the optimum of every draw, over all levels of categorical factors."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.arena import goal_values
from wideberth.decide.desirability import overall
from wideberth.decide.many import find_many
from wideberth.decide.problem import Mode, Problem, drawn_arena
from wideberth.decide.region import Region
from wideberth.fit.draws import Draws
from wideberth.progress import Progress
from wideberth.study.records import BoolArray, FloatArray, IntArray

_AT_ONCE = 512
_ON_EDGE = 0.985


@dataclass(frozen=True, slots=True, eq=False)
class Cloud:
    """Optima of n draws.

    Attributes
    ----------
    x : ndarray, shape (n, k)
        Coded.
    log_d : ndarray, shape (n,)
        Minus infinity where a draw reaches no goal; without goals the smallest margin.
    combination : ndarray of int, shape (n,)
        Which of the problem's combinations of levels is best.
    feasible : ndarray of bool, shape (n,)
    """

    x: FloatArray
    log_d: FloatArray
    combination: IntArray
    feasible: BoolArray

    @property
    def desirability(self) -> FloatArray:
        """D of every draw at its own optimum, shape (n,)."""
        result: FloatArray = np.exp(self.log_d)
        return result


def cloud_of(
    problem: Problem, draws: Draws, mode: Mode, warm: FloatArray, progress: Progress
) -> Cloud:
    """Find the optimum of every draw; ``warm`` (w, k) are settings that every draw tries too."""
    n, k = draws.n_draws, len(problem.study.numeric)
    x, log_d = np.zeros((n, k)), np.full(n, -np.inf)
    combination = np.zeros(n, dtype=np.int64)
    feasible = np.zeros(n, dtype=np.bool_)
    for first in range(0, n, _AT_ONCE):
        part = draws.part(first, first + _AT_ONCE)
        here = slice(first, first + part.n_draws)
        for place, levels in enumerate(problem.combinations):
            found = find_many(drawn_arena(problem, levels, mode, part), warm)
            better = found.feasible & (~feasible[here] | (found.score > log_d[here]))
            x[here][better] = found.x[better]
            log_d[here][better] = found.score[better]
            combination[here][better] = place
            feasible[here] |= found.feasible
        progress("draws", min(1.0, (first + _AT_ONCE) / n))
    return Cloud(x, log_d, combination, feasible)


def desirability_at(
    problem: Problem, draws: Draws, levels: tuple[int, ...], x: FloatArray
) -> FloatArray:
    """Give D of every draw at coded settings x, (k,) or one a draw (n, k); shape (n,)."""
    rows = drawn_arena(problem, levels, "means", draws)
    every = np.broadcast_to(x, (draws.n_draws, x.shape[-1]))
    return overall(rows.goals, goal_values(rows, every))


def on_edge(region: Region, x: FloatArray) -> BoolArray:
    """Tell which coded settings (n, k) lie on the edge of the region; shape (n,)."""
    away = x - region.centre
    size = np.einsum("ni,ij,nj->n", away, region.shape, away)
    far = size >= _ON_EDGE**2 if region.has_ellipsoid else np.zeros(len(x), dtype=np.bool_)
    moves = np.abs(region.planes @ region.basis).max(axis=1, initial=0.0) > 1e-9
    slack = region.bounds - x @ region.planes.T
    depth = region.bounds - region.planes @ region.middle
    near = (slack <= (1 - _ON_EDGE) * np.maximum(depth, 1e-12))[:, moves].any(axis=1)
    result: BoolArray = far | near
    return result
