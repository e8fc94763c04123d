"""The bound of D: never below what brute force finds, closed within the gap, right at its edges."""

from itertools import product

import cvxpy as cp
import numpy as np
import pytest

from support.brute import log_d, second_order, slack
from support.build import central_composite, less, make_study, more
from support.problems import random_models
from wideberth.decide.arena import no_cuts
from wideberth.decide.certificate import bound_desirability
from wideberth.decide.problem import arena, build_problem
from wideberth.decide.recommend import recommend
from wideberth.decide.search import find_best, local_optima
from wideberth.decide.tangents import highest_on_boxes, relax, row_above, row_value
from wideberth.fit.models import fit
from wideberth.study.reading import read_study
from wideberth.study.records import Goal, Limit


def test_a_claim_of_too_little_is_not_closed_below_the_truth():
    # if the search had missed the optimum, the bound would have to stay above the true one
    models = random_models(6)
    problem = build_problem(models, seed=1, room=False)
    rows = arena(problem, (), "simultaneous")
    best = find_best(rows)
    truth = float(np.exp(best.score))
    worse = best.x * 0.5
    proof = bound_desirability(rows, best.cuts, worse[None, :], 0.5 * truth)
    assert proof.bound >= truth - 1e-9


def test_tangents_lie_above_the_rows_everywhere():
    for seed in range(12):
        models = random_models(seed)
        problem = build_problem(models, seed=1, room=False)
        relaxed = relax(arena(problem, (), "simultaneous"), no_cuts(arena(problem, (), "means")))
        rng = np.random.default_rng(seed)
        r = relaxed.planes.shape[1]
        z, at = rng.uniform(-1.4, 1.4, (400, r)), rng.uniform(-1.4, 1.4, (8, r))
        for row in relaxed.rows:
            for quadratic in row_above(row, at):
                above = second_order(z) @ quadratic
                assert (above >= row_value(row, z) - 1e-8).all()


def test_the_highest_value_on_a_box_is_never_understated():
    rng = np.random.default_rng(0)
    for k in (1, 2, 3, 5):
        p = 1 + 2 * k + k * (k - 1) // 2
        coefficients = rng.standard_normal((20, p))
        middles, halves = rng.uniform(-1, 1, (20, k)), rng.uniform(0, 0.7, (20, k))
        bound = highest_on_boxes(coefficients, middles, halves)
        x = middles[:, None, :] + halves[:, None, :] * rng.uniform(-1, 1, (20, 3000, k))
        values = np.einsum("nsp,np->ns", second_order(x), coefficients)
        assert (bound >= values.max(axis=1) - 1e-12).all()


def test_every_settable_setting_by_hand_against_the_gap():
    rng = np.random.default_rng(3)
    x = central_composite(2, n_centre=6)
    y = 60 + 3 * x[:, 0] - 4 * (x**2).sum(axis=1) + 0.4 * rng.standard_normal(len(x))
    z = 20 + 2 * x[:, 0] + x[:, 1] + 0.3 * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y, "z": z},
        goals={"y": more(45, 65), "z": less(25, 15)},
        limits={"z": Limit(None, 23.0, "batch")},
        step="0.3",
        tolerance=0.1,
    )
    models = fit(study)
    choice = recommend(models)
    assert choice.status == "met"
    best = 0.0
    for setting in product(np.arange(-5, 6) * 0.3, repeat=2):
        place = np.array(setting)
        if slack(models, choice, place, tolerance=0.1) >= 0:
            best = max(best, float(np.exp(log_d(models, place))))
    assert best == pytest.approx(choice.desirability, abs=1e-9)
    assert best <= choice.desirability + choice.proof_gap + 1e-12
    assert choice.proof_gap <= 1e-3 + 1e-9
    # the coarse steps cost more than the gap of the settable proof could hide
    assert choice.unrounded.desirability > choice.desirability


def test_a_bound_on_the_steps_stays_above_every_one_of_them_when_the_claim_is_too_low():
    # single settings stay open then; none of the others may be forgotten
    rng = np.random.default_rng(3)
    x = central_composite(2, n_centre=6)
    y = 60 + 3 * x[:, 0] - 4 * (x**2).sum(axis=1) + 0.4 * rng.standard_normal(len(x))
    models = fit(make_study(x, {"y": y}, goals={"y": more(30, 65)}))
    problem = build_problem(models, seed=1, room=False)
    rows = arena(problem, (), "simultaneous")
    # uneven values, as a factor on a log scale has them: some boxes shrink to a setting early
    uneven = np.array([-1.3, -0.2, 0.3, 0.35, 0.4, 0.42, 0.44, 0.46, 0.5])
    other = np.array([-1.0, -0.03, -0.02, -0.01, 0.0, 0.01])
    places = np.array(list(product(uneven, other)))
    places = places[(places**2).sum(axis=1) <= 2.0]
    best = float(np.exp(log_d(models, places)).max())
    none, axes = np.zeros((0, 2)), ((0, uneven), (1, other))
    for claim in (0.05, 0.2, 0.5, 0.8):
        proof = bound_desirability(rows, no_cuts(rows), none, claim * best, axes=axes)
        assert proof.bound >= best - 1e-9
        assert not proof.closed


