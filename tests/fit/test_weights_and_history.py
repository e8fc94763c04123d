"""Weights, pooled history and left-out runs: against statsmodels, a plain sum, and simulation."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from support.build import central_composite, make_study
from wideberth.decide.every_run import with_every_run
from wideberth.decide.judge import predictions
from wideberth.decide.recommend import solve
from wideberth.fit.columns import model_matrix
from wideberth.fit.draws import draw_coefficients, why_no_draws
from wideberth.fit.models import fit
from wideberth.study.records import Goal, KnownSd, LeftOut, Limit

RNG = np.random.default_rng(12)
X = np.tile(central_composite(2, n_centre=3), (2, 1))
WEIGHT = RNG.choice([1.0, 2.0, 0.5, 4.0], len(X))


def _weighted(study, weight):
    return replace(study, runs=replace(study.runs, weight=np.asarray(weight, float)))


def _known(study, value, df, name="y"):
    responses = [
        replace(r, known_sd=KnownSd(value, df)) if r.name == name else r for r in study.responses
    ]
    return replace(study, responses=tuple(responses))


def _leaving_out(study, row, reason="valve stuck", responses=()):
    place = study.runs.rows.index(row)
    measured = study.runs.measured.copy()
    names = [r.name for r in study.measured]
    measured[place, [names.index(r) for r in responses] or slice(None)] = np.nan
    runs = replace(study.runs, measured=measured, left_out=() if responses else (place,))
    return replace(
        study, runs=runs, every_run=study.runs, left_out=(LeftOut((row,), reason, responses),)
    )


@pytest.fixture(scope="module")
def weighted():
    y = 5 + X @ [1.0, -2.0] + X[:, 0] ** 2 + RNG.standard_normal(len(X)) / np.sqrt(WEIGHT)
    study = _weighted(make_study(X, {"y": y}), WEIGHT)
    model = fit(study)["y"]
    matrix = model_matrix(study, model.terms, np.arange(len(X)))
    return model, sm.WLS(y, matrix, weights=WEIGHT).fit(), matrix


def test_a_weighted_fit_is_that_of_statsmodels(weighted):
    model, other, _ = weighted
    for row, *theirs in zip(
        model.table, other.params, other.bse, other.tvalues, other.pvalues, strict=True
    ):
        assert [row.coded, row.se, row.t, row.p] == pytest.approx(theirs, rel=1e-8, abs=1e-12)
    assert model.s**2 == pytest.approx(other.mse_resid, rel=1e-10)
    assert model.r2 == pytest.approx(other.rsquared, rel=1e-10)
    assert model.r2_adjusted == pytest.approx(other.rsquared_adj, rel=1e-10)


def test_each_weighted_run_is_that_of_the_scaled_ordinary_fit(weighted):
    model, other, matrix = weighted
    root = np.sqrt(WEIGHT)
    scaled = sm.OLS(other.model.endog * root, matrix * root[:, None]).fit().get_influence()
    for name, theirs in (
        ("leverage", scaled.hat_matrix_diag),
        ("studentized", scaled.resid_studentized_external),
        ("cook", scaled.cooks_distance[0]),
        ("residual", other.resid),
    ):
        assert [getattr(run, name) for run in model.runs] == pytest.approx(theirs, rel=1e-8)
    assert model.press == pytest.approx((scaled.resid_press**2).sum(), rel=1e-10)


def test_weighted_lack_of_fit_is_the_comparison_with_group_means(weighted):
    model, other, matrix = weighted
    keys = [tuple(np.round(row, 9)) for row in matrix]
    groups = sorted(set(keys))
    dummies = np.array([[key == group for group in groups] for key in keys], dtype=float)
    saturated = sm.WLS(other.model.endog, dummies, weights=WEIGHT).fit()
    f, p, df = saturated.compare_f_test(other)
    assert (model.lack_of_fit.f, model.lack_of_fit.p) == pytest.approx((f, p), rel=1e-8)
    assert model.lack_of_fit.df == (int(df), len(keys) - len(groups))


def test_a_whole_weight_is_so_many_rows_of_the_same_mean():
    # three equal rows, or one of weight 3: the same equation and the same certainty of it
    x = central_composite(2, n_centre=3)
    y = x @ [1.0, 2.0] + RNG.standard_normal(len(x))
    times = np.ones(len(x), dtype=int)
    times[4] = 3
    one = fit(_weighted(make_study(x, {"y": y}), times))["y"]
    many = fit(make_study(np.repeat(x, times, axis=0), {"y": np.repeat(y, times)}))["y"]
    assert one.coefficients == pytest.approx(many.coefficients, rel=1e-10)
    assert one.covariance == pytest.approx(many.covariance, rel=1e-9, abs=1e-13)


def test_weighted_draws_keep_each_coefficient_and_s_exact(weighted):
    y = np.array([run.observed for run in weighted[0].runs])
    goal = {"y": Goal("more", (0.0,), (9.0,)), "z": Goal("more", (0.0,), (9.0,))}
    values = {"y": y, "z": y[::-1].copy()}
    models = fit(_weighted(make_study(X, values, goals=goal), WEIGHT))
    draws = draw_coefficients(models, 20_000, seed=2)
    for model in models.models:
        se = model.s * np.sqrt(np.diag(model.covariance))
        for column in ((draws.of(model) - model.coefficients) / se).T:
            assert stats.kstest(column, stats.t(model.df_error).cdf).pvalue > 1e-3


def test_weights_that_name_no_single_batch_are_questioned():
    y = RNG.standard_normal(len(X))
    (finding,) = [
        f
        for f in fit(_weighted(make_study(X, {"y": y}), 10 * WEIGHT))["y"].findings
        if "weight 1" in f.text
    ]
    assert finding.grade == "look"


def test_pooling_adds_sums_of_squares_and_degrees_of_freedom():
    y = RNG.standard_normal(len(X))
    plain = fit(make_study(X, {"y": y}))["y"]
    pooled = fit(_known(make_study(X, {"y": y}), 0.8, 30))["y"]
    assert pooled.df_error == plain.df_residual + 30
    assert pooled.df_residual == plain.df_residual
    total = plain.s**2 * plain.df_residual + 0.8**2 * 30
    assert pooled.s**2 * pooled.df_error == pytest.approx(total, rel=1e-12)
    assert pooled.pooled.s_runs == pytest.approx(plain.s, rel=1e-12)
    ratio = stats.f(plain.df_residual, 30).cdf((plain.s / 0.8) ** 2)
    assert pooled.pooled.p == pytest.approx(2 * min(ratio, 1 - ratio), rel=1e-9)
    row = pooled.table[1]
    assert row.se == pytest.approx(pooled.s * np.sqrt(pooled.covariance[1, 1]))
    assert row.p == pytest.approx(2 * stats.t(pooled.df_error).sf(abs(row.t)), rel=1e-9)
    # what the runs alone say about themselves stays theirs
    assert pooled.lack_of_fit == plain.lack_of_fit
    assert [r.studentized for r in pooled.runs] == [r.studentized for r in plain.runs]


def test_history_that_the_runs_contradict_is_said():
    y = 5 * RNG.standard_normal(len(X))
    (finding,) = [f for f in fit(_known(make_study(X, {"y": y}), 0.5, 40))["y"].findings
                  if "scatter more" in f.text]  # fmt: skip
    assert finding.grade == "look"


def test_a_saturated_design_with_known_sd_can_be_guarded():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 4, 5, 8]]
    y = np.array([10.0, 11.0, 12.0, 9.5, 10.2, 12.5])
    limit = {"y": Limit(8.0, None, "batch")}
    bare = make_study(x, {"y": y}, limits=limit)
    assert why_no_draws(fit(bare)) != ""
    models = fit(_known(bare, 0.2, 20))
    model = models["y"]
    assert (model.s, model.df_error, model.df_residual) == (pytest.approx(0.2), 20, 0)
    assert why_no_draws(models) == ""
    _, choice = solve(models)
    assert choice.status == "met"
    assert draw_coefficients(models, 20_000, seed=1).sd(model).mean() == pytest.approx(
        0.2 * np.sqrt(20) * stats.chi(20).expect(lambda v: 1 / v), rel=0.01
    )


@pytest.mark.parametrize("kind", ["weights", "history", "both"])
def test_intervals_cover_as_often_as_they_say(kind):
    x = central_composite(2, n_centre=2)
    rng = np.random.default_rng(5)
    weight = np.where(np.arange(len(x)) % 3 == 0, 4.0, 1.0)
    at, n = np.array([0.4, -0.7]), 1500
    truth = 3 + x @ [1.0, -1.0] + x[:, 0] * x[:, 1]
    true_mean = 3 + at @ [1.0, -1.0] + at.prod()
    sd = 1 / np.sqrt(weight) if kind != "history" else np.ones(len(x))
    held = np.zeros(2)
    for _ in range(n):
        study = make_study(x, {"y": truth + sd * rng.standard_normal(len(x))})
        study = _weighted(study, weight) if kind != "history" else study
        if kind != "weights":
            study = _known(study, float(np.sqrt(rng.chisquare(6) / 6)), 6)
        models = fit(study)
        one = _predict(models, at)
        batch = true_mean + rng.standard_normal()
        held += [
            one.mean_interval[0] <= true_mean <= one.mean_interval[1],
            one.batch_interval[0] <= batch <= one.batch_interval[1],
        ]
    # three standard errors of a share of 95 % among 1,500
    assert held / n == pytest.approx([0.95, 0.95], abs=3 * np.sqrt(0.95 * 0.05 / n))


def _predict(models, at):
    # of a problem, predictions read the models and the goals alone
    problem = SimpleNamespace(models=models, study=models.study, goals=())
    return predictions(problem, (), at)["y"]


def test_a_left_out_run_is_held_against_the_others():
    y = 5 + X @ [1.0, -2.0] + 0.3 * RNG.standard_normal(len(X))
    y[3] += 6
    whole = make_study(X, {"y": y}, goals={"y": Goal("more", (0.0,), (12.0,))})
    row = whole.runs.rows[3]
    study = _leaving_out(whole, row)
    model = fit(study)["y"]
    gone = np.delete(np.arange(len(X)), 3)
    other = fit(make_study(X[gone], {"y": y[gone]}))["y"]
    assert model.coefficients == pytest.approx(other.coefficients, rel=1e-10, abs=1e-12)
    (run,) = model.left_out
    assert (run.row, run.reason, run.observed) == (row, "valve stuck", y[3])
    matrix = model_matrix(study, model.terms, np.arange(len(X)))
    frame = (
        sm.OLS(y[gone], matrix[gone]).fit().get_prediction(matrix[[3]]).summary_frame(alpha=0.05)
    )
    assert run.expected == pytest.approx(frame["mean"].iloc[0])
    assert run.interval == pytest.approx(
        (frame["obs_ci_lower"].iloc[0], frame["obs_ci_upper"].iloc[0])
    )
    assert any("lies outside" in finding.text for finding in model.findings)


def test_the_setpoint_is_shown_with_and_without():
    y = 5 + X @ [1.0, -2.0] - X[:, 0] ** 2 + 0.3 * RNG.standard_normal(len(X))
    y[2] += 4
    whole = make_study(X, {"y": y}, goals={"y": Goal("more", (0.0,), (12.0,))})
    models = fit(_leaving_out(whole, whole.runs.rows[2]))
    _, choice = solve(models)
    other = with_every_run(models, choice)
    _, plain = solve(fit(whole))
    assert other.setpoint == plain.setpoint
    assert other.desirability == plain.desirability
    assert other.moved["f0"] == pytest.approx(plain.setpoint["f0"] - choice.setpoint["f0"])
    assert any("valve stuck" in finding.text for finding in choice.findings)
    assert with_every_run(fit(whole), plain) is None


def test_a_run_left_out_for_one_response_still_serves_the_other():
    values = {"y": RNG.standard_normal(len(X)), "z": RNG.standard_normal(len(X))}
    study = _leaving_out(make_study(X, values), 4, responses=("y",))
    models = fit(study)
    assert models["y"].n_runs == len(X) - 1
    assert models["z"].n_runs == len(X)
    assert models["z"].left_out == ()
