"""The setpoint against today's setting: exact paired intervals, and a verdict that can say no."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from support.brute import second_order
from support.build import central_composite, less, make_study, more
from wideberth.fit.models import fit
from wideberth.study.records import Limit
from wideberth.uncertainty.assess import uncertainty


def _models(today, *, noise=0.5, limits=None, seed=0):
    rng = np.random.default_rng(seed)
    x = central_composite(2, n_centre=6)
    y = 50 - 3 * ((x - 0.3) ** 2).sum(axis=1) + noise * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y},
        goals={"y": more(20, 60), "cost": less(20, 0)},
        formulas={"cost": {(): 10.0, ("f0",): 1.0}},
        limits=limits,
    )
    return fit(replace(study, today=today))


def test_the_paired_interval_is_the_t_interval_of_a_contrast():
    sure = uncertainty(_models({"f0": -0.8, "f1": -0.5}), n_draws=2000)
    model = _models({})["y"]
    here = np.array(list(sure.setting.values()))
    moved = second_order(here) - second_order(np.array([-0.8, -0.5]))
    mean = moved @ model.coefficients
    half = stats.t.ppf(0.975, model.df_residual) * model.s
    half *= np.sqrt(moved @ model.covariance @ moved)
    one = sure.today.differences["y"]
    assert one.mean == pytest.approx(mean)
    assert one.interval == pytest.approx((mean - half, mean + half))
    cost = sure.today.differences["cost"]
    assert cost.interval == (cost.mean, cost.mean)
    assert cost.mean == pytest.approx(here[0] + 0.8)


def test_paired_intervals_cover_in_simulation():
    rng = np.random.default_rng(1)
    x = central_composite(2, n_centre=5)
    truth = 50 - 3 * ((x - 0.3) ** 2).sum(axis=1)
    hits, n = 0, 400
    at = {"f0": 0.4, "f1": 0.1}
    for _ in range(n):
        y = truth + rng.standard_normal(len(x))
        study = make_study(x, {"y": y}, goals={"y": more(20, 60)})
        models = fit(replace(study, today={"f0": -0.8, "f1": -0.5}))
        low, high = uncertainty(models, at=at, n_draws=100).today.differences["y"].interval
        real = 3 * (1.1**2 + 0.8**2) - 3 * (0.1**2 + 0.2**2)
        hits += low <= real <= high
    assert hits / n == pytest.approx(0.95, abs=3 * np.sqrt(0.05 * 0.95 / n))


def test_better_worse_and_not_shown():
    assert "Shown to be better" in uncertainty(_models({"f0": -1.0, "f1": -0.8})).today.verdict
    close = uncertainty(_models({"f0": -0.05, "f1": 0.28}, noise=3.0))
    assert close.today.verdict.startswith("Not shown to be better")
    models = _models({"f0": 0.1, "f1": 0.3})
    worse = uncertainty(models, at={"f0": -1.0, "f1": -0.8})
    assert worse.today.verdict.startswith("Shown to be worse")


def test_conformance_and_broken_limits_of_today():
    sure = uncertainty(_models({"f0": -1.0, "f1": -0.8}, limits={"y": Limit(47.0, None, "batch")}))
    assert sure.today.broken == ("y low",)
    low, high = sure.today.conformance.interval
    assert 0.5 < low <= sure.today.conformance.mean <= high <= 1.0


def test_nothing_is_said_where_today_is_not_stated_in_full():
    assert uncertainty(_models({}), n_draws=100).today is None
    assert uncertainty(_models({"f0": 0.1}), n_draws=100).today is None


def test_without_degrees_of_freedom_the_difference_stands_alone():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 3, 4, 8]]
    y = np.array([1.0, 2.0, 3.0, 5.0, 4.0, 2.5])
    study = make_study(x, {"y": y}, goals={"y": more(0, 6)})
    sure = uncertainty(fit(replace(study, today={"f0": 0.0, "f1": 0.0})))
    assert sure.today.differences["y"].interval is None
    assert "cannot be said" in sure.today.verdict
