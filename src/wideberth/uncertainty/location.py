"""The region for the location of the optimum: an ellipsoid around the draws' optima.

Its size is the sample quantile of the draws' own distances, so that it needs no distribution of
the optima. What it covers was measured by simulation (docs/methods).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.special import ndtri

from wideberth.decide.arena import HardRow, no_cuts
from wideberth.decide.interior import refine
from wideberth.decide.problem import Problem, bare_arena
from wideberth.decide.questions import largest_value
from wideberth.decide.region import Region, even_points, inside
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import n_terms
from wideberth.study.coding import to_actual
from wideberth.study.records import BoolArray, FloatArray
from wideberth.uncertainty.records import OptimumRegion

FEWEST = 40
"""Fewer optima than this say nothing about their spread."""
_HALF = 0.5
_FLOOR = 1e-3
_N_SPREAD = 8192


def optimum_region(problem: Problem, optima: FloatArray, level: float) -> OptimumRegion | None:
    """Build the region from draws' optima (n, k), coded; ``None`` when nothing can move."""
    region = problem.region
    basis = region.basis
    if not basis.shape[1]:
        return None
    inner = (optima - region.origin) @ basis
    centre = inner.mean(axis=0)
    away = inner - centre
    spread = evenly_spread(region)
    size = float(np.sqrt((((spread[0] - region.middle) ** 2).sum(axis=1)).max()))
    covariance = away.T @ away / len(away) + (_FLOOR * size) ** 2 * np.eye(len(centre))
    precision = np.linalg.inv(covariance)
    distance = np.einsum("ni,ij,nj->n", away, precision, away)
    precision /= float(np.quantile(distance, level))
    own_centre = region.origin + basis @ centre
    shape = basis @ ((precision + precision.T) / 2) @ basis.T
    share = _share(spread, own_centre, shape)
    return OptimumRegion(
        level=level,
        determined=share <= _HALF,
        share_of_explored=share,
        ranges=_ranges(problem, own_centre, shape),
        centre=own_centre,
        shape=shape,
    )


def in_region(problem: Problem, region: OptimumRegion, x: FloatArray) -> BoolArray:
    """Tell which coded settings (..., k) may be the optimum; shape (...)."""
    away = x - region.centre
    size = np.einsum("...i,ij,...j->...", away, region.shape, away)
    result: BoolArray = np.asarray(size <= 1.0) & inside(problem.region, x)
    return result


def evenly_spread(region: Region) -> tuple[FloatArray, FloatArray]:
    """Cover a region evenly: settings (n, k) with weights (n,) that make them a uniform sample.

    Rays from the middle, each with one setting; a long ray stands for more volume.
    """
    r = region.basis.shape[1]
    points = even_points(_N_SPREAD, r + 1)
    rays = ndtri(0.5 + 0.9999 * (points[:, :r] - 0.5))
    rays /= np.sqrt((rays * rays).sum(axis=1))[:, None]
    reach = region.reach(rays @ region.basis.T)
    along = reach * points[:, r] ** (1.0 / r)
    x = region.middle + (along[:, None] * rays) @ region.basis.T
    weight = reach**r
    return x, weight / weight.sum()


def _share(spread: tuple[FloatArray, FloatArray], centre: FloatArray, shape: FloatArray) -> float:
    x, weight = spread
    away = x - centre
    size = np.einsum("ni,ij,nj->n", away, shape, away)
    return float(weight[size <= 1.0].sum())


def _ranges(
    problem: Problem, centre: FloatArray, shape: FloatArray
) -> dict[str, tuple[float, float]]:
    """Find how far the region reaches in each factor: a linear goal over a convex set."""
    study, k = problem.study, len(centre)
    p = n_terms(k)
    pulled = shape @ centre
    row = Stack(np.array(1.0 - centre @ pulled), 2 * pulled, -shape).coefficients()
    bare = bare_arena(problem.region, problem.combinations[0])
    ellipsoid = HardRow(None, row, 0.0, None, np.zeros((p, p)))
    arena = replace(bare, hard=(*bare.hard, ellipsoid))
    # every factor's two ends at once, each candidate with its own linear goal
    goals = np.zeros((2 * k, p))
    goals[:, 1 : 1 + k] = np.concatenate([-np.eye(k), np.eye(k)])
    first = goals[:, 1 : 1 + k] @ centre - 0.01
    program = largest_value(goals)(arena, no_cuts(arena))
    found = refine(program, np.tile(centre, (2 * k, 1)), first[:, None], problem.region.basis).x
    ends = found.reshape(2, k, k)
    low, high = (to_actual(study.numeric, end) for end in ends)
    return {
        factor.name: (float(low[j, j]), float(high[j, j])) for j, factor in enumerate(study.numeric)
    }
