"""Optimal runs: for cut regions, odd numbers of runs, or added to runs already made."""

from __future__ import annotations

from math import ceil

import numpy as np

from wideberth.errors import Fault, InputError
from wideberth.fit.records import terms_map
from wideberth.plan.candidates import candidate_settings, even_runnable
from wideberth.plan.certificate import proven_efficiency
from wideberth.plan.exchange import Task, best_rows
from wideberth.plan.model import PlannedModel, planned_model, with_runs
from wideberth.plan.records import Certificate, Design
from wideberth.plan.safety import Earlier
from wideberth.quadratic.terms import features
from wideberth.study.coding import to_coded
from wideberth.study.records import FloatArray, IntArray, PlanChoice, Study

_SPARE = 5
_CENTRE = 3
_WORK = 300_000
_STARTS = (2, 12)
_WHERE = "study.toml, plan.runs"


def optimal_design(
    study: Study, choice: PlanChoice, earlier: Earlier | None, blocks: tuple[str, ...], *, seed: int
) -> tuple[Design, Certificate]:
    """Choose the runs that tell most about the model, out of all that may be run.

    Parameters
    ----------
    study : Study
        Runs that it holds count.
    blocks : tuple of str
        Names of the blocks that the new runs will stand in.

    Raises
    ------
    InputError
        When there are fewer runs than terms, or hardly any setting may be run.
    """
    actual, levels = candidate_settings(study, earlier)
    m = len(actual)
    everything = with_runs(
        study,
        np.concatenate([actual] * len(blocks)),
        np.concatenate([levels] * len(blocks)),
        tuple(name for name in blocks for _ in range(m)),
        ("",) * (m * len(blocks)),
    )
    model = planned_model(everything, choice.order)
    n_old = len(everything.runs.rows) - m * len(blocks)
    rows, old = model.matrix[n_old:], model.matrix[:n_old]
    said: list[str] = []
    centre = _centre(study, earlier, actual)
    per_block = _CENTRE if study.numeric else 0
    sizes, per_block = _sizes(choice, len(model.terms), n_old, len(blocks), per_block, said)
    middles = [b * m + centre for b in range(len(blocks)) for _ in range(per_block)]
    fixed = old.T @ old + rows[middles].T @ rows[middles]
    group = np.repeat(np.arange(len(blocks)), m)
    task = Task(rows, group, sizes, fixed, _moments(model, study, earlier))
    n_starts = int(np.clip(_WORK / rows.size, *_STARTS))
    chosen, score = best_rows(task, choice.criterion, seed=seed, n_starts=n_starts)
    if not np.isfinite(score):
        raise _too_few(sum(sizes) + len(middles), len(model.terms), n_old)
    places = np.concatenate([np.array(middles, dtype=np.int64), chosen])
    kinds = ["centre"] * len(middles) + [""] * len(chosen)
    is_centre = np.array([kind == "centre" for kind in kinds], dtype=np.int64)
    order = np.lexsort((places, is_centre, group[places]))
    places = places[order]
    coded = to_coded(study.numeric, actual)[places % m]
    design = Design(
        coded=coded,
        levels=levels[places % m],
        kind=tuple(kinds[i] for i in order),
        block=group[places],
        n_blocks=len(blocks),
        said=tuple(said),
    )
    efficiency = proven_efficiency(task, choice.criterion, score)
    return design, Certificate(choice.criterion, m, sum(sizes), efficiency, n_starts)


def _sizes(
    choice: PlanChoice, n_terms: int, n_old: int, n_blocks: int, centre: int, said: list[str]
) -> tuple[tuple[int, ...], int]:
    """Give the runs to choose in each block, and the centre runs of each."""
    runs = choice.runs
    if runs is None:
        runs = max(n_terms + _SPARE - n_old, n_blocks * 2)
        said.append(
            f"{runs} runs by default: {_SPARE} more in the whole than the {n_terms} terms of the"
            " model."
        )
    if runs + n_old < n_terms:
        raise _too_few(runs, n_terms, n_old)
    if choice.centre_runs is not None:
        per_block = choice.centre_runs[0]
    else:
        spare = runs + n_old - n_terms
        per_block = ceil(centre / n_blocks) if spare > centre and runs > 2 * centre else 0
        if per_block:
            said.append(
                f"{per_block} of the runs{' of each block' if n_blocks > 1 else ''} stand at the"
                " centre by default, so that there is pure error."
            )
    free = runs - per_block * n_blocks
    if free < 0:
        what = f"{per_block * n_blocks} centre runs are more than the {runs} runs"
        raise InputError([Fault(what, _WHERE, "raise runs or lower centre_runs")])
    return tuple(free // n_blocks + (b < free % n_blocks) for b in range(n_blocks)), per_block


def _too_few(runs: int, n_terms: int, n_old: int) -> InputError:
    made = f" with the {n_old} already made" if n_old else ""
    what = f"{runs} runs{made} cannot estimate the {n_terms} terms of the model"
    mend = f"use at least {n_terms - n_old} runs, better {n_terms + _SPARE - n_old}, or order = 1"
    return InputError([Fault(what, _WHERE, mend)])


def _centre(study: Study, earlier: Earlier | None, actual: FloatArray) -> int:
    """Find the candidate nearest to the middle of all that may be run."""
    if not study.numeric:
        return 0
    x, _ = even_runnable(study, earlier)
    away = to_coded(study.numeric, actual) - x.mean(axis=0)
    return int((away**2).sum(axis=1).argmin())


def _moments(model: PlannedModel, study: Study, earlier: Earlier | None) -> FloatArray:
    """Average f f' evenly over all that may be run, block average."""
    x, levels = even_runnable(study, earlier)
    return average_moments(model, x, levels)


def average_moments(model: PlannedModel, x: FloatArray, levels: IntArray) -> FloatArray:
    """Average f f' over settings, coded (n, k), at levels (n, c): shape (q, q)."""
    terms = features(x)
    rows = np.zeros((len(x), len(model.terms)))
    for at in {tuple(row) for row in levels.tolist()}:
        here = (levels == np.array(at, dtype=np.int64)).all(axis=1)
        rows[here] = terms[here] @ terms_map(model.terms, model.study, levels=at)
    moments: FloatArray = rows.T @ rows / len(rows)
    return moments
