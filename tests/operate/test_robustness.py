"""Wandering settings: moments, shares, worst means, and which tolerance to tighten."""

import numpy as np
import pytest

from support.brute import second_order
from support.build import central_composite, make_study, more
from wideberth.fit.models import fit
from wideberth.operate.robustness import robustness
from wideberth.study.reading import read_study
from wideberth.study.records import Limit

AT = {"f0": 0.5, "f1": -0.2}


def _models(*, tolerance, limit=None, noise=0.3):
    rng = np.random.default_rng(3)
    x = central_composite(2, n_centre=6)
    y = 20 + 4 * x[:, 0] - x[:, 0] ** 2 + 0.3 * x[:, 1] + noise * rng.standard_normal(len(x))
    limits = {} if limit is None else {"y": Limit(None, limit, "none")}
    return fit(
        make_study(x, {"y": y}, goals={"y": more(5, 30)}, limits=limits, tolerance=tolerance)
    )


def test_shift_spread_and_shares_against_monte_carlo():
    models = _models(tolerance={"f0": 0.3, "f1": 0.4})
    one = robustness(models, at=AT).responses["y"]
    rng = np.random.default_rng(0)
    sd = np.array([0.3, 0.4]) / 1.959964
    x = np.array([0.5, -0.2])
    y = second_order(x + sd * rng.standard_normal((400_000, 2))) @ models["y"].coefficients
    here = second_order(x) @ models["y"].coefficients
    assert one.shift == pytest.approx(y.mean() - here, abs=0.005)
    assert one.sd_setting == pytest.approx(y.std(), rel=0.01)
    assert one.sd_total == pytest.approx(np.hypot(y.std(), models["y"].s), rel=0.01)
    assert sum(one.shares.values()) == pytest.approx(1.0)
    assert one.shares["f0"] > 0.9
    box = second_order(x + np.array([0.3, 0.4]) * rng.uniform(-1, 1, (50_000, 2)))
    means = box @ models["y"].coefficients
    assert one.worst[0] <= means.min() + 1e-9
    assert one.worst[1] >= means.max() - 1e-9
    assert one.worst == pytest.approx((means.min(), means.max()), abs=0.05)


def test_the_tolerance_that_matters_is_named_with_what_it_buys():
    models = _models(tolerance={"f0": 0.4, "f1": 0.4}, limit=22.6)
    answer = robustness(models, at=AT)
    assert 0.6 < answer.conformance.mean < 0.99
    assert answer.tighten_first == "f0"
    assert answer.halved["f0"] > answer.conformance.mean + 0.01
    assert abs(answer.halved["f1"] - answer.conformance.mean) < 0.01
    assert "Tighten f0 first" in answer.advice


def test_nothing_wanders_without_tolerances():
    answer = robustness(_models(tolerance=None), at=AT)
    one = answer.responses["y"]
    assert (one.shift, one.sd_setting, one.shares) == (0.0, 0.0, {})
    assert "state tolerances" in answer.advice
    assert "f0, f1: no tolerance is stated" in answer.findings[0].text


def test_an_exact_response_has_no_batch_noise_and_a_tolerance_on_a_log_factor_counts():
    answer = robustness(fit(read_study("studies/process/hydrogenation")))
    cost = answer.responses["batch_cost"]
    assert cost.sd_batch == 0.0
    assert cost.shift == pytest.approx(0.0, abs=1e-9)
    sd = np.array([180 * 0.04, 6 * 0.2, 4.5 * 2]) / 1.959964
    assert cost.sd_setting == pytest.approx(np.sqrt((sd**2).sum()), rel=1e-6)
    assert cost.shares["substrate"] == pytest.approx(sd[2] ** 2 / (sd**2).sum(), rel=1e-6)


def test_without_degrees_of_freedom_the_settings_still_wander():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 3, 4, 8]]
    y = np.array([1.0, 2.0, 3.0, 5.0, 4.0, 2.5])
    study = make_study(x, {"y": y}, goals={"y": more(0, 6)}, tolerance=0.1)
    answer = robustness(fit(study), at={"f0": 0.2, "f1": 0.1})
    assert answer.conformance is None
    assert answer.responses["y"].sd_setting > 0
    assert answer.responses["y"].sd_batch is None
    assert answer.responses["y"].sd_total is None
