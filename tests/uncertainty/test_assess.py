"""How sure a choice is: shares, ranges, loss, optimism, and the edges where little can be said."""

import numpy as np
import pytest

from support.build import central_composite, less, make_study, more, small_composite
from wideberth.decide.problem import build_problem
from wideberth.decide.recommend import solve
from wideberth.fit.models import fit
from wideberth.study.reading import read_study
from wideberth.study.records import Limit
from wideberth.uncertainty.assess import assess, draws_for, uncertainty
from wideberth.uncertainty.location import edge_spread, evenly_spread, in_region, optimum_region


def _hill(noise=0.5, *, k=2, centre=0.3, seed=0, **kwargs):
    rng = np.random.default_rng(seed)
    x = central_composite(k, n_centre=6)
    y = 50 - 3 * ((x - centre) ** 2).sum(axis=1) + noise * rng.standard_normal(len(x))
    return fit(make_study(x, {"y": y}, goals={"y": more(20, 60)}, **kwargs))


def test_the_region_is_the_ellipsoid_that_holds_its_share_of_the_draws():
    models = _hill()
    problem, choice = solve(models)
    sure = assess(problem, choice, draws_for(problem, choice))
    # the optimum of each draw by its own formula: the stationary point, where it lies inside
    beta = draws_for(problem, choice).of(models["y"])
    quad = np.array([[[b[3], b[5] / 2], [b[5] / 2, b[4]]] for b in beta])
    places = np.linalg.solve(quad, -beta[:, 1:3, None] / 2)[..., 0]
    inside = np.linalg.norm(places, axis=1) < np.sqrt(2)
    assert inside.mean() > 0.99
    held = in_region(problem, sure.region, places)
    assert held.mean() == pytest.approx(0.95, abs=0.006)
    assert sure.region.centre == pytest.approx(places[inside].mean(axis=0), abs=0.01)
    assert sure.region.determined
    assert sure.edge_share < 0.05


def test_ranges_and_share_against_a_dense_sample():
    models = _hill(noise=1.5)
    problem, choice = solve(models)
    sure = assess(problem, choice, draws_for(problem, choice))
    rng = np.random.default_rng(0)
    x = rng.uniform(-1.5, 1.5, (400_000, 2))
    x = x[(x**2).sum(axis=1) <= 2.0]
    held = in_region(problem, sure.region, x)
    assert sure.region.share_of_explored == pytest.approx(held.mean(), abs=0.01)
    for j, name in enumerate(("f0", "f1")):
        low, high = sure.region.ranges[name]
        assert low == pytest.approx(x[held, j].min(), abs=0.01)
        assert high == pytest.approx(x[held, j].max(), abs=0.01)


def test_an_even_spread_is_even():
    problem = build_problem(_hill(k=2), seed=1, room=False)
    x, weight = evenly_spread(problem.region)
    assert weight.sum() == pytest.approx(1.0)
    radius = np.sqrt((x**2).sum(axis=1))
    # in a disc of radius R the share within r is (r / R)^2
    for share in (0.3, 0.6, 0.9):
        inside = weight[radius <= share * np.sqrt(2)].sum()
        assert inside == pytest.approx(share**2, abs=0.005)


def test_pure_noise_does_not_determine_the_optimum():
    rng = np.random.default_rng(3)
    x = central_composite(2, n_centre=6)
    models = fit(make_study(x, {"y": rng.standard_normal(len(x))}, goals={"y": more(-3, 3)}))
    problem, choice = solve(models)
    sure = assess(problem, choice, draws_for(problem, choice))
    assert not sure.region.determined
    assert sure.region.share_of_explored > 0.5
    assert any("do not determine" in finding.text for finding in sure.findings)


