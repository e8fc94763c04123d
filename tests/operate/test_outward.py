"""The ridge of the compromise: outwards only where something calls, never beyond allowed."""

import numpy as np
import pytest
from scipy import stats

from support.brute import log_d, second_order
from support.build import central_composite, make_study, more
from wideberth.decide.recommend import solve
from wideberth.fit.models import fit
from wideberth.operate.outward import outward
from wideberth.study.reading import read_study
from wideberth.study.records import Limit


@pytest.fixture(scope="module")
def ridge():
    models = fit(read_study("studies/process/ridge"))
    return models, *solve(models)


def test_the_ridge_study_has_runs_to_try_beyond_what_was_explored(ridge):
    _models, problem, choice = ridge
    answer = outward(problem, choice)
    assert choice.status == "met"
    assert [run.reach for run in answer.runs] == [1.15, 1.3, 1.5]
    coded = [
        [
            (run.setting["pressure"] - 2.4) / 0.6,
            (run.setting["crossflow"] - 2.0) / 0.6,
            (run.setting["solids"] - 40) / 10,
        ]
        for run in answer.runs
    ]
    distance = np.sqrt((np.array(coded) ** 2).sum(axis=1))
    assert (distance > 8**0.25).all()
    for run in answer.runs:
        assert run.leverage_ratio > 1
        assert run.desirability > choice.desirability
        assert 1.2 <= run.setting["pressure"] <= 4.0
        assert 0.8 <= run.setting["crossflow"] <= 4.0
        assert 20 <= run.setting["solids"] <= 60
        assert run.setting["solids"] == round(run.setting["solids"])
    widths = [np.ptp(run.predictions["flux"].mean_interval) for run in answer.runs]
    assert widths == sorted(widths)


def test_the_path_climbs_and_its_settings_are_the_best_at_their_reach():
    x = central_composite(2, n_centre=6)
    rng = np.random.default_rng(1)
    y = 50 + 4 * x[:, 0] + 2 * x[:, 1] - 0.3 * x[:, 0] ** 2 + 0.2 * rng.standard_normal(len(x))
    study = make_study(
        x, {"y": y}, goals={"y": more(30, 75)}, allowed={"f0": (-3, 3), "f1": (-3, 3)}
    )
    models = fit(study)
    problem, choice = solve(models)
    answer = outward(problem, choice)
    assert [point.reach for point in answer.path] == [0.25, 0.5, 0.75, 1.0, 1.15, 1.3, 1.5]
    for point in answer.path:
        here = np.array(list(point.setting.values()))
        # the region is the disc of radius sqrt 2, cut by the box of the runs of the same reach
        turn = np.linspace(0, 2 * np.pi, 20_001)
        edge = point.reach * np.sqrt(2) * np.stack([np.cos(turn), np.sin(turn)], axis=-1)
        edge = np.clip(edge, -point.reach * np.sqrt(2), point.reach * np.sqrt(2))
        best = np.exp(log_d(models, edge).max())
        assert np.exp(log_d(models, here)) == pytest.approx(best, abs=1e-4)
        assert np.sqrt((here**2).sum()) <= point.reach * np.sqrt(2) + 1e-6


def test_runs_to_try_keep_guarded_limits():
    x = central_composite(2, n_centre=6)
    rng = np.random.default_rng(1)
    y = 50 + 4 * x[:, 0] + 0.2 * rng.standard_normal(len(x))
    heat = 30 + 4 * x[:, 0] + x[:, 1] + 0.3 * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y, "heat": heat},
        goals={"y": more(30, 75)},
        limits={"heat": Limit(None, 38.5, "batch")},
        allowed={"f0": (-4, 4), "f1": (-4, 4)},
    )
    models = fit(study)
    problem, choice = solve(models)
    answer = outward(problem, choice)
    model = models["heat"]

    for run in answer.runs:
        f = second_order(np.array(list(run.setting.values())))
        h = f @ model.covariance @ f
        bound = f @ model.coefficients + stats.t.ppf(0.95, model.df_residual) * model.s * np.sqrt(
            1 + h
        )
        assert bound <= 38.5 + 1e-6


def test_an_optimum_inside_calls_nowhere():
    models = fit(read_study("studies/process/plating"))
    answer = outward(*solve(models))
    assert answer.runs == ()
    assert "does not lean" in answer.reason


def test_without_wider_allowed_ranges_the_box_is_never_left():
    x = central_composite(2, n_centre=6, alpha=1.0)
    rng = np.random.default_rng(1)
    y = 50 + 4 * x[:, 0] + 3 * x[:, 1] + 0.2 * rng.standard_normal(len(x))
    problem, choice = solve(fit(make_study(x, {"y": y}, goals={"y": more(30, 75)})))
    answer = outward(problem, choice)
    assert answer.runs == ()
    assert "allowed" in answer.reason
