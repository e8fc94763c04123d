"""The room: every limit, constraint and bound holds over the whole box of tolerances."""

import numpy as np
import pytest

from support.build import central_composite, make_study, more
from wideberth.decide.arena import HardRow
from wideberth.decide.guards import Guard, SmoothGuard
from wideberth.decide.recommend import recommend
from wideberth.decide.region import Room
from wideberth.decide.room import worst_in_room
from wideberth.errors import RefusedError
from wideberth.fit.models import fit
from wideberth.quadratic.terms import features, n_terms
from wideberth.study.records import Constraint, Limit
from wideberth.surface.explored import depth, explored_region


def _row(rng, k, *, guarded):
    p = n_terms(k)
    root = rng.standard_normal((p, p)) / p
    covariance = root @ root.T + 0.02 * np.eye(p)
    guard = SmoothGuard.between(Guard("batch", 9, 0.95, 0.99), 0.01, 5.0) if guarded else None
    return HardRow(0, rng.standard_normal(p), 0.7 if guarded else 0.0, guard, covariance)


@pytest.mark.parametrize("guarded", [False, True])
@pytest.mark.parametrize("k", [1, 2, 3, 5, 7])
def test_no_sampled_place_is_worse(k, guarded):
    rng = np.random.default_rng(k)
    for _ in range(6):
        row = _row(rng, k, guarded=guarded)
        room = Room(rng.uniform(0, 0.4, k), rng.uniform(0, 0.4, k))
        x = rng.uniform(-1, 1, k)
        value, shift = worst_in_room(row, room, x)
        assert row.value(x + shift) == pytest.approx(value, abs=1e-9)
        assert (shift >= -room.below - 1e-12).all()
        assert (shift <= room.above + 1e-12).all()
        sampled = x - room.below + rng.random((20000, k)) * (room.below + room.above)
        assert row.value(sampled).min() >= value - 1e-7


def _models(**kwargs):
    x = central_composite(2)
    rng = np.random.default_rng(4)
    heat = 10 + 2 * x[:, 0] + 2 * x[:, 1] + x[:, 0] * x[:, 1] + 0.1 * rng.standard_normal(12)
    gain = 20 + 3 * x[:, 0] + 2 * x[:, 1] + 0.1 * rng.standard_normal(12)
    study = make_study(
        x,
        {"heat": heat, "gain": gain},
        goals={"gain": more(10.0, 30.0)},
        limits={"heat": Limit(None, 13.0, "share", 0.95, 0.95)},
        tolerance=0.12,
        **kwargs,
    )
    return fit(study)


def test_limits_and_region_hold_at_every_place_in_the_room():
    models = _models(constraints=(Constraint("both", {"f0": 1.0, "f1": 1.0}, at_most=1.2),))
    choice = recommend(models)
    assert choice.status == "met"
    x = np.array(list(choice.setpoint.values()))
    rng = np.random.default_rng(0)
    places = x + rng.uniform(-0.12, 0.12, (20000, 2))
    corners = x + 0.12 * np.array([[a, b] for a in (-1, 1) for b in (-1, 1)])
    places = np.concatenate([places, corners])
    assert places.sum(axis=1).max() <= 1.2 + 1e-9
    assert depth(explored_region(models.study), places).min() >= -1e-9
    model, verdict = models["heat"], choice.limits[0]
    terms = features(places)[:, [t.monomial for t in model.terms]]
    h = np.einsum("np,pq,nq->n", terms, model.covariance, terms)
    bound = terms @ model.coefficients + verdict.factor * model.s * Guard(
        "share", model.df_residual, 0.95, 0.95
    ).factor(h)
    assert bound.max() <= 13.0 + 1e-6
    assert bound.max() == pytest.approx(verdict.guarded, abs=1e-3)


def test_room_costs_something_and_can_be_left_out():
    models = _models()
    assert recommend(models, room=False).desirability > recommend(models).desirability + 1e-3


def test_a_room_that_fits_nowhere_is_refused():
    x = central_composite(2)
    models = fit(
        make_study(
            x,
            {"y": np.random.default_rng(0).standard_normal(12)},
            goals={"y": more(-1.0, 1.0)},
            tolerance=1.6,
        )
    )
    with pytest.raises(RefusedError, match="room"):
        recommend(models)
