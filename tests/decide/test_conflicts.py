"""Every smallest conflict, and how far each member must be relaxed, against brute force."""

from itertools import combinations

import numpy as np
import pytest

from support.brute import second_order
from support.build import central_composite, make_study, more
from wideberth.decide.conflicts import can_hold, smallest_conflicts
from wideberth.decide.problem import build_problem
from wideberth.decide.recommend import recommend
from wideberth.fit.models import fit
from wideberth.study.records import Limit


def _models(seed):
    """Three responses with upper limits on the fitted means that are often too tight together."""
    rng = np.random.default_rng(seed)
    x = central_composite(2, n_centre=5)
    f = second_order(x)
    values, limits = {}, {}
    for j in range(3):
        beta = rng.standard_normal(6) * np.array([0, 3, 3, 0.5, 0.5, 0.5])
        values[f"y{j}"] = 20 + f @ beta + 0.2 * rng.standard_normal(len(x))
        limits[f"y{j}"] = Limit(None, float(np.quantile(values[f"y{j}"], 0.2)), "none")
    return fit(make_study(x, values, limits=limits))


def _brute(models):
    """Slack of each limit over a fine polar cover of the disc: (n, 3)."""
    radius = np.sqrt(2) * np.sqrt(np.linspace(0, 1, 300))
    turn = np.linspace(0, 2 * np.pi, 721)
    r, t = np.meshgrid(radius, turn)
    x = np.stack([r * np.cos(t), r * np.sin(t)], axis=-1).reshape(-1, 2)
    f = second_order(x)
    slack = []
    for response, model in zip(models.study.responses, models.models, strict=True):
        place = np.argsort([term.monomial for term in model.terms])
        slack.append(response.limit.high - f @ model.coefficients[place])
    return np.stack(slack, axis=1)


def _smallest_sets(slack, margin):
    sets = []
    for size in (1, 2, 3):
        for limits in combinations(range(3), size):
            if any(set(known) <= set(limits) for known in sets):
                continue
            if slack[:, limits].min(axis=1).max() < margin:
                sets.append(limits)
    return sets


@pytest.mark.parametrize("seed", range(24))
def test_all_smallest_sets_and_their_relaxations(seed):
    models = _models(seed)
    slack = _brute(models)
    clear, doubtful = _smallest_sets(slack, 0.02), _smallest_sets(slack, -0.02)
    if clear != doubtful or not clear:
        # within the cover's step of just holding, or nothing conflicts
        return
    problem = build_problem(models, seed=1, room=False)
    found = smallest_conflicts(problem, "means")
    names = [tuple(int(name[1]) for name, _, _ in conflict.limits) for conflict in found]
    assert sorted(names) == sorted(clear)
    for conflict, limits in zip(found, names, strict=True):
        for limit, value in zip(limits, conflict.relaxed, strict=True):
            others = [other for other in limits if other != limit]
            held = slack[:, others].min(axis=1, initial=np.inf) >= 0
            least = models.study.responses[limit].limit.high - slack[held, limit].max()
            assert value == pytest.approx(least, abs=0.05)


def test_some_of_those_cases_conflict():
    conflicting = sum(bool(_smallest_sets(_brute(_models(seed)), -0.02)) for seed in range(24))
    assert conflicting >= 8


def test_the_printed_relaxation_frees_the_set():
    for seed in range(24):
        models = _models(seed)
        problem = build_problem(models, seed=1, room=False)
        everything = tuple(range(3))
        if can_hold(problem, "means", everything):
            continue
        conflict = smallest_conflicts(problem, "means")[0]
        (name, _, _), value = conflict.limits[0], conflict.relaxed[0]
        changed = {
            r.name: Limit(None, value if r.name == name else r.limit.high, "none")
            for r in models.study.responses
            if r.name in {member for member, _, _ in conflict.limits}
        }
        x = models.study.runs.numeric_actual
        values = {
            r.name: models.study.runs.measured[:, j] for j, r in enumerate(models.study.responses)
        }
        again = make_study(x, values, limits=changed)
        assert recommend(fit(again)).status == "met"
        return
    pytest.fail("no case conflicted")


def test_the_answer_says_how_to_free_it():
    rng = np.random.default_rng(0)
    x = central_composite(2, n_centre=6)
    y = 20 + 3 * x[:, 0] + 0.1 * rng.standard_normal(len(x))
    z = 10 + 2 * x[:, 0] + 0.1 * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y, "z": z},
        goals={"y": more(10, 25)},
        limits={"y": Limit(22.0, None, "none"), "z": Limit(None, 10.5, "none")},
    )
    choice = recommend(fit(study))
    assert choice.status == "conflict"
    (conflict,) = choice.conflicts
    assert "relaxed alone to" in conflict.text
    low, high = conflict.relaxed
    # z at most 10.5 allows f0 up to 0.25, where y is 20.75; y at least 22 needs z of 11.3
    assert low == pytest.approx(20.75, abs=0.3)
    assert high == pytest.approx(11.33, abs=0.3)
