"""Every status, with what it says and what it shows."""

import numpy as np
import pytest

from support.build import central_composite, less, make_study, more
from wideberth.decide.guards import Guard
from wideberth.decide.recommend import recommend
from wideberth.errors import RefusedError
from wideberth.fit.models import fit
from wideberth.study.records import Goal, Limit, RegionChoice


def _data(k=2, sd=0.3, seed=2):
    rng = np.random.default_rng(seed)
    x = central_composite(k)
    y = 20 + 3 * x[:, 0] - 2 * (x**2).sum(axis=1) + sd * rng.standard_normal(len(x))
    z = 10 + 2 * x[:, 0] + sd * rng.standard_normal(len(x))
    return x, {"y": y, "z": z}


def _choice(limits=None, goals=None, *, sd=0.3, **kwargs):
    x, values = _data(sd=sd)
    return recommend(fit(make_study(x, values, goals=goals, limits=limits, **kwargs)))


def test_met():
    choice = _choice({"z": Limit(None, 13.0, "batch")}, {"y": more(10.0, 25.0)})
    assert choice.status == "met"
    assert choice.limits[0].met
    assert choice.ruling == "z at most 13 v"


def test_conflict_names_a_smallest_set():
    limits = {"z": Limit(None, 8.0, "none"), "y": Limit(20.7, None, "none")}
    choice = _choice(limits, {"y": more(10.0, 25.0)})
    assert choice.status == "conflict"
    (conflict,) = choice.conflicts
    assert {(name, side) for name, side, _ in conflict.limits} == {("z", "high"), ("y", "low")}
    assert "cannot hold together" in conflict.text
    assert choice.setpoint is not None
    assert choice.predictions["y"].mean < 20.7 or choice.predictions["z"].mean > 8.0


def test_a_limit_that_holds_nowhere_is_a_conflict_of_its_own():
    limits = {"z": Limit(None, 8.0, "none"), "y": Limit(99.0, None, "none")}
    choice = _choice(limits)
    assert choice.conflicts[0].limits == (("y", "low", 99.0),)
    assert "holds nowhere" in choice.conflicts[0].text


def test_the_setting_shown_in_a_conflict_breaks_the_limits_least():
    limits = {"z": Limit(None, 8.0, "none"), "y": Limit(21.5, None, "none")}
    x, values = _data()
    models = fit(make_study(x, values, limits=limits))
    choice = recommend(models)

    def violation(place):
        total = 0.0
        for name, sign, bound in (("z", 1, 8.0), ("y", -1, 21.5)):
            model = models[name]
            terms = [1, *place, *place**2, place[0] * place[1]]
            mean = np.array(terms)[[t.monomial for t in model.terms]] @ model.coefficients
            total += max(sign * (mean - bound), 0.0) / model.s
        return total

    here = violation(np.array(list(choice.setpoint.values())))
    rng = np.random.default_rng(0)
    places = rng.uniform(-1.41, 1.41, (20000, 2))
    places = places[(places**2).sum(axis=1) <= 2]
    assert here <= min(violation(place) for place in places) + 1e-6


def _ladder():
    """The limit on z moved until each answer of the ladder has come up."""
    seen = {}
    for bound in np.arange(9.5, 5.5, -0.08):
        limits = {"z": Limit(None, float(bound), "share", 0.95, 0.95)}
        choice = _choice(limits, {"y": more(10.0, 25.0)})
        seen.setdefault(choice.status, choice)
        if choice.status == "conflict":
            break
    return seen


@pytest.fixture(scope="module")
def ladder():
    return _ladder()


def test_the_ladder_goes_from_met_to_conflict(ladder):
    assert list(ladder) == ["met", "provisional", "unproven", "conflict"]


def test_provisional_says_how_many_runs_would_prove_it(ladder):
    choice = ladder["provisional"]
    x, values = _data()
    model = fit(make_study(x, values))["z"]
    side = choice.limits[0]
    assert not side.met
    assert side.margin < 0
    n_runs = choice.confirmation.runs
    mean = choice.predictions["z"].mean

    def bound(n):
        factor = Guard("share", model.df_residual + n - 1, 0.95, 0.95).factor(np.array(1 / n))
        return mean + float(factor) * model.s

    assert bound(n_runs) <= side.value
    assert n_runs == 1 or bound(n_runs - 1) > side.value


def test_unproven_shows_the_setting_that_comes_closest(ladder):
    choice = ladder["unproven"]
    assert not choice.limits[0].met
    assert choice.conflicts == ()
    assert choice.confirmation is None


def test_no_residual_degrees_of_freedom_is_unproven():
    x = central_composite(2, n_centre=1)[[0, 1, 2, 4, 5, 8]]
    y = np.random.default_rng(0).standard_normal(6)
    limits = {"y": Limit(None, 50.0, "batch")}
    choice = recommend(fit(make_study(x, {"y": y}, limits=limits, orders={"y": 2})))
    assert choice.status == "unproven"
    assert choice.limits[0].guarded is None
    assert "degrees of freedom" in choice.limits[0].reason
    assert choice.predictions["y"].mean_interval is None
    free = {"y": Limit(None, 50.0, "none")}
    assert recommend(fit(make_study(x, {"y": y}, limits=free, orders={"y": 2}))).status == "met"


