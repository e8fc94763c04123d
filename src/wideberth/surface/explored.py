"""The explored region: where a prediction is interpolation, not extrapolation.

It is the box that the fitted runs span, cut with the smallest-volume ellipsoid that holds them
all, with what is allowed and with the several-factor constraints. Where the runs do not span all
directions, the region lies in their span and the other directions stay fixed.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.errors import refusal
from wideberth.quadratic.ellipsoid import smallest_ellipsoid
from wideberth.study.coding import to_coded
from wideberth.study.records import BoolArray, FloatArray, Study

_STILL = 1e-9
_OUTSIDE = 1e-7


@dataclass(frozen=True, slots=True, eq=False)
class Explored:
    """The explored region in coded units, k numeric factors.

    Attributes
    ----------
    low, high : ndarray, shape (k,)
        Box of the runs, cut with what is allowed.
    centre : ndarray, shape (k,); shape : ndarray, shape (k, k)
        ``(x - centre)' shape (x - centre) <= 1``; zero shape in directions not spanned.
    origin : ndarray, shape (k,); basis : ndarray, shape (k, r)
        The spanned directions, orthonormal: columns of the identity wherever possible.
    planes : ndarray, shape (q, k); bounds : ndarray, shape (q,); names : tuple of str
        Constraints, ``planes @ x <= bounds``.
    """

    low: FloatArray
    high: FloatArray
    centre: FloatArray
    shape: FloatArray
    origin: FloatArray
    basis: FloatArray
    planes: FloatArray
    bounds: FloatArray
    names: tuple[str, ...]


def fitted_settings(study: Study) -> FloatArray:
    """Give the coded settings of all runs that any model was fitted to: shape (n, k)."""
    used = study.runs.fitted & np.isfinite(study.runs.measured).any(axis=1)
    if not study.measured:
        used = study.runs.fitted
    return to_coded(study.numeric, study.runs.numeric_actual[used])


def explored_region(study: Study) -> Explored:
    """Compute the explored region of a study.

    Raises
    ------
    RefusedError
        When what is allowed does not meet what the runs span.
    """
    x = fitted_settings(study)
    origin, basis = _span(x)
    low, high = _allowed_box(study, x.min(axis=0), x.max(axis=0))
    centre, shape = origin.copy(), np.zeros((x.shape[1], x.shape[1]))
    if basis.shape[1]:
        inner_centre, inner_shape = smallest_ellipsoid((x - origin) @ basis)
        centre = origin + basis @ inner_centre
        shape = basis @ inner_shape @ basis.T
    planes, bounds, names = _constraints(study)
    return Explored(low, high, centre, shape, origin, basis, planes, bounds, names)


def depth(region: Explored, x: FloatArray) -> FloatArray:
    """Measure how far inside coded settings, shape (..., k), lie: below 0 outside; shape (...)."""
    away = x - region.centre
    size = np.einsum("...i,ij,...j->...", away, region.shape, away)
    rest = (x - region.origin) - (x - region.origin) @ region.basis @ region.basis.T
    off = np.abs(rest).max(axis=-1, initial=0.0)
    parts = [
        1.0 - size,
        (x - region.low).min(axis=-1, initial=np.inf),
        (region.high - x).min(axis=-1, initial=np.inf),
        (region.bounds - x @ region.planes.T).min(axis=-1, initial=np.inf),
        np.where(off > _OUTSIDE, -off, np.inf),
    ]
    result: FloatArray = np.min(parts, axis=0)
    return result


def contains(region: Explored, x: FloatArray) -> BoolArray:
    """Tell which coded settings, shape (..., k), were explored; shape (...)."""
    return np.asarray(depth(region, x) >= -_OUTSIDE)


def factor_ranges(region: Explored) -> tuple[FloatArray, FloatArray]:
    """Give the smallest and largest coded value of each factor anywhere in the region, (k,) each.

    The ends come from box and ellipsoid; constraints may cut further.
    """
    low, high = region.origin.copy(), region.origin.copy()
    if region.basis.shape[1]:
        inner = np.linalg.inv(region.basis.T @ region.shape @ region.basis)
        reach = np.sqrt(np.einsum("ki,ij,kj->k", region.basis, inner, region.basis))
        low, high = region.centre - reach, region.centre + reach
    return np.maximum(low, region.low), np.minimum(high, region.high)


def _span(x: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Give a point and an orthonormal basis of the settings' span."""
    origin = x.mean(axis=0)
    k = x.shape[1]
    moving = np.ptp(x, axis=0) > _STILL
    away = (x - origin)[:, moving]
    # a factor that never moved stays exactly where it was
    origin = np.where(moving, origin, x[0])
    identity = np.eye(k)[:, moving]
    if not moving.any():
        return origin, np.zeros((k, 0))
    _, sizes, directions = np.linalg.svd(away, full_matrices=False)
    rank = int((sizes > _STILL * sizes[0] * max(away.shape)).sum())
    if rank == int(moving.sum()):
        return origin, identity
    return origin, identity @ directions[:rank].T


def _allowed_box(study: Study, low: FloatArray, high: FloatArray) -> tuple[FloatArray, FloatArray]:
    low, high = low.copy(), high.copy()
    for j, factor in enumerate(study.numeric):
        if factor.allowed is None:
            continue
        ends = np.ones((2, len(study.numeric)))
        ends[:, j] = factor.allowed
        first, last = to_coded(study.numeric, ends)[:, j]
        low[j], high[j] = max(low[j], first), min(high[j], last)
        if low[j] > high[j]:
            raise refusal(
                f"no run of {factor.name} lies near the allowed {factor.allowed[0]:g} to"
                f" {factor.allowed[1]:g} {factor.unit}",
                f"study.toml, factors.{factor.name}.allowed",
                "widen allowed until it meets what the runs span",
            )
    return low, high


def _constraints(study: Study) -> tuple[FloatArray, FloatArray, tuple[str, ...]]:
    """Write the several-factor constraints in coded units; they name linear factors only."""
    middle = np.array([(f.low + f.high) / 2 for f in study.numeric])
    half = np.array([(f.high - f.low) / 2 for f in study.numeric])
    planes, bounds, names = [], [], []
    for constraint in study.constraints:
        weights = np.array([constraint.weights.get(f.name, 0.0) for f in study.numeric])
        for sign, bound in ((1.0, constraint.at_most), (-1.0, constraint.at_least)):
            if bound is not None:
                planes.append(sign * weights * half)
                bounds.append(sign * (bound - weights @ middle))
                names.append(constraint.name)
    k = len(study.numeric)
    return np.array(planes).reshape(len(planes), k), np.array(bounds), tuple(names)
