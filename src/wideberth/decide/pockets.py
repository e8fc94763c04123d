"""New tangents where a proof is stuck: the pockets of the region that keep many boxes open.

From the middle of a stuck box the search climbs to the optimum of its pocket, or to the setting
there that comes nearest to holding every limit. Tangents at that place usually close the pocket.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.aims import BEST, SAFEST, Aim
from wideberth.decide.arena import Arena, Cuts, hard_values
from wideberth.decide.interior import refine
from wideberth.decide.mixtures import Contradiction, Mixture, contradiction_at, mixture_at
from wideberth.decide.region import inside_planes
from wideberth.decide.search import HOLDS
from wideberth.decide.tangents import Relaxed
from wideberth.study.records import BoolArray, FloatArray

STUCK = 300
"""Open boxes from which on new tangents are worth a search, at most ``ROUNDS`` times."""
ROUNDS = 24
_STARTS = 6
_SAME = 1e-3


@dataclass(frozen=True, slots=True, eq=False)
class Tangents:
    """What a proof has gathered so far."""

    mixtures: tuple[Mixture, ...]
    contradictions: tuple[Contradiction, ...]

    def knows(self, z: FloatArray) -> bool:
        """Tell whether tangents were taken at z (r,) already."""
        taken = [*(one.z for one in self.mixtures), *(one.z for one in self.contradictions)]
        return any(np.abs(place - z).max(initial=0.0) < _SAME for place in taken)

    def joined(self, other: Tangents) -> Tangents:
        """Put two gatherings together."""
        return Tangents(
            (*self.mixtures, *other.mixtures), (*self.contradictions, *other.contradictions)
        )


@dataclass(frozen=True, slots=True, eq=False)
class Pockets:
    """New tangents of stuck boxes, and the settings (n, k) met there that hold every row."""

    tangents: Tangents
    holding: FloatArray


def in_pockets(
    arena: Arena,
    cuts: Cuts,
    relaxed: Relaxed,
    known: Tangents,
    middles: FloatArray,
    bounds: FloatArray,
) -> Pockets:
    """Look into the pockets of stuck boxes, middles (n, r) with their bounds (n,)."""
    order = np.argsort(-bounds, kind="stable")
    chosen = order[(np.linspace(0.0, 1.0, _STARTS) ** 2 * (len(order) - 1)).astype(np.int64)]
    starts = arena.region.origin + middles[np.unique(chosen)] @ arena.region.basis.T
    holds = _holds(arena, cuts, starts)
    if not holds.all():
        starts[~holds] = _climbed(arena, cuts, SAFEST, starts[~holds])
        holds = _holds(arena, cuts, starts)
    new = Tangents((), ())
    for z in _in_z(arena, starts[~holds]):
        if not known.knows(z) and not new.knows(z):
            contradiction = contradiction_at(relaxed, z)
            if contradiction is not None:
                new = Tangents(new.mixtures, (*new.contradictions, contradiction))
    holding = starts[holds]
    if not len(holding) or not arena.goals:
        return Pockets(new, holding)
    ends = _climbed(arena, cuts, BEST, holding)
    for z in _in_z(arena, ends):
        if not known.knows(z) and not new.knows(z):
            mixture = mixture_at(relaxed, z)
            if mixture is not None:
                new = Tangents((*new.mixtures, mixture), new.contradictions)
    return Pockets(new, ends[_holds(arena, cuts, ends)])


def _holds(arena: Arena, cuts: Cuts, x: FloatArray) -> BoolArray:
    lowest = hard_values(arena, cuts, x).min(axis=0, initial=np.inf)
    result: BoolArray = (lowest >= HOLDS) & inside_planes(arena.region, x)
    return result


def _climbed(arena: Arena, cuts: Cuts, aim: Aim, starts: FloatArray) -> FloatArray:
    targets = aim.targets(arena, starts, hard_values(arena, cuts, starts))
    return refine(aim.program(arena, cuts), starts, targets, arena.region.basis).x


def _in_z(arena: Arena, x: FloatArray) -> FloatArray:
    result: FloatArray = (x - arena.region.origin) @ arena.region.basis
    return result
