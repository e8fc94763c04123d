"""Conformance against the exact predictive distribution and against plain Monte Carlo."""

import numpy as np
import pytest
from scipy import stats

from support.brute import second_order
from support.build import central_composite, make_study, more
from wideberth.decide.conformance import conformance, conformance_over, setting_sd
from wideberth.decide.guards import Guard
from wideberth.decide.losses import losses
from wideberth.decide.problem import build_problem
from wideberth.fit.draws import draw_coefficients
from wideberth.fit.models import fit
from wideberth.study.records import Limit

N = 4000
X = np.array([0.4, -0.3])
LOWEST = 20.7


def _problem(limits, *, tolerance=None, blocks=None, seed=5):
    rng = np.random.default_rng(seed)
    x = central_composite(2, n_centre=5)
    x = np.concatenate([x, x]) if blocks else x
    mix = np.linalg.cholesky(np.array([[1.0, -0.6], [-0.6, 1.0]]))
    noise = rng.standard_normal((len(x), 2)) @ mix.T
    shift = np.repeat([0.0, 1.5], len(x) // 2) if blocks else 0.0
    a = 20 + 2 * x[:, 0] - x[:, 1] - x[:, 0] ** 2 + noise[:, 0] + shift
    b = 5 + x[:, 1] + 0.5 * x[:, 0] * x[:, 1] + noise[:, 1]
    names = np.repeat(["north", "south"], len(x) // 2).tolist() if blocks else None
    study = make_study(
        x,
        {"a": a, "b": b},
        goals={"a": more(10, 25)},
        limits=limits,
        tolerance=tolerance,
        blocks=names,
    )
    models = fit(study)
    return build_problem(models, seed=1, room=False), draw_coefficients(models, N, seed=2)


def test_one_limit_is_the_predictive_t_distribution():
    problem, draws = _problem({"a": Limit(LOWEST, None, "none")})
    model = problem.models["a"]
    f = second_order(X)
    h = f @ model.covariance @ f
    exact = stats.t.sf(
        (LOWEST - f @ model.coefficients) / (model.s * np.sqrt(1 + h)), model.df_residual
    )
    got = conformance(problem, draws, (), X, np.zeros(2), seed=1)
    assert got.mean == pytest.approx(exact, abs=0.01)
    assert 0.5 < exact < 0.9


def test_the_lower_bound_is_the_one_sided_tolerance_bound():
    # with one response the 5 % quantile of a draw's share is where the tolerance bound meets it
    problem, draws = _problem({"a": Limit(LOWEST, None, "none")})
    model, f = problem.models["a"], second_order(X)
    h = np.array(f @ model.covariance @ f)
    got = conformance(problem, draws, (), X, np.zeros(2), seed=1)
    share = got.lower
    factor = float(Guard("share", model.df_residual, 0.95, share).factor(h))
    assert f @ model.coefficients - factor * model.s == pytest.approx(LOWEST, abs=0.12)


def test_two_correlated_limits_with_setting_error_against_plain_monte_carlo():
    limits = {"a": Limit(18.5, 23.0, "none"), "b": Limit(None, 6.2, "none")}
    problem, draws = _problem(limits, tolerance=0.5)
    sd = setting_sd(problem.study)
    assert sd == pytest.approx([0.5 / 1.959964] * 2)
    rng = np.random.default_rng(9)
    a, b = problem.models["a"], problem.models["b"]
    inside = []
    for i in range(N):
        f = second_order(X + sd * rng.standard_normal((200, 2)))
        noise = rng.standard_normal((200, 2)) @ draws.noise[i].T
        ya, yb = f @ draws.of(a)[i] + noise[:, 0], f @ draws.of(b)[i] + noise[:, 1]
        inside.append(((ya >= 18.5) & (ya <= 23.0) & (yb <= 6.2)).mean())
    got = conformance(problem, draws, (), X, sd, seed=1)
    assert got.mean == pytest.approx(np.mean(inside), abs=0.01)
    # 200 batches a draw blur the quantile a little downwards
    assert got.lower == pytest.approx(np.quantile(inside, 0.05), abs=0.03)
    held = conformance(problem, draws, (), X, np.zeros(2), seed=1)
    assert held.mean > got.mean + 0.01


def test_a_map_agrees_with_the_single_setting():
    limits = {"a": Limit(18.5, None, "none"), "b": Limit(None, 6.2, "none")}
    problem, draws = _problem(limits, tolerance=0.4)
    sd = setting_sd(problem.study)
    grid = np.array([[[0.4, -0.3], [0.0, 0.8]]])
    over = conformance_over(problem, draws, (), grid, sd, seed=1)
    assert over.shape == (1, 2)
    for place, x in enumerate(grid[0]):
        one = conformance(problem, draws, (), x, sd, seed=1)
        assert over[0, place] == pytest.approx(one.mean, abs=0.025)


def test_where_blocks_recur_the_worst_one_counts():
    problem, draws = _problem({"a": Limit(19.5, None, "none")}, blocks=True)
    got = conformance(problem, draws, (), X, np.zeros(2), seed=1)
    assert got.block == "north"


def test_no_limit_no_statement():
    problem, draws = _problem({})
    assert conformance(problem, draws, (), X, np.zeros(2), seed=1) is None
    assert conformance_over(problem, draws, (), X[None], np.zeros(2), seed=1) is None


def test_losses_by_limit_and_by_source_against_plain_simulation():
    rng = np.random.default_rng(3)
    x = central_composite(2, n_centre=5)
    y = 20 + 2 * x[:, 0] - (x**2).sum(axis=1) + 0.6 * rng.standard_normal(len(x))
    z = 10 + x[:, 1] + 0.6 * rng.standard_normal(len(x))
    limits = {"y": Limit(19.0, None, "none"), "z": Limit(None, 11.0, "none")}
    models = fit(make_study(x, {"y": y, "z": z}, limits=limits, tolerance=0.4))
    problem = build_problem(models, seed=1, room=False)
    draws = draw_coefficients(models, 500, 1)
    place, sd = np.array([0.2, 0.3]), np.array([0.2, 0.2])
    found = losses(problem, draws, (), place, sd, 1)
    settings = place + sd * rng.standard_normal((500, 2))
    shares = {}
    for name, bound, sign in (("y", 19.0, -1), ("z", 11.0, 1)):
        model = models[name]
        own = settings[rng.permutation(500)]
        f = np.column_stack([np.ones(500), own, own**2, own[:, 0] * own[:, 1]])
        f = f[:, [term.monomial for term in model.terms]]
        mean = (f * draws.of(model)).sum(axis=1)
        noisy = mean[:, None] + draws.sd(model)[:, None] * rng.standard_normal((500, 60))
        shares[name] = (sign * (noisy - bound) > 0).mean()
    by_name = {words.split()[0]: share for words, share in found.limits.items()}
    assert by_name == pytest.approx(shares, abs=0.03)
    whole = conformance(problem, draws, (), place, sd, 1).mean
    held = conformance(problem, draws, (), place, np.zeros(2), 1).mean
    assert found.sources["settings"] == pytest.approx(held - whole)
    assert found.sources["batches"] > found.sources["settings"] > 0
    assert set(found.sources) == {"equations", "batches", "settings"}
    still = losses(problem, draws, (), place, np.zeros(2), 1)
    assert "settings" not in still.sources