def test_optimism_is_seen_in_simulation():
    # at the fitted optimum the fitted D beats the true D on average by about what is corrected
    rng = np.random.default_rng(5)
    x = central_composite(2, n_centre=5)
    truth = 50 + 2 * x[:, 0] - 1.5 * (x**2).sum(axis=1)
    raw, corrected = [], []
    for study in range(60):
        y = truth + 3.0 * rng.standard_normal(len(x))
        models = fit(make_study(x, {"y": y}, goals={"y": more(30, 62)}, seed=study))
        problem, choice = solve(models)
        sure = assess(problem, choice, draws_for(problem, choice, 256))
        place = np.array(list(choice.setpoint.values()))
        real = 50 + 2 * place[0] - 1.5 * (place**2).sum()
        true_d = np.clip((real - 30) / 32, 0, 1)
        raw.append(choice.desirability - true_d)
        corrected.append(sure.optimism.corrected - true_d)
    assert np.mean(raw) > 0.03
    assert abs(np.mean(corrected)) < 0.6 * np.mean(raw)


def test_possible_loss_is_nil_at_a_well_known_best_and_large_far_from_it():
    models = _hill(noise=0.05)
    best = uncertainty(models, n_draws=300)
    assert best.possible_loss.bound < 1e-3
    far = uncertainty(models, at={"f0": -0.7, "f1": -0.7}, n_draws=300)
    assert far.possible_loss.median == pytest.approx(3 * 2 / 40, abs=0.01)
    assert far.optimism is None


def test_same_seed_same_answer_and_another_seed_another():
    models = _hill()
    one, two = uncertainty(models, n_draws=300), uncertainty(models, n_draws=300)
    assert one.region.ranges == two.region.ranges
    assert one.possible_loss == two.possible_loss
    other = uncertainty(models, n_draws=300, seed=99)
    assert other.region.ranges != one.region.ranges


def test_no_degrees_of_freedom_no_draws():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 3, 4, 8]]
    y = np.array([1.0, 2.0, 3.0, 5.0, 4.0, 2.5])
    sure = uncertainty(fit(make_study(x, {"y": y}, goals={"y": more(0, 6)})))
    assert sure.draws == 0
    assert "degrees of freedom" in sure.reason
    assert sure.region is None
    assert sure.conformance is None


def test_few_degrees_of_freedom_are_warned_of():
    x = central_composite(2, n_centre=1)
    rng = np.random.default_rng(0)
    y = 20 - (x**2).sum(axis=1) + 0.2 * rng.standard_normal(len(x))
    sure = uncertainty(fit(make_study(x, {"y": y}, goals={"y": more(5, 21)})), n_draws=300)
    assert any("fewer than 4" in finding.text for finding in sure.findings)


def test_one_factor():
    x = np.linspace(-1, 1, 9)[:, None]
    rng = np.random.default_rng(0)
    y = 20 - (x[:, 0] - 0.2) ** 2 + 0.1 * rng.standard_normal(9)
    models = fit(make_study(x, {"y": y}, goals={"y": more(15, 21)}))
    sure = uncertainty(models, n_draws=500)
    low, high = sure.region.ranges["f0"]
    assert low < 0.2 < high


def test_eight_factors():
    x = small_composite(8, n_centre=6)
    rng = np.random.default_rng(0)
    y = 50 - ((x - 0.2) ** 2).sum(axis=1) + 0.3 * rng.standard_normal(len(x))
    models = fit(
        make_study(x, {"y": y}, goals={"y": more(30, 52)}, limits={"y": Limit(40.0, None, "batch")})
    )
    sure = uncertainty(models, n_draws=256)
    assert sure.feasible_share == 1.0
    assert len(sure.region.ranges) == 8
    assert sure.conformance.mean > 0.99
    assert any("five or more factors" in finding.text for finding in sure.findings)


