"""The studentised shortfall: whether a setting may be the optimum, by what it loses to others.

Where the draws' optima crowd on the edge of what may be searched, an ellipsoid around them covers
too little. There a setting also belongs to the region of the optimum when no other setting is
better by more than the draws' own spread allows: the loss against every other setting is divided
by its standard deviation over the draws, and the largest of these is held against what the draws
themselves reach at the fitted optimum. A limit that the other setting would break, or that the
setting itself breaks, is studentised apart, so that it does not drown the goals.

References
----------
Our own, measured by simulation (docs/methods); for one response and an optimum inside it is close
to the region of Box and Hunter (1954), Biometrika 41, 190-199 (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from scipy.special import ndtri

from wideberth.decide.arena import Arena, goal_targets
from wideberth.decide.desirability import overall
from wideberth.decide.problem import Mode, Problem, drawn_arena
from wideberth.decide.region import Region, even_points, inside
from wideberth.fit.draws import Draws
from wideberth.fit.records import Models
from wideberth.quadratic.terms import features
from wideberth.study.records import FloatArray, IntArray

N_DRAWS = 300
_N_OTHERS = 384
_N_NEAR = 16
_NEAR = (0.07, 0.2)
_AT_ONCE = 64
_TIE = 1e-3
_LEAST_SD = 1e-4
_LEAST_MARGIN_SD = 1e-9

Array = TypeVar("Array", FloatArray, IntArray)


@dataclass(frozen=True, slots=True, eq=False)
class _Seen:
    """Settings as the fit and n draws see them.

    Attributes
    ----------
    merit : ndarray, shape (1 + n, N)
        D with a hair of the mean uncapped desirability; the fit first.
    margins : ndarray, shape (n_limits, 1 + n, N)
        Guarded margins of the limits.
    """

    merit: FloatArray
    margins: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Shortfall:
    """What tells which settings may be the optimum.

    Attributes
    ----------
    rows : Arena
        Of the fit and n draws, the fit first.
    seen : _Seen
        What fit and draws see at the settings that every setting is held against.
    reached : ndarray, shape (n,)
        What the draws reach at the fitted optimum, in increasing order.
    """

    rows: Arena
    seen: _Seen
    reached: FloatArray

    def critical(self, level: float) -> float:
        """Give the largest shortfall that a setting of the region may have."""
        return float(np.quantile(self.reached, level))

    def of(self, x: FloatArray, most: float) -> FloatArray:
        """Give the studentised shortfall of coded settings (n, k), exact up to ``most``: (n,)."""
        result = np.concatenate(
            [np.zeros(0), *(self._far(part) for part in _in_parts(x, _AT_ONCE))]
        )
        open_ = np.flatnonzero(result <= most)
        for part in _in_parts(open_, _AT_ONCE):
            result[part] = np.maximum(result[part], self._close(x[part]))
        return result

    def _far(self, x: FloatArray) -> FloatArray:
        """Hold settings against settings anywhere, and against their limits, as the fit sees it."""
        here = _see(self.rows, x)
        away, others = here.merit[1:], self.seen.merit[1:]
        away, others = away - away.mean(axis=0), others - others.mean(axis=0)
        # the spread of a difference from a product of matrices
        square = (away**2).sum(axis=0)[:, None] + (others**2).sum(axis=0) - 2 * away.T @ others
        spread = np.sqrt(np.maximum(square, 0.0) / len(away)) + _LEAST_SD
        gain = np.maximum(self.seen.merit[0] - here.merit[0][:, None], 0.0)
        better = np.minimum(gain / spread, _allowed(self.seen.margins)[0]).max(axis=1)
        result: FloatArray = np.maximum(better, _broken(here.margins)[0])
        return result

    def _close(self, x: FloatArray) -> FloatArray:
        """Hold settings against settings near by, as the fit sees it: (n,)."""
        near = _around(self.rows.region, x)
        n, m, k = near.shape
        here, around = _see(self.rows, x), _see(self.rows, near.reshape(-1, k))
        gain = around.merit.reshape(-1, n, m) - here.merit[:, :, None]
        spread = gain[1:].std(axis=0) + _LEAST_SD
        allowed = _allowed(around.margins)[0].reshape(n, m)
        result: FloatArray = np.minimum(np.maximum(gain[0], 0.0) / spread, allowed).max(axis=1)
        return result


def shortfall(
    problem: Problem, draws: Draws, levels: tuple[int, ...], mode: Mode, best: FloatArray
) -> Shortfall:
    """Prepare the test around the fitted optimum ``best`` (k,), coded."""
    rows = drawn_arena(problem, levels, mode, _with_fit(problem.models, draws.part(0, N_DRAWS)))
    others = np.concatenate([best[None, :], _spread(problem.region)])
    seen = _see(rows, others)
    here = _see(rows, best[None, :])
    near = _see(rows, _around(problem.region, best[None, :])[0])
    reached = _broken(here.margins)[1:, 0]
    for against in (seen, near):
        gain = against.merit - here.merit
        spread = gain[1:].std(axis=0) + _LEAST_SD
        better = np.minimum(np.maximum(gain, 0.0) / spread, _allowed(against.margins))
        reached = np.maximum(reached, better[1:].max(axis=1))
    return Shortfall(rows, seen, np.sort(reached))


def _with_fit(models: Models, draws: Draws) -> Draws:
    """Put the fit in front of the draws, as one draw more."""
    varying = [models[name] for name in draws.varying]
    coefficients = tuple(
        np.concatenate([model.coefficients[None, :], own])
        for model, own in zip(varying, draws.coefficients, strict=True)
    )
    own_sd = np.diag([model.s or 0.0 for model in varying])
    return Draws(draws.varying, coefficients, np.concatenate([own_sd[None], draws.noise]))


def _spread(region: Region) -> FloatArray:
    """Cover a region and its edge: half of the settings lie on the edge."""
    r = region.basis.shape[1]
    points = even_points(_N_OTHERS, r + 1)
    rays = ndtri(0.5 + 0.9999 * (points[:, :r] - 0.5))
    rays /= np.sqrt((rays * rays).sum(axis=1))[:, None]
    along = np.where(np.arange(_N_OTHERS) % 2, 1.0, points[:, r] ** (1.0 / r))
    reach = region.reach(rays @ region.basis.T)
    result: FloatArray = region.middle + ((along * reach)[:, None] * rays) @ region.basis.T
    return result


def _around(region: Region, x: FloatArray) -> FloatArray:
    """Give settings near each of (n, k), drawn back into the region: shape (n, L, k)."""
    r = region.basis.shape[1]
    points = even_points(_N_NEAR, r)
    rays = ndtri(0.5 + 0.9999 * (points - 0.5))
    rays /= np.sqrt((rays * rays).sum(axis=1))[:, None]
    size = float(region.reach(rays @ region.basis.T).mean())
    moves = np.concatenate([size * part * rays for part in _NEAR]) @ region.basis.T
    near = x[:, None, :] + moves
    outside = ~inside(region, near)
    away = near[outside] - region.middle
    near[outside] = region.middle + away * np.minimum(region.reach(away), 1.0)[:, None]
    return near


def _see(rows: Arena, x: FloatArray) -> _Seen:
    """Evaluate coded settings (N, k) under the fit and every draw."""
    terms = features(x)
    means = np.moveaxis(rows.goal_means @ terms.T, 0, -1)
    shape = means.shape[:2]
    flat = means.reshape(-1, means.shape[2])
    uncapped = goal_targets(rows, flat).mean(axis=1)
    merit = overall(rows.goals, flat) + _TIE * uncapped
    margins = []
    for limit in rows.limits:
        own = [row for row in rows.hard if row.limit == limit]
        values = []
        for row in own:
            value = np.atleast_2d(row.curve) @ terms.T
            if row.guard is not None:
                leverage = np.einsum("Np,Np->N", terms @ row.covariance, terms)
                value = value - np.reshape(row.weight, (-1, 1)) * row.guard.value(leverage)
            values.append(np.broadcast_to(value, shape))
        margins.append(np.min(values, axis=0))
    return _Seen(merit.reshape(shape), np.array(margins).reshape(len(margins), *shape))


def _allowed(margins: FloatArray) -> FloatArray:
    """Studentise how surely each setting holds all limits: (n_limits, 1 + n, N) to (1 + n, N)."""
    if not len(margins):
        return np.full(margins.shape[1:], np.inf)
    spread = margins[:, 1:].std(axis=1, keepdims=True) + _LEAST_MARGIN_SD
    result: FloatArray = (np.maximum(margins, 0.0) / spread).min(axis=0)
    return result


def _broken(margins: FloatArray) -> FloatArray:
    """Studentise how far settings break their worst limit: (n_limits, 1 + n, N) to (1 + n, N)."""
    if not len(margins):
        return np.zeros(margins.shape[1:])
    spread = margins[:, 1:].std(axis=1, keepdims=True) + _LEAST_MARGIN_SD
    result: FloatArray = (np.maximum(-margins, 0.0) / spread).max(axis=0)
    return result


def _in_parts(values: Array, size: int) -> list[Array]:
    return [values[i : i + size] for i in range(0, len(values), size)]
