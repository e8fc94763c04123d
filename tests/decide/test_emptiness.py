"""Proofs that nothing holds: never claimed where something does, found where nothing does."""

from dataclasses import replace

import numpy as np
import pytest

from support.brute import second_order
from support.build import central_composite, make_study
from support.problems import GUARDS, random_models
from wideberth.decide.aims import SAFEST
from wideberth.decide.arena import hard_values, no_cuts
from wideberth.decide.emptiness import prove_empty
from wideberth.decide.mixtures import contradicted, contradiction_at, log_d, mixed, mixture_at
from wideberth.decide.multipliers import least_mixture
from wideberth.decide.problem import arena, build_problem
from wideberth.decide.recommend import recommend
from wideberth.decide.region import inside
from wideberth.decide.search import find_safest, local_optima
from wideberth.decide.tangents import relax
from wideberth.fit.models import fit
from wideberth.study.records import Limit


def _crowded(seed):
    """A limit on every response, guarded in turn, around the middle of what each can be."""
    models = random_models(seed)
    responses = []
    for i, response in enumerate(models.study.responses):
        middle = float(models[response.name].coefficients[0])
        ends = (None, middle) if (i + seed) % 2 else (middle, None)
        limit = Limit(*ends, GUARDS[(seed + i) % 4], 0.95, 0.9)
        responses.append(replace(response, limit=limit))
    crowded = replace(models, study=replace(models.study, responses=tuple(responses)))
    return arena(build_problem(crowded, seed=1, room=True), (), "simultaneous")


def _with_best_margin(rows, margin):
    """Move all limits alike until the largest smallest margin is this."""
    for _ in range(2):
        lift = margin - find_safest(rows).score
        rows = replace(
            rows,
            hard=tuple(
                row
                if row.limit is None
                else replace(row, curve=row.curve + lift * (np.arange(len(row.curve)) == 0))
                for row in rows.hard
            ),
        )
    return rows


@pytest.mark.parametrize("part", range(4))
def test_emptiness_is_proven_where_nothing_holds_and_never_where_something_does(part):
    proven = 0
    seeds = range(part, 40, 4)
    for seed in seeds:
        rows = _crowded(seed)
        just = _with_best_margin(rows, 1e-6)
        safest = find_safest(just)
        assert safest.score >= 0
        near = local_optima(just, safest, SAFEST)
        assert not prove_empty(just, safest.cuts, near, budget=1000).proven
        nearly = _with_best_margin(rows, -0.02)
        safest = find_safest(nearly)
        near = local_optima(nearly, safest, SAFEST)
        proven += prove_empty(nearly, safest.cuts, near).proven
    assert proven >= len(seeds) - 1


def test_the_proof_meets_a_setting_that_a_search_overlooked():
    rows = _with_best_margin(_crowded(8), 0.5)
    far = rows.region.origin[None, :]
    found = prove_empty(rows, no_cuts(rows), far)
    assert not found.proven
    if found.holding is not None:
        values = hard_values(rows, no_cuts(rows), found.holding[None, :])
        assert values.min() >= -1e-9
        assert inside(rows.region, found.holding)


def test_mixtures_lie_above_log_d_and_contradictions_are_no_negative_number_where_rows_hold():
    for seed in range(12):
        models = random_models(seed)
        rows = arena(build_problem(models, seed=1, room=False), (), "simultaneous")
        relaxed = relax(rows, no_cuts(rows))
        rng = np.random.default_rng(seed)
        r = relaxed.planes.shape[1]
        z = rng.uniform(-1.2, 1.2, (3000, r))
        x = rows.region.origin + z @ rows.region.basis.T
        held = (hard_values(rows, no_cuts(rows), x).min(axis=0) >= 0) & inside(rows.region, x)
        z, f = z[held], second_order(z[held])
        truth = log_d(relaxed, z)
        for place in rng.uniform(-0.8, 0.8, (4, r)):
            quadratics = []
            mixture = mixture_at(relaxed, place)
            if mixture is not None:
                quadratics = [mixed(relaxed, mixture, place[None, :])[0]]
            halves = np.full((1, r), 0.3)
            quadratics.append(least_mixture(relaxed, place[None, :], halves, -0.5)[0])
            for quadratic in quadratics:
                assert (f @ quadratic >= truth - 1e-9).all()
            one = contradiction_at(relaxed, place)
            if one is not None:
                assert (f @ contradicted(relaxed, one, place[None, :])[0] >= -1e-9).all()
            alone = least_mixture(relaxed, place[None, :], halves, -0.5, goals=False)[0]
            assert (f @ alone >= -1e-9).all()


def test_a_conflict_says_that_it_is_proven():
    x = central_composite(2)
    rng = np.random.default_rng(1)
    y = 20 + 3 * x[:, 0] + 0.2 * rng.standard_normal(len(x))
    z = 10 + 3 * x[:, 0] + 0.2 * rng.standard_normal(len(x))
    limits = {"y": Limit(23.0, None, "batch"), "z": Limit(None, 9.0, "batch")}
    choice = recommend(fit(make_study(x, {"y": y, "z": z}, limits=limits)))
    assert choice.status == "conflict"
    assert choice.none_holds is True
    assert [conflict.proven for conflict in choice.conflicts] == [True]


def test_between_the_steps_nothing_settable_holds_and_that_is_proven():
    x = central_composite(1, n_centre=6)
    y = 20 + 3 * x[:, 0] + 0.05 * np.random.default_rng(2).standard_normal(len(x))
    limits = {"y": Limit(20.6, 20.9, "none")}
    choice = recommend(fit(make_study(x, {"y": y}, limits=limits, step="1")))
    assert choice.status == "conflict"
    assert "settable steps" in choice.conflicts[0].text
    assert choice.none_holds is True
