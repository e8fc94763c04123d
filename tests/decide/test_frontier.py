"""The frontier: nothing found by brute force dominates it, all of it holds, ends are reached."""

import numpy as np
import pytest

from support.brute import second_order, slack
from support.build import central_composite, less, make_study, more
from wideberth.decide.frontier import frontier, lattice
from wideberth.decide.recommend import recommend
from wideberth.errors import RefusedError
from wideberth.fit.models import fit
from wideberth.study.records import Goal, Limit


def _models(*, limit=None, tolerance=None, want="less", **kwargs):
    x = central_composite(2, n_centre=6)
    rng = np.random.default_rng(4)
    y = 55 + 4 * x[:, 0] - 2 * (x**2).sum(axis=1) + 0.2 * rng.standard_normal(len(x))
    z = 20 + 3 * x[:, 0] + 2 * x[:, 1] + x[:, 1] ** 2 + 0.2 * rng.standard_normal(len(x))
    w = 10 + x[:, 0] - x[:, 1] + 0.2 * rng.standard_normal(len(x))
    goals = {"y": more(30, 70), "z": less(40, 5)}
    if want == "near":
        goals["z"] = Goal("near", (5.0, 35.0), (18.0, 18.0))
    limits = {} if limit is None else {"w": Limit(None, limit, "batch")}
    study = make_study(
        x, {"y": y, "z": z, "w": w}, goals=goals, limits=limits, tolerance=tolerance, **kwargs
    )
    return fit(study)


def _values(models, x, name):
    model = models[name]
    place = np.argsort([term.monomial for term in model.terms])
    return second_order(x) @ model.coefficients[place]


@pytest.mark.parametrize(("limit", "tolerance"), [(None, None), (10.9, None), (11.2, 0.1)])
def test_no_setting_dominates_a_point_of_the_frontier(limit, tolerance):
    models = _models(limit=limit, tolerance=tolerance)
    answer = frontier(models)
    choice = recommend(models)
    assert len(answer.points) >= 10
    rng = np.random.default_rng(0)
    x = rng.uniform(-1.5, 1.5, (120_000, 2))
    x = x[slack(models, choice, x, tolerance or 0.0) >= 0]
    y, z = _values(models, x, "y"), _values(models, x, "z")
    for point in answer.points:
        better = (y >= point.means["y"] + 0.02) & (z <= point.means["z"] - 0.02)
        assert not better.any(), point
        place = np.array([point.setting["f0"], point.setting["f1"]])
        assert slack(models, choice, place, tolerance or 0.0) >= -1e-5
    # both ends are reached: each goal's best alone
    assert max(p.means["y"] for p in answer.points) == pytest.approx(y.max(), abs=0.1)
    assert min(p.means["z"] for p in answer.points) == pytest.approx(z.min(), abs=0.4)


def test_the_cover_is_even_and_the_best_compromise_lies_on_it():
    models = _models()
    answer = frontier(models)
    best = recommend(models).unrounded.desirability
    assert answer.points[0].desirability == pytest.approx(best, abs=2e-3)
    means = np.array(sorted((p.means["y"], p.means["z"]) for p in answer.points))
    scaled = means / np.ptp(means, axis=0)
    gaps = np.sqrt((np.diff(scaled, axis=0) ** 2).sum(axis=1))
    assert gaps.max() < 0.25


def test_no_point_of_the_frontier_is_dominated_by_another():
    answer = frontier(_models())
    for one in answer.points:
        assert not any(
            other.means["y"] > one.means["y"] + 1e-6 and other.means["z"] < one.means["z"] - 1e-6
            for other in answer.points
        )


def test_a_target_counts_from_both_sides():
    models = _models(want="near")
    answer = frontier(models)
    assert min(abs(p.means["z"] - 18) for p in answer.points) < 0.05
    assert answer.setpoint is not None


def test_levels_compete_on_one_frontier():
    x = np.concatenate([central_composite(2, n_centre=4)] * 2)
    level = np.repeat([0, 1], len(x) // 2)
    rng = np.random.default_rng(0)
    y = 30 - (x**2).sum(axis=1) + 2.0 * level + 0.2 * rng.standard_normal(len(x))
    z = 10 + x[:, 0] + 2.0 * level + 0.2 * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y, "z": z},
        goals={"y": more(20, 35), "z": less(16, 6)},
        categorical={"resin": (("old", "new"), level)},
    )
    points = frontier(fit(study)).points
    assert {point.setting["resin"] for point in points} == {"old", "new"}


def test_no_setting_no_frontier_and_one_goal_is_refused():
    answer = frontier(_models(limit=5.0))
    assert answer.points == ()
    assert "no setting holds" in answer.reason
    x = central_composite(2)
    rng = np.random.default_rng(0)
    y = rng.standard_normal(len(x))
    with pytest.raises(RefusedError, match="fewer than two"):
        frontier(fit(make_study(x, {"y": y}, goals={"y": more(-1, 1)})))


def test_weights_cover_the_simplex():
    for m in (2, 3, 4, 6):
        weights = lattice(m)
        assert len(weights) <= 151
        assert weights.min() > 0
        assert (weights.argmax(axis=1) == np.arange(m)[:, None]).any(axis=1).all()
