"""Checks of residuals: true size on small designs, power, and statsmodels for what is exact."""

from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from support.build import central_composite, make_study
from wideberth.fit.checks import added_columns, checks_of
from wideberth.fit.columns import model_matrix
from wideberth.fit.equations import own_units
from wideberth.fit.least_squares import least_squares
from wideberth.fit.models import fit
from wideberth.study.coding import to_coded
from wideberth.study.records import Limit

RNG = np.random.default_rng(21)
X = central_composite(2, n_centre=5)
N = len(X)
ORDER = tuple(int(i) for i in RNG.permutation(N) + 1)
LOTS = tuple("abc"[i % 3] for i in range(N))
WATER = tuple(f"{v:.2f}" for v in RNG.uniform(0, 1, N))


def _study(y, *, x=X, others=None, **extra):
    study = make_study(x, {"y": y}, **extra)
    runs = replace(study.runs, order=ORDER[: len(x)] if len(x) == N else None, others=others or {})
    return replace(study, runs=runs)


def _checks(y, **extra):
    return {check.kind: check for check in fit(_study(y, **extra))["y"].checks}


def test_every_check_is_wrong_as_often_as_it_says():
    others = {"lot": LOTS, "water": WATER}
    study = _study(np.zeros(N) + np.arange(N), others=others)
    model = fit(study)["y"]
    rows = np.arange(N)
    matrix = model_matrix(study, model.terms, rows)
    truth = 4 + X @ [3.0, -2.0] + X[:, 0] ** 2
    rng, n = np.random.default_rng(3), 1500
    wrong: dict[str, list[float]] = {}
    for _ in range(n):
        fitted = least_squares(matrix, truth + rng.standard_normal(N))
        for check in checks_of(study, rows, model.terms, fitted, "y"):
            wrong.setdefault(check.kind, []).append(check.p)
    assert set(wrong) == {
        "normal scores",
        "spread against fitted",
        "neighbouring runs",
        "drift over run order",
        "column lot",
        "column water",
    }
    for kind, p in wrong.items():
        # two columns share the risk, so each alone is wrong half as often
        size = 0.025 if kind.startswith("column") else 0.05
        share = float((np.array(p) <= 0.05).mean())
        assert share == pytest.approx(size, abs=3 * np.sqrt(size * (1 - size) / n)), kind


def test_weighted_runs_of_one_noise_are_not_found_unequal():
    weight = np.where(np.arange(N) % 2, 9.0, 1.0)
    rng, n, wrong = np.random.default_rng(5), 400, 0
    study = _study(np.arange(N) + 0.0)
    model = fit(study)["y"]
    matrix = model_matrix(study, model.terms, np.arange(N))
    for _ in range(n):
        y = 5 * X[:, 0] + rng.standard_normal(N) / np.sqrt(weight)
        fitted = least_squares(matrix, y, weight)
        found = checks_of(study, np.arange(N), model.terms, fitted, "y")
        wrong += {check.kind: check.p for check in found}["normal scores"] <= 0.05
    assert wrong / n == pytest.approx(0.05, abs=3 * np.sqrt(0.05 * 0.95 / n))


BIG = np.tile(central_composite(2, n_centre=4), (4, 1))
NOISE = np.random.default_rng(9).standard_normal(len(BIG))


def _big(y, **extra):
    study = make_study(BIG, {"y": y}, **extra)
    order = np.random.default_rng(2).permutation(len(BIG)) + 1
    runs = replace(study.runs, order=tuple(int(i) for i in order))
    return replace(study, runs=runs), order


