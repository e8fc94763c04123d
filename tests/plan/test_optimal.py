"""Optimal runs: the exchange against every possible plan, the certificate against the truth."""

from dataclasses import replace
from itertools import combinations_with_replacement

import cvxpy as cp
import numpy as np
import pytest

from support.plans import draft, moments, plan_of
from wideberth.errors import InputError
from wideberth.plan.candidates import candidate_settings, even_runnable
from wideberth.plan.certificate import best_possible, proven_efficiency
from wideberth.plan.exchange import Task, best_rows
from wideberth.plan.plan import plan_runs
from wideberth.study.records import Constraint, PlanChoice


def _task(grid, n, *, fixed=None, groups=1):
    rows = moments(grid)
    q = rows.shape[1]
    fine = moments(np.random.default_rng(1).uniform(-1, 1, (4000, grid.shape[1])))
    return Task(
        rows=np.concatenate([rows] * groups),
        group=np.repeat(np.arange(groups), len(rows)),
        sizes=tuple(n // groups for _ in range(groups)),
        fixed=np.zeros((q, q)) if fixed is None else moments(fixed).T @ moments(fixed),
        moments=fine.T @ fine / len(fine),
    )


LINE = np.linspace(-1, 1, 7)[:, None]
SQUARE = np.array([[a, b] for a in (-1.0, 0.0, 1.0) for b in (-1.0, 0.0, 1.0)])
CUT = np.array([point for point in SQUARE if point.sum() < 1.5])
OLD = np.array([[-1.0, -1.0], [1.0, 1.0], [0.0, 0.0]])
CASES = {
    "line of 4": _task(LINE, 4),
    "line of 5": _task(LINE, 5),
    "square of 6": _task(SQUARE, 6),
    "square of 7": _task(SQUARE, 7),
    "cut square of 7": _task(CUT, 7),
    "added to three": _task(SQUARE, 5, fixed=OLD),
}


def _best_of_all(task, criterion):
    best = np.inf
    for chosen in combinations_with_replacement(range(len(task.rows)), task.sizes[0]):
        information = task.information(np.array(chosen))
        sign, size = np.linalg.slogdet(information)
        if sign > 0 and size > -20:
            score = (
                -size if criterion == "D" else np.trace(np.linalg.inv(information) @ task.moments)
            )
            best = min(best, score)
    return best


@pytest.mark.parametrize("criterion", ["D", "I"])
@pytest.mark.parametrize("case", CASES)
def test_exchange_finds_the_best_and_the_certificate_never_claims_more(case, criterion):
    task = CASES[case]
    best = _best_of_all(task, criterion)
    chosen, score = best_rows(task, criterion, seed=3, n_starts=12)
    assert score == pytest.approx(task.score(chosen, criterion))
    assert score == pytest.approx(best, abs=1e-9)
    q = task.rows.shape[1]
    random = np.random.default_rng(5)
    for plan in [chosen, *(random.integers(0, len(task.rows), (30, len(chosen))))]:
        reached = task.score(plan, criterion)
        if not np.isfinite(reached):
            continue
        true = np.exp((best - reached) / q) if criterion == "D" else best / reached
        proven = proven_efficiency(task, criterion, reached)
        assert proven <= true + 1e-12
        assert proven > 0.5 * true


@pytest.mark.parametrize("case", ["square of 7", "cut square of 7", "added to three"])
def test_the_bound_is_that_of_the_convex_problem(case):
    task = CASES[case]
    m, n = len(task.rows), task.sizes[0]
    weights = cp.Variable(m, nonneg=True)
    information = task.fixed + n * task.rows.T @ cp.diag(weights) @ task.rows
    problem = cp.Problem(cp.Maximize(cp.log_det(information)), [cp.sum(weights) == 1])
    problem.solve(solver=cp.CLARABEL)
    bound = best_possible(task, "D")
    assert bound >= problem.value - 1e-5
    assert bound == pytest.approx(problem.value, abs=6 * 3e-4)
    root = np.linalg.cholesky(task.moments)
    averages = cp.Problem(cp.Minimize(cp.matrix_frac(root, information)), [cp.sum(weights) == 1])
    averages.solve(solver=cp.CLARABEL)
    bound = best_possible(task, "I")
    assert bound <= averages.value + 1e-5
    assert bound == pytest.approx(averages.value, rel=5e-4)


def test_blocks_keep_their_sizes_and_their_bound_holds():
    task = _task(SQUARE, 8, groups=2)
    contrast = np.where(task.group == 0, 1.0, -1.0)[:, None]
    rows = np.column_stack([task.rows, contrast])
    q = rows.shape[1]
    wide = np.zeros((q, q))
    wide[:-1, :-1] = task.moments
    task = Task(rows, task.group, (5, 3), np.zeros((q, q)), wide)
    chosen, score = best_rows(task, "D", seed=1, n_starts=4)
    assert np.bincount(task.group[chosen]).tolist() == [5, 3]
    assert 0.6 < proven_efficiency(task, "D", score) <= 1.0
    # no random plan of these sizes beats the bound
    random, bound = np.random.default_rng(2), best_possible(task, "D")
    for _ in range(300):
        plan = np.concatenate([random.integers(0, 9, 5), random.integers(9, 18, 3)])
        assert -task.score(plan, "D") <= bound


def test_too_few_runs_are_refused_with_the_number_needed():
    with pytest.raises(InputError) as caught:
        plan_of(2, design="optimal", runs=5)
    fault = caught.value.faults[0]
    assert "5 runs cannot estimate the 6 terms" in fault.what
    assert "at least 6 runs" in fault.mend


def test_a_saturated_plan_says_that_nothing_can_be_guarded():
    plan = plan_of(2, design="optimal", runs=6, stated={"allowed": {}})
    assert plan.quality.df_lack + plan.quality.df_pure == 0
    assert any(f.grade == "do not use" for f in plan.findings)
    assert plan.quality.detectable.effect is None


def test_runs_keep_inside_the_cut_region_and_reach_its_edge():
    study = draft(
        2,
        PlanChoice(design="optimal", runs=11),
        allowed={},
        step="0.1",
        constraints=(Constraint("both", {"f0": 1.0, "f1": 1.0}, at_most=0.5),),
    )
    plan = plan_runs(study)
    assert plan.status == "ready"
    totals = [run.setting["f0"] + run.setting["f1"] for run in plan.runs]
    assert max(totals) <= 0.5 + 1e-9
    assert sum(total > 0.39 for total in totals) >= 2


def test_categorical_factors_are_planned_with_their_products():
    study = draft(
        2,
        PlanChoice(design="optimal", runs=16),
        allowed={},
        categorical={"lot": (["a", "b", "c"], [0])},
    )
    plan = plan_runs(study)
    # second order in two factors, two contrasts, and their products with the linear terms
    assert plan.quality.n_terms == 6 + 2 + 4
    assert plan.quality.aliases == ()
    assert {run.setting["lot"] for run in plan.runs} == {"a", "b", "c"}
    assert len(plan.runs) < 3 * 13


def test_a_plan_without_numeric_factors():
    study = draft(
        0,
        PlanChoice(design="optimal", order=1, runs=8, centre_runs=(0, 0)),
        x=np.zeros((1, 0)),
        categorical={"lot": (["a", "b"], [0]), "mill": (["x", "y", "z"], [0])},
    )
    plan = plan_runs(study)
    assert plan.status == "ready"
    assert len(plan.runs) == 8
    assert plan.quality.n_terms == 4


def test_candidates_may_all_be_run_and_cover_the_cut():
    study = draft(
        3,
        allowed={"f0": (-0.5, 2.0)},
        constraints=(Constraint("sum", {"f0": 1.0, "f1": 1.0, "f2": 1.0}, at_least=-1.0),),
    )
    actual, _ = candidate_settings(study, None)
    assert actual[:, 0].min() == -0.5
    assert actual[:, 0].max() == 2.0
    totals = actual.sum(axis=1)
    assert totals.min() == pytest.approx(-1.0, abs=1e-9)
    x, _ = even_runnable(study, None)
    assert x.sum(axis=1).min() >= -1.0 - 1e-9
    # evenly: the mean of the cut box by plain simulation
    sample = np.random.default_rng(0).uniform([-0.5, -1, -1], [2, 1, 1], (200_000, 3))
    assert x.mean(axis=0) == pytest.approx(sample[sample.sum(axis=1) >= -1].mean(axis=0), abs=0.03)


def test_runs_already_made_count_and_the_new_ones_fill_what_they_leave_open():
    x = np.array([[a, b] for a in (-1.0, 1.0) for b in (-1.0, 1.0)] + [[0.0, 0.0]] * 2)
    study = draft(
        2,
        PlanChoice(design="optimal", runs=5),
        x=x,
        values={"y": x.sum(axis=1)},
        blocks=["1"] * 6,
        allowed={},
        keep_runs=True,
    )
    plan = plan_runs(study, append=True)
    # second order in two factors and one contrast between the two blocks
    assert plan.quality.n_runs == 11
    assert plan.quality.n_terms == 7
    assert plan.quality.aliases == ()
    coded = np.array([run.coded for run in plan.runs])
    # four corners and centre runs tell no square: the new runs must lie between
    assert (np.abs(coded).sum(axis=1) == 1).sum() >= 2
    assert 0.5 < plan.certificate.efficiency <= 1.0
    open_sheet = plan_runs(
        replace(study, runs=replace(study.runs, measured=np.full((6, 1), np.nan))), append=True
    )
    assert any("6 runs of the sheet have no result yet" in f.text for f in open_sheet.findings)
