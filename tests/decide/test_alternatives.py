"""Other aims side by side: each is the best for its own aim among what it may choose from."""

import numpy as np
import pytest

from support.build import central_composite, less, make_study, more
from wideberth.decide.alternatives import alternatives, transmitted
from wideberth.decide.arena import goal_targets, goal_values, hard_values, no_cuts
from wideberth.decide.conformance import conformance_over, setting_sd
from wideberth.decide.problem import arena
from wideberth.decide.recommend import solve
from wideberth.decide.region import inside
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.fit.records import surface
from wideberth.quadratic.moments import setting_error_moments, transmitted_variance
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features
from wideberth.study.records import Limit


def _solved(*, tolerance=0.1, limits=True):
    rng = np.random.default_rng(7)
    x = central_composite(3, n_centre=4)
    y = 50 + 4 * x[:, 0] + 3 * x[:, 1] - 3 * (x**2).sum(axis=1) + 2 * x[:, 0] * x[:, 2]
    z = 20 + 3 * x[:, 0] - 2 * x[:, 1] + 2 * x[:, 2] ** 2
    values = {
        "y": y + 0.8 * rng.standard_normal(len(x)),
        "z": z + 0.8 * rng.standard_normal(len(x)),
    }
    stated = {"z": Limit(None, 25.0, "mean")} if limits else {}
    goals = {"y": more(40.0, 54.0), "z": less(26.0, 14.0)}
    models = fit(make_study(x, values, goals=goals, limits=stated, tolerance=tolerance))
    problem, choice = solve(models)
    draws = draw_coefficients(models, 1000, 1)
    return problem, choice, draws, {one.aim: one for one in alternatives(problem, choice, draws)}


@pytest.fixture(scope="module")
def solved():
    return _solved()


def _rivals(problem, choice, n=4000):
    """Random settings that keep limits over the room and half of what each goal had."""
    rng = np.random.default_rng(1)
    rows = arena(problem, (), "simultaneous")
    x = rng.uniform(-1.7, 1.7, (n, 3))
    x = x[inside(problem.tight, x)]
    best = np.array(list(choice.setpoint.values()))[None, :]
    floor = np.clip(goal_targets(rows, goal_values(rows, best)), 0, 1) / 2
    kept = (goal_targets(rows, goal_values(rows, x)) >= floor).all(axis=1)
    for shift in 0.1 * np.array(np.meshgrid(*[[-1, 0, 1]] * 3)).reshape(3, -1).T:
        kept &= hard_values(rows, no_cuts(rows), x + shift).min(axis=0) >= 0
    return x[kept]


def test_least_sensitive_transmits_least_of_all_that_it_may_choose_from(solved):
    problem, choice, _, found = solved
    curve = transmitted(problem, (), setting_sd(problem.study))
    here = np.array(list(found["least sensitive"].setpoint.values()))
    rivals = _rivals(problem, choice)
    assert len(rivals) > 100
    assert features(here) @ curve <= (features(rivals) @ curve).min() + 1e-9
    best = np.array(list(choice.setpoint.values()))
    assert features(here) @ curve <= features(best) @ curve


def test_most_likely_inside_is_not_beaten_by_more_than_chance(solved):
    problem, choice, draws, found = solved
    sd = setting_sd(problem.study)
    here = np.array([list(found["most likely inside"].setpoint.values())])
    rivals = _rivals(problem, choice)
    best = conformance_over(problem, draws, (), rivals, sd, 5).max()
    assert conformance_over(problem, draws, (), here, sd, 5)[0] >= best - 0.01
    assert found["most likely inside"].conformance.mean >= (
        found["best compromise"].conformance.mean - 0.01
    )


def test_both_keep_half_of_every_goal_and_give_up_some_of_d(solved):
    _, choice, _, found = solved
    assert found["best compromise"].desirability == pytest.approx(choice.desirability)
    for one in found.values():
        assert choice.desirability / 2 - 1e-9 <= one.desirability <= choice.desirability + 1e-9


def test_the_transmitted_variance_is_that_of_the_moments_everywhere(solved):
    problem = solved[0]
    sd = np.array([0.1, 0.2, 0.05])
    stack = Stack.from_coefficients(surface(problem.models["y"], problem.study).coefficients, 3)
    x = np.random.default_rng(3).uniform(-1, 1, (50, 3))
    assert transmitted_variance(stack, sd).value(x) == pytest.approx(
        setting_error_moments(stack, x, sd).variance, abs=1e-12
    )


def test_without_tolerances_or_limits_an_aim_says_why_it_has_no_answer():
    *_, found = _solved(tolerance=None, limits=False)
    assert "no tolerance" in found["least sensitive"].reason
    assert "no limit" in found["most likely inside"].reason
    assert found["least sensitive"].setpoint is None
