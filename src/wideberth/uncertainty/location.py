"""The region for the location of the optimum: an ellipsoid around the draws' optima.

Its size is the sample quantile of the draws' own distances, so that it needs no distribution of
the optima. Where many of them lie on the edge of what may be searched, settings join whose
studentised shortfall the draws do not contradict. What it covers was measured by simulation
(docs/methods).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

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
from wideberth.uncertainty.records import Joined, OptimumRegion
from wideberth.uncertainty.shortfall import Shortfall

FEWEST = 40
"""Fewer optima than this say nothing about their spread."""
_HALF = 0.5
_FLOOR = 1e-3
_N_SPREAD = 8192
_N_TRIED = 512


def optimum_region(
    problem: Problem, optima: FloatArray, level: float, trial: Trial | None = None
) -> OptimumRegion | None:
    """Build the region from draws' optima (n, k), coded; ``None`` when nothing can move.

    With a ``trial`` settings join by their shortfall.
    """
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
    alone = OptimumRegion(
        level=level,
        determined=share <= _HALF,
        share_of_explored=share,
        share_of_edge=None,
        ranges=_ranges(problem, own_centre, shape),
        centre=own_centre,
        shape=shape,
    )
    return alone if trial is None else _joined(problem, alone, trial)


@dataclass(frozen=True, slots=True, eq=False)
class Trial:
    """A sample of what may be searched, and of its edge, with the shortfall of each setting.

    Attributes
    ----------
    shortfall : Shortfall
    x : ndarray, shape (n, k)
        Coded.
    weight : ndarray, shape (n,)
        Share of the volume, of the edge for those that lie there.
    on_edge : ndarray of bool, shape (n,)
    short : ndarray, shape (n,)
    """

    shortfall: Shortfall
    x: FloatArray
    weight: FloatArray
    on_edge: BoolArray
    short: FloatArray


def try_settings(region: Region, shortfall: Shortfall, level: float) -> Trial:
    """Judge a sample of a region by the shortfall, for regions up to ``level``."""
    spread = evenly_spread(region)
    every = len(spread[0]) // _N_TRIED
    inner, weight = spread[0][::every], spread[1][::every]
    edge, edge_weight = edge_spread(region)
    x = np.concatenate([inner, edge])
    return Trial(
        shortfall=shortfall,
        x=x,
        weight=np.concatenate([weight / weight.sum(), edge_weight / edge_weight.sum()]),
        on_edge=np.arange(len(x)) >= len(inner),
        short=shortfall.of(x, shortfall.critical(level)),
    )


def _joined(problem: Problem, alone: OptimumRegion, trial: Trial) -> OptimumRegion:
    """Let settings join a region by their shortfall; shares and ranges from the sample."""
    joined = Joined(trial.shortfall, trial.shortfall.critical(alone.level))
    kept = trial.short <= joined.critical
    own = _size(alone, trial.x) <= 1.0
    share = alone.share_of_explored + float(trial.weight[kept & ~own & ~trial.on_edge].sum())
    actual = to_actual(problem.study.numeric, trial.x[kept])
    ranges = {
        name: (
            float(min(low, actual[:, j].min(initial=np.inf))),
            float(max(high, actual[:, j].max(initial=-np.inf))),
        )
        for j, (name, (low, high)) in enumerate(alone.ranges.items())
    }
    return replace(
        alone,
        determined=share <= _HALF,
        share_of_explored=min(share, 1.0),
        share_of_edge=float(trial.weight[(kept | own) & trial.on_edge].sum()),
        ranges=ranges,
        joined=joined,
    )


def in_region(problem: Problem, region: OptimumRegion, x: FloatArray) -> BoolArray:
    """Tell which coded settings (..., k) may be the optimum; shape (...)."""
    near: BoolArray = np.asarray(_size(region, x) <= 1.0)
    if region.joined is not None:
        joined = region.joined
        short = joined.shortfall.of(x.reshape(-1, x.shape[-1]), joined.critical)
        near = near | (short.reshape(x.shape[:-1]) <= joined.critical)
    result: BoolArray = near & inside(problem.region, x)
    return result


def _size(region: OptimumRegion, x: FloatArray) -> FloatArray:
    away = x - region.centre
    result: FloatArray = np.einsum("...i,ij,...j->...", away, region.shape, away)
    return result


def edge_spread(region: Region) -> tuple[FloatArray, FloatArray]:
    """Cover the edge of a region: settings (n, k) with weights (n,), nearly a uniform sample."""
    r = region.basis.shape[1]
    points = even_points(_N_TRIED // 2, r)
    rays = ndtri(0.5 + 0.9999 * (points - 0.5))
    rays /= np.sqrt((rays * rays).sum(axis=1))[:, None]
    rays = rays @ region.basis.T
    reach = region.reach(rays)
    return region.middle + reach[:, None] * rays, reach ** (r - 1)


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
