"""Proof that no setting holds every limit, by branch and bound on boxes.

At the settings that come nearest to holding everything, the multipliers of the worst limits make
one quadratic that no setting holding them all could bring below zero (a theorem of alternatives
for convex rows, a sufficient condition for others): where its largest value over a box is
negative, the box holds none. Other boxes are excluded by one limit alone, or halved until they
are, or until the budget of boxes is spent. Bounds carry a margin for rounding.

References
----------
Theorem of alternatives, Farkas (1902), and Lagrangian bounds in branch and bound, Horst and Tuy
(1996), Global Optimization (both from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np

from wideberth.decide.aims import SAFEST
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
from wideberth.decide.mixtures import contradicted, contradiction_at, contradicts
from wideberth.decide.multipliers import least_mixture
from wideberth.decide.overlooked import look_again
from wideberth.decide.pockets import ROUNDS, STUCK, Tangents, in_pockets
from wideberth.decide.problem import Mode, Problem, arena
from wideberth.decide.search import HOLDS, find_safest, local_optima
from wideberth.decide.settable import settable_grid
from wideberth.decide.tangents import Relaxed, highest_on_boxes, relax, row_above, row_value
from wideberth.quadratic.box import halved
from wideberth.study.records import BoolArray, FloatArray

BUDGET = 100_000
_WORTH = 0.01
_AT_MIDDLES = 6


@dataclass(frozen=True, slots=True)
class Emptiness:
    """Whether it is proven that no setting holds every row, and how many boxes were looked at.

    ``holding`` is a coded setting (k,) met on the way that holds every row after all.
    """

    proven: bool
    boxes: int
    holding: FloatArray | None = None


def none_holds(
    problem: Problem,
    mode: Mode,
    limits: tuple[int, ...] | None = None,
    *,
    stepped: bool = False,
) -> bool:
    """Prove that no allowed setting holds these limit sides (all by default) at any levels.

    With ``stepped`` only settings on the settable steps count. False: not proven.

    Raises
    ------
    Overlooked
        When the proof meets a setting between the steps that holds them after all.
    """
    axes = settable_grid(problem.study.numeric, problem.tight).axes if stepped else ()
    proven = True
    for levels in problem.combinations:
        rows = arena(problem, levels, mode, limits)
        safest = find_safest(rows)
        near = local_optima(rows, safest, SAFEST)
        found = prove_empty(rows, safest.cuts, near, axes=axes)
        if found.holding is not None and safest.score < HOLDS:
            look_again(problem, (levels, found.holding))
        proven &= found.proven
    return proven


def prove_empty(
    rows: Arena,
    cuts: Cuts,
    near: FloatArray,
    *,
    axes: Axes = (),
    budget: int = BUDGET,
) -> Emptiness:
    """Try to prove that no setting holds the rows of an arena.

    Parameters
    ----------
    rows : Arena
    cuts : Cuts
        Places of the room at which rows must hold as well; more only make the proof easier.
    near : ndarray, shape (n, k)
        Settings with the largest smallest margin, where tangents are worth taking.
    axes : tuple of (int, ndarray)
        Settable values of stepped factors: then only settings on them count.
    """
    relaxed, region = relax(rows, cuts), rows.region
    if not region.basis.shape[1]:
        place = np.zeros((1, 0))
        broken = any(row_value(row, place)[0] < HOLDS - ROUNDING for row in relaxed.rows)
        return Emptiness(broken, 1)
    found = [contradiction_at(relaxed, z) for z in (near - region.origin) @ region.basis]
    known = Tangents((), tuple(one for one in found if one is not None))
    middles, halves = first_box(region, relaxed.planes, relaxed.bounds)
    steps, boxes, rounds = steps_in_z(region, axes), 0, 0
    while len(middles):
        boxes += len(middles)
        heights = in_parts(partial(_height, relaxed, known), middles, halves)
        left: BoolArray = heights >= -ROUNDING
        if rounds < ROUNDS and left.sum() > STUCK:
            rounds += 1
            pockets = in_pockets(rows, cuts, relaxed, known, middles[left], heights[left])
            if len(pockets.holding):
                return Emptiness(proven=False, boxes=boxes, holding=pockets.holding[0])
            new = pockets.tangents
            gone = contradicts(relaxed, new.contradictions, middles[left], halves[left])
            known = known.joined(new) if gone.mean() > _WORTH else known
            left[left] = ~gone
        single = left & (halves.max(axis=1) <= ROUNDING)
        if single.any() or (boxes > budget and left.any()):
            return Emptiness(proven=False, boxes=boxes)
        middles, halves = halved(middles[left], halves[left])
        if steps:
            middles, halves = on_values(middles, halves, steps)
    return Emptiness(proven=True, boxes=boxes)


def _height(
    relaxed: Relaxed, known: Tangents, middles: FloatArray, halves: FloatArray
) -> FloatArray:
    """Bound over boxes (n, r) what must not be negative where every row holds: (n,)."""
    heights = np.zeros(len(middles))
    heights[excluded(relaxed.planes, relaxed.bounds, middles, halves)] = -np.inf
    left = np.flatnonzero(heights >= -ROUNDING)
    gone = contradicts(relaxed, known.contradictions, middles[left], halves[left])
    heights[left[gone]] = -np.inf
    for row in relaxed.rows:
        left = np.flatnonzero(heights >= -ROUNDING)
        if len(left):
            height = highest_on_boxes(row_above(row, middles[left]), middles[left], halves[left])
            heights[left[height < HOLDS - ROUNDING]] = -np.inf
    left = np.flatnonzero(heights >= -ROUNDING)
    if len(left):
        own = least_mixture(relaxed, middles[left], halves[left], -1.0, goals=False)
        heights[left] = highest_on_boxes(own, middles[left], halves[left])
    for one in known.contradictions[:_AT_MIDDLES]:
        left = np.flatnonzero(heights >= -ROUNDING)
        if len(left):
            own = contradicted(relaxed, one, middles[left])
            heights[left] = np.minimum(
                heights[left], highest_on_boxes(own, middles[left], halves[left])
            )
    return heights
