"""The constant that makes a guard hold although the search picked the setting.

For a fitted model the ratio ``(f(x)'delta + e) / (w K(h(x)))``, with delta ~ N(0, C) and
w = sqrt(chi2/df), has a distribution that depends on no unknown parameter. The ``confidence``
quantile c of its maximum over the region makes ``mean + c K s`` a bound that holds at every
setting of the region at once, hence at whichever one a search names. e is 0 for the mean, one
common standard normal for a batch, the normal quantile of the share for a tolerance bound.

The promise: a method that names a setting like this is wrong in at most 5 of 100 studies (at 95 %
confidence), however the setting was searched for. It is not: 95 % of named settings are safe.

References
----------
The pivotal argument is that of simultaneous confidence bands (Scheffé 1953; Naiman 1986; Sun and
Loader 1994; from memory), with the maximum simulated instead of bounded.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.decide.guards import Guard, SmoothGuard
from wideberth.decide.region import Region, candidates, inside
from wideberth.quadratic.terms import features
from wideberth.seeds import stream
from wideberth.study.records import FloatArray

N_DRAWS = 4096
_BLOCK = 256
_N_SETTINGS = 1024
_POLISHED = 0.3
_POLISH_STEPS = 10


@dataclass(frozen=True, slots=True, eq=False)
class _Draws:
    """Common random numbers: coefficients' deviations (n, q), extra term (n,), spread w (n,)."""

    deviations: FloatArray
    extra: FloatArray
    spread: FloatArray


def simultaneous_factor(
    guard: Guard,
    smooth: SmoothGuard,
    covariance: FloatArray,
    maps: tuple[FloatArray, ...],
    region: Region,
    seed: int,
) -> float:
    """Simulate c for one guarded response.

    Parameters
    ----------
    guard, smooth : Guard, SmoothGuard
        The pointwise factor, exact and smooth.
    covariance : ndarray, shape (q, q)
        Unscaled covariance of the model's coefficients.
    maps : tuple of ndarray, shape (p, q)
        One for every combination of levels and blocks that may be named (`fit.design_map`).
    region : Region
        All that is searched, rooms included.
    seed : int

    Returns
    -------
    float
        1 or more.
    """
    draws = _draw(guard, covariance, seed)
    settings = candidates(region, _N_SETTINGS)
    terms = features(settings)
    highest = np.full(N_DRAWS, -np.inf)
    where = np.zeros(N_DRAWS, dtype=np.int64)
    which = np.zeros(N_DRAWS, dtype=np.int64)
    for i, mapped in enumerate(maps):
        rows = terms @ mapped
        leverage = np.einsum("nq,nq->n", rows @ covariance, rows)
        factor = smooth.value(leverage)
        ratio = (rows @ draws.deviations.T + draws.extra) / factor[:, None]
        best = ratio.argmax(axis=0)
        value = ratio[best, np.arange(N_DRAWS)]
        better = value > highest
        highest = np.where(better, value, highest)
        where, which = np.where(better, best, where), np.where(better, i, which)
    highest /= draws.spread
    # only the upper tail can reach the quantile, so only it is worth polishing
    tail = np.argsort(-highest, kind="stable")[: int(_POLISHED * N_DRAWS)]
    movable = maps if region.basis.shape[1] else ()
    for i, mapped in enumerate(movable):
        chosen = tail[which[tail] == i]
        if len(chosen):
            start = settings[where[chosen]]
            part = _Draws(draws.deviations[chosen], draws.extra[chosen], draws.spread[chosen])
            polished = _polish(smooth, covariance, mapped, region, start, part)
            highest[chosen] = np.maximum(highest[chosen], polished)
    return max(1.0, float(np.quantile(highest, guard.confidence)))


def _draw(guard: Guard, covariance: FloatArray, seed: int) -> _Draws:
    root = np.linalg.cholesky(covariance)
    deviations, extra, spread = [], [], []
    for block in range(N_DRAWS // _BLOCK):
        random = stream(seed, "simultaneous guard", block)
        deviations.append(random.standard_normal((_BLOCK, len(covariance))) @ root.T)
        extra.append(guard.extra(random.standard_normal(_BLOCK)))
        spread.append(np.sqrt(random.chisquare(guard.df, _BLOCK) / guard.df))
    return _Draws(np.concatenate(deviations), np.concatenate(extra), np.concatenate(spread))


def _polish(
    smooth: SmoothGuard,
    covariance: FloatArray,
    mapped: FloatArray,
    region: Region,
    start: FloatArray,
    draws: _Draws,
) -> FloatArray:
    """Improve each draw's own maximum by shrinking moves along the spanned directions."""
    pulled = draws.deviations @ mapped.T
    spread_covariance = mapped @ covariance @ mapped.T

    def ratio(x: FloatArray) -> FloatArray:
        terms = features(x)
        leverage = np.einsum("...p,...p->...", terms @ spread_covariance, terms)
        top = np.einsum("n...p,np->n...", terms, pulled)
        top += draws.extra.reshape(-1, *[1] * (top.ndim - 1))
        value: FloatArray = top / smooth.value(leverage)
        return value

    x, value = start, ratio(start)
    moves = np.concatenate([region.basis.T, -region.basis.T])
    step = 0.25 * float(np.ptp(start, axis=0).max(initial=0.0))
    for _ in range(_POLISH_STEPS):
        tried = x[:, None, :] + step * moves
        tried = _pulled_back(region, tried)
        values = ratio(tried)
        best = values.argmax(axis=1)
        value_best = values[np.arange(len(x)), best]
        better = value_best > value
        x = np.where(better[:, None], tried[np.arange(len(x)), best], x)
        value = np.where(better, value_best, value)
        step *= 0.6
    return value / draws.spread


def _pulled_back(region: Region, x: FloatArray) -> FloatArray:
    """Draw settings that left the region back toward its middle until they are on its edge."""
    outside = ~inside(region, x)
    if not outside.any():
        return x
    away = x[outside] - region.middle
    result = x.copy()
    result[outside] = region.middle + away * np.minimum(region.reach(away), 1.0)[:, None]
    return result
