"""The one numeric idea: a stack of quadratics in coded units.

``q(x) = const + lin'x + x'quad x`` with any leading axes, so that one fitted model, several
responses or twenty thousand draws of their coefficients run through the same few lines.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from wideberth.quadratic.terms import n_terms, pairs

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Stack:
    """Quadratics in k factors.

    Attributes
    ----------
    const : ndarray, shape (...)
    lin : ndarray, shape (..., k)
    quad : ndarray, shape (..., k, k)
        Symmetric; the Hessian is ``2 quad``.
    """

    const: FloatArray
    lin: FloatArray
    quad: FloatArray

    @property
    def n_factors(self) -> int:
        """Number of factors k."""
        return int(self.lin.shape[-1])

    @classmethod
    def from_coefficients(cls, coefficients: npt.ArrayLike, n_factors: int) -> Stack:
        """Build from coefficients in the order of the terms, shape (..., n_terms(k))."""
        beta = np.asarray(coefficients, dtype=np.float64)
        k = n_factors
        quad = np.zeros((*beta.shape[:-1], k, k))
        diagonal = np.arange(k)
        quad[..., diagonal, diagonal] = beta[..., 1 + k : 1 + 2 * k]
        first, second = (np.array(index, dtype=int) for index in pairs(k))
        quad[..., first, second] = quad[..., second, first] = beta[..., 1 + 2 * k :] / 2
        return cls(beta[..., 0].copy(), beta[..., 1 : 1 + k].copy(), quad)

    def coefficients(self) -> FloatArray:
        """Write as coefficients in the order of the terms, shape (..., n_terms(k))."""
        k = self.n_factors
        beta = np.empty((*self.const.shape, n_terms(k)))
        diagonal = np.arange(k)
        beta[..., 0] = self.const
        beta[..., 1 : 1 + k] = self.lin
        beta[..., 1 + k : 1 + 2 * k] = self.quad[..., diagonal, diagonal]
        first, second = (np.array(index, dtype=int) for index in pairs(k))
        beta[..., 1 + 2 * k :] = 2 * self.quad[..., first, second]
        return beta

    def value(self, x: FloatArray) -> FloatArray:
        """Evaluate at x, shape (..., k), whose leading axes broadcast with the stack's."""
        slope = self.lin + np.einsum("...ij,...j->...i", self.quad, x)
        result: FloatArray = self.const + np.einsum("...i,...i->...", slope, x)
        return result

    def gradient(self, x: FloatArray) -> FloatArray:
        """Differentiate at x, shape (..., k); same shape after broadcasting."""
        result: FloatArray = self.lin + 2 * np.einsum("...ij,...j->...i", self.quad, x)
        return result

    def restrict(self, origin: FloatArray, basis: FloatArray) -> Stack:
        """Rewrite in z, where x = origin + basis z.

        Parameters
        ----------
        origin : ndarray, shape (..., k)
        basis : ndarray, shape (k, r)

        Returns
        -------
        Stack
            In r factors, leading axes broadcast.
        """
        lin = np.einsum("...i,ir->...r", self.gradient(origin), basis)
        quad = np.einsum("ir,...ij,js->...rs", basis, self.quad, basis)
        const = self.value(origin)
        quad = np.broadcast_to(quad, (*const.shape, *quad.shape[-2:]))
        return Stack(const, lin, quad)
