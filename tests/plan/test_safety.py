"""No run that must not be made is ever planned in silence; the ways out keep inside."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from support.build import central_composite
from support.plans import draft, plan_of
from wideberth.errors import InputError
from wideberth.plan.plan import plan_runs
from wideberth.plan.safety import earlier_models, offences
from wideberth.study.coding import to_coded
from wideberth.study.records import Constraint, Limit, PlanChoice


def test_axial_runs_beyond_low_and_high_need_a_stated_range():
    plan = plan_of(2, stated={"allowed": {}})
    assert plan.status == "refused"
    assert {run.kind for run in plan.offending} == {"axial"}
    assert len(plan.offending) == 4
    assert all("no allowed range is stated" in run.offences[0] for run in plan.offending)
    assert plan_of(2, axial="face", stated={"allowed": {}}).status == "ready"
    assert plan_of(2, stated={"allowed": {"f0": (-2, 2), "f1": (-2, 2)}}).status == "ready"


@pytest.mark.parametrize(
    "stated",
    [
        {"allowed": {}},
        {"allowed": {"f0": (-1.2, 1.3), "f1": (-1.0, 1.0), "f2": (-3, 3)}},
        {"constraints": (Constraint("sum", {"f0": 1.0, "f1": 1.0}, at_most=1.5),)},
        {"constraints": (Constraint("sum", {"f2": 2.0}, at_least=-3.0),), "step": "0.25"},
    ],
)
def test_every_way_out_keeps_inside_and_its_cost_is_true(stated):
    choice = PlanChoice()
    plan = plan_runs(draft(3, choice, **stated))
    assert plan.status == "refused"
    assert plan.ways_out
    for way in plan.ways_out:
        words = dict(zip(*[iter(way.options.replace("--", "").split())] * 2, strict=True))
        other = replace(
            PlanChoice() if "design" in words else choice,
            **{k: v if k in ("axial", "design") else float(v) for k, v in words.items()},
        )
        if other.runs:
            other = replace(other, runs=int(other.runs))
        taken = plan_runs(draft(3, other, **stated))
        assert taken.status == "ready"
        assert len(taken.runs) == way.n_runs
        low, high = zip(
            *(stated.get("allowed", {}).get(f"f{j}", (-9, 9)) for j in range(3)), strict=True
        )
        if stated.get("allowed") == {}:
            low, high = (-1,) * 3, (1,) * 3
        x = np.array([list(run.setting.values()) for run in taken.runs])
        assert (x >= np.array(low) - 1e-9).all()
        assert (x <= np.array(high) + 1e-9).all()
        if way.mean_variance is not None:
            assert way.mean_variance / plan.quality.mean_variance == pytest.approx(way.ratio)


def test_the_shrunk_design_is_the_largest_on_the_scale_of_hundredths():
    stated = {"allowed": {"f0": (-1.2, 9), "f1": (-9, 9)}}
    plan = plan_of(2, stated=stated)
    shrunk = next(way for way in plan.ways_out if "shrink" in way.options)
    size = float(shrunk.options.split()[1])
    assert plan_of(2, shrink=size, stated=stated).status == "ready"
    assert plan_of(2, shrink=size + 0.01, stated=stated).status == "refused"


def _made(limit, *, spread=0.3, x=None, blocks=("1",), **more):
    x = central_composite(2) if x is None else x
    y = 5 + 2 * x[:, 0] + spread * np.random.default_rng(1).normal(size=len(x))
    return draft(
        2,
        x=x,
        values={"heat": y},
        limits={"heat": limit},
        blocks=[blocks[i % len(blocks)] for i in range(len(x))],
        keep_runs=True,
        **more,
    )


def test_runs_are_held_against_the_guarded_limit_of_the_earlier_model():
    study = _made(Limit(None, 8.0, "share", 0.95, 0.99))
    earlier = earlier_models(study)
    (model, _) = earlier.held[0]
    grid = np.array([[a, b] for a in np.linspace(-2, 2, 21) for b in np.linspace(-2, 2, 5)])
    reasons = offences(study, earlier, grid, np.zeros((len(grid), 0), dtype=np.int64))
    x = to_coded(study.numeric, grid)
    terms = np.column_stack([np.ones(len(x)), x, x**2, x[:, 0] * x[:, 1]])
    leverage = np.einsum("np,pq,nq->n", terms, model.covariance, terms)
    # the exact tolerance factor, by the other library's noncentral t
    z = stats.norm.ppf(0.99)
    factor = np.sqrt(leverage) * stats.nct.ppf(0.95, model.df_residual, z / np.sqrt(leverage))
    broken = terms @ model.coefficients + factor * model.s > 8.0
    assert [bool(said) for said in reasons] == broken.tolist()
    assert 0 < broken.sum() < len(broken)


def test_a_plan_after_earlier_runs_refuses_what_the_model_forbids():
    study = _made(Limit(None, 8.0, "share", 0.95, 0.99))
    plan = plan_runs(replace(study, plan=PlanChoice(axial=2.0)), append=True)
    assert plan.status == "refused"
    assert any("heat could reach" in run.offences[0] for run in plan.offending)
    assert any("extrapolation" in finding.text for finding in plan.findings)
    for way in plan.ways_out:
        assert "axial" not in way.options


def test_only_share_limits_hold_runs_back_unless_others_are_named():
    study = _made(Limit(None, 5.5, "batch"))
    assert plan_runs(study, append=True).status == "ready"
    held = replace(study, plan=PlanChoice(hold=("heat",)))
    assert plan_runs(held, append=True).status == "refused"
    freed = replace(_made(Limit(None, 5.5, "share")), plan=PlanChoice(hold=()))
    assert plan_runs(freed, append=True).status == "ready"


def test_without_degrees_of_freedom_the_mean_is_held_and_it_is_said():
    x = np.array([[-1.0, -1], [1, -1], [-1, 1], [1, 1.0]])
    study = _made(Limit(None, 6.0, "share"), x=x, spread=0.0)
    y = study.runs.measured + np.array([[0.0], [0], [0], [0.3]])
    study = replace(study, runs=replace(study.runs, measured=y))
    earlier = earlier_models(study)
    reasons = offences(study, earlier, x, np.zeros((4, 0), dtype=np.int64))
    assert "the guard needs spare runs" in reasons[1][0]
    assert not reasons[0]
    plan = plan_runs(replace(study, plan=PlanChoice(shrink=0.3, centre_runs=(2, 2))), append=True)
    assert any("no degrees of freedom" in finding.text for finding in plan.findings)


def test_the_worst_block_is_judged():
    x = np.repeat(central_composite(2), 2, axis=0)
    study = _made(Limit(None, 8.0, "share"), x=x, blocks=("a", "b"))
    y = study.runs.measured.copy()
    y[study.runs.block == 1] += 6.0
    study = replace(study, runs=replace(study.runs, measured=y))
    at = np.array([[0.0, 0.0]])
    assert offences(study, earlier_models(study), at, np.zeros((1, 0), dtype=np.int64))[0]


def test_a_missing_response_is_no_earlier_model_for_it():
    study = _made(Limit(None, 8.0, "share"))
    empty = replace(
        study, runs=replace(study.runs, measured=np.full_like(study.runs.measured, np.nan))
    )
    assert earlier_models(empty) is None


def test_results_are_never_planned_over():
    study = _made(Limit(None, 8.0, "share"))
    filled = replace(study, runs=replace(study.runs, filled=True))
    with pytest.raises(InputError) as caught:
        plan_runs(filled)
    assert "never overwritten" in caught.value.faults[0].what
    assert "--append" in caught.value.faults[0].mend


def test_runs_without_a_block_cannot_be_added_to():
    study = _made(Limit(None, 80.0, "share"))
    bare = replace(study, runs=replace(study.runs, blocks=()))
    with pytest.raises(InputError) as caught:
        plan_runs(bare, append=True)
    assert "column block" in caught.value.faults[0].mend


def test_added_runs_count_on_from_the_sheet_and_stand_in_new_blocks():
    study = _made(Limit(None, 80.0, "share"))
    study = replace(study, plan=PlanChoice(blocks=2), future_blocks=None)
    plan = plan_runs(study, append=True)
    assert {run.block for run in plan.runs} == {"2", "3"}
    assert [run.order for run in plan.runs] == list(range(13, 13 + len(plan.runs)))
    assert plan.quality.n_runs == 12 + len(plan.runs)
    assert any("future = 'recur'" in finding.text for finding in plan.findings)


def test_run_order_is_random_within_blocks_and_the_seeds_own():
    first, again, other = plan_of(3, blocks=2), plan_of(3, blocks=2), plan_of(3, blocks=2, seed=9)
    assert first.runs == again.runs
    assert first.runs != other.runs
    blocks = [run.block for run in first.runs]
    assert blocks == sorted(blocks)
    key = [(run.block, run.kind, tuple(run.setting.values())) for run in first.runs]
    assert sorted(key) == sorted(
        (run.block, run.kind, tuple(run.setting.values())) for run in other.runs
    )
