"""What more evidence would buy: against problems solved by hand and plain Monte Carlo."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from support.build import central_composite, less, make_study, more
from wideberth.decide.answers import best_answer
from wideberth.decide.confirmation import chances_of_proof
from wideberth.decide.problem import build_problem
from wideberth.decide.prospects import HISTORY_DF, prospects
from wideberth.decide.recommend import solve
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.report.prospect_words import prospect_sentences
from wideberth.study.records import Limit


def _study(bound, guard="share", share=0.95, confidence=0.95, goals=None):
    rng = np.random.default_rng(4)
    x = central_composite(2, n_centre=4)
    y = 20 + 2 * x[:, 0] + x[:, 1] - (x**2).sum(axis=1) + 0.5 * rng.standard_normal(len(x))
    z = 8 + 1.5 * x[:, 0] + 0.4 * rng.standard_normal(len(x))
    limits = {"z": Limit(None, bound, guard, confidence, share)}
    goals = {"y": more(14.0, 24.0)} if goals is None else goals
    return make_study(x, {"y": y, "z": z}, goals=goals, limits=limits)


def _solved(*args, **options):
    models = fit(_study(*args, **options))
    problem, choice = solve(models)
    return problem, choice, draw_coefficients(models, 1000, 1)


@pytest.fixture(scope="module")
def met():
    return _solved(9.5)


@pytest.fixture(scope="module")
def provisional():
    return next(
        found
        for found in (_solved(float(bound)) for bound in np.arange(8.4, 7.0, -0.1))
        if found[1].status == "provisional"
    )


def test_beyond_proof_a_provisional_setting_scores_more_and_its_gain_is_the_difference(met):
    problem, choice, draws = met
    assert choice.status == "met"
    beyond = prospects(problem, choice, draws).provisional
    other = best_answer(problem, "pointwise")
    assert beyond.gain == pytest.approx(beyond.desirability - choice.desirability)
    assert beyond.gain > 0.001
    assert beyond.desirability == pytest.approx(float(np.exp(other.settable.score)), abs=1e-9)
    assert [chance.runs for chance in beyond.chances] == [1, 2, 3, 5]


def test_chances_rise_with_the_runs_and_match_plain_simulation(provisional):
    problem, choice, _ = provisional
    draws = draw_coefficients(problem.models, 6000, 3)
    x = np.array(list(choice.setpoint.values()))
    found = {one.runs: one.share for one in chances_of_proof(problem, draws, (), x, 1)}
    assert found[5] > found[1]
    model = problem.models["z"]
    f = np.array([1, *x, *x**2, x[0] * x[1]])[[term.monomial for term in model.terms]]
    mean, h, df, s = f @ model.coefficients, f @ model.covariance @ f, model.df_residual, model.s
    rng = np.random.default_rng(9)
    for n, share in found.items():
        sigma = s * np.sqrt(df / rng.chisquare(df, 40_000))
        truth = mean + sigma * np.sqrt(h) * rng.standard_normal(40_000)
        new = truth[:, None] + sigma[:, None] * rng.standard_normal((40_000, n))
        pooled = np.sqrt((df * s**2 + ((new.T - new.mean(axis=1)) ** 2).sum(axis=0)) / (df + n - 1))
        k = stats.nct.ppf(0.95, df + n - 1, stats.norm.ppf(0.95) * np.sqrt(n)) / np.sqrt(n)
        proven = (new.mean(axis=1) + k * pooled <= problem.sides[0].value).mean()
        assert share == pytest.approx(proven, abs=0.025)


def test_history_is_the_same_problem_with_more_degrees_of_freedom(provisional):
    problem, choice, draws = provisional
    found = prospects(problem, choice, draws)
    models = tuple(replace(m, df_error=HISTORY_DF) for m in problem.models.models)
    anew = build_problem(replace(problem.models, models=models), seed=1, room=True)
    answer = best_answer(anew, "simultaneous")
    assert found.history.proves == (answer is not None)
    if answer is not None:
        assert found.history.desirability == pytest.approx(float(np.exp(answer.settable.score)))


@pytest.mark.parametrize("what", ["confidence", "share"])
def test_what_can_be_proven_is_met_when_asked_for_and_not_much_above(provisional, what):
    problem, choice, draws = provisional
    value = getattr(prospects(problem, choice, draws), what)
    bound = problem.sides[0].value
    assert 0.5 < value < 0.95
    assert _solved(bound, **{what: value})[1].status == "met"
    assert _solved(bound, **{what: 1 - (1 - value) * 0.75})[1].status != "met"


def test_unreached_goals_are_said_with_their_best_value():
    goals = {"y": more(26.0, 30.0), "z": less(9.0, 2.0)}
    problem, choice, draws = _solved(12.0, guard="batch", goals=goals)
    assert choice.status == "unreached"
    reach = {one.response: one for one in prospects(problem, choice, draws).reach}
    assert not reach["y"].reached
    assert reach["z"].reached
    model = problem.models["y"]
    rng = np.random.default_rng(0)
    x = rng.uniform(-1.42, 1.42, (40_000, 2))
    x = x[(x**2).sum(axis=1) <= 2.0]
    f = np.column_stack([np.ones(len(x)), x, x**2, x[:, 0] * x[:, 1]])
    best = (f[:, [term.monomial for term in model.terms]] @ model.coefficients).max()
    assert reach["y"].best == pytest.approx(best, abs=0.02)
    text = " ".join(prospect_sentences(prospects(problem, choice, draws), choice, problem.study))
    assert "at best" in text
    assert "26" in text


def test_a_setting_of_the_persons_own_has_no_prospects(met):
    problem, choice, draws = met
    _, asked = solve(problem.models, at=choice.setpoint)
    assert prospects(problem, asked, draws).provisional is None
