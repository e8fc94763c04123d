"""Proof of the optimum: an upper bound of D over everything allowed, by branch and bound on boxes.

At each optimum that the search found, the multipliers of the active rows make one quadratic that
lies above log D wherever every row holds (weak duality, whatever the multipliers): it discards
most boxes at once. The others are bounded by the range of each response, by each row, and by
tangents at their own middle, and are halved until they are bounded or the budget of boxes is
spent. Bounds carry a margin for rounding.

References
----------
Lagrangian bounds in branch and bound: Horst and Tuy (1996), Global Optimization (from memory);
multipliers by nonnegative least squares, Lawson and Hanson (1974, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np

from wideberth.decide.arena import Arena, Cuts
from wideberth.decide.boxes import (
    ROUNDING,
    Axes,
    excluded,
    first_box,
    in_parts,
    on_values,
    steps_in_z,
)
from wideberth.decide.mixtures import contradicts, log_d, mixed, mixture_at, sum_of_goals
from wideberth.decide.multipliers import least_mixture
from wideberth.decide.pockets import ROUNDS, STUCK, Tangents, in_pockets
from wideberth.decide.search import HOLDS
from wideberth.decide.tangents import Relaxed, highest_on_boxes, relax, row_above
from wideberth.quadratic.box import halved
from wideberth.study.records import FloatArray

GAP = 1e-3
BUDGET = 300_000
_WORTH = 0.01
_AT_MIDDLES = 6


@dataclass(frozen=True, slots=True)
class Certificate:
    """What no setting can exceed.

    ``bound`` is an upper bound of D; ``boxes`` how many were looked at; ``closed`` whether every
    box was bounded within the gap asked for. ``better`` is a coded setting (k,) met on the way
    that holds every row and scores more than the gap above the D that was claimed.
    """

    bound: float
    boxes: int
    closed: bool
    better: FloatArray | None = None


def bound_desirability(
    arena: Arena,
    cuts: Cuts,
    optima: FloatArray,
    best: float,
    *,
    axes: Axes = (),
    gap: float = GAP,
    budget: int = BUDGET,
) -> Certificate:
    """Bound D over all settings that hold an arena's rows at the places of its cuts.

    Parameters
    ----------
    arena : Arena
        With goals.
    cuts : Cuts
        Places of the room at which rows must hold as well; more would only lower D.
    optima : ndarray, shape (n, k)
        Settings at which tangents are worth taking.
    best : float
        The D already reached anywhere; the proof is against ``best + gap``.
    axes : tuple of (int, ndarray)
        Settable values of stepped factors: then only settings on them count.
    """
    relaxed = relax(arena, cuts)
    region = arena.region
    if not region.basis.shape[1]:
        value = float(np.exp(log_d(relaxed, np.zeros((1, 0)))[0]))
        return Certificate(value, 1, closed=value <= best + gap)
    middles, halves = first_box(arena.region, relaxed.planes, relaxed.bounds)
    found = [mixture_at(relaxed, z) for z in (optima - region.origin) @ region.basis]
    known = Tangents(tuple(mixture for mixture in found if mixture is not None), ())
    steps = steps_in_z(arena.region, axes)
    level = float(np.log(best + gap))
    highest, boxes, closed, rounds = best, 0, True, 0
    while len(middles):
        boxes += len(middles)
        bounds = in_parts(partial(_bound, relaxed, known, level), middles, halves)
        if rounds < ROUNDS and (bounds > level).sum() > STUCK:
            rounds += 1
            stuck = np.flatnonzero(bounds > level)
            pockets = in_pockets(arena, cuts, relaxed, known, middles[stuck], bounds[stuck])
            better = _above_level(relaxed, arena, pockets.holding, level)
            if better is not None and not axes:
                return Certificate(min(float(np.exp(bounds.max())), 1.0), boxes, False, better)
            new = pockets.tangents
            bounds[stuck] = np.minimum(
                bounds[stuck], _by_tangents(relaxed, new, level, middles[stuck], halves[stuck])
            )
            if (bounds[stuck] <= level).mean() > _WORTH:
                known = known.joined(new)
        left = bounds > level
        with np.errstate(over="ignore"):
            done = np.exp(bounds[~left])
        highest = max(highest, float(done.max(initial=0.0)))
        if boxes > budget and left.any():
            return Certificate(min(float(np.exp(bounds.max())), 1.0), boxes, closed=False)
        middles, halves = middles[left], halves[left]
        points = halves.max(axis=1) <= 0.0
        if points.any():
            # single settable settings that the places of the cuts do not exclude stay open
            closed = False
            highest = max(highest, float(np.exp(bounds[left][points].max())))
        middles, halves = halved(middles[~points], halves[~points])
        if steps:
            middles, halves = on_values(middles, halves, steps)
    return Certificate(min(highest, 1.0), boxes, closed)


def _above_level(
    relaxed: Relaxed, arena: Arena, settings: FloatArray, level: float
) -> FloatArray | None:
    """Give the best of coded settings (n, k) if its log D lies above a level."""
    if not len(settings):
        return None
    heights = log_d(relaxed, (settings - arena.region.origin) @ arena.region.basis)
    best = int(heights.argmax())
    return settings[best] if heights[best] > level else None


def _bound(
    relaxed: Relaxed, known: Tangents, level: float, middles: FloatArray, halves: FloatArray
) -> FloatArray:
    """Bound log D over boxes (n, r), minus infinity where no setting holds every row: (n,)."""
    bounds = _by_tangents(relaxed, known, level, middles, halves)
    bounds[excluded(relaxed.planes, relaxed.bounds, middles, halves)] = -np.inf
    for row in relaxed.rows:
        left = np.flatnonzero(bounds > level)
        if len(left):
            height = highest_on_boxes(row_above(row, middles[left]), middles[left], halves[left])
            bounds[left[height < HOLDS - ROUNDING]] = -np.inf
    left = np.flatnonzero(bounds > level)
    if len(left):
        ranges = np.stack(
            [highest_on_boxes(c, middles[left], halves[left]) for c in relaxed.side_curves], axis=1
        )
        total = sum_of_goals(relaxed, ranges + ROUNDING)
        bounds[left] = np.minimum(bounds[left], total + ROUNDING)
    left = np.flatnonzero(bounds > level)
    if len(left):
        own = least_mixture(relaxed, middles[left], halves[left], level)
        height = highest_on_boxes(own, middles[left], halves[left])
        bounds[left] = np.minimum(bounds[left], height + ROUNDING)
    for mixture in known.mixtures[:_AT_MIDDLES]:
        left = np.flatnonzero(bounds > level)
        if len(left):
            own = mixed(relaxed, mixture, middles[left])
            height = highest_on_boxes(own, middles[left], halves[left])
            bounds[left] = np.minimum(bounds[left], height + ROUNDING)
    return bounds


def _by_tangents(
    relaxed: Relaxed, known: Tangents, level: float, middles: FloatArray, halves: FloatArray
) -> FloatArray:
    """Bound log D over boxes (n, r) by what was gathered at other places: (n,)."""
    bounds = np.full(len(middles), np.inf)
    for mixture in known.mixtures:
        left = np.flatnonzero(bounds > level)
        if len(left):
            whole = mixed(relaxed, mixture, mixture.z[None, :])[0]
            height = highest_on_boxes(whole, middles[left], halves[left])
            bounds[left] = np.minimum(bounds[left], height + ROUNDING)
    left = np.flatnonzero(bounds > level)
    bounds[left[contradicts(relaxed, known.contradictions, middles[left], halves[left])]] = -np.inf
    return bounds
