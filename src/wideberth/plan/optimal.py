"""Optimal runs: for cut regions, odd numbers of runs, or added to runs already made."""

from __future__ import annotations

from dataclasses import dataclass
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
_WORK = 15e6
_STARTS = (2, 40)
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
    task, n_starts, pool = optimal_task(study, choice, earlier, blocks)
    chosen, score = best_rows(task, choice.criterion, seed=seed, n_starts=n_starts)
    n_chosen, n_terms = len(chosen) + len(pool.middles), task.rows.shape[1]
    if not np.isfinite(score):
        raise _too_few(n_chosen, n_terms, pool.n_old)
    places = np.concatenate([pool.middles, chosen])
    is_centre = np.arange(n_chosen) < len(pool.middles)
    order = np.lexsort((places, is_centre, task.group[places]))
    places, is_centre = places[order], is_centre[order]
    m = len(pool.coded)
    design = Design(
        coded=pool.coded[places % m],
        levels=pool.levels[places % m],
        kind=tuple("centre" if flag else "" for flag in is_centre),
        block=task.group[places],
        n_blocks=len(blocks),
        said=pool.said,
    )
    efficiency = proven_efficiency(task, choice.criterion, score)
    return design, Certificate(choice.criterion, m, len(chosen), efficiency, n_starts)


@dataclass(frozen=True, slots=True, eq=False)
class Pool:
    """The m candidate settings, and the centre runs that are there anyway.

    Attributes
    ----------
    coded : ndarray, shape (m, k); levels : ndarray of int, shape (m, c)
    middles : ndarray of int
        Rows of the task that the centre runs stand in.
    n_old : int
        Runs already made.
    said : tuple of str
    """

    coded: FloatArray
    levels: IntArray
    middles: IntArray
    n_old: int
    said: tuple[str, ...]


def optimal_task(
    study: Study, choice: PlanChoice, earlier: Earlier | None, blocks: tuple[str, ...]
) -> tuple[Task, int, Pool]:
    """State what is to be chosen, from how many starts, and out of what."""
    actual, levels = candidate_settings(study, earlier)
    m, n_blocks = len(actual), len(blocks)
    everything = with_runs(
        study,
        np.concatenate([actual] * n_blocks),
        np.concatenate([levels] * n_blocks),
        tuple(name for name in blocks for _ in range(m)),
        ("",) * (m * n_blocks),
    )
    model = planned_model(everything, choice.order)
    n_old = len(everything.runs.rows) - m * n_blocks
    rows, old = model.matrix[n_old:], model.matrix[:n_old]
    said: list[str] = []
    centre = _CENTRE if study.numeric else 0
    sizes, per_block = _sizes(choice, len(model.terms), n_old, n_blocks, centre, said)
    x, at = even_runnable(study, earlier)
    coded = to_coded(study.numeric, actual)
    middle = int(((coded - x.mean(axis=0)) ** 2).sum(axis=1).argmin())
    middles = np.array([b * m + middle for b in range(n_blocks)] * per_block, dtype=np.int64)
    task = Task(
        rows=rows,
        group=np.repeat(np.arange(n_blocks), m),
        sizes=sizes,
        fixed=old.T @ old + rows[middles].T @ rows[middles],
        moments=_moments(model, x, at),
    )
    n_starts = int(np.clip(_WORK / (rows.size * max(sum(sizes), 1)), *_STARTS))
    return task, n_starts, Pool(coded, levels, middles, n_old, tuple(said))


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


def _moments(model: PlannedModel, x: FloatArray, levels: IntArray) -> FloatArray:
    """Average f f' over settings, coded (n, k), at levels (n, c), block average: shape (q, q)."""
    terms = features(x)
    rows = np.zeros((len(x), len(model.terms)))
    for at in {tuple(row) for row in levels.tolist()}:
        here = (levels == np.array(at, dtype=np.int64)).all(axis=1)
        rows[here] = terms[here] @ terms_map(model.terms, model.study, levels=at)
    moments: FloatArray = rows.T @ rows / len(rows)
    return moments
