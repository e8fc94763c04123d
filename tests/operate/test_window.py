"""The window: nothing inside breaks anything, nothing much wider holds, none is an answer."""

from itertools import product

import numpy as np
import pytest
from scipy import stats

from support.brute import second_order
from support.build import central_composite, make_study, more
from wideberth.decide.problem import arena
from wideberth.decide.recommend import solve
from wideberth.errors import RefusedError
from wideberth.fit.models import fit
from wideberth.operate.window import window, window_around
from wideberth.study.coding import to_coded
from wideberth.study.reading import read_study
from wideberth.study.records import Constraint, Limit

GUARDS = ("batch", "share", "mean", "none")
N_SETTINGS = 1_000_000


def _study(seed):
    """1 to 5 factors, two or three limits with all kinds of guards, often a tolerance."""
    rng = np.random.default_rng(seed)
    k = 1 + seed % 5
    x = central_composite(k, n_centre=6)
    f = second_order(x)
    curved = np.r_[0.0, np.full(k, 3.0), np.full(f.shape[1] - 1 - k, 1.2)]
    values, limits = {}, {}
    for j in range(3):
        values[f"y{j}"] = 50 + f @ (curved * rng.standard_normal(len(curved)))
        values[f"y{j}"] += 0.5 * rng.standard_normal(len(x))
        spread = np.ptp(values[f"y{j}"])
        if j < 2:
            guard = GUARDS[(seed // 5 + j) % 4]
            limits[f"y{j}"] = Limit(
                None if j else 50 - 0.5 * spread - 4, 50 + 0.4 * spread + 4, guard, 0.95, 0.9
            )
    goals = {"y2": more(20.0, 120.0)}
    tolerance = (None, 0.05, 0.1)[seed % 3]
    return make_study(x, values, goals=goals, limits=limits, tolerance=tolerance)


def _worst_slack(models, choice, x):
    """The smallest slack over all limits, in the response's unit, and of the region; (n,) each.

    Written anew from the definitions with scipy's distributions.
    """
    runs = models.study.runs.numeric_actual
    ball = (runs**2).sum(axis=1).max() * (1 + 1e-9) - (x**2).sum(axis=1)
    f = second_order(x)
    worst = np.full(len(x), np.inf)
    for verdict in choice.limits:
        model = models[verdict.response]
        place = np.argsort([term.monomial for term in model.terms])
        beta, cov = model.coefficients[place], model.covariance[np.ix_(place, place)]
        limit = next(r.limit for r in models.study.responses if r.name == verdict.response)
        n_sides = sum(v.guard == "share" for v in choice.limits)
        h = np.einsum("np,np->n", f @ cov, f)
        reach = verdict.factor * model.s * _factor(limit, model.df_residual, h, n_sides)
        slack = verdict.value - f @ beta if verdict.side == "high" else f @ beta - verdict.value
        worst = np.minimum(worst, (slack - reach) / model.s)
    return worst, ball


def _factor(limit, df, h, n_sides):
    if limit.guard == "none":
        return 0.0
    if limit.guard == "share":
        confidence = 1 - (1 - limit.confidence) / n_sides
        grid = np.linspace(h.min() * 0.999, h.max() * 1.001, 2000)
        z = stats.norm.ppf(limit.share)
        exact = np.sqrt(grid) * stats.nct.ppf(confidence, df, z / np.sqrt(grid))
        return np.interp(h, grid, exact)
    t = stats.t.ppf(limit.confidence, df)
    return t * np.sqrt(h if limit.guard == "mean" else 1 + h)


@pytest.mark.parametrize("seed", range(60))
def test_no_setting_inside_breaks_anything(seed):
    models = fit(_study(seed))
    problem, choice = solve(models)
    box = window_around(problem, choice)
    if choice.status != "met":
        assert box.status == "none"
        assert box.must_give
        return
    assert box.status == "proven"
    rng = np.random.default_rng(seed)
    low, high = (np.array(ends) for ends in zip(*box.ranges.values(), strict=True))
    corners = np.array(list(product(*zip(low, high, strict=True))))
    faces = rng.uniform(low, high, (20_000, len(low)))
    ends = np.where(rng.random(faces.shape) < 0.5, low, high)
    faces = np.where(rng.random(faces.shape) < 0.5, ends, faces)
    n = N_SETTINGS if seed % 12 == 0 else 50_000
    for settings in (corners, faces, rng.uniform(low, high, (n, len(low)))):
        worst, ball = _worst_slack(models, choice, settings)
        assert worst.min() >= -1e-6
        assert ball.min() >= -1e-6
    setpoint = np.array(list(choice.setpoint.values()))
    room = models.study.numeric[0].tolerance or 0.0
    assert (low <= setpoint - room + 1e-9).all()
    assert (high >= setpoint + room - 1e-9).all()


def test_most_random_problems_have_a_window_to_test():
    met = sum(solve(fit(_study(seed)))[1].status == "met" for seed in range(0, 60, 4))
    assert met >= 12


@pytest.mark.parametrize("seed", [0, 1, 2, 6, 7, 11, 12])
def test_no_much_larger_box_is_found_by_random_search(seed):
    models = fit(_study(seed))
    problem, choice = solve(models)
    box = window_around(problem, choice)
    rng = np.random.default_rng(seed)
    low, high = (np.array(ends) for ends in zip(*box.ranges.values(), strict=True))
    x = np.array(list(choice.setpoint.values()))
    room = models.study.numeric[0].tolerance or 0.0
    best, k = np.log(high - low).sum(), len(x)
    reach = np.abs(models.study.runs.numeric_actual).max()
    pattern = rng.random((400, k))
    pattern = np.concatenate([pattern, rng.integers(0, 2, (400, k)).astype(float)])
    for trial in range(400):
        wide = 0.4 if trial < 200 else 0.05
        below = np.maximum(low - wide * rng.normal(size=k), -reach)
        above = np.minimum(high + wide * rng.normal(size=k), reach)
        below, above = np.minimum(below, x - room), np.maximum(above, x + room)
        if np.prod(above - below) <= 1.02 * np.exp(best):
            continue
        worst, ball = _worst_slack(models, choice, below + pattern * (above - below))
        assert min(worst.min(), ball.min()) < 0, trial


def test_a_setting_whose_room_breaks_a_limit_has_no_window():
    models = fit(read_study("studies/process/hydrogenation"))
    box = window(models, at={"catalyst": 1.48, "pressure": 9.8, "substrate": 140.0})
    assert box.status == "none"
    assert box.ranges == {}
    assert any("heat_rate at most 45 W/kg is broken by" in text for text in box.must_give)


def test_the_demo_window_is_stopped_by_named_limits_and_lies_on_steps():
    models = fit(read_study("studies/process/hydrogenation"))
    box = window(models)
    assert box.status == "proven"
    assert box.stopped_by["catalyst"].high == "heat_rate high"
    assert box.stopped_by["catalyst"].low == "hydroxylamine high"
    for name, step in {"catalyst": 0.02, "pressure": 0.1, "substrate": 1.0}.items():
        low, high = box.settable[name]
        assert box.ranges[name][0] - 1e-9 <= low
        assert high <= box.ranges[name][1] + 1e-9
        assert low / step == pytest.approx(round(low / step))
        assert high / step == pytest.approx(round(high / step))
        alone = box.singly[name]
        assert alone[0] <= box.setting[name] <= alone[1]
    assert 0 < box.relative_volume < 1


def test_ranges_taken_alone_are_at_least_as_wide_and_do_not_hold_together():
    models = fit(read_study("studies/process/hydrogenation"))
    problem, choice = solve(models)
    box = window_around(problem, choice)
    corner = {name: ends[1] for name, ends in box.singly.items()}
    worst = window_around(*solve(models, at=corner))
    assert worst.status == "none"
    for name, (low, high) in box.singly.items():
        rest = dict(choice.setpoint)
        for end in (low, high):
            rest[name] = end
            judged = solve(models, at=rest, room=False)[1]
            assert all(limit.met for limit in judged.limits)


def test_constraints_and_allowed_ranges_bound_the_window():
    rng = np.random.default_rng(0)
    x = central_composite(2, n_centre=5)
    y = 20 - (x**2).sum(axis=1) + 0.2 * rng.standard_normal(len(x))
    study = make_study(
        x,
        {"y": y},
        goals={"y": more(5, 21)},
        limits={"y": Limit(12.0, None, "batch")},
        allowed={"f0": (-0.5, 0.6)},
        constraints=[Constraint("sum", {"f0": 1.0, "f1": 1.0}, 0.7, None)],
        tolerance=0.05,
    )
    box = window(fit(study))
    assert box.status == "proven"
    assert box.ranges["f0"][0] == pytest.approx(-0.5, abs=1e-6)
    assert box.ranges["f0"][1] + box.ranges["f1"][1] <= 0.7 + 1e-9
    assert box.stopped_by["f0"].low == "low of f0"
    assert "sum" in (box.stopped_by["f0"].high, box.stopped_by["f1"].high)


def test_a_factor_that_never_moved_has_no_width():
    rng = np.random.default_rng(0)
    x = np.column_stack([central_composite(1, n_centre=8), np.full(12, 0.3)])
    y = 20 - x[:, 0] ** 2 + 0.2 * rng.standard_normal(12)
    study = make_study(
        x, {"y": y}, goals={"y": more(5, 21)}, limits={"y": Limit(15.0, None, "batch")}
    )
    box = window(fit(study))
    assert box.status == "proven"
    assert box.ranges["f1"] == pytest.approx((0.3, 0.3))
    assert box.stopped_by["f1"].low == "never varied on its own"
    assert box.ranges["f0"][1] - box.ranges["f0"][0] > 0.5


def test_without_limits_the_region_alone_bounds_the_window():
    x = central_composite(2, n_centre=5)
    rng = np.random.default_rng(0)
    y = 20 - (x**2).sum(axis=1) + 0.2 * rng.standard_normal(len(x))
    box = window(fit(make_study(x, {"y": y}, goals={"y": more(5, 21)})))
    assert box.status == "proven"
    # the largest box in a disc of radius sqrt 2 is the square of half-width 1
    for ends in box.ranges.values():
        assert ends == pytest.approx((-1.0, 1.0), abs=0.02)


def test_a_saturated_study_can_claim_no_window():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 3, 4, 8]]
    y = np.array([1.0, 2.0, 3.0, 5.0, 4.0, 2.5])
    study = make_study(
        x, {"y": y}, goals={"y": more(0, 6)}, limits={"y": Limit(1.5, None, "batch")}
    )
    box = window(fit(study))
    assert box.status == "none"
    assert "degrees of freedom" in box.must_give[0]


