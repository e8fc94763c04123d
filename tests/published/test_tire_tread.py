"""Derringer and Suich (1980), Journal of Quality Technology 12, 214-219: the tire tread compound.

Data and printed figures from memory, confirmed by each other (see checks.toml).
"""

from dataclasses import replace

import numpy as np
import pytest

from support.build import less, make_study, more
from support.published import agrees, checks, columns
from wideberth.decide.desirability import desirability, overall
from wideberth.decide.recommend import recommend
from wideberth.decide.records import ResolvedGoal
from wideberth.fit.models import fit
from wideberth.quadratic.terms import features, term_names
from wideberth.study.records import Goal, Limit

NAMES = ("abrasion_index", "modulus_200", "elongation", "hardness")
GOALS = {
    "abrasion_index": more(120.0, 170.0),
    "modulus_200": more(1000.0, 1300.0),
    "elongation": Goal("near", (400.0, 600.0), (500.0, 500.0)),
    "hardness": Goal("near", (60.0, 75.0), (67.5, 67.5)),
}
COEFFICIENTS = [name for name in checks("tire_tread") if name.startswith("coef")]
QUALITY = [name for name in checks("tire_tread") if not name.startswith("coef")]


def _models(limits=None):
    data = columns("tire_tread.csv")
    x = np.column_stack([data["x1"], data["x2"], data["x3"]])
    values = {name: data[name] for name in NAMES}
    return fit(make_study(x, values, names=("x1", "x2", "x3"), goals=GOALS, limits=limits))


@pytest.fixture(scope="module")
def models():
    return _models()


def _coefficient(models, check):
    model = models[check["response"]]
    return next(row.coded for row in model.table if row.term == check["term"])


@pytest.mark.parametrize("name", COEFFICIENTS)
def test_all_forty_coefficients(models, name):
    check = checks("tire_tread")[name]
    value = _coefficient(models, check)
    assert agrees(value, check)
    assert not agrees(value, check, spoiled=True)


@pytest.mark.parametrize("name", QUALITY)
def test_residual_sd_and_r2(models, name):
    check = checks("tire_tread")[name]
    model = models[check["response"]]
    value = model.s if name.startswith("residual") else model.r2
    assert agrees(value, check)
    assert not agrees(value, check, spoiled=True)


def _printed_models():
    """The printed coefficients, in the order of our terms."""
    table = checks("tire_tread")
    order = term_names(("x1", "x2", "x3"))
    return {
        name: np.array([table[f"coef {name} {term}"]["value"] for term in order]) for name in NAMES
    }


def _resolved():
    return tuple(
        ResolvedGoal(n, "", g.want, g.poor, g.ideal, g.exponent, g.priority, "")
        for n, g in GOALS.items()
    )


@pytest.mark.parametrize("name", list(checks("tire_tread_desirability")))
def test_printed_models_at_the_printed_optimum(name):
    check = checks("tire_tread_desirability")[name]
    terms = features(np.array([-0.05, 0.145, -0.868]))
    y = np.array([terms @ beta for beta in _printed_models().values()])
    goals = _resolved()
    if name == "D":
        value = float(overall(goals, y))
    else:
        kind, response = name.split(" ")
        place = NAMES.index(response)
        value = float(y[place] if kind == "y" else desirability(goals[place], y[place]))
    assert agrees(value, check)
    assert not agrees(value, check, spoiled=True)


def test_optimum_of_the_refitted_data(models):
    choice = recommend(models)
    assert choice.desirability == pytest.approx(0.583271, abs=1e-6)
    assert choice.status == "unsupported"
    assert any("modulus_200" in f.text for f in choice.findings if f.grade == "do not use")


def test_optimum_of_the_printed_coefficients(models):
    printed = _printed_models()
    order = term_names(("x1", "x2", "x3"))
    swapped = tuple(
        replace(
            m, coefficients=np.array([printed[m.response][order.index(t.name)] for t in m.terms])
        )
        for m in models.models
    )
    choice = recommend(replace(models, models=swapped))
    assert choice.desirability == pytest.approx(0.583178, abs=1e-6)


def test_optimum_with_hardness_at_most_67():
    choice = recommend(_models({"hardness": Limit(None, 67.0, "none")}))
    assert choice.desirability == pytest.approx(0.558098, abs=1e-6)


def test_a_goal_the_other_way_round_is_not_the_same(models):
    goals = {**GOALS, "abrasion_index": less(170.0, 120.0)}
    data = columns("tire_tread.csv")
    x = np.column_stack([data["x1"], data["x2"], data["x3"]])
    other = fit(make_study(x, {n: data[n] for n in NAMES}, names=("x1", "x2", "x3"), goals=goals))
    assert abs(recommend(other).desirability - 0.583271) > 0.01
