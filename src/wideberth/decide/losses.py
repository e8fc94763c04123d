"""Where conformance is lost: to which limit, and to which source of error.

A limit's loss is the share of future batches that break it, whatever else they do; a source's loss
is how much the conformance would gain if that source alone were gone. Shares of several limits
overlap and gains of several sources do not add up.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from wideberth.decide.conflicts import side_text
from wideberth.decide.conformance import N_BATCHES, conformance, limit_blocks
from wideberth.decide.problem import Problem
from wideberth.fit.draws import Draws
from wideberth.fit.records import design_map
from wideberth.quadratic.terms import features
from wideberth.seeds import stream
from wideberth.study.records import FloatArray

N_DRAWS = 500
"""Draws that are looked at: the losses are printed as whole batches of 100."""
_AT_ONCE = 128


@dataclass(frozen=True, slots=True)
class Losses:
    """What keeps batches from meeting every limit.

    Attributes
    ----------
    limits : mapping
        For each limit in words the share of batches that break it, at the block where they do most.
    sources : mapping
        How much the conformance would gain without ``equations`` (the doubt about the fitted
        coefficients), ``batches`` (noise from batch to batch) and ``settings`` (where tolerances
        are stated).
    """

    limits: Mapping[str, float]
    sources: Mapping[str, float]


def losses(
    problem: Problem,
    draws: Draws,
    levels: tuple[int, ...],
    x: FloatArray,
    error_sd: FloatArray,
    seed: int,
) -> Losses | None:
    """Say where conformance at a coded setting (k,) is lost; ``None`` without limits.

    The batches are those of `conformance` with the same seed, under the first 500 draws.
    """
    draws = draws.part(0, N_DRAWS)
    whole = conformance(problem, draws, levels, x, error_sd, seed)
    if whole is None:
        return None
    known = tuple(
        np.broadcast_to(problem.models[name].coefficients, own.shape)
        for name, own in zip(draws.varying, draws.coefficients, strict=True)
    )
    without = {
        "equations": (replace(draws, coefficients=known), error_sd),
        "batches": (replace(draws, noise=np.zeros_like(draws.noise)), error_sd),
        **({"settings": (draws, np.zeros_like(error_sd))} if error_sd.any() else {}),
    }
    sources = {}
    for name, (fewer, sd) in without.items():
        held = conformance(problem, fewer, levels, x, sd, seed)
        sources[name] = max((whole.mean if held is None else held.mean) - whole.mean, 0.0)
    return Losses(_broken(problem, draws, levels, x, error_sd, seed), sources)


def _broken(
    problem: Problem,
    draws: Draws,
    levels: tuple[int, ...],
    x: FloatArray,
    error_sd: FloatArray,
    seed: int,
) -> dict[str, float]:
    """Give for each limit side the share of batches beyond it, at the block where most are."""
    random = stream(seed, "batches", 0)
    terms = features(x + random.standard_normal((N_BATCHES, len(x))) * error_sd)
    noise = random.standard_normal((N_BATCHES, len(draws.varying)))
    found = {}
    for side in problem.sides:
        model = problem.models[side.response]
        shares = []
        for block in limit_blocks(problem):
            mapped = design_map(model, problem.study, levels=levels, block=block)
            beyond = 0.0
            for first in range(0, draws.n_draws, _AT_ONCE):
                part = draws.part(first, first + _AT_ONCE)
                y = terms @ (part.of(model) @ mapped.T).T
                if model.response in draws.varying:
                    y = y + noise @ part.noise[:, draws.varying.index(model.response)].T
                out = y > side.value if side.side == "high" else y < side.value
                beyond += float(out.mean()) * part.n_draws
            shares.append(beyond / draws.n_draws)
        found[side_text(side.response, side.side, side.value, model.unit)] = max(shares)
    return found
