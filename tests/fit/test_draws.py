"""Draws of coefficients: marginal t, joint covariance, missing cells, few degrees of freedom."""

import numpy as np
import pytest
from scipy import stats

from support.build import central_composite, make_study
from wideberth.fit.draws import draw_coefficients, why_no_draws
from wideberth.fit.models import fit
from wideberth.quadratic.terms import features
from wideberth.study.records import Goal

N = 20_000


def _models(*, missing=(), orders=None, m=3, k=2, n_centre=5, seed=4):
    rng = np.random.default_rng(seed)
    x = central_composite(k, n_centre=n_centre)
    mix = np.linalg.cholesky(0.5 * np.eye(m) + 0.5)
    noise = rng.standard_normal((len(x), m)) @ mix.T
    values = {f"y{j}": 10 + x[:, 0] * (j + 1) - x[:, 1] ** 2 + noise[:, j] for j in range(m)}
    for row, name in missing:
        values[name] = values[name].copy()
        values[name][row] = np.nan
    goals = {name: Goal("more", (0.0,), (20.0,)) for name in values}
    return fit(make_study(x, values, goals=goals, orders=orders))


@pytest.mark.parametrize(
    ("missing", "orders"),
    [((), None), (((2, "y0"), (3, "y0"), (5, "y1")), None), ((), {"y1": 1})],
    ids=["complete", "missing cells", "unequal terms"],
)
def test_each_coefficient_has_its_own_t_distribution(missing, orders):
    models = _models(missing=missing, orders=orders)
    draws = draw_coefficients(models, N, seed=3)
    for model in models.models:
        se = model.s * np.sqrt(np.diag(model.covariance))
        t = (draws.of(model) - model.coefficients) / se
        for column in t.T:
            assert stats.kstest(column, stats.t(model.df_residual).cdf).pvalue > 1e-3
        chi = model.df_residual * (model.s / draws.sd(model)) ** 2
        assert stats.kstest(chi, stats.chi2(model.df_residual).cdf).pvalue > 1e-3


def test_coefficients_of_two_responses_move_together_as_their_residuals_do():
    models = _models(n_centre=30)
    draws = draw_coefficients(models, N, seed=3)
    first, second = models.models[0], models.models[1]
    r = np.array([run.residual for run in first.runs])
    q = np.array([run.residual for run in second.runs])
    expected = (r @ q) / np.sqrt((r @ r) * (q @ q))
    got = np.corrcoef(draws.of(first)[:, 0], draws.of(second)[:, 0])[0, 1]
    assert got == pytest.approx(expected, abs=0.03)
    z = np.random.default_rng(0).standard_normal((N, 3, 1))
    noise = (draws.noise @ z)[..., 0]
    assert np.corrcoef(noise[:, 0], noise[:, 1])[0, 1] == pytest.approx(expected, abs=0.03)


def test_the_confidence_ellipsoid_of_one_response_is_exact():
    # Scheffe's ellipsoid: (beta_b - beta)'(X'X)(beta_b - beta)/(q s_b^2) is F with q and df
    models = _models(m=1)
    model = models.models[0]
    draws = draw_coefficients(models, N, seed=5)
    away = draws.of(model) - model.coefficients
    inner = np.linalg.inv(model.covariance)
    q = len(model.coefficients)
    f = np.einsum("ni,ij,nj->n", away, inner, away) / q / model.s**2
    # about s (not s_b) the ratio is F(q, df) as well, the posterior's own pivot
    assert stats.kstest(f, stats.f(q, model.df_residual).cdf).pvalue > 1e-3


def test_more_responses_than_degrees_of_freedom_still_draw():
    models = _models(m=4, n_centre=1)
    assert models.models[0].df_residual == 3
    draws = draw_coefficients(models, 2000, seed=1)
    assert np.isfinite(draws.noise).all()
    median = np.median(np.abs(draws.of(models.models[3])[:, 0] - models.models[3].coefficients[0]))
    se = models.models[3].s * np.sqrt(models.models[3].covariance[0, 0])
    assert median / se == pytest.approx(stats.t(3).ppf(0.75), rel=0.06)


def test_the_first_draws_do_not_depend_on_how_many_are_asked_for():
    models = _models()
    few, many = draw_coefficients(models, 100, seed=9), draw_coefficients(models, 700, seed=9)
    for one, other in zip(few.coefficients, many.coefficients, strict=True):
        assert np.array_equal(one, other[:100])
    assert np.array_equal(few.noise, many.noise[:100])


def test_a_saturated_response_is_named():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 3, 4, 8]]
    y = np.arange(6.0) ** 1.5
    models = fit(make_study(x, {"y": y}, goals={"y": Goal("more", (0.0,), (20.0,))}))
    assert models["y"].df_residual == 0
    assert "y" in why_no_draws(models)
    assert draw_coefficients(models, 10, seed=1).of(models["y"]).shape == (1, len(features(x)[0]))


def test_an_exact_response_does_not_vary():
    x = central_composite(2)
    rng = np.random.default_rng(0)
    study = make_study(
        x,
        {"y": rng.standard_normal(len(x))},
        goals={"y": Goal("more", (0.0,), (2.0,))},
        formulas={"cost": {(): 3.0, ("f0",): 1.0}},
    )
    models = fit(study)
    draws = draw_coefficients(models, 50, seed=1)
    assert draws.varying == ("y",)
    assert why_no_draws(models) == ""
    assert np.array_equal(draws.of(models["cost"]), models["cost"].coefficients[None])
    assert np.array_equal(draws.sd(models["cost"]), [0.0])
