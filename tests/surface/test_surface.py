"""The explored region, canonical form with its intervals, and the ridge path."""

import cvxpy as cp
import numpy as np
import pytest
from scipy import stats

from support.build import central_composite, less, make_study, more
from wideberth.errors import RefusedError
from wideberth.fit.models import fit
from wideberth.fit.records import surface
from wideberth.quadratic.ellipsoid import smallest_ellipsoid
from wideberth.study.records import Constraint
from wideberth.surface.canonical import canonical
from wideberth.surface.explored import contains, depth, explored_region, factor_ranges
from wideberth.surface.ridge import shape


@pytest.mark.parametrize("k", [1, 2, 3, 5, 8])
def test_smallest_ellipsoid_against_the_convex_problem(k):
    points = np.random.default_rng(k).standard_normal((3 * k + 5, k))
    centre, form = smallest_ellipsoid(points)
    away = points - centre
    assert np.einsum("ni,ij,nj->n", away, form, away).max() <= 1.0
    root, shift = cp.Variable((k, k), PSD=True), cp.Variable(k)
    held = [cp.norm(root @ point - shift) <= 1 for point in points]
    problem = cp.Problem(cp.Maximize(cp.log_det(root)), held)
    problem.solve(solver="CLARABEL")
    assert np.linalg.slogdet(form)[1] / 2 == pytest.approx(problem.value, abs=1e-6)


@pytest.mark.parametrize("k", [2, 3, 4])
def test_a_rotatable_design_explores_a_ball(k):
    x = central_composite(k)
    region = explored_region(make_study(x, {"y": np.arange(len(x))}))
    far = (x**2).sum(axis=1).max()
    assert region.shape == pytest.approx(np.eye(k) / far, abs=1e-6)
    assert contains(region, x).all()
    assert not contains(region, np.full(k, np.sqrt(far / k) * 1.001))
    assert depth(region, np.zeros(k)) == pytest.approx(1.0)
    low, high = factor_ranges(region)
    assert high == pytest.approx(np.full(k, np.abs(x).max()), rel=1e-6)
    assert low == pytest.approx(-high, rel=1e-6)


def test_corners_explore_the_box():
    x = central_composite(3, alpha=1.0)
    region = explored_region(make_study(x, {"y": np.arange(len(x))}))
    assert contains(region, np.array([1.0, -1.0, 1.0]))
    assert not contains(region, np.array([1.01, 0.0, 0.0]))


def test_allowed_and_constraints_cut_the_region():
    x = central_composite(2)
    study = make_study(
        x,
        {"y": np.arange(12)},
        allowed={"f0": (-0.5, 9.0)},
        constraints=(Constraint("sum", {"f0": 1.0, "f1": 1.0}, at_most=1.0),),
    )
    region = explored_region(study)
    assert contains(region, np.array([0.5, 0.5]))
    assert not contains(region, np.array([0.6, 0.5]))
    assert not contains(region, np.array([-0.6, 0.0]))
    assert region.high[0] == pytest.approx(np.sqrt(2))
    with pytest.raises(RefusedError, match="f0"):
        explored_region(make_study(x, {"y": np.arange(12)}, allowed={"f0": (5.0, 9.0)}))


def test_directions_that_were_never_run_stay_fixed():
    x = np.column_stack([central_composite(2), np.full(12, 0.3)])
    region = explored_region(make_study(x, {"y": np.arange(12)}))
    assert region.basis.shape == (3, 2)
    assert contains(region, np.array([0.2, 0.2, 0.3]))
    assert not contains(region, np.array([0.2, 0.2, 0.31]))
    together = np.column_stack([central_composite(2), central_composite(2)[:, 0]])
    region = explored_region(make_study(together, {"y": np.arange(12)}))
    assert contains(region, np.array([0.5, 0.1, 0.5]))
    assert not contains(region, np.array([0.5, 0.1, 0.4]))


