"""Every quantity of a fit against statsmodels as an independent route."""

import numpy as np
import pytest
import statsmodels.api as sm
from scipy.special import stdtrit

from support.build import central_composite, make_study
from wideberth.fit.columns import model_matrix
from wideberth.fit.models import fit, rows_fitted
from wideberth.fit.records import surface
from wideberth.quadratic.terms import features


def _study(kind, seed=3):
    rng = np.random.default_rng(seed)
    x = np.tile(central_composite(2, n_centre=3), (4, 1))
    n = len(x)
    y = 5 + x @ [1.0, -2.0] + x[:, 0] ** 2 - x[:, 0] * x[:, 1] + 0.4 * rng.standard_normal(n)
    extra = {}
    if kind == "missing":
        y[[1, 7]] = np.nan
    if kind == "blocks":
        extra["blocks"] = ["a"] * (n // 2) + ["b"] * (n // 2)
        y[: n // 2] += 1.0
    if kind == "categorical":
        levels = np.arange(n) * 4 // n % 3
        y += levels * (1 + 0.5 * x[:, 0])
        extra["categorical"] = {"colour": (("red", "green", "blue"), levels)}
    return make_study(x, {"y": y}, names=("a", "b"), **extra)


@pytest.fixture(params=["plain", "missing", "blocks", "categorical"])
def pair(request):
    study = _study(request.param)
    model = fit(study).models[0]
    rows = rows_fitted(study, study.responses[0])
    matrix = model_matrix(study, model.terms, rows)
    return study, model, sm.OLS(study.runs.measured[rows, 0], matrix).fit(), matrix


def test_coefficients_errors_and_tests(pair):
    _, model, other, _ = pair
    for row, *theirs in zip(
        model.table, other.params, other.bse, other.tvalues, other.pvalues, strict=True
    ):
        assert [row.coded, row.se, row.t, row.p] == pytest.approx(theirs, rel=1e-8, abs=1e-12)


def test_quality(pair):
    _, model, other, _ = pair
    assert model.s**2 == pytest.approx(other.mse_resid, rel=1e-10)
    assert model.r2 == pytest.approx(other.rsquared, rel=1e-10)
    assert model.r2_adjusted == pytest.approx(other.rsquared_adj, rel=1e-10)
    influence = other.get_influence()
    assert model.press == pytest.approx((influence.resid_press**2).sum(), rel=1e-10)


def test_each_run(pair):
    _, model, other, _ = pair
    influence = other.get_influence()
    for name, theirs in (
        ("leverage", influence.hat_matrix_diag),
        ("studentized", influence.resid_studentized_external),
        ("cook", influence.cooks_distance[0]),
        ("residual", other.resid),
    ):
        ours = [getattr(run, name) for run in model.runs]
        assert ours == pytest.approx(theirs, rel=1e-8, abs=1e-10)


def test_lack_of_fit_is_the_comparison_with_group_means(pair):
    _, model, other, matrix = pair
    keys = [tuple(np.round(row, 9)) for row in matrix]
    groups = sorted(set(keys))
    dummies = np.array([[key == group for group in groups] for key in keys], dtype=float)
    f, p, df = sm.OLS(other.model.endog, dummies).fit().compare_f_test(other)
    lack = model.lack_of_fit
    assert (lack.f, lack.p) == pytest.approx((f, p), rel=1e-8)
    assert lack.df == (int(df), len(keys) - len(groups))


def test_prediction_intervals_from_the_surface():
    study = _study("plain")
    model = fit(study).models[0]
    x = np.array([[0.3, -0.7], [1.2, 0.1]])
    other = sm.OLS(
        study.runs.measured[:, 0], model_matrix(study, model.terms, np.arange(len(study.runs.rows)))
    )
    terms = features(x)
    order = [term.monomial for term in model.terms]
    frame = other.fit().get_prediction(terms[:, order]).summary_frame(alpha=0.05)
    at = surface(model, study)
    h = np.einsum("np,pq,nq->n", terms, at.covariance, terms)
    t = stdtrit(at.df, 0.975)
    mean = terms @ at.coefficients
    assert mean - t * at.s * np.sqrt(h) == pytest.approx(frame["mean_ci_lower"].to_numpy())
    assert mean + t * at.s * np.sqrt(1 + h) == pytest.approx(frame["obs_ci_upper"].to_numpy())


@pytest.mark.parametrize("seed", range(4))
def test_invariance(seed):
    rng = np.random.default_rng(seed)
    x = central_composite(3)
    y = rng.standard_normal(len(x)) + x @ [1, 2, 3]
    plain = fit(make_study(x, {"y": y})).models[0]
    order = rng.permutation(len(x))
    shuffled = fit(make_study(x[order], {"y": y[order]})).models[0]
    assert shuffled.coefficients == pytest.approx(plain.coefficients, rel=1e-9, abs=1e-12)
    scaled = fit(make_study(x * 40 + 300, {"y": y * 7}, low=(260,) * 3, high=(340,) * 3)).models[0]
    assert scaled.coefficients == pytest.approx(7 * plain.coefficients, rel=1e-9, abs=1e-10)
    assert scaled.r2_press == pytest.approx(plain.r2_press, rel=1e-9)
    mirrored = fit(make_study(x * [-1, 1, 1], {"y": y})).models[0]
    signs = np.array([-1.0 if t.name in ("f0", "f0*f1", "f0*f2") else 1.0 for t in plain.terms])
    assert mirrored.coefficients == pytest.approx(signs * plain.coefficients, rel=1e-9, abs=1e-12)
    renamed = fit(make_study(x, {"y": y}, names=("Rührer", "b c", "d"))).models[0]
    assert renamed.coefficients == pytest.approx(plain.coefficients, rel=1e-12)
