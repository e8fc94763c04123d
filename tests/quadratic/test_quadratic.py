"""Stacks of quadratics, their terms, and their extremes on boxes and spheres."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from wideberth.quadratic.box import extreme_over_box
from wideberth.quadratic.sphere import extreme_on_sphere
from wideberth.quadratic.stack import Stack
from wideberth.quadratic.terms import (
    feature_gradients,
    features,
    n_terms,
    powers,
    shift_map,
    term_names,
)


def _random_stack(rng, k, shape=()):
    return Stack.from_coefficients(rng.standard_normal((*shape, n_terms(k))), k)


def test_terms_are_written_in_one_order():
    assert term_names(("a", "b", "c")) == (
        "1",
        "a",
        "b",
        "c",
        "a^2",
        "b^2",
        "c^2",
        "a*b",
        "a*c",
        "b*c",
    )
    assert len(powers(8)) == n_terms(8) == 45


@settings(max_examples=40, deadline=None)
@given(k=st.integers(1, 6), seed=st.integers(0, 10_000))
def test_stack_and_terms_agree(k, seed):
    rng = np.random.default_rng(seed)
    stack = _random_stack(rng, k, (3,))
    x = rng.standard_normal(k)
    value = stack.coefficients() @ features(x)
    assert stack.value(x) == pytest.approx(value)
    direct = [np.prod(x ** np.array(power)) for power in powers(k)]
    assert features(x) == pytest.approx(np.array(direct))
    slope = stack.coefficients() @ feature_gradients(x)
    assert stack.gradient(x) == pytest.approx(slope)
    step = 1e-6 * rng.standard_normal(k)
    assert stack.value(x + step) - stack.value(x - step) == pytest.approx(
        2 * slope @ step, abs=1e-9
    )
    shift = rng.standard_normal(k)
    assert shift_map(shift) @ features(x) == pytest.approx(features(x + shift))


def test_restriction_to_a_subspace():
    rng = np.random.default_rng(0)
    stack, origin = _random_stack(rng, 4, (2,)), rng.standard_normal(4)
    basis = np.linalg.qr(rng.standard_normal((4, 2)))[0]
    z = rng.standard_normal(2)
    assert stack.restrict(origin, basis).value(z) == pytest.approx(stack.value(origin + basis @ z))


@pytest.mark.parametrize("largest", [True, False])
@pytest.mark.parametrize("k", [1, 2, 3, 4, 6])
def test_box_extremes_are_never_beaten(k, largest):
    rng = np.random.default_rng(k)
    for _ in range(8):
        stack = _random_stack(rng, k)
        low = rng.uniform(-2, 0.5, k)
        high = low + rng.uniform(0, 2, k)
        value, x = extreme_over_box(stack, low, high, largest=largest)
        assert stack.value(x) == pytest.approx(value)
        assert ((x >= low) & (x <= high)).all()
        sampled = stack.value(low + rng.random((30000, k)) * (high - low))
        corners = stack.value(np.where(rng.random((200, k)) < 0.5, low, high))
        everything = np.concatenate([sampled, corners])
        sign = 1 if largest else -1
        assert (sign * everything).max() <= sign * value + 1e-12


def test_box_extreme_inside_a_face():
    stack = Stack(np.array(0.0), np.array([1.0, 0.2]), np.array([[1.0, 0.0], [0.0, -1.0]]))
    value, x = extreme_over_box(stack, np.array([-1.0, -1.0]), np.array([1.0, 1.0]), largest=True)
    assert x == pytest.approx([1.0, 0.1])
    assert value == pytest.approx(2.01)


def test_box_with_equal_ends():
    rng = np.random.default_rng(0)
    stack, ends = _random_stack(rng, 3), np.array([0.2, -0.3, 0.9])
    value, x = extreme_over_box(stack, ends, ends, largest=True)
    assert x == pytest.approx(ends)
    assert value == pytest.approx(stack.value(ends))


@pytest.mark.parametrize("largest", [True, False])
@pytest.mark.parametrize("k", [1, 2, 3, 5, 8])
def test_sphere_extremes_are_never_beaten_and_satisfy_the_secular_equation(k, largest):
    rng = np.random.default_rng(k)
    for scale in (1.0, 1e-7, 0.0):
        stack = _random_stack(rng, k)
        stack = Stack(stack.const, stack.lin * scale, stack.quad)
        found = extreme_on_sphere(stack, 1.3, largest=largest)
        assert np.sqrt(found.x @ found.x) == pytest.approx(1.3, rel=1e-10)
        rays = rng.standard_normal((40000, k))
        values = stack.value(1.3 * rays / np.linalg.norm(rays, axis=1)[:, None])
        sign = 1 if largest else -1
        assert (sign * values).max() <= sign * found.value + 1e-9
        slope = stack.gradient(found.x)
        mu = (found.x @ slope) / 1.3**2
        assert slope == pytest.approx(mu * found.x, abs=1e-6)
        top = np.linalg.eigvalsh(sign * stack.quad)[-1]
        assert sign * mu / 2 >= top - 1e-7


def test_sphere_hard_case_makes_up_the_missing_length():
    # the slope has no part along the top direction, and the rest alone is too short
    stack = Stack(np.array(0.0), np.array([0.5, 0.0]), np.diag([-1.0, 1.0]))
    found = extreme_on_sphere(stack, 1.0, largest=True)
    assert found.tied
    assert found.x == pytest.approx([0.125, np.sqrt(1 - 0.125**2)])
    assert extreme_on_sphere(stack, 0.0, largest=True).value == 0.0
