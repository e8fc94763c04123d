"""Proofs over boxes: never true where a dense search finds worse, and counterexamples are real."""

import numpy as np
import pytest

from wideberth.decide.arena import HardRow
from wideberth.decide.guards import Guard, SmoothGuard
from wideberth.operate.proof import prove_over_box
from wideberth.quadratic.box import lowest_on_boxes
from wideberth.quadratic.terms import n_terms


def _row(rng, k, kind, *, df=9, confidence=0.95, share=0.95):
    p = n_terms(k)
    root = rng.standard_normal((p, p + 4)) * 0.12
    covariance = root @ root.T
    guard = None
    if kind != "none":
        guard = SmoothGuard.between(Guard(kind, df, confidence, share), 0.02, 8.0)
    weight = 0.0 if kind == "none" else float(rng.uniform(0.3, 1.2))
    return HardRow(0, rng.standard_normal(p), weight, guard, covariance)


def _dense(row, low, high, rng, n=20_000):
    x = rng.uniform(low, high, (n, len(low)))
    ends = np.where(rng.random((n, len(low))) < 0.5, low, high)
    mixed = np.where(rng.random((n, len(low))) < 0.5, x, ends)
    points = np.concatenate([x, ends, mixed])
    values = row.value(points)
    return values.min(), points[values.argmin()]


CASES = [(k, kind) for k in (1, 2, 3, 4, 5) for kind in ("none", "mean", "batch", "share")]


@pytest.mark.parametrize(("k", "kind"), CASES)
def test_a_level_is_proven_just_below_the_minimum_and_refuted_just_above(k, kind):
    rng = np.random.default_rng(10 * k + len(kind))
    for _ in range(3):
        row = _row(rng, k, kind)
        middle = rng.uniform(-0.5, 0.5, k)
        half = rng.uniform(0.05, 0.6, k)
        low, high = middle - half, middle + half
        lowest, _ = _dense(row, low, high, rng)
        gap = 0.05 if k > 3 else 0.01
        proof = prove_over_box(row, low, high, lowest - gap)
        assert proof.proven
        above = prove_over_box(row, low, high, lowest + gap / 10)
        assert not above.proven
        if above.breaks is not None:
            assert row.value(above.breaks) < lowest + gap / 10
            assert (above.breaks >= low - 1e-12).all()
            assert (above.breaks <= high + 1e-12).all()


def test_a_touch_at_a_corner_is_proven_to_the_hair():
    rng = np.random.default_rng(3)
    for k in (2, 3, 4):
        row = _row(rng, k, "batch")
        low, high = np.full(k, 0.2), np.full(k, 0.25)
        lowest = min(
            float(row.value(np.where(np.array(list(np.binary_repr(i, k))) == "1", high, low)))
            for i in range(2**k)
        )
        # over so small a box the row is nearly a plane, so its minimum is at a corner
        assert prove_over_box(row, low, high, lowest - 1e-7).proven
        assert not prove_over_box(row, low, high, lowest + 1e-7).proven


def test_low_confidence_where_the_factor_is_not_concave():
    rng = np.random.default_rng(8)
    for _ in range(6):
        row = _row(rng, 2, "share", df=2, confidence=0.55, share=0.9)
        low, high = np.array([-0.6, -0.3]), np.array([0.5, 0.7])
        lowest, _ = _dense(row, low, high, rng)
        assert prove_over_box(row, low, high, lowest - 0.02).proven
        assert not prove_over_box(row, low, high, lowest + 0.002).proven


def test_a_factor_that_cannot_move_is_a_box_without_width():
    rng = np.random.default_rng(1)
    row = _row(rng, 3, "batch")
    low, high = np.array([0.1, -0.2, 0.3]), np.array([0.1, 0.4, 0.3])
    lowest, _ = _dense(row, low, high, rng)
    assert prove_over_box(row, low, high, lowest - 1e-3).proven
    assert not prove_over_box(row, low, high, lowest + 1e-3).proven


def test_the_bound_of_a_quadratic_on_boxes_is_never_above_its_minimum():
    rng = np.random.default_rng(2)
    for k in (1, 2, 4):
        slope = rng.standard_normal((50, k))
        bend = rng.standard_normal((50, k, k))
        bend = (bend + bend.transpose(0, 2, 1)) / 2
        halves = rng.uniform(0.0, 1.0, (50, k))
        bound = lowest_on_boxes(slope, bend, halves)
        steps = rng.uniform(-1, 1, (2000, 50, k)) * halves
        values = np.einsum("snk,nk->sn", steps, slope)
        values += np.einsum("sni,nij,snj->sn", steps, bend, steps)
        assert (bound <= values.min(axis=0) + 1e-12).all()
