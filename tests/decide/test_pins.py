"""Fixed factors: the rest is settled around them, exactly; what cannot be fixed is refused."""

import numpy as np
import pytest

from support.brute import log_d, slack
from support.build import central_composite, make_study, more
from support.problems import random_models
from wideberth.decide.recommend import recommend
from wideberth.errors import RefusedError
from wideberth.fit.models import fit
from wideberth.study.reading import read_study
from wideberth.study.records import Constraint, Limit


@pytest.mark.parametrize("seed", [1, 2, 3, 7, 12])
def test_the_rest_is_the_best_around_a_fixed_value(seed):
    models = random_models(seed)
    try:
        choice = recommend(models, fix={"f0": 0.4})
    except RefusedError:
        pytest.fail("0.4 lies inside every central composite")
    if choice.status != "met":
        return
    assert choice.setpoint["f0"] == pytest.approx(0.4, abs=1e-9)
    rng = np.random.default_rng(seed)
    runs = models.study.runs.numeric_actual
    x = rng.uniform(runs.min(), runs.max(), (60_000, runs.shape[1]))
    x[:, 0] = 0.4
    held = slack(models, choice, x) >= 0
    best = np.exp(log_d(models, x[held])).max(initial=0.0)
    assert best <= choice.unrounded.desirability + 1e-6
    assert best <= choice.desirability + choice.proof_gap + 1e-9


def test_nothing_is_gained_by_fixing_and_nothing_lost_at_the_optimum():
    models = fit(read_study("studies/process/hydrogenation"))
    free = recommend(models)
    same = recommend(models, fix={"pressure": free.setpoint["pressure"]})
    assert same.desirability == pytest.approx(free.desirability, abs=1e-9)
    other = recommend(models, fix={"pressure": 8.0})
    assert other.setpoint["pressure"] == 8.0
    assert other.desirability < free.desirability


def test_every_factor_fixed_is_a_judgement():
    models = fit(read_study("studies/process/hydrogenation"))
    setting = {"catalyst": 1.2, "pressure": 8.0, "substrate": 140.0}
    fixed, judged = recommend(models, fix=setting), recommend(models, at=setting)
    assert fixed.setpoint == judged.setpoint
    assert fixed.desirability == pytest.approx(judged.desirability)
    assert fixed.status == judged.status


def test_levels_can_be_fixed():
    x = np.concatenate([central_composite(2)] * 2)
    level = np.repeat([0, 1], len(x) // 2)
    rng = np.random.default_rng(0)
    y = 30 - (x**2).sum(axis=1) + 2.0 * level + 0.3 * rng.standard_normal(len(x))
    study = make_study(
        x, {"y": y}, goals={"y": more(20, 34)}, categorical={"resin": (("old", "new"), level)}
    )
    models = fit(study)
    assert recommend(models).setpoint["resin"] == "new"
    assert recommend(models, fix={"resin": "old"}).setpoint["resin"] == "old"


def test_factors_that_moved_together_follow_each_other():
    rng = np.random.default_rng(0)
    line = np.linspace(-1, 1, 12)
    x = np.column_stack([line, line])
    y = 20 - line**2 + 0.1 * rng.standard_normal(12)
    models = fit(make_study(x, {"y": y}, goals={"y": more(10, 21)}))
    choice = recommend(models, fix={"f0": 0.5})
    assert choice.setpoint["f1"] == pytest.approx(0.5, abs=1e-9)
    with pytest.raises(RefusedError, match="never came near"):
        recommend(models, fix={"f0": 0.5, "f1": -0.5})


@pytest.mark.parametrize(
    ("fix", "words"),
    [
        ({"f9": 1.0}, "no factor is called f9"),
        ({"f0": "much"}, "f0 is much"),
        ({"f0": float("nan")}, "f0 is nan"),
        ({"f0": 9.0}, "leave no setting"),
        ({"f0": 1.0, "f1": 0.9}, "leave no setting"),
    ],
)
def test_what_cannot_be_fixed_is_refused(fix, words):
    x = central_composite(2)
    rng = np.random.default_rng(0)
    y = 20 - (x**2).sum(axis=1) + 0.2 * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y},
        goals={"y": more(5, 21)},
        limits={"y": Limit(12.0, None, "batch")},
        constraints=[Constraint("sum", {"f0": 1.0, "f1": 1.0}, 1.5, None)],
    )
    with pytest.raises(RefusedError, match=words):
        recommend(fit(study), fix=fix)


def test_judging_and_fixing_at_once_is_refused():
    models = fit(read_study("studies/process/hydrogenation"))
    setting = {"catalyst": 1.2, "pressure": 8.0, "substrate": 140.0}
    with pytest.raises(RefusedError, match="at once"):
        recommend(models, at=setting, fix={"pressure": 9.0})


def test_a_value_whose_room_reaches_beyond_what_was_explored_is_refused():
    x = central_composite(2)
    y = 20 + 3 * x[:, 0] + 0.2 * np.random.default_rng(0).standard_normal(len(x))
    study = make_study(x, {"y": y}, goals={"y": more(10, 30)}, tolerance=0.4)
    with pytest.raises(RefusedError, match="room of the tolerances"):
        recommend(fit(study), fix={"f1": -1.0})
    assert recommend(fit(study), fix={"f1": -1.0}, room=False).status == "met"
