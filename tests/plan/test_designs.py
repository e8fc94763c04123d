"""Designs: what each option promises, built and measured; what cannot be is refused in words."""

from decimal import Decimal

import numpy as np
import pytest

from support.plans import design_of, draft, moments, plan_of
from wideberth.errors import InputError
from wideberth.plan.designs import axial_distance, build_design
from wideberth.plan.quality import directions
from wideberth.plan.settings import settable
from wideberth.study.coding import to_coded
from wideberth.study.records import NumericFactor, PlanChoice


def _unevenness(x, radius):
    inverse = np.linalg.inv(moments(x).T @ moments(x))
    rows = moments(radius * directions(x.shape[1]))
    values = np.einsum("nq,qr,nr->n", rows, inverse, rows)
    return np.ptp(values) / values.mean()


@pytest.mark.parametrize("k", range(2, 9))
def test_rotatable_designs_are_rotatable_and_others_are_not(k):
    for radius in (0.5, 1.0, 1.7):
        assert _unevenness(design_of(k).coded, radius) < 1e-12
    assert _unevenness(design_of(k, axial="face").coded, 1.0) > 1e-3
    # the corners' distance coincides where the core has k^2 runs
    same = len(design_of(k).coded[:, 0]) and (design_of(k).kind.count("factorial") == k * k)
    assert same == (k in {2, 4, 8})
    assert (_unevenness(design_of(k, axial="spherical").coded, 1.0) < 1e-12) == same


def test_spherical_differs_for_the_half_of_eight_factors():
    assert _unevenness(design_of(8, axial="spherical", core="half").coded, 1.0) > 1e-3


def test_quality_knows_rotatable_from_not():
    stated = {"step": None}
    assert plan_of(2, axial=2**0.5, stated=stated).quality.uneven < 1e-3
    assert plan_of(2, axial="face").quality.uneven > 0.1


@pytest.mark.parametrize("replicates", [1, 2, 3])
def test_replicates_keep_rotatability_and_orthogonal_blocks(replicates):
    x = design_of(3, replicates=replicates).coded
    assert _unevenness(x, 1.2) < 1e-12
    found = design_of(3, replicates=replicates, axial="orthogonal-blocks", blocks=3)
    matrix = moments(found.coded)
    means = [matrix[found.block == b].mean(axis=0) for b in range(3)]
    assert np.ptp(means, axis=0).max() < 1e-12
    assert found.kind.count("axial") == 6 * replicates


def test_unequal_centre_runs_move_the_orthogonal_distance():
    for centre in ((2, 5), (5, 2)):
        found = design_of(3, axial="orthogonal-blocks", blocks=2, centre_runs=centre)
        matrix = moments(found.coded)
        means = [matrix[found.block == b].mean(axis=0) for b in (0, 1)]
        assert np.ptp(means, axis=0).max() < 1e-12


@pytest.mark.parametrize("k", range(1, 9))
@pytest.mark.parametrize("blocks", [1, 2])
def test_enough_centre_runs_by_default(k, blocks):
    found = design_of(k, blocks=blocks)
    assert found.kind.count("centre") >= 5
    for b in range(blocks):
        in_block = [kind for kind, at in zip(found.kind, found.block, strict=True) if at == b]
        assert in_block.count("centre") >= 2
    assert any("centre runs" in text for text in found.said)


def test_factorial_blocks_leave_factors_and_products_of_two_alone():
    found = design_of(5, design="two-level", core="full", blocks=4)
    matrix = moments(found.coded)[:, [*range(1, 6), *range(11, 21)]]
    for b in range(4):
        assert np.abs(matrix[found.block == b].sum(axis=0)).max() == 0.0


def test_categorical_factors_repeat_the_whole_design_in_each_block():
    study = draft(2, categorical={"lot": (["a", "b", "c"], [0])})
    found = build_design(study, PlanChoice(blocks=2))
    one = design_of(2, blocks=2)
    assert len(found.coded) == 3 * len(one.coded)
    for level in range(3):
        here = found.levels[:, 0] == level
        assert np.array_equal(found.coded[here], one.coded)
        assert np.array_equal(found.block[here], one.block)


