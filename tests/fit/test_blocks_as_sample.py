"""Blocks that are a sample: variance between them against mixed models, coverage, draws."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from support.build import central_composite, make_study
from wideberth.decide.judge import predictions
from wideberth.decide.recommend import recommend, solve
from wideberth.errors import RefusedError
from wideberth.fit.columns import model_matrix
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.fit.records import surface
from wideberth.quadratic.terms import features
from wideberth.study.records import Goal, KnownSd, Limit

CORE = central_composite(2, n_centre=2)
CUBE, STAR = np.vstack([CORE[:4], CORE[-2:]]), CORE[4:]
AT = np.array([0.4, -0.6])


def _design(n_blocks):
    """Orthogonal blocks: cubes and stars of a composite in turn."""
    parts = [(CUBE, STAR)[i % 2] for i in range(n_blocks)]
    names = [f"day {i}" for i, part in enumerate(parts) for _ in part]
    return np.vstack(parts), names


def _truth(x):
    return 3 + x @ [1.0, -1.0] + x[..., 0] * x[..., 1]


def _study(n_blocks, tau, rng, *, block_sd=None, sigma=1.0, m=1, **extra):
    x, names = _design(n_blocks)
    which = np.array([int(name[4:]) for name in names])
    values = {
        f"y{j}": _truth(x)
        + tau * rng.standard_normal(n_blocks)[which]
        + sigma * rng.standard_normal(len(x))
        for j in range(m)
    }
    study = replace(make_study(x, values, blocks=names, **extra), future_blocks="sample")
    responses = tuple(replace(r, block_sd=block_sd) for r in study.responses)
    return replace(study, responses=responses)


def test_both_variances_are_those_of_a_mixed_model():
    # in a balanced orthogonal design the mean squares are the REML estimates
    study = _study(6, 1.5, np.random.default_rng(4))
    model = fit(study)["y0"]
    terms = [term for term in model.terms if term.block is None]
    matrix = model_matrix(study, tuple(terms), np.arange(len(study.runs.rows)))
    mixed = sm.MixedLM(study.runs.measured[:, 0], matrix, groups=study.runs.block)
    other = mixed.fit(reml=True)
    assert model.between.s_within**2 == pytest.approx(other.scale, rel=1e-4)
    assert model.between.sd**2 == pytest.approx(float(other.cov_re[0, 0]), rel=1e-3)
    own = [i for i, term in enumerate(model.terms) if term.block is None]
    assert model.coefficients[own] == pytest.approx(other.fe_params, abs=1e-4)
    # standard errors of the mean at a setting, block variance and all
    terms_there = features(AT[None])[0]
    at = surface(model, study)
    order = [term.monomial for term in terms]
    theirs = terms_there[order] @ other.cov_params()[: len(own), : len(own)] @ terms_there[order]
    ours = model.s**2 * terms_there @ at.covariance @ terms_there
    assert ours == pytest.approx(float(theirs), rel=1e-3)


def test_slopes_are_compared_within_blocks():
    study = _study(4, 3.0, np.random.default_rng(1))
    recur = fit(replace(study, future_blocks="recur"))["y0"]
    model = fit(study)["y0"]
    assert model.table == recur.table
    assert model.between.s_within == recur.s
    assert model.s == pytest.approx(np.hypot(recur.s, model.between.sd))


@pytest.mark.parametrize(
    ("n_blocks", "tau", "stated"),
    [(2, 2.0, False), (3, 2.0, False), (3, 0.0, False), (3, 2.0, True)],
)
def test_intervals_cover_a_new_block_at_least_as_often_as_they_say(n_blocks, tau, stated):
    rng = np.random.default_rng(8)
    n, held = 600, np.zeros(2)
    for _ in range(n):
        models = fit(_study(n_blocks, tau, rng, block_sd=tau if stated else None))
        problem = SimpleNamespace(models=models, study=models.study, goals=())
        one = predictions(problem, (), AT)["y0"]
        batch = _truth(AT) + tau * rng.standard_normal() + rng.standard_normal()
        held += [
            one.mean_interval[0] <= _truth(AT) <= one.mean_interval[1],
            one.batch_interval[0] <= batch <= one.batch_interval[1],
        ]
    slack = 3 * np.sqrt(0.95 * 0.05 / n)
    assert (held / n >= 0.95 - slack).all()
    if stated:
        assert (held / n <= 0.95 + slack).all()


def test_draws_carry_the_variance_between_blocks():
    models = fit(_study(5, 2.0, np.random.default_rng(3), m=2))
    model = models["y0"]
    draws = draw_coefficients(models, 20_000, seed=1)
    between = model.between
    chi = stats.chi2(between.df).rvs(200_000, random_state=1)
    within = between.s_within**2 * model.df_error
    within = within / stats.chi2(model.df_error).rvs(200_000, random_state=2)
    drawn = np.maximum(between.mean_square * between.df / chi - between.noise * within, 0.0)
    shares = [0.1, 0.5, 0.9]
    expected = np.quantile(np.sqrt(drawn + within), shares)
    assert np.quantile(draws.sd(model), shares) == pytest.approx(expected, rel=0.03)
    constant = [term.name for term in model.terms].index("1")
    unscaled = between.covariance_within[constant, constant]
    normal = np.random.default_rng(0).standard_normal(200_000)
    expected = np.quantile(normal * np.sqrt(drawn / 5 + within * unscaled), [0.9, 0.975])
    away = draws.of(model)[:, constant] - model.coefficients[constant]
    assert np.quantile(away, [0.9, 0.975]) == pytest.approx(expected, rel=0.05)
    # slopes know nothing of blocks
    slope = [term.name for term in model.terms].index("f0")
    t = (draws.of(model)[:, slope] - model.coefficients[slope]) / model.table[slope].se
    assert stats.kstest(t, stats.t(model.df_error).cdf).pvalue > 1e-3


def test_a_guard_stands_farther_off_than_where_blocks_recur():
    limit = {"y0": Limit(None, 60.0, "batch")}
    goal = {"y0": Goal("more", (0.0,), (10.0,))}
    study = _study(4, 3.0, np.random.default_rng(2), limits=limit, goals=goal)
    sample = recommend(fit(study)).limits[0]
    assert sample.block is None
    model = fit(study)["y0"]
    # the least that a bound on a batch in a new block can allow for
    least = stats.t(model.df_error).ppf(0.95) * model.s
    expected = recommend(fit(study)).predictions["y0"].mean
    assert sample.guarded - expected > least


def test_history_and_a_stated_block_sd_serve_a_single_block():
    rng = np.random.default_rng(6)
    study = _study(1, 0.0, rng, block_sd=0.7)
    x = np.vstack([CUBE, STAR])
    names = ["day 0"] * len(x)
    study = replace(make_study(x, {"y0": _truth(x)}, blocks=names), future_blocks="sample")
    with pytest.raises(RefusedError, match="all runs lie in one block"):
        fit(study)
    known = replace(study.responses[0], block_sd=0.7, known_sd=KnownSd(0.5, 30))
    model = fit(replace(study, responses=(known,)))["y0"]
    assert model.between.sd == 0.7
    assert model.s > 0.7


def test_a_response_that_misses_a_block_is_refused():
    study = _study(3, 1.0, np.random.default_rng(7))
    measured = study.runs.measured.copy()
    measured[study.runs.block == 1] = np.nan
    with pytest.raises(RefusedError, match="cannot be compared between all blocks"):
        fit(replace(study, runs=replace(study.runs, measured=measured)))


def test_confirmation_asks_for_new_blocks():
    limit = {"y0": Limit(None, 5.4, "batch")}
    study = _study(3, 0.3, np.random.default_rng(2), limits=limit, sigma=0.3)
    _, choice = solve(fit(study))
    if choice.confirmation is not None:
        assert "several new blocks" in choice.confirmation.text
    one, three = choice.confirm["y0"].one, choice.confirm["y0"].three
    assert one[0] < three[0] < three[1] < one[1]
