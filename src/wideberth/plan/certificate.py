"""A bound on how good any plan of the same size could be, from the convex design-weights problem.

Let every candidate i carry a weight w_i >= 0, the weights of a block summing to 1, and let
A = A0 + sum of n_b w_i f_i f_i'. Any whole-number plan is one such choice, so the best A bounds
them all. At any weights the dual gives a bound without solving anything exactly:

- D: log det X <= log det A + q log(S / q) with S = tr(A^-1 A0) + sum of n_b max f'A^-1 f;
- I: tr(W X^-1) >= tr(W A^-1)^2 / S with S = tr(G A0) + sum of n_b max f'G f, G = A^-1 W A^-1.

The weights are improved by multiplying each with its own derivative (D) or the root of it (I).

References
----------
Kiefer and Wolfowitz (1960), Canadian J. Mathematics 12, 363-366 (p / max variance); Silvey,
Titterington and Torsney (1978), Communications in Statistics A 7, 1379-1389 (multiplicative
weights). From memory; the bound with fixed runs follows from log det and tr being concave and
convex, with A scaled best.
"""

from __future__ import annotations

from typing import Literal

import numpy as np

from wideberth.plan.exchange import Task
from wideberth.study.records import FloatArray

_MOST_STEPS = 600
_CLOSE = 2e-4
_LOOK_EVERY = 20
_WORK = 2e9
"""Products of numbers that the bound may take; it holds wherever it stops."""


def proven_efficiency(task: Task, criterion: Literal["D", "I"], score: float) -> float:
    """Give a proven lower bound of a plan's efficiency, between 0 and 1.

    Parameters
    ----------
    score : float
        Of the plan, as `Task.score` gives it.

    Returns
    -------
    float
        D: (det of the plan / det of the best)^(1/q) at least; I: variance of the best over that
        of the plan at least.
    """
    if not np.isfinite(score):
        return 0.0
    bound = best_possible(task, criterion)
    if criterion == "D":
        return min(1.0, float(np.exp((-score - bound) / task.rows.shape[1])))
    return min(1.0, bound / score)


def best_possible(task: Task, criterion: Literal["D", "I"]) -> float:
    """Bound any plan: its log det from above (D), its average variance from below (I)."""
    weights = np.zeros(len(task.rows))
    for b in range(len(task.sizes)):
        in_block = task.group == b
        weights[in_block] = 1.0 / max(int(in_block.sum()), 1)
    best = np.inf if criterion == "D" else 0.0
    m, q = task.rows.shape
    most = int(np.clip(_WORK / (m * q * q), _LOOK_EVERY, _MOST_STEPS))
    for step in range(most):
        value, slopes, fixed = _slopes(task, criterion, weights)
        if step % _LOOK_EVERY == 0 or step == most - 1:
            bound, gap = _dual(task, criterion, value, slopes, fixed)
            best = min(best, bound) if criterion == "D" else max(best, bound)
            if gap < _CLOSE:
                break
        weights = _improved(task, weights, slopes if criterion == "D" else np.sqrt(slopes))
    return best


def _slopes(
    task: Task, criterion: Literal["D", "I"], weights: FloatArray
) -> tuple[float, FloatArray, float]:
    """Give the criterion, each candidate's derivative, and the fixed runs' part of S."""
    counts = np.array(task.sizes, dtype=np.float64)[task.group] * weights
    information = task.fixed + task.rows.T @ (counts[:, None] * task.rows)
    inverse = np.linalg.inv(information)
    if criterion == "D":
        value = float(np.linalg.slogdet(information)[1])
        pull = inverse
    else:
        value = float((inverse * task.moments).sum())
        pull = inverse @ task.moments @ inverse
    slopes = np.einsum("nq,nq->n", task.rows @ pull, task.rows)
    return value, np.maximum(slopes, 0.0), float((pull * task.fixed).sum())


def _dual(
    task: Task, criterion: Literal["D", "I"], value: float, slopes: FloatArray, fixed: float
) -> tuple[float, float]:
    """Give the bound at these weights, and how far it is from what they reach (relative)."""
    highest = [
        n * float(slopes[task.group == b].max(initial=0.0)) for b, n in enumerate(task.sizes)
    ]
    total = fixed + sum(highest)
    if criterion == "D":
        q = task.rows.shape[1]
        return value + q * float(np.log(total / q)), float(np.log(total / q))
    return value**2 / total, total / value - 1.0


def _improved(task: Task, weights: FloatArray, factor: FloatArray) -> FloatArray:
    grown = weights * factor
    for b in range(len(task.sizes)):
        in_block = task.group == b
        total = grown[in_block].sum()
        if total > 0:
            grown[in_block] /= total
    return grown
