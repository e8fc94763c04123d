"""Priorities: the turning points are where the stated problem really turns."""

import numpy as np
import pytest

from support.build import central_composite, less, make_study, more
from wideberth.decide.priorities import priorities
from wideberth.decide.recommend import recommend, solve
from wideberth.fit.models import fit

PEAK = (-0.6, 0.6)


def _models(first=1.0, second=1.0, *, tolerance=0.15):
    x = central_composite(2, n_centre=6)
    rng = np.random.default_rng(0)
    y = 50 - 4 * ((x - np.array([PEAK[0], 0.0])) ** 2).sum(axis=1)
    z = 20 + 4 * ((x - np.array([PEAK[1], 0.0])) ** 2).sum(axis=1)
    y, z = (v + 0.1 * rng.standard_normal(len(x)) for v in (y, z))
    goals = {"y": more(30, 52, priority=first), "z": less(40, 18, priority=second)}
    return fit(make_study(x, {"y": y, "z": z}, goals=goals, tolerance=tolerance))


def _place(models):
    setting = recommend(models).unrounded.setpoint
    return np.array(list(setting.values()))


def test_inside_the_turning_points_the_setpoint_stays_and_beyond_it_leaves():
    answer = priorities(*solve(_models()))
    base = _place(_models())
    for sway in answer.sways:
        for turning, way in ((sway.up, 1.0), (sway.down, -1.0)):
            assert turning is not None
            for factor, stays in ((np.exp(-0.1 * way), True), (np.exp(0.1 * way), False)):
                value = turning * factor
                models = _models(value, 1.0) if sway.response == "y" else _models(1.0, value)
                moved = np.abs(_place(models) - base).max()
                assert (moved <= 0.15) == stays


def test_doubled_and_equal_are_what_the_study_would_say():
    answer = priorities(*solve(_models(3.0, 1.0)))
    doubled = next(sway for sway in answer.sways if sway.response == "y").doubled
    again = recommend(_models(6.0, 1.0)).unrounded.setpoint
    assert list(doubled.values()) == pytest.approx(list(again.values()), abs=1e-4)
    alike = recommend(_models(1.0, 1.0)).unrounded.setpoint
    assert list(answer.equal.values()) == pytest.approx(list(alike.values()), abs=1e-4)


def test_a_wide_tolerance_hardly_cares():
    answer = priorities(*solve(_models(tolerance=0.6)))
    assert all(sway.up is None and sway.down is None for sway in answer.sways)


def test_one_goal_has_no_priorities():
    x = central_composite(2)
    rng = np.random.default_rng(0)
    y = 20 - (x**2).sum(axis=1) + 0.1 * rng.standard_normal(len(x))
    assert priorities(*solve(fit(make_study(x, {"y": y}, goals={"y": more(10, 21)})))) is None
