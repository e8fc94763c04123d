"""The smallest-volume ellipsoid that holds a set of points.

References
----------
Khachiyan (1996), Rounding of polytopes in the real number model of computation, Mathematics of
Operations Research 21, 307-320; the away steps are those of Wolfe and Atwood as in Todd and
Yildirim (2007), Discrete Applied Mathematics 155, 1731-1744 (both from memory).
"""

from __future__ import annotations

import numpy as np

from wideberth.errors import NumericalError
from wideberth.quadratic.terms import FloatArray

_GAP = 1e-9
_MAX_ITERATIONS = 200_000


def smallest_ellipsoid(points: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Find the ellipsoid ``(x - centre)' shape (x - centre) <= 1`` of least volume.

    Parameters
    ----------
    points : ndarray, shape (n, r)
        Spanning all r directions.

    Returns
    -------
    (ndarray of shape (r,), ndarray of shape (r, r))
        Centre and shape. Every point satisfies the inequality; the volume is within a factor of
        about ``1 + 1e-9`` of the least.

    Raises
    ------
    NumericalError
        When the points do not span all directions.
    """
    distinct = np.unique(points, axis=0)
    n, r = distinct.shape
    lifted = np.concatenate([distinct, np.ones((n, 1))], axis=1)
    if np.linalg.matrix_rank(lifted) < r + 1:
        message = "the points do not span an ellipsoid"
        raise NumericalError(message)
    weights = np.full(n, 1.0 / n)
    inverse = np.linalg.inv(lifted.T @ (weights[:, None] * lifted))
    spread = np.einsum("ni,ij,nj->n", lifted, inverse, lifted)
    for iteration in range(_MAX_ITERATIONS):
        far = int(spread.argmax())
        near = int(np.where(weights > 0, spread, np.inf).argmin())
        above, below = spread[far] - (r + 1), (r + 1) - spread[near]
        if max(above, below) <= _GAP * (r + 1):
            return _ellipsoid(distinct, weights)
        point, kappa = (far, spread[far]) if above >= below else (near, spread[near])
        drop = -weights[point] / (1.0 - weights[point])
        # a point whose spread is 1 or less gains from leaving altogether
        step = drop if kappa <= 1.0 else max((kappa - (r + 1)) / ((r + 1) * (kappa - 1.0)), drop)
        weights = (1.0 - step) * weights
        weights[point] = max(weights[point] + step, 0.0)
        if iteration % 50 == 49:
            inverse = np.linalg.inv(lifted.T @ (weights[:, None] * lifted))
            spread = np.einsum("ni,ij,nj->n", lifted, inverse, lifted)
            continue
        # rank-one update of inverse((1 - step) M + step q q') instead of inverting anew
        pulled = inverse @ lifted[point]
        ratio = step / (1.0 - step)
        inverse = (inverse - np.outer(pulled, pulled) * ratio / (1.0 + ratio * kappa)) / (
            1.0 - step
        )
        spread = np.einsum("ni,ij,nj->n", lifted, inverse, lifted)
    message = "the smallest ellipsoid around the runs was not found"
    raise NumericalError(message)


def _ellipsoid(points: FloatArray, weights: FloatArray) -> tuple[FloatArray, FloatArray]:
    centre: FloatArray = weights @ points
    away = points - centre
    shape = np.linalg.inv(away.T @ (weights[:, None] * away)) / points.shape[1]
    shape = (shape + shape.T) / 2
    # grown by a hair so that every point lies inside exactly
    size = np.einsum("ni,ij,nj->n", away, shape, away).max()
    return centre, shape / (size * (1 + 1e-12))
