"""Confirmation runs at a setting: how many would prove its limits, and where they should fall.

New runs at a setting that is already chosen owe nothing to the search, so their own bound, with
the standard deviation pooled from the model and the new runs, is exact however it was chosen.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from wideberth.decide.arena import LimitSide
from wideberth.decide.guards import Guard
from wideberth.decide.problem import Problem, judged_blocks
from wideberth.decide.records import Confirmation, ConfirmationRange
from wideberth.fit.draws import Draws
from wideberth.fit.records import design_map, surface
from wideberth.quadratic.terms import features
from wideberth.seeds import stream
from wideberth.study.records import BoolArray, FloatArray

MOST_RUNS = 10
CHANCES_OF = (1, 2, 3, 5)
"""Numbers of confirmation runs whose chances are said."""


@dataclass(frozen=True, slots=True)
class Chance:
    """The chance that so many confirmation runs prove every guarded limit at a setting."""

    runs: int
    share: float


def confirmation_runs(
    problem: Problem, levels: tuple[int, ...], x: FloatArray
) -> Confirmation | None:
    """Count the runs at a coded setting (k,) that would be expected to meet every guarded limit.

    ``None`` when no limit is guarded against noise.
    """
    guarded = [side for side in problem.sides if problem.guarding[side.response].smooth is not None]
    if not guarded:
        return None
    if _of_new_blocks(problem, guarded):
        return Confirmation(
            None,
            "confirmation runs must come from several new blocks, one run in each; how many would"
            " prove the limits is not computed where blocks are a sample",
        )
    for n_runs in range(1, MOST_RUNS + 1):
        if all(_expected(problem, side, levels, x, n_runs) for side in guarded):
            runs = "run" if n_runs == 1 else "runs"
            return Confirmation(
                n_runs,
                f"{n_runs} confirmation {runs} at this setting would be expected to prove it,"
                " judged by their own bound with the pooled standard deviation",
            )
    return Confirmation(
        None,
        f"even {MOST_RUNS} confirmation runs at this setting would not be expected to prove it",
    )


def _of_new_blocks(problem: Problem, guarded: list[LimitSide]) -> bool:
    """Tell whether a future batch of a guarded response comes from a block not yet run."""
    return any(problem.models[side.response].between is not None for side in guarded)


def chances_of_proof(
    problem: Problem, draws: Draws, levels: tuple[int, ...], x: FloatArray, seed: int
) -> tuple[Chance, ...]:
    """Give the chances that 1, 2, 3 and 5 new runs at a coded setting (k,) prove every limit.

    Each draw is a truth that the runs so far allow: new runs are made from it, and judged by their
    own bound with the standard deviation pooled from the model and them. Where blocks recur, by
    the worst one; where they are a sample, nothing is said.
    """
    guarded = [side for side in problem.sides if problem.guarding[side.response].smooth is not None]
    if not guarded or _of_new_blocks(problem, guarded):
        return ()
    random = stream(seed, "confirmation runs", 0)
    z = random.standard_normal((draws.n_draws, max(CHANCES_OF), len(draws.varying)))
    noise = np.einsum("njm,nrm->nrj", draws.noise, z)
    chances = []
    for n_runs in CHANCES_OF:
        proven: BoolArray = np.ones(draws.n_draws, dtype=np.bool_)
        for side in guarded:
            proven &= _proves(problem, draws, side, levels, x, noise[:, :n_runs])
        chances.append(Chance(n_runs, float(proven.mean())))
    return tuple(chances)


def _proves(
    problem: Problem,
    draws: Draws,
    side: LimitSide,
    levels: tuple[int, ...],
    x: FloatArray,
    noise: FloatArray,
) -> BoolArray:
    """Tell for each draw whether its new runs, noise (n, runs, m), prove one limit side: (n,)."""
    model, n_runs = problem.models[side.response], noise.shape[1]
    own = noise[:, :, draws.varying.index(side.response)]
    reach = _reach(problem, side, n_runs, own.var(axis=1, ddof=1) if n_runs > 1 else np.zeros(1))
    terms, coefficients = features(x), draws.of(model)
    means = np.stack(
        [
            coefficients @ (terms @ design_map(model, problem.study, levels=levels, block=block))
            for block in judged_blocks(model, problem.study)
        ]
    ) + own.mean(axis=1)
    high = side.side == "high"
    held: BoolArray = (
        means.max(axis=0) + reach <= side.value if high else means.min(axis=0) - reach >= side.value
    )
    return held


def _reach(problem: Problem, side: LimitSide, n_runs: int, variance: FloatArray) -> FloatArray:
    """Give how far from their mean n new runs bound one limit side, at their own variance."""
    model, guard = problem.models[side.response], problem.guarding[side.response].guard
    own = Guard(guard.kind, guard.df + n_runs - 1, guard.confidence, guard.share)
    s = model.s or 0.0
    pooled = np.sqrt((guard.df * s**2 + (n_runs - 1) * variance) / own.df)
    reach: FloatArray = own.factor(np.array(1.0 / n_runs)) * pooled
    return reach


def confirmation_ranges(
    problem: Problem, levels: tuple[int, ...], x: FloatArray
) -> dict[str, ConfirmationRange]:
    """Predict one run and the mean of three at a coded setting (k,), for responses with noise.

    Two-sided prediction intervals, all responses together with 95 % after Bonferroni; where
    blocks are a sample, of runs in new blocks, one in each.
    """
    noisy = [m for m in problem.models.models if not m.exact and m.s and m.df_error]
    confidence = 1.0 - 0.05 / (2 * max(len(noisy), 1))
    result = {}
    for model in noisy:
        ends = {}
        for n_runs in (1, 3):
            lows, highs = [], []
            for block in judged_blocks(model, problem.study):
                at = surface(model, problem.study, levels=levels, block=block)
                terms = features(x)
                mean = float(terms @ at.coefficients)
                leverage = float(terms @ at.covariance @ terms)
                variance = leverage + 1.0 / n_runs
                df = float(model.degrees(variance, 1.0 / n_runs, confidence))
                t = float(stdtrit(df, confidence))
                half = t * at.s * float(np.sqrt(variance))
                lows.append(mean - half)
                highs.append(mean + half)
            ends[n_runs] = (min(lows), max(highs))
        result[model.response] = ConfirmationRange(model.unit, ends[1], ends[3])
    return result


def _expected(
    problem: Problem, side: LimitSide, levels: tuple[int, ...], x: FloatArray, n_runs: int
) -> bool:
    """Tell whether the new runs' own bound, at the expected mean and s, meets one limit side."""
    model = problem.models[side.response]
    reach = float(_reach(problem, side, n_runs, np.array((model.s or 0.0) ** 2)))
    means = [
        float(features(x) @ surface(model, problem.study, levels=levels, block=block).coefficients)
        for block in judged_blocks(model, problem.study)
    ]
    if side.side == "high":
        return max(means) + reach <= side.value
    return min(means) - reach >= side.value
