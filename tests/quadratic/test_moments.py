"""Moments under setting error against Gauss-Hermite quadrature, to 1e-10."""

from itertools import product

import numpy as np
import pytest
from numpy.polynomial.hermite_e import hermegauss

from wideberth.quadratic.moments import setting_error_moments
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import n_terms


def _quadrature(stack, x, sd):
    """Exact for polynomials of degree 9 in each factor: mean and variance."""
    nodes, weights = hermegauss(5)
    weights = weights / weights.sum()
    places = np.array(list(product(range(5), repeat=len(x))))
    values = stack.value(x + sd * nodes[places])
    mass = weights[places].prod(axis=1)
    mean = mass @ values
    return mean, mass @ (values - mean) ** 2


@pytest.mark.parametrize("k", [1, 2, 3, 4, 5])
def test_moments_equal_quadrature(k):
    rng = np.random.default_rng(k)
    for _ in range(20):
        stack = Stack.from_coefficients(rng.standard_normal(n_terms(k)) * 3, k)
        x, sd = rng.uniform(-1.5, 1.5, k), rng.uniform(0, 0.4, k)
        mean, variance = _quadrature(stack, x, sd)
        got = setting_error_moments(stack, x, sd)
        assert got.shift == pytest.approx(mean - stack.value(x), rel=1e-10, abs=1e-10)
        assert got.variance == pytest.approx(variance, rel=1e-10, abs=1e-10)
        assert got.parts.sum() == pytest.approx(float(got.variance), rel=1e-12)


def test_parts_are_what_each_factor_makes_alone_when_nothing_crosses():
    stack = Stack.from_coefficients(np.array([1.0, 2.0, -1.0, 0.5, 0.7, 0.0]), 2)
    x, sd = np.array([0.3, -0.2]), np.array([0.1, 0.3])
    got = setting_error_moments(stack, x, sd)
    for j in range(2):
        alone = np.where(np.arange(2) == j, sd, 0.0)
        one = setting_error_moments(stack, x, alone)
        assert got.parts[j] == pytest.approx(float(one.variance), rel=1e-12)


def test_no_error_does_nothing():
    stack = Stack.from_coefficients(np.arange(10.0), 3)
    got = setting_error_moments(stack, np.ones(3), np.zeros(3))
    assert (got.shift, got.variance) == (0.0, 0.0)
