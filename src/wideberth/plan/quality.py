"""How good a plan is before anything is run: all of it follows from the settings alone.

References
----------
Box and Hunter (1957), Annals of Mathematical Statistics 28, 195-241 (prediction variance on
spheres, rotatability); Giovannitti-Jensen and Myers (1989), Technometrics 31, 159-171, and Zahran,
Anderson-Cook and Myers (2003), J. Quality Technology 35, 377-386 (variance against radius and
against the share of the region). From memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from scipy.special import gammaln, nctdtr, ndtri, stdtrit

from wideberth.decide.guards import Guard, SmoothGuard
from wideberth.decide.problem import split_confidence
from wideberth.decide.region import Region, candidates, even_points, inside, search_region
from wideberth.decide.simultaneous import simultaneous_factor
from wideberth.errors import RefusedError
from wideberth.fit.records import terms_map
from wideberth.plan.model import PlannedModel, level_combinations
from wideberth.plan.records import Detectable, Provable, Quality, Spheres
from wideberth.study.coding import to_coded
from wideberth.study.records import BoolArray, FloatArray, RegionChoice, Study
from wideberth.surface.explored import explored_region

_N_REGION = 2000
_N_TRIED = 40_000
_N_DIRECTIONS = 300
_N_RADII = 21
_POWER, _LEVEL = 0.8, 0.05
_N_LEVELS = 200
_FAR = 5.0
_NEAR = 0.2


def quality(model: PlannedModel, *, seed: int) -> Quality:
    """Compute the quality of all runs that will be fitted together."""
    study = model.study
    region = plan_region(study)
    x = np.zeros((0, len(study.numeric))) if region is None else even_settings(region)
    values = region_variance(model, x)
    ordered = np.sort(values)
    spheres = _spheres(model)
    return Quality(
        n_runs=len(study.runs.rows),
        n_terms=len(model.terms),
        df_lack=model.df_lack,
        df_pure=model.df_pure,
        largest_leverage=float(model.leverage.max()),
        mean_variance=float(values.mean()) if len(values) else None,
        most_variance=float(values.max()) if len(values) else None,
        variance_levels=_evenly(ordered, _N_LEVELS),
        spheres=spheres,
        uneven=None if spheres is None else _uneven(spheres),
        aliases=model.aliases,
        detectable=_detectable(model),
        provable=_provable(model, region, x, seed),
        block_coupling=_block_coupling(model),
    )


def plan_region(study: Study) -> Region | None:
    """Give the region that planned runs will explore; ``None`` where there is none."""
    if not study.numeric:
        return None
    stated = replace(study, region=RegionChoice())
    try:
        # on the way to finding a region empty the search may overflow
        with np.errstate(over="ignore", invalid="ignore"):
            return search_region(stated, explored_region(stated))
    except RefusedError:
        return None


def even_settings(region: Region, n: int = _N_REGION) -> FloatArray:
    """Spread settings evenly over the volume of a region: shape (about n, k).

    Even points in the smaller of its box and its ellipsoid, those outside left out.
    """
    k, r = region.basis.shape
    if r < k or not region.has_ellipsoid:
        return candidates(region, n)
    low, high = -region.bounds[:k], region.bounds[k : 2 * k]
    root = np.linalg.inv(np.linalg.cholesky(region.shape)).T
    log_ellipsoid = k / 2 * np.log(np.pi) - gammaln(k / 2 + 1) + np.log(abs(np.linalg.det(root)))
    in_box = np.log(np.maximum(high - low, 1e-300)).sum() < log_ellipsoid
    spread = even_points(_N_TRIED, k + 1)
    if in_box:
        points = low + spread[:, :k] * (high - low)
    else:
        rays = ndtri(0.5 + 0.9999999 * (spread[:, :k] - 0.5))
        rays /= np.sqrt((rays**2).sum(axis=1, keepdims=True))
        points = region.centre + (rays * spread[:, k:] ** (1 / k)) @ root.T
    points = points[inside(region, points)][:n]
    return points if len(points) >= n // 10 else candidates(region, n)


def region_variance(model: PlannedModel, x: FloatArray) -> FloatArray:
    """Give the prediction variance at settings, shape (n, k), at every combination of levels."""
    combinations = level_combinations(model.study)
    if not model.study.numeric:
        x = np.zeros((1, 0))
    return np.concatenate([model.variance(x, levels) for levels in combinations])


def _evenly(ordered: FloatArray, n: int) -> FloatArray:
    if not len(ordered):
        return ordered
    places = (np.arange(n) + 0.5) / n * len(ordered)
    return ordered[np.minimum(places.astype(np.int64), len(ordered) - 1)]


def _spheres(model: PlannedModel) -> Spheres | None:
    """Follow the scaled variance outwards to the farthest run."""
    k = len(model.study.numeric)
    if k == 0:
        return None
    x = to_coded(model.study.numeric, model.study.runs.numeric_actual)
    radius = np.linspace(0.0, float(np.sqrt((x**2).sum(axis=1)).max()), _N_RADII)
    settings = radius[:, None, None] * directions(k)
    n = len(x)
    values = np.stack([model.variance(settings, at) for at in level_combinations(model.study)])
    return Spheres(
        radius=radius,
        least=n * values.min(axis=(0, 2)),
        mean=n * values.mean(axis=(0, 2)),
        most=n * values.max(axis=(0, 2)),
    )


def directions(k: int) -> FloatArray:
    """Give unit vectors: axes, corners, and others spread evenly; shape (m, k)."""
    axes = np.concatenate([np.eye(k), -np.eye(k)])
    if k == 1:
        return axes
    corners = np.stack(np.meshgrid(*[[-1.0, 1.0]] * k, indexing="ij"), axis=-1).reshape(-1, k)
    others = ndtri(0.5 + 0.9999 * (even_points(_N_DIRECTIONS, k) - 0.5))
    rays = np.concatenate([axes, corners, others])
    unit: FloatArray = rays / np.sqrt((rays**2).sum(axis=1, keepdims=True))
    return unit


def _uneven(spheres: Spheres) -> float:
    return float((spheres.most / spheres.least).max()) - 1.0


def detectable_change(variance: float, df: int) -> float | None:
    """Give the contrast that a two-sided 5 % t test finds with 80 % power, in error sd.

    Parameters
    ----------
    variance : float
        Of the contrast, in units of the error variance.
    df : int
        Residual degrees of freedom; with none there is no test.
    """
    if df < 1:
        return None
    t = float(stdtrit(df, 1 - _LEVEL / 2))

    def power(shift: float) -> float:
        # far out the wrong tail is nothing, and the library has no number for it
        wrong = float(nctdtr(df, shift, -t)) if shift < _FAR else 0.0
        return 1.0 - float(nctdtr(df, shift, t)) + wrong

    return _where_reached(power, _POWER) * float(np.sqrt(variance))


def _where_reached(power: Callable[[float], float], wanted: float) -> float:
    low, high = 0.0, 1.0
    while power(high) < wanted and high < 1e6:
        high *= 2
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if power(middle) < wanted else (low, middle)
    return high


def _detectable(model: PlannedModel) -> Detectable:
    """Take the worst of each kind of term."""
    df = model.df_lack + model.df_pure
    k = len(model.study.numeric)
    spread = np.diag(model.covariance)
    kinds: dict[str, list[float]] = {"linear": [], "product": [], "square": []}
    for term, variance in zip(model.terms, spread, strict=True):
        if term.contrast is None and term.block is None and term.monomial:
            place = (term.monomial > k) + (term.monomial > 2 * k)
            kinds[("linear", "square", "product")[place]].append(float(variance))
    linear = max(kinds["linear"], default=None)
    product = max(kinds["product"], default=None)
    square = max(kinds["square"], default=None) if kinds["square"] else curvature_variance(model)
    return Detectable(
        # from low to high is two coded units
        effect=None if linear is None else detectable_change(4 * linear, df),
        product=None if product is None else detectable_change(4 * product, df),
        curvature=None if square is None else detectable_change(square, df),
    )


def curvature_variance(model: PlannedModel) -> float | None:
    """Give the variance of the curvature contrast of two-level runs with centre runs.

    The contrast is the sum of all pure quadratic coefficients: the mean of the two-level runs less
    that of the centre runs. ``None`` where the runs do not show it.
    """
    column = curvature_column(model.study)
    if column is None:
        return None
    rest = column - model.matrix @ (model.covariance @ (model.matrix.T @ column))
    size = float(rest @ rest)
    return None if size < 1e-9 * len(column) else 1.0 / size


def curvature_column(study: Study) -> FloatArray | None:
    """Tell centre runs (0) from two-level runs (1); ``None`` without both, or with others."""
    centre, corner = centre_and_corners(study)
    both = centre.any() and corner.any() and (centre | corner).all()
    return np.where(centre, 0.0, 1.0) if both else None


def centre_and_corners(study: Study) -> tuple[BoolArray, BoolArray]:
    """Tell which runs stand at the centre and which at low or high in every factor; (n,) each.

    Settings as run may be off a little, so a fifth of the way counts as there.
    """
    x = np.abs(to_coded(study.numeric, study.runs.numeric_actual))
    return np.asarray((x < _NEAR).all(axis=1)), np.asarray((x > 1 - _NEAR).all(axis=1))


def _provable(
    model: PlannedModel, region: Region | None, x: FloatArray, seed: int
) -> tuple[Provable, ...]:
    """Say how close to a limit a ``share`` guard could come, at the best setting of the region."""
    study, df = model.study, model.df_lack + model.df_pure
    found = []
    for response in study.measured:
        limit = response.limit
        if limit is None or limit.guard != "share" or df < 1 or region is None or not len(x):
            continue
        guard = Guard("share", df, split_confidence(study, limit.confidence, "share"), limit.share)
        maps = tuple(terms_map(model.terms, study, levels=at) for at in level_combinations(study))
        leverage = region_variance(model, x)
        factor = 1.0
        if limit.point == "chosen":
            smooth = SmoothGuard.between(guard, float(leverage.min()), float(leverage.max()))
            factor = simultaneous_factor(guard, smooth, model.covariance, maps, region, seed)
        distance = factor * float(guard.factor(leverage.min()))
        sd = study.plan.error_sd.get(response.name)
        found.append(Provable(response.name, response.unit, distance, sd))
    return tuple(found)


def _block_coupling(model: PlannedModel) -> float:
    """Find the largest correlation between a block contrast and any other column."""
    blocks = [i for i, term in enumerate(model.terms) if term.block is not None]
    others = [i for i, term in enumerate(model.terms) if term.block is None and term.name != "1"]
    if not blocks or not others:
        return 0.0
    away = model.matrix - model.matrix.mean(axis=0)
    # the contrasts span the blocks: the part of a column that the blocks explain
    basis, _ = np.linalg.qr(away[:, blocks])
    size = np.sqrt((away[:, others] ** 2).sum(axis=0))
    told = np.sqrt(((basis.T @ away[:, others]) ** 2).sum(axis=0))
    return float((told / np.where(size > 0, size, 1.0)).max())