def test_unreached_shows_the_largest_smallest_uncapped_desirability():
    choice = _choice(goals={"y": more(40.0, 50.0), "z": less(5.0, 1.0)})
    assert choice.status == "unreached"
    assert choice.desirability == 0.0
    x, values = _data()
    models = fit(make_study(x, values))
    rng = np.random.default_rng(0)
    places = rng.uniform(-1.41, 1.41, (40000, 2))
    places = places[(places**2).sum(axis=1) <= 2]
    f = np.column_stack([np.ones(len(places)), places, places**2, places.prod(axis=1)])
    y, z = (f[:, [t.monomial for t in m.terms]] @ m.coefficients for m in models.models)
    best = np.minimum((y - 40) / 10, (5 - z) / 4).max()
    here = min((choice.predictions["y"].mean - 40) / 10, (5 - choice.predictions["z"].mean) / 4)
    assert here >= best - 1e-6


def test_unsupported_still_shows_its_numbers():
    x = central_composite(2)
    rng = np.random.default_rng(3)
    choice = recommend(fit(make_study(x, {"y": rng.standard_normal(12)}, goals={"y": more(-1, 1)})))
    assert choice.status == "unsupported"
    assert choice.setpoint is not None
    assert choice.desirability > 0


def test_neither_goals_nor_limits_is_refused():
    x, values = _data()
    with pytest.raises(RefusedError, match="no response has a goal or a limit"):
        recommend(fit(make_study(x, values)))


def test_limits_without_goals_take_the_largest_smallest_margin():
    limits = {"z": Limit(8.0, 12.0, "none")}
    choice = _choice(limits)
    assert choice.status == "met"
    assert choice.desirability is None
    assert choice.predictions["z"].mean == pytest.approx(10.0, abs=1e-6)


def test_a_plateau_takes_the_setting_farthest_from_its_limits():
    goals = {"y": more(5.0, 12.0)}
    choice = _choice({"z": Limit(None, 12.0, "none")}, goals)
    assert choice.desirability == pytest.approx(1.0, abs=1e-7)
    assert any("score the same" in finding.text for finding in choice.findings)
    other = _choice({"z": Limit(None, 12.0, "none")}, goals, sd=0.3)
    assert choice == other
    assert choice.predictions["y"].mean == pytest.approx(12.0, abs=1e-4)


def test_two_equally_good_settings_are_said():
    x = central_composite(2, n_centre=5)
    y = 10 + x[:, 0] ** 2 - x[:, 1] ** 2
    noise = np.tile([0.1, -0.1], 7)[: len(x)] * np.r_[np.zeros(8), np.ones(5)]
    choice = recommend(fit(make_study(x, {"y": y + noise}, goals={"y": more(8.0, 15.0)})))
    assert abs(choice.setpoint["f0"]) == pytest.approx(np.sqrt(2), abs=1e-3)
    assert any("score the same" in finding.text for finding in choice.findings)


def test_a_setting_at_a_corner_of_the_box():
    x = central_composite(2, alpha=1.0)
    y = x.sum(axis=1) + 0.05 * np.random.default_rng(0).standard_normal(12)
    choice = recommend(fit(make_study(x, {"y": y}, goals={"y": more(-3.0, 3.0)})))
    assert list(choice.setpoint.values()) == pytest.approx([1.0, 1.0], abs=1e-6)
    assert sum("upper end" in sentence for sentence in choice.edge) == 2
    assert any("more f0" in sentence for sentence in choice.edge)


def test_edge_of_the_explored_region_is_said_in_words():
    choice = _choice(goals={"z": less(14.0, 4.0)})
    assert any("less f0" in sentence for sentence in choice.edge)


def test_one_factor():
    x = central_composite(1, n_centre=6)
    y = 5 - (x[:, 0] - 0.4) ** 2 + 0.02 * np.random.default_rng(0).standard_normal(len(x))
    choice = recommend(fit(make_study(x, {"y": y}, goals={"y": more(3.0, 6.0)})))
    assert choice.setpoint["f0"] == pytest.approx(0.4, abs=0.1)


def test_categorical_factors_by_combination():
    x = np.tile(central_composite(2), (3, 1))
    level = np.repeat([0, 1, 2], 12)
    y = 10 + x[:, 0] * np.array([1.0, -2.0, 0.5])[level] + np.array([0.0, 3.0, 1.0])[level]
    y = y + 0.1 * np.random.default_rng(0).standard_normal(36)
    study = make_study(
        x,
        {"y": y},
        goals={"y": more(5.0, 20.0)},
        categorical={"solvent": (("water", "ethanol", "toluene"), level)},
    )
    choice = recommend(fit(study))
    assert choice.setpoint["solvent"] == "ethanol"
    assert choice.setpoint["f0"] < -1
    worse = recommend(fit(study), at={**choice.setpoint, "solvent": "water"})
    assert worse.desirability < choice.desirability


