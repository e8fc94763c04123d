"""A brute search for the best setting, sharing no code with the product's own search.

Dense sampling of the region, then hundreds of starts polished by shrinking random moves. Goals,
guards and region are written anew from their definitions, with scipy's distributions.
"""

from __future__ import annotations

from itertools import product

import numpy as np
from scipy import stats


def second_order(x: np.ndarray) -> np.ndarray:
    """1, linear terms, squares, products: shape (..., p)."""
    k = x.shape[-1]
    parts = [np.ones(x.shape[:-1]), *(x[..., j] for j in range(k))]
    parts += [x[..., j] ** 2 for j in range(k)]
    parts += [x[..., a] * x[..., b] for a in range(k) for b in range(a + 1, k)]
    return np.stack(parts, axis=-1)


def _ordered(model, k):
    """Coefficients and covariance in the order of ``second_order``."""
    names = [term.monomial for term in model.terms]
    place = np.argsort(names)
    return model.coefficients[place], model.covariance[np.ix_(place, place)]


def log_d(models, x):
    """Weighted log desirability of coded settings (..., k)."""
    study, total = models.study, 0.0
    weight = sum(r.goal.priority for r in study.responses if r.goal)
    f = second_order(x)
    for response, model in zip(study.responses, models.models, strict=True):
        goal = response.goal
        if goal is None:
            continue
        y = f @ _ordered(model, x.shape[-1])[0]
        if goal.want == "near":
            left = np.clip((y - goal.poor[0]) / (goal.ideal[0] - goal.poor[0]), 0, 1)
            right = np.clip((goal.poor[1] - y) / (goal.poor[1] - goal.ideal[1]), 0, 1)
            d = np.minimum(left ** goal.exponent[0], right ** goal.exponent[1])
        else:
            d = np.clip((y - goal.poor[0]) / (goal.ideal[0] - goal.poor[0]), 0, 1)
            d = d ** goal.exponent[0]
        with np.errstate(divide="ignore"):
            total = total + goal.priority / weight * np.log(d)
    return total


def slack(models, choice, x, tolerance=0.0):
    """The smallest slack of region and guarded limits, over the room's pattern points too.

    The region is a central composite's: box of the runs and ball through the farthest run.
    """
    study = models.study
    k = x.shape[-1]
    runs = study.runs.numeric_actual
    box, ball = np.abs(runs).max(), (runs**2).sum(axis=1).max()
    factors = {verdict.response: verdict.factor for verdict in choice.limits}
    limited = [response.limit for response in study.responses if response.limit is not None]
    shares = sum(limit.guard == "share" for limit in limited)
    shifts = np.array(list(product((-1.0, 0.0, 1.0), repeat=k))) if tolerance else np.zeros((1, k))
    worst = np.full(x.shape[:-1], np.inf)
    for shift in shifts * tolerance:
        z = x + shift
        worst = np.minimum(worst, ball - (z**2).sum(axis=-1))
        worst = np.minimum(worst, box - np.abs(z).max(axis=-1))
        f = second_order(z)
        for response, model in zip(study.responses, models.models, strict=True):
            if response.limit is not None:
                beta, covariance = _ordered(model, k)
                h = np.einsum("...p,pq,...q->...", f, covariance, f)
                reach = factors[response.name] * model.s * _factor(response.limit, model, h, shares)
                worst = np.minimum(worst, response.limit.high - f @ beta - reach)
    return worst


def _factor(limit, model, h, shares):
    df, confidence = model.df_residual, limit.confidence
    if limit.guard == "mean":
        return stats.t.ppf(confidence, df) * np.sqrt(h)
    if limit.guard == "batch":
        return stats.t.ppf(confidence, df) * np.sqrt(1 + h)
    if limit.guard == "share":
        grid = np.linspace(h.min(), h.max() + 1e-9, 400)
        z = stats.norm.ppf(limit.share)
        # several share limits split the risk equally; each has one side here
        confidence = 1 - (1 - confidence) / shares
        exact = np.sqrt(grid) * stats.nct.ppf(confidence, df, z / np.sqrt(grid))
        return np.interp(h, grid, exact)
    return 0.0 * h


def brute_best(models, choice, *, tolerance=0.0, seed=0, n=8000, starts=24, moves=24, rounds=110):
    """The best D found, and where."""
    rng = np.random.default_rng(seed)
    runs = models.study.runs.numeric_actual
    k, radius = runs.shape[1], np.sqrt((runs**2).sum(axis=1).max())
    rays = rng.standard_normal((n, k))
    rays /= np.linalg.norm(rays, axis=1)[:, None]
    x = rays * radius * np.where(rng.random(n) < 0.3, 1.0, rng.random(n) ** (1 / k))[:, None]
    value = _value(models, choice, x, tolerance)
    order = np.argsort(-value)[:starts]
    x, value, reach = x[order], value[order], 0.3
    for _ in range(rounds):
        tried = x[:, None] + reach * rng.standard_normal((len(x), moves, k))
        values = _value(models, choice, tried, tolerance)
        best = values.argmax(axis=1)
        top = values[np.arange(len(x)), best]
        better = top > value
        x = np.where(better[:, None], tried[np.arange(len(x)), best], x)
        value = np.where(better, top, value)
        reach *= 0.9
    return float(np.exp(value.max())), x[value.argmax()]


def _value(models, choice, x, tolerance):
    held = slack(models, choice, x, tolerance) >= 0
    return np.where(held, log_d(models, x), -np.inf)
