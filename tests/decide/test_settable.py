"""Settable steps: whole multiples, searched, against every combination tried."""

from itertools import product

import numpy as np
import pytest

from support.brute import log_d, slack
from support.build import central_composite, make_study, more
from wideberth.decide.recommend import recommend
from wideberth.fit.models import fit
from wideberth.study.records import Goal, Limit


def _models(k, step, seed, *, partly=False, guard="batch"):
    rng = np.random.default_rng(seed)
    x = central_composite(k)
    y = 20 + x @ rng.uniform(1, 3, k) - (x**2) @ rng.uniform(0.5, 2, k)
    z = 10 + x @ rng.uniform(-2, 2, k) + 0.5 * (x**2).sum(axis=1)
    values = {
        "y": y + 0.2 * rng.standard_normal(len(x)),
        "z": z + 0.2 * rng.standard_normal(len(x)),
    }
    goals = {"y": more(10.0, 26.0), "z": Goal("near", (4.0, 16.0), (9.0, 9.0))}
    limits = {"z": Limit(None, 13.0, guard)}
    steps = {f"f{j}": step for j in range(k)}
    if partly:
        del steps["f0"]
    return fit(make_study(x, values, goals=goals, limits=limits, step=steps))


@pytest.mark.parametrize(("k", "step"), [(1, "0.3"), (2, "0.25"), (2, "0.7"), (3, "0.35")])
@pytest.mark.parametrize("seed", range(3))
def test_the_best_of_all_combinations(k, step, seed):
    models = _models(k, step, seed)
    choice = recommend(models)
    assert choice.status == "met"
    stride = float(step)
    x = np.array(list(choice.setpoint.values()))
    assert x / stride == pytest.approx(np.round(x / stride), abs=1e-12)
    top = np.abs(models.study.runs.numeric_actual).max()
    axis = stride * np.arange(-int(top / stride), int(top / stride) + 1)
    grid = np.array(list(product(axis, repeat=k)))
    held = slack(models, choice, grid) >= 0
    best = np.exp(log_d(models, grid[held]).max())
    assert choice.desirability == pytest.approx(best, abs=1e-9)
    assert choice.unrounded.desirability >= choice.desirability - 1e-9


def test_factors_without_a_step_are_optimised_again():
    models = _models(2, "0.5", 1, partly=True)
    choice = recommend(models)
    free, stepped = choice.setpoint["f0"], choice.setpoint["f1"]
    assert stepped / 0.5 == pytest.approx(round(stepped / 0.5), abs=1e-12)
    best = 0.0
    for value in np.arange(-2, 3) * 0.5:
        line = np.column_stack([np.linspace(-1.5, 1.5, 30001), np.full(30001, value)])
        held = slack(models, choice, line) >= 0
        if held.any():
            best = max(best, float(np.exp(log_d(models, line[held]).max())))
    assert choice.desirability == pytest.approx(best, abs=1e-6)
    assert choice.desirability >= best - 1e-9
    assert abs(free) <= 1.5


def test_decimal_steps_are_exact():
    models = _models(2, "0.1", 0)
    for value in recommend(models).setpoint.values():
        assert value == round(value, 1)


def test_steps_too_coarse_for_any_limit_are_said():
    x = central_composite(1, n_centre=6)
    rng = np.random.default_rng(0)
    y = 10 + 5 * x[:, 0] + 0.01 * rng.standard_normal(len(x))
    study = make_study(x, {"y": y}, limits={"y": Limit(11.5, 13.5, "none")}, step="1")
    choice = recommend(fit(study))
    assert choice.status == "conflict"
    assert any("settable" in conflict.text for conflict in choice.conflicts)


def test_steps_keep_to_the_directions_that_were_run():
    x = central_composite(2)
    x = np.column_stack([x, x[:, 0]])
    y = x[:, 0] - x[:, 1] ** 2 + 0.1 * np.random.default_rng(0).standard_normal(12)
    choice = recommend(fit(make_study(x, {"y": y}, goals={"y": more(-2.0, 2.0)}, step="0.3")))
    assert choice.setpoint["f0"] == choice.setpoint["f2"] == pytest.approx(1.2)