def test_a_range_that_is_asked_for_is_proven_or_refuted_by_a_setting_inside():
    models = fit(read_study("studies/process/hydrogenation"))
    problem, choice = solve(models)
    good = window_around(problem, choice, hold={"pressure": (8.0, 10.0)})
    assert good.status == "proven"
    assert good.ranges["pressure"] == pytest.approx((8.0, 10.0))
    assert good.stopped_by["pressure"].low == "the range asked for"
    rows = arena(problem, (), "simultaneous")
    rng = np.random.default_rng(0)
    low, high = np.array(list(good.ranges.values())).T
    inside = to_coded(problem.study.numeric, rng.uniform(low, high, (50_000, 3)))
    assert min(row.value(inside).min() for row in rows.hard) >= -1e-9
    bad = window_around(problem, choice, hold={"pressure": (8.0, 12.0)})
    assert bad.status == "none"
    assert 8.0 <= bad.counterexample["pressure"] <= 12.0
    place = to_coded(problem.study.numeric, np.array(list(bad.counterexample.values())))
    assert min(float(row.value(place)) for row in rows.hard) < 0


@pytest.mark.parametrize(
    ("hold", "what"),
    [
        ({"pH": (1.0, 2.0)}, "no numeric factor"),
        ({"pressure": (10.0, 8.0)}, "no range"),
        ({"pressure": (8.0, float("nan"))}, "no range"),
    ],
)
def test_a_range_that_cannot_be_read_is_refused(hold, what):
    models = fit(read_study("studies/process/hydrogenation"))
    with pytest.raises(RefusedError, match=what):
        window(models, hold=hold)


def test_the_three_ranges_are_nested_and_acting_in_time_keeps_scatter_inside():
    models = fit(read_study("studies/process/hydrogenation"))
    box = window(models)
    for factor in models.study.numeric:
        hold, act, never = box.hold[factor.name], box.act_at[factor.name], box.ranges[factor.name]
        assert never[0] <= act[0] <= hold[0] < hold[1] <= act[1] <= never[1]
        for side in (0, 1):
            room = abs(act[side] - never[side])
            at_hold = act[side] == pytest.approx(hold[side])
            assert at_hold or room == pytest.approx(factor.tolerance)
