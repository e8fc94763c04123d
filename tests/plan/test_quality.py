"""What a plan is said to be worth, by other routes: simulation, plain algebra, tables."""

import numpy as np
import pytest
from scipy import stats

from support.plans import design_of, moments, plan_of
from wideberth.plan.model import planned_model
from wideberth.plan.quality import detectable_change, even_settings, plan_region
from wideberth.study.records import Limit


def test_variances_and_leverages_are_those_of_the_model_matrix():
    plan = plan_of(2)
    x = np.array([run.coded for run in plan.runs])
    inverse = np.linalg.inv(moments(x).T @ moments(x))
    hat = np.einsum("nq,qr,nr->n", moments(x), inverse, moments(x))
    assert plan.quality.largest_leverage == pytest.approx(hat.max())
    at = np.array([[0.3, -0.7], [1.0, 1.0]])
    expected = np.einsum("nq,qr,nr->n", moments(at), inverse, moments(at))
    assert planned_model(plan.fitted, 2).variance(at, ()) == pytest.approx(expected)
    spheres = plan.quality.spheres
    assert spheres.radius[-1] == pytest.approx(np.sqrt(2), abs=1e-3)
    assert spheres.mean[0] == pytest.approx(13 * inverse[0, 0])


@pytest.mark.parametrize(("k", "axial"), [(2, "rotatable"), (3, "face"), (4, "rotatable")])
def test_the_region_is_sampled_evenly(k, axial):
    plan = plan_of(k, axial=axial)
    region = plan_region(plan.fitted)
    x = even_settings(region)
    low, high = -region.bounds[:k], region.bounds[k : 2 * k]
    sample = np.random.default_rng(0).uniform(low, high, (200_000, k))
    away = sample - region.centre
    sample = sample[np.einsum("ni,ij,nj->n", away, region.shape, away) <= 1]
    assert len(x) >= 500
    assert x.mean(axis=0) == pytest.approx(np.zeros(k), abs=0.03)
    assert (x**2).mean(axis=0) == pytest.approx((sample**2).mean(axis=0), rel=0.04)
    levels = plan.quality.variance_levels
    assert (np.diff(levels) >= 0).all()
    inside = planned_model(plan.fitted, 2).variance(sample[:20_000], ())
    assert np.quantile(levels, 0.5) == pytest.approx(np.quantile(inside, 0.5), rel=0.03)


def test_degrees_of_freedom_in_blocks():
    # three blocks: 4 + 2, 4 + 2 and 6 + 2 runs; ten terms and two block contrasts
    plan = plan_of(3, axial="orthogonal-blocks", blocks=3)
    quality = plan.quality
    assert (quality.n_runs, quality.n_terms) == (20, 12)
    assert quality.df_pure == 3
    assert quality.df_lack == 20 - 12 - 3
    assert quality.block_coupling < 1e-3
    assert plan_of(3, axial="face", blocks=3).quality.block_coupling > 0.05


def test_aliases_are_told_and_left_out():
    plan = plan_of(3, design="two-level", core="half", centre_runs=(3, 3))
    named = plan.quality.aliases
    for names in ("f0, f1*f2", "f1, f0*f2", "f2, f0*f1", "f0^2, f1^2, f2^2"):
        assert names in named
    assert plan.quality.n_terms == 4


@pytest.mark.parametrize(("variance", "df"), [(0.25, 4), (1.0, 1), (0.04, 30)])
def test_the_detectable_change_is_found_in_80_of_100(variance, df):
    change = detectable_change(variance, df)
    rng = np.random.default_rng(7)
    n = 200_000
    z = rng.normal(change, np.sqrt(variance), n)
    s = np.sqrt(rng.chisquare(df, n) / df)
    t = stats.t.ppf(0.975, df)
    found = np.mean(np.abs(z) > t * s * np.sqrt(variance))
    assert found == pytest.approx(0.8, abs=0.004)


def test_no_test_without_degrees_of_freedom():
    assert detectable_change(1.0, 0) is None


def test_two_level_runs_see_curvature_as_the_centre_against_the_corners():
    plan = plan_of(3, design="two-level", centre_runs=(4, 4))
    # the mean of eight corners against that of four centre runs; 12 - 7 - 1 terms are left
    expected = detectable_change(1 / 8 + 1 / 4, plan.quality.df_lack + plan.quality.df_pure)
    assert plan.quality.detectable.curvature == pytest.approx(expected)
    effect = detectable_change(4 / 8 * 8 / 8, plan.quality.df_lack + plan.quality.df_pure)
    assert plan.quality.detectable.effect == pytest.approx(effect)


def test_how_close_a_share_guard_can_come_holds_in_simulation():
    limit = Limit(None, 10.0, "share", 0.95, 0.9, "fixed")
    plan = plan_of(2, stated={"limits": {"y": limit}})
    (one,) = plan.quality.provable
    x = np.array([run.coded for run in plan.runs])
    hat = np.linalg.inv(moments(x).T @ moments(x))
    region = even_settings(plan_region(plan.fitted))
    leverage = np.einsum("nq,qr,nr->n", moments(region), hat, moments(region)).min()
    rng = np.random.default_rng(3)
    n, df = 200_000, len(x) - 6
    mean = rng.normal(0, np.sqrt(leverage), n)
    s = np.sqrt(rng.chisquare(df, n) / df)
    covered = np.mean(mean + one.distance * s >= stats.norm.ppf(0.9))
    assert covered == pytest.approx(0.95, abs=0.003)
    chosen = Limit(None, 10.0, "share", 0.95, 0.9, "chosen")
    assert plan_of(2, stated={"limits": {"y": chosen}}).quality.provable[0].distance > one.distance


def test_designs_named_so_are_uneven_as_they_should_be():
    assert plan_of(3, axial="rotatable").quality.uneven < 2e-3
    assert plan_of(3, axial="spherical").quality.uneven > 5e-3
    assert len(design_of(3, axial="spherical").coded) == 19