def test_levels_of_a_categorical_factor_are_all_bounded():
    x = np.concatenate([central_composite(2, n_centre=4)] * 2)
    level = np.repeat([0, 1], len(x) // 2)
    rng = np.random.default_rng(0)
    y = 30 - (x**2).sum(axis=1) + 2.0 * level * x[:, 0] + 0.3 * rng.standard_normal(len(x))
    study = make_study(
        x, {"y": y}, goals={"y": more(20, 34)}, categorical={"resin": (("old", "new"), level)}
    )
    choice = recommend(fit(study))
    assert choice.proof_gap <= 1e-3 + 1e-9


def test_unreached_goals_are_bounded_by_nearly_nothing():
    rng = np.random.default_rng(0)
    x = central_composite(2)
    y = 10 + x[:, 0] + 0.1 * rng.standard_normal(len(x))
    choice = recommend(fit(make_study(x, {"y": y}, goals={"y": more(50, 60)})))
    assert choice.status == "unreached"
    assert choice.unrounded.proof_gap <= 1e-3 + 1e-9


def test_no_claim_where_there_is_no_goal_or_no_answer():
    rng = np.random.default_rng(0)
    x = central_composite(2)
    y = 10 + x[:, 0] + 0.1 * rng.standard_normal(len(x))
    only_limits = recommend(fit(make_study(x, {"y": y}, limits={"y": Limit(9.0, None, "batch")})))
    assert only_limits.proof_gap is None
    conflict = make_study(
        x, {"y": y}, goals={"y": more(5, 15)}, limits={"y": Limit(20.0, None, "none")}
    )
    assert recommend(fit(conflict)).proof_gap is None


def test_one_response_against_a_semidefinite_relaxation():
    # in a ball one quadratic is solved exactly by its semidefinite relaxation (S-lemma)
    rng = np.random.default_rng(5)
    for k in (2, 3, 4):
        x = central_composite(k, n_centre=5)
        f = second_order(x)
        beta = rng.standard_normal(f.shape[1]) * 2
        y = 50 + f @ beta + 0.3 * rng.standard_normal(len(x))
        goals = {"y": Goal("more", (0.0,), (200.0,))}
        models = fit(make_study(x, {"y": y}, goals=goals))
        problem = build_problem(models, seed=1, room=False)
        rows = arena(problem, (), "simultaneous")
        best = find_best(rows)
        reached = float(np.exp(best.score))
        proof = bound_desirability(rows, best.cuts, local_optima(rows, best), reached)
        coefficients = models["y"].coefficients
        place = np.argsort([term.monomial for term in models["y"].terms])
        b = coefficients[place]
        quad = np.diag(b[1 + k : 1 + 2 * k])
        first, second = np.triu_indices(k, 1)
        quad[first, second] = quad[second, first] = b[1 + 2 * k :] / 2
        lifted = cp.Variable((k + 1, k + 1), PSD=True)
        whole = np.block(
            [[np.array([[b[0]]]), b[None, 1 : 1 + k] / 2], [b[1 : 1 + k, None] / 2, quad]]
        )
        ball = (x**2).sum(axis=1).max()
        box = np.abs(x).max() ** 2
        constraints = [lifted[0, 0] == 1, cp.trace(lifted[1:, 1:]) <= ball]
        constraints += [lifted[i, i] <= box for i in range(1, k + 1)]
        relaxation = cp.Problem(cp.Maximize(cp.trace(whole @ lifted)), constraints)
        relaxation.solve(solver=cp.CLARABEL)
        assert reached <= relaxation.value / 200 + 1e-6
        assert proof.bound >= reached
        assert proof.bound <= relaxation.value / 200 + 1e-3 + 1e-6


def test_the_demo_is_proven():
    choice = recommend(fit(read_study("studies/process/hydrogenation")))
    assert 0 <= choice.proof_gap <= 1e-3 + 1e-9
    assert 0 <= choice.unrounded.proof_gap <= 1e-3 + 1e-9
