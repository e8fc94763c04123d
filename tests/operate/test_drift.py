"""Drift, corrections and looser tolerances: against settings judged and sought by hand."""

from itertools import product

import numpy as np
import pytest

from support.build import central_composite, less, make_study, more
from wideberth.decide.arena import hard_values, no_cuts
from wideberth.decide.conformance import conformance, setting_sd
from wideberth.decide.judge import overall_desirability
from wideberth.decide.problem import arena
from wideberth.decide.recommend import solve
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.operate.robustness import wander
from wideberth.report.drift_words import correction_sentence, drift_row, looser_sentence
from wideberth.study.reading import read_study
from wideberth.study.records import Limit


def _solved(**options):
    rng = np.random.default_rng(11)
    x = central_composite(2, n_centre=5)
    y = 50 + 3 * x[:, 0] + 2 * x[:, 1] - 3 * (x[:, 0] - x[:, 1]) ** 2 - x[:, 0] ** 2
    z = 20 + 3 * x[:, 0] + x[:, 1]
    values = {
        "y": y + 0.5 * rng.standard_normal(len(x)),
        "z": z + 0.5 * rng.standard_normal(len(x)),
    }
    limits = {"z": Limit(None, 24.0, "batch")}
    goals = {"y": more(40, 54), "z": less(30, 10)}
    tolerance = {"f0": 0.2, "f1": 0.2}
    models = fit(make_study(x, values, goals=goals, limits=limits, tolerance=tolerance, **options))
    problem, choice = solve(models)
    draws = draw_coefficients(models, 800, 1)
    return problem, choice, draws, wander(problem, choice, draws)


@pytest.fixture(scope="module")
def solved():
    return _solved()


def test_a_drift_is_judged_like_a_setting_there(solved):
    problem, choice, draws, answer = solved
    x = np.array(list(choice.setpoint.values()))
    rows = arena(problem, (), "simultaneous")
    for j, one in enumerate(answer.drifts):
        assert [step.tolerances for step in one.steps] == [-3, -2, -1, 1, 2, 3]
        for step in one.steps:
            there = x + 0.2 * step.tolerances * (np.arange(2) == j)
            assert step.value == pytest.approx(there[j])
            exact = conformance(problem, draws, (), there, setting_sd(problem.study), 1).mean
            assert step.conformance == pytest.approx(exact, abs=0.03)
            lowest = hard_values(rows, no_cuts(rows), there[None, :])[:, 0]
            held = [v for v, row in zip(lowest, rows.hard, strict=True) if row.limit is not None]
            assert bool(step.broken) == (min(held) < 0)


def test_a_correction_is_the_best_that_the_other_factor_can_do(solved):
    problem, choice, _, answer = solved
    x = np.array(list(choice.setpoint.values()))
    rows = arena(problem, (), "simultaneous")
    corrected = 0
    for one in answer.corrections:
        j = 0 if one.factor == "f0" else 1
        best = 0.0
        for other in np.linspace(-1.4, 1.4, 1401):
            place = np.where(np.arange(2) == j, one.value, other)
            if (place**2).sum() > 2.0 - 0.6 * np.abs(place).sum():
                continue
            shifts = [
                hard_values(rows, no_cuts(rows), (place + 0.2 * np.array(s))[None, :]).min()
                for s in product((-1, 0, 1), repeat=2)
            ]
            if min(shifts) >= 0:
                best = max(best, overall_desirability(problem, (), place))
        if one.changes:
            corrected += 1
            assert one.after >= one.before + 1e-3 or one.broken
            assert one.after >= best - 1e-6
            name = "f1" if one.factor == "f0" else "f0"
            moved = x[1 - j] + one.changes[name]
            place = np.where(np.arange(2) == j, one.value, moved)
            assert one.after == pytest.approx(overall_desirability(problem, (), place))
    assert corrected >= 2


def test_a_doubled_tolerance_holds_only_where_every_place_of_the_larger_room_does(solved):
    problem, choice, _, answer = solved
    x = np.array(list(choice.setpoint.values()))
    rows = arena(problem, (), "simultaneous")
    rng = np.random.default_rng(0)
    for j, one in enumerate(answer.doubled.values()):
        room = 0.2 * np.where(np.arange(2) == j, 2.0, 1.0)
        places = x + room * rng.uniform(-1, 1, (4000, 2))
        worst = hard_values(rows, no_cuts(rows), places).min()
        if one.holds:
            assert worst >= 0
        else:
            corners = x + room * np.array(list(product((-1, 0, 1), repeat=2)))
            assert min(worst, hard_values(rows, no_cuts(rows), corners).min()) < 1e-3


def test_the_words_name_what_is_lost_and_what_to_do():
    problem, choice = solve(fit(read_study("studies/process/plating")))
    answer = wander(problem, choice, None)
    rows = [drift_row(one, problem.study) for one in answer.drifts]
    assert any("guard lost" in cell for row in rows for cell in row)
    said = " ".join(correction_sentence(one, problem.study) for one in answer.corrections)
    assert "tolerances high" in said
    assert "instead of" in said
    assert looser_sentence(answer)


def test_without_goals_there_is_nothing_to_correct_for():
    x = central_composite(2, n_centre=5)
    z = 20 + 3 * x[:, 0] + 0.3 * np.random.default_rng(1).standard_normal(len(x))
    limits = {"z": Limit(None, 24.0, "batch")}
    problem, choice = solve(fit(make_study(x, {"z": z}, limits=limits, tolerance=0.1)))
    answer = wander(problem, choice, None)
    assert answer.corrections == ()
    assert all(step.conformance is None for one in answer.drifts for step in one.steps)