def test_what_is_wrong_is_found_and_said():
    _, order = _big(NOISE)
    drift = fit(_big(NOISE + 0.1 * order)[0])["y"]
    assert any("drift over the run order" in f.text and f.grade == "look" for f in drift.findings)
    slow = fit(_big(0.5 * NOISE + 2 * np.sin(order / 4.0))[0])["y"]
    assert any("one after the other resemble" in f.text for f in slow.findings)
    level = 4 + 2 * BIG[:, 0]
    grown = fit(_big(level + 0.08 * level**2 * NOISE)[0])["y"]
    assert any("scatter grows with the response" in f.text for f in grown.findings)
    heavy = fit(_big(np.sign(NOISE) * np.abs(NOISE) ** 3)[0])["y"]
    assert any("do not look normal" in f.text for f in heavy.findings)
    study, _ = _big(NOISE + np.repeat([0.0, 2.0], len(BIG) // 2))
    lots = tuple(np.repeat(["k1", "k2"], len(BIG) // 2))
    study = replace(study, runs=replace(study.runs, others={"lot": lots}))
    assert any("the residuals go with the column lot" in f.text for f in fit(study)["y"].findings)


def test_curvature_that_differs_between_levels_is_found():
    level = np.arange(len(BIG)) // 24
    categorical = {"colour": (("red", "green"), level)}
    study = make_study(BIG, {"y": 0.3 * NOISE}, categorical=categorical)
    calm = {check.kind: check for check in fit(study)["y"].checks}["curvature by colour"]
    assert calm.df[0] == 3
    assert calm.grade == "fine"
    bent = make_study(BIG, {"y": 0.3 * NOISE + level * BIG[:, 0] ** 2}, categorical=categorical)
    assert any("curvature differs" in f.text for f in fit(bent)["y"].findings)


@pytest.mark.parametrize("weight", [None, RNG.uniform(0.5, 3, N)])
def test_added_columns_are_the_comparison_of_two_fits(weight):
    study = _study(np.arange(N) + 0.0)
    matrix = model_matrix(study, fit(study)["y"].terms, np.arange(N))
    y, added = RNG.standard_normal(N), RNG.standard_normal((N, 2))
    w = np.ones(N) if weight is None else weight
    small = sm.WLS(y, matrix, weights=w).fit()
    large = sm.WLS(y, np.column_stack([matrix, added]), weights=w).fit()
    f, p, df = large.compare_f_test(small)
    found = added_columns(least_squares(matrix, y, weight), np.column_stack([added, added[:, 0]]))
    assert found == pytest.approx((f, df, large.df_resid, p), rel=1e-8)
    assert added_columns(least_squares(matrix, y, weight), matrix[:, :2]) is None


def test_nothing_is_checked_where_nothing_can_be():
    x = np.vstack([X[:5], X[6:9]])
    few = fit(make_study(x, {"y": RNG.standard_normal(8)}))["y"]
    assert few.df_residual < 3
    assert few.checks == ()
    assert fit(make_study(X, {"y": X[:, 0] * 2}))["y"].checks == ()
    assert fit(make_study(X, {"y": np.full(N, 2.0)}))["y"].checks == ()


def test_the_analysis_of_variance_adds_up_and_is_that_of_nested_fits():
    blocks = ["a"] * 24 + ["b"] * 24
    study = make_study(BIG, {"y": BIG @ [1, 2] + BIG[:, 0] ** 2 + NOISE}, blocks=blocks)
    model = fit(study)["y"]
    parts = {part.source: part for part in model.anova}
    assert list(parts) == [
        "blocks", "linear", "products", "squares", "residual", "lack of fit", "pure error", "total",
    ]  # fmt: skip
    explained = sum(parts[p].squares for p in ("blocks", "linear", "products", "squares"))
    assert explained + parts["residual"].squares == pytest.approx(parts["total"].squares)
    assert sum(p.df for p in model.anova[:5]) == parts["total"].df
    matrix = model_matrix(study, model.terms, np.arange(48))
    y = study.runs.measured[:, 0]
    names = [term.name for term in model.terms]
    kept = [i for i, name in enumerate(names) if "^2" not in name]
    whole, less = sm.OLS(y, matrix).fit(), sm.OLS(y, matrix[:, kept]).fit()
    assert parts["squares"].f == pytest.approx(whole.compare_f_test(less)[0])
    assert parts["squares"].p == pytest.approx(whole.compare_f_test(less)[1], rel=1e-8)
    assert parts["squares"].squares == pytest.approx(less.ssr - whole.ssr)


def test_the_power_of_the_lack_of_fit_test_is_as_said():
    model = fit(_study(X[:, 0] + np.random.default_rng(0).standard_normal(N)))["y"]
    lack = model.lack_of_fit
    sd = np.sqrt(lack.ss_pure / lack.df[1])
    rng, n = np.random.default_rng(1), 200_000
    # F with the numerator's mean square moved by the size that is said to be found
    shift = np.sqrt(lack.df[0]) * lack.found_size / sd
    top = (rng.standard_normal(n) + shift) ** 2 + rng.chisquare(lack.df[0] - 1, n)
    f = top / lack.df[0] / (rng.chisquare(lack.df[1], n) / lack.df[1])
    found = (f > stats.f(*lack.df).ppf(0.95)).mean()
    assert found == pytest.approx(0.8, abs=0.005)


def test_too_few_repeats_to_show_a_misfit_that_matters_are_named():
    y = X[:, 0] + np.random.default_rng(0).standard_normal(N)
    near = Limit(None, float(y.mean()) + 0.5, "batch")
    study = _study(y, limits={"y": near})
    assert any("no lack of fit is shown, but" in f.text for f in fit(study)["y"].findings)
    far = _study(y, limits={"y": Limit(None, 1e3, "batch")})
    assert not any("no lack of fit" in f.text for f in fit(far)["y"].findings)


def test_equations_in_own_units_give_the_fitted_values():
    level = np.arange(len(BIG)) % 2
    own = BIG * [5.0, 0.3] + [50.0, 2.0]
    study = make_study(
        own,
        {"y": 7 + NOISE + level * BIG[:, 0]},
        names=("speed", "dose"),
        low=(45.0, 1.7),
        high=(55.0, 2.3),
        categorical={"colour": (("red", "green"), level)},
    )
    dose = replace(study.factors[1], scale="log")
    study = replace(study, factors=(study.factors[0], dose, study.factors[2]))
    model = fit(study)["y"]
    for place, equation in enumerate(own_units(study, model)):
        assert equation.levels == {"colour": ("red", "green")[place]}
        for i in np.flatnonzero(level == place)[:6]:
            u, v = own[i, 0], np.log(own[i, 1])
            values = {
                "1": 1, "speed": u, "ln(dose)": v, "speed^2": u * u, "ln(dose)^2": v * v,
                "speed*ln(dose)": u * v,
            }  # fmt: skip
            got = sum(b * values[term] for term, b in equation.terms.items())
            assert got == pytest.approx(model.runs[i].fitted, rel=1e-9)
    assert to_coded(study.numeric, own[:1]).shape == (1, 2)


def test_a_formula_is_given_back_in_own_units():
    study = make_study(
        X * 3 + 10,
        {"y": np.arange(N) + 0.0},
        low=(7, 7),
        high=(13, 13),
        formulas={"cost": {(): 5.0, ("f0",): 2.0, ("f0", "f1"): -0.25}},
    )
    (equation,) = own_units(study, fit(study)["cost"])
    got = {term: value for term, value in equation.terms.items() if abs(value) > 1e-9}
    assert got == pytest.approx({"1": 5.0, "f0": 2.0, "f0*f1": -0.25})
