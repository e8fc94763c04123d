"""Mean and variance of a quadratic when the setting is off by a normal error, in closed form.

With ``q(x) = const + lin'x + x'Qx`` and an error d ~ N(0, S) around x, exactly
``E = q(x) + tr(QS)`` and ``Var = g'Sg + 2 tr(QSQS)``, g the gradient at x.

References
----------
Moments of quadratic forms in normal variables: Searle (1971), Linear Models (from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Moments:
    """What a setting error does to a quadratic.

    Attributes
    ----------
    shift : ndarray, shape (...)
        Mean less the value at the setting itself.
    variance : ndarray, shape (...)
    parts : ndarray, shape (..., k)
        The variance by factor; what two factors make together is halved between them.
    """

    shift: FloatArray
    variance: FloatArray
    parts: FloatArray


def setting_error_moments(stack: Stack, x: FloatArray, sd: FloatArray) -> Moments:
    """Propagate independent normal errors of standard deviation ``sd``, (k,), at x, (..., k)."""
    spread = sd * sd
    slope = stack.gradient(x)
    bent = stack.quad * spread[:, None]
    shift = np.einsum("...ii,i->...", stack.quad, spread)
    products = 2 * np.einsum("...ij,...ji->...i", bent, bent)
    parts = slope * slope * spread + products
    return Moments(shift, parts.sum(axis=-1), parts)


def transmitted_variance(stack: Stack, sd: FloatArray) -> Stack:
    """Give the variance of `setting_error_moments` as a quadratic of the setting itself.

    The gradient is linear in the setting, so ``g'Sg`` is quadratic in it; exact.
    """
    spread = sd * sd
    bent = stack.quad * spread[..., :, None]
    held = 2 * np.einsum("...ij,...ji->...", bent, bent)
    return Stack(
        const=(stack.lin * stack.lin * spread).sum(axis=-1) + held,
        lin=4 * np.einsum("...i,...ij->...j", stack.lin * spread, stack.quad),
        quad=4 * np.einsum("...ia,i,...ib->...ab", stack.quad, spread, stack.quad),
    )