@pytest.mark.parametrize(
    ("k", "choice", "what", "mend"),
    [
        (2, {"design": "box-behnken"}, "for 3 to 7 numeric factors; the study has 2", "optimal"),
        (9, {}, "for 1 to 8 numeric factors; the study has 9", "optimal"),
        (6, {"core": "quarter"}, "resolution IV", "core = 'half'"),
        (4, {"core": "half"}, "resolution IV", "core = 'full'"),
        (2, {"core": "half"}, "no half fraction", "larger core"),
        (3, {"axial": "orthogonal-blocks"}, "stands in one block", "blocks = 2"),
        (3, {"blocks": 4}, "does not divide into 4 blocks", "use 2 or 3"),
        (5, {"blocks": 3}, "does not divide into 3 blocks", "use 2"),
        (2, {"design": "two-level", "blocks": 4}, "does not divide into 4 blocks", "use 1 or 2"),
        (3, {"design": "box-behnken", "blocks": 2}, "does not divide into 2 blocks", "use 1"),
        (4, {"design": "box-behnken", "blocks": 2}, "does not divide into 2 blocks", "use 1 or 3"),
    ],
)
def test_designs_that_do_not_exist_are_refused_with_what_does(k, choice, what, mend):
    with pytest.raises(InputError) as caught:
        design_of(k, **choice)
    (fault,) = caught.value.faults
    assert what in fault.what
    assert mend in fault.mend


def test_one_factor():
    found = design_of(1)
    assert sorted(found.coded[:, 0]) == pytest.approx(
        sorted([-1, 1, -(2**0.25), 2**0.25, 0, 0, 0, 0, 0])
    )


def test_shrinking_keeps_the_shape():
    whole, half = design_of(3), design_of(3, shrink=0.5)
    assert np.allclose(half.coded, whole.coded / 2)
    assert _unevenness(half.coded, 0.5) < 1e-12


def _factor(**stated):
    return NumericFactor("a", "u", **{"low": 0.8, "high": 1.6, **stated})


@pytest.mark.parametrize(
    ("factor", "coded", "actual"),
    [
        (_factor(), 1.0, 1.6),
        (_factor(), 0.0, 1.2),
        (_factor(), 2**0.5, 1.7657),
        (_factor(settable_step=Decimal("0.05")), 2**0.5, 1.75),
        (_factor(settable_step=Decimal("0.05"), allowed=(0.5, 1.7657)), 2**0.5, 1.75),
        # the nearest step lies outside what is allowed, the setting itself does not
        (_factor(settable_step=Decimal("0.1"), allowed=(0.5, 1.77)), 2**0.5, 1.7),
        # a setting that is outside anyway is not moved in: the check must see it
        (_factor(settable_step=Decimal("0.1"), allowed=(0.5, 1.7)), 2**0.5, 1.8),
        (_factor(low=1e-3, high=1e-1, scale="log"), 0.0, 1e-2),
        (_factor(low=1e-3, high=1e-1, scale="log"), -(2**0.5), 0.0003853),
    ],
)
def test_settings_can_be_dialled_in(factor, coded, actual):
    found = settable((factor,), np.array([[coded]]))
    assert found[0, 0] == pytest.approx(actual, rel=1e-12)


def test_steps_that_swallow_a_setting_are_refused():
    with pytest.raises(InputError) as caught:
        plan_of(2, stated={"step": "1"})
    assert "different settings of f0" in caught.value.faults[0].what
    assert len(caught.value.faults) == 2


def test_what_rounding_costs_is_the_ratio_of_the_variances():
    plan = plan_of(2, stated={"step": "0.25"})
    assert plan.rounding.moved == 4
    assert plan.rounding.largest_coded == pytest.approx(1.5 - 2**0.5)
    assert 0.8 < plan.rounding.ratio < 1.0
    assert plan_of(2, axial=1.5, stated={"step": "0.25"}).rounding.ratio is None


def test_log_factors_are_spaced_evenly_in_the_logarithm():
    study = draft(2, low=[1.0, 1.0], high=[100.0, 4.0])
    factors = tuple(
        NumericFactor(f.name, f.unit, f.low, f.high, scale="log") for f in study.numeric
    )
    coded = design_of(2).coded
    assert to_coded(factors, settable(factors, coded)) == pytest.approx(coded, abs=1e-3)


def test_the_distance_is_a_number_when_a_number_is_stated():
    assert axial_distance(1.3, 3, n_core=8, n_axial=6) == 1.3
    assert design_of(3, axial=1.3).axial_distance == 1.3
