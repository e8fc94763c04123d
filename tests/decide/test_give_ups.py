"""Give-ups: against brute force re-solved, against multipliers, and in words."""

from dataclasses import replace

import numpy as np
import pytest

from support.brute import brute_best
from support.build import central_composite, less, make_study, more
from wideberth.decide.certificate import mixture_at
from wideberth.decide.give_ups import give_ups, natural_step
from wideberth.decide.problem import arena
from wideberth.decide.recommend import recommend, solve
from wideberth.decide.search import find_best
from wideberth.decide.tangents import relax
from wideberth.fit.models import fit
from wideberth.report.give_up_words import give_up_sentence
from wideberth.study.records import Limit


def _study(limit=23.0, poor=40.0, ideal=70.0):
    x = central_composite(2, n_centre=6)
    rng = np.random.default_rng(2)
    y = 55 + 5 * x[:, 0] + 2 * x[:, 1] - 2 * (x**2).sum(axis=1) + 0.4 * rng.standard_normal(len(x))
    z = 20 + 4 * x[:, 0] + x[:, 1] + 0.4 * rng.standard_normal(len(x))
    return make_study(
        x,
        {"y": y, "z": z},
        goals={"y": more(poor, ideal), "cost": less(20, 5)},
        limits={"z": Limit(None, limit, "batch")},
        formulas={"cost": {(): 12.0, ("f1",): 1.0}},
    )


@pytest.fixture(scope="module")
def solved():
    problem, choice = solve(fit(_study()))
    return problem, choice, give_ups(problem, choice)


def _one(found, kind, response, bound):
    return next(g for g in found if (g.kind, g.response, g.bound) == (kind, response, bound))


def test_every_limit_and_goal_bound_is_moved(solved):
    _, choice, found = solved
    assert choice.status == "met"
    assert {(g.kind, g.response, g.bound) for g in found} == {
        ("limit", "z", "high"),
        ("goal", "y", "poor"),
        ("goal", "y", "ideal"),
        ("goal", "cost", "poor"),
        ("goal", "cost", "ideal"),
    }


def test_a_moved_limit_against_the_problem_stated_anew(solved):
    _, choice, found = solved
    one = _one(found, "limit", "z", "high")
    base = choice.unrounded.desirability
    for step, change in ((-one.step, one.tighter), (one.step, one.looser)):
        again = recommend(fit(_study(limit=23.0 + step)))
        assert change.desirability == pytest.approx(again.unrounded.desirability - base, abs=1e-6)
        for name, by in change.responses.items():
            moved = again.predictions[name].mean - choice.predictions[name].mean
            assert by == pytest.approx(moved, abs=1e-3)
    assert one.tighter.desirability < 0 < one.looser.desirability


def test_a_moved_limit_against_brute_force(solved):
    one = _one(solved[2], "limit", "z", "high")
    study = _study(limit=23.0 - one.step)
    # brute force knows no exact response; the cost is left to the search above
    bare = replace(study, responses=tuple(r for r in study.responses if r.formula is None))
    start = replace(_study(), responses=bare.responses)
    start = replace(
        start,
        responses=tuple(
            replace(r, limit=Limit(None, 23.0, "batch")) if r.limit else r for r in bare.responses
        ),
    )
    problem, before = solve(fit(start))
    change = _one(give_ups(problem, before), "limit", "z", "high").tighter
    models = fit(bare)
    best, _ = brute_best(models, recommend(models))
    assert change.desirability == pytest.approx(best - before.unrounded.desirability, abs=2e-5)


def test_a_moved_goal_against_the_problem_stated_anew(solved):
    _, choice, found = solved
    for bound, key, value in (("poor", "poor", 40.0), ("ideal", "ideal", 70.0)):
        one = _one(found, "goal", "y", bound)
        again = recommend(fit(_study(**{key: value + one.step})))
        expected = again.unrounded.desirability - choice.unrounded.desirability
        assert one.tighter.desirability == pytest.approx(expected, abs=1e-6)


def test_the_multiplier_agrees(solved):
    problem, _, found = solved
    one = _one(found, "limit", "z", "high")
    rows = arena(problem, (), "simultaneous")
    best = find_best(rows)
    relaxed = relax(rows, best.cuts)
    place = (best.x - rows.region.origin) @ rows.region.basis
    multiplier = mixture_at(relaxed, place).rows[0]
    scale = problem.guarding["z"].scale
    slope = np.exp(best.score) * multiplier / scale
    assert multiplier > 0
    assert one.per_unit == pytest.approx(slope, rel=0.05)


def test_a_limit_that_does_not_bind_changes_nothing():
    problem, choice = solve(fit(_study(limit=60.0)))
    one = _one(give_ups(problem, choice), "limit", "z", "high")
    assert abs(one.tighter.desirability) < 1e-9
    assert "changes nothing" in give_up_sentence(one)


def test_a_step_too_far_is_said():
    # a limit that can only just be proven somewhere
    unmet, met, last = 10.0, 20.0, None
    while met - unmet > 0.02:
        middle = (unmet + met) / 2
        problem, choice = solve(fit(_study(limit=middle)))
        if choice.status == "met":
            met, last = middle, (problem, choice)
        else:
            unmet = middle
    one = _one(give_ups(*last), "limit", "z", "high")
    assert one.tighter.desirability is None
    assert one.per_unit is None
    assert "no setting holds the limits any more" in give_up_sentence(one)


def test_no_answer_no_give_ups():
    problem, choice = solve(fit(_study(limit=5.0)))
    assert choice.status != "met"
    assert give_ups(problem, choice) == ()


@pytest.mark.parametrize(
    ("size", "step"),
    [(0.3, 0.2), (0.4, 0.5), (0.98, 1.0), (17.0, 20.0), (7.5, 10.0), (0.023, 0.02)],
)
def test_steps_are_natural(size, step):
    assert natural_step(size) == pytest.approx(step)