def test_levels_of_a_categorical_factor_are_weighed():
    x = np.concatenate([central_composite(2, n_centre=4)] * 2)
    level = np.repeat([0, 1], len(x) // 2)
    rng = np.random.default_rng(0)
    y = 30 - (x**2).sum(axis=1) + 0.15 * level + 0.5 * rng.standard_normal(len(x))
    study = make_study(
        x, {"y": y}, goals={"y": more(20, 32)}, categorical={"resin": (("old", "new"), level)}
    )
    sure = uncertainty(fit(study), n_draws=600)
    assert set(sure.level_shares) == {"old", "new"}
    assert sum(sure.level_shares.values()) == pytest.approx(1.0)
    assert 0.02 < min(sure.level_shares.values()) < 0.5


def test_limits_without_goals_have_no_loss_but_a_conformance():
    models = fit(
        make_study(
            central_composite(2, n_centre=5),
            {"y": 10 + central_composite(2, n_centre=5)[:, 0] + 0.3 * np.sin(np.arange(13.0))},
            limits={"y": Limit(8.0, 12.5, "batch")},
        )
    )
    sure = uncertainty(models, n_draws=300)
    assert sure.possible_loss is None
    assert sure.optimism is None
    assert sure.conformance.mean > 0.9


def test_an_exact_response_alone_is_certain():
    x = central_composite(2)
    rng = np.random.default_rng(0)
    study = make_study(
        x,
        {"y": rng.standard_normal(len(x))},
        goals={"cost": less(10, 0)},
        formulas={"cost": {(): 5.0, ("f0",): 1.0, ("f0", "f0"): 1.0, ("f1", "f1"): 1.0}},
    )
    sure = uncertainty(fit(study), n_draws=300)
    assert sure.possible_loss.bound < 1e-6
    assert sure.region.share_of_explored < 0.01
    low, high = sure.region.ranges["f0"]
    assert low == pytest.approx(-0.5, abs=0.01)
    assert high == pytest.approx(-0.5, abs=0.01)


def test_a_conflict_is_not_compared_with_settings_that_hold():
    rng = np.random.default_rng(0)
    x = central_composite(2, n_centre=6)
    y = 10 + x[:, 0] + 0.1 * rng.standard_normal(len(x))
    study = make_study(
        x, {"y": y}, goals={"y": more(5, 15)}, limits={"y": Limit(14.0, None, "batch")}
    )
    sure = uncertainty(fit(study), n_draws=300)
    assert sure.feasible_share == 0.0
    assert sure.region is None
    assert sure.possible_loss is None
    assert sure.conformance.mean < 0.01
    assert any("Too few draws" in finding.text for finding in sure.findings)


def test_the_demo_in_one_look():
    models = fit(read_study("studies/process/hydrogenation"))
    sure = uncertainty(models)
    assert sure.draws == 2000
    assert sure.feasible_share > 0.99
    assert sure.conformance.mean > 0.99
    assert sure.conformance_exact_setting.mean >= sure.conformance.mean - 1e-3
    low, high = sure.region.ranges["catalyst"]
    assert low < 1.38 < high


def test_optima_that_all_agree_make_a_tiny_region():
    problem = build_problem(_hill(), seed=1, room=False)
    region = optimum_region(problem, np.tile([0.3, 0.3], (100, 1)), 0.95)
    assert region.share_of_explored < 1e-3
    assert region.centre == pytest.approx([0.3, 0.3])


def test_where_optima_crowd_on_the_edge_settings_join_and_the_edge_is_counted_apart():
    models = fit(read_study("studies/process/ridge"))
    sure = uncertainty(models, n_draws=400)
    problem, _ = solve(models)
    assert sure.edge_share > 0.2
    assert [region.level for region in sure.narrower] == [0.5, 0.9]
    shares = [region.share_of_edge for region in (*sure.narrower, sure.region)]
    assert shares == sorted(shares)
    assert 0 < shares[-1] < 1
    settings, _ = edge_spread(problem.region)
    joined = sure.region.joined
    kept = joined.shortfall.of(settings, joined.critical) <= joined.critical
    assert (in_region(problem, sure.region, settings) >= kept).all()
    inner = in_region(problem, sure.narrower[0], settings)
    assert (in_region(problem, sure.region, settings) | ~inner).all()


def test_an_optimum_inside_has_the_ellipsoid_alone():
    sure = uncertainty(fit(read_study("studies/process/hydrogenation")), n_draws=400)
    assert sure.region.joined is None
    assert sure.region.share_of_edge is None
