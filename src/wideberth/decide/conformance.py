"""Conformance: the probability that one future batch at a setting meets every limit.

It is the posterior predictive probability. Each draw of the coefficients and of the noise gives
the share of batches that meet all limits together; the mean over the draws is the statement, a low
quantile its lower bound. Where the plant's tolerances are stated, the setting of a batch is off
by a normal error with 95 % inside the tolerance. Where blocks recur, the worst one counts.

References
----------
Peterson (2004), A posterior predictive approach to multiple response surface optimization,
Journal of Quality Technology 36, 139-153 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from wideberth.decide.problem import Problem
from wideberth.decide.region import room_of
from wideberth.fit.draws import Draws
from wideberth.fit.records import Model, design_map
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features
from wideberth.seeds import stream
from wideberth.study.records import BoolArray, FloatArray, Study

N_BATCHES = 4096
LOWER = 0.05
_AT_ONCE = 128
_TWO_SIDED = 0.975


@dataclass(frozen=True, slots=True)
class Conformance:
    """Shares of future batches that meet all limits together.

    Attributes
    ----------
    mean : float
        Posterior predictive probability.
    lower : float
        Lower 95 % bound of the share of batches.
    block : str or None
        The block at which it is lowest, where blocks recur.
    """

    mean: float
    lower: float
    block: str | None


def setting_sd(study: Study) -> FloatArray:
    """Give the standard deviation of the setting error of each numeric factor, coded: (k,).

    0 where no tolerance is stated; a tolerance holds 95 % of a normal error.
    """
    room = room_of(study)
    result: FloatArray = (room.below + room.above) / 2 / ndtri(_TWO_SIDED)
    return result


def conformance(
    problem: Problem,
    draws: Draws,
    levels: tuple[int, ...],
    x: FloatArray,
    error_sd: FloatArray,
    seed: int,
) -> Conformance | None:
    """Judge one coded setting (k,) with setting error ``error_sd`` (k,); ``None`` without limits.

    The batches are common to all settings and errors of one seed, so that differences between
    two answers are not blurred by chance.
    """
    if not problem.sides:
        return None
    shares, block = _at_worst_block(problem, draws, levels, x, error_sd, seed)
    name = None if block is None else problem.study.runs.blocks[block]
    return Conformance(float(shares.mean()), float(np.quantile(shares, LOWER)), name)


def held_shares(
    problem: Problem,
    draws: Draws,
    levels: tuple[int, ...],
    x: FloatArray,
    error_sd: FloatArray,
    seed: int,
) -> FloatArray:
    """Give each draw's share of batches inside all limits at the worst block: shape (n,)."""
    return _at_worst_block(problem, draws, levels, x, error_sd, seed)[0]


def _at_worst_block(
    problem: Problem,
    draws: Draws,
    levels: tuple[int, ...],
    x: FloatArray,
    error_sd: FloatArray,
    seed: int,
) -> tuple[FloatArray, int | None]:
    random = stream(seed, "batches", 0)
    off = random.standard_normal((N_BATCHES, len(x))) * error_sd
    noise = random.standard_normal((N_BATCHES, len(draws.varying)))
    terms = features(x + off)
    found: list[tuple[FloatArray, int | None]] = []
    for block in limit_blocks(problem):
        parts = [
            _held(problem, draws.part(i, i + _AT_ONCE), levels, block, terms, noise)
            for i in range(0, draws.n_draws, _AT_ONCE)
        ]
        found.append((np.concatenate(parts), block))
    return min(found, key=lambda one: float(one[0].mean()))


def limit_blocks(problem: Problem) -> tuple[int | None, ...]:
    """Give the blocks at which limits are judged: each that recurs, or none at all."""
    limited = [problem.models[side.response] for side in problem.sides]
    recur = problem.study.future_blocks != "sample"
    if recur and any(term.block is not None for model in limited for term in model.terms):
        return tuple(range(len(problem.study.runs.blocks)))
    return (None,)


def _held(
    problem: Problem,
    draws: Draws,
    levels: tuple[int, ...],
    block: int | None,
    terms: FloatArray,
    noise: FloatArray,
) -> FloatArray:
    """Give each draw's share of the batches, terms (M, p) and noise (M, m), inside all limits."""
    held = np.ones((len(terms), draws.n_draws), dtype=np.bool_)
    for model in _limited(problem):
        mapped = design_map(model, problem.study, levels=levels, block=block)
        y = terms @ (draws.of(model) @ mapped.T).T
        if model.response in draws.varying:
            y = y + noise @ draws.noise[:, draws.varying.index(model.response)].T
        held &= _inside(problem, model, y)
    shares: FloatArray = held.mean(axis=0)
    return shares


def _limited(problem: Problem) -> list[Model]:
    names = {side.response for side in problem.sides}
    return [model for model in problem.models.models if model.response in names]


def _inside(problem: Problem, model: Model, y: FloatArray) -> BoolArray:
    inside = np.ones(y.shape, dtype=np.bool_)
    for side in problem.sides:
        if side.response == model.response:
            inside &= y <= side.value if side.side == "high" else y >= side.value
    return inside


def conformance_over(
    problem: Problem,
    draws: Draws,
    levels: tuple[int, ...],
    x: FloatArray,
    error_sd: FloatArray,
    seed: int,
) -> FloatArray | None:
    """Give the mean conformance over coded settings (..., k), one batch a draw; shape (...).

    For maps: its Monte Carlo error is about half a percent with 2,000 draws. ``None`` without
    limits.
    """
    if not problem.sides:
        return None
    n, k = draws.n_draws, x.shape[-1]
    random = stream(seed, "batches of a map", 0)
    off = random.standard_normal((n, k)) * error_sd
    z = random.standard_normal((n, len(draws.varying)))
    noise = np.einsum("njm,nm->nj", draws.noise, z)
    terms = features(x.reshape(-1, k))
    worst = np.ones(len(terms))
    for block in limit_blocks(problem):
        held = np.ones((len(terms), n), dtype=np.bool_)
        for model in _limited(problem):
            mapped = design_map(model, problem.study, levels=levels, block=block)
            mean = np.broadcast_to(draws.of(model) @ mapped.T, (n, terms.shape[1]))
            # the setting error is folded into each draw's coefficients
            moved = Stack.from_coefficients(mean, k).restrict(off, np.eye(k)).coefficients()
            y = terms @ moved.T
            if model.response in draws.varying:
                y += noise[:, draws.varying.index(model.response)]
            held &= _inside(problem, model, y)
        worst = np.minimum(worst, held.mean(axis=1))
    return worst.reshape(x.shape[:-1])
