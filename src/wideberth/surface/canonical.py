"""Canonical analysis: the stationary point, the principal curvatures, and what they mean.

An eigenvalue's variance is that of the fitted curvature along its own direction, ``v'Bv`` with v
held, to first order.

References
----------
Box and Wilson (1951), J. Royal Statistical Society B 13, 1-45 (canonical form); Carter, Chinchilli
and Campbell (1990), Technometrics 32, 425-431, and Bisgaard and Ankenman (1996), Technometrics 38,
238-246 (standard errors of eigenvalues). All from memory.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.special import stdtrit

from wideberth.fit.records import Surface
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import features
from wideberth.study.records import FloatArray

Nature = Literal["maximum", "minimum", "saddle", "ridge", "plane"]
_SINGULAR = 1e-10


@dataclass(frozen=True, slots=True, eq=False)
class Canonical:
    """Canonical form of one quadratic in k coded factors.

    Attributes
    ----------
    stationary : ndarray of shape (k,) or None
        ``None`` when the curvature is singular to working precision.
    values : ndarray, shape (k,)
        Eigenvalues, the strongest curvature first.
    directions : ndarray, shape (k, k)
        One direction a row, largest component positive.
    half_widths : ndarray of shape (k,) or None
        Half of each 95 % interval; ``None`` without degrees of freedom.
    """

    stationary: FloatArray | None
    values: FloatArray
    directions: FloatArray
    half_widths: FloatArray | None
    nature: Nature
    sentence: str


def canonical(surface: Surface, n_factors: int) -> Canonical:
    """Analyse a surface with k numeric factors."""
    stack = Stack.from_coefficients(surface.coefficients, n_factors)
    values, axes = np.linalg.eigh(stack.quad)
    order = np.argsort(-np.abs(values), kind="stable")
    values, directions = values[order], axes.T[order]
    largest = np.abs(directions).argmax(axis=1)
    directions *= np.sign(directions[np.arange(n_factors), largest])[:, None]
    half_widths = _half_widths(surface, directions)
    size = float(np.abs(values).max(initial=0.0))
    flat = size <= _SINGULAR * max(float(np.abs(stack.lin).max(initial=0.0)), 1e-300)
    singular = flat or float(np.abs(values).min()) <= _SINGULAR * size
    stationary = None if singular else np.linalg.solve(stack.quad, -stack.lin / 2)
    nature, sentence = _nature(values, half_widths, flat=flat)
    return Canonical(
        None if stationary is None else np.asarray(stationary, dtype=np.float64),
        values,
        directions,
        half_widths,
        nature,
        sentence,
    )


def _half_widths(surface: Surface, directions: FloatArray) -> FloatArray | None:
    if surface.df == 0 or surface.s == 0.0:
        return None
    n_factors = directions.shape[1]
    gradient = np.zeros((n_factors, len(surface.coefficients)))
    for i, direction in enumerate(directions):
        gradient[i] = _curvature_weights(direction)
    variance = np.einsum("ip,pq,iq->i", gradient, surface.covariance, gradient)
    widths: FloatArray = float(stdtrit(surface.df, 0.975)) * surface.s * np.sqrt(variance)
    return widths


def _curvature_weights(direction: FloatArray) -> FloatArray:
    """Give w, shape (p,), with ``w @ coefficients`` the curvature v'Qv along a direction v.

    These are the second-order terms evaluated at v.
    """
    weights = features(direction)
    weights[: 1 + len(direction)] = 0.0
    return weights


def _nature(
    values: FloatArray, half_widths: FloatArray | None, *, flat: bool
) -> tuple[Nature, str]:
    if flat:
        return "plane", "The response has no curvature: it rises steadily in one direction."
    open_signs = np.zeros(len(values), dtype=np.bool_)
    if half_widths is not None:
        open_signs = np.abs(values) <= half_widths
    sure = values[~open_signs]
    if not len(sure):
        return "ridge", "The data leave every curvature's sign open."
    words = {True: "a maximum", False: "a minimum"}
    same = bool((sure < 0).all() or (sure > 0).all())
    if not same:
        return "saddle", (
            "The response has a saddle: highest along one direction, lowest along another."
        )
    nature: Nature = "maximum" if sure[0] < 0 else "minimum"
    if open_signs.any():
        n_open = int(open_signs.sum())
        which = "one direction" if n_open == 1 else f"{n_open} directions"
        return "ridge", (
            f"The response is a ridge: {words[nature == 'maximum']} across it, while the data leave"
            f" the curvature along {which} open."
        )
    return nature, f"The response has {words[nature == 'maximum']}."
