"""Designs and data at the edge: what is fitted, what is said, what is refused."""

from itertools import product

import numpy as np
import pytest

from support.build import central_composite, make_study, small_composite
from wideberth.errors import RefusedError
from wideberth.fit.models import fit
from wideberth.study.records import Limit

RNG = np.random.default_rng(8)


def _texts(model):
    return " ".join(finding.text for finding in model.findings)


def test_one_factor():
    x = np.array([[-1.0], [-1.0], [0.0], [0.0], [1.0], [1.0]])
    model = fit(make_study(x, {"y": 2 + x[:, 0] + 0.1 * RNG.standard_normal(6)})).models[0]
    assert [term.name for term in model.terms] == ["1", "f0", "f0^2"]
    assert model.df_residual == 3


def test_eight_factors():
    x = small_composite(8)
    model = fit(make_study(x, {"y": x[:, 0] + RNG.standard_normal(len(x))})).models[0]
    assert len(model.terms) == 45
    assert model.df_residual == len(x) - 45


def test_constant_response():
    x = central_composite(2)
    model = fit(make_study(x, {"y": np.full(len(x), 3.5)})).models[0]
    assert model.grade == "look"
    assert model.s == 0.0
    assert model.r2 is None
    assert model.press is None
    assert "same" in model.reasons["press"]
    assert model.coefficients == pytest.approx([3.5, 0, 0, 0, 0, 0], abs=1e-12)


def test_saturated_design():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 4, 5, 8]]
    model = fit(make_study(x, {"y": RNG.standard_normal(6)}, orders={"y": 2})).models[0]
    assert model.df_residual == 0
    assert model.s is None
    assert "degrees of freedom" in model.reasons["r2_adjusted"]
    assert "leverage 1" in model.reasons["press"]
    assert model.grade == "look"


def test_noise_free_data_are_never_unsupported():
    x = central_composite(2)
    y = 1e4 + 3 * x[:, 0] - x[:, 1] ** 2
    model = fit(make_study(x, {"y": y}, limits={"y": Limit(1e4, None, "batch")})).models[0]
    assert model.noise_free
    assert model.s == 0.0
    assert model.lack_of_fit is None
    assert model.grade == "look"


def test_two_levels_and_centre_fall_back_and_say_so():
    x = np.array([*product((-1.0, 1.0), repeat=3), (0, 0, 0), (0, 0, 0), (0, 0, 0)])
    model = fit(make_study(x, {"y": RNG.standard_normal(11)})).models[0]
    assert not any("^2" in term.name for term in model.terms)
    assert any(term.name == "f0*f1" for term in model.terms)
    assert "cannot tell apart" in _texts(model)
    assert "f0^2" in _texts(model)


def test_a_stated_order_that_the_runs_cannot_support_is_refused():
    x = np.array([*product((-1.0, 1.0), repeat=2), (0, 0), (0, 0)])
    with pytest.raises(RefusedError) as caught:
        fit(make_study(x, {"y": RNG.standard_normal(6)}, orders={"y": 2}))
    (fault,) = caught.value.faults
    assert "f1^2 and f0^2" in fault.what
    assert "order" in fault.mend


def test_a_factor_that_never_moved_is_left_out():
    x = np.column_stack([central_composite(2), np.zeros(12)])
    model = fit(make_study(x, {"y": x[:, 0] + RNG.standard_normal(12)})).models[0]
    assert "f2 never moved" in _texts(model)
    assert not any("f2" in term.name for term in model.terms)


def test_factors_that_moved_together_count_once():
    x = central_composite(2)
    x = np.column_stack([x, x[:, 0]])
    model = fit(make_study(x, {"y": x[:, 0] + RNG.standard_normal(12)})).models[0]
    assert "f2 moved together with f0" in _texts(model)
    assert [t.name for t in model.terms] == ["1", "f0", "f1", "f0^2", "f1^2", "f0*f1"]


def test_a_factor_confounded_with_blocks_must_not_be_used():
    x = np.column_stack([np.repeat([-1.0, 1.0], 6), np.tile([-1.0, 0.0, 1.0], 4)])
    blocks = ["a"] * 6 + ["b"] * 6
    model = fit(make_study(x, {"y": RNG.standard_normal(12)}, blocks=blocks)).models[0]
    assert model.grade == "do not use"


def test_confirmation_and_failed_runs_are_never_fitted():
    x = np.concatenate([central_composite(2), [[0.5, 0.5], [0.1, 0.1]]])
    y = np.concatenate([RNG.standard_normal(12), [1e6, 1e6]])
    kinds = ["factorial"] * 12 + ["confirm", "failed"]
    model = fit(make_study(x, {"y": y}, kinds=kinds)).models[0]
    assert model.n_runs == 12
    assert abs(model.coefficients).max() < 100


def test_exact_formula_in_own_units():
    x = central_composite(2) * [2.0, 5.0] + [10.0, 40.0]
    terms = {(): 7.0, ("a",): 2.0, ("b", "b"): 0.5, ("a", "b"): -0.25}
    study = make_study(
        x,
        {"y": RNG.standard_normal(12)},
        names=("a", "b"),
        low=(8, 35),
        high=(12, 45),
        formulas={"cost": terms},
    )
    cost = fit(study)["cost"]
    coded = {row.term: row.coded for row in cost.table}
    a, b = 10 + 2 * 0.3, 40 + 5 * -0.6
    here = sum(
        coded[t] * v
        for t, v in {"1": 1, "a": 0.3, "b": -0.6, "a^2": 0.09, "b^2": 0.36, "a*b": -0.18}.items()
    )
    assert here == pytest.approx(7 + 2 * a + 0.5 * b * b - 0.25 * a * b, rel=1e-12)
    assert cost.exact


def test_lack_of_fit_as_large_as_the_distance_to_the_limit():
    x = np.repeat(central_composite(2, n_centre=1), 2, axis=0)
    bump = 6 * x[:, 0] ** 3
    y = 50 - 8 * x[:, 0] + bump + 0.05 * RNG.standard_normal(len(x))
    near = fit(make_study(x, {"y": y}, limits={"y": Limit(None, 50.5, "batch")})).models[0]
    far = fit(make_study(x, {"y": y}, limits={"y": Limit(None, 90.0, "batch")})).models[0]
    free = fit(make_study(x, {"y": y}, limits={"y": Limit(None, 50.5, "none")})).models[0]
    assert near.lack_of_fit.p < 0.05
    lack = [f.grade for f in near.findings if "repeated runs" in f.text]
    assert lack == ["do not use"]
    for model in (far, free):
        assert [f.grade for f in model.findings if "repeated runs" in f.text] == ["look"]


def test_an_outlier_is_named_by_its_row():
    x = central_composite(2, n_centre=5)
    y = x @ [1.0, 2.0] + 0.05 * np.random.default_rng(1).standard_normal(len(x))
    y[9] += 3
    assert "row 11" in _texts(fit(make_study(x, {"y": y})).models[0])