def test_intervals_of_eigenvalues_cover_in_simulation():
    rng = np.random.default_rng(7)
    x = central_composite(2, n_centre=5)
    truth = 10 - 3.0 * x[:, 0] ** 2 - 1.0 * x[:, 1] ** 2
    inside, n_studies = 0, 600
    for _ in range(n_studies):
        models = fit(make_study(x, {"y": truth + 0.3 * rng.standard_normal(len(x))}))
        form = canonical(surface(models.models[0], models.study), 2)
        inside += abs(form.values[0] + 3.0) <= form.half_widths[0]
    assert abs(inside / n_studies - 0.95) <= 3 * np.sqrt(0.95 * 0.05 / n_studies)


@pytest.mark.parametrize(
    ("signs", "nature"),
    [((-1, -1), "maximum"), ((1, 1), "minimum"), ((1, -1), "saddle"), ((-1, 0), "ridge")],
)
def test_nature_in_words(signs, nature):
    x = central_composite(2, n_centre=5)
    y = 10 + x[:, 0] + 4 * (x**2) @ np.array(signs, float)
    y = y + 0.05 * np.random.default_rng(3).standard_normal(len(x))
    (one,) = shape(fit(make_study(x, {"y": y})))
    assert one.nature == nature
    if nature == "ridge":
        assert "open" in one.sentence


def test_a_plane_has_no_stationary_point():
    x = central_composite(2)
    study = make_study(x, {}, formulas={"cost": {(): 3.0, ("f0",): 2.0}})
    (one,) = shape(fit(study))
    assert one.nature == "plane"
    assert one.stationary is None
    assert one.reason
    assert one.ridge[-1].coded["f0"] == pytest.approx(one.ridge[-1].radius)


def test_ridge_path_with_its_standard_errors():
    x = central_composite(2, n_centre=5)
    y = 10 + x[:, 0] - x[:, 1] ** 2 + 0.1 * np.random.default_rng(0).standard_normal(13)
    models = fit(make_study(x, {"y": y}, goals={"y": less(12.0, 8.0)}))
    (one,) = shape(models, radii=[0.0, 1.0, 2.0])
    assert one.toward == "less"
    assert [point.explored for point in one.ridge] == [True, True, False]
    for point in one.ridge:
        place = np.array(list(point.coded.values()))
        assert np.sqrt(place @ place) == pytest.approx(point.radius)
    model = models.models[0]
    terms = np.array([1, *place, *place**2, place.prod()])[[t.monomial for t in model.terms]]
    se = model.s * np.sqrt(terms @ model.covariance @ terms)
    assert one.ridge[-1].se == pytest.approx(se)
    (other,) = shape(models, radii=[1.0], toward="more")
    assert other.ridge[0].mean > one.ridge[1].mean
    with pytest.raises(RefusedError):
        shape(models, radii=[-1.0])


def test_by_combination_of_levels():
    x = np.tile(central_composite(2), (2, 1))
    level = np.repeat([0, 1], 12)
    y = x[:, 0] * (1 - 2 * level) + 0.1 * np.random.default_rng(0).standard_normal(24)
    study = make_study(x, {"y": y}, goals={"y": more(-1, 1)}, categorical={"c": ("ab", level)})
    shapes = shape(fit(study))
    assert [one.levels["c"] for one in shapes] == ["a", "b"]
    assert shapes[0].ridge[-1].coded["f0"] > 0 > shapes[1].ridge[-1].coded["f0"]


def test_quantile_used_is_student_t():
    x = central_composite(2, n_centre=5)
    y = 10 - 3 * x[:, 0] ** 2 + 0.3 * np.random.default_rng(0).standard_normal(13)
    models = fit(make_study(x, {"y": y}))
    model = models.models[0]
    form = canonical(surface(model, models.study), 2)
    weights = np.zeros(6)
    v = form.directions[0]
    for i, term in enumerate(model.terms):
        weights[i] = {"f0^2": v[0] ** 2, "f1^2": v[1] ** 2, "f0*f1": v[0] * v[1]}.get(term.name, 0)
    se = model.s * np.sqrt(weights @ model.covariance @ weights)
    assert form.half_widths[0] == pytest.approx(stats.t.ppf(0.975, model.df_residual) * se)
