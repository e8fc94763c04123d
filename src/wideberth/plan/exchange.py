"""Choosing n rows out of many so that a model is known best, by exchange from several starts.

References
----------
Fedorov (1972), Theory of Optimal Experiments (exchange of one run for another, the update of the
determinant); Cook and Nachtsheim (1980), Technometrics 22, 315-324 (exchange algorithms compared).
From memory. The update of the trace follows from the same two-by-two identity.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from wideberth.seeds import stream
from wideberth.study.records import FloatArray, IntArray

_PASSES = 30
_GAIN = 1e-9
_LEAST = 1e-8
_RIDGE = 1e-7


@dataclass(frozen=True, slots=True, eq=False)
class Task:
    """What is to be chosen.

    Attributes
    ----------
    rows : ndarray, shape (M, q)
        Model rows of the candidates.
    group : ndarray of int, shape (M,)
        The block each candidate row stands for.
    sizes : tuple of int
        How many rows to choose for each block.
    fixed : ndarray, shape (q, q)
        Information of the runs that are there anyway.
    moments : ndarray, shape (q, q)
        Average of f f' over the region, for the I criterion.
    """

    rows: FloatArray
    group: IntArray
    sizes: tuple[int, ...]
    fixed: FloatArray
    moments: FloatArray

    def information(self, chosen: IntArray) -> FloatArray:
        """Give X'X of the chosen rows and the fixed runs."""
        rows = self.rows[chosen]
        total: FloatArray = self.fixed + rows.T @ rows
        return total

    def score(self, chosen: IntArray, criterion: Literal["D", "I"]) -> float:
        """Give what is to be small: -log det, or the average prediction variance."""
        information = self.information(chosen)
        sign, size = np.linalg.slogdet(information)
        if sign <= 0 or np.linalg.cond(information) > 1e14:
            return np.inf
        if criterion == "D":
            return -float(size)
        return float(np.trace(np.linalg.solve(information, self.moments)))


def best_rows(
    task: Task, criterion: Literal["D", "I"], *, seed: int, n_starts: int
) -> tuple[IntArray, float]:
    """Choose rows from several random starts: their places, in order of the blocks, and the score.

    The score is infinite when no choice was found that can estimate the model.
    """
    best, best_score = np.zeros(0, dtype=np.int64), np.inf
    pools = [np.flatnonzero(task.group == b) for b in range(len(task.sizes))]
    for start in range(n_starts):
        random = stream(seed, "optimal runs", start)
        chosen = np.concatenate(
            [random.choice(pool, n) for pool, n in zip(pools, task.sizes, strict=True)]
        ).astype(np.int64)
        # from the best determinant or from anywhere: the two lead to different plans
        first: Literal["D", "I"] = "D" if start % 2 == 0 else criterion
        chosen = _exchanged(task, chosen, first, _RIDGE)
        if criterion == "I" and np.isfinite(task.score(chosen, "I")):
            chosen = _exchanged(task, chosen, "I", 0.0)
        score = task.score(chosen, criterion)
        if score < best_score - _GAIN or start == 0:
            best, best_score = chosen, score
    return best, best_score


def _exchanged(
    task: Task, chosen: IntArray, criterion: Literal["D", "I"], ridge: float
) -> IntArray:
    """Swap one run at a time for the candidate that gains most, until none gains."""
    chosen = chosen.copy()
    rows = task.rows
    groups = [task.group == b for b in range(len(task.sizes))]
    scale = ridge * float((rows**2).mean()) * np.eye(rows.shape[1])
    for _ in range(_PASSES):
        state = _State.at(task, task.information(chosen) + scale, criterion)
        moved = False
        for place in range(len(chosen)):
            old = int(chosen[place])
            gain = state.gains(task, old)
            gain = np.where(groups[task.group[old]], gain, -np.inf)
            new = int(gain.argmax())
            if gain[new] > _GAIN * max(1.0, abs(state.value)):
                chosen[place] = new
                state = state.swapped(task, old, new)
                moved = True
        if not moved:
            break
    return chosen


@dataclass(frozen=True, slots=True, eq=False)
class _State:
    """The inverse of the information, and each candidate's variance d and weighted variance v."""

    criterion: Literal["D", "I"]
    inverse: FloatArray
    weighted: FloatArray
    d: FloatArray
    v: FloatArray
    value: float

    @classmethod
    def at(cls, task: Task, information: FloatArray, criterion: Literal["D", "I"]) -> _State:
        return cls._from_inverse(task, np.asarray(np.linalg.inv(information)), criterion)

    @classmethod
    def _from_inverse(cls, task: Task, inverse: FloatArray, criterion: Literal["D", "I"]) -> _State:
        inverse = (inverse + inverse.T) / 2
        d = np.einsum("nq,nq->n", task.rows @ inverse, task.rows)
        if criterion == "D":
            return cls("D", inverse, inverse, d, d, 0.0)
        weighted = inverse @ task.moments @ inverse
        v = np.einsum("nq,nq->n", task.rows @ weighted, task.rows)
        return cls("I", inverse, weighted, d, v, float((inverse * task.moments).sum()))

    def gains(self, task: Task, old: int) -> FloatArray:
        """Give what each candidate gains in place of a run: log det, or less variance."""
        cross = task.rows @ (self.inverse @ task.rows[old])
        grown = (1 + self.d) * (1 - self.d[old]) + cross**2
        possible = grown > _LEAST
        if self.criterion == "D":
            return np.where(possible, np.log(np.where(possible, grown, 1.0)), -np.inf)
        weighted = task.rows @ (self.weighted @ task.rows[old])
        less = (
            (1 - self.d[old]) * self.v + 2 * cross * weighted - (1 + self.d) * self.v[old]
        ) / np.where(possible, grown, 1.0)
        return np.where(possible, less, -np.inf)

    def swapped(self, task: Task, old: int, new: int) -> _State:
        """Update the inverse by the two rows that changed."""
        pair = task.rows[[new, old]].T
        pulled = self.inverse @ pair
        small = np.linalg.inv(np.diag([1.0, -1.0]) + pair.T @ pulled)
        inverse = self.inverse - pulled @ small @ pulled.T
        if self.criterion == "D":
            reach = task.rows @ pulled
            d = self.d - np.einsum("ni,ij,nj->n", reach, small, reach)
            return _State("D", inverse, inverse, d, d, 0.0)
        return _State._from_inverse(task, inverse, "I")