def test_goal_bounds_left_out_are_settled_and_said():
    choice = _choice(goals={"y": more(None, None), "z": less(None, None)})
    goal = choice.goals[0]
    assert "worst run" in goal.defaulted
    assert "best fitted mean" in goal.defaulted
    _, values = _data()
    assert goal.poor == (values["y"].min(),)
    assert any("worst run" in finding.text for finding in choice.findings)
    limited = _choice({"y": Limit(15.0, None, "none")}, {"y": more(None, 25.0)})
    assert limited.goals[0].poor == (15.0,)


def test_near_without_poor_takes_limits():
    goals = {"z": Goal("near", None, (10.0, 10.0))}
    choice = _choice({"z": Limit(7.0, 13.0, "none")}, goals)
    assert choice.goals[0].poor == (7.0, 13.0)


def test_own_setting_is_judged_by_the_same_ladder():
    x, values = _data()
    models = fit(
        make_study(
            x, values, goals={"y": more(10.0, 25.0)}, limits={"z": Limit(None, 13.0, "batch")}
        )
    )
    best = recommend(models)
    again = recommend(models, at=best.setpoint)
    assert again.asked
    assert (again.status, again.desirability) == ("met", pytest.approx(best.desirability))
    assert again.limits[0].margin == pytest.approx(best.limits[0].margin)
    assert recommend(models, at={"f0": 1.4, "f1": 0.0}).status in ("unproven", "conflict")
    outside = recommend(models, at={"f0": 1.4, "f1": 1.4})
    assert outside.status == "unsupported"
    assert any("extrapolation" in f.text for f in outside.findings)
    for wrong in ({"f0": 1.0}, {"f0": 1.0, "f1": 0.0, "f9": 1.0}, {"f0": "high", "f1": 0.0}):
        with pytest.raises(RefusedError):
            recommend(models, at=wrong)


def test_a_wider_region_is_given_with_a_finding():
    x, values = _data()
    goals = {"z": less(14.0, 2.0)}
    allowed = {"f0": (-3.0, 3.0)}
    plain = recommend(fit(make_study(x, values, goals=goals, allowed=allowed)))
    wide = recommend(
        fit(make_study(x, values, goals=goals, allowed=allowed, region=RegionChoice("allowed")))
    )
    assert plain.setpoint["f0"] >= -np.sqrt(2) - 1e-6
    assert wide.setpoint["f0"] == pytest.approx(-3.0, abs=1e-6)
    assert any("extrapolation" in finding.text for finding in wide.findings)
    ball = recommend(
        fit(make_study(x, values, goals=goals, allowed=allowed, region=RegionChoice("radius", 2.0)))
    )
    place = np.array(list(ball.setpoint.values()))
    assert np.sqrt(place @ place) == pytest.approx(2.0, abs=1e-5)


def test_fixed_points_are_guarded_pointwise():
    chosen = _choice({"z": Limit(None, 12.0, "batch")}, {"z": more(5.0, 15.0)})
    fixed = _choice({"z": Limit(None, 12.0, "batch", point="fixed")}, {"z": more(5.0, 15.0)})
    assert fixed.limits[0].factor == 1.0
    assert fixed.predictions["z"].mean > chosen.predictions["z"].mean


def test_blocks_that_recur_are_judged_at_the_worst():
    x = np.tile(central_composite(2), (2, 1))
    blocks = ["north"] * 12 + ["south"] * 12
    shift = np.repeat([-0.5, 0.5], 12)
    noise = 0.1 * np.random.default_rng(0).standard_normal(24)
    z = 10 + 2 * x[:, 0] + shift + noise
    limits = {"z": Limit(None, 12.0, "none")}
    choice = recommend(
        fit(make_study(x, {"z": z}, goals={"z": more(5.0, 15.0)}, limits=limits, blocks=blocks))
    )
    assert choice.limits[0].block == "south"
    assert choice.predictions["z"].mean == pytest.approx(11.5, abs=0.1)


def test_only_categorical_factors():
    level = np.repeat([0, 1, 2], 4)
    y = level + 0.1 * np.random.default_rng(0).standard_normal(12)
    study = make_study(
        np.zeros((12, 0)),
        {"y": y},
        goals={"y": more(0.0, 3.0)},
        limits={"y": Limit(-5.0, None, "batch")},
        categorical={"c": (("a", "b", "d"), level)},
    )
    choice = recommend(fit(study))
    assert choice.status == "met"
    assert choice.setpoint == {"c": "d"}


def test_a_factor_that_never_moved_stays_where_it_was():
    x = np.column_stack([central_composite(2), np.full(12, 0.4)])
    y = x[:, 0] + 0.1 * np.random.default_rng(0).standard_normal(12)
    choice = recommend(fit(make_study(x, {"y": y}, goals={"y": more(-2.0, 2.0)})))
    assert choice.setpoint["f2"] == pytest.approx(0.4)
