"""Factors that were seldom set anew, read off the run order."""

from dataclasses import replace

import numpy as np
import pytest

from support.build import central_composite, make_study, more
from wideberth.decide.recommend import recommend
from wideberth.fit.models import fit
from wideberth.study.checking import check_study
from wideberth.study.resets import seldom_reset

X = np.vstack([central_composite(2, n_centre=4), central_composite(2, n_centre=4)])


def _study(order, **extra):
    rng = np.random.default_rng(1)
    y = 5 - ((X - 0.2) ** 2).sum(axis=1) + 0.1 * rng.standard_normal(len(X))
    study = make_study(X, {"y": y}, goals={"y": more(0, 6)}, **extra)
    return replace(study, runs=replace(study.runs, order=order))


def _by(column):
    """Run orders in which all runs at one setting of a factor follow one another."""
    places = np.argsort(X[:, column], kind="stable")
    order = np.empty(len(X), dtype=int)
    order[places] = np.arange(1, len(X) + 1)
    return tuple(int(i) for i in order)


def test_a_factor_changed_stretch_by_stretch_is_named():
    study = _study(_by(0))
    (finding,) = seldom_reset(study)
    assert finding.about == "f0"
    assert "set only 5 times in 24 runs" in finding.text
    assert finding in check_study(study)
    assert finding in recommend(fit(study)).findings


def test_random_orders_are_seldom_blamed():
    rng = np.random.default_rng(5)
    blamed = sum(bool(seldom_reset(_study(tuple(rng.permutation(24) + 1)))) for _ in range(300))
    assert blamed <= 3


def test_what_differs_between_blocks_is_theirs():
    rng = np.random.default_rng(3)
    x = np.column_stack([np.repeat([-1.0, 1.0], 12), rng.uniform(-1, 1, 24)])
    order = tuple(range(1, 25))
    for blocks, named in ((None, ["f0"]), (["a"] * 12 + ["b"] * 12, [])):
        study = make_study(x, {"y": x[:, 1]}, blocks=blocks)
        study = replace(study, runs=replace(study.runs, order=order))
        assert [finding.about for finding in seldom_reset(study)] == named


@pytest.mark.parametrize("order", [None, (1,) * 24])
def test_without_an_order_nothing_is_said(order):
    assert seldom_reset(_study(order)) == ()
