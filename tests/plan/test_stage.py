"""A finished two-level stage: the curvature test keeps its level; each decision has its case."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from support.build import less, make_study, more
from support.plans import design_of, moments
from wideberth.errors import InputError
from wideberth.plan.plan import plan_runs
from wideberth.plan.stage import finished_stage
from wideberth.study.records import Constraint, Goal, Limit, PlanChoice

X = design_of(3, design="two-level", centre_runs=(4, 4)).coded


def _stage(y, x=X, **stated):
    stated.setdefault("allowed", {f"f{j}": (-20.0, 20.0) for j in range(x.shape[1])})
    stated.setdefault("goals", {"y": more(0, 10)})
    return finished_stage(make_study(x, {"y": np.asarray(y)}, **stated))


def _noise(seed, size=0.2):
    return size * np.random.default_rng(seed).normal(size=len(X))


def test_the_curvature_test_keeps_its_level_and_power():
    rng = np.random.default_rng(0)
    found, missed, covered = 0, 0, 0
    n = 400
    bend = None
    for _ in range(n):
        y = 2 * X[:, 0] + rng.normal(size=len(X))
        curvature = _stage(y).responses[0].curvature
        found += curvature.p < 0.05
        covered += curvature.interval[0] <= 0 <= curvature.interval[1]
        # with curvature as large as the power is stated for, at the true error
        size = curvature.detectable / np.sqrt(_pure(y))
        bend = size
        bent = _stage(y + size * (X**2).mean(axis=1)).responses[0].curvature
        missed += bent.p >= 0.05
    assert bend > 0
    assert found / n == pytest.approx(0.05, abs=0.03)
    assert covered / n == pytest.approx(0.95, abs=0.03)
    assert missed / n == pytest.approx(0.20, abs=0.06)


def _pure(y):
    centre = y[(X == 0).all(axis=1)]
    return centre.var(ddof=1)


def test_curvature_calls_for_axial_runs():
    stage = _stage(3 * X[:, 0] - 4 * (X**2).mean(axis=1) + _noise(1))
    assert stage.decision.do == "axial"
    assert "Curvature is seen in y" in stage.decision.why


def test_effects_without_curvature_call_for_the_path():
    stage = _stage(3 * X[:, 0] - X[:, 1] + _noise(1))
    assert stage.decision.do == "path"
    assert stage.path.direction[0] == 1.0
    assert stage.path.direction[1] == pytest.approx(-1 / 3, abs=0.1)
    down = _stage(3 * X[:, 0] - X[:, 1] + _noise(1), goals={"y": less(10, 0)})
    assert down.path.direction == pytest.approx(-np.array(stage.path.direction))
    near = _stage(3 * X[:, 0] + _noise(1), goals={"y": Goal("near", (-9, 9), (-7, -7))})
    assert near.path.direction[0] == -1.0


def test_noise_alone_calls_for_repeating():
    stage = _stage(_noise(5, 1.0))
    assert stage.decision.do == "repeat"
    assert "No effect stands out" in stage.decision.why


def test_a_blind_test_calls_for_more_centre_runs():
    x = np.concatenate([X[:8], np.zeros((2, 3))])
    y = np.concatenate([X[:8, 0] + 0.05 * np.random.default_rng(3).normal(size=8), [0.3, -0.3]])
    stage = _stage(y, x)
    assert stage.responses[0].curvature.detectable > stage.responses[0].effects[0].change
    assert stage.decision.do == "repeat"


def test_without_repeated_centre_runs_curvature_cannot_be_tested():
    x = np.concatenate([X[:8], np.zeros((1, 3))])
    stage = _stage(3 * x[:, 0], x)
    assert stage.responses[0].curvature.p is None
    assert stage.decision.do == "repeat"
    assert "add three to five centre runs" in stage.decision.why


def test_a_stage_without_centre_runs_still_ranks_its_effects():
    stage = _stage(3 * X[:8, 0] + _noise(1)[:8], X[:8], orders={"y": 1})
    assert stage.responses[0].curvature is None
    assert stage.responses[0].effects[0].term == "f0"
    assert stage.decision.do == "repeat"


def test_effects_have_the_intervals_of_plain_least_squares():
    y = 3 * X[:, 0] - X[:, 1] * X[:, 2] + _noise(2, 1.0)
    one = _stage(y).responses[0]
    columns = [0, 1, 2, 3, 7, 8, 9]
    matrix = np.column_stack([moments(X)[:, columns], (X**2).mean(axis=1)])
    beta, rss, *_ = np.linalg.lstsq(matrix, y, rcond=None)
    df = len(y) - 8
    se = np.sqrt(rss[0] / df * np.linalg.inv(matrix.T @ matrix)[1, 1])
    first = next(effect for effect in one.effects if effect.term == "f0")
    assert first.change == pytest.approx(2 * beta[1])
    reach = 2 * stats.t.ppf(0.975, df) * se
    assert first.interval == pytest.approx((2 * beta[1] - reach, 2 * beta[1] + reach))
    assert [abs(e.change) for e in one.effects] == sorted(
        (abs(e.change) for e in one.effects), reverse=True
    )


def test_the_path_stops_where_a_run_must_not_be_made():
    y = 3 * X[:, 0] + _noise(1)
    stage = _stage(y, allowed={"f0": (-1, 3.2), "f1": (-20, 20), "f2": (-20, 20)})
    assert [step.step for step in stage.path.steps] == [1, 2, 3]
    assert "must not be run" in stage.path.stopped
    cut = _stage(y, constraints=(Constraint("sum", {"f0": 1.0}, at_most=2.0),))
    assert len(cut.path.steps) == 2
    limit = {"y": Limit(None, 7.0, "share")}
    held = _stage(y, limits=limit)
    assert 1 <= len(held.path.steps) < 3


def test_the_path_keeps_to_settable_steps():
    stage = _stage(3 * X[:, 0] + 1.1 * X[:, 1] + _noise(1), step="0.5")
    for step in stage.path.steps:
        assert all(value * 2 == round(value * 2) for value in step.setting.values())


def test_blocks_do_not_pass_for_curvature():
    blocks = ["a", "b"] * 6
    shift = np.array([0.0, 5.0] * 6)
    one = _stage(3 * X[:, 0] + shift + _noise(1), blocks=blocks).responses[0]
    assert one.curvature.p > 0.01
    assert one.s < 1.0


def test_other_runs_are_no_two_level_stage():
    x = np.concatenate([X, [[1.5, 0, 0]]])
    with pytest.raises(InputError, match="not a two-level stage, or go beyond one"):
        _stage(x[:, 0], x)


def _two_level(**stated):
    stated.setdefault("allowed", {f"f{j}": (-3.0, 3.0) for j in range(3)})
    return make_study(X, {"y": 3 * X[:, 0] + _noise(1)}, blocks=["1"] * len(X), **stated)


def test_axial_runs_are_added_at_the_distance_that_keeps_blocks_apart():
    study = _two_level()
    choice = PlanChoice(axial="orthogonal-blocks")
    plan = plan_runs(replace(study, plan=choice), append=True, axial_only=True)
    assert {run.kind for run in plan.runs} == {"axial", "centre"}
    assert {run.block for run in plan.runs} == {"2"}
    assert plan.design.axial_distance == pytest.approx(np.sqrt(8 * (6 + 3) / (2 * 12)))
    assert plan.quality.block_coupling < 1e-3
    assert plan.quality.n_runs == len(X) + 9
    other = plan_runs(replace(study, plan=PlanChoice(axial=1.2)), append=True, axial_only=True)
    assert other.quality.block_coupling > 0.02


def test_axial_runs_that_must_not_be_made_have_ways_out():
    study = _two_level(allowed={"f0": (-1.5, 1.5), "f1": (-3, 3), "f2": (-3, 3)})
    plan = plan_runs(
        replace(study, plan=PlanChoice(axial="orthogonal-blocks")), append=True, axial_only=True
    )
    assert plan.status == "refused"
    assert [way.options for way in plan.ways_out] == ["--distance face", "--distance 1.5"]
    assert all(way.ratio > 1 for way in plan.ways_out)


def test_axial_runs_need_a_two_level_stage():
    x = np.concatenate([X, [[1.5, 0, 0]]])
    study = make_study(x, {"y": x[:, 0]}, blocks=["1"] * len(x))
    with pytest.raises(InputError, match="two-level and centre runs alone"):
        plan_runs(study, append=True, axial_only=True)
