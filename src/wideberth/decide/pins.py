"""Fixing some factors at values of the person's own, so that the rest is settled around them.

The guards stay those of the whole region: a value that was tried and kept is a search too.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.linalg import null_space

from wideberth.decide.aims import peak
from wideberth.decide.problem import Problem, bare_arena
from wideberth.decide.region import Region, centred
from wideberth.decide.search import seek
from wideberth.errors import refusal
from wideberth.quadratic.terms import n_terms
from wideberth.study.coding import to_coded
from wideberth.study.records import CategoricalFactor, FloatArray, Setting, Study

_OFF = 1e-9
_WHERE = "--fix"


def with_pins(problem: Problem, fix: Setting) -> Problem:
    """Fix factors at values in own units.

    Raises
    ------
    RefusedError
        When a name is no factor, a value cannot be set, or nothing that was explored and is
        allowed has these values.
    """
    study = problem.study
    known = {factor.name: factor for factor in study.factors}
    for name, value in fix.items():
        factor = known.get(name)
        if factor is None:
            raise refusal(f"no factor is called {name}", _WHERE, f"use {', '.join(known)}")
        if isinstance(factor, CategoricalFactor):
            if value not in factor.levels:
                raise refusal(
                    f"{name} has no level {value}", _WHERE, f"use {', '.join(factor.levels)}"
                )
        elif isinstance(value, str) or not np.isfinite(value):
            raise refusal(f"{name} is {value}", _WHERE, f"give a number in {factor.unit}")
        elif factor.scale == "log" and value <= 0:
            raise refusal(f"{name} is {value:g}", _WHERE, "give a number above 0")
    pinned = replace(
        problem,
        region=_pinned(problem.region, study, fix),
        tight=_pinned(problem.tight, study, fix),
        combinations=_kept_levels(problem, fix),
        known=(),
    )
    rows = replace(bare_arena(pinned.tight, pinned.combinations[0]), room=problem.room)
    anywhere = peak(np.zeros(n_terms(len(study.numeric))))
    if seek(rows, anywhere) is None:
        raise refusal(
            "around these values the room of the tolerances reaches beyond what was explored",
            _WHERE,
            "fix values farther inside, or ask for the bare optimum with --room none",
        )
    return pinned


def _pinned(region: Region, study: Study, fix: Setting) -> Region:
    """Leave a region the directions in which fixed factors stand still."""
    places = [j for j, factor in enumerate(study.numeric) if factor.name in fix]
    if not places:
        return region
    actual = np.ones(len(study.numeric))
    for j in places:
        actual[j] = float(fix[study.numeric[j].name])
    wanted = to_coded(study.numeric, actual)[places]
    held = region.basis[places]
    short = wanted - region.origin[places]
    moved = np.linalg.lstsq(held, short, rcond=None)[0] if held.shape[1] else np.zeros(0)
    if np.abs(held @ moved - short).max(initial=0.0) > _OFF:
        names = ", ".join(study.numeric[j].name for j in places)
        raise refusal(
            f"the runs never came near these values of {names} together",
            _WHERE,
            "fix values that the runs span",
        )
    still = replace(
        region, origin=region.origin + region.basis @ moved, basis=_left(region.basis, places)
    )
    return centred(still, "the fixed values leave no setting in what may be searched", _WHERE)


def _left(basis: FloatArray, places: list[int]) -> FloatArray:
    """Give the directions of a basis (k, r) along which these factors stand still."""
    held = basis[places]
    clear = ~(np.abs(held) > _OFF).any(axis=0)
    if int(clear.sum()) == basis.shape[1] - np.linalg.matrix_rank(held):
        # columns of the identity stay what they are
        return basis[:, clear]
    result: FloatArray = basis @ null_space(held)
    return result


def _kept_levels(problem: Problem, fix: Setting) -> tuple[tuple[int, ...], ...]:
    categorical = problem.study.categorical
    return tuple(
        levels
        for levels in problem.combinations
        if all(
            factor.name not in fix or factor.levels[level] == fix[factor.name]
            for factor, level in zip(categorical, levels, strict=True)
        )
    )
