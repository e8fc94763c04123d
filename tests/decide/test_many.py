"""Optima of many draws: each as good as a search of its own, none where nothing holds."""

from dataclasses import replace

import numpy as np
import pytest

from support.brute import second_order
from support.build import central_composite, make_study, more, small_composite
from wideberth.decide.aims import BEST
from wideberth.decide.many import find_many, score_of
from wideberth.decide.problem import build_problem, drawn_arena
from wideberth.decide.search import find_best
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.study.records import Goal, Limit

N = 14


def _one(arena, i):
    """The arena of a single draw, as the ordinary search takes it."""
    rows = []
    for row in arena.hard:
        if row.curve.ndim == 2:
            weight = float(np.broadcast_to(row.weight, len(row.curve))[i])
            rows.append(replace(row, curve=row.curve[i], weight=weight))
        else:
            rows.append(row)
    return replace(arena, goal_means=arena.goal_means[:, i], hard=tuple(rows))


def _problem(seed):
    rng = np.random.default_rng(seed)
    k = 1 + seed % 5
    x = central_composite(k, n_centre=5) if k < 5 else small_composite(k)
    f = second_order(x)
    values = {
        f"y{j}": f @ (3 * rng.standard_normal(f.shape[1])) + 1.5 * rng.standard_normal(len(x))
        for j in range(3)
    }
    goals = {"y0": more(-10, 12), "y1": Goal("near", (-8.0, 10.0), (0.0, 1.0), (0.5, 2.0))}
    guard = ("batch", "share", "none")[seed % 3]
    limits = {"y2": Limit(None, float(np.quantile(values["y2"], 0.6)) + 4, guard)}
    models = fit(make_study(x, values, goals=goals, limits=limits))
    problem = build_problem(models, seed=1, room=False)
    draws = draw_coefficients(models, N, seed=1)
    return problem, drawn_arena(problem, (), "simultaneous", draws)


def test_every_draw_gets_the_optimum_that_its_own_search_finds():
    compared, missed = 0, []
    for seed in range(12):
        problem, rows = _problem(seed)
        found = find_many(rows, problem.region.middle[None, :])
        for i in range(N):
            alone = find_best(_one(rows, i))
            assert (alone is not None) == bool(found.feasible[i]), (seed, i)
            if alone is None or not np.isfinite(alone.score):
                continue
            compared += 1
            if alone.score > found.score[i] + 1e-4:
                missed.append((seed, i, alone.score, found.score[i]))
    assert compared > 90
    assert len(missed) <= 0.01 * compared, missed


def test_scores_are_what_the_settings_are_worth():
    problem, rows = _problem(4)
    found = find_many(rows, problem.region.middle[None, :])
    some = np.flatnonzero(np.isfinite(found.score))
    again = score_of(rows.take(some), BEST, found.x[some])
    assert again == pytest.approx(found.score[some], abs=1e-12)


def test_draws_without_a_setting_are_flagged():
    x = central_composite(2)
    rng = np.random.default_rng(0)
    y = 10 + x[:, 0] + rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y, "z": y + rng.standard_normal(len(x))},
        goals={"z": more(0, 20)},
        limits={"y": Limit(None, 6.0, "none")},
    )
    models = fit(study)
    problem = build_problem(models, seed=1, room=False)
    draws = draw_coefficients(models, 300, seed=1)
    rows = drawn_arena(problem, (), "means", draws)
    found = find_many(rows, problem.region.middle[None, :])
    # the lowest value anywhere, by brute force on a fine grid of the disc
    grid = rng.uniform(-1.5, 1.5, (20_000, 2))
    grid = grid[(grid**2).sum(axis=1) <= 2.0]
    lowest = (second_order(grid) @ draws.of(models["y"]).T).min(axis=0)
    clear = np.abs(lowest - 6.0) > 0.02
    assert clear.sum() > 250
    assert 0 < found.feasible.mean() < 1
    assert np.array_equal(found.feasible[clear], (lowest <= 6.0)[clear])
    assert (found.score[~found.feasible] == -np.inf).all()


def test_on_a_plateau_the_setting_farthest_from_trouble_is_taken():
    x = central_composite(2)
    rng = np.random.default_rng(1)
    y = 50 - 3 * x[:, 0] ** 2 - 3 * x[:, 1] ** 2 + 0.1 * rng.standard_normal(len(x))
    models = fit(make_study(x, {"y": y}, goals={"y": more(0, 45)}))
    problem = build_problem(models, seed=1, room=False)
    rows = drawn_arena(problem, (), "means", draw_coefficients(models, 50, seed=1))
    found = find_many(rows, np.array([[0.8, 0.8]]))
    assert (found.score > -1e-8).all()
    assert np.abs(found.x).max() < 0.15


def test_limits_without_goals_seek_the_largest_margin():
    x = central_composite(1)
    rng = np.random.default_rng(2)
    y = 10 + 3 * x[:, 0] ** 2 + 0.3 * rng.standard_normal(len(x))
    models = fit(make_study(x, {"y": y}, limits={"y": Limit(None, 14.0, "batch")}))
    problem = build_problem(models, seed=1, room=False)
    rows = drawn_arena(problem, (), "simultaneous", draw_coefficients(models, 50, seed=1))
    found = find_many(rows, np.array([[1.0]]))
    assert found.feasible.all()
    assert np.abs(found.x).max() < 0.3
    assert (found.score > 0).all()
